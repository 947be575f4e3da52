//! Where load and temperature put the nodes that are judged, and the rules on loads.
//!
//! A line that stretches is judged at the positions it has under the thrust that is worst
//! for them. Those under any other thrust of the plan differ by the strain times `N − 1`,
//! which no margin shows.

use std::sync::Arc;

use super::line::Line;
use super::{JudgedOver, Judgement, KEPT, NO_PHASE, NO_PLAN, ONE_MOMENT, Rule, RuleState, Subject};
use crate::layout::{Course, Layout, SpanKind};
use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;
use crate::model::horizon::Extreme;
use crate::model::loads::{Loads, LoadsFault, State};
use crate::table::content::loads::{
    CUT, JudgedLoads, LoadJudgement, LoadRule, LoadSubject, judge_loads_at, judge_loads_of_line,
};

/// The line as its loads place it.
pub(super) struct Placed {
    /// The loads, on a line that stretches.
    loads: Option<Arc<Loads>>,
    /// Positions under load, m; those of the layout where there are none.
    loaded_m: Option<Vec<f64>>,
    /// The node that its own load brings to the horizon, so that there are no loads.
    pub beyond: Option<usize>,
    judged: Option<JudgedLoads>,
    /// Rules on loads that cannot be judged.
    unjudged: Vec<Judgement>,
    is_moment: bool,
}

impl Placed {
    /// The loads of a layout as they are judged. `loads` are those already built for its
    /// plan, if they are.
    pub fn of(
        layout: &Layout,
        span: JudgedOver,
        line: &Line<'_>,
        loads: Option<Arc<Loads>>,
    ) -> Placed {
        let unjudged = inputs(layout);
        let none = Placed {
            loads: None,
            loaded_m: None,
            beyond: None,
            judged: None,
            unjudged: Vec::new(),
            is_moment: matches!(span, JudgedOver::Moment(_)),
        };
        if unjudged.is_empty() && !crate::run::may_stretch(layout) {
            return none;
        }
        let loads = match loads.map_or_else(|| Loads::of_layout(layout).map(Arc::new), Ok) {
            Ok(loads) => loads,
            Err(fault) => {
                let why = |(rule, subject): &(Rule, Subject)| {
                    Judgement::not_judged(*rule, *subject, told(layout, &fault))
                };
                let beyond = match fault {
                    LoadsFault::Horizon { row, .. } => Some(row),
                    _ => None,
                };
                return Placed { beyond, unjudged: unjudged.iter().map(why).collect(), ..none };
            }
        };
        let judged = match span {
            JudgedOver::Plan => judge_loads_of_line(layout, &loads),
            JudgedOver::Moment(at) => judge_loads_at(layout, &loads, at),
        };
        if loads.is_rigid() {
            return Placed { judged: Some(judged), ..none };
        }
        let under = |extreme: Extreme| -> State {
            let ended = loads.state_before_end_of(extreme.phase);
            match ended.filter(|state| state.instant.moment.at == extreme.at) {
                Some(state) if span == JudgedOver::Plan => state,
                _ => loads.state(extreme.at),
            }
        };
        let (largest, smallest) = (under(line.extremes.largest), under(line.extremes.smallest));
        let place = |(row, node): (usize, &crate::layout::Node)| {
            // The thrust that brings the node nearest to its horizon.
            let state = if node.position_m < 0.0 { &largest } else { &smallest };
            loads.position_m(state, row).to_f64()
        };
        let loaded_m = layout.nodes.iter().enumerate().map(place).collect();
        Placed { loads: Some(loads), loaded_m: Some(loaded_m), judged: Some(judged), ..none }
    }

    /// Whether an engine runs dry, so that forces are judged only up to then.
    pub fn runs_dry(&self) -> bool {
        self.judged.as_ref().is_some_and(JudgedLoads::runs_dry)
    }

    /// Number of judgements of rules on loads.
    pub fn rows(&self) -> usize {
        self.judged.as_ref().map_or(self.unjudged.len(), JudgedLoads::len)
    }

    /// A judgement of a rule on loads.
    pub fn judgement(&self, layout: &Layout, place: usize) -> Judgement {
        match self.judged.as_ref().and_then(|judged| judged.get(layout, place)) {
            Some(judged) => judgement(layout, judged, self.is_moment),
            None => self.unjudged[place].clone(),
        }
    }

    /// What would mend it; `None` for one that is kept or cannot be judged.
    pub fn remedy(&self, layout: &Layout, place: usize) -> Option<String> {
        let remedy = self.judged.as_ref()?.remedy(layout, place);
        Some(remedy).filter(|remedy| !remedy.is_empty())
    }

    /// Whether load or temperature moves nodes, or would if the line could be flown.
    pub fn may_stretch(&self, layout: &Layout) -> bool {
        self.is_elastic() || self.beyond.is_some() || crate::run::may_stretch(layout)
    }

    /// The positions a node takes under the thrusts of the plan, m: one on a rigid line.
    pub fn positions_m(&self, layout: &Layout, row: usize) -> Vec<f64> {
        let Some(loads) = &self.loads else { return vec![layout.nodes[row].position_m] };
        let mut positions_m = vec![self.position_m(layout, row)];
        positions_m.extend(loads.position_bounds_m(row).map(|end| end.to_f64()));
        positions_m
    }

