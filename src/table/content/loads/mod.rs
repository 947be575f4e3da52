//! `loads`: forces, stretch, propellant; peaks over the plan, and the rules they break.

mod advice;
mod history;
mod rules;
mod span;

use std::borrow::Cow;
use std::sync::Arc;

use super::{OVERFLOW, RELEASED, column, head, number};
use crate::layout::{Course, Layout, Span};
use crate::model::array_time::ArrayTime;
use crate::model::loads::{GradientWarning, Loads, Peak};
use crate::run::State;
use crate::table::{Cell, Column, Measure, Report, Scalar, Table, readable_time};

use rules::six_digits;

pub use rules::{JudgedLoads, LoadJudgement, LoadRule, LoadSubject, judge_loads};
pub(super) use rules::{judge_loads_at, judge_loads_of_line};
pub use span::SpanLoad;

/// What stands under everything that shows forces.
pub const CAUTION: &str = "these figures are for planning. They leave out buckling, sag, \
    transverse motion and dynamics beyond the ringing listed, and do not replace review by \
    qualified structural, propulsion and range-safety staff under the rules that apply locally.";

/// Where a change of thrust stands that is in no phase.
pub(super) const CUT: &str = "the thrust is cut at the end of the plan";

/// What is said beside forces of a line that has not the propellant for its plan.
pub(super) const DRY: &str = "Peaks of forces, strength and slack are those up to the moment at \
    which the first engine runs dry: from then on the masses are not those of the line.";

/// Sentences about rules of one kind; the rest is counted.
const MOST_TOLD: usize = 3;

const STILL: &str = "a line that stands carries it always";
const NO_PHASES: &str = "the plan has no phases";

const NODES: [Column; 4] = [
    column("node", "node", Measure::Word),
    column("acceleration_m_s2", "felt", Measure::Acceleration),
    column("rating_m_s2", "rating", Measure::Acceleration),
    column("loaded_position_m", "loaded position", Measure::Length),
];

const SPANS: [Column; 9] = [
    column("from", "from", Measure::Word),
    column("to", "to", Measure::Word),
    column("force_fore_n", "force fore", Measure::Force),
    column("force_aft_n", "force aft", Measure::Force),
    column("peak_n", "peak", Measure::Force),
    column("peak_at_s", "peak at", Measure::Time),
    column("strength_n", "strength", Measure::Force),
    column("margin", "margin", Measure::Ratio),
    column("stretch_m", "stretch", Measure::Length),
];

const ENGINES: [Column; 6] = [
    column("node", "node", Measure::Word),
    column("force_n", "force", Measure::Force),
    column("exhaust_speed_m_s", "exhaust speed", Measure::Speed),
    column("mass_ratio", "mass ratio", Measure::Ratio),
    column("propellant_used_kg", "propellant used", Measure::Mass),
    column("propellant_left_kg", "propellant left", Measure::Mass),
];

const RAMPS: [Column; 8] = [
    column("phase", "phase", Measure::Count),
    column("at_s", "at", Measure::Time),
    column("length_s", "length", Measure::Time),
    column("lowest_period_s", "lowest period", Measure::Time),
    column("node", "rings most", Measure::Word),
    column("ringing_m", "ringing", Measure::Length),
    column("doppler", "Doppler", Measure::Ratio),
    column("state", "state", Measure::Word),
];

const BROKEN: [Column; 10] = [
    column("rule", "rule", Measure::Word),
    column("subject", "subject", Measure::Word),
    column("phase", "phase", Measure::Count),
    column("at_s", "at", Measure::Various),
    column("from_s", "from", Measure::Various),
    column("value", "value", Measure::Various),
    column("limit", "limit", Measure::Various),
    column("unit", "unit", Measure::Unit),
    column("margin", "margin", Measure::Ratio),
    column("remedy", "remedy", Measure::Word),
];

/// What the loads of a line come to over its whole plan: found once, shown at any moment.
#[derive(Clone, Debug)]
pub struct LoadsOverPlan {
    loads: Arc<Loads>,
    judged: Arc<JudgedLoads>,
    /// The places of the rules that are broken.
    broken: Arc<[usize]>,
}

impl LoadsOverPlan {
    /// Judges the loads of a line over its plan.
    #[must_use]
    pub fn new(layout: &Layout, loads: Arc<Loads>) -> LoadsOverPlan {
        let judged = Arc::new(judge_loads(layout, &loads));
        let broken = (0..judged.len()).filter(|place| judged.is_broken(*place)).collect();
        LoadsOverPlan { judged, broken, loads }
    }

