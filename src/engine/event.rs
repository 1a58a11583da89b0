//! `Input` and `Output`: everything the engine can be told and everything it can say.
//!
//! Both are closed sets: a new variant forces every `match` to be looked at. They derive serde so
//! that the record can store them; what is published outside is rendered from them by the shell.
//!
//! A received time must not go backwards from one input to the next; if one does, the engine goes
//! on with its own now.

use crate::setup::{ChannelId, ReferenceId, Setup};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// One thing the engine is told.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Input {
    /// A configuration takes effect. Channels keep their state, by name, if their pairs and rows
    /// mean the same as before (unit, lag, fit; the reference's name, kind, interval and members),
    /// and go on under whatever else was edited; the others start anew. What is said in return
    /// bears the positions of the configuration that is replaced.
    Setup(Box<Setup>),
    /// A value arrived.
    Reading(Reading),
    /// A `valid_when` condition was told.
    Gate(Gate),
    /// The shell got something it could not turn into a reading; counted here so that the record
    /// knows.
    Refused(Refused),
    /// Time passed.
    Tick {
        /// The clock's reading.
        now: Timestamp,
    },
    /// Recorded rows that the engine asked for with [`Output::Wanted`].
    Supplied(Supplied),
}

/// Whose value a reading is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Source {
    /// A channel's indication.
    Indication(ChannelId),
    /// A reference's value.
    Reference(ReferenceId),
}

/// A value with its times. Every number is finite.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Reading {
    /// Whose value.
    pub source: Source,
    /// When the daemon got it.
    pub received: Timestamp,
    /// When it was sampled; the received time if the payload told none.
    pub phenomenon: Timestamp,
    /// The value, in the channel's unit.
    pub value: f64,
    /// The sender's running number, where configured; part of what makes a duplicate.
    pub sequence: Option<i64>,
    /// The sender's own status field says that the value is not to be used.
    pub excluded: bool,
}

/// A `valid_when` condition for a gated constant reference.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Gate {
    /// Which reference.
    pub reference: ReferenceId,
    /// When the daemon got it.
    pub received: Timestamp,
    /// From when on it holds.
    pub phenomenon: Timestamp,
    /// Whether the reference value holds from then on.
    pub open: bool,
}

/// Something the shell could not turn into a reading.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Refused {
    /// When the daemon got it.
    pub received: Timestamp,
    /// The topic it came on.
    pub topic: String,
    /// Whose value it would have been, where the topic tells.
    pub source: Option<Source>,
    /// Why.
    pub reason: RefusedReason,
    /// What a person needs to find the fault: the pointer, the first bytes, the value.
    pub detail: String,
}

/// Why something that came in was not used. Each has a counter.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum RefusedReason {
    /// The topic matches a subscription but no channel, reference or gate.
    UnknownTopic,
    /// Nothing in the payload.
    Empty,
    /// Larger than the limit.
    Oversize,
    /// Neither JSON, SenML nor a number, or not UTF-8.
    Unreadable,
    /// A configured pointer or record name leads nowhere.
    Missing,
    /// The pointer leads to something of another type.
    WrongType,
    /// Not a number that can be held: NaN, infinite, 1e400.
    NotFinite,
    /// The time can't be read.
    BadTime,
    /// A retained message: the broker's memory, not a new value.
    Retained,
    /// Before 1970.
    NegativeTime,
    /// Further ahead of now than clocks may differ.
    Future,
    /// Later than the channel's lateness allows.
    Late,
    /// The same value for the same instant came before.
    Duplicate,
    /// The sender's status says that it is not to be used.
    StatusExcluded,
    /// Outside the sensor's range.
    OutOfRange,
    /// Too far from what the fit expects.
    InnovationGate,
    /// No indication near enough in time to pair with.
    NoPartner,
    /// Fewer than three other members of the group had a value.
    GroupTooSmall,
}

/// What every refusal is about, what every alarm and notice is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Subject {
    /// The whole node.
    Node,
    /// A channel.
    Channel(ChannelId),
    /// A reference.
    Reference(ReferenceId),
}

