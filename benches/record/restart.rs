//! How long a start takes with 10,000 channels whose windows of 64 segments are full, from the
//! record alone. Exit code 1 if a target is missed.
//!
//!     cargo bench --bench restart
//!
//! `CHANNELS` changes how many.

#![allow(
    clippy::unwrap_used,
    reason = "a benchmark says what went wrong by panicking"
)]

mod kit;

use holdtrue::configuration;
use holdtrue::keeper::Keeper;
use holdtrue_engine::event::{Input, Reading, Source};
use holdtrue_engine::setup::{ChannelId, ReferenceId, Setup};
use holdtrue_engine::time::{Duration, Timestamp};
use kit::{cpu_seconds, exit, judge, machine_load, number};
use std::path::Path;
use std::process::ExitCode;
use std::sync::atomic::AtomicBool;
use std::time::Instant;

/// Seconds at most.
const START: f64 = 3.0;
const SEGMENTS: i64 = 64;
/// 2026-03-01T00:00:00Z.
const BEGIN: Timestamp = Timestamp(1_772_323_200_000_000_000);

const CONFIGURATION: &str = r#"
[node]
name = "n"
[broker]
url = "mqtt://127.0.0.1"
[[channel]]
name = "c"
unit = "V"
indication = { topic = "c" }
reference = { constant = 1.0 }
window = "64 min"
segments = 64
max_permissible_error = 0.5
lateness = "1 h"
"#;

/// The same channel many times.
fn setup(channels: u32) -> Setup {
    let read = configuration::from_text(CONFIGURATION, "", Path::new(""), BEGIN);
    let mut setup = read.unwrap_or_else(|problems| panic!("{problems}")).setup;
    let (channel, reference) = (setup.channels.remove(0), setup.references.remove(0));
    for place in 0..channels {
        let name = format!("c/{place}");
        let mut channel = channel.clone();
        channel.name.clone_from(&name);
        channel.reference = ReferenceId(place);
        setup.channels.push(channel);
        let mut reference = reference.clone();
        reference.name = name;
        setup.references.push(reference);
    }
    setup
}

/// A pair for each channel, at this second.
fn feed(keeper: &mut Keeper, channels: u32, second: i64) {
    let now = BEGIN.plus(Duration::from_seconds(second));
    for place in 0..channels {
        let turn = f64::from(place) + 0.37 * f64::from(i32::try_from(second).unwrap());
        keeper.take(&Input::Reading(Reading {
            source: Source::Indication(ChannelId(place)),
            received: now,
            phenomenon: now,
            value: 1.1 + 0.01 * (12.9898 * turn).sin(),
            sequence: None,
            excluded: false,
        }));
        if place % 5000 == 4999 {
            keeper.commit(now).unwrap();
        }
    }
    keeper.commit(now).unwrap();
    // Nobody reads the outbox here.
    while let Some((number, _)) = keeper.outbox().next_to_hand() {
        keeper.accepted(number);
    }
    keeper.commit(now).unwrap();
}

/// Opens the record; with how long that took, and how much of it the processor worked.
fn start(folder: &Path, second: i64) -> (Keeper, f64, f64) {
    let now = BEGIN.plus(Duration::from_seconds(second));
    let (began, cpu) = (Instant::now(), cpu_seconds("/proc/self/stat"));
    let keeper = Keeper::open(folder, now, &AtomicBool::new(false)).unwrap();
    let cpu = cpu_seconds("/proc/self/stat") - cpu;
    (keeper.unwrap(), began.elapsed().as_secs_f64(), cpu)
}

fn main() -> ExitCode {
    let channels = u32::try_from(number("CHANNELS", 10_000)).unwrap();
    let folder = tempfile::tempdir().unwrap();
    println!(
        "{channels} channels of {SEGMENTS} segments (load of the machine before: {})",
        machine_load()
    );
    let (mut keeper, ..) = start(folder.path(), 0);
    keeper.adopt(&setup(channels)).unwrap();
    let began = Instant::now();
    // A little more than a window.
    for minute in 0..SEGMENTS + 3 {
        feed(&mut keeper, channels, 60 * minute);
    }
    println!("  filled in {:.0} s", began.elapsed().as_secs_f64());
    let last = 60 * (SEGMENTS + 3);
    let finish = BEGIN.plus(Duration::from_seconds(last));
    keeper.finish(finish).unwrap();
    drop(keeper);
    let mut met = true;
    let (mut keeper, seconds, cpu) = start(folder.path(), last);
    judge(
        &format!(
            "after a clean stop: ready after {seconds:.2} s (at most {START}), {cpu:.2} s of the \
             processor"
        ),
        seconds <= START,
        &mut met,
    );
    // As if killed a little later, with what came in the meantime.
    feed(&mut keeper, channels, last);
    drop(keeper);
    let (keeper, seconds, cpu) = start(folder.path(), last + 1);
    judge(
        &format!(
            "killed with a pair of each channel since the state was saved: ready after \
             {seconds:.2} s (at most {START}), {cpu:.2} s of the processor"
        ),
        seconds <= START,
        &mut met,
    );
    assert_eq!(keeper.setup().channels.len(), channels as usize);
    exit(met)
}
