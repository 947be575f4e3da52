//! The library against identities, independent references and published values.

mod identities;
mod pinned;
mod published;
mod reference;
mod table_sample;
mod table_text;
mod tolerance;
