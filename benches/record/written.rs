//! What goes to the disk in a day at 20 readings a second and one commit a second, and how large a
//! reading is. Some hours of such a day, fed as fast as the disk commits and counted up to a day;
//! bytes as the kernel counts them for this process. Exit code 1 if a target is missed.
//!
//!     cargo bench --bench written
//!
//! `HOURS` changes how many. The file system's own journal is not in the figure.

#![allow(
    clippy::unwrap_used,
    reason = "a benchmark says what went wrong by panicking"
)]

mod kit;

use holdtrue::configuration;
use holdtrue::keeper::Keeper;
use holdtrue_engine::event::{Input, Reading, Source};
use holdtrue_engine::setup::{ChannelId, ReferenceId};
use holdtrue_engine::time::{Duration, Timestamp};
use kit::{exit, judge, number, written_bytes};
use std::path::Path;
use std::process::ExitCode;
use std::sync::atomic::AtomicBool;

/// Bytes a day at most.
const A_DAY: f64 = 3e9;
const CHANNELS: i64 = 20;
/// A reference value for all channels, so often (seconds).
const REFERENCE_EVERY: i64 = 60;
/// 2026-03-01T00:00:00Z.
const BEGIN: Timestamp = Timestamp(1_772_323_200_000_000_000);

fn configuration() -> String {
    let one = |place| {
        format!(
            "[[channel]]\nname = \"c{place}\"\nunit = \"V\"\nindication = {{ topic = \
             \"c{place}\" }}\nreference = \"lab\"\n"
        )
    };
    let channels: String = (0..CHANNELS).map(one).collect();
    format!(
        "[node]\nname = \"n\"\n[broker]\nurl = \"mqtt://127.0.0.1\"\n\
         [[reference]]\nname = \"lab\"\ntopic = \"lab\"\n{channels}"
    )
}

fn take(keeper: &mut Keeper, source: Source, at: Timestamp, value: f64) {
    keeper.take(&Input::Reading(Reading {
        source,
        received: at,
        phenomenon: at,
        value,
        sequence: None,
        excluded: false,
    }));
}

fn main() -> ExitCode {
    let hours = i64::try_from(number("HOURS", 3)).unwrap();
    let folder = tempfile::tempdir().unwrap();
    let stop = AtomicBool::new(false);
    let mut keeper: Keeper = Keeper::open(folder.path(), BEGIN, &stop).unwrap().unwrap();
    let read = configuration::from_text(&configuration(), "", Path::new(""), BEGIN);
    let setup = read.unwrap_or_else(|problems| panic!("{problems}")).setup;
    keeper.adopt(&setup).unwrap();
    keeper.commit(BEGIN).unwrap();
    let before = written_bytes("self");
    let mut readings = 0_u32;
    for second in 0..3600 * hours {
        let at = |part: i64| Timestamp(BEGIN.0 + 1_000_000_000 * second + 50_000_000 * part);
        for place in 0..CHANNELS {
            let turn = f64::from(readings);
            let source = Source::Indication(ChannelId(u32::try_from(place).unwrap()));
            let value = 1.1 + 0.01 * (12.9898 * turn).sin();
            take(&mut keeper, source, at(place), value);
            readings += 1;
        }
        if second % REFERENCE_EVERY == 0 {
            take(&mut keeper, Source::Reference(ReferenceId(0)), at(19), 1.0);
            readings += 1;
        }
        if let Some(due) = keeper.engine().next_tick()
            && due <= at(20)
        {
            keeper.take(&Input::Tick { now: at(20) });
        }
        keeper.commit(at(20)).unwrap();
        // The broker takes everything at once.
        while let Some((number, _)) = keeper.outbox().next_to_hand() {
            keeper.accepted(number);
        }
    }
    let written = written_bytes("self") - before;
    let a_day = 24.0 / f64::from(u32::try_from(hours).unwrap()) * written as f64;
    let mut met = true;
    println!("{hours} hours of {CHANNELS} readings a second, a reference value a minute");
    judge(
        &format!(
            "{:.2} GB to the disk in a day (at most {:.0})",
            1e-9 * a_day,
            1e-9 * A_DAY
        ),
        a_day <= A_DAY,
        &mut met,
    );
    keeper
        .finish(BEGIN.plus(Duration::from_seconds(3600 * hours)))
        .unwrap();
    let mut bytes = 0;
    for entry in std::fs::read_dir(folder.path()).unwrap() {
        bytes += entry.unwrap().metadata().unwrap().len();
    }
    println!(
        "sealed, with its indexes and all that was concluded: {:.0} bytes per reading",
        bytes as f64 / f64::from(readings)
    );
    exit(met)
}
