//! The fail-safe ladder: whether a correction is kept up to date, held, taken back, or not there at
//! all. It is the only place that decides about that; publishing only carries it out.
//!
//! ```text
//!             first correction               trouble
//!   Raw only ─────────────────▶ Advise ─────────────────────▶ Hold
//!                                ▲  │ ◀──────────────────────  │
//!                  trouble gone, │  │       trouble gone       │ held as long as permitted
//!                  a new one     │  │                          │
//!                                │  └──────▶ Withdrawn ◀───────┘
//!                                │             │  no pair for as long as the fit reaches, or
//!                                └─────────────┘  trouble while there is nothing to hold
//! ```
//!
//! Trouble is whatever makes the newest correction doubtful: its reference, a screen that is locked
//! out, a correction too large or too fast ([`Cause`]). While it lasts the last correction stands,
//! its uncertainty growing with that of the drift rate.

use super::conditions::beyond;
use super::judgement::Judgement;
use super::limits::Bounds;
use super::{Channel, Scene};
use crate::alarm::Condition;
use crate::event::{Cause, Output, Rung};
use crate::report::Report;
use crate::setup::{ChannelId, ChannelSetup};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// Where a channel stands.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(super) enum Ladder {
    /// No correction was ever issued, or none may be.
    RawOnly {
        /// The gravest reason of now.
        because: Cause,
    },
    /// Corrections are kept up to date.
    Advise,
    /// The last one stands.
    Hold {
        /// From when on.
        since: Timestamp,
        /// The gravest reason of now.
        because: Cause,
    },
    /// It was taken back.
    Withdrawn {
        /// The gravest reason of now, or of then if none is left.
        because: Cause,
    },
}

/// How long a correction has been held without a pair that would have renewed it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Unrenewed {
    /// Since when.
    since: Timestamp,
    /// How long it may be.
    until: Timestamp,
    /// The newest pair that it rests on.
    newest: Timestamp,
}

impl Ladder {
    /// Where a channel begins.
    pub(super) fn new(setup: &ChannelSetup) -> Self {
        Self::RawOnly {
            because: if setup.monitor_only {
                Cause::MonitorOnly
            } else {
                Cause::NothingLearned
            },
        }
    }

    /// The rung.
    pub(super) fn rung(self) -> Rung {
        match self {
            Self::RawOnly { .. } => Rung::RawOnly,
            Self::Advise => Rung::Advise,
            Self::Hold { .. } => Rung::Hold,
            Self::Withdrawn { .. } => Rung::Withdrawn,
        }
    }

    /// Why it is not the first one.
    pub(super) fn because(self) -> Option<Cause> {
        match self {
            Self::Advise => None,
            Self::RawOnly { because }
            | Self::Hold { because, .. }
            | Self::Withdrawn { because } => Some(because),
        }
    }

    /// Trouble stands at `now`, with or without a correction in force that could be held for
    /// `limit`; `unrenewed`: since when it was held before, if no pair has come since.
    fn suffer(
        self,
        because: Cause,
        in_force: bool,
        (now, unrenewed): (Timestamp, Option<Timestamp>),
        limit: Duration,
    ) -> Self {
        let since = match self {
            Self::RawOnly { .. } if !in_force => return Self::RawOnly { because },
            Self::Hold { since, .. } => since,
            Self::RawOnly { .. } | Self::Advise | Self::Withdrawn { .. } => {
                unrenewed.unwrap_or(now)
            }
        };
        if in_force && now < since.plus(limit) {
            Self::Hold { since, because }
        } else {
            Self::Withdrawn { because }
        }
    }

    /// No trouble stands.
    fn recover(self, in_force: bool) -> Self {
        match self {
            _ if in_force => Self::Advise,
            Self::Advise | Self::Hold { .. } => Self::Withdrawn {
                because: Cause::NotRenewed,
            },
            Self::RawOnly { .. } => Self::RawOnly {
                because: Cause::NothingLearned,
            },
            Self::Withdrawn { .. } => self,
        }
    }

    /// The correction in force was dropped for a reason that is no trouble; a new one may follow.
    pub(super) fn drop_correction(&mut self) {
        *self = Self::Withdrawn {
            because: Cause::NotRenewed,
        };
    }

