//! The rules that loads must meet over the whole plan: ratings, strength, slack, ramps,
//! propellant.

use std::borrow::Cow;
use std::sync::Arc;

use crate::layout::quantity::{Dimension, parse};
use crate::layout::{Course, Layout, Positions};
use crate::model::array_time::ArrayTime;
use crate::model::loads::{Loads, Mend, Peak, Ringing, RunsDry, Slack, State};
use crate::table::Measure;
use crate::table::content::thrust::{self, Bound};
use crate::table::content::words::{ACCELERATION, FORCE, MASS, SECONDS};
use crate::table::digits::Scale;
use crate::table::unit::rounded;

/// Nodes and phases up to which a line is built once more to try advice out.
const MOST_TRIED: usize = 20_000;

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
    loads: Arc<Loads>,
    /// Ratings, strength, slack.
    first: Vec<LoadJudgement>,
    ringing: Arc<[Ringing]>,
    period_s: Option<f64>,
    /// Propellant.
    last: Vec<LoadJudgement>,
    slack: Vec<Slack>,
    needs: Vec<RunsDry>,
    /// Whether one moment is judged.
    is_moment: bool,
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
struct Pushed {
    /// The most it is pushed with, N.
    most_n: f64,
    /// Whether it is pushed at both ends, so that the opposite thrust would pull it.
    is_throughout: bool,
}

