//! The desk: everything it remembers, and what the views ask of it.

use clockspar::layout::{Course, Layout};
use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording;
use clockspar::run::{Event, EventKind, Run, State};

use crate::program::moments::default_moment;
use crate::program::terminal::Glyphs;

use super::entry::Entry;
use super::geometry::Geometry;
use super::keys::Focus;
use super::launch_chart::Frame;
use super::message::{Made, Notice};
use super::sentences::{Sentence, end_of_plan};
use super::step::Step;
use super::views::{VIEWS, View};

/// Array seconds per second of running, to begin with.
const FIRST_PACE: f64 = 60.0;

/// Everything the desk remembers.
#[derive(Clone, Debug)]
pub struct Desk {
    /// The run that is shown; a recording that is replayed has one as well.
    pub run: Run,
    /// Notes of the layout and events, in order of time.
    pub journal: Vec<Event>,
    /// The present moment.
    pub at: ArrayTime,
    /// How far Left and Right go.
    pub step: Step,
    /// The row of the node that rates and offsets are shown against.
    pub against: Option<usize>,
    /// Array seconds per second of running.
    pub pace: f64,
    /// Set while array time runs.
    pub running: Option<Running>,
    /// Place of the view in [`VIEWS`].
    pub view: usize,
    /// Where keys go.
    pub focus: Focus,
    /// Where the focus was before the entry.
    pub focus_before: Focus,
    /// The chosen node.
    pub nodes: Cursor,
    /// The chosen row of each view whose rows are not the nodes.
    pub lists: [Cursor; VIEWS.len()],
    /// The part of the launch frame that is drawn.
    pub chart: Frame,
    /// The row of the node whose release the reach view shows, instead of the stations.
    pub reach_of: Option<usize>,
    /// The entry line.
    pub entry: Entry,
    /// What the message line says.
    pub notice: Option<Notice>,
    /// What is to be done when the answer is yes.
    pub question: Option<Question>,
    /// The recording that is being made.
    pub recording: Option<Recording>,
    /// What became of recordings that were closed.
    pub made: Vec<Made>,
    /// A recording that could not be written on, until another one is begun.
    pub failed: Option<String>,
    /// The recording that is replayed.
    pub replay: Option<Replay>,
    /// The thrust plan as the chart needs it.
    pub plan_shape: PlanShape,
    /// The marks to draw with.
    pub glyphs: &'static Glyphs,
    /// Columns and rows of the area to draw on.
    pub size: (u16, u16),
}

/// Array time that runs with the wall clock.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Running {
    /// The moment it ran from.
    pub from: ArrayTime,
    /// Wall time since then, ns.
    pub gone_ns: u128,
    /// Recording every step takes longer than the pace allows.
    pub is_behind: bool,
}

/// A chosen row and the first row of the window it is seen in.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Cursor {
    /// The chosen row.
    pub row: usize,
    /// The first row in view.
    pub top: usize,
}

impl Cursor {
    /// The first row of a window of so many rows that holds the chosen one, moved as
    /// little as possible.
    pub fn window(&self, rows: usize, visible: usize) -> usize {
        let last_top = rows.saturating_sub(visible);
        let lowest = (self.row + 1).saturating_sub(visible);
        self.top.min(self.row).max(lowest).min(last_top)
    }
}

/// A question that waits for `yes` or `no`.
#[derive(Clone, Debug, PartialEq)]
pub struct Question {
    /// The question.
    pub text: String,
    /// What to do on `yes`.
    pub then: Sentence,
}

/// A recording that is being made.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Recording {
    /// The name of its file.
    pub path: String,
    /// The highest moment reached. Its frame is written when it is left: an event that is
    /// still to come at this moment stands before the frame.
    pub reached: ArrayTime,
    /// The moment of the last frame written.
    pub written: Option<ArrayTime>,
    /// Frames written.
    pub frames: u64,
}

impl Recording {
    /// Whether the frame of the highest moment reached is still to be written.
    pub fn is_waiting(&self) -> bool {
        self.written < Some(self.reached)
    }
}

/// A recording that is replayed.
#[derive(Clone, Debug)]
pub struct Replay {
    /// The name of its file.
    pub path: String,
    /// The frame that is shown.
    pub frame: Option<recording::Frame>,
    /// `closed`, `cut`, `growing` or `damaged`.
    pub condition: &'static str,
    /// The particulars.
    pub particulars: String,
    /// Whether damage has been met.
    pub is_damaged: bool,
    /// The moment up to which events are known.
    pub known: Option<ArrayTime>,
    /// How many of them the run shown has flown with.
    pub flown: usize,
    /// The moment of its last line.
    pub last: Option<ArrayTime>,
    /// A frame has been asked for and is not there yet.
    pub is_reading: bool,
}

/// The thrust plan as the chart needs it, found once for each change of the run.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct PlanShape {
    /// Largest acceleration, m/s².
    pub largest_m_s2: f64,
    /// Smallest acceleration, m/s².
    pub smallest_m_s2: f64,
    /// The end of what is drawn, unless the present moment lies after it.
    pub until: ArrayTime,
    /// The last phase is a hold for good.
    pub is_open: bool,
}

