//! Tethers that would be pushed: in which phase, from when, and what would mend it.

use super::balance::Balance;
use super::flight::{Flight, sections};
use super::peaks::Peak;
use super::propellant::Propulsion;
use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;

/// A tether that would have to push: the plan breaks a rule.
///
/// A force of exactly zero is unloaded, not slack, and so is one within the rounding of
/// its inputs (1e-14 of the masses it is the balance of).
#[derive(Clone, Debug, PartialEq)]
pub struct Slack {
    /// Row of the fore end of the tether; the aft end is the next row.
    pub gap: usize,
    /// Index of the phase in which it first goes slack; `None` on a standing line.
    pub phase: Option<usize>,
    /// From when, array time: a moment inside the phase where a ramp passes through zero or
    /// burning tips the balance.
    pub at: ArrayTime,
    /// The most it would have to push, N (below zero), and when.
    pub worst: Peak,
    /// What would mend it, the simplest first.
    pub mends: Vec<Mend>,
}

/// A change that would keep a tether from going slack.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Mend {
    /// Move at least this share of the thrust (of a standing line: of the support) from
    /// one side of the tether to the other: to this row or beyond, seen from the tether.
    MoveThrust {
        /// Share to be moved, above 0 and no more than there is on that side, with the masses
        /// as they are. `None` where propellant burns: which engine burns how much changes
        /// with the shares, so none can be promised.
        share: Option<f64>,
        /// The nearest row it may go to.
        to_row: usize,
        /// The share there is on the side it would be moved from.
        of: f64,
    },
    /// Keep the thrust in this direction throughout: the tether is taut there.
    OneDirection {
        /// Whether that is acceleration towards the fore end.
        fore: bool,
    },
    /// File the span as a boom, which can push.
    Boom,
}

/// A part of the plan in which the acceleration keeps its sign.
#[derive(Clone, Copy, Debug)]
pub(super) struct Section {
    phase: usize,
    begin: ArrayTime,
    /// +1 or −1.
    sign: f64,
    burned: [f64; 2],
}

/// The parts of a plan, up to a moment, in which there is thrust, each of one sign; neighbours
/// of one sign are one part, so a long history of one sign is.
pub(super) fn thrust_sections(
    flight: &Flight,
    propulsion: &Propulsion,
    until: ArrayTime,
) -> Vec<Section> {
    let mut found: Vec<Section> = Vec::new();
    for (index, phase) in flight.plan.phases().iter().enumerate() {
        if index > 0 && phase.start >= until {
            break;
        }
        let last = phase.end.min(until);
        let zero = sections(phase)
            .and_then(|after| ArrayTime::nearest(phase.start.seconds() + after))
            .filter(|zero| *zero > phase.start && *zero < last);
        let mut begin = phase.start;
        for end in zero.into_iter().chain([last]) {
            // The end that is not the zero tells the sign.
            let ends = [begin, end].map(|at| phase.acceleration(at).to_f64());
            let leading = if ends[0].abs() > ends[1].abs() { ends[0] } else { ends[1] };
            let sign = leading.signum();
            let burned = |at| match propulsion.is_falling() {
                true => flight.drive(propulsion, Some(index), at).burned,
                false => 0.0,
            };
            match found.last_mut() {
                _ if leading == 0.0 => {}
                Some(Section { sign: same, burned: [_, until], .. }) if *same == sign => {
                    *until = burned(end);
                }
                _ => {
                    let burned = [burned(begin), burned(end)];
                    found.push(Section { phase: index, begin, sign, burned });
                }
            }
            begin = end;
        }
    }
    found
}

