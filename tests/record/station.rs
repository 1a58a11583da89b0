//! A small invented station at work over some days, with a keeper and without a broker: two
//! thermometers beside one reference thermometer, one of which drifts.

use holdtrue::keeper::Keeper;
use holdtrue_engine::event::{Input, Reading, Source};
use holdtrue_engine::setup::{
    ChannelId, ChannelSetup, Clock, ReferenceId, ReferenceKind, ReferenceSetup, Setup, WindowLength,
};
use holdtrue_engine::time::{Duration, Timestamp};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use std::path::Path;
use std::sync::atomic::AtomicBool;

/// 2026-12-01T00:00:00Z.
pub(crate) const START: i64 = 1_796_083_200;
/// Seconds between two readings.
const EVERY: usize = 300;
/// Seconds between two commits.
const COMMIT: i64 = 900;

/// The configuration; `window` in hours.
pub(crate) fn setup(window: i64) -> Setup {
    let channel = |name: &str| {
        let mut channel = ChannelSetup::new(name, "Cel", ReferenceId(0));
        channel.fit.window = WindowLength::Time(Duration::from_seconds(window * 3600));
        channel.fit.segments = 16;
        channel.max_permissible_error = Some(0.5);
        channel
    };
    Setup {
        node: "quarry-tarn".to_owned(),
        clock: Clock::Live,
        fingerprint: format!("{window:064}"),
        references: vec![ReferenceSetup::new("mast", ReferenceKind::Measured)],
        influences: Vec::new(),
        channels: vec![channel("shore/t-1"), channel("shore/t-2")],
    }
}

/// What happens from `from` on for `seconds`, each input with the instant at which it comes.
pub(crate) fn inputs(from: i64, seconds: i64) -> Vec<(Timestamp, Input)> {
    let mut all = Vec::new();
    for time in (from..from + seconds).step_by(EVERY) {
        let mut random = ChaCha8Rng::seed_from_u64(time.unsigned_abs());
        let mut noise = || f64::from(random.next_u32()) / f64::from(u32::MAX) - 0.5;
        let days = (time - START) as f64 / 86_400.0;
        let truth = 10.0 + 3.0 * (days * std::f64::consts::TAU).sin();
        let values = [
            (
                Source::Indication(ChannelId(0)),
                truth + 0.1 * days + 0.05 * noise(),
            ),
            (Source::Indication(ChannelId(1)), truth + 0.05 * noise()),
            (Source::Reference(ReferenceId(0)), truth),
        ];
        for (place, (source, value)) in (1..).zip(values) {
            let received = Timestamp(time * 1_000_000_000 + place);
            let reading = Input::Reading(Reading {
                source,
                received,
                phenomenon: Timestamp(time * 1_000_000_000),
                value,
                sequence: None,
                excluded: false,
            });
            all.push((received, reading));
        }
        let now = Timestamp((time + 150) * 1_000_000_000);
        all.push((now, Input::Tick { now }));
    }
    all
}

/// Opens a record.
pub(crate) fn open(folder: &Path, now: i64) -> Keeper {
    let now = Timestamp(now * 1_000_000_000);
    let stop = AtomicBool::new(false);
    Keeper::open(folder, now, &stop).unwrap().unwrap()
}

/// Lets it work from `from` on for `seconds`; commits now and then, and at the end.
pub(crate) fn work(keeper: &mut Keeper, from: i64, seconds: i64) {
    let mut committed = from;
    for (now, input) in inputs(from, seconds) {
        keeper.take(&input);
        if now.0 >= (committed + COMMIT) * 1_000_000_000 {
            committed += COMMIT;
            keeper.commit(now).unwrap();
            keeper.answer_wanted().unwrap();
        }
    }
    let end = Timestamp((from + seconds) * 1_000_000_000);
    keeper.commit(end).unwrap();
}

/// A record of `days` days, cleanly ended.
pub(crate) fn recorded(folder: &Path, days: i64) {
    let mut keeper = open(folder, START);
    keeper.adopt(&setup(24)).unwrap();
    work(&mut keeper, START, days * 86_400);
    keeper
        .finish(Timestamp((START + days * 86_400) * 1_000_000_000))
        .unwrap();
}
