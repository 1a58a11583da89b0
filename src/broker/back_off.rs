//! Pauses between attempts that double from attempt to attempt, up to a limit.

use std::time::Duration;

/// First pause.
const FIRST: Duration = Duration::from_millis(200);
/// Longest pause.
const LONGEST: Duration = Duration::from_secs(30);

/// How long to wait before the next attempt.
#[derive(Clone, Debug, Default)]
pub struct BackOff {
    /// Attempts since the last success.
    failures: u32,
}

impl BackOff {
    /// The pause after one more failure.
    pub fn next_pause(&mut self) -> Duration {
        let pause = FIRST
            .saturating_mul(2_u32.saturating_pow(self.failures))
            .min(LONGEST);
        self.failures = self.failures.saturating_add(1);
        pause
    }

    /// It worked: the next pause is short again.
    pub fn reset(&mut self) {
        self.failures = 0;
    }

    /// Attempts since the last success.
    #[must_use]
    pub fn failures(&self) -> u32 {
        self.failures
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn pauses_double_to_the_limit_and_start_again_after_a_success() {
        let mut back_off = BackOff::default();
        let pauses: Vec<u128> = (0..10).map(|_| back_off.next_pause().as_millis()).collect();
        assert_eq!(
            pauses,
            [
                200, 400, 800, 1600, 3200, 6400, 12_800, 25_600, 30_000, 30_000
            ]
        );
        back_off.failures = u32::MAX;
        assert_eq!(back_off.next_pause(), LONGEST);
        back_off.reset();
        assert_eq!(back_off.next_pause(), FIRST);
    }
}
