//! One ray on its way to one node: how far it has come, and where inside a stretch it ends.

use super::rays::{ENDLESS, Landing, Place};
use super::series::{self, exp_m1, ln, ln_1p_over};
use crate::model::dd::Dd;

/// Displacement of a receiving end since the emission, as light time, and its derivative;
/// both are functions of the seconds since emission, mirrored for a ray towards aft.
pub(crate) type Drift<'a> = &'a dyn Fn(f64) -> (f64, f64);

/// What a stretch does to a ray towards the fore end.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Advance {
    /// `∫ e^(−ψ) ds`, s.
    pub sum: Dd,
    /// `e^(−ψ) − 1` at the end.
    pub change: Dd,
}

/// The advance over `seconds` from a moment with `α/c = push`, changing by `slope`.
///
/// Domain: any hold; a ramp over which the rapidity changes by about one at most.
pub(crate) fn advance(push: Dd, slope: Dd, seconds: Dd) -> Advance {
    let linear = push * seconds;
    if slope.is_zero() && linear.hi.abs() > 1.0 / 64.0 {
        let change = exp_m1(-linear);
        return Advance { sum: -change / push, change };
    }
    let quadratic = if slope.is_zero() { Dd::ZERO } else { slope * seconds * seconds };
    let decay = series::decay(linear, quadratic);
    Advance { sum: seconds * decay.mean, change: decay.change }
}

/// How far a ray has come.
#[derive(Clone, Copy)]
pub(crate) struct Way {
    /// Position of the node, light time.
    pub target: Dd,
    /// From the ray to the node, light time.
    pub gap: Dd,
    /// Array time so far, s.
    pub elapsed: Dd,
    /// Rapidity gained so far.
    pub swing: Dd,
    /// `e^(−swing) − 1`.
    pub change: Dd,
}

/// The last stretch of a way.
#[derive(Clone, Copy)]
pub(crate) struct Last {
    pub seconds: Dd,
    pub swing: Dd,
    pub change: Dd,
}

impl Way {
    /// Crosses a stretch on which the node is not met.
    #[inline]
    pub fn cross(&mut self, seconds: Dd, swing: Dd, sum: Dd, change: Dd, growth: Dd) {
        self.gap = (self.gap - (sum - self.target * change)) * growth;
        self.change = self.change + (self.change + 1.0) * change;
        self.elapsed = self.elapsed + seconds;
        self.swing = self.swing + swing;
    }

    pub fn landing(&self, start: Place, last: Last) -> Landing {
        Landing {
            place: start.after(last.seconds),
            elapsed: self.elapsed + last.seconds,
            swing: self.swing + last.swing,
            change: self.change + (self.change + 1.0) * last.change,
        }
    }

    /// The end of the way inside a stretch; `None` when it is not there, `Some(None)` when
    /// the stretch has no end and the node outruns the ray for ever.
    #[inline]
    pub fn finish(
        &self,
        push: Dd,
        slope: Dd,
        room: Dd,
        drift: Option<Drift>,
    ) -> Option<Option<Last>> {
        let is_endless = room == ENDLESS;
        let rate = self.target * push + 1.0;
        // The rate where the ray is, which the gap leads to.
        let ray_rate = rate - push * self.gap;
        let is_outrun = ray_rate.hi <= 0.0;
        if slope.is_zero() && drift.is_none() {
            if is_outrun {
                return is_endless.then_some(None);
            }
            let seconds = held_flight(push, self.gap, rate, ray_rate);
            if seconds < room {
                let change = -(push * self.gap) / rate;
                return Some(Some(Last { seconds, swing: push * seconds, change }));
            }
            return None;
        }
        let guess = if is_outrun {
            f64::INFINITY
        } else {
            let y = push.hi * self.gap.hi / ray_rate.hi;
            let scaled = if y.abs() < 1e-8 { 1.0 - 0.5 * y } else { libm::log1p(y) / y };
            self.gap.hi / ray_rate.hi * scaled
        };
        self.solve(push, slope, room, guess, drift)
    }

    /// The same by a safeguarded Newton iteration, for ramps and for ends that move.
    fn solve(
        &self,
        push: Dd,
        slope: Dd,
        room: Dd,
        guess: f64,
        drift: Option<Drift>,
    ) -> Option<Option<Last>> {
        let is_endless = room == ENDLESS;
        // The excess of the integral over the gap, its derivative, and the advance.
        let excess = |seconds: Dd| {
            let over = advance(push, slope, seconds);
            let kept = over.change.hi + 1.0;
            let (moved, speed) =
                drift.map_or((0.0, 0.0), |drift| drift((self.elapsed + seconds).hi));
            let excess = over.sum - self.target * over.change - self.gap;
            let excess = excess - (over.change + 1.0) * moved;
            let here = push.hi + slope.hi * seconds.hi;
            let derivative = (1.0 + here * (self.target.hi + moved) - speed) * kept;
            (excess, derivative, over)
        };
        let (mut low, mut high) = (0.0, room.hi);
        let mut seconds = Dd::new(guess.max(0.0));
        if seconds >= room {
            if is_endless {
                return Some(None);
            }
            let (at_end, ..) = excess(room);
            if at_end.is_negative() || at_end.is_zero() {
                return None;
            }
            seconds = room.scale(0.5);
        }
        let mut over = Advance { sum: Dd::ZERO, change: Dd::ZERO };
        for _ in 0..200 {
            let (beyond, derivative, reached) = excess(seconds);
            over = reached;
            if beyond.is_negative() {
                low = seconds.hi
            } else {
                high = seconds.hi
            };
            let step = beyond.hi / derivative;
            let mut next = seconds - step;
            if !(next.hi >= low && next.hi <= high) {
                if next.hi > high && high >= room.hi && !is_endless {
                    let (at_end, ..) = excess(room);
                    if at_end.is_negative() || at_end.is_zero() {
                        return None;
                    }
                }
                next = Dd::new(0.5 * (low + high.min(2.0 * low + 1.0)));
            }
            let moved = (next - seconds).hi.abs();
            // A step this small leaves an error of its square, far below the last digit.
            let is_done = moved <= 1e-13 * next.hi.abs() || moved <= 1e-31 * self.elapsed.hi;
            let kept = over.change + 1.0;
            let delta = next - seconds;
            seconds = next;
            if is_done {
                let here = push + slope * seconds;
                over.change = over.change - kept * (here * delta);
                break;
            }
        }
        if seconds >= room && !is_endless {
            return None;
        }
        let swing = (push + slope * seconds.scale(0.5)) * seconds;
        Some(Some(Last { seconds, swing, change: over.change }))
    }
}

/// Flight time over a gap under one held thrust, s: `gap/N_i · ln(1 + y)/y` with
/// `y = push · gap/N_i`, from the rates where the ray starts (`N_i`) and where it ends.
#[inline]
pub(crate) fn held_flight(push: Dd, gap: Dd, end_rate: Dd, start_rate: Dd) -> Dd {
    let share = gap / start_rate;
    let y = push * share;
    if y.hi < -0.5 || y.hi > 1e6 {
        return ln(end_rate / start_rate) / push;
    }
    share * ln_1p_over(y)
}
