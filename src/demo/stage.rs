//! The demo's parts started, watched and ended.

use super::broker::Broker;
use super::heard::Heard;
use super::listener::Listener;
use super::score::Score;
use super::worker::Daemon;
use super::{DAYS, DemoError, DemoOptions, SCENARIO, table};
use crate::configuration::{self, Configuration};
use holdtrue_engine::time::Timestamp;
use holdtrue_simulators::broker::{Link, Pace, deliver};
use holdtrue_simulators::configuration::{Surroundings, text};
use holdtrue_simulators::message::Topics;
use holdtrue_simulators::plant::{Plant, instant};
use holdtrue_simulators::scenario;
use holdtrue_simulators::truth::{ExpectedAlarm, Subject, Truth};
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::io::IsTerminal;
use std::net::SocketAddr;
use std::path::{Path, PathBuf};
use std::time::Duration;

/// Length that the plant is laid out for when nobody says one.
const LAYOUT_DAYS: f64 = 60.0;
/// Plant seconds in a second when the demo runs until Ctrl-C.
const SPEED: f64 = 86_400.0;
/// How long the plant tries to reach the broker.
const PATIENCE: Duration = Duration::from_secs(20);

/// Runs the demo and prints its result; true if all is as it should be.
///
/// # Errors
/// A length that makes no sense, or a part that failed.
pub fn run(options: &DemoOptions) -> Result<bool, DemoError> {
    if let Some(days) = options.days
        && !(DAYS.0..=DAYS.1).contains(&days)
    {
        let (least, most) = DAYS;
        return Err(DemoError::Usage(format!(
            "--days must be from {least} to {most}"
        )));
    }
    let scenario = scenario::find(SCENARIO)
        .ok_or_else(|| DemoError::Part("plant", format!("no scenario {SCENARIO:?}")))?;
    let plant = Plant::new(scenario, options.seed, options.days.unwrap_or(LAYOUT_DAYS));
    let (heard, end) = perform(&plant, options.days, options.record.as_deref())?;

    let endless = plant.clone().endless();
    let days = end.since(instant(0.0)).days();
    let mut truth = Truth::of(&plant, days);
    if options.expect_the_impossible {
        expect_the_impossible(&mut truth);
    }
    let score = Score::new(endless, &truth, &heard, end);
    if options.json {
        let json = serde_json::to_string_pretty(&score)
            .map_err(|error| DemoError::Part("result", error.to_string()))?;
        say(&json);
    } else {
        say(table::render(&score).trim_end());
    }
    Ok(score.is_good())
}

/// Prints to standard output; a reader that has gone is no failure.
fn say(text: &str) {
    use std::io::Write;
    let _ = writeln!(std::io::stdout(), "{text}");
}

/// Plants the expectation of an alarm that nothing raises.
fn expect_the_impossible(truth: &mut Truth) {
    if let Some(sensor) = truth.sensors.first_mut() {
        sensor.alarms.push(ExpectedAlarm {
            sensor: 0,
            subject: Subject::Channel,
            name: sensor.channel.to_owned(),
            kind: "never-raised",
            planted_at: instant(0.0),
            earliest: instant(0.0),
            due: instant(0.0),
            ends: None,
            required: true,
        });
    }
}

/// Runs all parts; returns what was heard, and the plant's time up to which it was published.
fn perform(
    plant: &Plant,
    days: Option<f64>,
    record: Option<&Path>,
) -> Result<(Heard, Timestamp), DemoError> {
    let passing = tempfile::tempdir().map_err(|error| failed("temporary folder", &error))?;
    let record = match record {
        Some(folder) => kept(folder)?,
        None => passing.path().join("record"),
    };
    let broker = Broker::start()?;
    let settings = configure(plant, broker.address, &record)?;
    let runtime = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build()
        .map_err(|error| failed("runtime", &error))?;
    runtime.block_on(async {
        let mut listener = Listener::start(broker.address).await?;
        let daemon = Daemon::start(settings)?;
        daemon.wait_for(&mut listener, Heard::is_running).await?;
        let topics = Topics::new(&plant.scenario);
        broker.wait_for_subscriptions(&topics.all()).await?;
        let bar = bar(days);
        let published = publish(plant, days, broker.address, &listener, &bar).await?;
        catch_up(&daemon, &mut listener, &bar, &published).await?;
        bar.finish_and_clear();
        daemon.stop().await?;
        Ok((listener.heard(), published.end))
    })
}

/// Makes the folder for a record that is kept, if nothing is in it.
fn kept(folder: &Path) -> Result<PathBuf, DemoError> {
    let unusable = |error: &dyn std::fmt::Display| {
        DemoError::Usage(format!("--record {}: {error}", folder.display()))
    };
    std::fs::create_dir_all(folder).map_err(|error| unusable(&error))?;
    let mut entries = std::fs::read_dir(folder).map_err(|error| unusable(&error))?;
    if entries.next().is_some() {
        return Err(unusable(
            &"the folder is not empty; name another, or one that does not exist",
        ));
    }
    folder.canonicalize().map_err(|error| unusable(&error))
}

