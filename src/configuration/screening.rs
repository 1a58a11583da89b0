//! `screening` of a channel: what may enter its fit.

use super::reader::Section;
use super::source::Found;
use holdtrue_engine::setup::{RateLimit, Repeats, ScreeningSetup};

/// Most repeats of one value that can be asked for.
const REPEATS_MAX: u32 = 100_000;

/// `screening`: "off", or a table.
pub(super) fn read(section: &Section<'_>) -> ScreeningSetup {
    let default = ScreeningSetup::default();
    if section.is_text("screening") {
        let off = section.choice("screening", &[("off", false), ("on", true)]);
        return ScreeningSetup {
            enabled: off.is_none_or(|found| found.value),
            ..default
        };
    }
    let Some(table) = section.section("screening") else {
        return default;
    };
    let gate = table.number_in("gate", |gate| gate >= 1.0, "at least 1 standard deviation");
    let lock_out_after = table.integer_in("lock_out_after", 2..=1000);
    let range = range(&table);
    let stuck = repeats(&table);
    let max_rate = max_rate(&table);
    table.finish();
    ScreeningSetup {
        range,
        gate: gate.map_or(default.gate, |found| found.value),
        lock_out_after: lock_out_after.map_or(default.lock_out_after, |found| found.value),
        stuck,
        max_rate,
        ..default
    }
}

/// `range = [lowest, highest]`.
fn range(table: &Section<'_>) -> Option<(f64, f64)> {
    let place = table.place("range")?;
    let ends: Vec<Found<f64>> = table.numbers("range");
    match ends.as_slice() {
        [low, high] if low.value < high.value => Some((low.value + 0.0, high.value + 0.0)),
        _ => {
            table.wrong(&place, "must be two numbers, [lowest, highest]");
            None
        }
    }
}

/// `stuck = { suspect, fail }`.
fn repeats(table: &Section<'_>) -> Option<Repeats> {
    let place = table.place("stuck")?;
    let stuck = table.section("stuck")?;
    let suspect = stuck.integer_in("suspect", 1..=REPEATS_MAX);
    let fail = stuck.integer_in("fail", 1..=REPEATS_MAX);
    stuck.finish();
    let (Some(suspect), Some(fail)) = (suspect, fail) else {
        table.wrong(
            &place,
            "needs both counts of equal values: stuck = { suspect = 3, fail = 5 }",
        );
        return None;
    };
    if fail.value < suspect.value {
        stuck.wrong(
            &fail,
            format!("is below suspect, which is {}", suspect.value),
        );
        return None;
    }
    Some(Repeats {
        suspect: suspect.value,
        fail: fail.value,
    })
}

/// `max_rate = { change, within }`.
fn max_rate(table: &Section<'_>) -> Option<RateLimit> {
    let place = table.place("max_rate")?;
    let rate = table.section("max_rate")?;
    let change = rate.number_in("change", |x| x > 0.0, "greater than zero");
    let within = rate.positive_duration("within");
    rate.finish();
    let (Some(change), Some(within)) = (change, within) else {
        table.wrong(
            &place,
            "needs both: max_rate = { change = 3.0, within = \"1 min\" }",
        );
        return None;
    };
    Some(RateLimit {
        change: change.value,
        within: within.value,
    })
}
