//! Extremes over a whole plan: forces, felt acceleration, loaded positions.

use super::balance::Balance;
use super::compliance::Basis;
use super::flight::{Drive, Flight, drive, sections, slope};
use super::propellant::Propulsion;
use crate::model::array_time::ArrayTime;
use crate::model::constants::INVERSE_C2_S2_M2;
use crate::model::dd::Dd;
use crate::model::plan::Plan;

/// An extreme over the plan: its value and where it first occurs.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Peak {
    /// The value, in the unit of the quantity, signed.
    pub value: f64,
    /// Index of the phase; `None` on a standing line, which has no plan.
    pub phase: Option<usize>,
    /// The moment, exact at the ends of a phase.
    pub at: ArrayTime,
    /// Whether the limit from below at the end of the phase is meant.
    pub is_limit: bool,
}

/// The extremes of the axial force in one span, of both its ends.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ForcePeaks {
    /// Largest force, N, + tension.
    pub largest: Peak,
    /// Smallest force, N; below zero the span is pushed.
    pub smallest: Peak,
}

impl ForcePeaks {
    /// The one of larger modulus; the earlier one when they are equal.
    #[must_use]
    pub fn peak(&self) -> Peak {
        let (pull, push) = (self.largest, self.smallest);
        let (a, b) = (pull.value.abs(), push.value.abs());
        if a > b || (a == b && pull.at <= push.at) { pull } else { push }
    }
}

/// A value against what is allowed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Margin {
    /// The value that counts, its modulus.
    pub value: f64,
    /// What is allowed.
    pub limit: f64,
    /// `1 − value/limit`; below zero the rule is broken.
    pub margin: f64,
}

impl Margin {
    pub(super) fn new(value: f64, limit: f64) -> Margin {
        Margin { value, limit, margin: 1.0 - value / limit }
    }
}

/// The states at which anything monotone in force can be extreme.
///
/// With `m = M/M(0)`, force, felt acceleration and loaded position are quotients of
/// functions linear in `(α, α m)` by the rate, linear in `α`: quasi-linear, so over any
/// set of states they are extreme on its convex hull. The hull of the whole plan is found
/// once; each span then looks at its few corners. Inside a ramp with falling masses the
/// set is a curve, which is sampled and the best corner refined. Where masses are constant
/// the hull is the largest and the smallest acceleration. (Stretch moves `N` by less than
/// the strain times `N − 1`, which no corner is decided by.)
#[derive(Clone, Debug)]
pub(super) struct Corners {
    corners: Vec<Corner>,
}

/// What may be a corner in the first phases of a plan.
#[derive(Clone, Debug, Default)]
pub(super) struct Sampled {
    /// How many phases.
    phases: usize,
    found: Vec<Corner>,
}

impl Sampled {
    /// Looks through further phases of the same plan.
    pub fn go_on(&mut self, plan: &Plan, propulsion: &Propulsion, phases: usize) {
        for index in self.phases..phases {
            self.look(plan, propulsion, index, plan.end());
        }
        self.phases = self.phases.max(phases);
    }

    /// Looks through a phase, up to a moment.
    fn look(&mut self, plan: &Plan, propulsion: &Propulsion, index: usize, until: ArrayTime) {
        sample(plan, propulsion, index, until, &mut self.found);
        // A long history is folded into its hull as it comes.
        if self.found.len() > MOST_SAMPLES {
            self.found = hull(std::mem::take(&mut self.found));
        }
    }
}

/// States kept before they are folded into their hull.
const MOST_SAMPLES: usize = 4096;

#[derive(Clone, Debug)]
struct Corner {
    acceleration_m_s2: Dd,
    burned: f64,
    mass: f64,
    phase: usize,
    at: ArrayTime,
    is_limit: bool,
    /// Where the extreme may lie when this corner is a sample of a curve, and the drive there.
    bracket: Option<[(ArrayTime, Drive); 2]>,
    basis: Basis,
}

impl Corners {
    /// The corners of a plan of which the first phases have been looked through.
    pub fn new(flight: &Flight, propulsion: &Propulsion, begun: &Sampled) -> Corners {
        let mut sampled = begun.clone();
        sampled.go_on(&flight.plan, propulsion, flight.plan.phases().len());
        Corners::of(flight, sampled)
    }

    /// The corners of a plan up to a moment.
    pub fn until(flight: &Flight, propulsion: &Propulsion, until: ArrayTime) -> Corners {
        let mut sampled = Sampled::default();
        for (index, phase) in flight.plan.phases().iter().enumerate() {
            if index > 0 && phase.start >= until {
                break;
            }
            sampled.look(&flight.plan, propulsion, index, until);
        }
        Corners::of(flight, sampled)
    }

