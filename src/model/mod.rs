//! The physics: pure functions of numbers and of a checked layout.

pub mod array_time;
pub mod clocks;
pub mod constants;
pub mod dd;
pub mod horizon;
pub mod links;
pub mod loads;
pub mod motion;
pub mod plan;
pub mod rates;
pub mod reach;
