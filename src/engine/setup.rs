//! The configuration as the engine sees it: parsed, checked and indexed by the shell, so that
//! nothing here can hold a bad value and nobody checks again.
//!
//! Values are in the channel's own unit unless a name says otherwise. Sources and channels are
//! known by their position; names travel only for documents.

use crate::time::Duration;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Position of a channel in [`Setup::channels`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct ChannelId(pub u32);

/// Position of a reference in [`Setup::references`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct ReferenceId(pub u32);

/// One whole configuration of a node.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Setup {
    /// The node's name, as in its topics.
    pub node: String,
    /// Which clock says what "now" is.
    pub clock: Clock,
    /// SHA-256 of the configuration file's bytes, lower-case hexadecimal; travels in every
    /// correction.
    pub fingerprint: String,
    /// All references: named ones, and one for every channel that declares its own inline.
    pub references: Vec<ReferenceSetup>,
    /// All channels.
    pub channels: Vec<ChannelSetup>,
}

impl Default for Setup {
    /// No channels: what an engine has before it is told its configuration.
    fn default() -> Self {
        Self {
            node: String::new(),
            clock: Clock::Live,
            fingerprint: String::new(),
            references: Vec::new(),
            channels: Vec::new(),
        }
    }
}

/// What "now" is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Clock {
    /// Live: received times and ticks move now; a phenomenon time more than 5 min ahead of it is
    /// refused.
    Live,
    /// Recordings: now is the newest accepted phenomenon time; ticks are not needed.
    Readings,
}

/// A source of reference values.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ReferenceSetup {
    /// Name in documents and topics, levels separated by `/`. An inline reference bears its
    /// channel's name.
    pub name: String,
    /// Where its values come from.
    pub kind: ReferenceKind,
    /// Standard uncertainty of each value that is independent between values; it enters the
    /// weights. Unit of the channel.
    pub uncertainty_each: f64,
    /// Standard uncertainty shared by all values; it does not average down. Unit of the channel.
    pub uncertainty_common: f64,
    /// Identifies the calibration certificate, if there is one.
    pub certificate: Option<String>,
    /// When the certificate expires.
    pub expires: Option<Timestamp>,
    /// The reference is stale when its newest value is older than this; `None`: never.
    pub stale_after: Option<Duration>,
    /// How long a stretch of time each value stands for (an hourly mean); zero for a sample at an
    /// instant.
    pub stands_for: Duration,
    /// Which instant of that stretch the value's phenomenon time names.
    pub stamped: Stamped,
}

/// Which instant of its interval a value's phenomenon time names.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Stamped {
    /// The beginning.
    Start,
    /// The middle.
    Middle,
    /// The end.
    End,
}

/// Where reference values come from.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum ReferenceKind {
    /// Values arrive as readings with [`crate::event::Source::Reference`]: from a topic of their
    /// own, or from the same payload as the indication (then both readings bear one phenomenon
    /// time).
    Measured,
    /// A known value, such as a buffer solution or a zero gas. When `gated`, it holds only while
    /// the gate is open, as told by [`crate::event::Input::Gate`]; before the first gate event it
    /// is shut.
    Constant {
        /// The value.
        value: f64,
        /// Whether a `valid_when` condition was configured.
        gated: bool,
    },
    /// The median of at least three of these channels' indications at the instant; never holds the
    /// channel itself.
    Group {
        /// The members other than the channel that uses this reference.
        members: Vec<ChannelId>,
    },
}

/// How far a fit looks back.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum WindowLength {
    /// A span of time; segments close on a grid of time.
    Time(Duration),
    /// A number of pairs; segments close after a number of rows.
    Pairs(u32),
}

/// The criterion that judges degrees.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Criterion {
    /// Bayesian information criterion (Schwarz 1978), the default.
    Bic,
    /// Akaike information criterion with small-sample correction (Hurvich & Tsai 1989).
    Aicc,
}

/// What the fit of one channel is told.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct FitSetup {
    /// How far it looks back.
    pub window: WindowLength,
    /// Segments in a full window, 1 … 1024; with a window in pairs at most the number of pairs.
    pub segments: u32,
    /// Highest degree in time that may be announced, 0 … 5.
    pub max_degree: u8,
    /// Announce and publish exactly this degree, whatever the criterion says.
    pub forced_degree: Option<u8>,
    /// The criterion.
    pub criterion: Criterion,
}

/// One quantity measured by one sensor.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ChannelSetup {
    /// Name in documents and topics, levels separated by `/`.
    pub name: String,
    /// The unit of indications, reference values and corrections, as configured.
    pub unit: String,
    /// The reference it is judged against.
    pub reference: ReferenceId,
    /// The indication answers this much later than the reference: indication at t + lag belongs to
    /// the reference at t.
    pub lag: Duration,
    /// How late, behind now, a reading may still arrive and be used.
    pub lateness: Duration,
    /// Interpolation between two indications is refused across a longer gap.
    pub max_gap: Duration,
    /// The fit.
    pub fit: FitSetup,
    /// What may enter the fit.
    pub screening: ScreeningSetup,
    /// Largest error that the specification permits, either sign; `None`: no conformity statement.
    pub max_permissible_error: Option<f64>,
    /// Smallest step that the indication can show; enters u as q/√12 (GUM F.2.2.1) and floors the
    /// robust scale.
    pub resolution: f64,
    /// Declared standard deviation of the indication's noise; floors the robust scale. Zero: not
    /// declared.
    pub noise: f64,
    /// Largest drift rate that needs no attention, unit per day; `None`: no such alarm.
    pub max_drift_rate: Option<f64>,
    /// Probability that the coverage interval is to have, e.g. 0.95.
    pub coverage: f64,
    /// When a new correction document is issued.
    pub publish: PublishSetup,
    /// Timing of the alarms.
    pub alarms: AlarmSetup,
    /// Publish every corrected value as well.
    pub corrected_values: bool,
}

/// What may enter the fit (design: screening).
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct ScreeningSetup {
    /// Off: every finite pair enters.
    pub enabled: bool,
    /// Lowest and highest indication that the sensor can show; outside fails.
    pub range: Option<(f64, f64)>,
    /// Width of the innovation gate in robust standard deviations.
    pub gate: f64,
    /// After so many rejections of one sign in a row the gate stops rejecting and locks out.
    pub lock_out_after: u32,
}

/// When a new correction document is issued.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct PublishSetup {
    /// A new document when the correction over the validity would differ by more than this part of
    /// u.
    pub step: f64,
    /// A new document at the latest after this time; also how far ahead a document is valid, unless
    /// the fit's own horizon is nearer.
    pub max_age: Duration,
}

/// Timing of the alarms.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct AlarmSetup {
    /// Evaluations in a row that a condition must hold before its alarm is raised, and be gone
    /// before it clears.
    pub delay: u32,
    /// A condition on the error clears only this many standard uncertainties inside its limit.
    pub deadband: f64,
    /// No accepted indication for this long raises the data-gap alarm; `None`: never.
    pub gap_after: Option<Duration>,
}
