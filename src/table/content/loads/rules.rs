//! The rules that loads must meet over the whole plan: ratings, strength, slack, ramps,
//! propellant.

use std::borrow::Cow;
use std::sync::Arc;

use crate::layout::{Course, Layout};
use crate::model::array_time::ArrayTime;
use crate::model::loads::{Loads, Peak, Ringing, RunsDry, Slack, State};
use crate::table::Measure;
use crate::table::content::thrust;
use crate::table::digits::Scale;
use crate::table::unit::rounded;

/// A rule on loads, in the order of the tables.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum LoadRule {
    /// No node feels more than it is built for, where load puts it.
    Rating,
    /// No span carries more than its strength over its safety factor.
    Strength,
    /// No tether is pushed.
    Slack,
    /// No change of thrust is shorter than the line's lowest axial period.
    Ramp,
    /// No engine runs dry.
    Propellant,
}

impl LoadRule {
    /// Its word in the tables.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            LoadRule::Rating => "rating",
            LoadRule::Strength => "strength",
            LoadRule::Slack => "slack",
            LoadRule::Ramp => "ramp",
            LoadRule::Propellant => "propellant",
        }
    }

    /// What its value and its limit measure.
    #[must_use]
    pub fn measure(self) -> Measure {
        match self {
            LoadRule::Rating => Measure::Acceleration,
            LoadRule::Strength | LoadRule::Slack => Measure::Force,
            LoadRule::Ramp => Measure::Time,
            LoadRule::Propellant => Measure::Mass,
        }
    }

    /// The unit of its value and its limit.
    #[must_use]
    pub fn unit(self) -> &'static str {
        match self {
            LoadRule::Rating => "m/s^2",
            LoadRule::Strength | LoadRule::Slack => "N",
            LoadRule::Ramp => "s",
            LoadRule::Propellant => "kg",
        }
    }
}

/// What a rule on loads binds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum LoadSubject {
    /// A node, by its row.
    Node(usize),
    /// The span between a row and the next.
    Span(usize),
    /// A change of thrust: the phase that is a ramp or begins with a step, one past the last
    /// for the step at the end of the plan.
    Change(usize),
    /// An engine, by its number in the order of the file.
    Engine(usize),
}

impl LoadSubject {
    /// Its name in the tables.
    #[must_use]
    pub fn name(self, layout: &Layout) -> Cow<'_, str> {
        match self {
            LoadSubject::Node(row) => Cow::Borrowed(&layout.nodes[row].name),
            LoadSubject::Span(gap) => Cow::Owned(span_name(layout, gap)),
            LoadSubject::Change(_) => Cow::Borrowed("the line"),
            LoadSubject::Engine(engine) => {
                let row = layout.engines.get(engine).map_or(layout.reference, |engine| engine.node);
                Cow::Owned(format!("engine at {}", layout.nodes[row].name))
            }
        }
    }
}

/// A rule on loads, judged over the plan for one subject.
#[derive(Clone, Debug, PartialEq)]
pub struct LoadJudgement {
    /// The rule.
    pub rule: LoadRule,
    /// What it binds.
    pub subject: LoadSubject,
    /// Index of the phase in which the value occurs; `None` on a standing line, and after the
    /// plan.
    pub phase: Option<usize>,
    /// That moment; `None` on a standing line.
    pub at: Option<ArrayTime>,
    /// The phase and the moment from which on the rule is broken; `None` where it is kept, on a
    /// standing line, and at one moment.
    pub from: Option<(Option<usize>, ArrayTime)>,
    /// What counts, in the unit of the rule: the felt acceleration, the peak force, the
    /// force a tether would be pushed with, the line's period, the propellant needed. May
    /// overflow.
    pub value: f64,
    /// What it is held against: the rating, the strength over the safety factor, no force,
    /// the length of the ramp, the propellant aboard.
    pub limit: f64,
    /// `1 − value/limit`; `None` against a limit of zero.
    pub margin: Option<f64>,
    /// Whether the rule is broken.
    pub is_broken: bool,
    /// Why the rule cannot be judged.
    pub not_judged: Option<&'static str>,
}

