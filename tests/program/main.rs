//! The executable: exit status, messages, pipes, pseudo-terminal.

mod commands;
mod desk;
mod links;
mod readme;
mod terminal_session;
