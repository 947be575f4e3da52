//! Changes of thrust: the plan as it is flown, rebuilt from an event on.

use std::sync::OnceLock;

use crate::layout::Course;
use crate::model::array_time::{ATTOSECONDS_PER_SECOND, ArrayTime};
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::model::dd::Dd;
use crate::model::plan::{LARGEST_ACCELERATION_M_S2, LARGEST_RAPIDITY, Phase, Plan, PlanFault};

use super::{OpenHold, Run, RunFault};

impl Run {
    /// Holds an acceleration for good.
    pub(super) fn hold(&mut self, at: ArrayTime, acceleration_m_s2: f64) -> Result<(), RunFault> {
        let flown = self.flown_until(at)?;
        self.hold_for_good(at, flown, at, acceleration_m_s2)
    }

    /// Goes in a straight line to another acceleration and holds that for good.
    ///
    /// Inside a ramp the acceleration in force need not be a double; the new ramp starts
    /// from the double nearest to it.
    pub(super) fn ramp(
        &mut self,
        at: ArrayTime,
        to_m_s2: f64,
        length: ArrayTime,
    ) -> Result<(), RunFault> {
        let mut flown = self.flown_until(at)?;
        if length <= ArrayTime::ZERO {
            return Err(RunFault::NoLength);
        }
        let Some(end) = at.checked_add(length) else {
            return Err(RunFault::TooLong { at });
        };
        check_acceleration(to_m_s2)?;
        let from_m_s2 = self.instant_at(at).moment.acceleration_m_s2.to_f64();
        flown.push(Phase::whole(at, length, from_m_s2, to_m_s2 + 0.0));
        if end == ArrayTime::LIMIT {
            // Nothing is left of array time to hold it in.
            let plan = plan_of(flown, at)?;
            return self.fly(at, plan, Some(OpenHold { acceleration_m_s2: to_m_s2, last: end }));
        }
        self.hold_for_good(at, flown, end, to_m_s2)
    }

    /// Goes back to the plan as filed. Its pieces keep their own lines, so that no bit of
    /// the acceleration differs from what was filed.
    pub(super) fn back_to_plan(&mut self, at: ArrayTime) -> Result<(), RunFault> {
        let Course::Thrust(filed) = &self.layout.course else {
            return Err(RunFault::Standing);
        };
        let Some(flown) = &self.changed_plan else {
            return Ok(());
        };
        let mut phases = flown.phases_until(at);
        phases.extend(filed.phases_from(at));
        let plan = plan_of(phases, at)?;
        self.fly(at, plan, None)
    }

    /// What has been flown up to a moment at which the thrust may change.
    fn flown_until(&self, at: ArrayTime) -> Result<Vec<Phase>, RunFault> {
        let plan = self.plan().ok_or(RunFault::Standing)?;
        if at < ArrayTime::ZERO {
            return Err(RunFault::BeforeThrust { at });
        }
        Ok(plan.phases_until(at))
    }

    /// Adds a hold that goes on for good to the phases before it, and flies that.
    fn hold_for_good(
        &mut self,
        at: ArrayTime,
        mut phases: Vec<Phase>,
        start: ArrayTime,
        acceleration_m_s2: f64,
    ) -> Result<(), RunFault> {
        check_acceleration(acceleration_m_s2)?;
        if start >= ArrayTime::LIMIT {
            return Err(RunFault::OutsideTime { at: start });
        }
        // A thrust of −0 is 0.
        let acceleration_m_s2 = acceleration_m_s2 + 0.0;
        let before = plan_of(phases.clone(), at)?;
        let rapidity = before.moment(start).rapidity;
        let last = last_of_hold(start, rapidity, acceleration_m_s2);
        if last <= start {
            return Err(RunFault::TooFast {
                rapidity: LARGEST_RAPIDITY.copysign(acceleration_m_s2),
            });
        }
        let length = ArrayTime::from_attoseconds(last.attoseconds() - start.attoseconds());
        phases.push(Phase::whole(start, length, acceleration_m_s2, acceleration_m_s2));
        let plan = plan_of(phases, at)?;
        self.fly(at, plan, Some(OpenHold { acceleration_m_s2, last }))
    }

    /// Takes a plan over, once every node can fly it from a moment on.
    fn fly(
        &mut self,
        from: ArrayTime,
        plan: Plan,
        open_hold: Option<OpenHold>,
    ) -> Result<(), RunFault> {
        let loads = self.check_flight(Some(&plan), from)?;
        self.loads.extend(loads.map(|loads| (from, loads)));
        self.rigid_loads = OnceLock::new();
        self.rays = OnceLock::new();
        self.changed_plan = Some(plan);
        self.open_hold = open_hold;
        Ok(())
    }
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

/// A plan from its phases, with faults told in the terms of a run that is changed at `at`.
fn plan_of(phases: Vec<Phase>, at: ArrayTime) -> Result<Plan, RunFault> {
    Plan::new(phases).map_err(|fault| match fault {
        PlanFault::TooFast { rapidity, .. } => RunFault::TooFast { rapidity },
        PlanFault::TooStrong { acceleration_m_s2, .. } => RunFault::TooStrong { acceleration_m_s2 },
        PlanFault::TooLong { .. } => RunFault::TooLong { at },
        PlanFault::Empty { .. } | PlanFault::Gap { .. } => {
            unreachable!("phases of a run follow each other and have a length")
        }
    })
}
