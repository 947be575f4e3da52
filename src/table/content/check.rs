//! `check`: every rule a layout must meet, with margins.
//!
//! One file a rule or a group of rules. Judgements are made when they are asked for, from
//! what the plan has been boiled down to, so a line of a million nodes is neither held
//! twice nor told in strings nobody reads.

mod limits;
mod line;
mod offset;
mod phases;
mod placed;
mod report;
mod resolve;
mod words;

use std::borrow::Cow;
use std::sync::{Arc, OnceLock};

use crate::layout::Layout;
use crate::model::array_time::ArrayTime;
use crate::model::loads::Loads;
use crate::table::Measure;

use limits::Limits;
use line::Line;
use placed::Placed;

pub use report::check_report;

/// A rule of a layout, in the order of the table.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Rule {
    /// No node reaches the horizon.
    Horizon,
    /// No node feels more than it is built for.
    Rating,
    /// No span carries more than its strength over its safety factor.
    Strength,
    /// No tether is pushed.
    Slack,
    /// No ramp is shorter than the line's lowest axial period asks for.
    Ramp,
    /// No engine runs dry.
    Propellant,
    /// The rates of a pair are told apart within an averaging time.
    Resolve,
    /// The clocks of a pair do not part farther than a limit.
    ClockOffset,
}

impl Rule {
    /// Its word in the tables.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Rule::Horizon => "horizon",
            Rule::Rating => "rating",
            Rule::Strength => "strength",
            Rule::Slack => "slack",
            Rule::Ramp => "ramp",
            Rule::Propellant => "propellant",
            Rule::Resolve => "resolve",
            Rule::ClockOffset => "clock_offset",
        }
    }

    /// The SI unit of its value and its limit, and what they measure.
    #[must_use]
    pub fn unit(self) -> (&'static str, Measure) {
        match self {
            Rule::Horizon | Rule::Rating => ("m/s^2", Measure::Acceleration),
            Rule::Strength | Rule::Slack => ("N", Measure::Force),
            Rule::Ramp | Rule::Resolve | Rule::ClockOffset => ("s", Measure::Time),
            Rule::Propellant => ("kg", Measure::Mass),
        }
    }
}

/// Whether a rule is met.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum RuleState {
    /// It is met; a value exactly at its limit is.
    Kept,
    /// It is not.
    Broken,
    /// The layout does not say enough, or this version does not judge the rule.
    NotJudged,
}

impl RuleState {
    /// Its word in the tables.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            RuleState::Kept => "kept",
            RuleState::Broken => "broken",
            RuleState::NotJudged => "not_judged",
        }
    }

    /// The state of a rule that is judged.
    fn of(kept: bool) -> RuleState {
        if kept { RuleState::Kept } else { RuleState::Broken }
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

/// What a rule binds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Subject {
    /// A node, by its row; limits of its clock are against the reference.
    Node(usize),
    /// A pair of nodes, from the first to the second.
    Pair([usize; 2]),
    /// The whole line, at a change of thrust.
    Line,
    /// The engine at a row.
    Engine(usize),
    /// So many parts of the line together, with the word for one of them.
    Parts(usize, &'static str),
}

impl Subject {
    /// Its name in the tables.
    #[must_use]
    pub fn name(self, layout: &Layout) -> Cow<'_, str> {
        let name = |row: usize| layout.nodes[row].name.as_str();
        match self {
            Subject::Node(row) => Cow::Borrowed(name(row)),
            Subject::Pair([from, to]) => Cow::Owned(format!("{} to {}", name(from), name(to))),
            Subject::Line => Cow::Borrowed("the line"),
            Subject::Engine(row) => Cow::Owned(format!("engine at {}", name(row))),
            Subject::Parts(1, word) => Cow::Owned(format!("1 {word}")),
            Subject::Parts(count, word) => Cow::Owned(format!("{count} {word}s")),
        }
    }

    /// The rows of the two clocks a limit compares.
    fn ends(self, layout: &Layout) -> [usize; 2] {
        match self {
            Subject::Node(row) => [layout.reference, row],
            Subject::Pair(pair) => pair,
            Subject::Line | Subject::Engine(_) | Subject::Parts(..) => {
                unreachable!("a limit binds a node or a pair")
            }
        }
    }
}

