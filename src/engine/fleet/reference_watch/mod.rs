//! A reference that several channels share is judged by them before they are judged by it.
//!
//! Each channel that has a fit says of each pair how far it lies from what it expected (a vote),
//! and the pair waits. Votes are gathered in rounds; a round in which nothing is remarkable lets
//! its pairs go on to the channels' own stations.
//!
//! ```text
//!     in common far off, or repeated         again, or stuck
//!   Trusted ──────────────────▶ Doubted ─────────────────────▶ Suspect
//!           ◀──────────────────                                   │
//!            fits again: an outlier's pairs are kept out          │
//!           ◀─────────────────────────────────────────────────────┘
//!            three rounds in a row agree, somebody says that it is right, or nobody can judge
//!            it any more
//! ```
//!
//! While doubted, pairs wait; while suspect, none enters a fit. One that is stuck stays suspect
//! until its value varies: a process that passes the repeated value agrees with it by chance. What
//! all channels have in common besides the reference (one supply, one bumped pipe) cannot be told
//! from it, and is said of it.

mod chart;
mod round;
mod stuck;

use crate::event::Cause;
use crate::time::{Duration, Timestamp};
use chart::{Chart, Said};
pub(crate) use round::QUORUM;
use round::{Round, Tally};
use serde::{Deserialize, Serialize};
use stuck::Repetition;

/// An outlier of the reference: a round so many scales off, while those about it fit.
const OUTLIER: f64 = 4.0;
/// A suspect reference agrees again within so many scales …
const AGREES: f64 = 3.0;
/// … in so many rounds in a row.
const AGREE_AGAIN: usize = 3;
/// Most rounds that wait in doubt; the oldest of more is let go.
const WAITING: usize = 16;
/// Values of a suspect reference without a round that could judge them (twice as many as rounds may
/// wait), after which nobody is left to speak against it.
const UNHEARD: u32 = 32;

/// How far a pair lies from what its channel expected.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Vote {
    /// The reference's instant.
    pub(crate) time: Timestamp,
    /// Error minus expected error, in the channel's unit.
    pub(crate) innovation: f64,
    /// Its standard deviation, > 0.
    pub(crate) sd: f64,
    /// What the sensor showed.
    pub(crate) indication: f64,
}

/// What becomes of the pairs of a round.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Ruling {
    /// The round's number.
    pub(crate) round: u64,
    /// `None`: they go on. Else the size of the common shift that keeps them out, and the limit it
    /// exceeds, in the channels' unit.
    pub(crate) struck: Option<(f64, f64)>,
}

/// A reference came under suspicion, or is trusted again.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Turn {
    /// Under suspicion since this instant; `None`: trusted again.
    pub(super) since: Option<Timestamp>,
    /// Why it is, or was.
    pub(super) cause: Cause,
    /// The channels' common shift, in their unit.
    pub(super) shift: f64,
    /// The limit that it exceeds (or not), in their unit.
    pub(super) limit: f64,
    /// Channels that voted.
    pub(super) channels: usize,
    /// Equal values in a row.
    pub(super) run: u32,
}

/// What is known about whether a reference is right.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct ReferenceWatch {
    round: Round,
    /// Number of the round in progress.
    number: u64,
    /// Votes in the last round, stragglers included.
    expected: usize,
    /// The newest instant that a closed round voted about.
    closed_through: Option<Timestamp>,
    /// What kept the pairs of the last decided round out, if anything did.
    last_struck: Option<(f64, f64)>,
    chart: Chart,
    repetition: Repetition,
    trust: Trust,
    /// Values since the last round that could be judged, while suspect.
    unheard: u32,
    /// Rounds that wait, in order: in doubt, or agreeing again.
    waiting: Vec<Closed>,
    rulings: Vec<Ruling>,
    turns: Vec<Turn>,
}

/// See the diagram above; what is doubted has rounds waiting.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
enum Trust {
    #[default]
    Trusted,
    Suspect {
        cause: Cause,
    },
}

