//! Changes of thrust: the plan as it is flown, gone on with from an event on.
//!
//! A plan is cut and gone on with where it stands, and the loads of the line keep what they
//! know of the phases before the cut, so that a run goes through its plan once however
//! often it is changed.

use std::sync::{Arc, OnceLock};

use crate::layout::Course;
use crate::model::array_time::{ATTOSECONDS_PER_SECOND, ArrayTime};
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::dd::Dd;
use crate::model::loads::Loads;
use crate::model::plan::{
    CutOff, LARGEST_ACCELERATION_M_S2, LARGEST_RAPIDITY, Phase, Plan, PlanFault,
};

use super::loaded::{Checked, FlownLoads, Refused};
use super::{EventKind, OpenHold, Run, RunFault};

/// The most phases that are gone through for all changes of a run together.
pub(super) const MOST_PHASES_FLOWN: u64 = 1 << 26;

/// A change of thrust.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Thrust {
    /// Holds an acceleration for good.
    Hold { acceleration_m_s2: f64 },
    /// Goes in a straight line to another acceleration and holds that for good.
    Ramp { to_m_s2: f64, length: ArrayTime },
    /// Goes back to the plan as filed.
    Plan,
}

impl Thrust {
    /// The change an event makes, if it makes one.
    pub fn of(kind: &EventKind) -> Option<Thrust> {
        match kind {
            EventKind::Hold { acceleration_m_s2 } => {
                Some(Thrust::Hold { acceleration_m_s2: *acceleration_m_s2 })
            }
            EventKind::Ramp { to_m_s2, length } => {
                Some(Thrust::Ramp { to_m_s2: *to_m_s2, length: *length })
            }
            EventKind::Plan => Some(Thrust::Plan),
            EventKind::Move { .. }
            | EventKind::Release { .. }
            | EventKind::Fail { .. }
            | EventKind::Mend { .. }
            | EventKind::Note { .. } => None,
        }
    }
}

impl Run {
    /// Changes the thrust, once every node can fly that.
    pub(super) fn change_thrust(&mut self, at: ArrayTime, thrust: Thrust) -> Result<(), RunFault> {
        let layout = Arc::clone(&self.layout);
        let Course::Thrust(filed) = &layout.course else { return Err(RunFault::Standing) };
        if thrust == Thrust::Plan && self.changed_plan.is_none() {
            return Ok(());
        }
        if self.phases_flown > MOST_PHASES_FLOWN {
            return Err(RunFault::TooManyChanges);
        }
        let was_filed = self.changed_plan.is_none();
        let parked = self.loads.as_mut().and_then(FlownLoads::park);
        let mut plan = self.changed_plan.take().unwrap_or_else(|| Arc::new(filed.clone()));
        let before = plan.phases().len();
        let left = before - plan.phases().partition_point(|phase| phase.end <= at);
        let changed = change(Arc::make_mut(&mut plan), self.open_hold, filed, at, thrust);
        let (cut, open_hold) = match changed {
            Ok(changed) => changed,
            Err(fault) => {
                self.phases_flown += left as u64;
                self.go_on_with(plan, was_filed, parked, before);
                return Err(fault);
            }
        };
        let unchanged = cut.unchanged;
        let mut gone_through = (plan.phases().len() - unchanged) as u64;
        match self.check_changed(&plan, at, parked, unchanged) {
            Ok(loads) => {
                if let Some(Checked { loads, is_tabulated_anew }) = loads {
                    // The integrals of a new table begin at array time zero.
                    if is_tabulated_anew {
                        gone_through += unchanged as u64;
                    }
                    self.loads_from(at, loads);
                }
                self.rigid_loads = OnceLock::new();
                self.rays = OnceLock::new();
                self.changed_plan = Some(plan);
                self.open_hold = open_hold;
                self.phases_flown += gone_through;
                self.settle_released(at);
                Ok(())
            }
            Err(refused) => {
                let Refused { fault, parked } = *refused;
                self.phases_flown += gone_through + left as u64;
                Arc::make_mut(&mut plan).put_back(cut);
                self.go_on_with(plan, was_filed, parked, unchanged);
                Err(fault)
            }
        }
    }