    /// The rules on loads that the plan breaks.
    pub fn broken<'a>(&'a self, layout: &'a Layout) -> impl Iterator<Item = LoadJudgement> + 'a {
        self.broken.iter().filter_map(|place| self.judged.get(layout, *place))
    }

    /// Whether strength, a rating, slack or propellant is broken: what `loads` fails on.
    /// A short ramp is a warning.
    #[must_use]
    pub fn fails(&self) -> bool {
        self.broken.iter().any(|place| !self.judged.is_ramp(*place))
    }
}

/// The loads report of a line at a moment.
#[must_use]
pub fn loads_report<'a>(state: State<'a>, over_plan: &LoadsOverPlan) -> Report<'a> {
    let mut report = head(&state, "loads");
    let loads = &over_plan.loads;
    report.scalars = scalars(&state, over_plan);
    report.remarks = remarks(&state, over_plan);
    report.tables = vec![
        node_table(state.clone()),
        span_table(state.clone(), Arc::clone(loads)),
        engine_table(&state, Arc::clone(loads)),
        ramp_table(state.run().layout(), over_plan),
        broken_table(state.run().layout(), over_plan),
    ];
    report
}

fn scalars<'a>(state: &State<'a>, over_plan: &LoadsOverPlan) -> Vec<Scalar<'a>> {
    let LoadsOverPlan { loads, broken, judged } = over_plan;
    let period_s = judged.period_s();
    let now = loads.state_of_instant(*state.instant());
    let scalar = |key, heading, measure, value| Scalar { key, heading, measure, value };
    let absent = |why: &'static str| Cell::Absent(why.into());
    let is_standing = state.run().plan().is_none();
    let spent = if is_standing {
        absent(super::NO_RAPIDITY)
    } else {
        Cell::finite(now.instant.moment.total_rapidity, OVERFLOW)
    };
    let of_plan = match state.run().plan() {
        Some(plan) => {
            let spent = loads.state(plan.end()).velocity_spent_m_s;
            Cell::finite(loads.propulsion().log10_mass_ratio(spent), OVERFLOW)
        }
        None => absent("a line that stands burns nothing"),
    };
    vec![
        scalar("line_mass_kg", "mass of the line", Measure::Mass, Cell::Number(now.mass_kg)),
        scalar("rapidity_spent", "rapidity spent", Measure::Ratio, spent),
        scalar(
            "log10_mass_ratio_of_plan",
            "log10 of the plan's mass ratio",
            Measure::Ratio,
            of_plan,
        ),
        scalar(
            "lowest_period_s",
            "lowest axial period",
            Measure::Time,
            period_s.map_or_else(|| absent("nothing on the line can swing"), Cell::Number),
        ),
        scalar(
            "broken",
            "rules broken over the plan",
            Measure::Count,
            Cell::Integer(i64::try_from(broken.len()).unwrap_or(i64::MAX)),
        ),
        scalar("caution", "caution", Measure::Word, Cell::Text(CAUTION.into())),
    ]
}

fn remarks(state: &State<'_>, over_plan: &LoadsOverPlan) -> Vec<String> {
    let layout = state.run().layout();
    let loads = &over_plan.loads;
    let mut remarks = broken_remarks(layout, over_plan);
    remarks.extend(absurd_mass_ratio(state, loads));
    if over_plan.judged.runs_dry() {
        remarks.push(DRY.to_owned());
    }
    if loads.structure().members.iter().enumerate().any(|(gap, member)| {
        !member.is_tether && loads.force_peaks(gap).is_some_and(|peaks| peaks.smallest.value < 0.0)
    }) {
        remarks.push("A boom is pushed: buckling is not checked.".to_owned());
    }
    let is_heated =
        |span: &Span| span.thermal_expansion_per_k != 0.0 && span.temperature_change_k != 0.0;
    if layout.spans.iter().any(is_heated) {
        remarks.push("The stretch of a span is that of force and temperature together.".to_owned());
    }
    if (0..state.rows()).any(|row| state.is_changed(row)) {
        remarks.push(
            "Nodes that were moved or released still weigh where the layout puts them.".to_owned(),
        );
    }
    remarks.extend(standing_remark(layout, loads.gradient_warning()));
    // The caution itself stands among the scalars, which every form shows.
    remarks
}

