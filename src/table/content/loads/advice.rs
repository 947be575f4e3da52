//! What would mend a broken rule on loads. A figure is one that, put into the layout, keeps the
//! rule; where none can be promised the words have none.

use super::rules::{JudgedLoads, LoadJudgement, LoadRule, LoadSubject, Pushed, pushed_n};
use crate::layout::quantity::{Dimension, parse};
use crate::layout::{Course, Layout, Positions};
use crate::model::array_time::ArrayTime;
use crate::model::loads::{Loads, Mend, Ringing, RunsDry, Slack};
use crate::table::content::thrust::{self, Bound};
use crate::table::content::words::{ACCELERATION, FORCE, MASS, SECONDS};
use crate::table::digits::Scale;
use crate::table::unit::rounded;

/// Nodes and phases up to which a line is built once more to try advice out.
const MOST_TRIED: usize = 20_000;

impl JudgedLoads {
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
