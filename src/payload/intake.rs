//! One MQTT message in, input events out.

use super::fault::{Fault, excerpt_bytes};
use super::tables::{Format, Tables, Target, Use};
use super::{json, plain, senml};
use holdtrue_engine::event::{Gate, Input, Reading, Refused, RefusedReason, Source};
use holdtrue_engine::setup::ReferenceId;
use holdtrue_engine::time::Timestamp;
use std::collections::BTreeMap;

/// Knows what every topic carries; built once per configuration.
#[derive(Clone, Debug)]
pub struct Intake {
    filters: Vec<String>,
    topics: BTreeMap<String, Topic>,
    max_payload: usize,
}

/// What one topic carries.
#[derive(Clone, Debug)]
struct Topic {
    format: Content,
    /// Whose value a message is when it cannot be read at all; `None` when it serves several.
    source: Option<Source>,
    /// The uses that take a retained message, and whether there are others.
    gates: Option<Content>,
    readings: bool,
}

/// The one format of a topic.
#[derive(Clone, Debug)]
enum Content {
    Plain(Vec<Target>),
    Json(json::Document),
    Senml(senml::Pack),
}

impl Intake {
    /// Prepares the reading of every topic.
    #[must_use]
    pub fn new(tables: &Tables) -> Self {
        let topics = tables
            .topics
            .iter()
            .map(|(name, uses)| (name.clone(), Topic::new(uses)))
            .collect();
        Self {
            filters: tables.filters.clone(),
            topics,
            max_payload: tables.max_payload,
        }
    }

    /// What to subscribe to at the broker, each once, all with quality of service 1.
    #[must_use]
    pub fn filters(&self) -> &[String] {
        &self.filters
    }

    /// Turns one message into the inputs that it stands for and appends them to `out`: for every
    /// value, gate or refusal one. `retained` is the message's own flag: the broker's memory, not a
    /// new value; `received` is the clock when the message came in.
    pub fn take(
        &self,
        topic: &str,
        payload: &[u8],
        retained: bool,
        received: Timestamp,
        out: &mut Vec<Input>,
    ) {
        let known = self.topics.get(topic);
        let source = known.and_then(|known| known.source);
        let mut reader = Reader {
            topic,
            source,
            received,
            out,
        };
        let Some(known) = known else {
            let detail = "a subscription matches this topic, but nothing is configured for it; \
                          narrow `subscribe` or add the channel";
            return reader.refuse_message(Fault::new(RefusedReason::UnknownTopic, detail));
        };
        if payload.is_empty() {
            return reader.refuse_message(Fault::new(RefusedReason::Empty, "empty payload"));
        }
        if payload.len() > self.max_payload {
            let detail = format!(
                "{} bytes, more than max_payload = {}; it begins {}",
                payload.len(),
                self.max_payload,
                excerpt_bytes(payload)
            );
            return reader.refuse_message(Fault::new(RefusedReason::Oversize, detail));
        }
        if retained {
            known.take_retained(&mut reader, payload);
        } else {
            known.format.read(&mut reader, payload);
        }
    }
}

impl Topic {
    fn new(uses: &[Use]) -> Self {
        let keeps_state = |wanted: &&Use| {
            matches!(
                wanted.target,
                Target::Gate {
                    own_topic: true,
                    ..
                }
            )
        };
        let gates: Vec<&Use> = uses.iter().filter(keeps_state).collect();
        Self {
            format: Content::new(uses.iter()),
            source: only_source(uses),
            readings: gates.len() < uses.len(),
            gates: (!gates.is_empty()).then(|| Content::new(gates.into_iter())),
        }
    }

    /// Takes what tells a state and refuses the rest.
    fn take_retained(&self, reader: &mut Reader<'_>, payload: &[u8]) {
        if let Some(gates) = &self.gates {
            gates.read(reader, payload);
        }
        if self.readings {
            let detail = format!(
                "the broker's memory ({}), not a new value; publish readings without retain",
                excerpt_bytes(payload)
            );
            reader.refuse_message(Fault::new(RefusedReason::Retained, detail));
        }
    }
}

