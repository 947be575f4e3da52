//! The rules that loads must meet over the whole plan: ratings, strength, slack, ramps,
//! propellant.

use std::borrow::Cow;

use super::span::SpanLoad;
use crate::layout::Layout;
use crate::model::array_time::ArrayTime;
use crate::model::constants::{C2_M2_S2, STANDARD_GRAVITY_M_S2};
use crate::model::dd::Dd;
use crate::model::loads::{Loads, Mend, Peak, Ringing, RunsDry, Slack};
use crate::table::Measure;
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
    /// The engine at a row.
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
            LoadSubject::Engine(row) => Cow::Owned(format!("engine at {}", layout.nodes[row].name)),
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
    /// Index of the phase in which the value occurs, or in which the rule is broken first;
    /// `None` on a standing line, and after the plan.
    pub phase: Option<usize>,
    /// That moment; `None` on a standing line.
    pub at: Option<ArrayTime>,
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
    /// What would mend it; empty when it is kept.
    pub remedy: String,
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
            value,
            limit,
            margin: (limit != 0.0).then_some(1.0 - value / limit),
            is_broken: value > limit,
            remedy: String::new(),
        }
    }
}

/// Judges every rule on loads the layout gives the inputs of, in the order of the rules,
/// then fore to aft; engines in the order of the file.
#[must_use]
pub fn judge_loads(layout: &Layout, loads: &Loads) -> Vec<LoadJudgement> {
    let mut found: Vec<LoadJudgement> =
        (0..layout.nodes.len()).filter_map(|row| rating(layout, loads, row)).collect();
    let gaps = 0..layout.nodes.len().saturating_sub(1);
    found.extend(gaps.clone().filter_map(|gap| strength(loads, gap)));
    found.extend(slack(layout, loads, gaps));
    found.extend(ramps(layout, loads));
    found.extend(propellant(layout, loads));
    found
}

/// Judges strength, slack and propellant at one moment; ramps are judged over a plan only.
#[must_use]
pub fn judge_loads_at(layout: &Layout, loads: &Loads, at: ArrayTime) -> Vec<LoadJudgement> {
    let state = loads.state(at);
    let moment = state.instant.moment;
    let phase = moment.phase;
    let now = |value: f64| Some(Peak { value, phase, at, is_limit: false });
    let stamped = |judgement: LoadJudgement| LoadJudgement { at: Some(at), ..judgement };
    let members = loads.structure().members.iter().enumerate();
    let mut found = Vec::new();
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
        let mut judgement =
            LoadJudgement::new(LoadRule::Strength, subject, now(value), value, limit);
        if judgement.is_broken {
            judgement.remedy = strength_remedy(value * member.safety_factor);
        }
        found.push(stamped(judgement));
    }
    for (gap, _) in members.filter(|(_, member)| member.is_tether) {
        let is_slack = SpanLoad::of(loads, &state, gap) == SpanLoad::Slack;
        let [fore_n, aft_n] = loads.span_force_n(&state, gap);
        let push = if is_slack { -fore_n.min(aft_n) } else { 0.0 };
        let subject = LoadSubject::Span(gap);
        let mut judgement = LoadJudgement::new(LoadRule::Slack, subject, now(push), push, 0.0);
        if is_slack {
            judgement.remedy = "thrust the other way, or file the span as a boom".to_owned();
        }
        found.push(stamped(judgement));
    }
    if let crate::layout::Course::Thrust(_) = &layout.course {
        let propulsion = loads.propulsion();
        for (index, engine) in propulsion.engines().iter().enumerate() {
            let (Some(_), Some(aboard_kg)) = (engine.exhaust_speed_m_s, engine.propellant_kg)
            else {
                continue;
            };
            let used_kg = propulsion.used(index, state.velocity_spent_m_s).used_kg;
            let subject = LoadSubject::Engine(engine.row);
            let rule = LoadRule::Propellant;
            let mut judgement = LoadJudgement::new(rule, subject, now(used_kg), used_kg, aboard_kg);
            // A tank filled to the last digit is not dry.
            judgement.is_broken = used_kg > aboard_kg * (1.0 + 1e-14);
            if judgement.is_broken {
                judgement.remedy = format!(
                    "{} kg aboard, a higher exhaust speed, or less thrust until then",
                    six_digits(at_least(used_kg))
                );
            }
            found.push(stamped(judgement));
        }
    }
    found
}

