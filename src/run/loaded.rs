//! Where load and temperature put the nodes, as a run flies them.
//!
//! A line with a stiffness or a change of temperature has [`Loads`], built for the plan as
//! it is flown; a change of thrust goes on with what is known of the phases before it.
//! The loads of before a change hold for the moments before it, so that no bit of the past
//! is rewritten; they are built again when such a moment is asked for, and a few are kept.
//! A rigid line has none and is read from its positions alone.
//!
//! A node that was moved stands where it was put, displaced by load and temperature as it
//! would be in its place of the layout. Its mass, and that of a released node, still count
//! where the layout has them: a what-if on one node does not redesign the line, and the
//! recoil of a stretched span is not computed.

use std::sync::{Arc, Mutex, PoisonError};

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
pub(super) struct Loaded {
    pub loads: Arc<Loads>,
    pub state: loads::State,
}

/// Loads of before a change of thrust that are kept when they have been asked for.
const EARLIER_KEPT: usize = 8;

/// The loads of a line that stretches, over every plan it has flown.
#[derive(Clone, Debug)]
pub(super) struct FlownLoads {
    /// From when each of them holds, and how many events had been applied by then; the first
    /// ones hold from the beginning of array time.
    changes: Vec<(ArrayTime, usize)>,
    /// Those of the last change; `None` only while the thrust is being changed.
    latest: Option<Arc<Loads>>,
    earlier: Earlier,
}

/// The loads over a changed plan that every node can fly.
pub(super) struct Checked {
    pub loads: Loads,
    /// Whether the stretch had to be tabulated over other states than before.
    pub is_tabulated_anew: bool,
}

/// Why a changed plan is not flown, and the loads to go on from.
pub(super) struct Refused {
    pub fault: RunFault,
    pub parked: Option<Loads>,
}

/// Those of changes before the last one, by the number of the change; the one asked for
/// last stands at the end.
#[derive(Debug, Default)]
struct Earlier(Mutex<Vec<(usize, Arc<Loads>)>>);

impl Clone for Earlier {
    fn clone(&self) -> Earlier {
        Earlier(Mutex::new(self.0.lock().unwrap_or_else(PoisonError::into_inner).clone()))
    }
}

impl FlownLoads {
    pub fn new(loads: Arc<Loads>) -> FlownLoads {
        let changes = vec![(ArrayTime::ZERO, 0)];
        FlownLoads { changes, latest: Some(loads), earlier: Earlier::default() }
    }

    /// Hands out the latest ones, without their plan, to go on from.
    pub fn park(&mut self) -> Option<Loads> {
        let mut loads = Arc::unwrap_or_clone(self.latest.take()?);
        loads.let_go_of_plan();
        Some(loads)
    }

    /// Takes back what was handed out.
    pub fn unpark(&mut self, loads: Loads) {
        self.latest = Some(Arc::new(loads));
    }

    /// The number of the change whose loads hold at a moment.
    fn change_at(&self, at: ArrayTime) -> usize {
        self.changes.partition_point(|(from, _)| *from <= at).saturating_sub(1)
    }
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

impl Loaded {
    /// `None` on a rigid line.
    pub fn at(run: &Run, instant: Instant) -> Option<Loaded> {
        let loads = run.loads_at(instant.moment.at)?;
        let state = loads.state_of_instant(instant);
        Some(Loaded { loads, state })
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
        self.loads.is_none()
    }

    /// The loads of the line over the plan as it is flown. Those of a rigid line are built
    /// when they are first asked for.
    ///
    /// # Errors
    ///
    /// A line that has none.
    pub fn loads(&self) -> Result<Arc<Loads>, RunFault> {
        if let Some(latest) = self.loads.as_ref().and_then(|flown| flown.latest.as_ref()) {
            return Ok(Arc::clone(latest));
        }
        self.rigid_loads.get_or_init(|| self.loads_over(self.plan()).map(Arc::new)).clone()
    }

    /// The loads over the plan as it is flown; `None` on a rigid line.
    pub(super) fn latest_loads(&self) -> Option<&Loads> {
        self.loads.as_ref()?.latest.as_deref()
    }

    /// The loads that hold at a moment, when they are the latest.
    pub(super) fn latest_loads_at(&self, at: ArrayTime) -> Option<&Loads> {
        let flown = self.loads.as_ref()?;
        let is_latest = flown.changes.last().is_none_or(|(from, _)| *from <= at);
        if is_latest || flown.changes.len() == 1 { flown.latest.as_deref() } else { None }
    }

