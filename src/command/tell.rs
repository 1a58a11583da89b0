//! `holdtrue tell`: gives the daemon an order over the broker and waits for its answer.

mod quarantine;

use super::Ending;
use crate::broker::{Answer, Event, Link, Message, Publish, Token};
use crate::configuration::{self, Broker, Login, Protocol};
use crate::document::topic::Topics;
use crate::payload::order::WORD_MAX;
use clap::{Args, Subcommand, ValueEnum};
use quarantine::{Quarantine, Release};
use serde_json::{Map, Value, json};
use std::io::{self, Write};
use std::path::{Path, PathBuf};
use std::time::Duration;

/// How long an answer may take: the daemon answers after its next commit.
const WAIT_DEFAULT: u64 = 30;

/// What to tell.
#[derive(Debug, Args)]
pub(super) struct Tell {
    #[command(subcommand)]
    what: What,
}

#[derive(Debug, Subcommand)]
enum What {
    /// Something was done to a sensor or a reference: its history before and after is kept apart.
    #[command(after_help = "Example:\n  \
        holdtrue tell service --config /etc/holdtrue/holdtrue.toml intake/ph-1 cleaned \\\n    \
        --by \"night shift\" --at 2026-03-01T10:15:00Z --as-found 7.12=7.00 \
        --as-left 7.01=7.00:0.02\n\n\
        A reading is INDICATION=REFERENCE or INDICATION=REFERENCE:U, U the expanded uncertainty\n\
        (k = 2) of the reference value; give the option again for further readings.\n\n\
        Exit code: 0 done, 1 refused, 2 wrong usage, 3 no broker or no answer.")]
    Service(Service),
    /// What a source gave in an interval is bad: it is left out of every fit, also what comes.
    #[command(after_help = "Example:\n  \
        holdtrue tell quarantine --config /etc/holdtrue/holdtrue.toml --reference lab/ph \\\n    \
        --by \"M. Ito\" --from 2026-03-03 --to 2026-03-04 --note \"buffer was spoilt\"\n\n\
        Every fit that rests on these values is made anew from the record; the answer names them.\n\
        Without --to the values stay out until `holdtrue tell release`.\n\n\
        Exit code: 0 done, 1 refused, 2 wrong usage, 3 no broker or no answer.")]
    Quarantine(Quarantine),
    /// A quarantine is taken back: its values count again.
    #[command(after_help = "Example:\n  \
        holdtrue tell release --config /etc/holdtrue/holdtrue.toml q-17 --by \"M. Ito\"\n\n\
        Exit code: 0 done, 1 refused, 2 wrong usage, 3 no broker or no answer.")]
    Release(Release),
}

/// A service event.
#[derive(Debug, Args)]
struct Service {
    #[command(flatten)]
    way: Way,
    /// Name of the channel that was served.
    #[arg(value_name = "CHANNEL")]
    name: String,
    /// What was done.
    act: Act,
    /// NAME is that of a reference.
    #[arg(long)]
    reference: bool,
    /// Who did it.
    #[arg(long, value_name = "NAME")]
    by: String,
    /// When it was done, RFC 3339 with an offset [default: now].
    #[arg(long, value_name = "TIME")]
    at: Option<String>,
    /// A reading before anything was changed.
    #[arg(long, value_name = "I=R[:U]", allow_hyphen_values = true, value_parser = reading)]
    as_found: Vec<Reading>,
    /// A reading afterwards.
    #[arg(long, value_name = "I=R[:U]", allow_hyphen_values = true, value_parser = reading)]
    as_left: Vec<Reading>,
    /// Serial number of the sensor in place now.
    #[arg(long, value_name = "NUMBER")]
    serial: Option<String>,
    /// The calibration certificate.
    #[arg(long, value_name = "NUMBER")]
    certificate: Option<String>,
    /// Whatever else a successor should know.
    #[arg(long, value_name = "TEXT")]
    note: Option<String>,
    /// The order's id, to tell it again without doing it twice [default: made from the time].
    #[arg(long, value_name = "TEXT", value_parser = order_id)]
    id: Option<String>,
}

