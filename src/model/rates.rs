//! Rates, clock offsets, felt acceleration and horizon of one node at one moment.
//!
//! Everything is a function of the plan's [`Moment`] and the node's position `h`:
//!
//! ```text
//! N − 1   = α h / c²         rate against array time, less one
//! α_h     = α / N            proper acceleration the node feels
//! τ_h − τ = h φ / c          clock offset
//! |X|     = c² N / |α|       distance of the node from the horizon
//! ```
//!
//! exact for a rigid line with any `α(τ)` as long as `N > 0` (Born, Ann. Phys. 335
//! (1909) 1; Rindler, Am. J. Phys. 34 (1966) 1174; Desloge & Philpott, Am. J. Phys. 55
//! (1987) 252). Values are carried in double-double and rounded once, so each is within
//! 4 units of 2⁻⁵³ of itself over the whole domain: positions from 1 mm to 10¹⁹ m,
//! accelerations to 10⁶ m/s², rapidities to 700, `N ≥ 10⁻⁶`.
//!
//! A line that stands in gravity `g` with gradient `Γ` obeys the same forms with
//! `N − 1 = (g h − Γ h²/2)/c²`, `α_h = (g − Γ h)/N` and `τ_h − τ = (N − 1) τ`; with
//! `Γ = 0` the bits are those of a held thrust.

use super::constants::{C2_M2_S2, INVERSE_C_S_M, INVERSE_C2_S2_M2};
use super::dd::{Dd, Wide};
use super::motion::{LAUNCH_SCALE, Launch, cosh_sinh};
use super::plan::Moment;

/// What moves or holds the line at one moment, as every node of it needs it.
#[derive(Clone, Copy, Debug)]
pub struct Instant {
    /// The plan at the moment.
    pub moment: Moment,
    /// Decrease of felt gravity per metre of height, 1/s²; zero under thrust.
    pub gradient_per_s2: f64,
}

impl Instant {
    /// `N − 1` at a position.
    #[must_use]
    pub fn rate_minus_one(&self, position_m: Dd) -> Dd {
        let potential = self.moment.acceleration_m_s2 * position_m;
        if self.gradient_per_s2 == 0.0 {
            return potential * INVERSE_C2_S2_M2;
        }
        let bend = position_m * position_m * (0.5 * self.gradient_per_s2);
        (potential - bend) * INVERSE_C2_S2_M2
    }

    /// `N` at a position.
    #[must_use]
    pub fn rate(&self, position_m: Dd) -> Dd {
        self.rate_minus_one(position_m) + 1.0
    }

    /// `1/N − 1`: the node's light heard at the reference under held thrust, and the
    /// steering that would make its clock show array time.
    #[must_use]
    pub fn redshift(&self, position_m: Dd) -> Dd {
        redshift_of(self.rate_minus_one(position_m))
    }

    /// Proper acceleration the node feels, m/s², with the sign of `α`.
    #[must_use]
    pub fn felt_acceleration_m_s2(&self, position_m: Dd) -> Dd {
        self.felt_at_rate_m_s2(position_m, self.rate(position_m))
    }

    /// The same where the rate `N` is known already.
    #[must_use]
    pub fn felt_at_rate_m_s2(&self, position_m: Dd, rate: Dd) -> Dd {
        let local = self.moment.acceleration_m_s2 - position_m * self.gradient_per_s2;
        local / rate
    }

    /// Distance from the horizon, m: aft of the node for `α > 0`, fore for `α < 0`.
    /// `None` where there is none: `α = 0`, or a standing line with a gradient, whose
    /// field is not that of a horizon.
    #[must_use]
    pub fn horizon_m(&self, position_m: Dd) -> Option<Dd> {
        self.horizon_at_rate_m(self.rate(position_m))
    }

    /// The same where the rate `N` is known already.
    #[must_use]
    pub fn horizon_at_rate_m(&self, rate: Dd) -> Option<Dd> {
        let acceleration = self.moment.acceleration_m_s2;
        if acceleration.is_zero() || self.gradient_per_s2 != 0.0 {
            return None;
        }
        Some(C2_M2_S2 * rate / acceleration.abs())
    }

