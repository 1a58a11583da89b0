//! What a consumer of the published documents sees: corrections to apply, alarms to act on.
//!
//! It knows the documents only as the README describes them, and none of the daemon's own types.

use holdtrue_engine::time::Timestamp;
use serde::Deserialize;
use serde::de::IgnoredAny;
use std::collections::BTreeMap;

/// A correction document, as far as a consumer needs it.
#[derive(Clone, Debug, PartialEq, Deserialize)]
pub struct Correction {
    /// Counts the channel's documents.
    pub issue_number: u64,
    /// When it was issued.
    #[serde(deserialize_with = "instant")]
    pub issued: Timestamp,
    /// From when on it holds.
    #[serde(deserialize_with = "instant")]
    pub valid_from: Timestamp,
    /// Until when it holds.
    #[serde(deserialize_with = "instant")]
    pub valid_until: Timestamp,
    /// Zero of the polynomials' time, which counts in days.
    #[serde(deserialize_with = "instant")]
    pub origin: Timestamp,
    /// The announced degree.
    pub degree: u8,
    /// Coefficients of the correction at `span_centre`, constant first.
    pub zero: Vec<f64>,
    /// Coefficients of minus the span, constant first; empty without one.
    pub span: Vec<f64>,
    /// The level at which `zero` holds.
    pub span_centre: f64,
    /// What the span is a function of.
    pub span_side: SpanSide,
    /// What else acts on the error.
    influences: Vec<IgnoredAny>,
    /// U.
    pub expanded_uncertainty: f64,
    /// Where the uncorrected error stands.
    pub zone: Option<String>,
    /// When its retained document was cleared, if it was.
    #[serde(skip)]
    pub withdrawn: Option<Timestamp>,
}

/// Which side of a pair a span is a function of.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum SpanSide {
    /// The reference value.
    Reference,
    /// The indication.
    Indication,
}

impl Correction {
    /// Whether it holds at `at`.
    #[must_use]
    pub fn holds(&self, at: Timestamp) -> bool {
        let in_force = self.withdrawn.is_none_or(|withdrawn| at < withdrawn);
        in_force && self.valid_from <= at && at < self.valid_until
    }

    /// The correction of `indication` at `at`: zero(t) + span(t)·(indication − `span_centre`),
    /// divided by 1 − span(t) where the span is a function of the reference value. (The invented
    /// plant has no influence quantities, so that their terms are none.)
    #[must_use]
    pub fn of(&self, indication: f64, at: Timestamp) -> f64 {
        let days = at.since(self.origin).days();
        let span = horner(&self.span, days);
        let scale = match self.span_side {
            SpanSide::Reference => 1.0 - span,
            SpanSide::Indication => 1.0,
        };
        (horner(&self.zero, days) + span * (indication - self.span_centre)) / scale
    }
}

/// An alarm document, as far as a consumer needs it.
#[derive(Clone, Debug, PartialEq, Eq, Deserialize)]
pub struct Alarm {
    /// `channel`, `reference` or `node`.
    pub subject: String,
    /// Whose.
    pub name: String,
    /// Its kind.
    pub kind: String,
    /// `normal`, or raised.
    pub state: String,
    /// When it changed.
    #[serde(deserialize_with = "instant")]
    pub at: Timestamp,
    /// What it says to the technician.
    pub text: String,
}

impl Alarm {
    /// Whether this change raised it.
    #[must_use]
    pub fn is_raised(&self) -> bool {
        self.state != "normal"
    }
}

/// A corrected value, as far as a consumer needs it.
#[derive(Clone, Debug, PartialEq, Deserialize)]
struct Corrected {
    #[serde(deserialize_with = "instant")]
    time: Timestamp,
    indication: f64,
    #[serde(rename = "corrected")]
    value: f64,
    issue_number: u64,
}

/// Everything that was published, in the order of its coming.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Heard {
    /// Corrections by channel.
    pub corrections: BTreeMap<String, Vec<Correction>>,
    /// Changes of alarms.
    pub alarms: Vec<Alarm>,
    /// Documents that a consumer can't read or that contradict each other: always a fault of the
    /// daemon.
    pub contradictions: Vec<String>,
    /// The newest time that any document named: how far the daemon has come.
    pub newest: Option<Timestamp>,
    /// The time of the newest corrected value.
    pub corrected_to: Option<Timestamp>,
    /// The newest `state`: what the daemon does, and how many inputs its record holds.
    pub state: Option<State>,
}