/// What was done.
#[derive(Clone, Copy, Debug, ValueEnum)]
enum Act {
    /// Made to show other values.
    Adjusted,
    /// Fouling was taken off.
    Cleaned,
    /// Another sensor or sensing element took its place.
    Replaced,
    /// Calibrated, with whatever adjustment belongs to it.
    Calibrated,
}

/// The way to the daemon.
#[derive(Debug, Args)]
struct Way {
    /// The daemon's configuration file: broker and node are taken from it.
    #[arg(long, value_name = "FILE", required_unless_present = "broker")]
    config: Option<PathBuf>,
    /// The broker, in place of a configuration file.
    #[arg(long, value_name = "URL", requires = "node", conflicts_with = "config")]
    broker: Option<String>,
    /// The node's name.
    #[arg(long, value_name = "NAME", requires = "broker")]
    node: Option<String>,
    /// User name at the broker [default: as in the configuration].
    #[arg(long, value_name = "NAME", requires = "password_file")]
    username: Option<String>,
    /// File whose first line is the password.
    #[arg(long, value_name = "FILE", requires = "username")]
    password_file: Option<PathBuf>,
    /// Longest wait for the answer, seconds.
    #[arg(long, value_name = "SECONDS", default_value_t = WAIT_DEFAULT,
        value_parser = clap::value_parser!(u64).range(1..=3600))]
    wait: u64,
    /// The answer's document on standard output instead of text.
    #[arg(long)]
    json: bool,
}

/// An indication beside its reference value.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Reading {
    indication: f64,
    reference: f64,
    uncertainty: Option<f64>,
}

/// The daemon takes no longer ids, and none of blanks.
fn order_id(text: &str) -> Result<String, String> {
    let id = text.trim();
    if id.is_empty() || id.chars().count() > WORD_MAX {
        return Err(format!("write 1 to {WORD_MAX} characters"));
    }
    Ok(id.to_owned())
}

fn reading(text: &str) -> Result<Reading, String> {
    const SHAPE: &str = "write INDICATION=REFERENCE or INDICATION=REFERENCE:U, as 7.12=7.00:0.02";
    let number = |text: &str| {
        let value: Option<f64> = text.trim().parse().ok();
        value
            .filter(|value| value.is_finite())
            .ok_or_else(|| format!("\"{text}\" is not a number; {SHAPE}"))
    };
    let (indication, rest) = text.split_once('=').ok_or(SHAPE)?;
    let (reference, uncertainty) = match rest.split_once(':') {
        Some((reference, uncertainty)) => (reference, Some(number(uncertainty)?)),
        None => (rest, None),
    };
    Ok(Reading {
        indication: number(indication)?,
        reference: number(reference)?,
        uncertainty,
    })
}

impl Tell {
    /// Tells it, and writes the answer.
    pub(super) fn run(self) -> Ending {
        match self.what {
            What::Service(service) => service.run(),
            What::Quarantine(it) => it.run(),
            What::Release(it) => it.run(),
        }
    }
}

impl Service {
    fn run(self) -> Ending {
        let id = self.id.clone().unwrap_or_else(own_id);
        tell(&self.way, "service", self.payload(&id), id)
    }

    fn payload(&self, id: &str) -> Vec<u8> {
        let act = match self.act {
            Act::Adjusted => "adjusted",
            Act::Cleaned => "cleaned",
            Act::Replaced => "replaced",
            Act::Calibrated => "calibrated",
        };
        let subject = if self.reference {
            "reference"
        } else {
            "channel"
        };
        let mut fields = Map::new();
        fields.insert("id".to_owned(), json!(id));
        fields.insert(subject.to_owned(), json!(self.name));
        fields.insert("act".to_owned(), json!(act));
        fields.insert("by".to_owned(), json!(self.by));
        let mut optional = |name: &str, value: &Option<String>| {
            if let Some(value) = value {
                fields.insert(name.to_owned(), json!(value));
            }
        };
        optional("at", &self.at);
        optional("serial", &self.serial);
        optional("certificate", &self.certificate);
        optional("note", &self.note);
        for (name, readings) in [("as_found", &self.as_found), ("as_left", &self.as_left)] {
            if !readings.is_empty() {
                let list: Vec<Value> = readings.iter().copied().map(Reading::to_json).collect();
                fields.insert(name.to_owned(), json!(list));
            }
        }
        Value::Object(fields).to_string().into_bytes()
    }
}