/// Rows from the record, given back: the answer to one [`Output::Wanted`]. The shell answers each
/// once, with whatever the record holds (maybe nothing), and before the next [`Input::Setup`].
///
/// They serve the reading on whose behalf they were asked for, however late they are, and nothing
/// else: time does not move, and what was refused when it first came is passed over.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Supplied {
    /// Whose rows.
    pub channel: ChannelId,
    /// As it was wanted: from (inclusive).
    pub from: Timestamp,
    /// As it was wanted: to (exclusive).
    pub to: Timestamp,
    /// The readings, in the order in which they were first taken.
    pub readings: Vec<Reading>,
}

/// One thing the engine says.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Output {
    /// A new correction is in force.
    Correction(Box<Correction>),
    /// The channel's correction no longer holds; the retained document is to be cleared.
    Withdrawn {
        /// Which channel.
        channel: ChannelId,
        /// When.
        at: Timestamp,
        /// Why, in words.
        why: String,
    },
    /// A corrected value (only where configured).
    Corrected(Corrected),
    /// An alarm changed its state.
    Alarm(AlarmChange),
    /// The announced degree changed, with the evidence.
    Degree(Box<DegreeChange>),
    /// A pair was made, and this became of it.
    Pair(PairFate),
    /// Something that a person should be able to read about; limited in rate, with a count of what
    /// was held back.
    Notice(Notice),
    /// The engine needs recorded rows of this channel.
    Wanted {
        /// Whose rows.
        channel: ChannelId,
        /// From (inclusive).
        from: Timestamp,
        /// To (exclusive).
        to: Timestamp,
    },
}

/// A correction: c(t) = −ê(t) as a polynomial with its uncertainty (VIM 2.53; sign as in VIM 2.16).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Correction {
    /// Which channel.
    pub channel: ChannelId,
    /// Counts the channel's documents from 1.
    pub issue_number: u64,
    /// When it was issued (now, not phenomenon time).
    pub issued: Timestamp,
    /// From when on it holds.
    pub valid_from: Timestamp,
    /// Until when it holds.
    pub valid_until: Timestamp,
    /// Zero of the polynomial's time.
    pub origin: Timestamp,
    /// The announced degree.
    pub degree: u8,
    /// Weight of each degree 0 … maximum in the mean; they sum to 1.
    pub weights: Vec<f64>,
    /// Coefficients of c(t), constant first, t in days from `origin`.
    pub zero: Vec<f64>,
    /// Whether the dead zone suppresses the correction: then `zero` is all zeros and |ĉ| is inside
    /// U.
    pub suppressed: bool,
    /// c at the newest pair.
    pub correction: f64,
    /// Standard uncertainty of the corrected value's systematic part at the newest pair.
    pub standard_uncertainty: f64,
    /// k.
    pub coverage_factor: f64,
    /// U = k·u (and |ĉ| while suppressed).
    pub expanded_uncertainty: f64,
    /// Effective degrees of freedom behind k.
    pub degrees_of_freedom: f64,
    /// Covariance of `zero` (row by row, unit² per day^(i+j)), of the fit alone.
    pub covariance: Vec<Vec<f64>>,
    /// Where the uncorrected error stands against the maximum permissible error; `None` without
    /// one.
    pub zone: Option<Zone>,
    /// The same for the corrected value.
    pub corrected_zone: Option<Zone>,
    /// What the fit looked at.
    pub window: WindowSeen,
    /// The criterion per degree.
    pub criterion: CriterionValues,
    /// Residual standard deviation of the largest model.
    pub residual_sd: f64,
    /// Counts the channel's stretches from 1.
    pub stretch: u32,
    /// Lowest and highest reference value in the stretch.
    pub range: (f64, f64),
}

/// What a fit looked at.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct WindowSeen {
    /// Oldest pair.
    pub from: Timestamp,
    /// Newest pair.
    pub to: Timestamp,
    /// Pairs.
    pub pairs: u64,
    /// Closed segments.
    pub segments: u32,
    /// `n_eff`, from the closed segments and their lag-1 correlation.
    pub effective_sample_size: f64,
    /// r₁, the lag-1 correlation of the segments' residuals.
    pub lag_one: f64,
}

/// The criterion of each degree; empty until it can be judged.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CriterionValues {
    /// `BIC` or `AICc`.
    pub name: String,
    /// Per degree 0 … maximum.
    pub values: Vec<f64>,
}

