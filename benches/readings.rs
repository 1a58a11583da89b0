//! What the engine makes of plain readings, those that are no pair: nanoseconds each, the fastest
//! of several hours. Exit code 1 if a million a second are not reached on this machine.

use holdtrue_benches::{Fleet, Running};
use holdtrue_engine::setup::Clock;
use std::process::ExitCode;
use std::time::Instant;

/// Nanoseconds per reading at most.
const TARGET: f64 = 1000.0;
const FLEETS: [Fleet; 4] = [
    Fleet {
        name: "100 channels, a live clock",
        clock: Clock::Live,
        watches_silence: false,
        channels: 100,
    },
    Fleet {
        name: "100 channels, a live clock, silence watched",
        clock: Clock::Live,
        watches_silence: true,
        channels: 100,
    },
    Fleet {
        name: "100 channels, a recording, silence watched",
        clock: Clock::Readings,
        watches_silence: true,
        channels: 100,
    },
    Fleet {
        name: "1000 channels, a live clock, silence watched",
        clock: Clock::Live,
        watches_silence: true,
        channels: 1000,
    },
];
/// Hours told, the first of which do not count: they fill what looks back.
const HOURS: i64 = 8;
const FILLING: i64 = 3;
/// Seconds told at once.
const ROUND: i64 = 60;

fn main() -> ExitCode {
    let wanted = std::env::args().nth(1).unwrap_or_default();
    let mut met = true;
    for fleet in FLEETS.into_iter().filter(|fleet| fleet.name.contains(&wanted)) {
        let mut running = Running::new(fleet);
        let (mut best, mut pairs) = (f64::INFINITY, 0);
        for hour in 0..HOURS {
            let (mut spent, mut readings) = (0, 0);
            for _ in 0..3600 / ROUND {
                let inputs = running.readings(ROUND);
                let start = Instant::now();
                pairs += running.run(&inputs);
                spent += start.elapsed().as_nanos();
                readings += inputs.len();
            }
            if hour >= FILLING {
                best = best.min(spent as f64 / readings as f64);
            }
        }
        println!("{:<48} {best:.0} ns a reading ({pairs} pairs)", fleet.name);
        met &= pairs > 0 && best <= TARGET;
    }
    if met {
        ExitCode::SUCCESS
    } else {
        ExitCode::FAILURE
    }
}