    fn of(flight: &Flight, sampled: Sampled) -> Corners {
        let mut corners = hull(sampled.found);
        for corner in &mut corners {
            corner.basis =
                flight.compliance.basis(corner.acceleration_m_s2.to_f64(), corner.burned);
        }
        Corners { corners }
    }

    /// Largest and smallest of a function of the corner.
    fn extremes(&self, value: impl Fn(&Corner) -> f64) -> Option<[(f64, &Corner); 2]> {
        let mut found: Option<[(f64, &Corner); 2]> = None;
        for corner in &self.corners {
            let here = (value(corner), corner);
            let Some([largest, smallest]) = &mut found else {
                found = Some([here, here]);
                continue;
            };
            if here.0 > largest.0 || (here.0 == largest.0 && comes_first(corner, largest.1)) {
                *largest = here;
            }
            if here.0 < smallest.0 || (here.0 == smallest.0 && comes_first(corner, smallest.1)) {
                *smallest = here;
            }
        }
        found
    }

    /// The extremes of the force in a gap; `None` for a plan without phases.
    pub fn forces(
        &self,
        flight: &Flight,
        propulsion: &Propulsion,
        balance: &Balance,
        relaxed_m: &[Dd],
        gap: usize,
    ) -> Option<ForcePeaks> {
        let mut found: Option<ForcePeaks> = None;
        for end in 0..2 {
            let row = gap + end;
            let force = |corner: &Corner| {
                let ends = balance.ends(gap, corner.burned);
                let ends = if end == 0 { ends.fore } else { ends.aft };
                (corner.acceleration_m_s2 * ends / self.rate(flight, relaxed_m, row, corner))
                    .to_f64()
            };
            let mut peaks = self.extremes(force)?.map(|(value, corner)| peak(value, corner));
            if propulsion.is_falling() {
                let curve = Curve { flight, propulsion, balance, relaxed_m, gap, end };
                for (which, sign) in [(0, 1.0), (1, -1.0)] {
                    let best = peaks[which].value;
                    for corner in &self.corners {
                        let value = force(corner);
                        if corner.bracket.is_none() || sign * (best - value) > 0.05 * best.abs() {
                            continue;
                        }
                        let position_m = self.position(flight, relaxed_m, row, corner);
                        let refined = curve.refine(corner, sign, position_m);
                        if let Some(better) =
                            refined.filter(|peak| sign * (peak.value - peaks[which].value) > 0.0)
                        {
                            peaks[which] = better;
                        }
                    }
                }
            }
            let [largest, smallest] = peaks;
            let both = found.get_or_insert(ForcePeaks { largest, smallest });
            if largest.value > both.largest.value {
                both.largest = largest;
            }
            if smallest.value < both.smallest.value {
                both.smallest = smallest;
            }
        }
        found
    }

    /// The extreme of larger modulus of the felt acceleration of a row, m/s².
    pub fn felt_acceleration(&self, flight: &Flight, relaxed_m: &[Dd], row: usize) -> Option<Peak> {
        let found = self.extremes(|corner| {
            (corner.acceleration_m_s2 / self.rate(flight, relaxed_m, row, corner)).to_f64()
        })?;
        let [(most, first), (least, second)] = found;
        let (a, b) = (most.abs(), least.abs());
        let takes_first = a > b || (a == b && comes_first(first, second));
        Some(if takes_first { peak(most, first) } else { peak(least, second) })
    }

    /// Foremost and aftmost loaded position of a row over the plan, m, the coasts before
    /// and after it included.
    pub fn positions(
        &self,
        flight: &Flight,
        propulsion: &Propulsion,
        relaxed_m: &[Dd],
        row: usize,
    ) -> [Dd; 2] {
        let mut range = [relaxed_m[row]; 2];
        let widen = |range: &mut [Dd; 2], here: Dd| {
            if here > range[0] {
                range[0] = here;
            }
            if here < range[1] {
                range[1] = here;
            }
        };
        for corner in &self.corners {
            widen(&mut range, self.position(flight, relaxed_m, row, corner));
        }
        let reach = (range[0] - range[1]).to_f64();
        for corner in self.corners.iter().filter(|corner| corner.bracket.is_some()) {
            let here = self.position(flight, relaxed_m, row, corner);
            for (edge, sign) in [(range[0], 1.0), (range[1], -1.0)] {
                if (edge - here).abs().to_f64() < 0.05 * reach {
                    let at = |moment: ArrayTime| {
                        let drive = flight.drive(propulsion, Some(corner.phase), moment);
                        let alpha = drive.acceleration_m_s2;
                        let basis = flight.compliance.basis(alpha.to_f64(), drive.burned);
                        relaxed_m[row] + alpha * flight.compliance.sum(row, &basis.values)
                    };
                    widen(&mut range, summit(corner, sign, at));
                }
            }
        }
        range
    }

