//! The executable: exit status, messages, pipes, pseudo-terminal.

mod choose;
mod commands;
mod desk;
mod loads;
mod links;
mod readme;
mod terminal_session;