/// A closed round that waits.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Closed {
    number: u64,
    /// `None`: too few voted to say.
    score: Option<f64>,
    /// The score in scales.
    size: f64,
    shift: f64,
    limit: f64,
    from: Timestamp,
}

impl ReferenceWatch {
    /// Why the reference is not trusted, if it is not.
    pub(super) fn trouble(&self) -> Option<Cause> {
        match self.trust {
            Trust::Trusted => None,
            Trust::Suspect { cause } => Some(cause),
        }
    }

    /// When the round in progress ends at the latest.
    pub(super) fn deadline(&self) -> Option<Timestamp> {
        self.round.deadline
    }

    /// What has been decided since the last call: turns first, then what becomes of the pairs.
    pub(super) fn decided(&mut self) -> (Vec<Turn>, Vec<Ruling>) {
        (
            std::mem::take(&mut self.turns),
            std::mem::take(&mut self.rulings),
        )
    }

    /// Whether anything has been decided since.
    pub(super) fn has_decided(&self) -> bool {
        !(self.turns.is_empty() && self.rulings.is_empty())
    }

    /// A value of the reference came. Channels that have lost their fits cannot vote: a suspicion
    /// that nobody is left to end ends by itself, and the channels begin to learn again.
    pub(super) fn take_value(&mut self, time: Timestamp, value: f64) {
        self.repetition.take(time, value);
        if self.trouble().is_some() && !self.still_stuck() {
            self.unheard = self.unheard.saturating_add(1);
            if self.unheard > UNHEARD {
                self.strike_waiting();
                self.recover();
            }
        }
    }

    /// A channel's vote; the number of the round that its pair waits for.
    pub(super) fn hear(
        &mut self,
        channel: u32,
        vote: Vote,
        now: Timestamp,
        patience: Duration,
    ) -> u64 {
        let straggles = self.closed_through.is_some_and(|time| vote.time <= time);
        let votes_again = self.round.votes.contains_key(&channel);
        if straggles && !votes_again {
            return self.take_straggler();
        }
        if votes_again {
            self.close();
        }
        let number = self.number;
        self.round.take(channel, vote, now, patience);
        let awaited = if self.expected == 0 {
            QUORUM
        } else {
            self.expected
        };
        if self.round.votes.len() >= awaited {
            self.close();
        }
        number
    }

    /// Time passed: the round in progress may be over.
    pub(super) fn pass_time(&mut self, now: Timestamp) {
        if self.round.deadline.is_some_and(|deadline| now >= deadline) {
            self.close();
        }
    }

    /// Everything that waits is decided on as things stand: nobody may wait for what is to come.
    pub(super) fn settle(&mut self) {
        self.close();
        match self.trust {
            Trust::Trusted => self.let_go(),
            Trust::Suspect { .. } => self.strike_waiting(),
        }
        self.chart.settle();
        self.repetition = Repetition::default();
        self.expected = 0;
        // Times may be about to step back: what was decided of later ones says nothing.
        self.closed_through = None;
        self.last_struck = None;
    }

    /// Somebody answers for the reference: it is trusted from now on.
    pub(super) fn trust(&mut self) {
        self.close();
        self.strike_waiting();
        self.recover();
    }

    /// A vote about what the last round has already decided.
    fn take_straggler(&mut self) -> u64 {
        let last = self.number.saturating_sub(1);
        self.expected += 1;
        let waits = self
            .waiting
            .last()
            .is_some_and(|round| round.number == last);
        if !waits {
            self.rule(last, self.last_struck);
        }
        last
    }

    /// The round in progress is complete, or as complete as it will be.
    fn close(&mut self) {
        let round = std::mem::take(&mut self.round);
        let Some(tally) = round.tally() else { return };
        let number = self.number;
        self.number += 1;
        self.expected = tally.channels;
        self.closed_through = self.closed_through.max(Some(tally.to));
        if tally.channels < QUORUM {
            self.close_unjudged(number, &tally);
            return;
        }
        let scale = self.chart.scale(tally.channels);
        let closed = Closed {
            number,
            score: Some(tally.score),
            size: tally.score.abs() / scale,
            shift: tally.shift,
            limit: AGREES * scale * tally.sd,
            from: tally.from,
        };
        let stuck = self.repetition.judge(&round.votes);
        match self.trust {
            Trust::Trusted => self.judge(closed, tally.score, stuck, tally.channels),
            Trust::Suspect { .. } => self.judge_suspect(closed, stuck.is_some()),
        }
    }