    /// Now was wrong and steps back.
    pub(super) fn step_back(&mut self, to: Timestamp) {
        if let Self::Hold { since, .. } = self {
            *since = (*since).min(to);
        }
    }
}

impl Channel {
    /// Moves the channel to the rung where it belongs, and carries out what follows for its
    /// correction. `judgement`: what its fit means now; `None` while it means nothing.
    pub(super) fn climb(
        &mut self,
        judgement: Option<&Judgement>,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        if scene.setup.monitor_only {
            self.ladder = Ladder::new(scene.setup);
            return;
        }
        // What rests on an earlier stretch is not held: whoever ended that stretch takes it back.
        let present = self.rests_on_present_stretch();
        if let Some(because) = self.trouble(judgement, scene) {
            let in_force = present && self.publishing.correction().is_some();
            let limit = self.publishing.hold_limit(scene.setup);
            let newest = self.publishing.correction().map(|held| held.window.to);
            let before = self.unrenewed.filter(|held| newest <= Some(held.newest));
            let times = (scene.now, before.map(|held| held.since));
            self.ladder = self.ladder.suffer(because, in_force, times, limit);
            match self.ladder {
                Ladder::Hold { since, because } => {
                    let until = since.plus(limit);
                    self.unrenewed = newest.map(|newest| Unrenewed {
                        since,
                        until,
                        newest,
                    });
                    self.publishing.hold(until, because, scene, report);
                }
                _ if present => self.take_back(because, scene, report),
                _ => {}
            }
            return;
        }
        if let Some(judgement) = judgement
            && !self.is_spent(judgement, scene.now)
        {
            let stretch = self.stretch.number();
            self.publishing.consider(judgement, stretch, scene, report);
        }
        if self.publishing.has_expired(scene.now) {
            self.take_back(Cause::NotRenewed, scene, report);
        }
        let in_force = self.publishing.correction().is_some();
        self.ladder = self
            .ladder
            .recover(in_force && self.rests_on_present_stretch());
    }

    /// Whether what the fit says was held as long as permitted, and no pair has come since.
    fn is_spent(&self, judgement: &Judgement, now: Timestamp) -> bool {
        let newest = judgement.published.window.to;
        self.unrenewed
            .is_some_and(|held| held.until <= now && newest <= held.newest)
    }

    /// Rows were taken back out of the fit: what is held from now on is to rest on the others.
    pub(super) fn renew(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        if self.ladder != Ladder::Advise {
            return;
        }
        if let Some(judgement) = self.judgement(scene, report) {
            let stretch = self.stretch.number();
            self.publishing.consider(&judgement, stretch, scene, report);
        }
    }

    /// Takes the correction in force back, if there is one.
    fn take_back(&mut self, because: Cause, scene: &Scene<'_>, report: &mut Report<'_>) {
        let why = why(because, &scene.reference.name);
        self.withdraw(&why, scene, report);
    }

    /// Takes the correction in force back, if there is one, and says why.
    pub(super) fn withdraw(&mut self, why: &str, scene: &Scene<'_>, report: &mut Report<'_>) {
        if self.publishing.forget() {
            tell_withdrawn(scene.id, scene.setup, scene.now, why, report);
        }
    }

    /// The gravest trouble that stands.
    fn trouble(&self, judgement: Option<&Judgement>, scene: &Scene<'_>) -> Option<Cause> {
        let locked_out = self
            .stretch
            .is_locked_out()
            .then_some(Cause::ScreenLockedOut);
        let bounds = Bounds::of(scene.setup);
        let size = judgement.and_then(|judgement| {
            let deadband = scene.setup.alarms.deadband * judgement.u;
            self.past(
                Cause::CorrectionSize,
                judgement.error,
                bounds.size?,
                deadband,
            )
        });
        let rate = judgement.and_then(|judgement| {
            let deadband = scene.setup.alarms.deadband * judgement.slope_u;
            self.past(
                Cause::CorrectionRate,
                judgement.slope,
                bounds.rate?,
                deadband,
            )
        });
        let refits = self.refit.is_some().then_some(Cause::Quarantined);
        scene.trouble.or(refits).or(locked_out).or(size).or(rate)
    }

