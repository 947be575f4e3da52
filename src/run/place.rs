//! Where a node stands, as a function of array time, and what its clock gathers there.

use crate::model::array_time::ArrayTime;
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::dd::{Dd, RunningSum};
use crate::model::rates::Instant;

/// The places of a node: one from the beginning, and one more from each move on.
#[derive(Clone, Debug, PartialEq)]
pub struct Place {
    first_m: f64,
    moves: Vec<(ArrayTime, f64)>,
}

impl Place {
    /// A node that has stood at one place from the beginning.
    #[must_use]
    pub fn new(first_m: f64) -> Place {
        Place { first_m, moves: Vec::new() }
    }

    /// The node stands at another place from a moment on, which is not before that of an
    /// earlier move.
    pub fn move_to(&mut self, at: ArrayTime, position_m: f64) {
        debug_assert!(self.moves.last().is_none_or(|(last, _)| *last <= at));
        self.moves.push((at, position_m));
    }

    /// Position at a moment, m. At the moment of a move the later place counts.
    #[must_use]
    pub fn position_m(&self, at: ArrayTime) -> f64 {
        self.moves_until(at).last().map_or(self.first_m, |(_, position_m)| *position_m)
    }

    /// Whether the node has been moved up to a moment.
    #[must_use]
    pub fn has_moved(&self, at: ArrayTime) -> bool {
        !self.moves_until(at).is_empty()
    }

    /// The largest distance from the reference node up to a moment, m: the scale of what
    /// rounding can leave in the clock offset.
    #[must_use]
    pub fn farthest_m(&self, until: ArrayTime) -> f64 {
        let moved = self.moves_until(until).iter().map(|(_, position_m)| position_m.abs());
        moved.fold(self.first_m.abs(), f64::max)
    }

    /// Clock offset `τ_h − τ` at a moment, s.
    ///
    /// Under thrust `Σ h_k Δφ_k / c` over the stays, which is `(1/c²) Σ h_k ∫ α dτ`; a
    /// line that stands in a gradient gathers `Σ (N_k − 1) Δτ_k`. The first stay counts
    /// from array time zero. `now` is the instant asked for, `instant_at` gives that of
    /// any earlier moment. A node that never moved gets the bits of
    /// [`Instant::clock_offset_s`]. `settled_m` is what a line that stands under load adds
    /// to every place; a line under thrust adds its own share afterwards, since its load
    /// changes during a stay.
    ///
    /// Accuracy: the rounding of double-double in each term, so 4 units of 2⁻⁵³ of the
    /// value plus 2⁻⁹⁶ of the largest `h Φ / c`. Left out, as the move takes no time: the
    /// motion from one place to the next.
    #[must_use]
    pub fn clock_offset_s(
        &self,
        now: &Instant,
        settled_m: Dd,
        instant_at: impl Fn(ArrayTime) -> Instant,
    ) -> Dd {
        let at = now.moment.at;
        let done = self.moves_until(at);
        if done.is_empty() {
            return now.clock_offset_s(Dd::new(self.first_m) + settled_m);
        }
        let by_rapidity = now.gradient_per_s2 == 0.0;
        let mut sum = RunningSum::default();
        let mut stay = |begin: &Instant, end: &Instant, position_m: f64| {
            let position_m = Dd::new(position_m) + settled_m;
            sum.add(if by_rapidity {
                (end.moment.rapidity - begin.moment.rapidity) * position_m
            } else {
                now.rate_minus_one(position_m) * end.moment.at.seconds_since(begin.moment.at)
            });
        };
        let mut begin = instant_at(ArrayTime::ZERO);
        let mut position_m = self.first_m;
        for (moment, next_m) in done {
            let end = instant_at(*moment);
            stay(&begin, &end, position_m);
            (begin, position_m) = (end, *next_m);
        }
        stay(&begin, now, position_m);
        if by_rapidity { sum.value() / SPEED_OF_LIGHT_M_S } else { sum.value() }
    }

    fn moves_until(&self, at: ArrayTime) -> &[(ArrayTime, f64)] {
        &self.moves[..self.moves.partition_point(|(moment, _)| *moment <= at)]
    }
}
