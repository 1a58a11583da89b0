//! `holdtrue demo`: an invented plant held true on one machine, without any configuration.
//!
//! An embedded broker, the plant's publisher, the daemon and a judge run in one process but speak
//! real MQTT over TCP, as they would on four machines. The judge reads the published documents as
//! any consumer would and compares with the plant's truth.
//!
//! - `broker`: the embedded broker
//! - `worker`: the daemon on a thread of its own
//! - `listener`: the judge's link to the broker
//! - [`heard`]: what a consumer of the published documents sees
//! - [`score`]: what was seen against what is true
//! - `table`: the result for people
//! - `stage`: the parts started, watched and ended

mod broker;
pub mod heard;
mod listener;
pub mod score;
mod stage;
mod table;
mod worker;

use std::fmt;
use std::path::PathBuf;

pub use stage::run;

/// The shortest and the longest run that a verdict can be asked of, days. In less, no fault has
/// time to be noticed; in more, the plant's drifts would grow beyond their instruments' spans.
pub const DAYS: (f64, f64) = (20.0, 120.0);

/// The scenario that the demo shows.
const SCENARIO: &str = "harrow-mere";

/// What the demo is to do.
#[derive(Clone, Debug, PartialEq)]
pub struct DemoOptions {
    /// How long; `None`: until Ctrl-C, a day a second.
    pub days: Option<f64>,
    /// Decides everything the plant does.
    pub seed: u64,
    /// Where the record is kept; `None`: nowhere.
    pub record: Option<PathBuf>,
    /// The result as JSON.
    pub json: bool,
    /// Expect an alarm that nothing raises, to prove that the verdict can be "no".
    pub expect_the_impossible: bool,
}

/// Why the demo did not come to a result.
#[derive(Debug)]
pub enum DemoError {
    /// The request makes no sense.
    Usage(String),
    /// A part failed: which, and why.
    Part(&'static str, String),
}

impl fmt::Display for DemoError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Usage(text) => out.write_str(text),
            Self::Part(part, why) => write!(out, "the demo's {part} failed: {why}"),
        }
    }
}

impl std::error::Error for DemoError {}