/// The broken rules in sentences: the first few of each kind, and how many more there are.
fn broken_remarks(layout: &Layout, over_plan: &LoadsOverPlan) -> Vec<String> {
    let LoadsOverPlan { judged, broken, .. } = over_plan;
    let rule = |place: &usize| judged.get(layout, *place).map(|judged| judged.rule);
    let mut remarks = Vec::new();
    let mut rest = &broken[..];
    // Rules of a kind stand together; ramps are told apart without being judged again.
    while let Some(first) = rest.first() {
        let kind = rule(first);
        let count = if kind == Some(LoadRule::Ramp) {
            rest.partition_point(|place| judged.is_ramp(*place))
        } else {
            rest.iter().take_while(|place| !judged.is_ramp(**place) && rule(place) == kind).count()
        };
        let (here, after) = rest.split_at(count.max(1));
        for place in here.iter().take(MOST_TOLD) {
            if let Some(found) = judged.get(layout, *place) {
                remarks.push(sentence(layout, &found, &judged.remedy(layout, *place)));
            }
        }
        if here.len() > MOST_TOLD {
            let word = kind.map_or("", LoadRule::word);
            let more = here.len() - MOST_TOLD;
            remarks.push(format!("And {more} more of the rule {word}, in the table `broken`."));
        }
        rest = after;
    }
    remarks
}

/// One broken rule, in a sentence: what, where, from when, what would mend it.
fn sentence(layout: &Layout, judged: &LoadJudgement, remedy: &str) -> String {
    let subject = judged.subject.name(layout);
    let told_at = |at: ArrayTime| readable_time(in_milliseconds(at));
    let mut place = String::new();
    let (phase, from) = match judged.from {
        Some((phase, from)) => (phase, Some(from)),
        None => (judged.phase, None),
    };
    if let Some(phase) = phase {
        let phase = history::place(layout, phase).unwrap_or_else(|| format!("phase {}", phase + 1));
        place.push_str(&format!(" in {phase}"));
    } else if judged.rule == LoadRule::Ramp {
        place.push_str(" where it is cut at the end of the plan");
    }
    if let Some(from) = from {
        place.push_str(&format!(", from {}", told_at(from)));
    }
    let is_peak = matches!(judged.rule, LoadRule::Rating | LoadRule::Strength | LoadRule::Slack);
    if let Some(at) = judged.at.filter(|at| is_peak && Some(*at) != from) {
        place.push_str(&format!(", most at {}", told_at(at)));
    }
    let (value, limit) = (six_digits(judged.value), six_digits(judged.limit));
    let unit = judged.rule.unit();
    let told = match judged.rule {
        LoadRule::Slack => format!("{subject} is slack: it would be pushed with {value} {unit}"),
        LoadRule::Ramp => {
            format!("the thrust changes within {limit} s, the line swings in {value} s")
        }
        LoadRule::Propellant if !judged.value.is_finite() => format!("{subject} runs dry"),
        LoadRule::Propellant => format!("{subject} runs dry: {limit} kg aboard of {value} kg"),
        LoadRule::Rating => format!("{subject} feels {value} {unit} of {limit} {unit}"),
        LoadRule::Strength => format!("{subject} carries {value} {unit} of {limit} {unit}"),
    };
    let lead = if judged.rule == LoadRule::Ramp { "warning" } else { "broken" };
    format!("{lead}: {}: {told}{place}; remedy: {remedy}.", judged.rule.word())
}

/// A moment for a sentence: what is finer than a millisecond stands in the table.
fn in_milliseconds(at: ArrayTime) -> ArrayTime {
    const MILLISECOND: i128 = 1_000_000_000_000_000;
    let count = (at.attoseconds() + MILLISECOND / 2).div_euclid(MILLISECOND);
    ArrayTime::from_attoseconds(count * MILLISECOND)
}

/// An absurd amount of propellant, in plain words.
fn absurd_mass_ratio(state: &State<'_>, loads: &Loads) -> Option<String> {
    let plan = state.run().plan()?;
    let spent = loads.state(plan.end()).velocity_spent_m_s;
    let log10 = loads.propulsion().log10_mass_ratio(spent);
    if log10 < 3.0 {
        return None;
    }
    let size = match log10 {
        ..6.0 => "more than any rocket has had",
        ..30.0 => "no structure could hold it",
        ..53.0 => "for a line of a tonne, more than the mass of the Sun",
        _ => "more than there is matter to burn",
    };
    Some(format!(
        "The plan asks for a mass ratio of 10^{log10:.1}: for each kilogram that arrives, \
         10^{log10:.1} kg at the start; {size}."
    ))
}

