//! Links: when light from one node reaches another, how shifted, and what a two-way
//! exchange makes of it.
//!
//! A signal leaves node `i` at array time `τ_e` and is received at node `j` at `τ_r`. With
//! `Δφ` the rapidity gained in between and `N` the rates against array time,
//!
//! ```text
//! ∫ c N_j(s) e^(∓(φ(s)−φ_e)) ds = |h_j − h_i|        upper sign towards the fore end
//! 1 + received_shift            = e^(∓Δφ)
//! ```
//!
//! (Rindler, Am. J. Phys. 34 (1966) 1174; Misner, Thorne & Wheeler, *Gravitation* (1973),
//! section 6.6, for the held thrust; in general both sides are launch-frame null coordinates
//! of the two worldlines, by parts.) Under one held thrust these are
//!
//! ```text
//! flight in array time = |h_j − h_i|/(c N_i) · ln(1 + y)/y,    y = α (h_j − h_i)/(c² N_i)
//! received_shift       = N_i/N_j − 1
//! ```
//!
//! Ends may move along the line, as the nodes of a stretched tether do in a ramp. With `ḣ`
//! their speed and `η = artanh(ḣ/(cN))` the shift becomes `e^(∓(Δφ + η_j − η_i)) − 1`.
//!
//! Signals run on the axis and in vacuum, and a transponder answers at once. The clocks of
//! moving ends leave out `ḣ²/(2 c² N²)`, below 1e-20 for any tether.

mod extremes;
mod one_way;
pub(crate) mod rays;
pub(crate) mod series;
mod shift;
mod standing;
mod two_way;
pub(crate) mod way;

pub use extremes::{Extreme, Extremes, Range};
pub(crate) use one_way::later;
pub use one_way::{End, Flight, Moved, NoFlight};
pub use rays::{Ray, Rays};
pub use standing::{StandingFlight, standing_flight};
pub use two_way::RoundTrip;
