//! How fast a record is replayed on one core, reading it included, and what of that is reading.
//! Exit code 1 if a target is missed.
//!
//!     cargo bench --bench replay
//!
//! 100 channels with a reading a second and a shared reference every hour, under the live clock;
//! `READINGS` changes how many.

#![allow(
    clippy::unwrap_used,
    reason = "a benchmark says what went wrong by panicking"
)]

mod kit;

use holdtrue::configuration;
use holdtrue::keeper::Keeper;
use holdtrue::record::{Archive, RecordError};
use holdtrue::replay::{Range, audit};
use holdtrue_engine::event::{Input, Reading, Source};
use holdtrue_engine::setup::{ChannelId, ReferenceId, Setup};
use holdtrue_engine::time::{Duration, Timestamp};
use kit::{cpu_seconds, exit, judge, machine_load, number};
use std::fmt::Write;
use std::path::Path;
use std::process::ExitCode;
use std::sync::atomic::AtomicBool;

/// Readings a second that are aimed at, if the engine's own cost allows.
const AIM: f64 = 1_000_000.0;
/// Readings a second at least.
const LEAST: f64 = 400_000.0;
const CHANNELS: u32 = 100;
/// 2026-03-01T00:00:00Z.
const BEGIN: Timestamp = Timestamp(1_772_323_200_000_000_000);

fn setup() -> Setup {
    let mut text = "[node]\nname = \"n\"\n[broker]\nurl = \"mqtt://127.0.0.1\"\n\
                    [[reference]]\nname = \"r\"\ntopic = \"r\"\n"
        .to_owned();
    for channel in 0..CHANNELS {
        let _ = writeln!(
            text,
            "[[channel]]\nname = \"c/{channel}\"\nunit = \"V\"\nreference = \"r\"\n\
             indication = {{ topic = \"c/{channel}\" }}\nmax_permissible_error = 0.5"
        );
    }
    let read = configuration::from_text(&text, "", Path::new(""), BEGIN);
    read.unwrap_or_else(|problems| panic!("{problems}")).setup
}

/// What comes in one second.
fn second(keeper: &mut Keeper, seconds: i64) -> u64 {
    let now = BEGIN.plus(Duration::from_seconds(seconds));
    let truth = 5.0 + (seconds as f64 / 7000.0).sin();
    let mut take = |source, value| {
        keeper.take(&Input::Reading(Reading {
            source,
            received: now,
            phenomenon: now,
            value,
            sequence: None,
            excluded: false,
        }));
    };
    for channel in 0..CHANNELS {
        let turn = f64::from(channel) + 0.37 * seconds as f64;
        let noise = 0.01 * (12.9898 * turn).sin();
        take(Source::Indication(ChannelId(channel)), truth + 0.1 + noise);
    }
    if seconds % 3600 == 0 {
        take(Source::Reference(ReferenceId(0)), truth);
    }
    if keeper.engine().next_tick().is_some_and(|tick| tick <= now) {
        keeper.take(&Input::Tick { now });
    }
    u64::from(CHANNELS)
}

fn main() -> ExitCode {
    let readings = number("READINGS", 10_000_000);
    let folder = tempfile::tempdir().unwrap();
    println!(
        "{readings} readings (load of the machine before: {})",
        machine_load()
    );
    let stop = AtomicBool::new(false);
    let mut keeper: Keeper = Keeper::open(folder.path(), BEGIN, &stop).unwrap().unwrap();
    keeper.adopt(&setup()).unwrap();
    let (mut taken, mut seconds) = (0, 0);
    while taken < readings {
        taken += second(&mut keeper, seconds);
        seconds += 1;
        if seconds % 60 == 0 {
            keeper
                .commit(BEGIN.plus(Duration::from_seconds(seconds)))
                .unwrap();
        }
    }
    keeper
        .commit(BEGIN.plus(Duration::from_seconds(seconds)))
        .unwrap();
    drop(keeper);
    let mut met = true;
    let archive = Archive::open(folder.path()).unwrap();
    let cpu = || cpu_seconds("/proc/self/stat");
    let began = cpu();
    let mut read = 0_u64;
    archive
        .walk::<RecordError>(|_| {
            read += 1;
            Ok(())
        })
        .unwrap();
    let reading = cpu() - began;
    let began = cpu();
    let audit = audit(&archive, Range::default(), &mut |_| {}).unwrap();
    let whole = cpu() - began;
    assert_eq!(audit.difference, None, "the replay differs");
    let rate = taken as f64 / whole;
    println!(
        "  {} inputs, {} outputs, {} parts of states: all identical",
        audit.inputs, audit.outputs, audit.states
    );
    judge(
        &format!(
            "{:.0} thousand readings a second of one core (aim {:.0}, at least {:.0}): reading \
             the record {:.0} % of it, the engine and the comparison the rest",
            rate / 1000.0,
            AIM / 1000.0,
            LEAST / 1000.0,
            100.0 * reading / whole
        ),
        rate >= LEAST,
        &mut met,
    );
    exit(met)
}
