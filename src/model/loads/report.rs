//! What spans several moments: peaks over the plan, margins, slack, ringing.

use super::flight;
use super::peaks::{ForcePeaks, Margin, Peak};
use super::period::{Period, Ringing, lowest_period_of};
use super::propellant::RunsDry;
use super::slack::{self, Mend, Slack};
use super::standing::{GradientWarning, Standing};
use super::{Course, Loads, State, Thrust};
use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;

/// The strength of a span against the peak force that counts: tension in a tether, either
/// sign in a boom.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Strength {
    /// The peak that counts, N, and when.
    pub peak: Peak,
    /// Its modulus against the strength divided by the safety factor.
    pub margin: Margin,
}

impl Loads {
    fn thrust(&self) -> Option<&Thrust> {
        match &self.course {
            Course::Thrust(thrust) => Some(thrust),
            Course::Standing(_) => None,
        }
    }

    /// The extremes of the force in a span over the whole plan, at both one-sided values of
    /// every boundary; `None` for a plan without phases.
    #[must_use]
    pub fn force_peaks(&self, gap: usize) -> Option<ForcePeaks> {
        match &self.course {
            Course::Thrust(thrust) => thrust.corners(&self.propulsion).forces(
                &thrust.flight,
                &self.propulsion,
                &thrust.balance,
                &self.relaxed_m,
                gap,
            ),
            Course::Standing(_) => {
                let [fore, aft] = self.span_force_n(&self.state(ArrayTime::ZERO), gap);
                let (largest, smallest) = (fore.max(aft), fore.min(aft));
                Some(ForcePeaks { largest: still(largest), smallest: still(smallest) })
            }
        }
    }

    /// The strength of a span against its peak force; `None` where no strength is given.
    #[must_use]
    pub fn strength(&self, gap: usize) -> Option<Strength> {
        let member = &self.structure.members[gap];
        let limit = member.strength_n? / member.safety_factor;
        let peaks = self.force_peaks(gap)?;
        let peak = if member.is_tether { peaks.largest } else { peaks.peak() };
        let value = if member.is_tether { peak.value.max(0.0) } else { peak.value.abs() };
        Some(Strength { peak, margin: Margin::new(value, limit) })
    }

    /// The felt acceleration of a row with the largest modulus over the plan, m/s², at its
    /// loaded position; `None` for a plan without phases.
    #[must_use]
    pub fn felt_acceleration_peak(&self, row: usize) -> Option<Peak> {
        match &self.course {
            Course::Thrust(thrust) => thrust.corners(&self.propulsion).felt_acceleration(
                &thrust.flight,
                &self.relaxed_m,
                row,
            ),
            Course::Standing(_) => {
                let state = self.state(ArrayTime::ZERO);
                Some(still(self.felt_acceleration_m_s2(&state, row).to_f64()))
            }
        }
    }

    /// The felt acceleration of a row against its rating; `None` where none is given.
    #[must_use]
    pub fn rating(&self, row: usize) -> Option<(Peak, Margin)> {
        let limit = self.structure.nodes[row].rating_m_s2?;
        let peak = self.felt_acceleration_peak(row)?;
        Some((peak, Margin::new(peak.value.abs(), limit)))
    }

    /// Acceleration a row feels at a moment, m/s², at its loaded position.
    #[must_use]
    pub fn felt_acceleration_m_s2(&self, state: &State, row: usize) -> Dd {
        state.instant.felt_acceleration_m_s2(self.position_m(state, row))
    }

    /// Foremost and aftmost loaded position of a row over the plan, m, the coasts before and
    /// after it included.
    #[must_use]
    pub fn position_extremes_m(&self, row: usize) -> [Dd; 2] {
        match &self.course {
            Course::Thrust(thrust) => thrust.corners(&self.propulsion).positions(
                &thrust.flight,
                &self.propulsion,
                &self.relaxed_m,
                row,
            ),
            Course::Standing(standing) => [standing.positions_m[row]; 2],
        }
    }

    /// The smallest `N − 1` of a row over the plan, at its loaded position: what the horizon
    /// rule judges. `None` for a plan without phases.
    #[must_use]
    pub fn smallest_rate_minus_one(&self, row: usize) -> Option<Peak> {
        match &self.course {
            Course::Thrust(thrust) => thrust.corners(&self.propulsion).smallest_rate_minus_one(
                &thrust.flight,
                &self.relaxed_m,
                row,
            ),
            Course::Standing(standing) => {
                let instant = self.state(ArrayTime::ZERO).instant;
                Some(still(instant.rate_minus_one(standing.positions_m[row]).to_f64()))
            }
        }
    }

