//! Running: array time that goes with the wall clock.

use std::time::Duration;

use clockspar::model::array_time::{ATTOSECONDS_PER_SECOND, ArrayTime};
use clockspar::model::dd::Dd;

use super::message::{Effect, Notice, Wanted};
use super::state::{Desk, Running};

/// Ticks a second while running.
pub const TICKS_PER_SECOND: u32 = 4;
/// The most frames that are recorded in one tick, and the most values of nodes.
const MOST_FRAMES: usize = 500;
const MOST_VALUES: usize = 400_000;

impl Desk {
    /// Starts running from the present moment.
    pub(super) fn start_running(&mut self) {
        self.running = Some(Running { from: self.at, gone_ns: 0, is_behind: false });
    }

    /// Stops running. The moment it stops at is one of the recording: a change made there
    /// stands in it before the frame.
    pub(super) fn stop_running(&mut self, effects: &mut Vec<Effect>) {
        if self.running.take().is_some() && self.replay.is_none() {
            self.reach(self.at, effects);
        }
    }

    /// Goes on by some wall time.
    pub(super) fn run_for(&mut self, elapsed: Duration, effects: &mut Vec<Effect>) {
        let Some(running) = &mut self.running else { return };
        running.gone_ns = running.gone_ns.saturating_add(elapsed.as_nanos());
        let (from, gone_ns) = (running.from, running.gone_ns);
        let last = match &self.replay {
            Some(replay) => replay.last.unwrap_or(self.at),
            None => self.run.last_moment(),
        };
        let gone = i128::try_from(gone_ns).unwrap_or(i128::MAX);
        let ideal = ArrayTime::nearest(from.seconds() + Dd::from_i128(gone) * self.pace / 1.0e9)
            .unwrap_or(ArrayTime::LIMIT);
        let target = tidy(ideal, self.pace).min(last);
        if target > self.at {
            if self.replay.is_some() {
                self.read(Wanted::At(target), effects);
            } else {
                self.pass(target, effects);
            }
        }
        let has_come_to_end = self.replay.is_some() || self.at >= last;
        if target >= last && has_come_to_end {
            self.stop_running(effects);
            self.notice = Some(Notice::said(if self.replay.is_some() {
                "the end of the recording"
            } else {
                "the last moment of the run: it cannot go on"
            }));
        }
    }

    /// Passes on to a moment. What is recorded on the way are the multiples of the step
    /// and the ends of phases, all of them, however fast array time goes.
    fn pass(&mut self, target: ArrayTime, effects: &mut Vec<Effect>) {
        if self.recording.is_some() {
            let rows = self.layout().nodes.len().max(1);
            let most = (MOST_VALUES / rows).clamp(1, MOST_FRAMES);
            let mut passed = 0;
            while let Some(next) = self.next_recorded(self.at).filter(|next| *next <= target) {
                self.reach(next, effects);
                self.at = next;
                passed += 1;
                if passed == most {
                    // The rest has to wait: array time goes slower than asked for.
                    if let Some(running) = &mut self.running {
                        *running = Running { from: next, gone_ns: 0, is_behind: true };
                    }
                    return;
                }
            }
        }
        if let Some(running) = &mut self.running {
            running.is_behind = false;
        }
        self.at = target;
    }

    /// The next moment after another that running records.
    fn next_recorded(&self, at: ArrayTime) -> Option<ArrayTime> {
        let step = match self.step.of {
            // Multiples of the step from array time zero.
            None => {
                let done = at.attoseconds().div_euclid(self.step.length.attoseconds());
                ArrayTime::ZERO.stepped(self.step.length, done + 1)
            }
            Some(_) => {
                let since = self.recording.as_ref().map_or(at, |recording| recording.reached);
                self.step.from(&self.run, since, true).ok()
            }
        };
        let phase_end = self.phase_end_after(at);
        match (step, phase_end) {
            (Some(step), Some(end)) => Some(step.min(end)),
            (one, other) => one.or(other),
        }
    }
}

/// A moment rounded down to digits that read well at a pace: about as fine as what passes
/// between two frames, and no finer.
fn tidy(at: ArrayTime, pace: f64) -> ArrayTime {
    let between_frames = pace / f64::from(TICKS_PER_SECOND) / 8.0 * ATTOSECONDS_PER_SECOND as f64;
    let mut grain: i128 = 1;
    while (grain as f64) * 10.0 <= between_frames && grain < 10 * ATTOSECONDS_PER_SECOND {
        grain *= 10;
    }
    let count = at.attoseconds();
    ArrayTime::from_attoseconds(count - count.rem_euclid(grain))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn moments_are_as_fine_as_the_pace_asks_for() {
        let at = ArrayTime::from_attoseconds(1_234_567_890_123_456_789);
        assert_eq!(tidy(at, 60.0).to_string(), "1");
        assert_eq!(tidy(at, 1.0).to_string(), "1.23");
        assert_eq!(tidy(at, 1e-9).to_string(), "1.23456789012");
        let early = ArrayTime::from_attoseconds(-1_234_567_890_123_456_789);
        assert_eq!(tidy(early, 60.0).to_string(), "-2");
    }
}
