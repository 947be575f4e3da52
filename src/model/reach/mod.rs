//! Reach: signals between the line and inertial stations, and nodes that were let go.
//!
//! Everything hangs on the null coordinates of the launch frame, `u = ct − z` and `v = ct + z`:
//! light towards the fore end keeps `u`, light towards the aft end keeps `v`. With `φ` the
//! rapidity gained, those of a node at position `h` are
//!
//! ```text
//! u_h = c ∫ e^(−φ) dτ − h e^(−φ),     v_h = c ∫ e^(+φ) dτ + h e^(+φ)
//! ```
//!
//! (Rindler, Am. J. Phys. 34 (1966) 1174; Misner, Thorne & Wheeler, *Gravitation* (1973),
//! section 6.6). Both integrals are sums of positive terms and kept in double-double. Stations
//! are inertial and free of gravity, on the axis, in vacuum.

mod released;
mod station;

pub use released::{Heard, HeldPass, Pass, Passes, Released};
pub use station::{Absent, LastCall, StationSignal};
