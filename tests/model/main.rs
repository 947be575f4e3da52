//! The library against identities, independent references and published values.

mod identities;
mod pinned;
mod published;
mod recording;
mod recording_hostile;
mod reference;
mod run;
mod run_refused;
mod table_sample;
mod table_text;
mod tolerance;