    /// How far apart two nodes can come to stand under the thrusts of the plan, m; `None`
    /// where the thrust changes its direction, so that what stretch adds to a clock offset
    /// does not follow from what is gained.
    pub fn farthest_apart_m(&self, layout: &Layout, [from, to]: [usize; 2]) -> Option<Dd> {
        let Some(loads) = &self.loads else { return Some(self.apart_m(layout, [from, to]).abs()) };
        if loads.is_elastic() && !loads.is_one_way() {
            return None;
        }
        let ([fore, aft], [other_fore, other_aft]) =
            (loads.position_bounds_m(from), loads.position_bounds_m(to));
        let (one, other) = ((fore - other_aft).abs(), (other_fore - aft).abs());
        Some(if one > other { one } else { other })
    }

    /// Position of a node as it is judged, m.
    pub fn position_m(&self, layout: &Layout, row: usize) -> f64 {
        self.loaded_m.as_ref().map_or(layout.nodes[row].position_m, |loaded_m| loaded_m[row])
    }

    /// How far apart two nodes stand, from the first to the second, m.
    pub fn apart_m(&self, layout: &Layout, [from, to]: [usize; 2]) -> Dd {
        Dd::difference(self.position_m(layout, to), self.position_m(layout, from))
    }

    /// Whether load or temperature moves nodes.
    pub fn is_elastic(&self) -> bool {
        self.loads.is_some()
    }

    /// Clock offset of a pair on a line that stretches, to − from, s; `None` on a rigid one.
    pub fn offset_s(&self, [from, to]: [usize; 2], at: ArrayTime) -> Option<Dd> {
        let loads = self.loads.as_ref()?;
        let state = loads.state(at);
        let offset = |row| loads.clock_offset(&state, row).total_s;
        Some(offset(to) - offset(from))
    }
}

/// What stands against the loads of a layout, with the names of its parts.
fn told(layout: &Layout, fault: &LoadsFault) -> String {
    let name = |row: usize| &layout.nodes[row].name;
    match fault {
        LoadsFault::Horizon { row, .. } => format!("`{}` reaches the horizon", name(*row)),
        LoadsFault::Crushed { gap, .. } => format!(
            "the span from `{}` to `{}` would be pushed shorter than nothing",
            name(*gap),
            name(*gap + 1)
        ),
        LoadsFault::Gradient { row } => format!("gravity vanishes before `{}`", name(*row)),
        LoadsFault::NotInvertible | LoadsFault::Structure(_) => fault.to_string(),
    }
}

fn judgement(layout: &Layout, judged: LoadJudgement, is_moment: bool) -> Judgement {
    const STILL: &str = "a line that stands carries it always";
    let rule = match judged.rule {
        LoadRule::Rating => Rule::Rating,
        LoadRule::Strength => Rule::Strength,
        LoadRule::Slack => Rule::Slack,
        LoadRule::Ramp => Rule::Ramp,
        LoadRule::Propellant => Rule::Propellant,
    };
    let subject = match judged.subject {
        LoadSubject::Node(row) => Subject::Node(row),
        LoadSubject::Span(gap) => Subject::Pair([gap, gap + 1]),
        LoadSubject::Change(_) => Subject::Line,
        LoadSubject::Engine(engine) => {
            Subject::Engine(layout.engines.get(engine).map_or(layout.reference, |own| own.node))
        }
    };
    if let Some(why) = judged.not_judged {
        return Judgement::not_judged(rule, subject, why);
    }
    let outside = match (&layout.course, rule) {
        (Course::Standing(_), _) => NO_PLAN,
        (_, Rule::Ramp) => CUT,
        _ => NO_PHASE,
    };
    let broken_from = match judged.from {
        Some((_, from)) => Ok(from),
        None if !judged.is_broken => Err(KEPT),
        None if is_moment => Err(ONE_MOMENT),
        None => Err(STILL),
    };
    Judgement {
        row: 0,
        rule,
        subject,
        phase: judged.phase.ok_or(outside),
        at: judged.at.ok_or(STILL),
        broken_from,
        value: Ok(judged.value),
        limit: Ok(judged.limit),
        margin: judged.margin,
        state: RuleState::of(!judged.is_broken),
    }
}

/// One row for each rule on loads that the layout gives the inputs of.
fn inputs(layout: &Layout) -> Vec<(Rule, Subject)> {
    let spans = |is: &dyn Fn(&crate::layout::Span) -> bool| {
        layout.spans.iter().filter(|span| is(span)).count()
    };
    let burning = layout
        .engines
        .iter()
        .filter(|engine| engine.exhaust_speed_m_s.is_some() && engine.propellant_kg.is_some());
    [
        (Rule::Strength, spans(&|span| span.strength_n.is_some()), "span"),
        (Rule::Slack, spans(&|span| span.kind == SpanKind::Tether), "tether"),
        (Rule::Ramp, spans(&|span| span.axial_stiffness_n.is_some()), "span"),
        (Rule::Propellant, burning.count(), "engine"),
    ]
    .into_iter()
    .filter(|(_, count, _)| *count > 0)
    .map(|(rule, count, word)| (rule, Subject::Parts(count, word)))
    .collect()
}
