//! Wrong clocks: whether a time that makes now leap is believed, and how now gets back after it was
//! wrong.
//!
//! *Recordings.* A reading further ahead of now than anything here looks back on
//! ([`Routes::reach`]) is refused as `Future` until another one confirms it: one of another source
//! within that reach of it, or, where no other source says anything in between, the second of its
//! own source (the 16th where several sources are expected, so that one wrong clock does not
//! confirm itself). So a real gap costs a reading or a few, counted, and a wrong stamp moves
//! nothing. The first reading of all has nothing to be measured by and is believed.
//!
//! *Live.* Now is moved by the host's clock. When ten inputs in a row bear received times more than
//! 5 min behind now, that clock was wrong: now steps back to the last of them, and what was stamped
//! later than that is given up. A channel with such a pair in its fit starts anew.
//!
//! What is counted here changes with refused inputs, so it stands beside the counters, not in the
//! state. Of refused inputs only the one that makes now step back changes more, and only if it was
//! refused as late (behind the false times).

use super::Fleet;
use super::door::CLOCKS_DIFFER;
use crate::event::{RefusedReason, Source, Subject};
use crate::gate::GateHistory;
use crate::report::Report;
use crate::setup::{ChannelId, Clock};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// Readings in a row that confirm a leap of the only source …
const OF_THE_ONLY_SOURCE: u32 = 2;
/// … and of one of several.
const OF_ONE_SOURCE: u32 = 16;
/// Received times in a row, behind now, that make now step back.
const BEHIND_IN_A_ROW: u32 = 10;

/// What speaks against now.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct LeapWatch {
    doubted: Option<Doubted>,
    /// Received times in a row far behind now.
    behind: u32,
}

/// A leap that was refused.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Doubted {
    source: Source,
    phenomenon: Timestamp,
    /// Readings of this source in a row that leap.
    times: u32,
}

impl LeapWatch {
    /// A reading leaps: whether it is confirmed by what leapt before it.
    fn confirms(
        &mut self,
        source: Source,
        phenomenon: Timestamp,
        reach: Duration,
        needed: u32,
    ) -> bool {
        let Some(doubted) = &mut self.doubted else {
            self.doubted = Some(Doubted {
                source,
                phenomenon,
                times: 1,
            });
            return false;
        };
        let apart = phenomenon.since(doubted.phenomenon);
        if doubted.source != source {
            if apart.0.saturating_abs() <= reach.0 {
                return true;
            }
            *doubted = Doubted {
                source,
                phenomenon,
                times: 1,
            };
        } else if apart != Duration::ZERO {
            doubted.phenomenon = phenomenon;
            doubted.times = doubted.times.saturating_add(1);
        }
        doubted.times >= needed
    }

    /// Something was taken in: what leapt before it stands alone.
    pub(crate) fn settle(&mut self) {
        self.doubted = None;
    }

    /// A received time: whether now has to step back to it.
    fn is_behind(&mut self, received: Timestamp, now: Option<Timestamp>) -> bool {
        if now.is_none_or(|now| now.since(received) <= CLOCKS_DIFFER) {
            self.behind = 0;
            return false;
        }
        self.behind += 1;
        if self.behind < BEHIND_IN_A_ROW {
            return false;
        }
        self.behind = 0;
        true
    }
}

impl Fleet {
    /// Lets something in through `admit`, which is told whether a leap is believed.
    pub(super) fn admit_watching(
        &mut self,
        source: Source,
        phenomenon: Timestamp,
        received: Timestamp,
        report: &mut Report<'_>,
        admit: impl Fn(&Self, bool) -> Result<Timestamp, RefusedReason>,
    ) -> Result<Timestamp, RefusedReason> {
        let mut admitted = admit(self, false);
        let live = self.setup.clock == Clock::Live;
        let timely = matches!(admitted, Ok(_) | Err(RefusedReason::Late));
        if live && timely && self.watch_clock(received, report) {
            admitted = admit(self, false);
        }
        if !live && admitted == Err(RefusedReason::Future) {
            let leapt = admit(self, true);
            if leapt.is_ok() && self.is_confirmed(source, phenomenon, report) {
                admitted = leapt;
            }
        }
        if admitted.is_ok() {
            report.leaps.settle();
        }
        admitted
    }