/// One rule, judged for one subject.
#[derive(Clone, Debug, PartialEq)]
pub struct Judgement {
    /// The rule.
    pub rule: Rule,
    /// What it binds.
    pub subject: Subject,
    /// Index of the phase in which the value occurs first, or why there is none.
    pub phase: Result<usize, &'static str>,
    /// The moment it does, or at which the rule is broken first.
    pub at: Result<ArrayTime, &'static str>,
    /// The value nearest to the limit, in the unit of the rule, or why there is none.
    pub value: Result<f64, Cow<'static, str>>,
    /// The limit, or why there is none.
    pub limit: Result<f64, &'static str>,
    /// `1 − value/limit`, for the horizon the smallest `N`; minus infinity for a pair that
    /// is never resolved. `None` for a rule that is not judged.
    pub margin: Option<f64>,
    /// Whether the rule is met.
    pub state: RuleState,
}

const NO_PHASE: &str = "outside every phase of a plan";

impl Judgement {
    fn not_judged(rule: Rule, subject: Subject, why: impl Into<Cow<'static, str>>) -> Judgement {
        Judgement {
            rule,
            subject,
            phase: Err("not judged"),
            at: Err("not judged"),
            value: Err(why.into()),
            limit: Err("not judged"),
            margin: None,
            state: RuleState::NotJudged,
        }
    }
}

/// How many rules are kept, and which is nearest to being broken.
#[derive(Clone, Debug, PartialEq)]
pub struct Summary {
    /// Rules kept.
    pub kept: usize,
    /// Rules broken.
    pub broken: usize,
    /// Rules not judged.
    pub not_judged: usize,
    /// The smallest margin of all that are judged; the first of equals.
    pub smallest: Judgement,
}

/// Every rule of a layout, judged over its plan or at a moment.
///
/// Rows are in the order of [`Rule`], then fore to aft; parts and limits of equal place in
/// the order of the file.
pub struct Check<'a> {
    layout: &'a Layout,
    span: JudgedOver,
    line: Line<'a>,
    /// Rows of the nodes with a rating.
    rated: Vec<usize>,
    /// Where the nodes are judged, and the rules on loads.
    placed: Placed,
    limits: Limits<'a>,
    /// Made once, when it is asked for.
    summary: OnceLock<Summary>,
}

impl<'a> Check<'a> {
    /// Prepares the judgement: in a time that grows with the nodes and the phases, not with
    /// their product.
    #[must_use]
    pub fn new(layout: &'a Layout, span: JudgedOver) -> Check<'a> {
        Check::with_loads(layout, span, None)
    }

    /// The same with the loads of the layout over its plan, when they have been built.
    #[must_use]
    pub fn with_loads(
        layout: &'a Layout,
        span: JudgedOver,
        loads: Option<Arc<Loads>>,
    ) -> Check<'a> {
        let line = Line::of(layout, span);
        let placed = Placed::of(layout, span, &line, loads);
        let rated = layout.nodes.iter().enumerate().filter(|(_, node)| node.rating_m_s2.is_some());
        Check {
            layout,
            span,
            rated: rated.map(|(row, _)| row).collect(),
            limits: Limits::judge(layout, span, &line, &placed),
            placed,
            line,
            summary: OnceLock::new(),
        }
    }

