//! The library against identities, independent references and published values.
// What a test compares with may come from anywhere.
#![allow(clippy::disallowed_methods)]
// Published digits are kept as they are printed.
#![allow(clippy::excessive_precision)]
// Distributions of errors are shown with `--nocapture`.
#![allow(clippy::print_stdout)]

mod identities;
mod layout_random;
mod layout_read;
mod layout_refused;
mod layout_units;
mod links;
mod links_tables;
mod pinned;
mod published;
mod reach;
mod recording;
mod recording_hostile;
mod reference;
mod run;
mod run_refused;
mod table_csv;
mod table_json;
mod table_sample;
mod table_text;
mod tolerance;
