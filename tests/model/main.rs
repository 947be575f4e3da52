//! The library against identities, independent references and published values.

mod identities;
mod links;
mod published;
mod reference;
mod tolerance;