/// The daemon's configuration, through the same door as an operator's file. It stands beside the
/// record, so that another can be made from it and tried.
fn configure(plant: &Plant, broker: SocketAddr, record: &Path) -> Result<Configuration, DemoError> {
    let surroundings = Surroundings {
        broker_url: format!("mqtt://{broker}"),
        record_folder: record.display().to_string(),
        commit: "100 ms",
        corrected: last_sensor(plant),
    };
    let text = text(&plant.scenario, plant.days, &surroundings);
    std::fs::create_dir_all(record)
        .and_then(|()| std::fs::write(record.join("demo.toml"), &text))
        .map_err(|error| failed("record folder", &error))?;
    configuration::from_text(&text, "demo.toml", record, instant(0.0))
        .map_err(|problems| failed("configuration", &problems))
}

/// The sensor whose indication comes last at every instant: its corrected values tell how far the
/// daemon has come.
fn last_sensor(plant: &Plant) -> Option<&'static str> {
    plant.scenario.kits.last().map(|kit| kit.instrument.name)
}

/// What was published.
struct Published {
    sent: u64,
    /// The last sensor's last indication.
    last_indication: Timestamp,
    /// The first instant that was not published any more.
    end: Timestamp,
}

/// Publishes the plant's readings: all of them at full speed, or a day a second until Ctrl-C.
async fn publish(
    plant: &Plant,
    days: Option<f64>,
    broker: SocketAddr,
    listener: &Listener,
    bar: &ProgressBar,
) -> Result<Published, DemoError> {
    let link = Link {
        host: broker.ip().to_string(),
        port: broker.port(),
        client_id: "harrow-mere".to_owned(),
        login: None,
        patience: PATIENCE,
    };
    let topics = Topics::new(&plant.scenario);
    let (samples, pace) = match days {
        Some(_) => (plant.clone(), Pace::AsAcknowledged),
        None => (plant.clone().endless(), Pace::Times(SPEED)),
    };
    let last_sensor = plant.scenario.kits.len() - 1;
    let (mut newest, mut made, mut last_indication) = (instant(0.0), instant(0.0), instant(0.0));
    let messages = samples.map(|sample| {
        newest = sample.at;
        // A reading is sent when the next one is made; the one in hand when a stop comes is not.
        last_indication = made;
        if sample.sensor == last_sensor && !sample.is_reference {
            made = sample.at;
        }
        topics.message(&sample)
    });
    let delivered = deliver(messages, &link, pace, ctrl_c(), |_| {
        listener.look(|heard| show(bar, heard));
    })
    .await
    .map_err(|lost| failed("plant", &lost))?;
    let (end, last_indication) = match days {
        Some(days) => (instant(days), made),
        None => (newest, last_indication),
    };
    Ok(Published {
        sent: delivered.acknowledged,
        last_indication,
        end,
    })
}

/// Waits until the daemon has taken everything that was sent: until it has corrected the last
/// sensor's last indication, or, should there be no correction in force, until it says so in its
/// next state document.
async fn catch_up(
    daemon: &Daemon,
    listener: &mut Listener,
    bar: &ProgressBar,
    published: &Published,
) -> Result<(), DemoError> {
    daemon
        .wait_for(listener, |heard| {
            show(bar, heard);
            heard.corrected_to >= Some(published.last_indication) || heard.has_taken(published.sent)
        })
        .await
}

/// Moves the bar to the plant's day that the daemon has come to.
fn show(bar: &ProgressBar, heard: &Heard) {
    let days = heard.newest.map_or(0.0, |at| at.since(instant(0.0)).days());
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a few years"
    )]
    bar.set_position(days as u64);
}

/// A bar over the days, or a counter of them; on a terminal only.
fn bar(days: Option<f64>) -> ProgressBar {
    let target = if std::io::stderr().is_terminal() {
        ProgressDrawTarget::stderr()
    } else {
        ProgressDrawTarget::hidden()
    };
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "at most 120"
    )]
    let length = days.map(|days| days.ceil() as u64);
    let bar = ProgressBar::with_draw_target(length, target);
    let template = match days {
        Some(_) => "{bar:40} day {pos} of {len}",
        None => "{spinner} day {pos}  (Ctrl-C for the result)",
    };
    if let Ok(style) = ProgressStyle::with_template(template) {
        bar.set_style(style);
    }
    bar
}

/// Completes at Ctrl-C.
async fn ctrl_c() {
    if tokio::signal::ctrl_c().await.is_err() {
        std::future::pending::<()>().await;
    }
}

/// A part failed.
fn failed(part: &'static str, why: &dyn std::fmt::Display) -> DemoError {
    DemoError::Part(part, why.to_string())
}