/// `None` for a tether that is not slack.
fn pushed_n(loads: &Loads, state: &State, gap: usize) -> Option<Pushed> {
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

    /// What would mend a broken rule, by its place; empty for one that is kept. Every figure
    /// is one that, put into the layout, keeps the rule.
    #[must_use]
    pub fn remedy(&self, layout: &Layout, place: usize) -> String {
        let Some(judged) = self.get(layout, place).filter(|judged| judged.is_broken) else {
            return String::new();
        };
        match (judged.rule, judged.subject) {
            (LoadRule::Rating, LoadSubject::Node(row)) => self.rating_remedy(layout, row, &judged),
            (LoadRule::Strength, LoadSubject::Span(gap)) => {
                let factor = self.loads.structure().members[gap].safety_factor;
                let keeps = |strength_n: f64| judged.value <= strength_n / factor;
                let enough = FORCE.at_least(judged.value * factor, keeps);
                let stronger = match enough {
                    Some(strength) => format!("a strength of {strength}"),
                    None => "a stronger one".to_owned(),
                };
                format!("{stronger}, or less thrust or mass beyond it")
            }
            (LoadRule::Slack, LoadSubject::Span(gap)) => self.slack_remedy(layout, gap, &judged),
            (LoadRule::Ramp, LoadSubject::Change(_)) => {
                let ringing = &self.ringing[place - self.first.len()];
                ramp_remedy(layout, ringing, judged.value)
            }
            (LoadRule::Propellant, LoadSubject::Engine(engine)) => {
                let needed = self.needs.iter().find(|dry| dry.engine == engine);
                let enough = needed.and_then(|dry| self.enough_aboard(layout, dry, judged.at));
                dry_remedy(needed, enough, self.is_moment)
            }
            _ => String::new(),
        }
    }

    fn rating_remedy(&self, layout: &Layout, row: usize, judged: &LoadJudgement) -> String {
        let ends = self.loads.position_extremes_m(row).map(|end| end.to_f64());
        let bound = Bound { rating: judged.limit, positions_m: &ends };
        let plan = match &layout.course {
            Course::Thrust(plan) => Some(plan),
            Course::Standing(_) => None,
        };
        let most = plan.and_then(|plan| thrust::most_held(plan, &bound));
        let build = ACCELERATION.at_least(judged.value, |rating| rating >= judged.value);
        let is_hold = plan.zip(judged.phase).is_none_or(|(plan, phase)| {
            plan.phases().get(phase).is_none_or(|phase| phase.is_hold())
        });
        thrust::rating_advice(most, build, plan.is_some(), is_hold)
    }

    /// The propellant with which an engine lasts. A line that stretches may not bear a fuller
    /// tank, and where its lengths are found from a shape under thrust it changes them, so it
    /// is tried out; `None` where that would take long or there is no such line.
    fn enough_aboard(
        &self,
        layout: &Layout,
        dry: &RunsDry,
        until: Option<ArrayTime>,
    ) -> Option<String> {
        let Course::Thrust(plan) = &layout.course else { return None };
        let mut needed_kg = dry.needed_kg;
        let enough = |needed_kg: f64| MASS.at_least(needed_kg, |aboard| aboard >= needed_kg);
        if self.loads.is_rigid() {
            return enough(needed_kg);
        }
        if layout.nodes.len() + plan.phases().len() > MOST_TRIED {
            return None;
        }
        for _ in 0..8 {
            let amount = enough(needed_kg)?;
            let aboard_kg = parse(&amount, Dimension::Mass).ok()?;
            let mut structure = self.loads.structure().clone();
            structure.engines.get_mut(dry.engine)?.propellant_kg = Some(aboard_kg);
            let loads = Loads::under_thrust(structure, plan).ok()?;
            let until = until.unwrap_or(plan.end());
            let still = loads.propulsion().running_dry_until(plan, until);
            let Some(still) = still.iter().find(|still| still.engine == dry.engine) else {
                return Some(amount);
            };
            needed_kg = still.needed_kg.max(aboard_kg * (1.0 + 1e-5));
        }
        None
    }

    fn slack_remedy(&self, layout: &Layout, gap: usize, judged: &LoadJudgement) -> String {
        if self.is_moment {
            let at = judged.at.unwrap_or_default();
            let pushed = pushed_n(&self.loads, &self.loads.state(at), gap);
            let boom = "file the span as a boom";
            return match pushed {
                Some(Pushed { is_throughout: true, .. }) => {
                    format!("thrust the other way, or {boom}")
                }
                _ => boom.to_owned(),
            };
        }
        let found = self.slack.binary_search_by_key(&gap, |slack| slack.gap);
        found.map_or_else(|_| String::new(), |found| mends(layout, &self.loads, &self.slack[found]))
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

/// What would mend a slack tether, in words.
fn mends(layout: &Layout, loads: &Loads, slack: &Slack) -> String {
    // Lengths found from a shape under thrust change with the shares.
    let is_promised = layout.positions == Positions::Unloaded || loads.is_rigid();
    let words: Vec<String> = slack
        .mends
        .iter()
        .map(|mend| match *mend {
            Mend::MoveThrust { share, to_row, of } => {
                // Rounded up, so that what is offered is enough; never more than there is.
                let share =
                    share.filter(|_| is_promised).map(|share| (share * 1e4 + 0.01).ceil() / 1e4);
                let part = match share {
                    Some(share) if share < of => format!("{share} of the thrust"),
                    Some(_) => "all of the thrust beyond it".to_owned(),
                    None => "thrust".to_owned(),
                };
                let beyond = if to_row > slack.gap { "aft" } else { "fore" };
                format!("move {part} to `{}` or {beyond} of it", layout.nodes[to_row].name)
            }
            Mend::OneDirection { fore } => {
                let way = if fore { "fore" } else { "aft" };
                format!("keep the thrust towards the {way} end")
            }
            Mend::Boom => "file the span as a boom".to_owned(),
        })
        .collect();
    words.join(", or ")
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

fn ramp_remedy(layout: &Layout, ringing: &Ringing, period_s: f64) -> String {
    let is_end = match &layout.course {
        Course::Thrust(plan) => ringing.phase >= plan.phases().len(),
        Course::Standing(_) => false,
    };
    let change = if is_end {
        "let the thrust down at the end of the plan, where it is cut,"
    } else {
        "change the thrust"
    };
    let long = SECONDS.at_least(period_s, |ramp_s| ramp_s >= period_s);
    let over =
        long.map_or_else(|| "more slowly".to_owned(), |long| format!("over {long} or longer"));
    format!(
        "{change} {over}; as it is, `{}` is left ringing by up to {} m, {:.1e} of any carrier",
        layout.nodes[ringing.row].name,
        rounded(ringing.amplitude_m, Scale::Ten(0), 3),
        ringing.doppler
    )
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

fn dry_remedy(needed: Option<&RunsDry>, enough: Option<String>, is_moment: bool) -> String {
    let less = if is_moment { "until then" } else { "for a shorter time" };
    let rest = format!("a higher exhaust speed, or less thrust {less}");
    let Some(dry) = needed else { return format!("more propellant aboard, {rest}") };
    if dry.needed_kg.is_finite() && dry.log10_needed_kg < 12.0 {
        let aboard = enough.unwrap_or_else(|| "more propellant".to_owned());
        return format!("{aboard} aboard, {rest}");
    }
    format!("10^{:.1} kg, which nothing can carry, aboard, {rest}", dry.log10_needed_kg)
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
