//! Limits notices in rate: of each kind about each subject one goes out, then none until a pause
//! has passed; the next one says how many were held back.

use crate::event::{Notice, Subject};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// The pause between two notices of one kind about one subject. Ten minutes: a flood stays readable
/// (six an hour) and the first of its kind is never delayed.
const PAUSE: Duration = Duration::from_seconds(600);

/// What was last said about what. Bounded by subjects times kinds.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(transparent)]
pub(crate) struct NoticeLimiter {
    said: Vec<Said>,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
struct Said {
    subject: Subject,
    code: String,
    last: Timestamp,
    held_back: u64,
}

impl NoticeLimiter {
    /// The notice to send, or `None` when it is held back; `text` is made only when it is sent.
    pub(crate) fn offer(
        &mut self,
        at: Timestamp,
        subject: Subject,
        code: &str,
        text: impl FnOnce() -> String,
    ) -> Option<Notice> {
        let place = self
            .said
            .binary_search_by(|said| (said.subject, said.code.as_str()).cmp(&(subject, code)));
        let held_back = match place {
            Ok(index) => {
                let said = &mut self.said[index];
                // A time before the last one comes from another clock (a recording after live
                // input): it says nothing about the pause, so the notice goes out.
                if at >= said.last && at.since(said.last) < PAUSE {
                    said.held_back += 1;
                    return None;
                }
                said.last = at;
                std::mem::take(&mut said.held_back)
            }
            Err(index) => {
                let first = Said {
                    subject,
                    code: code.to_owned(),
                    last: at,
                    held_back: 0,
                };
                self.said.insert(index, first);
                0
            }
        };
        Some(Notice {
            at,
            subject,
            code: code.to_owned(),
            text: text(),
            held_back,
        })
    }

    /// Moves what was said to the subject's new position; subjects that are gone are forgotten.
    pub(crate) fn renumber(&mut self, new: impl Fn(Subject) -> Option<Subject>) {
        self.said = std::mem::take(&mut self.said)
            .into_iter()
            .filter_map(|said| new(said.subject).map(|subject| Said { subject, ..said }))
            .collect();
        self.said
            .sort_by(|a, b| (a.subject, &a.code).cmp(&(b.subject, &b.code)));
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn offer(limiter: &mut NoticeLimiter, seconds: i64, code: &str) -> Option<u64> {
        let at = Timestamp::default_plus(seconds);
        limiter
            .offer(at, Subject::Node, code, String::new)
            .map(|notice| notice.held_back)
    }

    impl Timestamp {
        fn default_plus(seconds: i64) -> Self {
            Self(0).plus(Duration::from_seconds(seconds))
        }
    }

    #[test]
    fn a_flood_becomes_one_notice_per_pause_with_a_count() {
        let mut limiter = NoticeLimiter::default();
        assert_eq!(offer(&mut limiter, 0, "late"), Some(0));
        for second in 1..600 {
            assert_eq!(offer(&mut limiter, second, "late"), None);
        }
        assert_eq!(offer(&mut limiter, 600, "late"), Some(599));
        assert_eq!(offer(&mut limiter, 1200, "late"), Some(0));
    }

    #[test]
    fn kinds_do_not_hold_each_other_back() {
        let mut limiter = NoticeLimiter::default();
        assert_eq!(offer(&mut limiter, 0, "late"), Some(0));
        assert_eq!(offer(&mut limiter, 0, "duplicate"), Some(0));
    }

    #[test]
    fn a_clock_that_starts_again_does_not_silence_notices() {
        let mut limiter = NoticeLimiter::default();
        assert_eq!(offer(&mut limiter, 1_000_000, "late"), Some(0));
        assert_eq!(offer(&mut limiter, 10, "late"), Some(0));
        assert_eq!(offer(&mut limiter, 11, "late"), None);
    }
}
