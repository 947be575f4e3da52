//! Whether the rates of a pair are told apart within an averaging time.
//!
//! Judged under the held design acceleration, because that is the thrust the array is built
//! to work at; without one, under the strongest thrust of the plan, which gives the pair its
//! best chance; on a standing line under its gravity; at a moment, under the thrust then.
//! Resolving is a matter of noise alone: a bias or an answer to acceleration is not averaged
//! away, and neither is told from the effect by it.

use super::line::{Line, why};
use super::placed::Placed;
use super::trial::Trial;
use super::{JudgedOver, Judgement, KEPT, Rule, RuleState, Subject};
use crate::layout::{Course, Layout, Positions};
use crate::model::array_time::ArrayTime;
use crate::model::clocks::{Comparison, LinkNoise, Noise, RESOLVING_FACTOR, Resolved, Unresolved};
use crate::model::constants::C2_M2_S2;
use crate::model::dd::Dd;
use crate::model::plan::LARGEST_ACCELERATION_M_S2;
use crate::model::rates::{Instant, is_realisable};
use crate::table::content::words::{ACCELERATION, LENGTH, TIME, listed};

const ONE_THRUST: &str = "judged under one thrust, whenever it is held";
const DESIGN: &str = "judged under the design acceleration, whenever it is held";

/// What the rates of a pair are judged under.
pub(super) struct Resolving {
    links: LinkNoise,
    instant: Instant,
    phase: Result<usize, &'static str>,
    at: Result<ArrayTime, &'static str>,
    /// Whether more thrust is a remedy.
    thrust: bool,
    /// Whether a moment is judged, at which there may be no thrust.
    moment: bool,
}

/// Why a pair is not judged, and what would let it be.
struct Missing {
    why: String,
    remedy: String,
}

impl Resolving {
    pub(super) fn of(layout: &Layout, span: JudgedOver, line: &Line<'_>) -> Resolving {
        let strongest = line.strongest();
        let thrust = matches!(layout.course, Course::Thrust(_));
        let design = layout.design_acceleration_m_s2.filter(|_| thrust);
        let (acceleration, phase, at) = match (span, design) {
            (JudgedOver::Plan, Some(design)) => (Dd::new(design), Err(DESIGN), Err(DESIGN)),
            (JudgedOver::Plan, None) => {
                (strongest.acceleration_m_s2, line.phase(&strongest), Ok(strongest.at))
            }
            (JudgedOver::Moment(at), _) => {
                (strongest.acceleration_m_s2, line.phase(&strongest), Ok(at))
            }
        };
        Resolving {
            links: LinkNoise::of(layout),
            instant: line.instant(acceleration, at.unwrap_or_default()),
            phase,
            at,
            thrust,
            moment: matches!(span, JudgedOver::Moment(_)),
        }
    }

    /// Judges one limit.
    pub(super) fn judge(
        &self,
        layout: &Layout,
        placed: &Placed,
        subject: Subject,
        limit_s: f64,
    ) -> Judgement {
        let not_judged = |why: String| Judgement {
            limit: Ok(limit_s),
            ..Judgement::not_judged(Rule::Resolve, subject, why)
        };
        let acceleration = self.instant.moment.acceleration_m_s2;
        let ends = subject.ends(layout).map(|row| placed.position_m(layout, row));
        if self.moment && acceleration.is_zero() {
            return not_judged("there is no thrust at this moment".to_owned());
        }
        if ends.iter().any(|end| !is_realisable(acceleration, *end)) {
            return not_judged("a node of the pair reaches the horizon".to_owned());
        }
        let comparison = match self.comparison(layout, subject) {
            Ok(comparison) => comparison,
            Err(missing) => return not_judged(missing.why),
        };
        let [from, to] = ends.map(Dd::new);
        let difference = self.instant.rate_difference(from, to).to_f64();
        let resolved = comparison.resolve(difference, RESOLVING_FACTOR);
        let (value, margin, kept) = match resolved {
            Resolved::After(time) => (Ok(time), 1.0 - time / limit_s, time <= limit_s),
            Resolved::Never(reason) => (why(never(reason, difference)), f64::NEG_INFINITY, false),
        };
        Judgement {
            row: 0,
            rule: Rule::Resolve,
            subject,
            phase: self.phase,
            at: self.at,
            broken_from: if kept { Err(KEPT) } else { Err(ONE_THRUST) },
            value,
            limit: Ok(limit_s),
            margin: Some(margin),
            state: RuleState::of(kept),
        }
    }