/// How far the first-order form of a standing line holds.
pub(super) fn standing_remark(layout: &Layout, warning: Option<GradientWarning>) -> Option<String> {
    let Course::Standing(standing) = &layout.course else { return None };
    if let Some(GradientWarning { row, relative, shift }) = warning {
        return Some(format!(
            "warning: gravity is taken to change evenly with height; what that leaves out is \
             {shift:.1e} at `{}`, {relative:.1e} of its shift.",
            layout.nodes[row].name
        ));
    }
    (standing.gradient_per_s2 != 0.0).then(|| {
        "Gravity is taken to change evenly with height; what that leaves out is below 1e-19."
            .to_owned()
    })
}

fn node_table(state: State<'_>) -> Table<'_> {
    let layout = state.run().layout();
    Table {
        name: "nodes",
        columns: NODES.to_vec(),
        rows: state.rows(),
        marked: Some(layout.reference),
        fill: Box::new(move |row, cells| {
            let node = &layout.nodes[row];
            cells.push(Cell::Text(Cow::Borrowed(&node.name)));
            let Some(aboard) = state.node(row).aboard() else {
                cells.extend((1..NODES.len()).map(|_| Cell::Absent(RELEASED.into())));
                return;
            };
            cells.push(number(state.instant().felt_acceleration_m_s2(aboard.position_m)));
            cells.push(match node.rating_m_s2 {
                Some(rating) => Cell::Number(rating),
                None => Cell::Absent("no rating is given".into()),
            });
            cells.push(number(aboard.position_m));
        }),
    }
}

fn span_table<'a>(state: State<'a>, loads: Arc<Loads>) -> Table<'a> {
    let layout = state.run().layout();
    let now = loads.state_of_instant(*state.instant());
    Table {
        name: "spans",
        columns: SPANS.to_vec(),
        rows: state.rows() - 1,
        marked: None,
        fill: Box::new(move |gap, cells| {
            for end in [gap, gap + 1] {
                cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[end].name)));
            }
            if [gap, gap + 1].iter().any(|end| state.node(*end).aboard().is_none()) {
                let why = "an end of it was released";
                cells.extend((2..SPANS.len()).map(|_| Cell::Absent(why.into())));
                return;
            }
            let forces = loads.span_force_n(&now, gap);
            cells.extend(forces.map(|force_n| Cell::finite(force_n, OVERFLOW)));
            cells.extend(peak_cells(&loads, gap));
            cells.extend(strength_cells(&loads, gap));
            cells.push(Cell::finite(loads.span_stretch_m(&now, gap), OVERFLOW));
        }),
    }
}

/// The peak that counts for a span: the largest tension of a tether, either sign of a boom.
fn peak_of(loads: &Loads, gap: usize) -> Option<Peak> {
    let peaks = loads.force_peaks(gap)?;
    let is_tether = loads.structure().members[gap].is_tether;
    Some(if is_tether { peaks.largest } else { peaks.peak() })
}

fn peak_cells(loads: &Loads, gap: usize) -> [Cell<'static>; 2] {
    match peak_of(loads, gap) {
        None => [Cell::Absent(NO_PHASES.into()), Cell::Absent(NO_PHASES.into())],
        Some(Peak { value, phase: None, .. }) => {
            [Cell::finite(value, OVERFLOW), Cell::Absent(STILL.into())]
        }
        Some(Peak { value, at, .. }) => [Cell::finite(value, OVERFLOW), Cell::Time(at)],
    }
}

fn strength_cells(loads: &Loads, gap: usize) -> [Cell<'static>; 2] {
    let Some(strength_n) = loads.structure().members[gap].strength_n else {
        let unlimited = || Cell::Absent("no strength is given".into());
        return [unlimited(), unlimited()];
    };
    let margin = match loads.strength(gap) {
        Some(strength) => Cell::finite(strength.margin.margin, OVERFLOW),
        None => Cell::Absent(NO_PHASES.into()),
    };
    [Cell::Number(strength_n), margin]
}