/// A `state` document, as far as the demo needs it.
#[derive(Clone, Debug, PartialEq, Eq, Deserialize)]
pub struct State {
    /// What the daemon does.
    pub state: String,
    /// Why, where it needs a reason.
    #[serde(default)]
    pub why: Option<String>,
    /// Figures of a living daemon.
    #[serde(default)]
    pub standing: Option<Standing>,
}

/// Figures in a `state` document.
#[derive(Clone, Debug, PartialEq, Eq, Deserialize)]
pub struct Standing {
    /// Inputs in the record.
    pub inputs: u64,
    /// Documents that the broker has not acknowledged.
    pub outbox: u64,
}

impl Heard {
    /// Takes one message from under `holdtrue/<node>/`; `rest` is its topic without that.
    pub fn take(&mut self, rest: &str, payload: &[u8]) {
        // An empty payload clears a retained document.
        if payload.is_empty() {
            if let Some(channel) = rest.strip_prefix("correction/") {
                self.withdraw(channel);
            }
            return;
        }
        if let Some(channel) = rest.strip_prefix("correction/") {
            if let Some(correction) = self.read::<Correction>(rest, payload) {
                self.come_to(correction.issued);
                if !correction.influences.is_empty() {
                    let text = format!("{rest}: influence quantities that the plant does not have");
                    self.contradictions.push(text);
                }
                self.corrections
                    .entry(channel.to_owned())
                    .or_default()
                    .push(correction);
            }
        } else if rest.starts_with("alarm/") {
            if let Some(alarm) = self.read::<Alarm>(rest, payload) {
                self.come_to(alarm.at);
                self.alarms.push(alarm);
            }
        } else if let Some(channel) = rest.strip_prefix("corrected/") {
            if let Some(corrected) = self.read::<Corrected>(rest, payload) {
                self.come_to(corrected.time);
                self.corrected_to = self.corrected_to.max(Some(corrected.time));
                self.compare(channel, &corrected);
            }
        } else if rest == "state" {
            self.state = self.read(rest, payload).or(self.state.take());
        }
    }

    /// The channel's correction in force no longer holds. No time comes with it: it is that of the
    /// newest document before.
    fn withdraw(&mut self, channel: &str) {
        let newest = self.corrections.get_mut(channel);
        if let Some(correction) = newest.and_then(|corrections| corrections.last_mut()) {
            correction.withdrawn = correction.withdrawn.or(self.newest);
        }
    }

    /// Whether the daemon says that it takes readings.
    #[must_use]
    pub fn is_running(&self) -> bool {
        self.state
            .as_ref()
            .is_some_and(|state| state.state == "running")
    }

    /// Whether the daemon's record holds `readings` readings, and the broker everything that
    /// followed from them.
    #[must_use]
    pub fn has_taken(&self, readings: u64) -> bool {
        let standing = self
            .state
            .as_ref()
            .and_then(|state| state.standing.as_ref());
        // The configuration is an input as well.
        standing.is_some_and(|standing| standing.inputs > readings && standing.outbox == 0)
    }

    /// Checks a corrected value against the correction document that it names.
    fn compare(&mut self, channel: &str, corrected: &Corrected) {
        let Corrected {
            time,
            indication,
            issue_number,
            ..
        } = *corrected;
        let documents = self.corrections.get(channel).map_or(&[][..], Vec::as_slice);
        let named = documents
            .iter()
            .rev()
            .find(|document| document.issue_number == issue_number);
        let own = named.map(|document| indication + document.of(indication, time));
        // Two ways of rounding the same sum.
        let tolerance = 1e-9 * (1.0 + indication.abs());
        if own.is_none_or(|own| (own - corrected.value).abs() > tolerance) {
            self.contradictions.push(format!(
                "corrected/{channel}: {} where document {issue_number} makes {own:?} of \
                 {indication}",
                corrected.value
            ));
        }
    }

    fn come_to(&mut self, at: Timestamp) {
        self.newest = self.newest.max(Some(at));
    }

    fn read<T: for<'de> Deserialize<'de>>(&mut self, rest: &str, payload: &[u8]) -> Option<T> {
        match serde_json::from_slice(payload) {
            Ok(document) => Some(document),
            Err(error) => {
                self.contradictions.push(format!("{rest}: {error}"));
                None
            }
        }
    }
}

/// A polynomial at `x`, coefficients constant first (Horner's scheme).
fn horner(coefficients: &[f64], x: f64) -> f64 {
    coefficients
        .iter()
        .rev()
        .fold(0.0, |sum, coefficient| sum * x + coefficient)
}