/// Whether a tether in a gap goes slack, and from when.
pub(super) fn first_slack(
    flight: &Flight,
    propulsion: &Propulsion,
    balance: &Balance,
    parts: &[Section],
    gap: usize,
    worst: Peak,
) -> Option<Slack> {
    let allowed = -balance.rounding(gap);
    let pull = |sign: f64, burned: f64| {
        let ends = balance.ends(gap, burned);
        [ends.fore.to_f64() * sign, ends.aft.to_f64() * sign]
    };
    let is_slack = |sign: f64, burned: f64| pull(sign, burned).iter().any(|j| *j < allowed);
    let part = parts.iter().find(|part| part.burned.iter().any(|x| is_slack(part.sign, *x)))?;
    let (phase, at) = if is_slack(part.sign, part.burned[0]) {
        (part.phase, part.begin)
    } else {
        // Burning tips the balance inside the part: the end that goes first counts.
        let start = balance.ends(gap, 0.0);
        let slope = balance.slope(gap);
        let late = pull(part.sign, part.burned[1]);
        let fraction = [(start.fore, late[0]), (start.aft, late[1])]
            .into_iter()
            .filter(|(_, pull)| *pull < allowed)
            .map(|(start, _)| (start / slope).to_f64())
            .fold(f64::INFINITY, f64::min);
        propulsion.when_burned(&flight.plan, fraction).unwrap_or((part.phase, part.begin))
    };
    let mends = mends(propulsion, balance, parts, gap, &is_slack);
    Some(Slack { gap, phase: Some(phase), at, worst, mends })
}

fn mends(
    propulsion: &Propulsion,
    balance: &Balance,
    parts: &[Section],
    gap: usize,
    is_slack: &dyn Fn(f64, f64) -> bool,
) -> Vec<Mend> {
    let mut mends = Vec::new();
    let flies = |sign: f64| parts.iter().any(|part| part.sign == sign);
    if flies(1.0) && flies(-1.0) {
        // The pull is linear in what has burned: it is taut in between when it is at both ends.
        let last = parts.last().map_or(0.0, |part| part.burned[1]);
        let is_taut = |sign: f64| ![0.0, last].iter().any(|burned| is_slack(sign, *burned));
        let taut = [1.0, -1.0].into_iter().find(|sign| is_taut(*sign));
        mends.extend(taut.map(|sign| Mend::OneDirection { fore: sign > 0.0 }));
    } else {
        let sign = if flies(1.0) { 1.0 } else { -1.0 };
        let share = parts
            .iter()
            .flat_map(|part| part.burned)
            .map(|burned| {
                let mass = propulsion.mass_at_start_kg() * (1.0 - burned);
                let ends = balance.ends(gap, burned);
                share_to_move(sign, ends.fore, ends.aft, mass)
            })
            .fold(0.0, f64::max);
        let share = (!propulsion.is_falling()).then_some(share);
        mends.push(move_thrust(propulsion, sign, share, gap));
    }
    mends.push(Mend::Boom);
    mends
}

/// Under thrust towards the fore end a tether needs `S_aft M ≤ M_aft` at its aft end; in the
/// other direction `S_aft M ≥ M_aft` at its fore end.
pub(super) fn share_to_move(sign: f64, fore: Dd, aft: Dd, whole: Dd) -> f64 {
    if sign > 0.0 { (-aft / whole).to_f64() } else { (fore / whole).to_f64() }
}

/// The share of the thrust on the side of a tether from which it would have to be moved.
fn share_aside(propulsion: &Propulsion, sign: f64, gap: usize) -> f64 {
    let is_aside = |row: usize| if sign > 0.0 { row > gap } else { row <= gap };
    let engines = propulsion.engines().iter().zip(propulsion.shares());
    let aside = engines.filter(|(engine, _)| is_aside(engine.row));
    aside.map(|(_, share)| share.to_f64()).sum()
}

pub(super) fn move_thrust(
    propulsion: &Propulsion,
    sign: f64,
    share: Option<f64>,
    gap: usize,
) -> Mend {
    let of = share_aside(propulsion, sign, gap);
    let to_row = if sign > 0.0 { gap } else { gap + 1 };
    Mend::MoveThrust { share: share.map(|share| share.min(of)), to_row, of }
}