/// Where ê ± U stands against the maximum permissible error (ILAC-G8:09/2019, 4.2.3).
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Zone {
    /// |e| + U ≤ MPE.
    Pass,
    /// |e| ≤ MPE < |e| + U.
    ConditionalPass,
    /// |e| − U ≤ MPE < |e|.
    ConditionalFail,
    /// |e| − U > MPE.
    Fail,
}

/// An indication with the correction in force applied.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Corrected {
    /// Which channel.
    pub channel: ChannelId,
    /// The indication's phenomenon time.
    pub phenomenon: Timestamp,
    /// The indication as it came.
    pub indication: f64,
    /// The correction added.
    pub correction: f64,
    /// indication + correction.
    pub corrected: f64,
    /// Its expanded uncertainty.
    pub expanded_uncertainty: f64,
    /// The correction's issue number.
    pub issue_number: u64,
}

/// What an alarm is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum AlarmKind {
    /// The uncorrected error is in conditional fail or fail.
    ErrorLimit,
    /// The drift is faster than permitted.
    DriftRate,
    /// No reference value for too long.
    ReferenceStale,
    /// No indication for too long.
    DataGap,
    /// The screen rejected so many in a row that it stopped: a step or a bad reference.
    ScreenLockedOut,
}

/// The states of an alarm. A later version adds acknowledgement, latching, shelving and suppression
/// here.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum AlarmState {
    /// The condition does not hold.
    Normal,
    /// The condition holds and nobody has acknowledged it.
    Unacknowledged,
}

/// An alarm changed its state.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct AlarmChange {
    /// What it stands on.
    pub subject: Subject,
    /// Its kind.
    pub kind: AlarmKind,
    /// The new state.
    pub state: AlarmState,
    /// When the engine changed it.
    pub at: Timestamp,
    /// When the condition first held (or first was gone).
    pub since: Timestamp,
    /// The value that was judged; unit as `unit` says.
    pub value: f64,
    /// The limit that it was judged against.
    pub limit: f64,
    /// Unit of both.
    pub unit: String,
    /// One sentence for a technician: what, how much, what to do.
    pub text: String,
}

/// The announced degree changed.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct DegreeChange {
    /// Which channel.
    pub channel: ChannelId,
    /// When the engine changed it.
    pub at: Timestamp,
    /// Degree before.
    pub from: u8,
    /// Degree after.
    pub to: u8,
    /// The numbers that decided it.
    pub evidence: Evidence,
}

/// The numbers that decided a degree.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Evidence {
    /// The criterion per degree.
    pub criterion: CriterionValues,
    /// By how much the higher degree is better; the least of those in the run that decided.
    pub gain: f64,
    /// What the gain was judged by, in words: the configured criterion, or in a small sample more.
    pub judged_by: String,
    /// How much was needed.
    pub needed: f64,
    /// For how many segments in a row it held.
    pub held_segments: u32,
    /// For how many it had to hold.
    pub needed_segments: u32,
    /// Closed segments judged.
    pub segments: u32,
    /// `n_eff`.
    pub effective_sample_size: f64,
    /// r₁.
    pub lag_one: f64,
    /// Weighted residual sum of squares per degree, of the between-segments problem.
    pub rss: Vec<f64>,
}

/// A pair and its fate.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PairFate {
    /// Which channel.
    pub channel: ChannelId,
    /// The pair's phenomenon time.
    pub phenomenon: Timestamp,
    /// Mean or interpolated indication.
    pub indication: f64,
    /// Reference value.
    pub reference: f64,
    /// `None`: entered the fit. Otherwise what kept it out.
    pub rejected: Option<Rejection>,
}

/// What kept a pair out of the fit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Rejection {
    /// The test.
    pub reason: RefusedReason,
    /// The value it looked at.
    pub value: f64,
    /// The threshold it failed.
    pub threshold: f64,
}

/// Something that a person should be able to read about.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Notice {
    /// When.
    pub at: Timestamp,
    /// About what.
    pub subject: Subject,
    /// A short fixed word for machines, e.g. `unknown-topic`.
    pub code: String,
    /// One sentence for people.
    pub text: String,
    /// How many of the same kind were held back since the last one.
    pub held_back: u64,
}
