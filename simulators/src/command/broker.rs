//! Arguments that say where the broker is and how fast to publish, and the delivery itself.

use super::{Failure, progress, say, say_json};
use crate::broker::{Delivered, Link, Pace, deliver};
use crate::message::Message;
use clap::Args;
use std::path::PathBuf;

/// Where to, how fast.
#[derive(Debug, Args)]
pub(super) struct Target {
    /// Broker, `mqtt://HOST[:PORT]`
    #[arg(long)]
    broker: String,
    /// Times faster than real; without it as fast as the broker acknowledges
    #[arg(long, value_parser = speed)]
    pub(super) speed: Option<f64>,
    /// Client identifier; must be the only one of its name at the broker
    #[arg(long)]
    client_id: Option<String>,
    /// User name
    #[arg(long, requires = "password_file")]
    username: Option<String>,
    /// File whose first line is the password
    #[arg(long, requires = "username")]
    password_file: Option<PathBuf>,
    /// What was done, as JSON
    #[arg(long)]
    pub(super) json: bool,
}

impl Target {
    /// The broker's side of the arguments.
    pub(super) fn link(&self) -> Result<Link, Failure> {
        let mut link =
            Link::from_url(&self.broker).map_err(|error| Failure::Usage(error.to_string()))?;
        if let Some(id) = &self.client_id {
            link.client_id.clone_from(id);
        }
        if let (Some(user), Some(path)) = (&self.username, &self.password_file) {
            let text = std::fs::read_to_string(path).map_err(|error| {
                Failure::Outside(format!("reading {}: {error}", path.display()))
            })?;
            let password = text.lines().next().unwrap_or_default().to_owned();
            link.login = Some((user.clone(), password));
        }
        Ok(link)
    }

    /// Delivers the messages until their end or Ctrl-C.
    pub(super) fn deliver(
        &self,
        messages: impl Iterator<Item = Message>,
        expected: Option<u64>,
    ) -> Result<Delivered, Failure> {
        let link = self.link()?;
        let pace = self.speed.map_or(Pace::AsAcknowledged, Pace::Times);
        let bar = progress::bar(expected, "acknowledged");
        let runtime = tokio::runtime::Builder::new_current_thread()
            .enable_all()
            .build()
            .map_err(|error| Failure::outside(&error))?;
        let stop = async {
            if tokio::signal::ctrl_c().await.is_err() {
                std::future::pending::<()>().await;
            }
        };
        let delivered = runtime.block_on(deliver(messages, &link, pace, stop, |so_far| {
            bar.set_position(so_far.acknowledged);
        }));
        bar.finish_and_clear();
        delivered.map_err(|lost| Failure::Outside(lost.to_string()))
    }

    /// Says how many messages were acknowledged, and how many rows were `left_out`.
    pub(super) fn report(&self, delivered: Delivered, left_out: u64) -> Result<(), Failure> {
        let Delivered {
            sent,
            acknowledged,
            refused,
        } = delivered;
        if self.json {
            say_json(&serde_json::json!({
                "sent": sent,
                "acknowledged": acknowledged,
                "refused": refused,
                "left_out": left_out,
            }))?;
        } else {
            say(&format!(
                "{acknowledged} of {sent} messages acknowledged by the broker"
            ));
        }
        if refused > 0 || left_out > 0 {
            return Err(Failure::Incomplete(format!(
                "{left_out} rows left out, {refused} messages refused by the broker"
            )));
        }
        Ok(())
    }
}

/// A positive factor.
fn speed(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(speed) if speed > 0.0 && speed.is_finite() => Ok(speed),
        _ => Err("must be a number above 0, such as 86400 for a day a second".to_owned()),
    }
}
