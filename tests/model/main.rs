//! The library against identities, independent references and published values.
// What a test compares with may come from anywhere.
#![allow(clippy::disallowed_methods)]
// Published digits are kept as they are printed.
#![allow(clippy::excessive_precision)]
// Distributions of errors are shown with `--nocapture`.
#![allow(clippy::print_stdout)]

mod check;
mod check_advice;
mod clocks;
mod demo_recordings;
mod dice;
mod history;
mod hostile;
mod identities;
mod layout_random;
mod layout_read;
mod layout_refused;
mod layout_units;
mod links;
mod links_identities;
mod links_tables;
mod loads_identities;
mod loads_layouts;
mod loads_published;
mod loads_reference;
mod loads_rules;
mod many_changes;
mod pinned;
mod published;
mod reach;
mod reach_identities;
mod recording;
mod recording_hostile;
mod recording_long;
mod recording_models;
mod reference;
mod run;
mod run_refused;
mod stretch;
mod table_csv;
mod table_json;
mod table_sample;
mod table_text;
mod tolerance;