    /// The layout judged.
    #[must_use]
    pub fn layout(&self) -> &'a Layout {
        self.layout
    }

    /// What it is judged over.
    #[must_use]
    pub fn span(&self) -> JudgedOver {
        self.span
    }

    /// Number of judgements.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.layout.nodes.len()
            + self.rated.len()
            + self.placed.judgements.len()
            + self.limits.judgements.len()
    }

    /// A judgement by its row.
    ///
    /// # Panics
    ///
    /// If there is no such row.
    #[must_use]
    pub fn judgement(&self, row: usize) -> Judgement {
        let nodes = self.layout.nodes.len();
        if row < nodes {
            return self.line.horizon(row, self.placed.position_m(self.layout, row));
        }
        let row = row - nodes;
        if let Some(&node) = self.rated.get(row) {
            return self.rating(node);
        }
        let row = row - self.rated.len();
        if let Some((judgement, _)) = self.placed.judgements.get(row) {
            return judgement.clone();
        }
        self.limits.judgements[row - self.placed.judgements.len()].clone()
    }

    fn rating(&self, row: usize) -> Judgement {
        let rating = self.layout.nodes[row].rating_m_s2.unwrap_or(f64::INFINITY);
        self.line.rating(row, self.placed.position_m(self.layout, row), rating)
    }

    /// Counts and the smallest margin.
    #[must_use]
    pub fn summary(&self) -> &Summary {
        self.summary.get_or_init(|| self.summarised())
    }

    fn summarised(&self) -> Summary {
        let mut summary =
            Summary { kept: 0, broken: 0, not_judged: 0, smallest: self.judgement(0) };
        for row in 0..self.rows() {
            let judgement = self.judgement(row);
            match judgement.state {
                RuleState::Kept => summary.kept += 1,
                RuleState::Broken => summary.broken += 1,
                RuleState::NotJudged => summary.not_judged += 1,
            }
            let margin = judgement.margin.unwrap_or(f64::INFINITY);
            if margin < summary.smallest.margin.unwrap_or(f64::INFINITY) {
                summary.smallest = judgement;
            }
        }
        summary
    }

    /// The first broken rule and how many there are; `None` when there is none.
    ///
    /// Nodes that keep their rules by more than rounding are passed over without being
    /// judged, so this costs a few nanoseconds a node.
    #[must_use]
    pub fn broken(&self) -> Option<(Judgement, usize)> {
        let nodes = &self.layout.nodes;
        let mut found: Option<(Judgement, usize)> = None;
        let mut see = |judgement: Judgement| {
            if judgement.state == RuleState::Broken {
                found.get_or_insert((judgement, 0)).1 += 1;
            }
        };
        // `N` is linear in position and rows go fore to aft: when the ends fly, all do.
        let ends = [0, nodes.len() - 1];
        if ends.iter().any(|&row| self.judgement(row).state == RuleState::Broken) {
            (0..nodes.len()).map(|row| self.judgement(row)).for_each(&mut see);
        }
        for &row in &self.rated {
            let node = &nodes[row];
            let rating = node.rating_m_s2.unwrap_or(f64::INFINITY);
            let position_m = self.placed.position_m(self.layout, row);
            if !self.line.surely_keeps_rating(position_m, rating) {
                see(self.rating(row));
            }
        }
        let loads = self.placed.judgements.iter().map(|(judgement, _)| judgement);
        loads.chain(&self.limits.judgements).cloned().for_each(see);
        found
    }

    /// What would mend a broken rule; `None` for one that is kept or not judged for a
    /// reason that no key of the layout mends.
    #[must_use]
    pub fn remedy(&self, judgement: &Judgement) -> Option<String> {
        match (judgement.state, judgement.subject) {
            (RuleState::Kept, _) | (_, Subject::Parts(..)) => None,
            (RuleState::Broken, Subject::Node(row)) if judgement.rule == Rule::Horizon => {
                Some(self.line.horizon_remedy(self.placed.position_m(self.layout, row)))
            }
            (RuleState::Broken, Subject::Node(row)) if judgement.rule == Rule::Rating => {
                Some(self.line.rating_remedy(&self.layout.nodes[row]))
            }
            _ if judgement.rule == Rule::ClockOffset => {
                self.limits.offset_remedy(self.layout, &self.placed, judgement)
            }
            _ if judgement.rule == Rule::Resolve => {
                self.limits.resolve_remedy(self.layout, judgement)
            }
            _ => {
                let same = |(known, _): &&(Judgement, String)| known == judgement;
                self.placed.judgements.iter().find(same).map(|(_, remedy)| remedy.clone())
            }
        }
    }

    /// One sentence: what brings the subject of a judgement to its limit, and so what
    /// widens its margin.
    #[must_use]
    pub fn widen(&self, judgement: &Judgement) -> String {
        if let Some(remedy) = self.remedy(judgement) {
            return remedy;
        }
        let node = |row: usize| &self.layout.nodes[row];
        let way = match (judgement.rule, judgement.subject) {
            (Rule::Horizon, Subject::Node(row)) => Some(self.line.horizon_widen(node(row))),
            (Rule::Rating, Subject::Node(row)) => Some(self.line.rating_widen(node(row))),
            (Rule::ClockOffset, _) => {
                self.limits.offset_widen(self.layout, &self.placed, judgement)
            }
            (Rule::Strength, _) => {
                Some("less thrust, less mass beyond the span, or a stronger one".to_owned())
            }
            (Rule::Ramp, _) => Some("a longer ramp, or a stiffer line".to_owned()),
            (Rule::Propellant, _) => {
                Some("more propellant, a higher exhaust speed, or less thrust".to_owned())
            }
            (Rule::Resolve, _) => self.limits.resolve_widen(self.layout, judgement),
            _ => None,
        };
        way.unwrap_or_else(|| "nothing that this version judges".to_owned())
    }
}

/// Judges every rule of a layout.
#[must_use]
pub fn judge(layout: &Layout, span: JudgedOver) -> Vec<Judgement> {
    let check = Check::new(layout, span);
    (0..check.rows()).map(|row| check.judgement(row)).collect()
}
