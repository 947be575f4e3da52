//! What spans several moments: peaks over the plan, margins, slack, ringing.

use super::flight;
use super::peaks::{ForcePeaks, Margin, Peak};
use super::period::{Period, Ringing, lowest_period_of};
use super::propellant::RunsDry;
use super::slack::{self, Mend, Slack};
use super::standing::{GradientWarning, Standing};
use super::{Course, Loads, State, Thrust};
use crate::cores;
use crate::model::array_time::ArrayTime;
use crate::model::constants::INVERSE_C2_S2_M2;
use crate::model::dd::Dd;
use crate::model::horizon::Records;

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
    /// every boundary; where an engine runs dry, up to that moment, from which the masses are
    /// not those of the line. `None` for a plan without phases.
    #[must_use]
    pub fn force_peaks(&self, gap: usize) -> Option<ForcePeaks> {
        match &self.course {
            Course::Thrust(thrust) => thrust.forced_corners(&self.propulsion).forces(
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

    /// The phase and the moment at which the force that counts for the strength of a span
    /// first passes a limit: inside a phase to the attosecond. `None` when it does not, and on
    /// a standing line.
    ///
    /// Where masses stay, in a time that grows with the logarithm of the number of phases;
    /// where they fall, with the number.
    #[must_use]
    pub fn force_beyond(&self, gap: usize, limit_n: f64) -> Option<(usize, ArrayTime)> {
        let thrust = self.thrust()?;
        let phases = thrust.flight.plan.phases();
        let is_tether = self.structure.members[gap].is_tether;
        let counts = |fore: f64, aft: f64| match is_tether {
            true => fore.max(aft),
            false => fore.abs().max(aft.abs()),
        };
        let is_beyond = |acceleration: Dd, burned: f64| {
            let ends = thrust.balance.ends(gap, burned);
            let compliance = &thrust.flight.compliance;
            let values = compliance.values(acceleration.to_f64(), burned);
            let force = |pull: Dd, row: usize| {
                let mut position = self.relaxed_m[row];
                if compliance.terms() > 0 {
                    position = position + acceleration * compliance.sum(row, &values);
                }
                (acceleration * pull / (acceleration * position * INVERSE_C2_S2_M2 + 1.0)).to_f64()
            };
            counts(force(ends.fore, gap), force(ends.aft, gap + 1)) > limit_n
        };
        let drive = |index: usize, at: ArrayTime| {
            let drive = thrust.flight.drive(&self.propulsion, Some(index), at);
            is_beyond(drive.acceleration_m_s2, drive.burned)
        };
        let peak = self.strength(gap)?.peak;
        let (phase, beyond) = if self.propulsion.is_falling() {
            let last = peak.phase?;
            let ends = |index: usize| {
                let end = phases[index].end.min(thrust.masses_hold_until(&self.propulsion));
                [phases[index].start, end].into_iter().find(|at| drive(index, *at))
            };
            let found = (0..=last).find_map(|index| Some((index, ends(index)?)));
            found.unwrap_or((last, peak.at))
        } else {
            let found = thrust.records().first(|acceleration| is_beyond(acceleration, 0.0))?;
            (found.phase, found.at)
        };
        let mut low = phases.get(phase)?.start.attoseconds();
        let mut high = beyond.attoseconds();
        if drive(phase, ArrayTime::from_attoseconds(low)) {
            high = low;
        }
        while high - low > 1 {
            let middle = low + (high - low) / 2;
            let is_over = drive(phase, ArrayTime::from_attoseconds(middle));
            if is_over { high = middle } else { low = middle }
        }
        Some((phase, ArrayTime::from_attoseconds(high)))
    }

    /// The records of the plan's thrust; `None` on a standing line.
    #[must_use]
    pub fn records(&self) -> Option<&Records> {
        self.thrust().map(Thrust::records)
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

    /// Whether the thrust of the plan never changes its direction; so too on a standing line.
    #[must_use]
    pub fn is_one_way(&self) -> bool {
        match &self.course {
            Course::Thrust(thrust) => {
                let range = &thrust.stretch.range;
                range.lowest_m_s2 == 0.0 || range.highest_m_s2 == 0.0
            }
            Course::Standing(_) => true,
        }
    }

    /// Between which positions a row stands under any thrust between the extremes of the plan
    /// and none, whatever has burned by then of what the plan burns, m.
    #[must_use]
    pub fn position_bounds_m(&self, row: usize) -> [Dd; 2] {
        let relaxed_m = self.relaxed_m[row];
        let mut bounds = [relaxed_m; 2];
        match &self.course {
            Course::Standing(standing) => return [standing.positions_m[row]; 2],
            Course::Thrust(thrust) if thrust.flight.compliance.terms() == 0 => {}
            Course::Thrust(thrust) => {
                let compliance = &thrust.flight.compliance;
                let range = &thrust.stretch.range;
                for acceleration_m_s2 in [range.lowest_m_s2, range.highest_m_s2] {
                    for burned in [0.0, range.most_burned] {
                        let values = compliance.values(acceleration_m_s2, burned);
                        let moved = Dd::new(acceleration_m_s2) * compliance.sum(row, &values);
                        let here = relaxed_m + moved;
                        if here > bounds[0] {
                            bounds[0] = here;
                        }
                        if here < bounds[1] {
                            bounds[1] = here;
                        }
                    }
                }
            }
        }
        bounds
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
                let until = thrust.masses_hold_until(&self.propulsion);
                let parts = slack::thrust_sections(&thrust.flight, &self.propulsion, until);
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
        let mends = vec![slack::move_thrust(&self.propulsion, sign, Some(share), gap), Mend::Boom];
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
        // A history may have many phases and a line many nodes: the nodes that move most in
        // some term of the stretch stand for the rest.
        let rows = thrust.flight.compliance.largest_rows();
        let compliance = &thrust.flight.compliance;
        // Where those nodes stand, and the acceleration, without the clocks of a whole state.
        let shape = |phase: Option<usize>, at: ArrayTime| -> (Dd, Vec<Dd>) {
            let drive = thrust.flight.drive(&self.propulsion, phase, at);
            let alpha = drive.acceleration_m_s2;
            let values = compliance.values(alpha.to_f64(), drive.burned);
            let place = |&row: &usize| match compliance.terms() {
                0 => self.relaxed_m[row],
                _ => self.relaxed_m[row] + alpha * compliance.sum(row, &values),
            };
            (alpha, rows.iter().map(place).collect())
        };
        let change = |index: usize, from: &(Dd, Vec<Dd>), to: &(Dd, Vec<Dd>), ramp_s: f64| {
            let ends = from.1.iter().zip(&to.1);
            let moves = ends.map(|(from, to)| (*to - *from).to_f64());
            let changes: Vec<(usize, f64)> = rows.iter().copied().zip(moves).collect();
            Ringing::new(index, ramp_s, period.period_s, &changes)
        };
        let phases = plan.phases();
        let of_phase = |index: usize| -> [Option<Ringing>; 2] {
            let phase = &phases[index];
            let before = match index.checked_sub(1) {
                Some(last) => phases[last].acceleration(phases[last].end),
                None => Dd::ZERO,
            };
            let is_step = before != phase.acceleration(phase.start);
            let is_ramp = flight::slope(phase) != 0.0;
            if !is_step && !is_ramp {
                return [None, None];
            }
            let begin = shape(Some(index), phase.start);
            let step = is_step.then(|| {
                let left = match index.checked_sub(1) {
                    Some(last) => shape(Some(last), phases[last].end),
                    None => shape(None, ArrayTime::from_attoseconds(-1)),
                };
                change(index, &left, &begin, 0.0)
            });
            let ramp = is_ramp.then(|| {
                let ramp_s = phase.end.seconds_since(phase.start).to_f64();
                change(index, &begin, &shape(Some(index), phase.end), ramp_s)
            });
            [step, ramp]
        };
        let mut found: Vec<Ringing> = cores::map(phases.len(), cores::MANY, of_phase)
            .into_iter()
            .flatten()
            .flatten()
            .collect();
        if let Some(last) = phases.len().checked_sub(1) {
            let left = shape(Some(last), phases[last].end);
            if !left.0.is_zero() {
                let after = shape(None, plan.end());
                found.push(change(phases.len(), &left, &after, 0.0));
            }
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
