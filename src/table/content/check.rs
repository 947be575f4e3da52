//! `check`: every rule a layout must meet, with margins.

use std::borrow::Cow;
use std::sync::Arc;

use super::column;
use crate::layout::{Course, Layout};
use crate::model::array_time::ArrayTime;
use crate::model::constants::{C2_M2_S2, STANDARD_GRAVITY_M_S2};
use crate::model::dd::Dd;
use crate::model::horizon::{self, Extreme, Extremes, HorizonReached};
use crate::model::plan::Plan;
use crate::model::rates::{Instant, is_realisable};
use crate::table::{Cell, Column, Measure, Report, Scalar, Table};

/// A rule of a layout.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Rule {
    /// No node reaches the horizon.
    Horizon,
    /// No node feels more than it is built for.
    Rating,
}

impl Rule {
    /// Its word in the tables.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Rule::Horizon => "horizon",
            Rule::Rating => "rating",
        }
    }
}

/// Whether a rule is met.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum RuleState {
    /// It is met.
    Kept,
    /// It is not.
    Broken,
}

impl RuleState {
    /// Its word in the tables.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            RuleState::Kept => "kept",
            RuleState::Broken => "broken",
        }
    }
}

/// What the rules are judged over.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum JudgedOver {
    /// The whole plan.
    Plan,
    /// One moment of it.
    Moment(ArrayTime),
}

/// One rule, judged for one node.
#[derive(Clone, Debug, PartialEq)]
pub struct Judgement {
    /// The rule.
    pub rule: Rule,
    /// Row of the node.
    pub node: usize,
    /// Index of the phase in which the value occurs first; `None` outside every phase.
    pub phase: Option<usize>,
    /// The moment it does, or at which the rule is broken first.
    pub at: ArrayTime,
    /// The value nearest to the limit.
    pub value: f64,
    /// The limit; `None` where nothing limits it.
    pub limit: Option<f64>,
    /// `1 − value/limit`; for the horizon the smallest `N`.
    pub margin: f64,
    /// Whether the rule is met.
    pub state: RuleState,
    /// What would mend it; empty when it is kept.
    pub remedy: String,
}

/// The accelerations the line is judged under, and the gradient it stands in.
struct Judged<'a> {
    extremes: Extremes,
    phases: bool,
    gradient_per_s2: f64,
    plan: Option<&'a Plan>,
}

