//! Links along a line that stands in gravity with a gradient.
//!
//! Nothing moves and nothing changes, so light takes the same array time both ways and the
//! ratio of the rates at the two ends is the whole shift. Without a gradient the line is one
//! under a held thrust, and [`super::Rays::held`] serves it.

use crate::model::constants::{INVERSE_C_S_M, INVERSE_C2_S2_M2, SPEED_OF_LIGHT_M_S};
use crate::model::dd::Dd;

use super::one_way::NoFlight;

/// A signal along a standing line, and its return.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StandingFlight {
    /// Flight in array time, s; the same both ways.
    pub flight_array_s: f64,
    /// Flight on the clock of the emitter, s.
    pub flight_emitter_s: f64,
    /// Flight on the clock of the receiver, s.
    pub flight_receiver_s: f64,
    /// Received over emitted frequency, minus one.
    pub received_shift: f64,
    /// Duration of the trip out and back on the clock of the emitter, s.
    pub round_trip_s: f64,
    /// `c/2` times that, m.
    pub radar_distance_m: f64,
}

/// The signal between two positions of a line that stands in gravity `g` with gradient `Γ`.
///
/// ```text
/// N              = 1 + a h − b h²,     a = g/c²,  b = Γ/(2c²)
/// flight         = ∫ dh/(c N) = (2x/c) · artanh(√s)/√s,   s = (a² + 4b) x²
/// x              = |h_j − h_i| / (2 + a (h_i + h_j) − 2 b h_i h_j)
/// received_shift = N_i/N_j − 1
/// ```
///
/// The closed form follows from partial fractions; with `Γ = 0` it is the logarithm of a
/// held thrust (Misner, Thorne & Wheeler, *Gravitation* (1973), section 6.6). Within 8 units
/// of 2⁻⁵³ of the value while `|s| ≤ 2⁻⁶`, which every line on a planet keeps by ten orders,
/// and within 1e-14 of it beyond.
///
/// # Errors
///
/// [`NoFlight::Horizon`] where a rate is not above zero.
pub fn standing_flight(
    gravity_m_s2: f64,
    gradient_per_s2: f64,
    from_m: Dd,
    to_m: Dd,
) -> Result<StandingFlight, NoFlight> {
    let a = INVERSE_C2_S2_M2 * gravity_m_s2;
    let b = INVERSE_C2_S2_M2 * (0.5 * gradient_per_s2);
    let rate = |h: Dd| (a - b * h) * h + 1.0;
    let (from_rate, to_rate) = (rate(from_m), rate(to_m));
    let is_beyond = |rate: Dd| rate.is_negative() || rate.is_zero();
    if is_beyond(from_rate) || is_beyond(to_rate) {
        return Err(NoFlight::Horizon);
    }
    let apart = to_m - from_m;
    let sum = from_m + to_m;
    let x = apart.abs() / (a * sum - b * from_m * to_m * 2.0 + 2.0);
    let s = (a * a + b * 4.0) * x * x;
    let flight = x * artanh_over_root(s) * 2.0 * INVERSE_C_S_M;
    let shift = (b * sum - a) * apart / to_rate;
    let round_trip = flight * from_rate * 2.0;
    Ok(StandingFlight {
        flight_array_s: flight.to_f64(),
        flight_emitter_s: (flight * from_rate).to_f64(),
        flight_receiver_s: (flight * to_rate).to_f64(),
        received_shift: shift.to_f64(),
        round_trip_s: round_trip.to_f64(),
        radar_distance_m: (round_trip * (0.5 * SPEED_OF_LIGHT_M_S)).to_f64(),
    })
}

/// `artanh(√s)/√s = 1 + s/3 + s²/5 + …`, continued to `s < 0` as `arctan(√−s)/√−s`.
fn artanh_over_root(s: Dd) -> Dd {
    const TERMS: i32 = 22;
    if s.hi.abs() <= 1.0 / 64.0 {
        let mut sum = Dd::ZERO;
        for term in (0..TERMS).rev() {
            sum = sum * s + Dd::ONE / f64::from(2 * term + 1);
        }
        return sum;
    }
    let root = libm::sqrt(s.hi.abs());
    Dd::new(if s.is_negative() { libm::atan(root) / root } else { libm::atanh(root) / root })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::array_time::ArrayTime;
    use crate::model::links::{End, Rays};

    #[test]
    fn a_gradient_that_vanishes_leaves_a_held_thrust() {
        for (gravity, from_m, to_m) in
            [(9.8012, 0.0, 450.0), (9.8012, 450.0, -20.0), (1e3, -2e13, 5e13)]
        {
            let rays = Rays::held(gravity);
            let (from, to) = (End::fixed(from_m), End::fixed(to_m));
            let held = rays.two_way(from, to, ArrayTime::ZERO).expect("it arrives");
            let got = standing_flight(gravity, 0.0, Dd::new(from_m), Dd::new(to_m))
                .expect("a line that stands");
            for (name, got, wanted) in [
                ("array", got.flight_array_s, held.out.flight_array_s),
                ("emitter", got.flight_emitter_s, held.out.flight_emitter_s),
                ("receiver", got.flight_receiver_s, held.out.flight_receiver_s),
                ("shift", got.received_shift, held.out.received_shift),
                ("round trip", got.round_trip_s, held.round_trip_s),
                ("radar", got.radar_distance_m, held.radar_distance_m),
            ] {
                assert!((got / wanted - 1.0).abs() <= 4e-16, "{name}: {got:e}, {wanted:e}");
            }
        }
    }

    /// `∫ dh/(cN)` by the midpoint rule, in the small part `1/N − 1` alone.
    #[test]
    fn the_flight_is_the_integral_of_the_slowness() {
        let (gravity, gradient) = (9.8012, 3.086e-6);
        let (from_m, to_m) = (-300.0, 9_000.0);
        let got = standing_flight(gravity, gradient, Dd::new(from_m), Dd::new(to_m))
            .expect("a line that stands");
        let c = SPEED_OF_LIGHT_M_S;
        let steps = 20_000;
        let width = (to_m - from_m) / f64::from(steps);
        let mut small = 0.0;
        for step in 0..steps {
            let h = from_m + (f64::from(step) + 0.5) * width;
            let excess = (gravity * h - 0.5 * gradient * h * h) / (c * c);
            small -= excess / (1.0 + excess) * width;
        }
        let wanted = (to_m - from_m) / c + small / c;
        assert!((got.flight_array_s - wanted).abs() <= 1e-16 * wanted.abs() * 4.0);
        let bare = Dd::new(to_m - from_m) * INVERSE_C_S_M;
        let late = (Dd::new(got.flight_array_s) - bare).to_f64();
        assert!((late - small / c).abs() < 1e-20, "{late:e} for {:e}", small / c);
    }
}
