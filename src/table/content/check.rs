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
mod trial;

use std::borrow::Cow;
use std::sync::{Arc, OnceLock};

use crate::layout::{Course, Layout};
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
    /// Its row in the table.
    pub row: usize,
    /// The rule.
    pub rule: Rule,
    /// What it binds.
    pub subject: Subject,
    /// Index of the phase in which the value occurs first, or why there is none.
    pub phase: Result<usize, &'static str>,
    /// The moment it does.
    pub at: Result<ArrayTime, &'static str>,
    /// The moment from which on the rule is broken, or why there is none.
    pub broken_from: Result<ArrayTime, &'static str>,
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
const NO_PLAN: &str = "a line that stands has no plan";
const KEPT: &str = "the rule is kept";
const ONE_MOMENT: &str = "one moment is judged";

impl Judgement {
    fn not_judged(rule: Rule, subject: Subject, why: impl Into<Cow<'static, str>>) -> Judgement {
        Judgement {
            row: 0,
            rule,
            subject,
            phase: Err("not judged"),
            at: Err("not judged"),
            broken_from: Err("not judged"),
            value: Err(why.into()),
            limit: Err("not judged"),
            margin: None,
            state: RuleState::NotJudged,
        }
    }

    /// The share of its limit that the value uses up; `None` where there is no such number.
    #[must_use]
    pub fn used(&self) -> Option<f64> {
        let (Ok(value), Ok(limit)) = (&self.value, self.limit) else { return None };
        Some(value / limit).filter(|used| used.is_finite())
    }

