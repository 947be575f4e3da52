//! Whether a line can be flown at all: `N = 1 + α h / c² > 0` for every node at every
//! moment, at both one-sided limits of a boundary.
//!
//! `N` is linear in `α` and `α` is linear in a phase, so the extremes are at phase ends;
//! what lies inside a ramp is the moment `N` reaches zero. The sign of `N` is decided
//! exactly.

use super::array_time::ArrayTime;
use super::constants::C2_M2_S2;
use super::dd::Dd;
use super::plan::Plan;
use super::rates::is_realisable;

/// An acceleration of the plan, and where it first occurs.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Extreme {
    /// Acceleration of the reference node, m/s².
    pub acceleration_m_s2: Dd,
    /// Index of the phase in which it occurs.
    pub phase: usize,
    /// The moment; at the end of a phase the limit from below is meant.
    pub at: ArrayTime,
}

/// The largest and the smallest acceleration of a plan.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Extremes {
    /// Farthest towards the fore end.
    pub largest: Extreme,
    /// Farthest towards the aft end.
    pub smallest: Extreme,
}

impl Extremes {
    /// Both extremes; `None` for a plan without phases.
    #[must_use]
    pub fn of(plan: &Plan) -> Option<Extremes> {
        let mut found: Option<Extremes> = None;
        for (index, phase) in plan.phases().iter().enumerate() {
            for at in [phase.start, phase.end] {
                let here = Extreme { acceleration_m_s2: phase.acceleration(at), phase: index, at };
                let extremes = found.get_or_insert(Extremes { largest: here, smallest: here });
                if here.acceleration_m_s2 > extremes.largest.acceleration_m_s2 {
                    extremes.largest = here;
                }
                if here.acceleration_m_s2 < extremes.smallest.acceleration_m_s2 {
                    extremes.smallest = here;
                }
            }
        }
        found
    }

    /// The extreme that brings a node nearest to the horizon: the largest acceleration for
    /// a node aft of the reference, the smallest for one fore of it.
    #[must_use]
    pub fn worst_for(&self, position_m: f64) -> Extreme {
        if position_m < 0.0 { self.largest } else { self.smallest }
    }
}

/// The ends of phases at which the acceleration goes beyond every one before it, either way:
/// where anything that grows with the thrust can be passed for the first time.
#[derive(Clone, Debug, Default)]
pub struct Records {
    largest: Vec<Extreme>,
    smallest: Vec<Extreme>,
}

impl Records {
    /// Those of a plan.
    #[must_use]
    pub fn of(plan: &Plan) -> Records {
        let mut records = Records::default();
        for (index, phase) in plan.phases().iter().enumerate() {
            for at in [phase.start, phase.end] {
                let here = Extreme { acceleration_m_s2: phase.acceleration(at), phase: index, at };
                let last = |all: &[Extreme]| all.last().map(|last| last.acceleration_m_s2);
                if last(&records.largest).is_none_or(|last| here.acceleration_m_s2 > last) {
                    records.largest.push(here);
                }
                if last(&records.smallest).is_none_or(|last| here.acceleration_m_s2 < last) {
                    records.smallest.push(here);
                }
            }
        }
        records
    }

    /// The first end of a phase whose acceleration is beyond something that, on either side of
    /// zero, is passed once and for all.
    #[must_use]
    pub fn first(&self, is_beyond: impl Fn(Dd) -> bool) -> Option<Extreme> {
        let first = |all: &[Extreme], sign: f64| {
            let beyond = |here: &Extreme| {
                here.acceleration_m_s2.hi * sign > 0.0 && is_beyond(here.acceleration_m_s2)
            };
            all.get(all.partition_point(|here| !beyond(here))).copied()
        };
        let found = [first(&self.largest, 1.0), first(&self.smallest, -1.0)];
        found.into_iter().flatten().min_by_key(|here| (here.phase, here.at))
    }
}

/// A node that reaches the horizon.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct HorizonReached {
    /// Index of the phase in which `N` first reaches zero.
    pub phase: usize,
    /// The moment it does, s of array time (double-double; exact at a phase start).
    pub at_s: Dd,
    /// The largest acceleration of the reference node, in the same direction, that the
    /// node could stand, m/s²; rounded so that it is itself allowed.
    pub largest_acceleration_m_s2: f64,
    /// The position nearest to the node's own that the whole plan allows, m; rounded so
    /// that it is itself allowed.
    pub nearest_position_m: f64,
}

/// Finds the first moment at which a node reaches the horizon, if it does.
#[must_use]
pub fn reached(plan: &Plan, extremes: &Extremes, position_m: f64) -> Option<HorizonReached> {
    reached_first(plan, &Records::of(plan), extremes, position_m)
}

/// The same with the records of the plan, for many nodes.
#[must_use]
pub fn reached_first(
    plan: &Plan,
    records: &Records,
    extremes: &Extremes,
    position_m: f64,
) -> Option<HorizonReached> {
    let worst = extremes.worst_for(position_m).acceleration_m_s2;
    if is_realisable(worst, position_m) {
        return None;
    }
    let (phase, at_s) = first_zero(plan, records, position_m)?;
    let offered = partners(extremes.worst_for(position_m), position_m);
    Some(HorizonReached { phase, at_s, ..offered })
}

/// What a node beyond the horizon at one acceleration is offered instead.
#[must_use]
pub fn partners(worst: Extreme, position_m: f64) -> HorizonReached {
    let acceleration = worst.acceleration_m_s2;
    HorizonReached {
        phase: worst.phase,
        at_s: worst.at.seconds(),
        largest_acceleration_m_s2: largest_partner(position_m, |value| {
            is_realisable(Dd::new(value), position_m)
        }),
        nearest_position_m: largest_partner(acceleration.to_f64(), |value| {
            is_realisable(acceleration, value)
        }),
    }
}

/// The double of largest size whose product with `factor` stays above `−c²`.
fn largest_partner(factor: f64, is_allowed: impl Fn(f64) -> bool) -> f64 {
    let mut value = (-C2_M2_S2 / Dd::new(factor)).to_f64();
    while !is_allowed(value) {
        value = towards_zero(value);
    }
    // One step outwards is tried too: the quotient may have been rounded inwards.
    let outwards = if value > 0.0 { value.next_up() } else { value.next_down() };
    if is_allowed(outwards) { outwards } else { value }
}

fn towards_zero(value: f64) -> f64 {
    if value > 0.0 { value.next_down() } else { value.next_up() }
}

fn first_zero(plan: &Plan, records: &Records, position_m: f64) -> Option<(usize, Dd)> {
    let first = records.first(|acceleration| !is_realisable(acceleration, position_m))?;
    let phase = plan.phases().get(first.phase)?;
    if first.at == phase.start {
        return Some((first.phase, phase.start.seconds()));
    }
    let limit = -C2_M2_S2 / Dd::new(position_m);
    let length = phase.end.seconds_since(phase.start);
    // Rounding may put the limit a hair outside the ramp whose end passes it.
    let after = phase.moment_of(limit).unwrap_or(length);
    Some((first.phase, phase.start.seconds() + after))
}