impl LoadJudgement {
    fn new(
        rule: LoadRule,
        subject: LoadSubject,
        peak: Option<Peak>,
        value: f64,
        limit: f64,
    ) -> Self {
        LoadJudgement {
            rule,
            subject,
            phase: peak.and_then(|peak| peak.phase),
            at: peak.filter(|peak| peak.phase.is_some()).map(|peak| peak.at),
            from: None,
            value,
            limit,
            margin: (limit != 0.0).then_some(1.0 - value / limit),
            is_broken: value > limit,
            not_judged: None,
        }
    }
}

/// Every rule on loads that a layout gives the inputs of, judged: in the order of the rules,
/// then fore to aft; engines in the order of the file.
///
/// A history may have a million changes of thrust, so these are kept as they were found and
/// put into words when they are asked for.
#[derive(Clone, Debug)]
pub struct JudgedLoads {
    pub(super) loads: Arc<Loads>,
    /// Ratings, strength, slack.
    pub(super) first: Vec<LoadJudgement>,
    pub(super) ringing: Arc<[Ringing]>,
    period_s: Option<f64>,
    /// Propellant.
    last: Vec<LoadJudgement>,
    pub(super) slack: Vec<Slack>,
    pub(super) needs: Vec<RunsDry>,
    /// Whether one moment is judged.
    pub(super) is_moment: bool,
}

/// Judges every rule on loads over the plan.
#[must_use]
pub fn judge_loads(layout: &Layout, loads: &Arc<Loads>) -> JudgedLoads {
    let ratings = (0..layout.nodes.len()).filter_map(|row| rating(layout, loads, row)).collect();
    over_plan(layout, loads, ratings)
}

/// The same without ratings.
#[must_use]
pub fn judge_loads_of_line(layout: &Layout, loads: &Arc<Loads>) -> JudgedLoads {
    over_plan(layout, loads, Vec::new())
}

fn over_plan(layout: &Layout, loads: &Arc<Loads>, mut first: Vec<LoadJudgement>) -> JudgedLoads {
    let gaps = 0..layout.nodes.len().saturating_sub(1);
    first.extend(gaps.clone().filter_map(|gap| strength(loads, gap)));
    let slack = loads.slack();
    first.extend(slack_rules(loads, &slack, gaps));
    let period = loads.lowest_period();
    let needs = loads.running_dry();
    JudgedLoads {
        first,
        ringing: period.map_or_else(Vec::new, |period| loads.ringing(&period)).into(),
        period_s: period.map(|period| period.period_s),
        last: propellant(layout, loads, &needs),
        slack,
        needs,
        is_moment: false,
        loads: Arc::clone(loads),
    }
}

/// Judges strength, slack and propellant at one moment; ramps are judged over a plan only.
#[must_use]
pub fn judge_loads_at(layout: &Layout, loads: &Arc<Loads>, at: ArrayTime) -> JudgedLoads {
    const DRY: &str = "an engine has run dry: the masses are not those of the line any more";
    let state = loads.state(at);
    let phase = state.instant.moment.phase;
    let now = |value: f64| Some(Peak { value, phase, at, is_limit: false });
    let is_dry = loads.running_dry().iter().any(|dry| dry.at < at);
    let stamped = |judgement: LoadJudgement| {
        let mut stamped = LoadJudgement { at: Some(at), ..judgement };
        if is_dry && judgement.rule != LoadRule::Propellant {
            stamped.not_judged = Some(DRY);
            stamped.is_broken = false;
        }
        stamped
    };
    let members = loads.structure().members.iter().enumerate();
    let mut first = Vec::new();
    for (gap, member) in members.clone() {
        let Some(strength_n) = member.strength_n else { continue };
        let [fore_n, aft_n] = loads.span_force_n(&state, gap);
        let value = if member.is_tether {
            fore_n.max(aft_n).max(0.0)
        } else {
            fore_n.abs().max(aft_n.abs())
        };
        let limit = strength_n / member.safety_factor;
        let subject = LoadSubject::Span(gap);
        let rule = LoadRule::Strength;
        first.push(stamped(LoadJudgement::new(rule, subject, now(value), value, limit)));
    }
    for (gap, _) in members.filter(|(_, member)| member.is_tether) {
        let push = pushed_n(loads, &state, gap).map_or(0.0, |pushed| pushed.most_n);
        let subject = LoadSubject::Span(gap);
        first.push(stamped(LoadJudgement::new(LoadRule::Slack, subject, now(push), push, 0.0)));
    }
    let mut last = Vec::new();
    let mut needs = Vec::new();
    if let Course::Thrust(plan) = &layout.course {
        let propulsion = loads.propulsion();
        needs = propulsion.running_dry_until(plan, at);
        for (index, engine) in propulsion.engines().iter().enumerate() {
            let (Some(_), Some(aboard_kg)) = (engine.exhaust_speed_m_s, engine.propellant_kg)
            else {
                continue;
            };
            let used_kg = propulsion.used(index, state.velocity_spent_m_s).used_kg;
            let subject = LoadSubject::Engine(index);
            let rule = LoadRule::Propellant;
            let mut judgement = LoadJudgement::new(rule, subject, now(used_kg), used_kg, aboard_kg);
            // A tank filled to the last digit is not dry.
            judgement.is_broken = used_kg > aboard_kg * (1.0 + 1e-14);
            last.push(stamped(judgement));
        }
    }
    JudgedLoads {
        loads: Arc::clone(loads),
        first,
        ringing: Arc::new([]),
        period_s: None,
        last,
        slack: Vec::new(),
        needs,
        is_moment: true,
    }
}