/// RFC 3339 text as a timestamp.
fn instant<'de, D: serde::Deserializer<'de>>(text: D) -> Result<Timestamp, D::Error> {
    use serde::de::Error;
    let text = String::deserialize(text)?;
    let at: jiff::Timestamp = text.parse().map_err(D::Error::custom)?;
    i64::try_from(at.as_nanosecond())
        .map(Timestamp)
        .map_err(D::Error::custom)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn document(zero: &str, span: &str, side: &str) -> String {
        format!(
            r#"{{"channel":"a/b","issue_number":1,"issued":"2026-03-02T00:00:00Z",
            "valid_from":"2026-03-02T00:00:00Z",
            "valid_until":"2026-03-03T00:00:00Z","origin":"2026-03-02T00:00:00Z",
            "degree":1,"zero":{zero},
            "span":{span},"span_centre":10.0,"span_side":"{side}","influences":[],
            "expanded_uncertainty":0.1,"zone":null,"more":[1]}}"#
        )
    }

    #[test]
    fn corrections_are_applied_as_the_document_says() {
        let mut heard = Heard::default();
        let mut take = |zero, span, side| {
            heard.take("correction/a/b", document(zero, span, side).as_bytes());
        };
        take("[-0.3, 0.1]", "[]", "reference");
        take("[-0.3]", "[0.05]", "reference");
        take("[-0.3]", "[0.05]", "indication");
        let [straight, spanned, plain] = &heard.corrections["a/b"][..] else {
            panic!("three documents")
        };
        let start = straight.origin;
        let noon = start.plus(holdtrue_engine::time::Duration::from_seconds(43_200));
        let next = start.plus(holdtrue_engine::time::Duration::from_seconds(86_400));
        // Field notes V1: indication 10.3 against 10.0 means an error of +0.3 and a correction of
        // −0.3.
        assert!((10.3 + straight.of(10.3, start) - 10.0).abs() < 1e-12);
        assert!((straight.of(10.3, noon) + 0.25).abs() < 1e-12);
        // With span: x = 10 gives i = 10.3 + … ; c = (−0.3 + 0.05·(12 − 10)) / 0.95.
        assert!((spanned.of(12.0, start) + 0.2 / 0.95).abs() < 1e-12);
        // As a function of the indication it is not divided.
        assert!((plain.of(12.0, start) + 0.2).abs() < 1e-12);
        assert!(straight.holds(start) && straight.holds(noon) && !straight.holds(next));
    }

    #[test]
    fn a_withdrawn_correction_is_applied_no_longer_until_the_next() {
        let mut heard = Heard::default();
        let text = document("[-0.3]", "[]", "reference");
        let corrected = |time: &str| {
            format!(r#"{{"time":"{time}","indication":1,"corrected":0.7,"issue_number":1}}"#)
        };
        let hour = |hours: i64| {
            let seconds = holdtrue_engine::time::Duration::from_seconds(3600 * hours);
            heard_start().plus(seconds)
        };
        heard.take("correction/a/b", text.as_bytes());
        heard.take(
            "corrected/a/b",
            corrected("2026-03-02T05:00:00Z").as_bytes(),
        );
        heard.take("correction/a/b", b"");
        heard.take("corrected/c", corrected("2026-03-02T07:00:00Z").as_bytes());
        // Cleared once more: it was withdrawn at the first.
        heard.take("correction/a/b", b"");
        heard.take("correction/c", b"");
        let [withdrawn] = &heard.corrections["a/b"][..] else {
            panic!("one document")
        };
        assert!(withdrawn.holds(hour(4)) && !withdrawn.holds(hour(5)) && !withdrawn.holds(hour(6)));
        heard.take("correction/a/b", text.as_bytes());
        let latest = heard.corrections["a/b"].last().unwrap();
        assert!(latest.holds(hour(6)));
    }

    /// When the document of these tests begins to hold.
    fn heard_start() -> Timestamp {
        instant(serde_json::json!("2026-03-02T00:00:00Z")).unwrap()
    }

    #[test]
    fn influence_quantities_that_the_plant_does_not_have_are_a_contradiction() {
        let mut heard = Heard::default();
        let named = r#""influences":[{"name":"t"}]"#;
        let text = document("[0]", "[]", "reference").replace(r#""influences":[]"#, named);
        heard.take("correction/a/b", text.as_bytes());
        assert_eq!(heard.contradictions.len(), 1);
    }

    #[test]
    fn what_can_not_be_read_is_told_and_cleared_documents_are_not() {
        let mut heard = Heard::default();
        heard.take("correction/a/b", b"");
        heard.take("notice", b"not JSON, and nobody asked");
        assert_eq!(heard, Heard::default());
        heard.take("correction/a/b", b"{}");
        assert_eq!(heard.contradictions.len(), 1);
        assert!(heard.corrections.is_empty());
    }
}