/// The source that a topic is about: its only one, or the one indication when the others are what
/// comes along with it in the same payload.
fn only_source(uses: &[Use]) -> Option<Source> {
    let mut indications = uses.iter().filter_map(|wanted| match wanted.target {
        Target::Indication(channel) => Some(Source::Indication(channel)),
        _ => None,
    });
    match (indications.next(), indications.next(), uses) {
        (Some(only), None, _) => Some(only),
        (None, _, [only]) => Some(only.target.source()),
        _ => None,
    }
}

impl Content {
    /// All uses of a topic have one format; were there others, the first one's would count.
    fn new<'uses>(uses: impl Iterator<Item = &'uses Use> + Clone) -> Self {
        let mut document = json::Document::default();
        let mut pack = senml::Pack::default();
        for wanted in uses.clone() {
            match &wanted.format {
                Format::Plain => {}
                Format::Json(place) => document.want(&wanted.target, place),
                Format::Senml(place) => pack.want(&wanted.target, place),
            }
        }
        match uses.clone().next().map(|first| &first.format) {
            Some(Format::Json(_)) => Self::Json(document),
            Some(Format::Senml(_)) => Self::Senml(pack),
            Some(Format::Plain) | None => {
                Self::Plain(uses.map(|wanted| wanted.target.clone()).collect())
            }
        }
    }

    fn read(&self, reader: &mut Reader<'_>, payload: &[u8]) {
        let Ok(text) = std::str::from_utf8(payload) else {
            let detail = format!("{} is not UTF-8", excerpt_bytes(payload));
            return reader.refuse_message(Fault::new(RefusedReason::Unreadable, detail));
        };
        if text.trim().is_empty() {
            return reader.refuse_message(Fault::new(RefusedReason::Empty, "nothing but blanks"));
        }
        match self {
            Self::Plain(targets) => plain::read(reader, targets, text),
            Self::Json(document) => document.read(reader, text),
            Self::Senml(pack) => pack.read(reader, text),
        }
    }
}

impl Target {
    /// Whose value it is; a gate belongs to its reference.
    pub(crate) fn source(&self) -> Source {
        match self {
            Self::Indication(channel) => Source::Indication(*channel),
            Self::Influence(influence) => Source::Influence(*influence),
            Self::Reference(reference) | Self::Gate { reference, .. } => {
                Source::Reference(*reference)
            }
        }
    }
}

/// What a payload told for one target.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Told {
    /// A value.
    Reading {
        phenomenon: Timestamp,
        value: f64,
        sequence: Option<i64>,
        excluded: bool,
    },
    /// The state of a gate.
    Gate {
        reference: ReferenceId,
        phenomenon: Timestamp,
        open: bool,
    },
}

/// One message on its way to inputs.
pub(super) struct Reader<'message> {
    topic: &'message str,
    source: Option<Source>,
    pub(super) received: Timestamp,
    out: &'message mut Vec<Input>,
}

impl Reader<'_> {
    /// Adds what was told for a target, or why nothing was.
    pub(super) fn tell(&mut self, target: &Target, told: Result<Told, Fault>) {
        let received = self.received;
        let input = match told {
            Ok(Told::Reading {
                phenomenon,
                value,
                sequence,
                excluded,
            }) => {
                let source = target.source();
                Input::Reading(Reading {
                    source,
                    received,
                    phenomenon,
                    value,
                    sequence,
                    excluded,
                })
            }
            Ok(Told::Gate {
                reference,
                phenomenon,
                open,
            }) => Input::Gate(Gate {
                reference,
                received,
                phenomenon,
                open,
            }),
            Err(fault) => self.refused(Some(target.source()), fault),
        };
        self.out.push(input);
    }

    /// Adds the refusal of the whole message.
    pub(super) fn refuse_message(&mut self, fault: Fault) {
        let input = self.refused(self.source, fault);
        self.out.push(input);
    }

    fn refused(&self, source: Option<Source>, fault: Fault) -> Input {
        Input::Refused(Refused {
            received: self.received,
            topic: self.topic.to_owned(),
            source,
            reason: fault.reason,
            detail: fault.detail,
        })
    }
}
