//! A layout at a moment, with what has been changed on the way.
//!
//! A [`Run`] is a layout and the events applied to it so far. The same layout and the
//! same events give the same bits, whether they are applied while stepping or all at
//! once: this is what lets a recording be verified.
//!
//! An event acts from its moment on and rewrites nothing before it. Looking back at an
//! earlier moment shows what was so then.

mod bounds;
mod event;
mod fault;
mod light;
mod loaded;
mod place;
pub mod recording;
mod state;
mod thrust;

use std::collections::BTreeMap;
use std::sync::{Arc, OnceLock};

use crate::layout::names::is_unsafe;
use crate::layout::{Course, FARTHEST_POSITION_M, Layout};
use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;
use crate::model::links::Rays;
use crate::model::loads::Loads;
use crate::model::plan::{Moment, Plan};
use crate::model::rates::Instant;

use loaded::FlownLoads;
use thrust::Thrust;

pub use event::{Event, EventKind};
pub use fault::{HorizonFault, RunFault};
pub use light::{Answer, Light, NoSignal, NodeEnd, Signal};
pub use loaded::{Stretched, may_stretch};
pub use place::Place;
pub use state::{Aboard, NodeState, State};

/// A layout flown, or standing, with what has been changed on the way.
#[derive(Clone, Debug)]
pub struct Run {
    layout: Arc<Layout>,
    /// The positions of the layout, m, side by side: what every table of a large line
    /// goes through.
    positions_m: Arc<[f64]>,
    events: Vec<Event>,
    /// The plan as it is being flown; `None` as long as it is the one filed.
    changed_plan: Option<Arc<Plan>>,
    /// The hold the plan ends in, if it is held for good.
    open_hold: Option<OpenHold>,
    /// How many phases all changes of thrust have gone through together.
    phases_flown: u64,
    /// The loads that displace nodes; `None` on a rigid line.
    loads: Option<FlownLoads>,
    /// The loads of a rigid line, once they have been asked for.
    rigid_loads: OnceLock<Result<Arc<Loads>, RunFault>>,
    /// How light runs under the plan as it is flown, once it has been asked for.
    rays: OnceLock<Arc<Rays>>,
    /// The nodes that have been moved or released, by row; all others stand where the
    /// layout puts them.
    moved: BTreeMap<usize, Moved>,
    /// Changes of links, by the rows of their ends, the smaller first.
    links: BTreeMap<[usize; 2], Vec<(ArrayTime, LinkState)>>,
}

/// A hold that goes on for good: to the end of array time, or as far as the rapidity
/// stays within its domain.
#[derive(Clone, Copy, Debug, PartialEq)]
struct OpenHold {
    acceleration_m_s2: f64,
    /// The last moment the run can be asked for.
    last: ArrayTime,
}

#[derive(Clone, Debug, PartialEq)]
struct Moved {
    place: Place,
    released: Option<ArrayTime>,
    /// By how much load and temperature displaced it where it was released, m.
    released_by_m: Dd,
}

/// Whether a link works.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum LinkState {
    /// It works.
    Working,
    /// It has failed.
    Failed,
}

impl Run {
    /// The run of a layout in which nothing has been changed.
    ///
    /// # Errors
    ///
    /// A node that reaches the horizon, or stands where the gradient has turned gravity
    /// round: such a line cannot be flown at all.
    pub fn new(layout: Arc<Layout>) -> Result<Run, RunFault> {
        let mut run = Run {
            positions_m: layout.nodes.iter().map(|node| node.position_m).collect(),
            layout,
            events: Vec::new(),
            changed_plan: None,
            open_hold: None,
            phases_flown: 0,
            loads: None,
            rigid_loads: OnceLock::new(),
            rays: OnceLock::new(),
            moved: BTreeMap::new(),
            links: BTreeMap::new(),
        };
        run.loads = run.first_loads()?.map(FlownLoads::new);
        Ok(run)
    }

    /// The layout.
    #[must_use]
    pub fn layout(&self) -> &Arc<Layout> {
        &self.layout
    }

    /// The events applied so far, in order. Notes of the layout are not among them; see
    /// [`Run::journal`].
    #[must_use]
    pub fn events(&self) -> &[Event] {
        &self.events
    }

    /// The plan as it is being flown; `None` for a standing line.
    ///
    /// A `hold` or a `ramp` makes it end in a hold for good, which reaches to
    /// [`Run::last_moment`].
    #[must_use]
    pub fn plan(&self) -> Option<&Plan> {
        match (&self.changed_plan, &self.layout.course) {
            (Some(plan), _) => Some(plan),
            (None, Course::Thrust(plan)) => Some(plan),
            (None, Course::Standing(_)) => None,
        }
    }