/// Tells an order, and writes the answer.
fn tell(way: &Way, verb: &str, payload: Vec<u8>, id: String) -> Ending {
    let (broker, node) = match way.resolve() {
        Ok(found) => found,
        Err(message) => {
            eprintln!("{message}");
            return Ending::Wrong;
        }
    };
    let topics = Topics::new(&node);
    let answers_on = match broker.protocol {
        Protocol::V5 => format!("{}/{}", topics.answer(), broker.client_id),
        // There a request can't say where its answer is wanted.
        Protocol::V311 => topics.answer(),
    };
    let order = Order {
        topic: topics.order(verb),
        payload,
        id,
        answers_on,
    };
    let runtime = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build();
    let place = format!("{}:{}", broker.host, broker.port);
    let limit = Duration::from_secs(way.wait);
    let answered = match runtime.map(|runtime| runtime.block_on(order.ask(broker, limit))) {
        Ok(answered) => answered,
        Err(error) => Err(error.to_string()),
    };
    match answered {
        Ok(answer) => show(&answer, way.json),
        Err(why) => {
            eprintln!("error: {why} (broker {place}, node {node})");
            Ending::Failed
        }
    }
}

impl Reading {
    fn to_json(self) -> Value {
        match self.uncertainty {
            None => json!({ "indication": self.indication, "reference": self.reference }),
            Some(uncertainty) => json!({
                "indication": self.indication,
                "reference": self.reference,
                "uncertainty": uncertainty,
            }),
        }
    }
}

impl Way {
    /// The broker, under a name of our own and with a session that ends with us; and the node.
    fn resolve(&self) -> Result<(Broker, String), String> {
        let (mut broker, node) = match (&self.config, &self.broker, &self.node) {
            (Some(path), _, _) => {
                let configuration =
                    configuration::load(path).map_err(|problems| problems.to_string())?;
                (configuration.broker, configuration.setup.node)
            }
            (None, Some(url), Some(node)) => (configuration::broker_at(url, node)?, node.clone()),
            _ => return Err("error: give --config, or --broker and --node".to_owned()),
        };
        if let (Some(username), Some(file)) = (&self.username, &self.password_file) {
            broker.login = Some(Login {
                username: username.clone(),
                password: first_line(file)?,
            });
        }
        broker.client_id = format!("holdtrue-tell-{}", own_id());
        broker.session_expiry = Duration::ZERO;
        Ok((broker, node))
    }
}

fn first_line(path: &Path) -> Result<String, String> {
    let text = std::fs::read_to_string(path)
        .map_err(|error| format!("error: {}: {error}", path.display()))?;
    Ok(text.lines().next().unwrap_or_default().to_owned())
}

/// Differs from that of any other call: the clock and the process.
fn own_id() -> String {
    let since = std::time::SystemTime::now().duration_since(std::time::UNIX_EPOCH);
    let nanos = since.map_or(0, |since| since.as_nanos());
    format!("{nanos}-{}", std::process::id())
}

/// An order on its way.
struct Order {
    topic: String,
    payload: Vec<u8>,
    id: String,
    answers_on: String,
}

impl Order {
    /// Subscribes to the answer, publishes the order, and waits. The answer's document.
    async fn ask(&self, broker: Broker, limit: Duration) -> Result<Value, String> {
        let mut link = Link::new(broker).map_err(|error| error.to_string())?;
        let mut published = Progress::Connecting;
        let answer = tokio::time::timeout(limit, self.exchange(&mut link, &mut published)).await;
        link.goodbye(Duration::from_secs(1)).await;
        answer.unwrap_or_else(|_| Err(published.in_words(limit)))
    }

