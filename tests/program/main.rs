//! The executable: exit status, messages, pipes, pseudo-terminal.

mod choose;
mod commands;
mod desk;
mod hostile;
mod links;
mod loads;
mod long_history;
mod readme;
mod recorded;
mod recording_lasts;
mod terminal_session;