    /// Smallest `N − 1` of a row over the plan, at its loaded position.
    pub fn smallest_rate_minus_one(
        &self,
        flight: &Flight,
        relaxed_m: &[Dd],
        row: usize,
    ) -> Option<Peak> {
        let found =
            self.extremes(|corner| (self.rate(flight, relaxed_m, row, corner) - 1.0).to_f64())?;
        Some(peak(found[1].0, found[1].1))
    }

    fn position(&self, flight: &Flight, relaxed_m: &[Dd], row: usize, corner: &Corner) -> Dd {
        if flight.compliance.terms() == 0 {
            return relaxed_m[row];
        }
        let compliance = flight.compliance.sum(row, &corner.basis.values);
        relaxed_m[row] + corner.acceleration_m_s2 * compliance
    }

    fn rate(&self, flight: &Flight, relaxed_m: &[Dd], row: usize, corner: &Corner) -> Dd {
        let position = self.position(flight, relaxed_m, row, corner);
        corner.acceleration_m_s2 * position * INVERSE_C2_S2_M2 + 1.0
    }
}

fn peak(value: f64, corner: &Corner) -> Peak {
    Peak { value, phase: Some(corner.phase), at: corner.at, is_limit: corner.is_limit }
}

/// The earlier of two equal extremes; at a boundary the one that is attained, not the
/// limit from below.
fn comes_first(a: &Corner, b: &Corner) -> bool {
    (a.at, a.is_limit) < (b.at, b.is_limit)
}

/// A force along the curve of a ramp with falling masses.
struct Curve<'a> {
    flight: &'a Flight,
    propulsion: &'a Propulsion,
    balance: &'a Balance,
    relaxed_m: &'a [Dd],
    gap: usize,
    end: usize,
}

impl Curve<'_> {
    fn balance(&self, burned: f64) -> Dd {
        let ends = self.balance.ends(self.gap, burned);
        if self.end == 0 { ends.fore } else { ends.aft }
    }

    /// `N² dT/dτ = α′ j − N α j′ x′` for a node that stands at a position.
    fn slope(&self, drive: &Drive, position_m: Dd) -> f64 {
        let alpha = drive.acceleration_m_s2;
        let rate = alpha * position_m * INVERSE_C2_S2_M2 + 1.0;
        let falling = self.balance.slope(self.gap).to_f64() * drive.burning_per_s;
        drive.slope_m_s3 * self.balance(drive.burned).to_f64() - (rate * alpha).to_f64() * falling
    }

    /// The extreme inside a corner's bracket: the zero of the slope, to the attosecond or
    /// as near as the slope has a sign. `None` when the slope does not change sign there.
    fn refine(&self, corner: &Corner, sign: f64, position_m: Dd) -> Option<Peak> {
        let [from, to] = corner.bracket?;
        let rises = |drive: &Drive| sign * self.slope(drive, position_m) > 0.0;
        if !rises(&from.1) || rises(&to.1) {
            return None;
        }
        let drive = |at| self.flight.drive(self.propulsion, Some(corner.phase), at);
        let (mut low, mut high) = (from.0.attoseconds(), to.0.attoseconds());
        while high - low > 1 {
            let middle = low + (high - low) / 2;
            let is_rising = rises(&drive(ArrayTime::from_attoseconds(middle)));
            if is_rising { low = middle } else { high = middle }
        }
        let at = ArrayTime::from_attoseconds(high);
        let there = drive(at);
        let alpha = there.acceleration_m_s2;
        let basis = self.flight.compliance.basis(alpha.to_f64(), there.burned);
        let row = self.gap + self.end;
        let mut position = self.relaxed_m[row];
        if self.flight.compliance.terms() > 0 {
            position = position + alpha * self.flight.compliance.sum(row, &basis.values);
        }
        let rate = alpha * position * INVERSE_C2_S2_M2 + 1.0;
        let value = (alpha * self.balance(there.burned) / rate).to_f64();
        Some(Peak { value, phase: Some(corner.phase), at, is_limit: false })
    }
}

