//! How steady a clock is over an averaging time, and how long two must be averaged.
//!
//! A clock is described by its power-law noise as IEEE Std 1139 names it, each kind by the
//! Allan deviation it has at an averaging time of one second, and by its known linear drift.
//! With `A` such a deviation, averaging time `t` and `f_h` the bandwidth of the phase noise:
//!
//! ```text
//! white PM         σ² = A² / t²
//! flicker PM       σ² = A² / t² · b(2π f_h t) / b(2π f_h),   b(x) = 3γ − ln 2 + 3 ln x
//! white FM         σ² = A² / t
//! flicker FM       σ² = A²
//! random-walk FM   σ² = A² t
//! linear drift D   σ² = D² t² / 2
//! ```
//!
//! The kinds are independent, so their variances add. `3γ − ln 2 = 1.0385` is the constant
//! the standard prints as 1.038. These are the laws of a one-sided spectrum
//! `S_y(f) = Σ h_a f^a` in `σ² = 2 ∫ S_y sin⁴(π t f)/(π t f)² df`; the coefficients `h_a`
//! drop out, because each kind is stated by its deviation and not by its spectrum.
//!
//! Source: IEEE Std 1139-2008, annex B, table B.2 (from memory, each law verified by
//! integration: `tests/data/clocks`); W. J. Riley, NIST SP 1065 (2008), section 3.

mod compare;
mod links;

use std::fmt;

use super::dd::Dd;
use crate::layout::Clock;

pub use compare::{Comparison, Quietest, RESOLVING_FACTOR, Resolved, Unresolved};
pub use links::LinkNoise;

/// Noise and drift of one clock.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Noise {
    /// White phase noise: Allan deviation at 1 s.
    pub white_pm: f64,
    /// Flicker phase noise: Allan deviation at 1 s.
    pub flicker_pm: f64,
    /// White frequency noise: Allan deviation at 1 s.
    pub white_fm: f64,
    /// Flicker frequency noise: Allan deviation at 1 s, and at any averaging time.
    pub flicker_fm: f64,
    /// Random-walk frequency noise: Allan deviation at 1 s.
    pub random_walk_fm: f64,
    /// Upper cut-off of the phase noise, Hz; of no effect without flicker phase noise.
    pub bandwidth_hz: f64,
    /// Known linear drift, 1/s.
    pub drift_per_s: f64,
}

/// Flicker phase noise without the bandwidth it depends on.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct NoBandwidth;

impl fmt::Display for NoBandwidth {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("flicker phase noise depends on a `bandwidth`, and the clock states none")
    }
}

impl std::error::Error for NoBandwidth {}

impl Noise {
    /// The noise of a kind of clock in a layout.
    ///
    /// # Errors
    ///
    /// A clock with flicker phase noise and no bandwidth.
    pub fn of(clock: &Clock) -> Result<Noise, NoBandwidth> {
        if clock.flicker_pm != 0.0 && clock.bandwidth_hz.is_none() {
            return Err(NoBandwidth);
        }
        Ok(Noise {
            white_pm: clock.white_pm,
            flicker_pm: clock.flicker_pm,
            white_fm: clock.white_fm,
            flicker_fm: clock.flicker_fm,
            random_walk_fm: clock.random_walk_fm,
            bandwidth_hz: clock.bandwidth_hz.unwrap_or(1.0),
            drift_per_s: clock.drift_per_s,
        })
    }

    /// Allan deviation `σ_y` at an averaging time above zero, s: drift included, bias left out.
    ///
    /// The law of flicker phase noise holds for `2π f_h t ≫ 1`. Below `2π f_h t = 1.92`,
    /// where `b` is 3, `b` is held at 3: an averaging time the bandwidth hardly lets
    /// through gets the law of white phase noise. Accuracy: 4 units of 2⁻⁵³ from the law;
    /// the law itself leaves out terms that die away, 7e-5 of the variance of flicker
    /// phase noise at `f_h t = 10` and 1e-6 at 100.
    #[must_use]
    pub fn allan_deviation(&self, averaging_s: f64) -> f64 {
        Curve::of(self).variance(averaging_s).sqrt()
    }
}

/// `3γ − ln 2`, the constant in the law of flicker phase noise (γ: Euler's constant).
const FLICKER_CONSTANT: f64 = 1.038_499_814_144_653_3;
/// The value below which `b` is not let fall: from there on the variance is convex over the
/// logarithm of the averaging time, so that it has one minimum.
const LEAST_BRACKET: f64 = 3.0;

