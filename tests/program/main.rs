//! The executable: exit status, messages, pipes, pseudo-terminal.

mod choose;
mod commands;
mod desk;
mod links;
mod loads;
mod readme;
mod terminal_session;
