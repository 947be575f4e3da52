//! Two clocks and the link between them: the averaging time that resolves their rates.

use super::{Curve, LEAST_BRACKET, Noise};
use crate::model::dd::Dd;

/// The factor `k` by which a rate difference must exceed the noise to count as resolved,
/// where nothing else is asked for: one standard deviation. Larger factors take longer in
/// proportion to their square under white frequency noise.
pub const RESOLVING_FACTOR: f64 = 1.0;

/// Averaging times beyond which nothing is looked for, s: far past any life of a clock, and
/// far enough from the largest double.
const LONGEST_S: f64 = 1e150;

/// Noise of the comparison of two clocks over a link.
#[derive(Clone, Copy, Debug)]
pub struct Comparison {
    curve: Curve,
}

/// What averaging does for a rate difference.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Resolved {
    /// It is resolved from this averaging time on, s; zero when no noise grows towards
    /// short averaging times.
    After(f64),
    /// It never is.
    Never(Unresolved),
}

/// Why a rate difference is never resolved.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Unresolved {
    /// The rates do not differ.
    NoDifference,
    /// The noise stays above it at every averaging time.
    Floor(Quietest),
    /// The averaging time is beyond 10¹⁵⁰ s.
    TooLong,
}

/// Where a comparison is quietest.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Quietest {
    /// Allan deviation there.
    pub deviation: f64,
    /// The averaging time, s; `None` when the noise falls for ever towards the deviation.
    pub averaging_s: Option<f64>,
}

impl Comparison {
    /// The comparison of two independent clocks over a link with white phase noise, stated
    /// by its Allan deviation at 1 s: `σ² = σ_first² + σ_second² + σ_link²`.
    #[must_use]
    pub fn of(first: &Noise, second: &Noise, link_instability: f64) -> Comparison {
        let link = Noise { white_pm: link_instability, ..Noise::default() };
        let mut curve = Curve::of(first).plus(Curve::of(second));
        curve.inverse_square += Curve::of(&link).inverse_square;
        Comparison { curve }
    }

    /// The same where absolute agreement is meant: a standard uncertainty of the bias of
    /// either clock is noise that no averaging takes away.
    #[must_use]
    pub fn with_bias_uncertainty(mut self, u_bias: f64) -> Comparison {
        self.curve.level = self.curve.level + Dd::product(u_bias, u_bias);
        self
    }

    /// Allan deviation of the comparison at an averaging time above zero, s.
    #[must_use]
    pub fn deviation(&self, averaging_s: f64) -> f64 {
        self.curve.variance(averaging_s).sqrt()
    }

    /// The shortest averaging time, s, at which `|rate difference| ≥ factor · σ`.
    ///
    /// `σ` may rise again at long averaging times (random walk, drift), so a difference
    /// can be resolved for a while only: the first moment of that is returned.
    ///
    /// Newton's rule on the variance over `u = ln t`, where it is convex, from a point
    /// left of the root: every step stays left of the root, or passes the minimum, which
    /// settles that there is none. Accuracy: 1e-14 of the result times the larger of 1
    /// and `difference² / (difference² − (factor · σ_min)²)`.
    ///
    /// `factor` is above zero; it is [`RESOLVING_FACTOR`] where nothing else is asked for.
    #[must_use]
    pub fn resolve(&self, rate_difference: f64, factor: f64) -> Resolved {
        if rate_difference == 0.0 {
            return Resolved::Never(Unresolved::NoDifference);
        }
        let share = Dd::new(factor) / rate_difference.abs();
        let curve = self.curve.scaled(share * share);
        // In parts of the difference squared, the variance has to come down to one.
        let room = (Dd::ONE - curve.level).to_f64();
        if !room.is_finite() {
            return Resolved::Never(Unresolved::TooLong);
        }
        if room < 0.0 || (room == 0.0 && curve.falls()) {
            return self.never();
        }
        if !curve.falls() {
            return Resolved::After(0.0);
        }
        let mut averaging_s = shortest_imaginable(&curve, room);
        for _ in 0..300 {
            let (value, slope) = curve.varying(averaging_s);
            if value <= room {
                return Resolved::After(averaging_s);
            }
            if averaging_s > LONGEST_S {
                return Resolved::Never(Unresolved::TooLong);
            }
            if slope >= 0.0 {
                return self.never();
            }
            let next = averaging_s * libm::exp(((value - room) / -slope).min(50.0));
            if next <= averaging_s {
                break;
            }
            averaging_s = next;
        }
        Resolved::After(averaging_s)
    }

    fn never(&self) -> Resolved {
        Resolved::Never(Unresolved::Floor(self.quietest_within(f64::INFINITY)))
    }

    /// Where the comparison is quietest, among averaging times up to a limit above zero, s.
    ///
    /// The least `factor · σ` there is the smallest rate difference that the limit lets
    /// resolve. Accuracy: 1e-15 of the deviation.
    #[must_use]
    pub fn quietest_within(&self, limit_s: f64) -> Quietest {
        let curve = &self.curve;
        let floor =
            |averaging_s| Quietest { deviation: curve.level.to_f64().max(0.0).sqrt(), averaging_s };
        match (curve.falls(), curve.rises()) {
            (false, _) => return floor(Some(0.0)),
            (true, false) if limit_s.is_infinite() => return floor(None),
            (true, _) => {}
        }
        let last = limit_s.min(LONGEST_S);
        let at = |averaging_s| Quietest {
            deviation: curve.variance(averaging_s).sqrt(),
            averaging_s: Some(averaging_s),
        };
        if curve.varying(last).1 <= 0.0 {
            return at(last);
        }
        // The slope rises over the logarithm of the averaging time: halve towards its zero.
        let (mut low, mut high) = (-350.0, libm::log(last));
        for _ in 0..100 {
            let middle = 0.5 * (low + high);
            if curve.varying(libm::exp(middle)).1 < 0.0 {
                low = middle;
            } else {
                high = middle;
            }
        }
        at(libm::exp(high))
    }
}

/// The longest of the averaging times that each falling law alone would take.
fn shortest_imaginable(curve: &Curve, room: f64) -> f64 {
    let mut longest = (curve.inverse_square / room).sqrt().max(curve.inverse / room);
    for flicker in curve.flicker_phase {
        longest = longest.max((LEAST_BRACKET * flicker.factor / room).sqrt());
    }
    longest
}
