//! How often frames may be drawn.

use std::time::{Duration, Instant};

/// Keeps frames a least time apart; a frame after a longer rest is due at once.
#[derive(Debug, Clone)]
pub struct FramePace {
    apart: Duration,
    last: Option<Instant>,
}

impl FramePace {
    /// At most this many frames a second, at least one.
    pub fn per_second(frames: u32) -> Self {
        FramePace { apart: Duration::from_secs(1) / frames.max(1), last: None }
    }

    /// How long the next frame must still wait; zero when it may be drawn.
    pub fn wait(&self, now: Instant) -> Duration {
        self.last.map_or(Duration::ZERO, |last| {
            self.apart.saturating_sub(now.saturating_duration_since(last))
        })
    }

    /// Notes that a frame has been drawn.
    pub fn drawn(&mut self, now: Instant) {
        self.last = Some(now);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn frames_keep_their_distance_and_the_first_does_not_wait() {
        let start = Instant::now();
        let later = |milliseconds| start + Duration::from_millis(milliseconds);
        let mut pace = FramePace::per_second(10);
        assert_eq!(pace.wait(start), Duration::ZERO);
        pace.drawn(start);
        assert_eq!(pace.wait(later(30)), Duration::from_millis(70));
        assert_eq!(pace.wait(later(100)), Duration::ZERO);
        assert_eq!(pace.wait(later(5000)), Duration::ZERO);
        // A clock that seems to run backwards only makes the frame wait.
        pace.drawn(later(200));
        assert_eq!(pace.wait(later(150)), Duration::from_millis(100));
    }
}
