//! The library against identities, independent references and published values.

mod identities;
mod pinned;
mod published;
mod reference;
mod tolerance;
