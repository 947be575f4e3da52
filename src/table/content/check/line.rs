//! Horizon and rating: what the accelerations of the plan do to a node.

use std::borrow::Cow;
use std::sync::OnceLock;

use super::{JudgedOver, Judgement, KEPT, NO_PHASE, NO_PLAN, ONE_MOMENT, Rule, RuleState, Subject};
use crate::layout::{Course, Layout, Node};
use crate::model::array_time::ArrayTime;
use crate::model::constants::C2_M2_S2;
use crate::model::dd::Dd;
use crate::model::horizon::{self, Extreme, Extremes, HorizonReached, Records};
use crate::model::plan::{Moment, Plan};
use crate::model::rates::{Instant, is_realisable};
use crate::table::content::thrust::{self, Bound};
use crate::table::content::words::{ACCELERATION, LENGTH};

/// The accelerations the line is judged under, and the gradient it stands in.
pub(super) struct Line<'a> {
    pub extremes: Extremes,
    /// Whether the extremes lie in phases.
    phases: bool,
    gradient_per_s2: f64,
    /// The plan, when the whole of it is judged.
    plan: Option<&'a Plan>,
    /// Its records, made when a rule is found broken.
    records: OnceLock<Records>,
    /// Whether the thrust of a plan can be changed to mend a rule.
    thrust: bool,
    /// Whether one moment is judged.
    is_moment: bool,
}

impl<'a> Line<'a> {
    pub(super) fn of(layout: &'a Layout, span: JudgedOver) -> Line<'a> {
        let single = |acceleration_m_s2, at| {
            let extreme = Extreme { acceleration_m_s2, phase: 0, at };
            Extremes { largest: extreme, smallest: extreme }
        };
        match (&layout.course, span) {
            (Course::Standing(standing), _) => Line {
                extremes: single(Dd::new(standing.gravity_m_s2), ArrayTime::ZERO),
                phases: false,
                gradient_per_s2: standing.gradient_per_s2,
                plan: None,
                records: OnceLock::new(),
                thrust: false,
                is_moment: matches!(span, JudgedOver::Moment(_)),
            },
            (Course::Thrust(plan), JudgedOver::Moment(at)) => {
                let moment = plan.moment(at);
                let mut extremes = single(moment.acceleration_m_s2, at);
                extremes.largest.phase = moment.phase.unwrap_or(0);
                extremes.smallest.phase = extremes.largest.phase;
                let phases = moment.phase.is_some();
                Line {
                    extremes,
                    phases,
                    gradient_per_s2: 0.0,
                    plan: None,
                    records: OnceLock::new(),
                    thrust: true,
                    is_moment: true,
                }
            }
            (Course::Thrust(plan), JudgedOver::Plan) => {
                let extremes = Extremes::of(plan);
                Line {
                    extremes: extremes.unwrap_or_else(|| single(Dd::ZERO, ArrayTime::ZERO)),
                    phases: extremes.is_some(),
                    gradient_per_s2: 0.0,
                    plan: Some(plan),
                    records: OnceLock::new(),
                    thrust: true,
                    is_moment: false,
                }
            }
        }
    }

    pub(super) fn phase(&self, extreme: &Extreme) -> Result<usize, &'static str> {
        match (self.phases, self.thrust) {
            (true, _) => Ok(extreme.phase),
            (false, true) => Err(NO_PHASE),
            (false, false) => Err(NO_PLAN),
        }
    }

    /// The strongest thrust either way, the earlier of equals.
    pub(super) fn strongest(&self) -> Extreme {
        let Extremes { largest, smallest } = self.extremes;
        let (most, least) = (largest.acceleration_m_s2.abs(), smallest.acceleration_m_s2.abs());
        if least > most || (least == most && smallest.at < largest.at) { smallest } else { largest }
    }

    /// What holds a node under an acceleration of the reference.
    pub(super) fn instant(&self, acceleration_m_s2: Dd, at: ArrayTime) -> Instant {
        // Only the acceleration counts for rates and what is felt.
        let moment = Moment {
            at,
            phase: None,
            acceleration_m_s2,
            velocity_gain_m_s: Dd::ZERO,
            rapidity: Dd::ZERO,
            total_rapidity: 0.0,
        };
        Instant { moment, gradient_per_s2: self.gradient_per_s2 }
    }

