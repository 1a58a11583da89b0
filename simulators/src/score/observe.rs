//! The engine's outputs as facts: the documents in force, and what was said when and about whom.
//!
//! The one place that knows the engine's vocabulary. A fact bears a word: an alarm's kind as in its
//! topic, or one of the words below. Whatever else the engine learns to say gets its word here.

use super::world::Place;
use crate::sensor::START;
use holdtrue_engine::event::{AlarmKind, AlarmState, Correction, Output, Subject};
use holdtrue_engine::fit::Term;
use holdtrue_engine::setup::ChannelId;

/// A step was confirmed.
pub const STEP: &str = "step";
/// The announced degree rose.
pub const DEGREE_RAISED: &str = "degree-raised";

/// A fact.
#[derive(Clone, Debug, PartialEq)]
pub struct Said {
    /// Its word.
    pub word: String,
    /// About whom; `None`: the node.
    pub place: Option<Place>,
    /// When, in days from the start of the run.
    pub day: f64,
    /// The new degree, if it is about that.
    pub degree: Option<u8>,
    /// The jump, if it is about one.
    pub jump: Option<Jump>,
}

/// A jump of the error, as the engine sees it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Jump {
    /// When it happened, in days from the start of the run.
    pub day: f64,
    /// By how much, in the channel's unit …
    pub size: f64,
    /// … and the standard uncertainty of that.
    pub u: f64,
}

/// Collects facts.
#[derive(Clone, Debug)]
pub struct Observer {
    documents: Vec<Option<Box<Correction>>>,
    /// All facts, in the order in which they were said.
    pub said: Vec<Said>,
    /// Documents issued.
    pub issued: u64,
    /// Sensors for which a document claimed a span.
    pub span_claimed: Vec<bool>,
    /// Corrected values: the sensor, the day of the indication, whether they were flagged as beyond
    /// what the fit has seen.
    pub corrected: Vec<(usize, f64, bool)>,
}

impl Observer {
    /// One that has heard nothing of `sensors` sensors.
    #[must_use]
    pub fn new(sensors: usize) -> Self {
        Self {
            documents: vec![None; sensors],
            said: Vec::new(),
            issued: 0,
            span_claimed: vec![false; sensors],
            corrected: Vec::new(),
        }
    }

    /// The document in force for a sensor.
    #[must_use]
    pub fn document(&self, sensor: usize) -> Option<&Correction> {
        self.documents[sensor].as_deref()
    }

    /// Takes what the engine said at `day`.
    pub fn take(&mut self, output: Output, day: f64) {
        match output {
            Output::Correction(document) => {
                self.issued += 1;
                let place = index(document.channel);
                self.span_claimed[place] |= !document.span.is_empty();
                self.documents[place] = Some(document);
            }
            Output::Corrected(value) => {
                let day = value.phenomenon.since(START).days();
                let sensor = index(value.channel);
                self.corrected.push((sensor, day, value.beyond_range));
            }
            Output::Withdrawn { channel, .. } => self.documents[index(channel)] = None,
            // The alarm about a step says what the step itself has said, and only about the first
            // of several.
            Output::Alarm(change) if change.kind == AlarmKind::Step => {}
            Output::Alarm(change) if change.state != AlarmState::Normal => {
                self.say(change.kind.code().to_owned(), place(change.subject), day);
            }
            Output::Step(step) => {
                let sensor = Place::Sensor(index(step.channel));
                self.say(STEP.to_owned(), Some(sensor), day);
                if let Some(said) = self.said.last_mut() {
                    said.jump = Some(Jump {
                        day: step.first_after.since(START).days(),
                        size: step.size,
                        u: step.size_u,
                    });
                }
            }
            Output::Degree(change) if change.term == Term::Zero && change.to > change.from => {
                let sensor = Place::Sensor(index(change.channel));
                self.say(DEGREE_RAISED.to_owned(), Some(sensor), day);
                if let Some(said) = self.said.last_mut() {
                    said.degree = Some(change.to);
                }
            }
            _ => {}
        }
    }

    fn say(&mut self, word: String, place: Option<Place>, day: f64) {
        self.said.push(Said {
            word,
            place,
            day,
            degree: None,
            jump: None,
        });
    }
}

/// Position of a channel.
fn index(channel: ChannelId) -> usize {
    channel.0 as usize
}

/// Whom an alarm is about.
fn place(subject: Subject) -> Option<Place> {
    match subject {
        Subject::Node | Subject::Influence(_) => None,
        Subject::Channel(channel) => Some(Place::Sensor(index(channel))),
        Subject::Reference(reference) => Some(Place::Reference(reference.0 as usize)),
    }
}