/// How a tether is pushed at one moment.
pub(super) struct Pushed {
    /// The most it is pushed with, N.
    pub most_n: f64,
    /// Whether it is pushed at both ends, so that the opposite thrust would pull it.
    pub is_throughout: bool,
}

/// `None` for a tether that is not slack.
pub(super) fn pushed_n(loads: &Loads, state: &State, gap: usize) -> Option<Pushed> {
    let [fore_n, aft_n] = loads.span_force_n(state, gap);
    let drive = state.instant.moment.acceleration_m_s2.to_f64().abs();
    let rounding_n = 1e-14 * state.mass_kg * drive;
    let is_throughout = fore_n.max(aft_n) <= rounding_n;
    let least_n = fore_n.min(aft_n);
    (least_n < -rounding_n).then_some(Pushed { most_n: -least_n, is_throughout })
}

impl JudgedLoads {
    /// Number of judgements.
    #[must_use]
    pub fn len(&self) -> usize {
        self.first.len() + self.ringing.len() + self.last.len()
    }

    /// Whether the layout gives the inputs of no rule.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// Whether an engine runs dry, so that forces are judged only up to then.
    #[must_use]
    pub fn runs_dry(&self) -> bool {
        !self.needs.is_empty()
    }

    /// The lowest axial period, s; `None` when nothing can swing, and at one moment.
    #[must_use]
    pub fn period_s(&self) -> Option<f64> {
        self.period_s
    }

    /// What every change of thrust leaves ringing.
    #[must_use]
    pub fn ringing(&self) -> &Arc<[Ringing]> {
        &self.ringing
    }

    /// Whether a change of thrust is judged at a place.
    #[must_use]
    pub fn is_ramp(&self, place: usize) -> bool {
        (self.first.len()..self.first.len() + self.ringing.len()).contains(&place)
    }

    /// A judgement by its place; `None` when there is no such place.
    #[must_use]
    pub fn get(&self, layout: &Layout, place: usize) -> Option<LoadJudgement> {
        if let Some(judged) = self.first.get(place) {
            return Some(judged.clone());
        }
        let place = place - self.first.len();
        if let Some(ringing) = self.ringing.get(place) {
            return Some(ramp(layout, ringing, self.period_s.unwrap_or(f64::INFINITY)));
        }
        self.last.get(place - self.ringing.len()).cloned()
    }

    /// Whether the judgement of a place is of a broken rule.
    #[must_use]
    pub fn is_broken(&self, place: usize) -> bool {
        if let Some(judged) = self.first.get(place) {
            return judged.is_broken;
        }
        let place = place - self.first.len();
        match self.ringing.get(place) {
            Some(ringing) => !ringing.is_quasi_static(self.period_s.unwrap_or(f64::INFINITY)),
            None => self.last.get(place - self.ringing.len()).is_some_and(|last| last.is_broken),
        }
    }
}

