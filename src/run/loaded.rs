//! Where load and temperature put the nodes, as a run flies them.
//!
//! A line with a stiffness or a change of temperature has [`Loads`], built for the plan as
//! it is flown and built again by every change of thrust. Those of before a change are
//! kept for the moments before it: no bit of the past is rewritten. A rigid line has none
//! and is read from its positions alone.
//!
//! A node that was moved stands where it was put, displaced by load and temperature as it
//! would be in its place of the layout. Its mass, and that of a released node, still count
//! where the layout has them: a what-if on one node does not redesign the line, and the
//! recoil of a stretched span is not computed.

use std::sync::Arc;

use crate::layout::{Course, Layout};
use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;
use crate::model::loads::{self, Loads, LoadsFault, Structure};
use crate::model::plan::Plan;
use crate::model::rates::Instant;

use super::{Run, RunFault, State};

/// A node under load beside the same node without.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Stretched {
    /// Position with no force on the line and no change of temperature, m.
    pub unloaded_position_m: Dd,
    /// The clock offset of a node that has always stood there, s.
    pub offset_unloaded_s: Dd,
    /// What load and temperature add to it, s.
    pub offset_from_stretch_s: Dd,
}

/// The loads of a run at one moment.
#[derive(Clone, Debug)]
pub(super) struct Loaded<'a> {
    pub loads: &'a Loads,
    pub state: loads::State,
}

/// How load and temperature put a node elsewhere than where the layout has it.
#[derive(Clone, Copy, Debug)]
pub(super) struct Displaced {
    /// By how much, m.
    pub by_m: Dd,
    /// The part of it that has been there from the beginning, m: all of it on a line that
    /// stands, nothing under thrust.
    pub settled_m: Dd,
    /// What the rest has added to the clock offset, s.
    pub extra_s: Dd,
}

impl Displaced {
    /// A rigid line.
    pub const NOT: Displaced = Displaced { by_m: Dd::ZERO, settled_m: Dd::ZERO, extra_s: Dd::ZERO };
}

impl<'a> Loaded<'a> {
    /// `None` on a rigid line.
    pub fn at(run: &'a Run, instant: Instant) -> Option<Loaded<'a>> {
        let loads = run.loads_at(instant.moment.at)?;
        Some(Loaded { loads, state: loads.state_of_instant(instant) })
    }

    pub fn position_m(&self, row: usize) -> Dd {
        self.loads.position_m(&self.state, row)
    }

    pub fn offset_s(&self, row: usize) -> Dd {
        self.loads.clock_offset(&self.state, row).total_s
    }

    pub fn displaced(&self, run: &Run, row: usize) -> Displaced {
        let filed_m = Dd::new(run.layout.nodes[row].position_m);
        let by_m = self.position_m(row) - filed_m;
        if run.plan().is_none() {
            return Displaced { by_m, settled_m: by_m, extra_s: Dd::ZERO };
        }
        let extra_s = self.offset_s(row) - self.state.instant.clock_offset_s(filed_m);
        Displaced { by_m, settled_m: Dd::ZERO, extra_s }
    }
}

/// Whether a layout says anything that could move a node.
#[must_use]
pub fn may_stretch(layout: &Layout) -> bool {
    layout.spans.iter().any(|span| {
        span.axial_stiffness_n.is_some()
            || span.thermal_expansion_per_k * span.temperature_change_k != 0.0
    })
}

impl Run {
    /// Whether neither load nor temperature moves any node.
    #[must_use]
    pub fn is_rigid(&self) -> bool {
        self.loads.is_empty()
    }

    /// The loads of the line over the plan as it is flown. Those of a rigid line are built
    /// when they are first asked for.
    ///
    /// # Errors
    ///
    /// A line that has none.
    pub fn loads(&self) -> Result<Arc<Loads>, RunFault> {
        if let Some((_, loads)) = self.loads.last() {
            return Ok(Arc::clone(loads));
        }
        self.rigid_loads.get_or_init(|| self.loads_over(self.plan()).map(Arc::new)).clone()
    }

    /// The loads that hold at a moment; `None` on a rigid line.
    pub(super) fn loads_at(&self, at: ArrayTime) -> Option<&Loads> {
        let known = self.loads.partition_point(|(from, _)| *from <= at);
        // The first ones hold from the beginning of array time.
        self.loads.get(known.saturating_sub(1)).map(|(_, loads)| &**loads)
    }