    /// After a change that was refused: the plan and the loads as they were.
    fn go_on_with(
        &mut self,
        plan: Arc<Plan>,
        was_filed: bool,
        parked: Option<Loads>,
        unchanged: usize,
    ) {
        if let Some(loads) = parked
            && let Some(stretch) = loads.stretch()
            && let Some(flown) = &mut self.loads
        {
            flown.unpark(loads.over_plan(Arc::clone(&plan), stretch, unchanged));
        }
        self.changed_plan = (!was_filed).then_some(plan);
    }

    /// The plan as it was flown when so many events had been applied; `None` on a standing
    /// line.
    pub(super) fn plan_after(&self, events: usize) -> Option<Plan> {
        let Course::Thrust(filed) = &self.layout.course else { return None };
        let mut plan = filed.clone();
        let (mut open_hold, mut is_changed) = (None, false);
        for event in self.events.iter().take(events) {
            let Some(thrust) = Thrust::of(&event.kind) else { continue };
            if thrust == Thrust::Plan && !is_changed {
                continue;
            }
            // It was accepted when it was applied.
            if let Ok((_, hold)) = change(&mut plan, open_hold, filed, event.at, thrust) {
                (open_hold, is_changed) = (hold, true);
            }
        }
        Some(plan)
    }
}

/// Changes a plan from a moment on; says what was cut off, and the hold it ends in. A plan
/// that is refused is left as it was.
fn change(
    plan: &mut Plan,
    open_hold: Option<OpenHold>,
    filed: &Plan,
    at: ArrayTime,
    thrust: Thrust,
) -> Result<(CutOff, Option<OpenHold>), RunFault> {
    if thrust != Thrust::Plan && at < ArrayTime::ZERO {
        return Err(RunFault::BeforeThrust { at });
    }
    // Inside a ramp the acceleration in force need not be a double; a new ramp starts from
    // the double nearest to it.
    let from_m_s2 = acceleration_at(plan, open_hold, at).to_f64();
    match thrust {
        Thrust::Hold { acceleration_m_s2 } => check_hold(at, acceleration_m_s2)?,
        Thrust::Ramp { to_m_s2, length } => {
            if length <= ArrayTime::ZERO {
                return Err(RunFault::NoLength);
            }
            if at.checked_add(length).is_none() {
                return Err(RunFault::TooLong { at });
            }
            check_acceleration(to_m_s2)?;
        }
        Thrust::Plan => {}
    }
    let cut = plan.cut_at(at).map_err(|fault| told(&fault, at))?;
    let gone_on = match thrust {
        Thrust::Hold { acceleration_m_s2 } => hold_for_good(plan, at, at, acceleration_m_s2),
        Thrust::Ramp { to_m_s2, length } => ramp(plan, at, from_m_s2, to_m_s2, length),
        // Its pieces keep their own lines, so that no bit of the acceleration differs from
        // what was filed.
        Thrust::Plan => filed
            .phases_from(at)
            .into_iter()
            .try_for_each(|phase| push(plan, phase, at))
            .map(|()| None),
    };
    match gone_on {
        Ok(open_hold) => Ok((cut, open_hold)),
        Err(fault) => {
            plan.put_back(cut);
            Err(fault)
        }
    }
}

/// The acceleration in force at a moment.
fn acceleration_at(plan: &Plan, open_hold: Option<OpenHold>, at: ArrayTime) -> Dd {
    match open_hold {
        // The hold goes on beyond the last moment that can be shown.
        Some(hold) if at == hold.last => Dd::new(hold.acceleration_m_s2),
        _ => plan.moment(at).acceleration_m_s2,
    }
}