    /// Every tether that would be pushed, fore to aft.
    #[must_use]
    pub fn slack(&self) -> Vec<Slack> {
        let tethers =
            (0..self.structure.members.len()).filter(|gap| self.structure.members[*gap].is_tether);
        match &self.course {
            Course::Thrust(thrust) => {
                let parts = slack::thrust_sections(&thrust.flight, &self.propulsion);
                tethers
                    .filter_map(|gap| {
                        let worst = self.force_peaks(gap)?.smallest;
                        if worst.value >= 0.0 {
                            return None;
                        }
                        slack::first_slack(
                            &thrust.flight,
                            &self.propulsion,
                            &thrust.balance,
                            &parts,
                            gap,
                            worst,
                        )
                    })
                    .collect()
            }
            Course::Standing(standing) => {
                tethers.filter_map(|gap| self.slack_standing(standing, gap)).collect()
            }
        }
    }

    fn slack_standing(&self, standing: &Standing, gap: usize) -> Option<Slack> {
        let ends = standing.ends[gap];
        if ends.fore.hi.min(ends.aft.hi) >= -standing.roundings[gap] {
            return None;
        }
        let worst = self.force_peaks(gap)?.smallest;
        let sign = if standing.weight_n.hi < 0.0 { -1.0 } else { 1.0 };
        let share = slack::share_to_move(
            sign,
            ends.fore.scale(sign),
            ends.aft.scale(sign),
            standing.weight_n.abs(),
        );
        let mends = vec![slack::move_thrust(sign, share, gap), Mend::Boom];
        Some(Slack { gap, phase: None, at: ArrayTime::ZERO, worst, mends })
    }

    /// The engines that run dry before the plan ends.
    #[must_use]
    pub fn running_dry(&self) -> Vec<RunsDry> {
        self.thrust()
            .map_or_else(Vec::new, |thrust| self.propulsion.running_dry(&thrust.flight.plan))
    }

    /// The lowest axial period with the masses of array time zero, at which it is longest;
    /// `None` when nothing can swing.
    #[must_use]
    pub fn lowest_period(&self) -> Option<Period> {
        let lengths: Vec<f64> = self.rods.lengths_m.iter().map(|l| l.to_f64()).collect();
        lowest_period_of(&self.structure, &self.masses_kg, &lengths)
    }

    /// What every ramp and every step of the plan leaves ringing, given the lowest axial
    /// period, in the order of time. Empty on a standing line.
    #[must_use]
    pub fn ringing(&self, period: &Period) -> Vec<Ringing> {
        let Some(thrust) = self.thrust() else { return Vec::new() };
        let plan = &thrust.flight.plan;
        let mut found = Vec::new();
        // A history may have many phases and a line many nodes: the nodes that move most in
        // some term of the stretch stand for the rest.
        let rows = thrust.flight.compliance.largest_rows();
        let moves = |from: &State, to: &State| {
            rows.iter()
                .map(|&row| {
                    let change = self.position_m(to, row) - self.position_m(from, row);
                    (row, change.to_f64())
                })
                .collect::<Vec<_>>()
        };
        let mut before = self.state(ArrayTime::from_attoseconds(-1));
        for (index, phase) in plan.phases().iter().enumerate() {
            let begin = self.state(phase.start);
            let end = self.state_of(thrust, Some(index), phase.end);
            let change = |from: &State, to: &State, ramp_s: f64| {
                Ringing::new(index, ramp_s, period.period_s, &moves(from, to))
            };
            if before.instant.moment.acceleration_m_s2 != begin.instant.moment.acceleration_m_s2 {
                found.push(change(&before, &begin, 0.0));
            }
            if flight::slope(phase) != 0.0 {
                let ramp_s = phase.end.seconds_since(phase.start).to_f64();
                found.push(change(&begin, &end, ramp_s));
            }
            before = end;
        }
        let after = self.state(plan.end());
        if before.instant.moment.acceleration_m_s2 != after.instant.moment.acceleration_m_s2 {
            let changes = moves(&before, &after);
            found.push(Ringing::new(plan.phases().len(), 0.0, period.period_s, &changes));
        }
        found
    }

    /// The warning that the first-order form of a standing line's gradient may show.
    #[must_use]
    pub fn gradient_warning(&self) -> Option<GradientWarning> {
        match &self.course {
            Course::Thrust(_) => None,
            Course::Standing(standing) => standing.gradient_warning(),
        }
    }

    /// Largest relative error of a loaded position by the series it is read from.
    #[must_use]
    pub fn series_error(&self) -> f64 {
        self.thrust().map_or(0.0, |thrust| thrust.flight.compliance.truncation)
    }
}

/// A value of a line that stands still.
fn still(value: f64) -> Peak {
    Peak { value, phase: None, at: ArrayTime::ZERO, is_limit: false }
}
