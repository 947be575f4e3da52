//! The library against identities, independent references and published values.

mod identities;
mod layout_read;
mod layout_refused;
mod loads_identities;
mod loads_published;
mod loads_reference;
mod pinned;
mod published;
mod reference;
mod table_sample;
mod table_text;
mod tolerance;
