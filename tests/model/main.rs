//! The library against identities, independent references and published values.

mod history;
mod identities;
mod layout_random;
mod layout_read;
mod layout_refused;
mod layout_units;
mod pinned;
mod published;
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
