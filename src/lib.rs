//! Clocks, links and signals of a line that keeps its length while it accelerates.
//!
//! A line of clocks lies along its thrust axis. Every node is at rest in the
//! line's own accelerated frame, runs at its own rate, feels its own acceleration
//! and hears its neighbours shifted and late. This library turns a layout file
//! into exact numbers: rates, clock offsets, horizon distances and launch-frame
//! events, at any moment of a thrust plan.
//!
//! # Axes, signs and units
//!
//! * Positions are proper distances in metres from the reference node, positive
//!   towards the fore end. Rows always go fore to aft.
//! * Acceleration is positive when it points fore.
//! * **Array time** is the proper time of the reference node, zero at the start of
//!   the thrust plan, and exact: a 128-bit count of attoseconds
//!   ([`model::array_time::ArrayTime`]).
//! * A **rate** is a node's proper time per array time; what is carried and printed
//!   is the rate minus one, never the rate.
//! * Every bare number is SI, with its unit in its name.
//!
//! # What the library does not do
//!
//! It opens no file, reads no clock and prints nothing. Text and moments come in as
//! arguments, and results go out as data. Only what is long is shared among threads,
//! and no result depends on how many there are. The program around it (`src/main.rs`,
//! `src/program`) does the rest and sits behind the feature `program`.
//!
//! What the model leaves out stands in the README, with sizes.
#![forbid(unsafe_code)]
#![warn(missing_docs)]

mod cores;
pub mod layout;
pub mod model;
pub mod run;
pub mod table;