fn strength_remedy(needed_n: f64) -> String {
    format!("a strength of {} N, or less thrust or mass beyond it", six_digits(at_least(needed_n)))
}

/// The rating of one node; `None` where none is given, and for a plan without phases.
#[must_use]
pub fn rating(layout: &Layout, loads: &Loads, row: usize) -> Option<LoadJudgement> {
    let (peak, margin) = loads.rating(row)?;
    let subject = LoadSubject::Node(row);
    let mut judgement =
        LoadJudgement::new(LoadRule::Rating, subject, Some(peak), margin.value, margin.limit);
    if judgement.is_broken {
        let felt = margin.value;
        judgement.remedy = if peak.phase.is_none() {
            format!("build the node for {}", amount(at_least(felt)))
        } else {
            // α/(1 + αh/c²) = r at α = r/(1 − rh/c²), with the sign of the thrust.
            let bound = Dd::new(margin.limit.copysign(peak.value));
            let position_m = layout.nodes[row].position_m;
            let most = (bound / (Dd::ONE - bound * position_m / C2_M2_S2)).to_f64();
            format!(
                "hold no more than {} at the reference, or build the node for {}",
                amount(at_most(most.abs())),
                amount(at_least(felt))
            )
        };
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
        let member = loads.structure().members[gap];
        let needed_n = margin.value * member.safety_factor;
        judgement.remedy = strength_remedy(needed_n);
    }
    Some(judgement)
}

fn slack(layout: &Layout, loads: &Loads, gaps: std::ops::Range<usize>) -> Vec<LoadJudgement> {
    let broken = loads.slack();
    let tethers = gaps.filter(|gap| loads.structure().members[*gap].is_tether);
    tethers
        .filter_map(|gap| {
            let subject = LoadSubject::Span(gap);
            let Some(slack) = broken.iter().find(|slack| slack.gap == gap) else {
                let least = loads.force_peaks(gap)?.smallest;
                return Some(LoadJudgement::new(LoadRule::Slack, subject, Some(least), 0.0, 0.0));
            };
            Some(LoadJudgement {
                phase: slack.phase,
                at: slack.phase.map(|_| slack.at),
                remedy: mends(layout, slack),
                is_broken: true,
                ..LoadJudgement::new(LoadRule::Slack, subject, None, -slack.worst.value, 0.0)
            })
        })
        .collect()
}

