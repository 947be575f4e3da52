//! The library against identities, independent references and published values.

mod layout_read;
mod layout_refused;