    fn is_confirmed(&self, source: Source, phenomenon: Timestamp, report: &mut Report<'_>) -> bool {
        let needed = if self.routes.several_sources {
            OF_ONE_SOURCE
        } else {
            OF_THE_ONLY_SOURCE
        };
        let reach = self.routes.reach;
        report.leaps.confirms(source, phenomenon, reach, needed)
    }

    /// Live: takes note of a received time. Whether now stepped back.
    pub(super) fn watch_clock(&mut self, received: Timestamp, report: &mut Report<'_>) -> bool {
        let steps = report.leaps.is_behind(received, self.now);
        if steps {
            self.step_back(received, report);
        }
        steps
    }

    fn step_back(&mut self, to: Timestamp, report: &mut Report<'_>) {
        let from = self.now.unwrap_or(to);
        report.notice(to, Subject::Node, "clock-fault", || {
            format!(
                "the host's clock went back from {from} to {to}; what was stamped later is given \
                 up, channels with such pairs start anew; look at the host's time service"
            )
        });
        self.settle_references(report);
        let edge = to.plus(CLOCKS_DIFFER);
        self.now = Some(to);
        self.pulse.step_back(to);
        for track in self.indications.iter_mut().chain(&mut self.influences) {
            track.forget_after(edge);
        }
        for reference in &mut self.references {
            reference.values.forget_after(edge);
            if reference.gate.newest() > Some(edge) {
                reference.gate = GateHistory::default();
            }
            reference.began = reference.began.map(|began| began.min(to));
        }
        for (id, setup) in (0..).zip(&self.setup.channels) {
            let channel = &mut self.channels[id as usize];
            if channel.knows_after(edge) {
                let why = "the host's clock was wrong while the last pairs came";
                channel.dismiss(ChannelId(id), setup, to, why, report);
                **channel = channel.anew(setup, true);
            } else {
                channel.step_back(ChannelId(id), setup, to, report);
            }
        }
        self.schedule_all();
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const REACH: Duration = Duration(100);

    fn of(channel: u32) -> Source {
        Source::Indication(ChannelId(channel))
    }

    #[test]
    fn another_source_confirms_if_it_leaps_to_the_same_time() {
        let mut watch = LeapWatch::default();
        assert!(!watch.confirms(of(0), Timestamp(1000), REACH, 16));
        assert!(!watch.confirms(of(1), Timestamp(2000), REACH, 16));
        assert!(!watch.confirms(of(0), Timestamp(1000), REACH, 16));
        assert!(watch.confirms(of(1), Timestamp(1050), REACH, 16));
    }

    #[test]
    fn the_same_source_needs_as_many_different_times_in_a_row() {
        let mut watch = LeapWatch::default();
        for _ in 0..5 {
            assert!(!watch.confirms(of(0), Timestamp(1000), REACH, 2));
        }
        watch.settle();
        assert!(!watch.confirms(of(0), Timestamp(1001), REACH, 2));
        assert!(watch.confirms(of(0), Timestamp(1002), REACH, 2));
    }

    #[test]
    fn only_received_times_in_a_row_speak_against_now() {
        let mut watch = LeapWatch::default();
        let now = Some(Timestamp(0).plus(CLOCKS_DIFFER).plus(Duration(1)));
        for round in 0..3 {
            for _ in 1..BEHIND_IN_A_ROW {
                assert!(!watch.is_behind(Timestamp(0), now), "{round}");
            }
            assert!(!watch.is_behind(Timestamp(1), now), "{round}");
        }
        let behind = (0..BEHIND_IN_A_ROW).map(|_| watch.is_behind(Timestamp(0), now));
        assert_eq!(behind.filter(|step| *step).count(), 1);
    }
}
