//! `holdtrue tell quarantine` and `holdtrue tell release`.

use super::{Way, order_id, own_id, tell};
use crate::command::Ending;
use clap::Args;
use serde_json::{Map, Value, json};

/// The way to the daemon, who tells, and under which id.
#[derive(Debug, Args)]
struct Telling {
    #[command(flatten)]
    way: Way,
    /// Who says so.
    #[arg(long, value_name = "NAME")]
    by: String,
    /// Why.
    #[arg(long, value_name = "TEXT")]
    note: Option<String>,
    /// The order's id, to tell it again without doing it twice [default: made from the time].
    #[arg(long, value_name = "TEXT", value_parser = order_id)]
    id: Option<String>,
}

/// A quarantine.
#[derive(Debug, Args)]
pub(super) struct Quarantine {
    #[command(flatten)]
    telling: Telling,
    #[command(flatten)]
    source: Whose,
    /// The first time at which the values are bad, RFC 3339 with an offset, or a date.
    #[arg(long, value_name = "TIME")]
    from: String,
    /// The first time at which they are good again [default: none yet].
    #[arg(long, value_name = "TIME")]
    to: Option<String>,
}

/// Whose values.
#[derive(Debug, Args)]
#[group(required = true, multiple = false)]
struct Whose {
    /// The channel whose indications are bad.
    #[arg(long, value_name = "NAME")]
    channel: Option<String>,
    /// The reference whose values are bad.
    #[arg(long, value_name = "NAME")]
    reference: Option<String>,
    /// The influence quantity whose values are bad.
    #[arg(long, value_name = "NAME")]
    influence: Option<String>,
}

/// The release of a quarantine.
#[derive(Debug, Args)]
pub(super) struct Release {
    #[command(flatten)]
    telling: Telling,
    /// The id of the order that began the quarantine; its answer tells it.
    #[arg(value_name = "QUARANTINE", value_parser = order_id)]
    quarantine: String,
}

impl Quarantine {
    /// Tells it, and writes the answer.
    pub(super) fn run(&self) -> Ending {
        self.telling.run("quarantine", self.fields())
    }

    fn fields(&self) -> Map<String, Value> {
        let Whose {
            channel,
            reference,
            influence,
        } = &self.source;
        let told = [
            ("channel", channel),
            ("reference", reference),
            ("influence", influence),
            ("from", &Some(self.from.clone())),
            ("to", &self.to),
        ];
        let told = told
            .into_iter()
            .filter_map(|(name, value)| Some((name, value.as_ref()?)));
        told.map(|(name, value)| (name.to_owned(), json!(value)))
            .collect()
    }
}

impl Release {
    /// Tells it, and writes the answer.
    pub(super) fn run(&self) -> Ending {
        self.telling.run("release", self.fields())
    }

    fn fields(&self) -> Map<String, Value> {
        Map::from_iter([("quarantine".to_owned(), json!(self.quarantine))])
    }
}

impl Telling {
    /// Tells an order of these fields, and what all of them have.
    fn run(&self, verb: &str, mut fields: Map<String, Value>) -> Ending {
        let id = self.id.clone().unwrap_or_else(own_id);
        fields.insert("id".to_owned(), json!(id));
        fields.insert("by".to_owned(), json!(self.by));
        if let Some(note) = &self.note {
            fields.insert("note".to_owned(), json!(note));
        }
        let payload = Value::Object(fields).to_string().into_bytes();
        tell(&self.way, verb, payload, id)
    }
}