    /// Whether every node can fly a plan from a moment on, under load where the line
    /// stretches; the loads of that plan, when they move nodes.
    pub(super) fn check_flight(
        &self,
        plan: Option<&Plan>,
        from: ArrayTime,
    ) -> Result<Option<Arc<Loads>>, RunFault> {
        if !may_stretch(&self.layout) {
            self.check_line(plan, from)?;
            return Ok(None);
        }
        let loads = match self.loads_over(plan) {
            Ok(loads) => loads,
            Err(fault) => {
                // Without load it may be told more exactly what is in the way.
                self.check_line(plan, from)?;
                return Err(fault);
            }
        };
        if loads.is_rigid() {
            self.check_line(plan, from)?;
            return Ok(None);
        }
        for (row, moved) in &self.moved {
            if moved.released.is_none() {
                let position_m = moved.place.position_m(from);
                self.check_under(&loads, plan, from, *row, position_m, false)?;
            }
        }
        Ok(Some(Arc::new(loads)))
    }

    /// Checks one node at a position of the layout's kind, under load, from a moment on.
    pub(super) fn check_under(
        &self,
        loads: &Loads,
        plan: Option<&Plan>,
        from: ArrayTime,
        row: usize,
        position_m: f64,
        moved: bool,
    ) -> Result<(), RunFault> {
        let filed = Dd::new(self.layout.nodes[row].position_m);
        for end in loads.position_extremes_m(row) {
            let loaded_m = (end - filed + position_m).to_f64();
            self.check_position(plan, from, row, loaded_m, moved)?;
        }
        Ok(())
    }

    fn loads_over(&self, plan: Option<&Plan>) -> Result<Loads, RunFault> {
        let built = match plan {
            Some(plan) => Loads::under_thrust(Structure::from_layout(&self.layout), plan),
            None => Loads::of_layout(&self.layout),
        };
        built.map_err(|fault| self.told(fault))
    }

    fn told(&self, fault: LoadsFault) -> RunFault {
        let name = |row: usize| self.layout.nodes[row].name.to_string();
        match fault {
            LoadsFault::Horizon { row, acceleration_m_s2 } => {
                RunFault::HorizonUnderLoad { name: name(row), acceleration_m_s2 }
            }
            LoadsFault::Crushed { gap, acceleration_m_s2 } => {
                RunFault::Crushed { between: [name(gap), name(gap + 1)], acceleration_m_s2 }
            }
            LoadsFault::NotInvertible => RunFault::NotInvertible,
            LoadsFault::Gradient { row } => {
                let farthest_m = match &self.layout.course {
                    Course::Standing(standing) => {
                        (standing.gravity_m_s2 / standing.gradient_per_s2).abs().next_down()
                    }
                    Course::Thrust(_) => f64::INFINITY,
                };
                RunFault::GravityTurned { name: name(row), farthest_m }
            }
            LoadsFault::Structure(fault) => RunFault::NoStructure { what: fault.to_string() },
        }
    }
}

impl State<'_> {
    /// The loads of the line and its state under them; `None` on a rigid line.
    #[must_use]
    pub fn loaded(&self) -> Option<(&Loads, &loads::State)> {
        self.loaded.as_ref().map(|loaded| (loaded.loads, &loaded.state))
    }

    /// What load and temperature do to a node of the line; `None` on a rigid line and for
    /// a released node.
    #[must_use]
    pub fn stretched(&self, row: usize) -> Option<Stretched> {
        let Loaded { loads, state } = self.loaded.as_ref()?;
        let total_s = self.node(row).aboard()?.clock_offset_s;
        let offset = loads.clock_offset(state, row);
        let filed_m = Dd::new(self.run.layout.nodes[row].position_m);
        let moved_m = Dd::new(self.run.place(row).position_m(self.at())) - filed_m;
        Some(Stretched {
            unloaded_position_m: loads.unloaded_position_m(row) + moved_m,
            offset_unloaded_s: total_s - offset.stretch_s,
            offset_from_stretch_s: offset.stretch_s,
        })
    }

    /// The largest distance from the reference node that a node has had up to the moment,
    /// m: the scale of what rounding can leave in its clock offset.
    #[must_use]
    pub fn farthest_m(&self, row: usize) -> f64 {
        let farthest_m = self.run.place(row).farthest_m(self.at());
        let Some(Loaded { loads, .. }) = &self.loaded else { return farthest_m };
        let filed_m = Dd::new(self.run.layout.nodes[row].position_m);
        let displaced = loads.position_extremes_m(row).map(|end| (end - filed_m).abs().to_f64());
        farthest_m + displaced[0].max(displaced[1])
    }
}
