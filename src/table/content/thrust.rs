//! What a node that is built for an acceleration allows of the thrust.
//!
//! A node at `h` feels `|α|/(1 + αh/c²)`, which grows with `|α|` on either side of zero: it is
//! passed once and for all, and equals `r` at `α = ±r/(1 ∓ rh/c²)`.

use super::words::ACCELERATION;
use crate::model::array_time::ArrayTime;
use crate::model::constants::C2_M2_S2;
use crate::model::dd::Dd;
use crate::model::horizon::{Extremes, Records};
use crate::model::plan::Plan;

/// A rating, and where the node stands that has it: one position, or those it takes under load.
pub(super) struct Bound<'a> {
    /// The rating, m/s².
    pub rating: f64,
    /// The positions, m.
    pub positions_m: &'a [f64],
}

/// Share of `N − 1` up to which stretch moves a felt acceleration by less than rounding it to
/// six digits does, and what is left for it.
const SMALL_RATE: f64 = 1e-6;
const ROOM: f64 = 1e-9;

impl Bound<'_> {
    /// Whether the node keeps its rating under a thrust.
    fn is_kept(&self, acceleration_m_s2: f64) -> bool {
        let is_loaded = self.positions_m.iter().any(|here| *here != self.positions_m[0]);
        let rating = if is_loaded { self.rating * (1.0 - ROOM) } else { self.rating };
        self.positions_m.iter().all(|&position_m| {
            let rate = Dd::new(acceleration_m_s2) * position_m / C2_M2_S2 + 1.0;
            let is_far = is_loaded && (rate - 1.0).abs().hi > SMALL_RATE;
            !is_far && rate.hi > 0.0 && felt_m_s2(acceleration_m_s2, position_m) <= rating
        })
    }

    /// The thrust of a sign under which a node feels its rating, m/s²; `None` where none does:
    /// the horizon side of a node far ahead.
    fn at_rating(&self, sign: f64) -> Option<f64> {
        let bound = Dd::new(self.rating.copysign(sign));
        let most = self.positions_m.iter().map(|&position_m| {
            let least = Dd::ONE - bound * position_m / C2_M2_S2;
            (!least.is_negative() && !least.is_zero()).then(|| (bound / least).to_f64().abs())
        });
        most.min_by(|a, b| a.unwrap_or(f64::INFINITY).total_cmp(&b.unwrap_or(f64::INFINITY)))?
    }
}

fn felt_m_s2(acceleration_m_s2: f64, position_m: f64) -> f64 {
    let acceleration = Dd::new(acceleration_m_s2);
    (acceleration / (acceleration * position_m / C2_M2_S2 + 1.0)).abs().to_f64()
}

/// The thrust of a plan, in either of the directions it goes, that a node allows, in words.
pub(super) fn most_held(plan: &Plan, bound: &Bound<'_>) -> Option<String> {
    let extremes = Extremes::of(plan)?;
    most_between(&extremes, bound)
}

/// The same for the extremes of a plan.
pub(super) fn most_between(extremes: &Extremes, bound: &Bound<'_>) -> Option<String> {
    let (largest, smallest) =
        (extremes.largest.acceleration_m_s2, extremes.smallest.acceleration_m_s2);
    let signs: Vec<f64> = [(largest.hi > 0.0, 1.0), (smallest.hi < 0.0, -1.0)]
        .into_iter()
        .filter_map(|(is_flown, sign)| is_flown.then_some(sign))
        .collect();
    let most = signs.iter().filter_map(|sign| bound.at_rating(*sign)).fold(f64::INFINITY, f64::min);
    ACCELERATION.at_most(most, |size| signs.iter().all(|sign| bound.is_kept(size * sign)))
}

/// What a node that feels too much asks for.
pub(super) fn rating_advice(
    most: Option<String>,
    build: Option<String>,
    has_thrust: bool,
    is_hold: bool,
) -> String {
    let build = match build {
        Some(build) => format!("build the node for {build}"),
        None => "build the node for more".to_owned(),
    };
    match (most, has_thrust) {
        (Some(most), true) => {
            format!("{} {most} at the reference, or {build}", no_more_than(is_hold))
        }
        (None, true) => format!("less thrust, or {build}"),
        (_, false) => build,
    }
}

/// The words before a thrust that is allowed: a ramp holds nothing.
pub(super) fn no_more_than(is_hold: bool) -> &'static str {
    if is_hold { "hold no more than" } else { "thrust with no more than" }
}

/// The first phase and moment at which a node feels more than it is built for.
pub(super) fn first_beyond(
    plan: &Plan,
    records: &Records,
    position_m: f64,
    rating: f64,
) -> Option<(usize, ArrayTime)> {
    let first = records.first(|acceleration| {
        let felt = acceleration / (acceleration * position_m / C2_M2_S2 + 1.0);
        felt.abs().to_f64() > rating
    })?;
    let phase = plan.phases().get(first.phase)?;
    if first.at == phase.start {
        return Some((first.phase, phase.start));
    }
    let bound = Dd::new(rating.copysign(first.acceleration_m_s2.hi));
    let limit = bound / (Dd::ONE - bound * position_m / C2_M2_S2);
    let after = phase.moment_of(limit).unwrap_or(Dd::ZERO);
    let at = ArrayTime::nearest(phase.start.seconds() + after)?;
    Some((first.phase, at.clamp(phase.start, phase.end)))
}