    /// Whether a value is past its limit, or was and is not yet clear of it by the deadband.
    fn past(&self, cause: Cause, value: f64, limit: f64, deadband: f64) -> Option<Cause> {
        let stands = match beyond(value, limit, deadband) {
            Condition::Holds => true,
            Condition::Between => self.ladder.because() == Some(cause),
            Condition::Gone => false,
        };
        stands.then_some(cause)
    }
}

/// Says that a channel's correction was taken back.
pub(super) fn tell_withdrawn(
    channel: ChannelId,
    setup: &ChannelSetup,
    at: Timestamp,
    why: &str,
    report: &mut Report<'_>,
) {
    report.say(Output::Withdrawn {
        channel,
        at,
        why: format!("{}: {why}", setup.name),
    });
}

/// Why a correction was taken back, and what to do.
fn why(because: Cause, reference: &str) -> String {
    match because {
        Cause::ReferenceStep | Cause::ReferenceStuck => format!(
            "the correction was held as long as permitted and reference {reference} is still not \
             to be trusted; look at the reference"
        ),
        Cause::ReferenceStale => format!(
            "the correction was held as long as permitted and reference {reference} still gives \
             no value; look at the reference and its link"
        ),
        Cause::Quarantined => {
            "the correction was held as long as permitted and what it rests on is still quarantined"
                .to_owned()
        }
        Cause::ScreenLockedOut => format!(
            "the readings do not fit what was learned; look at the sensor and at reference \
             {reference}"
        ),
        Cause::CorrectionSize => {
            "the correction would be larger than permitted; service or recalibrate the sensor"
                .to_owned()
        }
        Cause::CorrectionRate => {
            "the correction would change faster than permitted; look at the sensor".to_owned()
        }
        Cause::NotRenewed | Cause::NothingLearned | Cause::StretchEnded | Cause::MonitorOnly => {
            format!(
                "the correction expired and no new pair has come to renew it; look at reference \
             {reference}"
            )
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::channel::testing::channel_setup;

    const LIMIT: Duration = Duration(100);
    const STALE: Cause = Cause::ReferenceStale;

    #[test]
    fn a_correction_is_held_for_as_long_as_permitted_and_no_longer() {
        let held = Ladder::Advise.suffer(STALE, true, (Timestamp(10), None), LIMIT);
        let since = Timestamp(10);
        assert_eq!(
            held,
            Ladder::Hold {
                since,
                because: STALE
            }
        );
        // Another reason does not start the time anew.
        let because = Cause::ReferenceStep;
        let still = held.suffer(because, true, (Timestamp(109), None), LIMIT);
        assert_eq!(still, Ladder::Hold { since, because });
        let ended = still.suffer(STALE, true, (Timestamp(110), None), LIMIT);
        assert_eq!(ended, Ladder::Withdrawn { because: STALE });
        // Trouble that goes on does not climb; only a new correction does.
        let later = ended.suffer(STALE, false, (Timestamp(500), None), LIMIT);
        assert_eq!(later.rung(), Rung::Withdrawn);
        assert_eq!(later.recover(false), later);
        assert_eq!(later.recover(true), Ladder::Advise);
    }

    #[test]
    fn without_a_correction_there_is_nothing_to_hold() {
        let fresh = Ladder::new(&channel_setup());
        assert_eq!(fresh.because(), Some(Cause::NothingLearned));
        let raw = fresh.suffer(STALE, false, (Timestamp(10), None), LIMIT);
        assert_eq!((raw.rung(), raw.because()), (Rung::RawOnly, Some(STALE)));
        assert_eq!(raw.recover(false), fresh);
        let fallen = Ladder::Advise.suffer(STALE, false, (Timestamp(10), None), LIMIT);
        assert_eq!(fallen, Ladder::Withdrawn { because: STALE });
        assert_eq!(
            Ladder::Advise.recover(false).because(),
            Some(Cause::NotRenewed)
        );
    }

    #[test]
    fn a_clock_that_steps_back_does_not_prolong_the_hold() {
        let mut held = Ladder::Advise.suffer(STALE, true, (Timestamp(1000), None), LIMIT);
        held.step_back(Timestamp(50));
        let ended = held.suffer(STALE, true, (Timestamp(150), None), LIMIT);
        assert_eq!(ended.rung(), Rung::Withdrawn);
    }
}
