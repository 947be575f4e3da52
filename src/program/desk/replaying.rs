//! Replay: the desk over the frames and events of a recording.

use std::sync::Arc;

use clockspar::model::array_time::ArrayTime;
use clockspar::run::{Event, EventKind, Run};

use super::message::{Effect, Notice, Reading, Wanted};
use super::state::Desk;
use super::words;

impl Desk {
    /// Looks whether a recording without a closing line has grown. Whoever looks at its
    /// last frame is shown the new last one.
    pub(super) fn look_again(&mut self, effects: &mut Vec<Effect>) {
        let Some(replay) = &self.replay else { return };
        if !matches!(replay.condition, "cut" | "growing") || replay.is_reading {
            return;
        }
        let is_at_end = replay.last.is_none_or(|last| self.at >= last);
        self.read(if is_at_end { Wanted::Newest } else { Wanted::At(self.at) }, effects);
    }

    /// Takes in what was read of the recording.
    pub(super) fn take_reading(&mut self, reading: Reading) {
        let Some(replay) = &mut self.replay else { return };
        replay.is_reading = false;
        replay.last = reading.last;
        if !replay.is_damaged {
            (replay.condition, replay.particulars) = reading.condition;
        }
        if let Some(damage) = reading.damage {
            replay.is_damaged = true;
            (replay.condition, replay.particulars) = ("damaged", damage.clone());
            self.notice = Some(Notice::refused(
                damage,
                "a damaged line is not shown",
                "`clockspar verify` names every such line",
            ));
        }
        let Some(frame) = reading.frame else {
            self.running = None;
            if self.notice.is_none() {
                self.notice = Some(Notice::said("the recording holds no frame there"));
            }
            return;
        };
        let Some(replay) = &mut self.replay else { return };
        let frame_at = frame.at;
        self.at = frame_at;
        replay.known = replay.known.max(Some(frame_at));
        replay.frame = Some(frame);
        self.journal.extend(reading.events);
        self.fly_to(frame_at);
    }

    /// The events of the recording up to the moment shown, in order.
    pub(super) fn events_so_far(&self) -> &[Event] {
        let due = self.journal.partition_point(|event| event.at <= self.at);
        &self.journal[..due]
    }

    /// Flies the run with the events up to a frame and none of those after it: what is shown
    /// of a moment does not depend on what has been visited.
    fn fly_to(&mut self, at: ArrayTime) {
        let due = self.journal.partition_point(|event| event.at <= at);
        let Some(replay) = &mut self.replay else { return };
        let flown = std::mem::replace(&mut replay.flown, due);
        if due == flown {
            return;
        }
        let is_back = due < flown;
        if is_back && let Ok(run) = Run::new(Arc::clone(self.run.layout())) {
            self.run = run;
        }
        for event in &self.journal[if is_back { 0 } else { flown }..due] {
            // Notes do not act, and those of the layout are part of the run as it is.
            if !matches!(event.kind, EventKind::Note { .. })
                && let Err(fault) = self.run.apply(event.clone())
                && !is_back
            {
                self.notice = Some(fault.into());
            }
        }
        if !is_back && let Some(last) = self.journal[..due].last() {
            let others = due - flown - 1;
            let mut told = format!("{}: {}", words::time(last.at), words::event(&last.kind));
            if others > 0 {
                told = format!("{told}, and {others} before it; 9 lists them");
            }
            if self.notice.as_ref().is_none_or(|notice| notice.refusal.is_none()) {
                self.notice = Some(Notice::said(told));
            }
        }
        self.run_has_changed();
        // The last release, whatever came after it and however this moment was come to.
        self.reach_of = self.run.events().iter().rev().find_map(|event| match &event.kind {
            EventKind::Release { node } => self.run.row(node).ok(),
            _ => None,
        });
    }
}