    /// The noise of the comparison of the two.
    fn comparison(&self, layout: &Layout, subject: Subject) -> Result<Comparison, Missing> {
        let ends = subject.ends(layout);
        let noise = |row: usize| {
            let node = &layout.nodes[row];
            let Some(clock) = layout.clock_of(node) else {
                return Err(Missing {
                    why: format!("`{}` has no clock", node.name),
                    remedy: format!("give `{}` a `clock`", node.name),
                });
            };
            Noise::of(clock).map_err(|fault| Missing {
                why: format!("`{}`: {fault}", clock.name),
                remedy: format!("state the `bandwidth` of `[clock.{}]`", clock.name),
            })
        };
        let [from, to] = [noise(ends[0])?, noise(ends[1])?];
        let link = self.links.between(ends[0], ends[1]).ok_or_else(|| Missing {
            why: "no chain of links joins the two".to_owned(),
            remedy: "add a `[[link]]` between the two".to_owned(),
        })?;
        Ok(Comparison::of(&from, &to, link))
    }

    /// What would mend a broken limit, or let one be judged.
    pub(super) fn remedy(
        &self,
        layout: &Layout,
        span: JudgedOver,
        placed: &Placed,
        judgement: &Judgement,
    ) -> Option<String> {
        let subject = judgement.subject;
        let comparison = match self.comparison(layout, subject) {
            Ok(comparison) => comparison,
            Err(missing) => return Some(missing.remedy),
        };
        if judgement.state != RuleState::Broken {
            return None;
        }
        let mut ways = Vec::new();
        let limit_s = judgement.limit.ok()?;
        let is_promised = match self.is_design() {
            // The design acceleration also says where the nodes of some layouts stand.
            true => layout.equal_shift.is_empty() && !(is_as_flown(layout) && placed.is_elastic()),
            false => !placed.is_elastic(),
        };
        let thrust = self.thrust_needed(layout, placed, judgement, &comparison);
        match (thrust.filter(|_| is_promised), self.is_design()) {
            (Some(thrust), true) => ways.push(format!("design for at least {thrust}")),
            (Some(thrust), false) => ways.push(format!("hold at least {thrust}")),
            (None, _) if self.thrust && !is_promised => ways.push("hold more thrust".to_owned()),
            (None, _) => {}
        }
        let [from, to] = subject.ends(layout);
        let apart = if placed.is_elastic() {
            let trial = Trial::of(layout, span, Rule::Resolve, subject, limit_s);
            let distance = |row, other| {
                let found = trial.as_ref()?.distance(row, other, false)?;
                Some((row, other, found))
            };
            distance(to, from).or_else(|| distance(from, to))
        } else {
            self.distance_needed(layout, placed, judgement, &comparison)
        };
        let name = |row: usize| match row == layout.reference {
            true => "the reference".to_owned(),
            false => format!("`{}`", layout.nodes[row].name),
        };
        match apart {
            Some((row, other, apart)) => {
                ways.push(format!("place {} at least {apart} from {}", name(row), name(other)));
            }
            None if placed.is_elastic() => ways.push("place the two farther apart".to_owned()),
            None => {}
        }
        ways.push("use quieter clocks".to_owned());
        if let Ok(value) = judgement.value {
            let allow = TIME.at_least(value, |limit| limit >= value);
            ways.extend(allow.map(|allow| format!("allow {allow}")));
        }
        Some(listed(&ways))
    }

    /// Whether the design acceleration is what the pair is judged under.
    fn is_design(&self) -> bool {
        self.at == Err(DESIGN)
    }

    pub(super) fn widen(&self, layout: &Layout, placed: &Placed, judgement: &Judgement) -> String {
        let name = judgement.subject.name(layout);
        let least = self
            .comparison(layout, judgement.subject)
            .ok()
            .and_then(|comparison| self.thrust_needed(layout, placed, judgement, &comparison));
        let ways = "quieter clocks, or more time to resolve them";
        match least {
            Some(thrust) => {
                format!("more thrust, {ways}: at {thrust} `{name}` is just resolved in time")
            }
            None => format!("{ways} (`{name}`)"),
        }
    }