/// The rating of one node; `None` where none is given, and for a plan without phases.
#[must_use]
pub fn rating(layout: &Layout, loads: &Loads, row: usize) -> Option<LoadJudgement> {
    let (peak, margin) = loads.rating(row)?;
    let subject = LoadSubject::Node(row);
    let mut judgement =
        LoadJudgement::new(LoadRule::Rating, subject, Some(peak), margin.value, margin.limit);
    if let (true, Course::Thrust(plan)) = (judgement.is_broken, &layout.course) {
        let felt = loads.position_extremes_m(row)[usize::from(peak.value > 0.0)].to_f64();
        let first = thrust::first_beyond(plan, loads.records()?, felt, margin.limit);
        judgement.from = Some(first.map_or((peak.phase, peak.at), |(phase, at)| (Some(phase), at)));
    }
    Some(judgement)
}

fn strength(loads: &Loads, gap: usize) -> Option<LoadJudgement> {
    let strength = loads.strength(gap)?;
    let margin = strength.margin;
    let subject = LoadSubject::Span(gap);
    let peak = Some(strength.peak);
    let mut judgement =
        LoadJudgement::new(LoadRule::Strength, subject, peak, margin.value, margin.limit);
    if judgement.is_broken {
        let first = loads.force_beyond(gap, margin.limit);
        judgement.from = first.map(|(phase, at)| (Some(phase), at));
    }
    Some(judgement)
}

fn slack_rules<'a>(
    loads: &'a Loads,
    broken: &'a [Slack],
    gaps: std::ops::Range<usize>,
) -> impl Iterator<Item = LoadJudgement> + 'a {
    let tethers = gaps.filter(|gap| loads.structure().members[*gap].is_tether);
    tethers.filter_map(move |gap| {
        let subject = LoadSubject::Span(gap);
        let Ok(place) = broken.binary_search_by_key(&gap, |slack| slack.gap) else {
            let least = loads.force_peaks(gap)?.smallest;
            return Some(LoadJudgement::new(LoadRule::Slack, subject, Some(least), 0.0, 0.0));
        };
        let Slack { phase, at, worst, .. } = &broken[place];
        Some(LoadJudgement {
            from: phase.map(|phase| (Some(phase), *at)),
            is_broken: true,
            ..LoadJudgement::new(LoadRule::Slack, subject, Some(*worst), -worst.value, 0.0)
        })
    })
}

fn ramp(layout: &Layout, ringing: &Ringing, period_s: f64) -> LoadJudgement {
    let subject = LoadSubject::Change(ringing.phase);
    let mut judgement = LoadJudgement::new(LoadRule::Ramp, subject, None, period_s, ringing.ramp_s);
    judgement.is_broken = !ringing.is_quasi_static(period_s);
    if let Course::Thrust(plan) = &layout.course {
        judgement.phase = (ringing.phase < plan.phases().len()).then_some(ringing.phase);
        let at = plan.phases().get(ringing.phase).map_or(plan.end(), |phase| phase.start);
        judgement.at = Some(at);
        judgement.from = judgement.is_broken.then_some((judgement.phase, at));
    }
    judgement
}

fn propellant(layout: &Layout, loads: &Loads, dry: &[RunsDry]) -> Vec<LoadJudgement> {
    let Course::Thrust(plan) = &layout.course else { return Vec::new() };
    let propulsion = loads.propulsion();
    let spent = loads.state(plan.end()).velocity_spent_m_s;
    let engines = propulsion.engines().iter().enumerate();
    engines
        .filter_map(|(index, engine)| {
            engine.exhaust_speed_m_s?;
            let aboard_kg = engine.propellant_kg?;
            let subject = LoadSubject::Engine(index);
            let found = dry.iter().find(|dry| dry.engine == index);
            let value =
                found.map_or_else(|| propulsion.used(index, spent).used_kg, |dry| dry.needed_kg);
            let rule = LoadRule::Propellant;
            // What is used or needed is that of the whole plan.
            Some(LoadJudgement {
                phase: plan.phases().len().checked_sub(1),
                at: Some(plan.end()),
                from: found.map(|dry| (Some(dry.phase), dry.at)),
                is_broken: found.is_some(),
                ..LoadJudgement::new(rule, subject, None, value, aboard_kg)
            })
        })
        .collect()
}

/// The name of the span between a row and the next.
#[must_use]
pub fn span_name(layout: &Layout, gap: usize) -> String {
    format!("{} to {}", layout.nodes[gap].name, layout.nodes[gap + 1].name)
}

/// Six digits, as people write them.
pub(super) fn six_digits(value: f64) -> String {
    rounded(value, Scale::Ten(0), 6)
}