    async fn exchange(&self, link: &mut Link, progress: &mut Progress) -> Result<Value, String> {
        loop {
            match link.next().await {
                // Also after a loss: sent again under the same id, it is not done twice.
                Event::Connected { .. } => {
                    *progress = Progress::Subscribing;
                    link.subscribe(std::slice::from_ref(&self.answers_on), &[]);
                }
                Event::Subscribed { refused } => match refused.first() {
                    None => *progress = Progress::Subscribed,
                    Some((filter, why)) => {
                        return Err(format!(
                            "the broker refuses the subscription to {filter}: {why}; may this user \
                             read it?"
                        ));
                    }
                },
                Event::Ready | Event::Answered(_, Answer::Taken) => {}
                Event::Answered(_, Answer::NotNow(why) | Answer::Never(why)) => {
                    return Err(format!(
                        "the broker refuses the order: {why}; may this user write to {}?",
                        self.topic
                    ));
                }
                Event::Message(message) => {
                    link.acknowledge(message.ticket);
                    if let Some(answer) = self.answer_in(&message) {
                        return Ok(answer);
                    }
                }
                Event::Lost(lost) => {
                    tracing::warn!(why = lost.why, next_try = ?lost.next_try, "no connection");
                    *progress = Progress::Connecting;
                }
            }
            if *progress == Progress::Subscribed && self.publish(link) {
                *progress = Progress::Published;
            }
        }
    }

    fn publish(&self, link: &mut Link) -> bool {
        let publish = Publish {
            topic: &self.topic,
            payload: &self.payload,
            response_topic: Some(&self.answers_on),
            correlation: Some(self.id.as_bytes()),
            ..Publish::default()
        };
        link.publish(Token::Document(0), &publish)
    }

    /// The answer, if this is ours; the common topic carries those of others as well.
    fn answer_in(&self, message: &Message) -> Option<Value> {
        let document: Value = serde_json::from_slice(&message.payload).ok()?;
        (!message.retained && document["id"] == self.id.as_str()).then_some(document)
    }
}

/// How far an order came.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Progress {
    Connecting,
    Subscribing,
    Subscribed,
    Published,
}

impl Progress {
    fn in_words(self, limit: Duration) -> String {
        let seconds = limit.as_secs();
        match self {
            Self::Connecting => format!("no connection to the broker within {seconds} s"),
            Self::Subscribing | Self::Subscribed => {
                format!("the broker did not answer within {seconds} s")
            }
            Self::Published => format!(
                "no answer within {seconds} s: the broker has the order, and the daemon will take \
                 it when it runs; look at the node's state and its answer topic before telling it \
                 again"
            ),
        }
    }
}

/// Writes the answer.
fn show(answer: &Value, as_json: bool) -> Ending {
    let accepted = answer["accepted"] == true;
    let written = if as_json {
        writeln!(io::stdout(), "{answer:#}")
    } else {
        let text = answer["text"].as_str().unwrap_or_default();
        writeln!(io::stdout(), "{text}")
    };
    match written {
        // A reader that went away (`| head`) is no failure of ours.
        Err(error) if error.kind() != io::ErrorKind::BrokenPipe => Ending::Failed,
        _ if accepted => Ending::Done,
        _ => Ending::No,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn readings_are_taken_apart() {
        let of = |indication, reference, uncertainty| Reading {
            indication,
            reference,
            uncertainty,
        };
        assert_eq!(reading("7.12=7.00"), Ok(of(7.12, 7.0, None)));
        assert_eq!(reading("-1.5=-2:0.02"), Ok(of(-1.5, -2.0, Some(0.02))));
        for text in ["7.12", "7,12=7", "7.1=", "=7", "7=7:", "7=inf", "7=7:x"] {
            let message = reading(text).expect_err(text);
            assert!(message.contains("7.12=7.00"), "{message}");
        }
    }

    #[test]
    fn an_id_is_what_the_daemon_takes() {
        assert_eq!(order_id(" v-7 "), Ok("v-7".to_owned()));
        assert!(order_id(&"a".repeat(WORD_MAX)).is_ok());
        for text in ["", "  ", &"a".repeat(WORD_MAX + 1)] {
            assert!(order_id(text).is_err(), "{text:?}");
        }
    }
}
