//! The library against identities, independent references and published values.

mod identities;
mod links;
mod published;
mod reach;
mod reference;
mod tolerance;
