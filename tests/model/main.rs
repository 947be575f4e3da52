//! The library against identities, independent references and published values.

mod layout_random;
mod layout_read;
mod layout_refused;
mod layout_units;
