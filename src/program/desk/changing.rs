//! Doing sentences: what-if, undo, recording, saving.

use std::sync::Arc;

use clockspar::model::array_time::ArrayTime;
use clockspar::run::{Event, EventKind, Run, RunFault};

use super::launch_chart::Frame;
use super::message::{Effect, Notice, Wanted};
use super::saving::{self, AsFlown};
use super::sentences::{Sentence, Shift};
use super::state::{Cursor, Desk, Question, Recording};
use super::views::VIEWS;
use super::words;

impl Desk {
    /// Does a sentence, or asks first when it would end a recording or take later changes
    /// back.
    pub(super) fn perform(&mut self, sentence: Sentence, effects: &mut Vec<Effect>) {
        if let Some(notice) = self.refused_in_replay(&sentence) {
            self.notice = Some(notice);
            return;
        }
        match sentence {
            Sentence::To(at) => {
                self.stop_running(effects);
                self.go_to(at, effects);
            }
            Sentence::Step(step) => {
                let told = words::step(step, self.layout());
                self.step = step;
                self.notice = Some(Notice::said(format!("a step is {told}")));
            }
            Sentence::Against(row) => self.show_against(row),
            Sentence::Chart(shift) => self.move_chart(shift),
            Sentence::ReachOf(row) => self.show_reach_of(row),
            Sentence::Pace(pace) => {
                if self.running.is_some() {
                    self.start_running();
                }
                self.pace = pace;
                self.notice = Some(Notice::said(format!(
                    "the pace is {} of array time per second",
                    words::pace(pace)
                )));
            }
            Sentence::RecordTo(path) => self.record_to(path, effects),
            Sentence::RecordClose => match self.recording {
                Some(_) => self.close_recording(effects),
                None => {
                    self.notice = Some(Notice::refused(
                        "nothing is being recorded",
                        "only a recording can be closed",
                        "`record to FILE` begins one",
                    ));
                }
            },
            Sentence::SaveAs(path) => self.save_as(path, effects),
            Sentence::Change(_) | Sentence::Undo => self.change_or_ask(sentence, effects),
        }
    }

    /// Does what has been asked about and answered with yes.
    pub(super) fn perform_for_certain(&mut self, sentence: Sentence, effects: &mut Vec<Effect>) {
        match self.changed_run(&sentence) {
            Ok(change) => self.take_change(change, effects),
            Err(notice) => self.notice = Some(notice),
        }
    }

    /// A recording is not changed, only looked at.
    fn refused_in_replay(&self, sentence: &Sentence) -> Option<Notice> {
        self.replay.as_ref()?;
        let (what, remedy) = match sentence {
            Sentence::Change(_) | Sentence::Undo => (
                "a recording cannot be changed",
                "`save as FILE` here, then `clockspar desk FILE` for what-if",
            ),
            Sentence::RecordTo(_) | Sentence::RecordClose => (
                "a recording is being replayed",
                "`save as FILE` here, then record from `clockspar desk FILE`",
            ),
            Sentence::Step(_) => (
                "a recording has the steps it was made with",
                "Left and Right go from frame to frame, `to MOMENT` to any of them",
            ),
            _ => return None,
        };
        Some(Notice::refused(what, "a replay shows what was recorded, and nothing else", remedy))
    }

    fn show_against(&mut self, row: Option<usize>) {
        let is_gone =
            |row: usize| self.state().is_some_and(|state| state.node(row).aboard().is_none());
        if let Some(row) = row.filter(|row| is_gone(*row)) {
            self.notice = Some(Notice::refused(
                format!("`{}` is released", self.layout().nodes[row].name),
                "rates and clock offsets are against a node of the line",
                "the name of another node",
            ));
            return;
        }
        self.against = row.filter(|row| *row != self.layout().reference);
        let name = match self.against {
            Some(row) => format!("`{}`", self.layout().nodes[row].name),
            None => "the reference".to_owned(),
        };
        self.notice = Some(Notice::said(format!("rates and clock offsets are against {name}")));
    }

