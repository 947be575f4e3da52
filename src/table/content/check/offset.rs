//! How far the clocks of a pair part over the plan.
//!
//! `(h_j − h_i) φ/c` is extreme where the rapidity is: at phase ends and where a ramp passes
//! through zero. Before the plan it is zero and after it, while the line coasts, it stays.

use super::placed::Placed;
use super::trial::Trial;
use super::{JudgedOver, Judgement, KEPT, NO_PHASE, NO_PLAN, ONE_MOMENT, Rule, RuleState, Subject};
use crate::layout::{Course, Layout, Standing};
use crate::model::array_time::ArrayTime;
use crate::model::constants::{C2_M2_S2, SPEED_OF_LIGHT_M_S};
use crate::model::dd::Dd;
use crate::model::plan::{Moment, Phase, Plan};
use crate::model::rates::Instant;
use crate::table::content::words::{LENGTH, SPEED, TIME, listed};

/// How long a standing line is judged for: its clocks part without end.
pub(super) const STANDING_FOR: ArrayTime = ArrayTime::from_seconds(86_400);

/// A rapidity, and where it first occurs.
#[derive(Clone, Copy, Debug)]
pub(super) struct Reached {
    rapidity: Dd,
    phase: Result<usize, &'static str>,
    at: ArrayTime,
}

/// What parts the clocks of a line.
pub(super) enum Parting<'a> {
    /// The largest rapidity of a plan either way, and for each phase the largest that has
    /// been reached by its end.
    Plan { plan: &'a Plan, peak: Reached, sizes: Vec<Dd> },
    /// One moment.
    Moment(Reached, Instant),
    /// Gravity, which parts them evenly.
    Standing(Instant),
}