impl Judged<'_> {
    fn of(layout: &Layout, span: JudgedOver) -> Judged<'_> {
        let single = |acceleration_m_s2, at| {
            let extreme = Extreme { acceleration_m_s2, phase: 0, at };
            Extremes { largest: extreme, smallest: extreme }
        };
        match (&layout.course, span) {
            (Course::Standing(standing), _) => Judged {
                extremes: single(Dd::new(standing.gravity_m_s2), ArrayTime::ZERO),
                phases: false,
                gradient_per_s2: standing.gradient_per_s2,
                plan: None,
            },
            (Course::Thrust(plan), JudgedOver::Moment(at)) => {
                let moment = plan.moment(at);
                let mut extremes = single(moment.acceleration_m_s2, at);
                extremes.largest.phase = moment.phase.unwrap_or(0);
                extremes.smallest.phase = extremes.largest.phase;
                let phases = moment.phase.is_some();
                Judged { extremes, phases, gradient_per_s2: 0.0, plan: None }
            }
            (Course::Thrust(plan), JudgedOver::Plan) => {
                let extremes = Extremes::of(plan);
                Judged {
                    extremes: extremes.unwrap_or_else(|| single(Dd::ZERO, ArrayTime::ZERO)),
                    phases: extremes.is_some(),
                    gradient_per_s2: 0.0,
                    plan: Some(plan),
                }
            }
        }
    }

    fn phase(&self, extreme: &Extreme) -> Option<usize> {
        self.phases.then_some(extreme.phase)
    }

    /// The felt acceleration of a node at an extreme, m/s².
    fn felt(&self, extreme: &Extreme, position_m: f64) -> f64 {
        let moment = crate::model::plan::Moment {
            acceleration_m_s2: extreme.acceleration_m_s2,
            ..crate::model::plan::Moment::held_always(extreme.at, 0.0)
        };
        let instant = Instant { moment, gradient_per_s2: self.gradient_per_s2 };
        instant.felt_acceleration_m_s2(Dd::new(position_m)).to_f64()
    }

    fn horizon(&self, row: usize, position_m: f64) -> Judgement {
        let worst = self.extremes.worst_for(position_m);
        let drive = worst.acceleration_m_s2 * position_m / C2_M2_S2;
        // A node whose rate never falls below one is nearest to the horizon while it coasts.
        let (rate, value) = if drive.is_negative() {
            (drive + 1.0, worst.acceleration_m_s2.abs().to_f64())
        } else {
            (Dd::ONE, 0.0)
        };
        let limit = (position_m != 0.0).then(|| (C2_M2_S2 / Dd::new(position_m)).abs().to_f64());
        let kept = is_realisable(worst.acceleration_m_s2, position_m);
        let mut judgement = Judgement {
            rule: Rule::Horizon,
            node: row,
            phase: self.phase(&worst),
            at: worst.at,
            value,
            limit,
            margin: rate.to_f64(),
            state: if kept { RuleState::Kept } else { RuleState::Broken },
            remedy: String::new(),
        };
        if !kept {
            let reached = self
                .plan
                .and_then(|plan| horizon::reached(plan, &self.extremes, position_m))
                .unwrap_or_else(|| horizon::partners(worst, position_m));
            judgement.phase = self.phases.then_some(reached.phase);
            judgement.at = ArrayTime::nearest(reached.at_s).unwrap_or(worst.at);
            judgement.remedy = horizon_remedy(&reached);
        }
        judgement
    }

    fn rating(&self, row: usize, position_m: f64, rating: f64) -> Option<Judgement> {
        let (worst, felt) = [self.extremes.largest, self.extremes.smallest]
            .into_iter()
            .filter(|extreme| is_realisable(extreme.acceleration_m_s2, position_m))
            .map(|extreme| (extreme, self.felt(&extreme, position_m)))
            .max_by(|(_, a), (_, b)| a.abs().total_cmp(&b.abs()))?;
        let value = felt.abs();
        let kept = value <= rating;
        let mut judgement = Judgement {
            rule: Rule::Rating,
            node: row,
            phase: self.phase(&worst),
            at: worst.at,
            value,
            limit: Some(rating),
            margin: 1.0 - value / rating,
            state: if kept { RuleState::Kept } else { RuleState::Broken },
            remedy: String::new(),
        };
        if !kept {
            judgement.remedy = self.rating_remedy(felt, position_m, rating);
            if let Some((phase, at)) = self.first_over(position_m, rating) {
                (judgement.phase, judgement.at) = (Some(phase), at);
            }
        }
        Some(judgement)
    }

    fn rating_remedy(&self, felt: f64, position_m: f64, rating: f64) -> String {
        if !self.phases {
            return format!("build the node for {}", amount(felt.abs()));
        }
        // α/(1 + αh/c²) = r at α = r/(1 − rh/c²), with the sign of the thrust.
        let bound = Dd::new(rating.copysign(felt));
        let most = (bound / (Dd::ONE - bound * position_m / C2_M2_S2)).to_f64();
        format!(
            "hold no more than {} at the reference, or build the node for {}",
            amount(most.abs()),
            amount(felt.abs())
        )
    }

    /// The first phase and moment at which a node feels more than it is built for.
    fn first_over(&self, position_m: f64, rating: f64) -> Option<(usize, ArrayTime)> {
        let over = |acceleration: Dd| {
            let extreme =
                Extreme { acceleration_m_s2: acceleration, phase: 0, at: ArrayTime::ZERO };
            self.felt(&extreme, position_m).abs() > rating
        };
        for (index, phase) in self.plan?.phases().iter().enumerate() {
            if over(phase.acceleration(phase.start)) {
                return Some((index, phase.start));
            }
            let last = phase.acceleration(phase.end);
            if over(last) {
                let bound = Dd::new(rating.copysign(last.hi));
                let limit = bound / (Dd::ONE - bound * position_m / C2_M2_S2);
                let after = phase.moment_of(limit).unwrap_or(Dd::ZERO);
                let at = ArrayTime::nearest(phase.start.seconds() + after)?;
                return Some((index, at.max(phase.start)));
            }
        }
        None
    }
}

fn horizon_remedy(reached: &HorizonReached) -> String {
    format!(
        "hold no more than {:?} m/s^2 at the reference, or place the node no farther than {:?} m",
        reached.largest_acceleration_m_s2.abs(),
        reached.nearest_position_m
    )
}

/// An acceleration for a sentence.
fn amount(acceleration_m_s2: f64) -> String {
    format!("{acceleration_m_s2:.6} m/s^2 ({:.6} g0)", acceleration_m_s2 / STANDARD_GRAVITY_M_S2)
}

/// Judges every rule: the horizon for each node, then the rating of each node that has one.
#[must_use]
pub fn judge(layout: &Layout, span: JudgedOver) -> Vec<Judgement> {
    let judged = Judged::of(layout, span);
    let mut judgements: Vec<Judgement> = Vec::with_capacity(layout.nodes.len());
    for (row, node) in layout.nodes.iter().enumerate() {
        judgements.push(judged.horizon(row, node.position_m));
    }
    for (row, node) in layout.nodes.iter().enumerate() {
        let rated = node.rating_m_s2.and_then(|rating| judged.rating(row, node.position_m, rating));
        judgements.extend(rated);
    }
    judgements
}