    /// `τ_h − τ` of a node that has stood at one position since array time zero, s.
    #[must_use]
    pub fn clock_offset_s(&self, position_m: Dd) -> Dd {
        if self.gradient_per_s2 == 0.0 {
            return position_m * self.moment.rapidity * INVERSE_C_S_M;
        }
        self.rate_minus_one(position_m) * self.moment.at.seconds()
    }

    /// `N_to / N_from − 1` at this moment.
    ///
    /// Formed from the difference of the two small quantities, never from the rates.
    #[must_use]
    pub fn rate_difference(&self, from_m: Dd, to_m: Dd) -> Dd {
        let apart = to_m - from_m;
        let mut drive = self.moment.acceleration_m_s2 * apart;
        if self.gradient_per_s2 != 0.0 {
            drive = drive - apart * (to_m + from_m) * (0.5 * self.gradient_per_s2);
        }
        drive * INVERSE_C2_S2_M2 / self.rate(from_m)
    }

    /// Difference of two clock offsets, to − from, of nodes that have stood still, s.
    #[must_use]
    pub fn clock_offset_difference_s(&self, from_m: Dd, to_m: Dd) -> Dd {
        if self.gradient_per_s2 == 0.0 {
            return self.clock_offset_s(to_m - from_m);
        }
        self.clock_offset_s(to_m) - self.clock_offset_s(from_m)
    }
}

/// `1/N − 1` where `N − 1` is known already.
#[must_use]
pub fn redshift_of(rate_minus_one: Dd) -> Dd {
    -rate_minus_one / (rate_minus_one + 1.0)
}

/// What the pairs from one node share at a moment, to make their differences quickly.
///
/// Purpose: tables of every ordered pair, of which a line of 10⁴ nodes has 10⁸.
/// Formula: both differences are a factor of the first node times the distance,
/// `α/(c² N_from)` and `φ/c`; the factors are kept.
/// Accuracy: the bits are those of [`Instant::rate_difference`] and
/// [`Instant::clock_offset_difference_s`], rounded. The short product and the long form are
/// each within 2⁻⁹⁸ of the true value; where that could decide the last bit, about once in
/// 2⁴⁰ values, the long form is taken.
#[derive(Clone, Copy, Debug)]
pub struct PairFactors {
    from_m: f64,
    /// Of the rate difference and of the clock offset, per metre.
    factors: Option<[Dd; 2]>,
}

impl PairFactors {
    /// Of the pairs from a node at a position. A line that stands in a gradient has no such
    /// factors and takes the long form.
    #[must_use]
    pub fn new(instant: &Instant, from_m: f64) -> PairFactors {
        let moment = &instant.moment;
        let factors = (instant.gradient_per_s2 == 0.0).then(|| {
            let rate = instant.rate(Dd::new(from_m));
            [moment.acceleration_m_s2 * INVERSE_C2_S2_M2 / rate, moment.rapidity * INVERSE_C_S_M]
        });
        PairFactors { from_m, factors }
    }

    /// `N_to / N_from − 1`.
    #[inline]
    #[must_use]
    pub fn rate_difference(&self, instant: &Instant, to_m: f64) -> f64 {
        self.short(0, to_m).unwrap_or_else(|| {
            instant.rate_difference(Dd::new(self.from_m), Dd::new(to_m)).to_f64()
        })
    }

    /// Difference of the clock offsets, to − from, s.
    #[inline]
    #[must_use]
    pub fn clock_offset_s(&self, instant: &Instant, to_m: f64) -> f64 {
        self.short(1, to_m).unwrap_or_else(|| {
            let (from, to) = (Dd::new(self.from_m), Dd::new(to_m));
            instant.clock_offset_difference_s(from, to).to_f64()
        })
    }

