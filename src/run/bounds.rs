//! Whether every node can fly what a run asks of it.

use crate::layout::Course;
use crate::model::array_time::ArrayTime;
use crate::model::constants::C2_M2_S2;
use crate::model::dd::Dd;
use crate::model::horizon::{self, Extreme};
use crate::model::plan::{Phase, Plan};
use crate::model::rates::is_realisable;

use super::{HorizonFault, Run, RunFault};

impl Run {
    /// Checks every node still aboard, where it stands at `from`, against a plan from that
    /// moment on. Only the foremost and the aftmost node matter: `N` is linear in position.
    pub(super) fn check_line(&self, plan: Option<&Plan>, from: ArrayTime) -> Result<(), RunFault> {
        let Some(aboard) = self.extreme_rows(from) else {
            return Ok(());
        };
        for (row, position_m) in aboard {
            self.check_position(plan, from, row, position_m, false)?;
        }
        Ok(())
    }

    /// Checks one node at one position from a moment on.
    pub(super) fn check_position(
        &self,
        plan: Option<&Plan>,
        from: ArrayTime,
        row: usize,
        position_m: f64,
        moved: bool,
    ) -> Result<(), RunFault> {
        let reached = match plan {
            Some(plan) => first_unrealisable(plan, from, position_m),
            None => {
                let gravity = self.check_standing(row, position_m)?;
                gravity.map(|gravity| (None, from, Dd::new(gravity)))
            }
        };
        let Some((phase, at, acceleration_m_s2)) = reached else {
            return Ok(());
        };
        let offered = horizon::partners(Extreme { acceleration_m_s2, phase: 0, at }, position_m);
        Err(RunFault::Horizon(Box::new(HorizonFault {
            name: self.layout.nodes[row].name.to_string(),
            position_m,
            phase,
            at,
            largest_acceleration_m_s2: offered.largest_acceleration_m_s2,
            nearest_position_m: offered.nearest_position_m,
            moved,
        })))
    }

    /// On a standing line: the gravity, when it puts a position beyond the horizon.
    ///
    /// With a gradient, `N = 1 + (g h − Γ h²/2)/c²` and `|Γ h| ≤ |g|` keep the bend at
    /// most half of `g h`, so a position that `g` alone allows is allowed.
    fn check_standing(&self, row: usize, position_m: f64) -> Result<Option<f64>, RunFault> {
        let Course::Standing(standing) = &self.layout.course else {
            return Ok(None);
        };
        let (gravity, gradient) = (standing.gravity_m_s2, standing.gradient_per_s2);
        if (gradient * position_m).abs() > gravity.abs() {
            return Err(RunFault::GravityTurned {
                name: self.layout.nodes[row].name.to_string(),
                farthest_m: (gravity / gradient).abs().next_down(),
            });
        }
        let bend = 0.5 * gradient * position_m;
        let beyond = !is_realisable(Dd::difference(gravity, bend), position_m);
        Ok(beyond.then_some(gravity))
    }

    /// The foremost and the aftmost node still aboard at a moment, with their positions.
    fn extreme_rows(&self, at: ArrayTime) -> Option<[(usize, f64); 2]> {
        let mut found: Option<[(usize, f64); 2]> = None;
        for (row, node) in self.layout.nodes.iter().enumerate() {
            let mut position_m = node.position_m;
            if !self.moved.is_empty()
                && let Some(moved) = self.moved.get(&row)
            {
                if moved.released.is_some() {
                    continue;
                }
                position_m = moved.place.position_m(at);
            }
            let [fore, aft] = found.get_or_insert([(row, position_m); 2]);
            if position_m > fore.1 {
                *fore = (row, position_m);
            }
            if position_m < aft.1 {
                *aft = (row, position_m);
            }
        }
        found
    }
}

/// The first moment from `from` on at which `N` of a position is not above zero, with the
/// index of its phase, and the acceleration that brings it farthest below.
fn first_unrealisable(
    plan: &Plan,
    from: ArrayTime,
    position_m: f64,
) -> Option<(Option<usize>, ArrayTime, Dd)> {
    // The acceleration whose product with the position is lowest.
    let is_worse = |one: Dd, other: Dd| if position_m > 0.0 { one < other } else { one > other };
    let first = plan.phases().partition_point(|phase| phase.end <= from);
    let left = &plan.phases()[first..];
    let ends =
        |phase: &Phase| [phase.acceleration(phase.start.max(from)), phase.acceleration(phase.end)];
    let worst = left
        .iter()
        .flat_map(ends)
        .reduce(|worst, here| if is_worse(here, worst) { here } else { worst })?;
    if is_realisable(worst, position_m) {
        return None;
    }
    let index = left.iter().position(|phase| {
        ends(phase).into_iter().any(|acceleration| !is_realisable(acceleration, position_m))
    })?;
    let phase = &left[index];
    let start = phase.start.max(from);
    let at = if is_realisable(phase.acceleration(start), position_m) {
        let limit = -C2_M2_S2 / Dd::new(position_m);
        // Rounding may put the limit a hair outside the ramp whose end passes it.
        phase
            .moment_of(limit)
            .and_then(|after| ArrayTime::nearest(phase.start.seconds() + after))
            .unwrap_or(phase.end)
    } else {
        start
    };
    Some((Some(first + index), at, worst))
}