const COLUMNS: [Column; 10] = [
    column("rule", "rule", Measure::Word),
    column("subject", "subject", Measure::Word),
    column("phase", "phase", Measure::Count),
    column("at_s", "at", Measure::Time),
    column("value", "value", Measure::Acceleration),
    column("limit", "limit", Measure::Acceleration),
    column("unit", "unit", Measure::Word),
    column("margin", "margin", Measure::Ratio),
    column("state", "state", Measure::Word),
    column("remedy", "remedy", Measure::Word),
];

/// The check report of a layout, from its judgements.
#[must_use]
pub fn check_report(layout: &Layout, span: JudgedOver, judgements: Arc<[Judgement]>) -> Report<'_> {
    let mut report = head(layout, span);
    let broken = judgements.iter().filter(|judgement| judgement.state == RuleState::Broken).count();
    let smallest = judgements.iter().min_by(|a, b| a.margin.total_cmp(&b.margin));
    let scalar = |key, heading, measure, value| Scalar { key, heading, measure, value };
    let count = |number: usize| Cell::Integer(i64::try_from(number).unwrap_or(i64::MAX));
    report.scalars = vec![
        scalar("kept", "kept", Measure::Count, count(judgements.len() - broken)),
        scalar("broken", "broken", Measure::Count, count(broken)),
    ];
    if let Some(smallest) = smallest {
        report.scalars.extend([
            scalar(
                "smallest_margin",
                "smallest margin",
                Measure::Ratio,
                Cell::Number(smallest.margin),
            ),
            scalar(
                "smallest_margin_rule",
                "of the rule",
                Measure::Word,
                Cell::Text(smallest.rule.word().into()),
            ),
            scalar(
                "smallest_margin_subject",
                "for",
                Measure::Word,
                Cell::Text(Cow::Borrowed(&layout.nodes[smallest.node].name)),
            ),
        ]);
    }
    report.tables.push(Table {
        name: "rules",
        columns: COLUMNS.to_vec(),
        rows: judgements.len(),
        marked: None,
        fill: Box::new(move |row, cells| fill(layout, &judgements[row], cells)),
    });
    report
}

/// The head: a line that reaches the horizon has no state, so it is made from the plan.
fn head(layout: &Layout, span: JudgedOver) -> Report<'_> {
    const WHOLE: &str = "the rules are judged over the whole plan";
    let (at, acceleration, rapidity) = match (span, &layout.course) {
        (JudgedOver::Plan, _) => (Err(WHOLE), Err(WHOLE), Err(WHOLE)),
        (JudgedOver::Moment(at), Course::Thrust(plan)) => {
            let moment = plan.moment(at);
            let acceleration = moment.acceleration_m_s2.to_f64();
            (Ok(at), Ok(acceleration), Ok(moment.rapidity.to_f64()))
        }
        (JudgedOver::Moment(at), Course::Standing(standing)) => {
            (Ok(at), Ok(standing.gravity_m_s2), Err(super::NO_RAPIDITY))
        }
    };
    Report {
        command: "check",
        schema_version: 1,
        layout: &layout.name,
        revision: layout.revision.as_deref(),
        layout_sha256: &layout.source.sha256,
        at,
        reference_acceleration_m_s2: acceleration,
        rapidity,
        scalars: Vec::new(),
        tables: Vec::new(),
        remarks: Vec::new(),
    }
}

fn fill<'a>(layout: &'a Layout, judgement: &Judgement, cells: &mut Vec<Cell<'a>>) {
    let word = |word: &'static str| Cell::Text(Cow::Borrowed(word));
    cells.push(word(judgement.rule.word()));
    cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[judgement.node].name)));
    cells.push(match judgement.phase {
        Some(phase) => Cell::Integer(i64::try_from(phase + 1).unwrap_or(i64::MAX)),
        None => Cell::Absent("outside every phase of a plan".into()),
    });
    cells.push(Cell::Time(judgement.at));
    cells.push(Cell::Number(judgement.value));
    cells.push(match judgement.limit {
        Some(limit) => Cell::finite(limit, super::OVERFLOW),
        None => Cell::Absent("the reference node is never at the horizon".into()),
    });
    cells.push(word("m/s^2"));
    cells.push(Cell::finite(judgement.margin, super::OVERFLOW));
    cells.push(word(judgement.state.word()));
    cells.push(if judgement.remedy.is_empty() {
        Cell::Absent("nothing to mend".into())
    } else {
        Cell::Text(Cow::Owned(judgement.remedy.clone()))
    });
}