impl PlanShape {
    fn of(run: &Run) -> PlanShape {
        let Some(plan) = run.plan() else { return PlanShape::default() };
        let changes_thrust = |event: &&Event| {
            matches!(event.kind, EventKind::Hold { .. } | EventKind::Ramp { .. } | EventKind::Plan)
        };
        let last_change = run.events().iter().rev().find(changes_thrust);
        let is_open = last_change.is_some_and(|event| event.kind != EventKind::Plan);
        let mut shape = PlanShape { is_open, until: plan.end(), ..PlanShape::default() };
        if is_open && let Some(last) = plan.phases().last() {
            // A hold for good is drawn as long as what came before it, or as the plan.
            let start = last.start.attoseconds();
            let shown = ArrayTime::from_attoseconds(start + start / 3);
            shape.until = shown.max(end_of_plan(run.layout())).min(last.end);
        }
        for phase in plan.phases() {
            for at in [phase.start, phase.end] {
                let here = phase.acceleration(at).to_f64();
                shape.largest_m_s2 = shape.largest_m_s2.max(here);
                shape.smallest_m_s2 = shape.smallest_m_s2.min(here);
            }
        }
        shape
    }
}

impl Desk {
    /// The desk on a run.
    pub fn new(run: Run, glyphs: &'static Glyphs) -> Desk {
        let layout = run.layout().clone();
        let reference = layout.reference;
        let mut desk = Desk {
            journal: Vec::new(),
            at: default_moment(&layout),
            step: Step::for_plan(end_of_plan(&layout)),
            against: None,
            pace: FIRST_PACE,
            running: None,
            view: 0,
            focus: Focus::Table,
            focus_before: Focus::Table,
            nodes: Cursor { row: reference, top: 0 },
            lists: [Cursor::default(); VIEWS.len()],
            chart: Frame::default(),
            reach_of: None,
            entry: Entry::default(),
            notice: None,
            question: None,
            recording: None,
            made: Vec::new(),
            failed: None,
            replay: None,
            plan_shape: PlanShape::default(),
            glyphs,
            size: (80, 24),
            run,
        };
        desk.run_has_changed();
        desk
    }

    /// The desk on a recording, before its first frame has been read.
    pub fn on_recording(run: Run, path: String, glyphs: &'static Glyphs) -> Desk {
        let mut desk = Desk::new(run, glyphs);
        desk.journal.clear();
        desk.replay = Some(Replay {
            path,
            frame: None,
            condition: "cut",
            particulars: String::new(),
            is_damaged: false,
            known: None,
            flown: 0,
            last: None,
            is_reading: false,
        });
        desk
    }

    /// Finds again what is kept about the run.
    pub fn run_has_changed(&mut self) {
        // A node that has just been let go is what the reach view is wanted for.
        self.reach_of = match self.run.events().last().map(|event| &event.kind) {
            Some(EventKind::Release { node }) => self.run.row(node).ok(),
            Some(_) => self.reach_of,
            None => None,
        };
        self.plan_shape = PlanShape::of(&self.run);
        // The journal of a replay is what the recording holds.
        if self.replay.is_none() {
            self.journal = self.run.journal(None, ArrayTime::LIMIT);
        }
    }

    /// The layout.
    pub fn layout(&self) -> &Layout {
        self.run.layout()
    }

    /// The line at the present moment.
    pub fn state(&self) -> Option<State<'_>> {
        self.run.state_at(self.at).ok()
    }

    /// The view.
    pub fn view(&self) -> &'static View {
        VIEWS[self.view]
    }

    /// What has to stand under the table of the view.
    pub fn note(&self) -> Option<String> {
        self.view().note.and_then(|note| note(self))
    }

    /// The cursor of the view.
    pub fn cursor(&self) -> Cursor {
        if self.view().nodes { self.nodes } else { self.lists[self.view] }
    }

    /// The same, to be moved.
    pub fn cursor_mut(&mut self) -> &mut Cursor {
        if self.view().nodes { &mut self.nodes } else { &mut self.lists[self.view] }
    }

    /// How many rows the view has.
    pub fn rows(&self) -> usize {
        if self.view().nodes {
            return self.layout().nodes.len();
        }
        self.view().table.and_then(|table| table(self)).map_or(0, |table| table.rows)
    }

    /// How many of them are seen at once.
    pub fn visible_rows(&self) -> usize {
        usize::from(Geometry::of(self.size.0, self.size.1, self).visible_rows())
    }

    /// Whether anything but notes has been changed in the run.
    pub fn is_what_if(&self) -> bool {
        let is_change = |event: &Event| !matches!(event.kind, EventKind::Note { .. });
        self.replay.is_none() && self.run.events().iter().any(is_change)
    }

    /// What the line is doing, in a word.
    pub fn doing(&self) -> &'static str {
        if matches!(self.layout().course, Course::Standing(_)) {
            return "standing";
        }
        let instant = self.run.instant_at(self.at.min(self.run.last_moment()));
        let phase = instant.moment.phase.and_then(|index| self.run.plan()?.phases().get(index));
        match phase {
            Some(phase) if !phase.is_hold() => "ramping",
            _ if instant.moment.acceleration_m_s2.is_zero() => "coasting",
            _ => "holding",
        }
    }

    /// The end of the first phase that ends after a moment.
    pub fn phase_end_after(&self, at: ArrayTime) -> Option<ArrayTime> {
        let phases = self.run.plan()?.phases();
        if at < ArrayTime::ZERO && !phases.is_empty() {
            return Some(ArrayTime::ZERO);
        }
        let next = phases.partition_point(|phase| phase.end <= at);
        let is_last = next + 1 == phases.len();
        phases.get(next).filter(|_| !(is_last && self.plan_shape.is_open)).map(|phase| phase.end)
    }

    /// The last phase end, or the start of the plan, before a moment.
    pub fn phase_end_before(&self, at: ArrayTime) -> Option<ArrayTime> {
        let phases = self.run.plan()?.phases();
        let next = phases.partition_point(|phase| phase.end < at);
        if next > 0 {
            return Some(phases[next - 1].end);
        }
        (!phases.is_empty() && at > ArrayTime::ZERO).then_some(ArrayTime::ZERO)
    }
}