/// `b(x)` of flicker phase noise, and its derivative by `ln x`.
fn bracket(phase: f64) -> (f64, f64) {
    let value = FLICKER_CONSTANT + 3.0 * libm::log(phase);
    if value > LEAST_BRACKET { (value, 3.0) } else { (LEAST_BRACKET, 0.0) }
}

/// Flicker phase noise of one clock: `factor · b(2π f_h t) / t²`.
#[derive(Clone, Copy, Debug, Default)]
struct FlickerPhase {
    factor: f64,
    bandwidth_hz: f64,
}

impl FlickerPhase {
    fn bracket(self, averaging_s: f64) -> (f64, f64) {
        bracket(std::f64::consts::TAU * self.bandwidth_hz * averaging_s)
    }
}

/// An Allan variance as a function of the averaging time: a sum of its laws, and of the
/// laws of two clocks and the link between them.
#[derive(Clone, Copy, Debug, Default)]
struct Curve {
    /// Multiplies `t⁻²`.
    inverse_square: f64,
    /// One for each clock, because each has its own bandwidth.
    flicker_phase: [FlickerPhase; 2],
    /// Multiplies `t⁻¹`.
    inverse: f64,
    /// Does not change with `t`. What is left of a rate difference above it decides the
    /// averaging time, so it is carried further than the others.
    level: Dd,
    /// Multiplies `t`.
    linear: f64,
    /// Multiplies `t²`.
    square: f64,
}

impl Curve {
    fn of(noise: &Noise) -> Curve {
        let mut curve = Curve {
            inverse_square: noise.white_pm * noise.white_pm,
            inverse: noise.white_fm * noise.white_fm,
            level: Dd::product(noise.flicker_fm, noise.flicker_fm),
            linear: noise.random_walk_fm * noise.random_walk_fm,
            square: 0.5 * noise.drift_per_s * noise.drift_per_s,
            ..Curve::default()
        };
        if noise.flicker_pm != 0.0 {
            let mut flicker = FlickerPhase { factor: 1.0, bandwidth_hz: noise.bandwidth_hz };
            flicker.factor = noise.flicker_pm * noise.flicker_pm / flicker.bracket(1.0).0;
            curve.flicker_phase[0] = flicker;
        }
        curve
    }

    /// The sum with the curve of a second clock.
    fn plus(self, other: Curve) -> Curve {
        Curve {
            inverse_square: self.inverse_square + other.inverse_square,
            flicker_phase: [self.flicker_phase[0], other.flicker_phase[0]],
            inverse: self.inverse + other.inverse,
            level: self.level + other.level,
            linear: self.linear + other.linear,
            square: self.square + other.square,
        }
    }

    fn scaled(self, factor: Dd) -> Curve {
        let near = factor.to_f64();
        Curve {
            inverse_square: self.inverse_square * near,
            flicker_phase: self
                .flicker_phase
                .map(|flicker| FlickerPhase { factor: flicker.factor * near, ..flicker }),
            inverse: self.inverse * near,
            level: self.level * factor,
            linear: self.linear * near,
            square: self.square * near,
        }
    }

    fn variance(&self, averaging_s: f64) -> f64 {
        self.level.to_f64() + self.varying(averaging_s).0
    }

    /// What changes with the averaging time, and its derivative by the logarithm of it.
    fn varying(&self, averaging_s: f64) -> (f64, f64) {
        let mut phase = self.inverse_square;
        let mut phase_slope = -2.0 * self.inverse_square;
        for flicker in self.flicker_phase.into_iter().filter(|flicker| flicker.factor != 0.0) {
            let (value, slope) = flicker.bracket(averaging_s);
            phase += flicker.factor * value;
            phase_slope += flicker.factor * (slope - 2.0 * value);
        }
        // A law that is absent must not meet an averaging time that overflows.
        let term = |factor: f64, power: f64| if factor == 0.0 { 0.0 } else { factor * power };
        let falling = term(self.inverse, averaging_s.recip());
        let rising = term(self.linear, averaging_s);
        let drifting = term(self.square, averaging_s * averaging_s);
        let squared = averaging_s.recip() * averaging_s.recip();
        (
            term(phase, squared) + falling + rising + drifting,
            term(phase_slope, squared) - falling + rising + 2.0 * drifting,
        )
    }

    /// Whether it is large at short averaging times.
    fn falls(&self) -> bool {
        self.inverse_square > 0.0
            || self.inverse > 0.0
            || self.flicker_phase.iter().any(|flicker| flicker.factor > 0.0)
    }

    /// Whether it is large at long averaging times.
    fn rises(&self) -> bool {
        self.linear > 0.0 || self.square > 0.0
    }
}