    /// The thrust at which the limit is just kept.
    fn thrust_needed(
        &self,
        layout: &Layout,
        placed: &Placed,
        judgement: &Judgement,
        comparison: &Comparison,
    ) -> Option<String> {
        let limit_s = judgement.limit.ok().filter(|_| self.thrust)?;
        let ends = judgement.subject.ends(layout);
        let [from, to] = ends.map(|row| placed.position_m(layout, row));
        let apart = Dd::difference(to, from);
        let thrust = self.instant.moment.acceleration_m_s2;
        // N_j/N_i − 1 = α Δh/(c² + α h_i) = d at α = d c²/(Δh − d h_i).
        let least = RESOLVING_FACTOR * comparison.quietest_within(limit_s).deviation;
        let backwards = thrust.is_negative() != apart.is_negative();
        let least = Dd::new(if backwards { -least } else { least });
        let needed = (least * C2_M2_S2 / (apart - least * from)).to_f64();
        // A line without thrust may take up either direction.
        let signs = if thrust.is_zero() { [1.0, -1.0] } else { [needed.signum(); 2] };
        let is_enough = |size: f64| {
            signs.iter().all(|sign| {
                let thrust = Dd::new(size * sign);
                let difference = thrust * apart / (C2_M2_S2 + thrust * from);
                let resolved = comparison.resolve(difference.to_f64(), RESOLVING_FACTOR);
                matches!(resolved, Resolved::After(time) if time <= limit_s)
            })
        };
        let can_be_flown = needed.abs() <= LARGEST_ACCELERATION_M_S2
            && (needed.is_sign_negative() == thrust.is_negative() || thrust.is_zero())
            && [from, to].iter().all(|end| is_realisable(Dd::new(needed), *end));
        can_be_flown.then(|| ACCELERATION.at_least(needed.abs(), is_enough)).flatten()
    }

    /// Which of the two would have to stand how far from the other, on its own side of it.
    fn distance_needed(
        &self,
        layout: &Layout,
        placed: &Placed,
        judgement: &Judgement,
        comparison: &Comparison,
    ) -> Option<(usize, usize, String)> {
        let limit_s = judgement.limit.ok().filter(|_| self.instant.gradient_per_s2 == 0.0)?;
        let [from, to] = judgement.subject.ends(layout);
        let (moved, stays) = if to == layout.reference { (from, to) } else { (to, from) };
        let place = |row: usize| placed.position_m(layout, row);
        let thrust = self.instant.moment.acceleration_m_s2;
        if thrust.is_zero() || moved == layout.reference {
            return None;
        }
        let least = RESOLVING_FACTOR * comparison.quietest_within(limit_s).deviation;
        let rate = C2_M2_S2 + thrust * place(from);
        let needed = (rate * least / thrust.abs()).to_f64();
        let side = if place(moved) < place(stays) { -1.0 } else { 1.0 };
        let is_enough = |distance_m: f64| {
            let put = place(stays) + side * distance_m;
            let (from, to) = if moved == to { (place(from), put) } else { (put, place(to)) };
            let difference = thrust * Dd::difference(to, from) / (C2_M2_S2 + thrust * from);
            let resolved = comparison.resolve(difference.to_f64(), RESOLVING_FACTOR);
            is_realisable(thrust, put)
                && matches!(resolved, Resolved::After(time) if time <= limit_s)
        };
        LENGTH.at_least(needed, is_enough).map(|distance| (moved, stays, distance))
    }
}

fn never(reason: Unresolved, difference: f64) -> String {
    match reason {
        Unresolved::NoDifference => "never: the rates do not differ".to_owned(),
        Unresolved::TooLong => "never within any averaging time".to_owned(),
        Unresolved::Floor(quietest) => {
            let when = match quietest.averaging_s {
                Some(time) if time > 0.0 => format!(", reached at {}", TIME.about(time)),
                _ => String::new(),
            };
            format!(
                "never: the noise does not fall below {:.3e}{when}; the rates differ by {:.3e}",
                quietest.deviation,
                difference.abs()
            )
        }
    }
}

fn is_as_flown(layout: &Layout) -> bool {
    layout.positions == Positions::AsFlown
}