    /// Whether this rule is nearer to its limit, or farther beyond it, than another: what is
    /// broken comes before what is kept, and a broken rule whose limit leaves no margin first
    /// of all. Margins that agree to the last digit are told apart by the share of the limit
    /// that is used, which has digits left where a margin is next to one.
    #[must_use]
    pub fn is_nearer_than(&self, other: &Judgement) -> bool {
        let rank = |judgement: &Judgement| match (judgement.state, judgement.margin) {
            (RuleState::Broken, margin) => (0, margin.unwrap_or(f64::NEG_INFINITY)),
            (RuleState::Kept, margin) => (1, margin.unwrap_or(f64::INFINITY)),
            (RuleState::NotJudged, _) => (2, 0.0),
        };
        let ((own, margin), (others, other_margin)) = (rank(self), rank(other));
        if own != others || margin != other_margin {
            return own < others || (own == others && margin < other_margin);
        }
        if let (Some(used), Some(other_used)) = (self.used(), other.used()) {
            return used > other_used;
        }
        match (&self.value, &other.value) {
            (Ok(value), Ok(other_value)) => self.rule == other.rule && value > other_value,
            _ => false,
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
    /// The one nearest to its limit, or farthest beyond it, as
    /// [`Judgement::is_nearer_than`] has it; the first of equals.
    pub smallest: Judgement,
}

/// What a row of the table is about: a node, or the place among the rules of its kind.
#[derive(Clone, Copy, Debug)]
enum Part {
    Horizon(usize),
    Rating(usize),
    Load(usize),
    Limit(usize),
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
            + self.placed.rows()
            + self.limits.judgements.len()
    }

    /// A judgement by its row.
    ///
    /// # Panics
    ///
    /// If there is no such row.
    #[must_use]
    pub fn judgement(&self, row: usize) -> Judgement {
        let judgement = match self.part(row) {
            Part::Horizon(node) => self.horizon(node),
            Part::Rating(node) => self.rating(node),
            Part::Load(place) => self.placed.judgement(self.layout, place),
            Part::Limit(place) => self.limits.judgements[place].clone(),
        };
        Judgement { row, ..judgement }
    }

    /// What a row is about.
    fn part(&self, row: usize) -> Part {
        let nodes = self.layout.nodes.len();
        if row < nodes {
            return Part::Horizon(row);
        }
        let row = row - nodes;
        if let Some(&node) = self.rated.get(row) {
            return Part::Rating(node);
        }
        let row = row - self.rated.len();
        if row < self.placed.rows() {
            return Part::Load(row);
        }
        Part::Limit(row - self.placed.rows())
    }

    fn horizon(&self, node: usize) -> Judgement {
        let judgement = self.line.horizon(node, self.placed.position_m(self.layout, node));
        if self.placed.beyond != Some(node) || judgement.state == RuleState::Broken {
            return judgement;
        }
        // Where its own load would put it there is no number, but it is no place to be.
        Judgement {
            limit: Err("load brings the node to the horizon"),
            margin: Some(0.0),
            state: RuleState::Broken,
            broken_from: Err("load brings the node to the horizon"),
            ..judgement
        }
    }

    fn rating(&self, row: usize) -> Judgement {
        let rating = self.layout.nodes[row].rating_m_s2.unwrap_or(f64::INFINITY);
        if self.placed.beyond == Some(row) {
            let why = "load brings the node to the horizon";
            let limit = Ok(rating);
            return Judgement {
                limit,
                ..Judgement::not_judged(Rule::Rating, Subject::Node(row), why)
            };
        }
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
            if judgement.is_nearer_than(&summary.smallest) {
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
        let is_beyond = |row: &usize| self.judgement(*row).state == RuleState::Broken;
        if self.placed.beyond.is_some() || ends.iter().any(is_beyond) {
            (0..nodes.len()).map(|row| self.judgement(row)).for_each(&mut see);
        }
        for (place, &row) in self.rated.iter().enumerate() {
            let node = &nodes[row];
            let rating = node.rating_m_s2.unwrap_or(f64::INFINITY);
            let position_m = self.placed.position_m(self.layout, row);
            if !self.line.surely_keeps_rating(position_m, rating) {
                see(self.judgement(nodes.len() + place));
            }
        }
        let first = nodes.len() + self.rated.len();
        (first..self.rows()).map(|row| self.judgement(row)).for_each(see);
        found
    }

    /// What would mend a broken rule; `None` for one that is kept or not judged for a
    /// reason that no key of the layout mends. A figure in it is one that, put into the
    /// layout, keeps the rule; where none can be promised there is none.
    #[must_use]
    pub fn remedy(&self, judgement: &Judgement) -> Option<String> {
        if judgement.state == RuleState::Kept || judgement.row >= self.rows() {
            return None;
        }
        let is_broken = judgement.state == RuleState::Broken;
        match self.part(judgement.row) {
            Part::Horizon(node) if is_broken => {
                let is_promised = !self.placed.may_stretch(self.layout);
                let position_m = self.layout.nodes[node].position_m;
                Some(self.line.horizon_remedy(position_m, is_promised))
            }
            Part::Rating(node) if is_broken => {
                let rating = self.layout.nodes[node].rating_m_s2.unwrap_or(f64::INFINITY);
                let positions_m = self.placed.positions_m(self.layout, node);
                Some(self.line.rating_remedy(judgement, rating, &positions_m))
            }
            Part::Load(place) => self.placed.remedy(self.layout, place),
            Part::Limit(place) => self.limits.remedy(self, place),
            Part::Horizon(_) | Part::Rating(_) => None,
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
            (Rule::Strength, _) => Some(match self.layout.course {
                Course::Thrust(_) => {
                    "less thrust, less mass beyond the span, or a stronger one".to_owned()
                }
                Course::Standing(_) => "less mass beyond the span, or a stronger one".to_owned(),
            }),
            (Rule::Ramp, _) => Some("a longer ramp, or a stiffer line".to_owned()),
            (Rule::Propellant, _) => {
                Some("more propellant, a higher exhaust speed, or less thrust".to_owned())
            }
            (Rule::Resolve, _) => self.limits.resolve_widen(self.layout, &self.placed, judgement),
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
