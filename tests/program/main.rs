//! The executable: exit status, messages, pipes, pseudo-terminal.

mod commands;
mod desk;
mod hostile;
mod readme;
mod recording_lasts;
mod terminal_session;