/// The largest (or, with `sign` −1, the smallest) value in a corner's bracket, by golden
/// section: good to the square of the last interval.
fn summit(corner: &Corner, sign: f64, value: impl Fn(ArrayTime) -> Dd) -> Dd {
    const SHARE: f64 = 0.381_966_011_250_105;
    let [from, to] = corner.bracket.map_or([corner.at; 2], |bracket| bracket.map(|end| end.0));
    let (mut low, mut high) = (from.attoseconds(), to.attoseconds());
    let inner = |low: i128, high: i128, share: f64| {
        ArrayTime::from_attoseconds(low + ((high - low) as f64 * share) as i128)
    };
    for _ in 0..40 {
        let (left, right) = (inner(low, high, SHARE), inner(low, high, 1.0 - SHARE));
        if (value(left) - value(right)).to_f64() * sign > 0.0 {
            high = right.attoseconds();
        } else {
            low = left.attoseconds();
        }
    }
    value(ArrayTime::from_attoseconds(low + (high - low) / 2))
}

/// Adds the states of one phase, up to a moment, that may be corners: both ends, and samples
/// of the curve between them.
fn sample(
    plan: &Plan,
    propulsion: &Propulsion,
    index: usize,
    until: ArrayTime,
    found: &mut Vec<Corner>,
) {
    let phase = &plan.phases()[index];
    let end = phase.end.min(until);
    let corner_at =
        |at: ArrayTime, drive: Drive, bracket: Option<[(ArrayTime, Drive); 2]>| Corner {
            acceleration_m_s2: drive.acceleration_m_s2,
            burned: drive.burned,
            mass: 1.0 - drive.burned,
            phase: index,
            at,
            is_limit: at == phase.end,
            bracket,
            basis: Basis::default(),
        };
    let drive = |at| drive(plan, propulsion, Some(index), at);
    if !propulsion.is_falling() || slope(phase) == 0.0 {
        found.extend([phase.start, end].map(|at| corner_at(at, drive(at), None)));
        return;
    }
    let mut moments = vec![phase.start, end];
    let spent = |at| plan.velocity_spent_m_s(at).to_f64();
    let length = end.attoseconds() - phase.start.attoseconds();
    let fall = (spent(end) - spent(phase.start)) * propulsion.inverse_speed_s_m();
    // A short piece of a curve has one extreme at most, and one sample finds it.
    let count = (2.0 + 14.0 * fall.min(1.0) + 8.0 * fall).min(400.0) as i128;
    for step in 1..count {
        let at = phase.start.attoseconds() + length * step / count;
        moments.push(ArrayTime::from_attoseconds(at));
    }
    if let Some(zero) = sections(phase) {
        let at = phase.start.seconds() + zero;
        moments.extend(ArrayTime::nearest(at).filter(|at| *at < end));
    }
    moments.sort();
    moments.dedup();
    let is_curve = moments.len() > 2;
    let drives: Vec<(ArrayTime, Drive)> = moments.into_iter().map(|at| (at, drive(at))).collect();
    for (place, &(at, drive)) in drives.iter().enumerate() {
        let before = drives[place.saturating_sub(1)];
        let after = drives[(place + 1).min(drives.len() - 1)];
        found.push(corner_at(at, drive, is_curve.then_some([before, after])));
    }
}

/// The convex hull in the plane of `α` and `α m`, by the monotone chain (Andrew, Inf.
/// Process. Lett. 9 (1979) 216). Of equal states the first attained is kept.
fn hull(mut states: Vec<Corner>) -> Vec<Corner> {
    let place = |corner: &Corner| {
        let alpha = corner.acceleration_m_s2.to_f64();
        (alpha, alpha * corner.mass)
    };
    states.sort_by(|a, b| {
        let (left, right) = (place(a), place(b));
        left.0
            .total_cmp(&right.0)
            .then(left.1.total_cmp(&right.1))
            .then(a.at.cmp(&b.at))
            .then(a.is_limit.cmp(&b.is_limit))
    });
    states.dedup_by(|later, first| place(later) == place(first));
    let mut chain: Vec<Corner> = Vec::new();
    for pass in 0..2 {
        let floor = chain.len();
        let ordered: Box<dyn Iterator<Item = &Corner>> =
            if pass == 0 { Box::new(states.iter()) } else { Box::new(states.iter().rev()) };
        for state in ordered {
            while chain.len() >= floor + 2 {
                let (a, b) = (place(&chain[chain.len() - 2]), place(&chain[chain.len() - 1]));
                let c = place(state);
                let turn = (b.0 - a.0) * (c.1 - a.1) - (b.1 - a.1) * (c.0 - a.0);
                if turn > 0.0 {
                    break;
                }
                chain.pop();
            }
            chain.push(state.clone());
        }
    }
    chain.sort_by_key(|corner| (corner.at, corner.is_limit, corner.phase));
    chain.dedup_by(|later, first| later.at == first.at && later.phase == first.phase);
    chain
}