    /// The last moment the run can be asked for: the end of array time, unless the thrust
    /// in force takes the rapidity out of its domain before.
    #[must_use]
    pub fn last_moment(&self) -> ArrayTime {
        self.open_hold.map_or(ArrayTime::LIMIT, |hold| hold.last)
    }

    /// Whether the run can be asked for a moment.
    ///
    /// # Errors
    ///
    /// The reason why not.
    pub fn check_moment(&self, at: ArrayTime) -> Result<(), RunFault> {
        if at.in_domain().is_none() {
            return Err(RunFault::OutsideTime { at });
        }
        match self.open_hold {
            Some(OpenHold { acceleration_m_s2, last }) if at > last => {
                Err(RunFault::PastRapidity { at, last, acceleration_m_s2 })
            }
            _ => Ok(()),
        }
    }

    /// The line at a moment.
    ///
    /// # Errors
    ///
    /// A moment outside array time, or after [`Run::last_moment`].
    pub fn state_at(&self, at: ArrayTime) -> Result<State<'_>, RunFault> {
        self.check_moment(at)?;
        Ok(State::new(self, self.instant_at(at)))
    }

    /// What moves or holds the line at a moment up to [`Run::last_moment`].
    #[must_use]
    pub fn instant_at(&self, at: ArrayTime) -> Instant {
        let plan = match (&self.changed_plan, &self.layout.course) {
            (Some(plan), _) => &**plan,
            (None, Course::Thrust(plan)) => plan,
            (None, Course::Standing(standing)) => {
                return Instant {
                    moment: Moment::held_always(at, standing.gravity_m_s2),
                    gradient_per_s2: standing.gradient_per_s2,
                };
            }
        };
        let mut moment = plan.moment(at);
        if let Some(hold) = self.open_hold
            && at == hold.last
        {
            // The hold goes on beyond the last moment that can be shown.
            moment.phase = Some(plan.phases().len() - 1);
            moment.acceleration_m_s2 = Dd::new(hold.acceleration_m_s2);
        }
        Instant { moment, gradient_per_s2: 0.0 }
    }

    /// Applies the next event.
    ///
    /// # Errors
    ///
    /// What stands against it; the run is then as it was.
    pub fn apply(&mut self, event: Event) -> Result<(), RunFault> {
        let at = event.at;
        if let Some(last) = self.events.last().map(|event| event.at)
            && at < last
        {
            return Err(RunFault::OutOfOrder { at, last });
        }
        self.check_moment(at)?;
        match &event.kind {
            kind @ (EventKind::Hold { .. } | EventKind::Ramp { .. } | EventKind::Plan) => {
                if let Some(thrust) = Thrust::of(kind) {
                    self.change_thrust(at, thrust)?;
                }
            }
            EventKind::Move { node, position_m } => self.move_node(at, node, *position_m)?,
            EventKind::Release { node } => self.release(at, node)?,
            EventKind::Fail { between } => self.change_link(at, between, LinkState::Failed)?,
            EventKind::Mend { between } => self.change_link(at, between, LinkState::Working)?,
            EventKind::Note { text } => self.check_note(text)?,
        }
        self.events.push(event);
        Ok(())
    }

    /// Takes the last event back and returns it; `None` when there is none.
    ///
    /// # Errors
    ///
    /// None in practice: what is left was accepted before. The run is then as it was.
    pub fn undo(&mut self) -> Result<Option<Event>, RunFault> {
        let Some((last, kept)) = self.events.split_last() else {
            return Ok(None);
        };
        let mut earlier = Run::new(Arc::clone(&self.layout))?;
        for event in kept {
            earlier.apply(event.clone())?;
        }
        let last = last.clone();
        *self = earlier;
        Ok(Some(last))
    }

    /// The notes of the layout and the events of the run after one moment and up to
    /// another, in order of time; at one moment the notes come first. This is what a
    /// recording holds beside frames.
    #[must_use]
    pub fn journal(&self, after: Option<ArrayTime>, until: ArrayTime) -> Vec<Event> {
        let notes = self
            .layout
            .notes
            .iter()
            .map(|note| Event { at: note.at, kind: EventKind::Note { text: note.text.clone() } });
        let is_due = |at: ArrayTime| at <= until && after.is_none_or(|after| at > after);
        let events = self.events.iter().filter(|event| is_due(event.at)).cloned();
        let mut entries: Vec<Event> = notes.filter(|note| is_due(note.at)).chain(events).collect();
        entries.sort_by_key(|entry| entry.at);
        entries
    }

    /// The row of a node.
    ///
    /// # Errors
    ///
    /// A name the layout does not have.
    pub fn row(&self, name: &str) -> Result<usize, RunFault> {
        let found = self.layout.nodes.iter().position(|node| node.name == name);
        found.ok_or_else(|| RunFault::UnknownNode { name: name.to_owned() })
    }

    /// The places of a node, by its row.
    #[must_use]
    pub fn place(&self, row: usize) -> Place {
        match self.moved.get(&row) {
            Some(moved) => moved.place.clone(),
            None => Place::new(self.layout.nodes[row].position_m),
        }
    }

    /// When a node was released, if it was.
    #[must_use]
    pub fn released(&self, row: usize) -> Option<ArrayTime> {
        self.moved.get(&row).and_then(|moved| moved.released)
    }

    /// Whether the link between two rows works at a moment, as far as events tell.
    #[must_use]
    pub fn link_state(&self, between: [usize; 2], at: ArrayTime) -> LinkState {
        let Some(changes) = self.links.get(&ordered(between)) else {
            return LinkState::Working;
        };
        let done = changes.partition_point(|(moment, _)| *moment <= at);
        changes[..done].last().map_or(LinkState::Working, |(_, state)| *state)
    }

    fn move_node(&mut self, at: ArrayTime, name: &str, position_m: f64) -> Result<(), RunFault> {
        let row = self.changeable_row(name)?;
        // A position of −0 is 0, as in a layout; NaN fails the comparison.
        let position_m = position_m + 0.0;
        if position_m.is_nan() || position_m.abs() > FARTHEST_POSITION_M {
            return Err(RunFault::OutsideLine { position_m });
        }
        match self.latest_loads() {
            Some(loads) => self.check_under(loads, self.plan(), at, row, position_m, true)?,
            None => self.check_position(self.plan(), at, row, position_m, true)?,
        }
        self.moved_entry(row).place.move_to(at, position_m);
        Ok(())
    }

    fn release(&mut self, at: ArrayTime, name: &str) -> Result<(), RunFault> {
        let row = self.changeable_row(name)?;
        self.moved_entry(row).released = Some(at);
        self.settle_released(at);
        Ok(())
    }

    fn moved_entry(&mut self, row: usize) -> &mut Moved {
        let position_m = self.layout.nodes[row].position_m;
        let unmoved =
            || Moved { place: Place::new(position_m), released: None, released_by_m: Dd::ZERO };
        self.moved.entry(row).or_insert_with(unmoved)
    }

    /// The row of a node that may be moved or released.
    fn changeable_row(&self, name: &str) -> Result<usize, RunFault> {
        let row = self.row(name)?;
        if row == self.layout.reference {
            return Err(RunFault::Reference { name: name.to_owned() });
        }
        match self.released(row) {
            Some(since) => Err(RunFault::Released { name: name.to_owned(), since }),
            None => Ok(row),
        }
    }

    fn change_link(
        &mut self,
        at: ArrayTime,
        between: &[String; 2],
        state: LinkState,
    ) -> Result<(), RunFault> {
        let rows = ordered([self.row(&between[0])?, self.row(&between[1])?]);
        let exists = if self.layout.links.is_empty() {
            rows[0] + 1 == rows[1]
        } else {
            self.layout.links.iter().any(|link| ordered(link.between) == rows)
        };
        if !exists {
            return Err(RunFault::UnknownLink { between: between.clone() });
        }
        if self.link_state(rows, at) == state {
            let failed = state == LinkState::Failed;
            return Err(RunFault::LinkUnchanged { between: between.clone(), failed });
        }
        self.links.entry(rows).or_default().push((at, state));
        Ok(())
    }

    /// A note is a line of a recording, whose length readers bound; a note that stands in
    /// the layout always passes.
    fn check_note(&self, text: &str) -> Result<(), RunFault> {
        let most = recording::LONGEST_NOTE.max(self.layout.source.text.len());
        if text.len() > most {
            return Err(RunFault::LongNote { most });
        }
        if text.chars().any(is_unsafe) { Err(RunFault::UnsafeNote) } else { Ok(()) }
    }
}

fn ordered([first, second]: [usize; 2]) -> [usize; 2] {
    [first.min(second), first.max(second)]
}