fn engine_table<'a>(state: &State<'a>, loads: Arc<Loads>) -> Table<'a> {
    let layout = state.run().layout();
    let now = loads.state_of_instant(*state.instant());
    let is_standing = state.run().plan().is_none();
    Table {
        name: "engines",
        columns: ENGINES.to_vec(),
        rows: loads.propulsion().engines().len(),
        marked: None,
        fill: Box::new(move |index, cells| {
            let propulsion = loads.propulsion();
            let engine = &propulsion.engines()[index];
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[engine.row].name)));
            cells.push(Cell::finite(loads.engine_force_n(&now, index), OVERFLOW));
            let Some(exhaust_speed_m_s) = engine.exhaust_speed_m_s else {
                let why = "it has no exhaust speed and burns nothing";
                cells.extend((2..ENGINES.len()).map(|_| Cell::Absent(why.into())));
                return;
            };
            cells.push(Cell::Number(exhaust_speed_m_s));
            if is_standing {
                let why = "a line that stands burns nothing";
                cells.extend((3..ENGINES.len()).map(|_| Cell::Absent(why.into())));
                return;
            }
            let spent = now.velocity_spent_m_s;
            let ratio = propulsion.mass_ratio(spent);
            cells.push(if ratio.is_finite() {
                Cell::Number(ratio)
            } else {
                let log10 = propulsion.log10_mass_ratio(spent);
                Cell::Absent(format!("10^{log10:.1} exceeds the largest double").into())
            });
            let used = propulsion.used(index, spent);
            cells.push(Cell::finite(used.used_kg, OVERFLOW));
            cells.push(match used.left_kg {
                Some(left_kg) => Cell::finite(left_kg, OVERFLOW),
                None => Cell::Absent("the layout gives it no propellant".into()),
            });
        }),
    }
}

/// A bound, to nine digits: those after them would make rows differ that do not.
fn estimate(value: f64) -> f64 {
    format!("{value:.8e}").parse().unwrap_or(value)
}

fn ramp_table<'a>(layout: &'a Layout, over_plan: &LoadsOverPlan) -> Table<'a> {
    let ringing = Arc::clone(over_plan.judged.ringing());
    let period_s = over_plan.judged.period_s().unwrap_or(f64::INFINITY);
    let ends: Vec<_> = match &layout.course {
        Course::Thrust(plan) => plan.phases().iter().map(|phase| phase.start).collect(),
        Course::Standing(_) => Vec::new(),
    };
    let end = match &layout.course {
        Course::Thrust(plan) => plan.end(),
        Course::Standing(_) => ArrayTime::ZERO,
    };
    Table {
        name: "ramps",
        columns: RAMPS.to_vec(),
        rows: ringing.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let ringing = &ringing[row];
            cells.push(match ends.get(ringing.phase) {
                Some(_) => Cell::Integer(i64::try_from(ringing.phase + 1).unwrap_or(i64::MAX)),
                None => Cell::Absent(CUT.into()),
            });
            cells.push(Cell::Time(ends.get(ringing.phase).copied().unwrap_or(end)));
            cells.push(Cell::Number(ringing.ramp_s));
            cells.push(Cell::finite(period_s, OVERFLOW));
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[ringing.row].name)));
            cells.push(Cell::finite(estimate(ringing.amplitude_m), OVERFLOW));
            cells.push(Cell::finite(estimate(ringing.doppler), OVERFLOW));
            let is_kept = ringing.is_quasi_static(period_s);
            cells.push(Cell::Text(if is_kept { "kept" } else { "broken" }.into()));
        }),
    }
}

fn broken_table<'a>(layout: &'a Layout, over_plan: &LoadsOverPlan) -> Table<'a> {
    let (judged, broken) = (Arc::clone(&over_plan.judged), Arc::clone(&over_plan.broken));
    Table {
        name: "broken",
        columns: BROKEN.to_vec(),
        rows: broken.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let place = broken[row];
            let remedy = judged.remedy(layout, place);
            let Some(judged) = judged.get(layout, place) else { return };
            cells.push(Cell::Text(judged.rule.word().into()));
            cells.push(Cell::Text(judged.subject.name(layout)));
            cells.push(match judged.phase {
                Some(phase) => Cell::Integer(i64::try_from(phase + 1).unwrap_or(i64::MAX)),
                None if judged.rule == LoadRule::Ramp => Cell::Absent(CUT.into()),
                None => Cell::Absent("outside every phase of a plan".into()),
            });
            for at in [judged.at, judged.from.map(|(_, at)| at)] {
                cells.push(match at {
                    Some(at) => Cell::Computed(at),
                    None => Cell::Absent(STILL.into()),
                });
            }
            let measure = judged.rule.measure();
            cells.push(match judged.value.is_finite() {
                true => Cell::Measured(judged.value, measure),
                false => Cell::Absent(OVERFLOW.into()),
            });
            cells.push(Cell::Measured(judged.limit, measure));
            cells.push(Cell::Text(judged.rule.unit().into()));
            cells.push(match judged.margin {
                Some(margin) => Cell::finite(margin, OVERFLOW),
                None => Cell::Absent("a limit of zero has no margin".into()),
            });
            cells.push(Cell::Text(remedy.into()));
        }),
    }
}