    /// The product, unless its last bit is in doubt.
    #[inline]
    fn short(&self, which: usize, to_m: f64) -> Option<f64> {
        const DOUBT: f64 = 1.0 / (1_u128 << 94) as f64;
        let (apart, factor) = (Dd::difference(to_m, self.from_m), self.factors?[which]);
        if apart.is_zero() || factor.is_zero() {
            return Some(0.0);
        }
        let value = apart * factor;
        // Far below this the low halves lose bits to underflow.
        if value.hi.abs() < 1e-250 {
            return None;
        }
        let doubt = value.hi.abs() * DOUBT;
        let above = value.hi + (value.lo + doubt);
        (above == value.hi + (value.lo - doubt)).then_some(above)
    }
}

/// What is known of a real clock beside the rate of its place.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct KnownClock {
    /// Reading at array time zero, s.
    pub reading_at_start_s: f64,
    /// Fractional frequency bias.
    pub bias: f64,
    /// Linear drift of the fractional frequency, 1/s.
    pub drift_per_s: f64,
    /// Fractional frequency per m/s² of felt acceleration.
    pub acceleration_sensitivity: f64,
}

impl KnownClock {
    /// Reading less array time, s.
    ///
    /// With own proper time `s`: `(s − τ) + x₀ + b s + D s²/2 + k ∫ a ds`. Under thrust
    /// `∫ a ds = ∫ α dτ = c φ`, the same for every node, because the local clock and the
    /// local acceleration differ by the same factor `N`; `velocity_m_s` is that integral.
    ///
    /// Within 4 units of 2⁻⁵³ of the sum of the moduli of the terms.
    #[must_use]
    pub fn reading_less_array_time_s(&self, at_s: Dd, clock_offset_s: Dd, velocity_m_s: Dd) -> Dd {
        let own = at_s + clock_offset_s;
        clock_offset_s
            + self.reading_at_start_s
            + own * self.bias
            + own * own * (0.5 * self.drift_per_s)
            + velocity_m_s * self.acceleration_sensitivity
    }
}

/// Whether `1 + α h / c²` is above zero, decided exactly for double inputs.
#[must_use]
pub fn is_realisable(acceleration_m_s2: Dd, position_m: f64) -> bool {
    // A rate clear of zero by far more than doubles can be wrong needs no wide numbers.
    let drive = acceleration_m_s2.hi * position_m / C2_M2_S2.hi;
    let unsure = 1e-12 * (1.0 + drive.abs());
    if (1.0 + drive).abs() > unsure {
        return drive > -1.0;
    }
    let rate = Wide::from(acceleration_m_s2).times(Dd::new(position_m)) + Wide::from(C2_M2_S2);
    let rate = rate.to_dd();
    !rate.is_negative() && !rate.is_zero()
}

/// The launch-frame frame of the line at one moment: where its reference node is and
/// how it is turned.
#[derive(Clone, Copy, Debug)]
pub struct LaunchFrame {
    reference: Launch,
    cosh: f64,
    sinh: f64,
}

impl LaunchFrame {
    /// The frame at a moment, from the reference node's event and the rapidity.
    #[must_use]
    pub fn new(reference: Launch, rapidity: Dd) -> LaunchFrame {
        let (cosh, sinh) = cosh_sinh(rapidity);
        LaunchFrame { reference, cosh, sinh }
    }

    /// Launch time of a node, `t + h sinh φ / c`, s: within 1e-14 of
    /// `t + |h sinh φ|/c`. `None` above the largest double.
    #[must_use]
    pub fn time_s(&self, position_m: Dd) -> Option<f64> {
        let own = position_m * (self.sinh * LAUNCH_SCALE) * INVERSE_C_S_M;
        finite((self.reference.time_s + own).to_f64() / LAUNCH_SCALE)
    }

    /// Launch position of a node, `z + h cosh φ`, m: within 1e-14 of
    /// `c ∫ |sinh φ| dτ + |h| cosh φ`. `None` above the largest double.
    #[must_use]
    pub fn position_m(&self, position_m: Dd) -> Option<f64> {
        let own = position_m * (self.cosh * LAUNCH_SCALE);
        finite((self.reference.position_m + own).to_f64() / LAUNCH_SCALE)
    }
}

fn finite(value: f64) -> Option<f64> {
    value.is_finite().then_some(value)
}
