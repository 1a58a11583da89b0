//! Samples as MQTT messages: topic and payload.

use crate::scenario::Scenario;
use crate::sensor::Sample;
use holdtrue_engine::time::Timestamp;

/// One message, ready to be sent.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Message {
    /// Its topic.
    pub topic: String,
    /// Its payload.
    pub payload: String,
    /// When it is due; pacing goes by the differences.
    pub at: Timestamp,
}

/// The topics of a scenario's streams, formatted once.
#[derive(Clone, Debug)]
pub struct Topics {
    indications: Vec<String>,
    references: Vec<String>,
}

impl Topics {
    /// The topics of `scenario`.
    #[must_use]
    pub fn new(scenario: &Scenario) -> Self {
        let instruments = || scenario.kits.iter().map(|kit| kit.instrument);
        Self {
            indications: instruments().map(|instrument| instrument.topic()).collect(),
            references: instruments()
                .map(|instrument| instrument.reference_topic())
                .collect(),
        }
    }

    /// All topics.
    #[must_use]
    pub fn all(&self) -> Vec<&str> {
        self.indications
            .iter()
            .chain(&self.references)
            .map(String::as_str)
            .collect()
    }

    /// The topic of `sample`.
    #[must_use]
    pub fn of(&self, sample: &Sample) -> &str {
        let topics = if sample.is_reference {
            &self.references
        } else {
            &self.indications
        };
        &topics[sample.sensor]
    }

    /// The message that carries `sample`.
    #[must_use]
    pub fn message(&self, sample: &Sample) -> Message {
        let Sample {
            value, sequence, ..
        } = sample;
        let at = time_text(sample.at);
        Message {
            topic: self.of(sample).to_owned(),
            payload: format!(r#"{{"at":"{at}","value":{value},"seq":{sequence}}}"#),
            at: sample.at,
        }
    }
}

/// RFC 3339 in UTC.
///
/// # Panics
/// Never: every timestamp lies in the range of the library.
#[must_use]
pub fn time_text(at: Timestamp) -> String {
    jiff::Timestamp::from_nanosecond(i128::from(at.0))
        .expect("64 bits of nanoseconds end in the year 2262, the library's range in 9999")
        .to_string()
}
