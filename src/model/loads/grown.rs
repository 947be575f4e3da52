//! Loads of one line over plans that begin alike: what is known of the phases they share is
//! kept, so that a plan that is changed again and again is gone through once.

use std::sync::Arc;

use super::compliance::{Compliance, Range};
use super::flight::Flight;
use super::peaks::Sampled;
use super::propellant::Propulsion;
use super::{Course, Found, Loads, LoadsFault, Thrust};
use crate::model::dd::Dd;
use crate::model::plan::Plan;

/// How a line stretches over the states that a plan passes through.
#[derive(Clone, Debug)]
pub struct Stretch {
    pub(super) range: Range,
    pub(super) compliance: Arc<Compliance>,
}

impl Stretch {
    /// Whether both are one table.
    #[must_use]
    pub fn is_same(&self, other: &Stretch) -> bool {
        self.range.is_same(&other.range)
    }
}

/// What is known of the first phases of a plan: none of it depends on what comes after.
#[derive(Clone, Debug, Default)]
pub(super) struct Settled {
    phases: usize,
    /// The smallest and the largest acceleration, at both ends of every phase.
    extremes: Option<[Dd; 2]>,
    pub sampled: Sampled,
}

impl Settled {
    /// Takes in further phases of the same plan.
    fn go_on(&mut self, plan: &Plan, propulsion: &Propulsion, phases: usize) {
        self.extremes = self.extremes_up_to(plan, phases);
        self.sampled.go_on(plan, propulsion, phases);
        self.phases = self.phases.max(phases);
    }

    fn extremes_up_to(&self, plan: &Plan, phases: usize) -> Option<[Dd; 2]> {
        let mut found = self.extremes;
        for phase in plan.phases().iter().take(phases).skip(self.phases) {
            for at in [phase.start, phase.end] {
                let here = phase.acceleration(at);
                let [smallest, largest] = found.get_or_insert([here; 2]);
                if here > *largest {
                    *largest = here;
                }
                if here < *smallest {
                    *smallest = here;
                }
            }
        }
        found
    }

    /// The states a plan that begins with these phases passes through, the coasts before
    /// and after it included.
    pub fn range(&self, plan: &Plan, propulsion: &Propulsion) -> Range {
        let mut range = Range { lowest_m_s2: 0.0, highest_m_s2: 0.0, most_burned: 0.0 };
        if let Some([smallest, largest]) = self.extremes_up_to(plan, plan.phases().len()) {
            range.lowest_m_s2 = smallest.to_f64().min(0.0);
            range.highest_m_s2 = largest.to_f64().max(0.0);
        }
        if propulsion.is_falling() {
            range.most_burned = propulsion.burned_fraction(plan.velocity_spent_m_s(plan.end()));
        }
        range
    }
}

impl Loads {
    /// How the line stretches over its plan; `None` on a standing line.
    #[must_use]
    pub fn stretch(&self) -> Option<Stretch> {
        match &self.course {
            Course::Thrust(thrust) => Some(thrust.stretch.clone()),
            Course::Standing(_) => None,
        }
    }

    /// How it would stretch over another plan, whose first `unchanged` phases are those of
    /// its own; `None` on a standing line.
    ///
    /// # Errors
    ///
    /// As [`Loads::under_thrust`].
    pub fn stretch_over(
        &mut self,
        plan: &Plan,
        unchanged: usize,
    ) -> Result<Option<Stretch>, LoadsFault> {
        let Course::Thrust(thrust) = &mut self.course else { return Ok(None) };
        if thrust.settled.phases > unchanged {
            thrust.settled = Settled::default();
        }
        thrust.settled.go_on(plan, &self.propulsion, unchanged);
        let range = thrust.settled.range(plan, &self.propulsion);
        if range.is_same(&thrust.stretch.range) {
            return Ok(Some(thrust.stretch.clone()));
        }
        let compliance = Compliance::new(&self.rods, &thrust.balance, &self.relaxed_m, &range)?;
        Ok(Some(Stretch { range, compliance: Arc::new(compliance) }))
    }

    /// The loads of the same line over another plan, whose first `unchanged` phases are
    /// those of its own, with the stretch found for it: the same to the bit as those built
    /// for that plan alone.
    #[must_use]
    pub fn over_plan(self, plan: Arc<Plan>, stretch: Stretch, unchanged: usize) -> Loads {
        let Course::Thrust(thrust) = self.course else { return self };
        let Thrust { flight, balance, stretch: before, mut settled, .. } = *thrust;
        if settled.phases > unchanged {
            settled = Settled::default();
        }
        let begun = if stretch.range.is_same(&before.range) {
            flight.into_begun(unchanged)
        } else {
            Vec::new()
        };
        let flight = Flight::new(plan, Arc::clone(&stretch.compliance), begun);
        let thrust = Thrust { flight, balance, stretch, settled, found: Found::default() };
        Loads { course: Course::Thrust(Box::new(thrust)), ..self }
    }

    /// Lets go of the plan, so that it can be changed where it stands; the loads are of use
    /// again with a plan that begins like it.
    pub fn let_go_of_plan(&mut self) {
        if let Course::Thrust(thrust) = &mut self.course {
            thrust.flight.plan = Arc::new(Plan::empty());
        }
    }
}