fn ramp(
    plan: &mut Plan,
    at: ArrayTime,
    from_m_s2: f64,
    to_m_s2: f64,
    length: ArrayTime,
) -> Result<Option<OpenHold>, RunFault> {
    let end = at.checked_add(length).ok_or(RunFault::TooLong { at })?;
    push(plan, Phase::whole(at, length, from_m_s2, to_m_s2 + 0.0), at)?;
    if end == ArrayTime::LIMIT {
        // Nothing is left of array time to hold it in.
        return Ok(Some(OpenHold { acceleration_m_s2: to_m_s2, last: end }));
    }
    check_hold(end, to_m_s2)?;
    hold_for_good(plan, at, end, to_m_s2)
}

/// Adds a hold that goes on for good at the end of a plan, `start`.
fn hold_for_good(
    plan: &mut Plan,
    at: ArrayTime,
    start: ArrayTime,
    acceleration_m_s2: f64,
) -> Result<Option<OpenHold>, RunFault> {
    // A thrust of −0 is 0.
    let acceleration_m_s2 = acceleration_m_s2 + 0.0;
    let rapidity = plan.moment(start).rapidity;
    let last = last_of_hold(start, rapidity, acceleration_m_s2);
    if last <= start {
        return Err(RunFault::TooFast { rapidity: LARGEST_RAPIDITY.copysign(acceleration_m_s2) });
    }
    let length = ArrayTime::from_attoseconds(last.attoseconds() - start.attoseconds());
    push(plan, Phase::whole(start, length, acceleration_m_s2, acceleration_m_s2), at)?;
    Ok(Some(OpenHold { acceleration_m_s2, last }))
}

fn push(plan: &mut Plan, phase: Phase, at: ArrayTime) -> Result<(), RunFault> {
    plan.push(phase).map_err(|fault| told(&fault, at))
}

fn check_hold(start: ArrayTime, acceleration_m_s2: f64) -> Result<(), RunFault> {
    check_acceleration(acceleration_m_s2)?;
    if start >= ArrayTime::LIMIT {
        return Err(RunFault::OutsideTime { at: start });
    }
    Ok(())
}

fn check_acceleration(acceleration_m_s2: f64) -> Result<(), RunFault> {
    if acceleration_m_s2.is_nan() || acceleration_m_s2.abs() > LARGEST_ACCELERATION_M_S2 {
        return Err(RunFault::TooStrong { acceleration_m_s2 });
    }
    Ok(())
}

/// The last moment of a hold for good: the end of array time, or a whole second before
/// the rapidity leaves its domain. A hold of zero at the limit itself goes on.
fn last_of_hold(start: ArrayTime, rapidity: Dd, acceleration_m_s2: f64) -> ArrayTime {
    if acceleration_m_s2 == 0.0 {
        return ArrayTime::LIMIT;
    }
    let towards = if acceleration_m_s2 > 0.0 { rapidity } else { -rapidity };
    let room = (Dd::new(LARGEST_RAPIDITY) - towards) * SPEED_OF_LIGHT_M_S;
    let length_s = room / acceleration_m_s2.abs();
    let Some(end) = ArrayTime::nearest(start.seconds() + length_s) else {
        return ArrayTime::LIMIT;
    };
    // A whole second less than the second it falls in: clear of any rounding above, and
    // a moment that reads well.
    let seconds = end.attoseconds().div_euclid(ATTOSECONDS_PER_SECOND) - 1;
    ArrayTime::from_attoseconds(seconds * ATTOSECONDS_PER_SECOND)
}

/// A fault of a plan in the terms of a run that is changed at `at`.
fn told(fault: &PlanFault, at: ArrayTime) -> RunFault {
    match *fault {
        PlanFault::TooFast { rapidity, .. } => RunFault::TooFast { rapidity },
        PlanFault::TooStrong { acceleration_m_s2, .. } => RunFault::TooStrong { acceleration_m_s2 },
        PlanFault::TooLong { .. } => RunFault::TooLong { at },
        PlanFault::Empty { .. } | PlanFault::Gap { .. } => {
            unreachable!("phases of a run follow each other and have a length")
        }
    }
}
