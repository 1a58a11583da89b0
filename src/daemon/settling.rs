//! After the start, time stands still for the engine until the broker has sent what it kept: a
//! tick before that would take a long stop of ours for a long silence of the sensors.

use std::time::Duration;
use tokio::time::Instant;

/// The longest wait; a broker that is away for longer is a silence too.
const LIMIT: Duration = Duration::from_secs(30);
/// A backlog is over when nothing came for this long.
const QUIET: Duration = Duration::from_secs(1);

/// Whether ticks have to wait.
pub(super) struct Settling {
    until: Instant,
    limit: Instant,
    over: bool,
}

impl Settling {
    pub(super) fn new(clock: Instant) -> Self {
        let limit = clock + LIMIT;
        Self {
            until: limit,
            limit,
            over: false,
        }
    }

    /// The broker accepted the connection, or a message came.
    pub(super) fn hear(&mut self, clock: Instant) {
        if !self.over {
            self.until = (clock + QUIET).min(self.limit);
        }
    }

    /// Whether a tick has to wait; once it has not, it never has again.
    pub(super) fn holds(&mut self, clock: Instant) -> bool {
        self.over |= clock >= self.until;
        !self.over
    }

    /// When ticks may come, as far as is known now.
    pub(super) fn until(&self) -> Instant {
        self.until
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_wait_for_a_quiet_second_but_not_for_ever() {
        let start = Instant::now();
        let mut settling = Settling::new(start);
        let mut clock = start + LIMIT / 2;
        assert!(settling.holds(clock), "no connection yet");
        for _ in 0..5 {
            settling.hear(clock);
            assert!(settling.holds(clock));
            clock += QUIET / 2;
            assert!(settling.holds(clock));
        }
        clock += QUIET;
        assert!(!settling.holds(clock));
        settling.hear(clock);
        assert!(!settling.holds(clock), "once is enough");

        let mut endless = Settling::new(start);
        let mut clock = start;
        while clock < start + LIMIT {
            endless.hear(clock);
            assert!(endless.holds(clock));
            clock += QUIET / 2;
        }
        assert!(!endless.holds(clock));
    }
}