    /// The felt acceleration of a node under an acceleration of the reference, m/s².
    fn felt(&self, acceleration_m_s2: Dd, position_m: f64) -> f64 {
        let instant = self.instant(acceleration_m_s2, ArrayTime::ZERO);
        instant.felt_acceleration_m_s2(Dd::new(position_m)).to_f64()
    }

    pub(super) fn horizon(&self, row: usize, position_m: f64) -> Judgement {
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
        Judgement {
            row,
            rule: Rule::Horizon,
            subject: Subject::Node(row),
            phase: self.phase(&worst),
            at: Ok(worst.at),
            broken_from: self.broken_from(kept, || {
                ArrayTime::nearest(self.reached(position_m).at_s).unwrap_or(worst.at)
            }),
            value: Ok(value),
            limit: limit.ok_or("the reference node is never at the horizon"),
            margin: Some(rate.to_f64()),
            state: RuleState::of(kept),
        }
    }

    /// The moment from which on a rule is broken, which is found when it is.
    fn broken_from(
        &self,
        kept: bool,
        from: impl FnOnce() -> ArrayTime,
    ) -> Result<ArrayTime, &'static str> {
        match (kept, self.plan, self.is_moment) {
            (true, ..) => Err(KEPT),
            (_, Some(_), _) => Ok(from()),
            (.., true) => Err(ONE_MOMENT),
            _ => Err("a line that stands does so always"),
        }
    }

    fn records(&self, plan: &Plan) -> &Records {
        self.records.get_or_init(|| Records::of(plan))
    }

    /// Where a node that is not realisable reaches the horizon, and what it is offered.
    fn reached(&self, position_m: f64) -> HorizonReached {
        self.plan
            .and_then(|plan| {
                horizon::reached_first(plan, self.records(plan), &self.extremes, position_m)
            })
            .unwrap_or_else(|| horizon::partners(self.extremes.worst_for(position_m), position_m))
    }

    /// Whether an extreme lies in a phase that holds its thrust, or no phase is known.
    fn is_held(&self, extreme: &Extreme) -> bool {
        let phase = self.plan.and_then(|plan| plan.phases().get(extreme.phase));
        phase.is_none_or(|phase| phase.is_hold())
    }

    /// What would take a node out of reach of the horizon; with figures on a rigid line alone,
    /// since where load puts a node changes with either.
    pub(super) fn horizon_remedy(&self, position_m: f64, is_promised: bool) -> String {
        let worst = self.extremes.worst_for(position_m);
        let reached = horizon::partners(worst, position_m);
        let held = thrust::no_more_than(self.is_held(&worst));
        let most = reached.largest_acceleration_m_s2;
        let most = ACCELERATION
            .at_most(most.abs(), |size| is_realisable(Dd::new(size.copysign(most)), position_m));
        let near = reached.nearest_position_m;
        let near = LENGTH.at_most(near.abs(), |size| {
            is_realisable(worst.acceleration_m_s2, size.copysign(near))
        });
        match (most, near) {
            (Some(most), Some(near)) if is_promised && self.thrust => format!(
                "{held} {most} at the reference, or place the node no farther than {near} from it"
            ),
            (_, Some(near)) if is_promised => {
                format!("place the node no farther than {near} from the reference")
            }
            _ => "less thrust, or the node nearer to the reference".to_owned(),
        }
    }

    pub(super) fn horizon_widen(&self, node: &Node) -> String {
        let name = &node.name;
        let worst = self.extremes.worst_for(node.position_m).acceleration_m_s2;
        if (worst * node.position_m).is_negative() {
            let limit = (C2_M2_S2 / Dd::new(node.position_m)).abs().to_f64();
            let limit = ACCELERATION.about(limit);
            return format!(
                "less thrust, or `{name}` nearer to the reference: \
                 {limit} at the reference would bring it to the horizon"
            );
        }
        if !self.thrust {
            return format!("nothing needs to: gravity brings `{name}` no nearer to a horizon");
        }
        format!("nothing needs to: no thrust of the plan brings `{name}` nearer to a horizon")
    }

    pub(super) fn rating(&self, row: usize, position_m: f64, rating: f64) -> Judgement {
        let subject = Subject::Node(row);
        let felt_at = |extreme: Extreme| {
            let acceleration = extreme.acceleration_m_s2;
            is_realisable(acceleration, position_m)
                .then(|| (extreme, self.felt(acceleration, position_m).abs()))
        };
        let Extremes { largest, smallest } = self.extremes;
        let (worst, value) = match (felt_at(largest), felt_at(smallest)) {
            (Some(a), Some(b)) if b.1 > a.1 || (b.1 == a.1 && b.0.at < a.0.at) => b,
            (Some(a), Some(_)) => a,
            // At the horizon no structure could hold the node.
            _ => {
                let why = "the node reaches the horizon";
                return Judgement {
                    limit: Ok(rating),
                    ..Judgement::not_judged(Rule::Rating, subject, why)
                };
            }
        };
        let kept = value <= rating;
        Judgement {
            row: 0,
            rule: Rule::Rating,
            subject,
            phase: self.phase(&worst),
            at: Ok(worst.at),
            broken_from: self.broken_from(kept, || {
                let first = self.plan.and_then(|plan| {
                    thrust::first_beyond(plan, self.records(plan), position_m, rating)
                });
                first.map_or(worst.at, |(_, at)| at)
            }),
            value: Ok(value),
            limit: Ok(rating),
            margin: Some(1.0 - value / rating),
            state: RuleState::of(kept),
        }
    }

    /// Whether a node keeps its rating by so much that doubles settle it.
    pub(super) fn surely_keeps_rating(&self, position_m: f64, rating: f64) -> bool {
        let bend = self.gradient_per_s2 * position_m;
        [self.extremes.largest, self.extremes.smallest].into_iter().all(|extreme| {
            let acceleration = extreme.acceleration_m_s2.hi;
            let rate = 1.0 + (acceleration - 0.5 * bend) * position_m / C2_M2_S2.hi;
            rate > 0.5 && (acceleration - bend).abs() / rate < rating * (1.0 - 1e-12)
        })
    }

    /// The reference acceleration under which a node feels its rating, m/s², signed as the
    /// worst of the plan: `α/(1 + αh/c²) = r` at `α = r/(1 − rh/c²)`. `None` where no
    /// acceleration does: the horizon side of a node far ahead.
    fn acceleration_at_rating(&self, position_m: f64, rating: f64) -> Option<Dd> {
        let Extremes { largest, smallest } = self.extremes;
        let felt = |extreme: Extreme| self.felt(extreme.acceleration_m_s2, position_m);
        let felt = [felt(largest), felt(smallest)]
            .into_iter()
            .max_by(|a, b| a.abs().total_cmp(&b.abs()))?;
        let bound = Dd::new(rating.copysign(felt));
        let least = Dd::ONE - bound * position_m / C2_M2_S2;
        (!least.is_negative() && !least.is_zero()).then(|| bound / least)
    }

    /// What would keep a rating, at the positions the node takes.
    pub(super) fn rating_remedy(
        &self,
        judgement: &Judgement,
        rating: f64,
        positions_m: &[f64],
    ) -> String {
        let value = judgement.value.as_ref().copied().unwrap_or(f64::INFINITY);
        let build = ACCELERATION.at_least(value, |rating| rating >= value);
        let most = self
            .thrust
            .then(|| thrust::most_between(&self.extremes, &Bound { rating, positions_m }))
            .flatten();
        let is_hold = judgement.phase.is_ok_and(|phase| {
            let phase = self.plan.and_then(|plan| plan.phases().get(phase));
            phase.is_none_or(|phase| phase.is_hold())
        });
        thrust::rating_advice(most, build, self.thrust, is_hold)
    }

    pub(super) fn rating_widen(&self, node: &Node) -> String {
        let (name, rating) = (&node.name, node.rating_m_s2.unwrap_or(f64::INFINITY));
        let most = self.acceleration_at_rating(node.position_m, rating).filter(|_| self.thrust);
        match most {
            Some(most) => format!(
                "less thrust, or a higher rating of `{name}`: \
                 {} at the reference would bring it to its rating",
                ACCELERATION.about(most.abs().to_f64())
            ),
            None => format!("a higher rating of `{name}`"),
        }
    }
}

/// The reason why a value has not been formed, for a cell.
pub(super) fn why(text: impl Into<Cow<'static, str>>) -> Result<f64, Cow<'static, str>> {
    Err(text.into())
}
