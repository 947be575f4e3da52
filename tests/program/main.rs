//! The executable: exit status, messages, pipes, pseudo-terminal.

mod commands;
mod readme;
mod terminal_session;