    fn move_chart(&mut self, shift: Shift) {
        if self.view().beside.is_none() {
            self.notice = Some(Notice::refused(
                format!("the view `{}` has no chart of the launch frame", self.view().name),
                "links and reach have one",
                "press 3 or 4 first",
            ));
            return;
        }
        self.chart = match shift {
            Shift::Zoom(by) => self.chart.zoomed(by),
            Shift::All => Frame::default(),
            Shift::Fore(fore_m) => self.chart.panned(fore_m, 0.0),
            Shift::Later(later_s) => self.chart.panned(0.0, later_s),
        };
    }

    fn show_reach_of(&mut self, row: Option<usize>) {
        if row == Some(self.layout().reference) {
            let name = self.layout().nodes[self.layout().reference].name.to_string();
            self.notice = Some(RunFault::Reference { name }.into());
            return;
        }
        self.reach_of = row;
        let place = VIEWS.iter().position(|view| view.name == "reach");
        self.view = place.unwrap_or(self.view);
        *self.cursor_mut() = Cursor::default();
    }

    /// Applies a change, unless it has to be asked about.
    fn change_or_ask(&mut self, sentence: Sentence, effects: &mut Vec<Effect>) {
        let was_running = self.running.is_some();
        self.stop_running(effects);
        let change = match self.changed_run(&sentence) {
            Ok(mut change) => {
                if was_running {
                    change.told.push_str("; running has stopped");
                }
                change
            }
            Err(notice) => {
                self.notice = Some(notice);
                return;
            }
        };
        let mut consequences = Vec::new();
        if change.taken_back > 0 {
            let those = if change.taken_back == 1 { "change" } else { "changes" };
            consequences.push(format!("takes back {} later {those}", change.taken_back));
        }
        if let Some(recording) = self.recording_ended_by(&change) {
            consequences.push(format!("closes {} and goes on in a new file", recording.path));
        }
        if consequences.is_empty() {
            return self.take_change(change, effects);
        }
        let text = format!("this {}: yes or no?", consequences.join(" and "));
        self.notice = None;
        self.question = Some(Question { text, then: sentence });
    }

    /// The recording that a change ends: one that has already gone past its moment, though
    /// the frame it has come to may not be written yet.
    fn recording_ended_by(&self, change: &Change) -> Option<&Recording> {
        let recording = self.recording.as_ref()?;
        let is_past = recording.reached > change.from || recording.written >= Some(change.from);
        is_past.then_some(recording)
    }

    /// The run as a sentence would have it; the run itself stays as it is.
    fn changed_run(&self, sentence: &Sentence) -> Result<Change, Notice> {
        match sentence {
            Sentence::Undo => {
                let mut run = self.run.clone();
                let Some(undone) = run.undo()? else {
                    return Err(Notice::refused(
                        "there is nothing to take back",
                        "`undo` takes back what-if and notes made at this desk",
                        "edit the layout for what stands in it",
                    ));
                };
                let told = format!("taken back: {}", words::event(&undone.kind));
                Ok(Change { run, from: undone.at, taken_back: 0, told })
            }
            Sentence::Change(kind) => self.run_with(kind),
            _ => Err(Notice::said("nothing to change")),
        }
    }

    /// The run with one more event at the present moment. A note is put in between; any
    /// other change takes back the changes that come later, which were made to a run that
    /// would no longer be there.
    fn run_with(&self, kind: &EventKind) -> Result<Change, Notice> {
        let at = self.at;
        let event = Event { at, kind: kind.clone() };
        let later =
            self.run.events().len() - self.run.events().partition_point(|event| event.at <= at);
        let told = words::event(kind);
        if later == 0 {
            let mut run = self.run.clone();
            run.apply(event)?;
            return Ok(Change { run, from: at, taken_back: 0, told });
        }
        let (kept, after) = self.run.events().split_at(self.run.events().len() - later);
        let mut run = replayed(&self.run, kept)?;
        run.apply(event)?;
        if !matches!(kind, EventKind::Note { .. }) {
            return Ok(Change { run, from: at, taken_back: later, told });
        }
        for event in after {
            run.apply(event.clone())?;
        }
        Ok(Change { run, from: at, taken_back: 0, told })
    }