/// What would mend a slack tether, in words.
#[must_use]
pub fn mends(layout: &Layout, slack: &Slack) -> String {
    let words: Vec<String> = slack
        .mends
        .iter()
        .map(|mend| match *mend {
            Mend::MoveThrust { share, to_row } => {
                // Rounded up, so that what is offered is enough.
                let share = (share * 1e4).ceil() / 1e4;
                let beyond = if to_row > slack.gap { "aft" } else { "fore" };
                format!(
                    "move {share} of the thrust to `{}` or {beyond} of it",
                    layout.nodes[to_row].name
                )
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

fn ramps(layout: &Layout, loads: &Loads) -> Vec<LoadJudgement> {
    let Some(period) = loads.lowest_period() else { return Vec::new() };
    loads.ringing(&period).iter().map(|ringing| ramp(layout, ringing, period.period_s)).collect()
}

fn ramp(layout: &Layout, ringing: &Ringing, period_s: f64) -> LoadJudgement {
    let subject = LoadSubject::Change(ringing.phase);
    let mut judgement = LoadJudgement::new(LoadRule::Ramp, subject, None, period_s, ringing.ramp_s);
    judgement.is_broken = !ringing.is_quasi_static(period_s);
    if let crate::layout::Course::Thrust(plan) = &layout.course {
        judgement.phase = (ringing.phase < plan.phases().len()).then_some(ringing.phase);
        judgement.at =
            Some(plan.phases().get(ringing.phase).map_or(plan.end(), |phase| phase.start));
    }
    if judgement.is_broken {
        judgement.remedy = format!(
            "change the thrust over {} s or longer; as it is, `{}` is left ringing by up to {} m, \
             {:.1e} of any carrier",
            six_digits(at_least(period_s)),
            layout.nodes[ringing.row].name,
            rounded(ringing.amplitude_m, Scale::Ten(0), 3),
            ringing.doppler
        );
    }
    judgement
}

fn propellant(layout: &Layout, loads: &Loads) -> Vec<LoadJudgement> {
    let crate::layout::Course::Thrust(plan) = &layout.course else { return Vec::new() };
    let dry = loads.running_dry();
    let propulsion = loads.propulsion();
    let spent = loads.state(plan.end()).velocity_spent_m_s;
    let engines = propulsion.engines().iter().enumerate();
    engines
        .filter_map(|(index, engine)| {
            engine.exhaust_speed_m_s?;
            let aboard_kg = engine.propellant_kg?;
            let subject = LoadSubject::Engine(engine.row);
            let rule = LoadRule::Propellant;
            if let Some(dry) = dry.iter().find(|dry| dry.engine == index) {
                return Some(LoadJudgement {
                    phase: Some(dry.phase),
                    at: Some(dry.at),
                    is_broken: true,
                    remedy: dry_remedy(dry),
                    ..LoadJudgement::new(rule, subject, None, dry.needed_kg, aboard_kg)
                });
            }
            let used_kg = propulsion.used(index, spent).used_kg;
            let mut judgement = LoadJudgement::new(rule, subject, None, used_kg, aboard_kg);
            judgement.is_broken = false;
            judgement.phase = plan.phases().len().checked_sub(1);
            judgement.at = Some(plan.end());
            Some(judgement)
        })
        .collect()
}

fn dry_remedy(dry: &RunsDry) -> String {
    let needed = if dry.needed_kg.is_finite() && dry.log10_needed_kg < 12.0 {
        format!("{} kg", six_digits(at_least(dry.needed_kg)))
    } else {
        format!("10^{:.1} kg, which nothing can carry,", dry.log10_needed_kg)
    };
    format!("{needed} aboard, a higher exhaust speed, or less thrust for a shorter time")
}

/// The name of the span between a row and the next.
#[must_use]
pub fn span_name(layout: &Layout, gap: usize) -> String {
    format!("{} to {}", layout.nodes[gap].name, layout.nodes[gap + 1].name)
}

fn amount(acceleration_m_s2: f64) -> String {
    let parts = acceleration_m_s2 / STANDARD_GRAVITY_M_S2;
    format!("{} m/s^2 ({} g0)", six_digits(acceleration_m_s2), six_digits(parts))
}

/// Six digits that are enough: a figure offered as a remedy is itself accepted.
fn at_least(value: f64) -> f64 {
    let near = six(value);
    if near >= value { near } else { six(near + sixth_digit(value)) }
}

/// Six digits that are not too much.
fn at_most(value: f64) -> f64 {
    let near = six(value);
    if near <= value { near } else { six(near - sixth_digit(value)) }
}

/// One in the sixth digit of a value.
fn sixth_digit(value: f64) -> f64 {
    let written = format!("{value:e}");
    let power = written.split_once('e').and_then(|(_, power)| power.parse::<i32>().ok());
    format!("1e{}", power.unwrap_or(0) - 5).parse().unwrap_or(0.0)
}

fn six(value: f64) -> f64 {
    format!("{value:.5e}").parse().unwrap_or(value)
}

/// Six digits, as people write them.
pub(super) fn six_digits(value: f64) -> String {
    rounded(value, Scale::Ten(0), 6)
}