    /// The loads that hold at a moment; `None` on a rigid line.
    pub(super) fn loads_at(&self, at: ArrayTime) -> Option<Arc<Loads>> {
        let flown = self.loads.as_ref()?;
        let change = flown.change_at(at);
        if change + 1 == flown.changes.len() {
            return flown.latest.clone();
        }
        let mut kept = flown.earlier.0.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some(place) = kept.iter().position(|(known, _)| *known == change) {
            let found = kept.remove(place);
            let loads = Arc::clone(&found.1);
            kept.push(found);
            return Some(loads);
        }
        let plan = self.plan_after(flown.changes[change].1)?;
        // They were built before, so they can be again.
        let loads = Arc::new(self.loads_over(Some(&plan)).ok()?);
        if kept.len() >= EARLIER_KEPT {
            kept.remove(0);
        }
        kept.push((change, Arc::clone(&loads)));
        Some(loads)
    }

    /// The loads of a change of thrust that has been accepted.
    pub(super) fn loads_from(&mut self, at: ArrayTime, loads: Loads) {
        let applied = self.events.len() + 1;
        if let Some(flown) = &mut self.loads {
            flown.changes.push((at, applied));
            flown.unpark(loads);
        }
    }

    /// Whether every node can fly the plan of the layout, under load where the line
    /// stretches; the loads of that plan, when they move nodes.
    pub(super) fn first_loads(&self) -> Result<Option<Arc<Loads>>, RunFault> {
        let (plan, from) = (self.plan(), ArrayTime::ZERO);
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
        Ok(Some(Arc::new(loads)))
    }

    /// Whether every node can fly a changed plan from a moment on, of which the first
    /// phases are as they were; the loads over it, where the line stretches.
    ///
    /// `parked` are the loads to go on from. A plan that is refused gives them back, still
    /// without a plan.
    pub(super) fn check_changed(
        &self,
        plan: &Arc<Plan>,
        from: ArrayTime,
        parked: Option<Loads>,
        unchanged: usize,
    ) -> Result<Option<Checked>, Box<Refused>> {
        let Some(mut loads) = parked else {
            return match self.check_line(Some(plan), from) {
                Ok(()) => Ok(None),
                Err(fault) => Err(Box::new(Refused { fault, parked: None })),
            };
        };
        let Some(before) = loads.stretch() else { return Ok(None) };
        let stretch = match loads.stretch_over(plan, unchanged) {
            Ok(stretch) => stretch.unwrap_or_else(|| before.clone()),
            Err(fault) => {
                // Without load it may be told more exactly what is in the way.
                let told = self.check_line(Some(plan), from).err();
                let fault = told.unwrap_or_else(|| self.told(fault));
                return Err(Box::new(Refused { fault, parked: Some(loads) }));
            }
        };
        let is_tabulated_anew = !stretch.is_same(&before);
        let loads = loads.over_plan(Arc::clone(plan), stretch, unchanged);
        let mut checked = Ok(());
        for (row, moved) in &self.moved {
            if checked.is_ok() && moved.released.is_none() {
                let position_m = moved.place.position_m(from);
                checked = self.check_under(&loads, Some(plan), from, *row, position_m, false);
            }
        }
        match checked {
            Ok(()) => Ok(Some(Checked { loads, is_tabulated_anew })),
            Err(fault) => {
                let none = Arc::new(Plan::empty());
                let parked = Some(loads.over_plan(none, before, unchanged));
                Err(Box::new(Refused { fault, parked }))
            }
        }
    }

    /// Where nodes that are released at this moment stand: a change of thrust at the same
    /// moment, after it, still counts.
    pub(super) fn settle_released(&mut self, at: ArrayTime) {
        let is_now = |moved: &super::Moved| moved.released == Some(at);
        if self.loads.is_none() || !self.moved.values().any(is_now) {
            return;
        }
        let Some(then) = Loaded::at(self, self.instant_at(at)) else { return };
        let rows: Vec<usize> =
            self.moved.iter().filter(|(_, moved)| is_now(moved)).map(|(row, _)| *row).collect();
        for row in rows {
            let by_m = then.displaced(self, row).by_m;
            if let Some(moved) = self.moved.get_mut(&row) {
                moved.released_by_m = by_m;
            }
        }
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
        self.loaded.as_ref().map(|loaded| (&*loaded.loads, &loaded.state))
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
