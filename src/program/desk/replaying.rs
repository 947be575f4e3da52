//! Replay: the desk over the frames and events of a recording.

use clockspar::run::{Event, EventKind};

use super::message::{Effect, Notice, Reading, Wanted};
use super::state::Desk;
use super::words;

impl Desk {
    /// Looks whether a recording without a closing line has grown. Whoever looks at its
    /// last frame is shown the new last one.
    pub(super) fn look_again(&mut self, effects: &mut Vec<Effect>) {
        let Some(replay) = &self.replay else { return };
        if replay.condition != "cut" || replay.is_reading {
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
                "a line that does not agree with its CRC is not shown",
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
        self.at = frame.at;
        replay.known = replay.known.max(Some(frame.at));
        replay.frame = Some(frame);
        self.take_events(reading.events);
    }

    /// Events that the frame shown has come past.
    fn take_events(&mut self, events: Vec<Event>) {
        let Some(last) = events.last() else { return };
        let others = events.len() - 1;
        let mut told = format!("{}: {}", words::time(last.at), words::event(&last.kind));
        if others > 0 {
            told = format!("{told}, and {others} before it; 9 lists them");
        }
        self.notice = Some(Notice::said(told));
        for event in events {
            // Notes do not act, and those of the layout are part of the run as it is.
            if !matches!(event.kind, EventKind::Note { .. })
                && let Err(fault) = self.run.apply(event.clone())
            {
                self.notice = Some(fault.into());
            }
            self.journal.push(event);
        }
        self.run_has_changed();
    }
}