    /// Makes the changed run the run.
    fn take_change(&mut self, change: Change, effects: &mut Vec<Effect>) {
        let ended = self.recording_ended_by(&change).map(|recording| recording.path.clone());
        if let Some(path) = &ended {
            self.end_recording(effects);
            effects.push(Effect::NextRecording { after: path.clone() });
        }
        self.run = change.run;
        self.at = self.at.min(self.run.last_moment());
        self.run_has_changed();
        self.notice = Some(Notice::said(change.told));
        match (&mut self.recording, ended) {
            // What was reached but not written yet belonged to the run before.
            (Some(recording), _) => {
                let reached = recording.reached.min(self.at);
                recording.reached = recording.written.map_or(reached, |at| at.max(reached));
            }
            (None, Some(path)) => self.recording = Some(self.new_recording(path)),
            (None, None) => {}
        }
    }

    fn new_recording(&self, path: String) -> Recording {
        Recording { path, reached: self.at, written: None, frames: 0 }
    }

    fn record_to(&mut self, path: String, effects: &mut Vec<Effect>) {
        if let Some(recording) = &self.recording {
            self.notice = Some(Notice::refused(
                format!("{} is being recorded already", recording.path),
                "one recording is made at a time",
                "`record close` first",
            ));
            return;
        }
        self.stop_running(effects);
        self.failed = None;
        effects.push(Effect::OpenRecording { path: path.clone() });
        self.recording = Some(self.new_recording(path));
    }

    /// Notes that array time has come to a moment: when it passes the last one that is to
    /// be recorded, the frame of that one is written.
    pub(super) fn reach(&mut self, at: ArrayTime, effects: &mut Vec<Effect>) {
        let Some(recording) = &mut self.recording else { return };
        if at > recording.reached {
            if recording.is_waiting() {
                effects.push(Effect::Frame { at: recording.reached });
                recording.written = Some(recording.reached);
                recording.frames += 1;
            }
            recording.reached = at;
        }
    }

    /// Closes the recording, if there is one.
    pub(super) fn close_recording(&mut self, effects: &mut Vec<Effect>) {
        if let Some(recording) = &self.recording {
            self.notice = Some(Notice::said(format!("{} is closed", recording.path)));
            self.end_recording(effects);
        }
    }

    fn end_recording(&mut self, effects: &mut Vec<Effect>) {
        if let Some(recording) = self.recording.take() {
            effects.push(Effect::CloseRecording {
                run: Box::new(self.run.clone()),
                last: recording.is_waiting().then_some(recording.reached),
            });
        }
    }

    fn save_as(&mut self, path: String, effects: &mut Vec<Effect>) {
        match saving::layout_as_flown(self) {
            Ok(AsFlown { text, left_out }) => effects.push(Effect::Save { path, text, left_out }),
            Err(notice) => self.notice = Some(notice),
        }
    }

    /// Asks for a frame of the recording that is replayed.
    pub(super) fn read(&mut self, wanted: Wanted, effects: &mut Vec<Effect>) {
        if let Some(replay) = &mut self.replay {
            replay.is_reading = true;
            effects.push(Effect::Read { wanted, known: replay.known });
        }
    }
}

/// A change of the run that has been worked out and is not in force yet.
struct Change {
    run: Run,
    /// The moment from which the run differs.
    from: ArrayTime,
    /// How many later changes it takes back.
    taken_back: usize,
    /// What to say about it.
    told: String,
}

/// A run with only these of its events.
fn replayed(run: &Run, events: &[Event]) -> Result<Run, RunFault> {
    let mut earlier = Run::new(Arc::clone(run.layout()))?;
    for event in events {
        earlier.apply(event.clone())?;
    }
    Ok(earlier)
}