impl<'a> Parting<'a> {
    pub(super) fn of(layout: &'a Layout, span: JudgedOver) -> Parting<'a> {
        match (&layout.course, span) {
            (Course::Thrust(plan), JudgedOver::Plan) => Parting::of_plan(plan),
            (Course::Thrust(plan), JudgedOver::Moment(at)) => {
                let moment = plan.moment(at);
                let phase = moment.phase.ok_or(NO_PHASE);
                let reached = Reached { rapidity: moment.rapidity, phase, at };
                Parting::Moment(reached, Instant { moment, gradient_per_s2: 0.0 })
            }
            (Course::Standing(standing), JudgedOver::Plan) => {
                Parting::Standing(standing_at(standing, STANDING_FOR))
            }
            (Course::Standing(standing), JudgedOver::Moment(at)) => {
                let reached = Reached { rapidity: Dd::ZERO, phase: Err(NO_PHASE), at };
                Parting::Moment(reached, standing_at(standing, at))
            }
        }
    }

    fn of_plan(plan: &'a Plan) -> Parting<'a> {
        let mut peak = Reached { rapidity: Dd::ZERO, phase: Err(NO_PHASE), at: ArrayTime::ZERO };
        let mut sizes = Vec::with_capacity(plan.phases().len());
        for (index, phase) in plan.phases().iter().enumerate() {
            let start = plan.rapidity_at_start(index);
            let turn = turn_of(phase).and_then(|(after, gain)| {
                let at = ArrayTime::nearest(phase.start.seconds() + after)?;
                Some((start + gain, at))
            });
            for (rapidity, at) in
                turn.into_iter().chain([(plan.rapidity_at_start(index + 1), phase.end)])
            {
                if rapidity.abs() > peak.rapidity.abs() {
                    peak = Reached { rapidity, phase: Ok(index), at };
                }
            }
            sizes.push(peak.rapidity.abs());
        }
        Parting::Plan { plan, peak, sizes }
    }

    /// Judges one limit.
    pub(super) fn judge(
        &self,
        layout: &Layout,
        placed: &Placed,
        subject: Subject,
        limit_s: f64,
    ) -> Judgement {
        if let (Parting::Plan { plan, .. }, true) = (self, placed.is_elastic()) {
            return judge_stretched(plan, placed, layout, subject, limit_s);
        }
        let offset_s = |instant: &Instant| {
            let ends = subject.ends(layout);
            let stretched = placed.offset_s(ends, instant.moment.at);
            stretched.unwrap_or_else(|| offset_s(layout, subject, instant))
        };
        let apart = apart_m(layout, subject);
        let parted = |reached: &Reached| apart * reached.rapidity / SPEED_OF_LIGHT_M_S;
        let (value, phase, at) = match self {
            Parting::Plan { peak, .. } => (parted(peak), peak.phase, peak.at),
            Parting::Moment(reached, instant) => (offset_s(instant), reached.phase, reached.at),
            Parting::Standing(instant) => (offset_s(instant), Err(NO_PLAN), STANDING_FOR),
        };
        let value = value.abs().to_f64();
        let kept = value <= limit_s;
        let broken_from = match self {
            _ if kept => Err(KEPT),
            Parting::Plan { plan, sizes, .. } => {
                let most = Dd::new(limit_s) * SPEED_OF_LIGHT_M_S / apart.abs();
                Ok(first_beyond(plan, sizes, most).map_or(at, |(_, from)| from))
            }
            Parting::Standing(instant) => {
                let pace = offset_s(instant).abs() / STANDING_FOR.seconds();
                Ok(ArrayTime::nearest(Dd::new(limit_s) / pace).unwrap_or(STANDING_FOR))
            }
            Parting::Moment(..) => Err(ONE_MOMENT),
        };
        Judgement {
            row: 0,
            rule: Rule::ClockOffset,
            subject,
            phase,
            at: Ok(at),
            broken_from,
            value: Ok(value),
            limit: Ok(limit_s),
            margin: Some(1.0 - value / limit_s),
            state: RuleState::of(kept),
        }
    }

    /// What a line that stands is judged at: its clocks part evenly.
    fn standing(&self, layout: &Layout) -> Option<&Instant> {
        match (self, &layout.course) {
            (Parting::Standing(instant), _)
            | (Parting::Moment(_, instant), Course::Standing(_)) => Some(instant),
            _ => None,
        }
    }

    /// What would keep a limit. On a line that stretches, a distance is the one to be filed,
    /// found by trial, and a gain is one that any plan of one direction, no stronger than this
    /// one, keeps the limit with.
    pub(super) fn remedy(
        &self,
        layout: &Layout,
        span: JudgedOver,
        placed: &Placed,
        judgement: &Judgement,
    ) -> String {
        let (value, limit_s) = numbers(judgement);
        let allow = TIME.at_least(value, |limit| limit >= value);
        let allow = allow.map_or_else(|| "allow more".to_owned(), |allow| format!("allow {allow}"));
        let ends = judgement.subject.ends(layout);
        if let Some(instant) = self.standing(layout) {
            let at = instant.moment.at;
            let offset_s = placed
                .offset_s(ends, at)
                .unwrap_or_else(|| offset_s(layout, judgement.subject, instant));
            let pace = offset_s.abs() / at.seconds().abs();
            let often = (Dd::new(limit_s) / pace).to_f64();
            let often = TIME.at_most(often, |time| (pace * time).to_f64() <= limit_s);
            let set = match often {
                Some(often) => format!("set the clocks again within {often}"),
                None => "set the clocks again more often".to_owned(),
            };
            return format!("{set}, or {allow}");
        }
        let reached = match self {
            Parting::Plan { peak: reached, .. } | Parting::Moment(reached, _) => reached.rapidity,
            Parting::Standing(_) => Dd::ZERO,
        };
        let offset = |apart: Dd, rapidity: Dd| {
            (apart * rapidity / SPEED_OF_LIGHT_M_S).abs().to_f64() <= limit_s
        };
        let gain = placed.farthest_apart_m(layout, ends).and_then(|apart| {
            let gain = (C2_M2_S2 * limit_s / apart).to_f64();
            SPEED.at_most(gain, |gain| offset(apart, Dd::new(gain) / SPEED_OF_LIGHT_M_S))
        });
        let gain = match gain {
            Some(gain) => format!("gain no more than {gain}"),
            None => "gain less".to_owned(),
        };
        let place = if placed.is_elastic() {
            self.place_on_trial(layout, span, judgement, limit_s)
        } else {
            // A rigid line may have its two nodes anywhere so far apart.
            let near = (Dd::new(limit_s) * SPEED_OF_LIGHT_M_S / reached.abs()).to_f64();
            let near = LENGTH.at_most(near, |near_m| {
                offset(Dd::new(near_m), reached)
                    && moved_m(layout, ends, near_m).all(|apart| offset(apart, reached))
            });
            place(layout, judgement.subject, near.as_deref())
        };
        listed(&[gain, place, allow])
    }

    /// Where one of the two would have to be filed, on a line that stretches.
    fn place_on_trial(
        &self,
        layout: &Layout,
        span: JudgedOver,
        judgement: &Judgement,
        limit_s: f64,
    ) -> String {
        let [from, to] = judgement.subject.ends(layout);
        let trial = Trial::of(layout, span, Rule::ClockOffset, judgement.subject, limit_s);
        let found = trial.and_then(|trial| {
            let distance = |row, other| Some((row, other, trial.distance(row, other, true)?));
            distance(to, from).or_else(|| distance(from, to))
        });
        let Some((row, other, near)) = found else {
            return place(layout, judgement.subject, None);
        };
        let name = |row: usize| match row == layout.reference {
            true => "the reference".to_owned(),
            false => format!("`{}`", layout.nodes[row].name),
        };
        format!("place {} no farther than {near} from {}", name(row), name(other))
    }

    pub(super) fn widen(&self, layout: &Layout, placed: &Placed, judgement: &Judgement) -> String {
        let (value, limit_s) = numbers(judgement);
        let name = judgement.subject.name(layout);
        if value == 0.0 {
            return format!("nothing needs to: the clocks of `{name}` do not part");
        }
        if let Some(instant) = self.standing(layout) {
            let often = TIME.about(limit_s * instant.moment.at.to_f64().abs() / value);
            return format!(
                "setting the clocks of `{name}` more often: they part so far in {often}"
            );
        }
        let apart = placed.apart_m(layout, judgement.subject.ends(layout)).abs();
        let gain = (C2_M2_S2 * limit_s / apart).to_f64();
        let nearer = match judgement.subject {
            Subject::Node(_) => format!("`{name}` nearer to the reference"),
            _ => format!("`{name}` nearer together"),
        };
        format!(
            "a shorter burn, or {nearer}: a gain of {} would bring the offset to its limit",
            SPEED.about(gain)
        )
    }
}

/// Judges a limit on a line that stretches: the rate difference has the sign of the thrust,
/// so the offset is extreme at phase ends and where a ramp passes through zero, as on a
/// rigid line. A moment at which it passes the limit is found by halving, to the
/// attosecond.
fn judge_stretched(
    plan: &Plan,
    placed: &Placed,
    layout: &Layout,
    subject: Subject,
    limit_s: f64,
) -> Judgement {
    let ends = subject.ends(layout);
    let size = |at: ArrayTime| placed.offset_s(ends, at).unwrap_or(Dd::ZERO).abs().to_f64();
    let mut peak = (0.0, Err(NO_PHASE), ArrayTime::ZERO);
    let mut beyond = None;
    let mut before = ArrayTime::ZERO;
    for (index, phase) in plan.phases().iter().enumerate() {
        let turn =
            turn_of(phase).and_then(|(after, _)| ArrayTime::nearest(phase.start.seconds() + after));
        for at in turn.into_iter().chain([phase.end]) {
            let here = size(at);
            if here > peak.0 {
                peak = (here, Ok(index), at);
            }
            if here > limit_s && beyond.is_none() {
                let (mut low, mut high) = (before.attoseconds(), at.attoseconds());
                while high - low > 1 {
                    let middle = low + (high - low) / 2;
                    let is_beyond = size(ArrayTime::from_attoseconds(middle)) > limit_s;
                    if is_beyond { high = middle } else { low = middle }
                }
                beyond = Some(ArrayTime::from_attoseconds(high));
            }
            before = at;
        }
    }
    let kept = peak.0 <= limit_s;
    Judgement {
        row: 0,
        rule: Rule::ClockOffset,
        subject,
        phase: peak.1,
        at: Ok(peak.2),
        broken_from: if kept { Err(KEPT) } else { Ok(beyond.unwrap_or(peak.2)) },
        value: Ok(peak.0),
        limit: Ok(limit_s),
        margin: Some(1.0 - peak.0 / limit_s),
        state: RuleState::of(kept),
    }
}

fn numbers(judgement: &Judgement) -> (f64, f64) {
    (judgement.value.clone().unwrap_or_default(), judgement.limit.unwrap_or_default())
}

fn place(layout: &Layout, subject: Subject, near: Option<&str>) -> String {
    match (subject, near) {
        (Subject::Node(row), Some(near)) => {
            let name = &layout.nodes[row].name;
            format!("place `{name}` no farther than {near} from the reference")
        }
        (Subject::Node(row), None) => {
            format!("place `{}` nearer to the reference", layout.nodes[row].name)
        }
        (_, Some(near)) => format!("place the two no farther than {near} apart"),
        (_, None) => "place the two nearer together".to_owned(),
    }
}

fn standing_at(standing: &Standing, at: ArrayTime) -> Instant {
    Instant {
        moment: Moment::held_always(at, standing.gravity_m_s2),
        gradient_per_s2: standing.gradient_per_s2,
    }
}

/// How far apart two nodes stand once either has been put at a distance from the other, as far
/// as doubles can state where that is, m.
fn moved_m(layout: &Layout, ends: [usize; 2], distance_m: f64) -> impl Iterator<Item = Dd> {
    let place = |row: usize| layout.nodes[row].position_m;
    let [one, other] = ends;
    let moved = [(one, other), (other, one)].map(|(row, stays)| {
        let side = if place(row) < place(stays) { -1.0 } else { 1.0 };
        let moved = place(stays) + side * distance_m;
        (row != layout.reference).then(|| Dd::difference(moved, place(stays)))
    });
    moved.into_iter().flatten()
}

/// How far apart the two stand, from the first to the second, m.
fn apart_m(layout: &Layout, subject: Subject) -> Dd {
    let [from, to] = subject.ends(layout).map(|row| layout.nodes[row].position_m);
    Dd::difference(to, from)
}

fn offset_s(layout: &Layout, subject: Subject, instant: &Instant) -> Dd {
    let [from, to] = subject.ends(layout).map(|row| Dd::new(layout.nodes[row].position_m));
    instant.clock_offset_difference_s(from, to)
}

/// Where a ramp passes through zero inside a phase: seconds after its start, and the
/// rapidity gained until then.
fn turn_of(phase: &Phase) -> Option<(Dd, Dd)> {
    let (first, last) = (phase.acceleration(phase.start), phase.acceleration(phase.end));
    if first.is_zero() || last.is_zero() || first.is_negative() == last.is_negative() {
        return None;
    }
    let after = phase.moment_of(Dd::ZERO)?;
    Some((after, first * after / (2.0 * SPEED_OF_LIGHT_M_S)))
}

/// The phase and the moment at which the rapidity first passes a size.
fn first_beyond(plan: &Plan, sizes: &[Dd], most: Dd) -> Option<(usize, ArrayTime)> {
    let index = sizes.partition_point(|size| *size <= most);
    let phase = plan.phases().get(index)?;
    let start = plan.rapidity_at_start(index);
    let end = plan.rapidity_at_start(index + 1);
    let first = phase.acceleration(phase.start);
    let length = phase.end.seconds_since(phase.start);
    let slope = (phase.acceleration(phase.end) - first) / length;
    let gain_to = |from: Dd, towards: Dd| {
        let most = if towards.is_negative() { -most } else { most };
        (most - from) * SPEED_OF_LIGHT_M_S
    };
    let after = match turn_of(phase) {
        // Up to the turn the rapidity goes one way, from it on the other.
        Some((after, gain)) if (start + gain).abs() <= most => {
            let gain = gain_to(start + gain, end);
            after + root(gain * 2.0 / slope)
        }
        Some((_, gain)) => time_to_gain(first, slope, gain_to(start, start + gain)),
        None => time_to_gain(first, slope, gain_to(start, end)),
    };
    let at = ArrayTime::nearest(phase.start.seconds() + after)?;
    Some((index, at.clamp(phase.start, phase.end)))
}

/// The first `s ≥ 0` with `first · s + slope · s²/2 = gain`, in the form that does not
/// cancel while the acceleration keeps its sign.
fn time_to_gain(first: Dd, slope: Dd, gain: Dd) -> Dd {
    let root = root(first * first + slope * gain * 2.0);
    let towards = if gain.is_negative() { first - root } else { first + root };
    if towards.is_zero() { Dd::ZERO } else { gain * 2.0 / towards }
}

/// The square root, to 2⁻¹⁰⁰; zero for what rounding has put below zero.
fn root(value: Dd) -> Dd {
    let near = value.hi.max(0.0).sqrt();
    if near == 0.0 {
        return Dd::ZERO;
    }
    Dd::new(near) + (value - Dd::product(near, near)) / (2.0 * near)
}