    /// Too few voted for a judgement: their pairs go the way that the last ones went.
    fn close_unjudged(&mut self, number: u64, tally: &Tally) {
        match self.trust {
            Trust::Trusted if self.waiting.is_empty() => self.rule(number, None),
            Trust::Trusted => self.wait(Closed {
                number,
                score: None,
                size: 0.0,
                shift: 0.0,
                limit: 0.0,
                from: tally.from,
            }),
            Trust::Suspect { .. } => {
                self.rule(number, Some((tally.shift.abs(), 0.0)));
            }
        }
    }

    fn judge(&mut self, closed: Closed, score: f64, stuck: Option<Timestamp>, channels: usize) {
        let may_drift = !self.repetition.is_odd();
        let said = self.chart.judge(closed.number, score, channels, may_drift);
        self.wait(closed);
        let stepped = match said {
            Said::Stepped(began) => {
                let first = self.waiting.iter().find(|round| round.number >= began);
                Some(first.map_or(closed.from, |round| round.from))
            }
            Said::Calm | Said::Doubt => None,
        };
        if stuck.is_none() && stepped.is_none() {
            // A reference that repeats itself oddly may have begun to stick.
            if said == Said::Calm && !self.repetition.is_odd() {
                self.let_go();
            }
            return;
        }
        let stands = stuck.is_some() || self.repetition.is_odd();
        let cause = if stands {
            Cause::ReferenceStuck
        } else {
            Cause::ReferenceStep
        };
        self.turns.push(Turn {
            since: stuck.or(stepped),
            cause,
            shift: closed.shift,
            limit: closed.limit,
            channels,
            run: self.repetition.run(),
        });
        self.strike_waiting();
        self.trust = Trust::Suspect { cause };
    }

    fn judge_suspect(&mut self, closed: Closed, stuck: bool) {
        self.unheard = 0;
        self.wait(closed);
        if stuck || self.still_stuck() || closed.size > AGREES {
            self.strike_waiting();
        } else if self.waiting.len() >= AGREE_AGAIN {
            self.let_go();
            self.recover();
        }
    }

    /// Whether it is suspect because it repeats one value, and still does.
    fn still_stuck(&self) -> bool {
        self.trouble() == Some(Cause::ReferenceStuck) && self.repetition.is_odd()
    }

    /// Trusted again.
    fn recover(&mut self) {
        if let Trust::Suspect { cause } = self.trust {
            self.turns.push(Turn {
                since: None,
                cause,
                shift: 0.0,
                limit: 0.0,
                channels: self.expected,
                run: self.repetition.run(),
            });
        }
        self.trust = Trust::Trusted;
        self.unheard = 0;
        self.chart.settle();
    }

    fn wait(&mut self, closed: Closed) {
        self.waiting.push(closed);
        if self.waiting.len() > WAITING {
            let oldest = self.waiting.remove(0);
            self.rule(oldest.number, None);
        }
    }

    /// Lets the waiting rounds go on, but for outliers.
    fn let_go(&mut self) {
        for round in std::mem::take(&mut self.waiting) {
            let is_outlier = round.size > OUTLIER;
            let struck = is_outlier.then_some((round.shift.abs(), round.limit));
            if let Some(score) = round.score.filter(|_| !is_outlier) {
                self.chart.learn(score);
            }
            self.rule(round.number, struck);
        }
    }

    fn strike_waiting(&mut self) {
        for round in std::mem::take(&mut self.waiting) {
            let struck = Some((round.shift.abs(), round.limit));
            self.rule(round.number, struck);
        }
    }

    fn rule(&mut self, round: u64, struck: Option<(f64, f64)>) {
        self.last_struck = struck;
        self.rulings.push(Ruling { round, struck });
    }
}
