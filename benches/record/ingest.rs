//! How many readings a second the daemon takes with full durability, beside a subscriber that only
//! acknowledges. A real Mosquitto, the real daemon, quality of service 1; the two take turns, each
//! with a broker of its own, and share the machine with a publisher that is as fast as they are.
//! Exit code 1 if a target is missed.
//!
//!     cargo bench --bench ingest
//!
//! `ROUNDS` and `SECONDS` (of a round) change how long it measures. A reading counts when it is
//! committed. One in a thousand meets a reference value: a pair costs many times what a reading
//! does, which is the subject of another benchmark.

#![allow(
    clippy::unwrap_used,
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "a benchmark says what went wrong by panicking"
)]

mod kit;
#[path = "../../tests/daemon/live/mod.rs"]
mod live;

use kit::bare::Bare;
use kit::feeder::{Feeder, Message};
use kit::{cpu_seconds, exit, judge, machine_load, number};
use live::holdtrue::Holdtrue;
use live::mosquitto::Mosquitto;
use std::fmt::Write;
use std::process::ExitCode;
use std::time::{Duration, Instant, SystemTime};

const CHANNELS: usize = 100;
/// The least part of the bare subscriber's rate, one reading per message.
const SHARE: f64 = 0.70;
/// Readings a second in packs, at least.
const PACKED: f64 = 200_000.0;
/// Bytes of a reading in the file that is written to, at most.
const BYTES: f64 = 50.0;
/// Messages that the receiver may be behind.
const BEHIND: u64 = 4000;

/// What a message holds.
#[derive(Clone, Copy, PartialEq)]
enum Shape {
    Single,
    Pack,
}

impl Shape {
    fn readings(self) -> u64 {
        match self {
            Self::Single => 1,
            Self::Pack => CHANNELS as u64,
        }
    }

    fn configuration(self) -> String {
        let reference = "[[reference]]\nname = \"lab\"\ntopic = \"lab\"\nvalue = \"/v\"\n\
                         time = \"/t\"\ntime_unit = \"us\"\n";
        let channel = |place| {
            let place_of = match self {
                Self::Single => format!(
                    "topic = \"plant/{place}\", value = \"/v\", time = \"/t\", time_unit = \"us\""
                ),
                Self::Pack => format!("topic = \"pack\", senml = \"s{place}\""),
            };
            format!(
                "[[channel]]\nname = \"c{place}\"\nunit = \"V\"\nreference = \"lab\"\n\
                 indication = {{ {place_of} }}\n"
            )
        };
        let channels: String = (0..CHANNELS).map(channel).collect();
        reference.to_owned() + &channels
    }
}

/// An endless stream of messages.
struct Stream {
    shape: Shape,
    count: u64,
}

impl Stream {
    fn next(&mut self) -> Message {
        self.count += 1;
        let now = SystemTime::UNIX_EPOCH.elapsed().unwrap().as_micros();
        // A reference value for all channels, once in a thousand readings of each.
        let every = 1000 * CHANNELS as u64 / self.shape.readings();
        if self.count.is_multiple_of(every) {
            return Message {
                topic: "lab".to_owned(),
                payload: format!("{{\"v\":1.0,\"t\":{now}}}"),
            };
        }
        let value = |turn: u64| 1.0 + 1e-4 * (turn * 7919 % 1000) as f64;
        match self.shape {
            Shape::Single => Message {
                topic: format!("plant/{}", self.count % CHANNELS as u64),
                payload: format!("{{\"v\":{},\"t\":{now}}}", value(self.count)),
            },
            Shape::Pack => {
                let mut payload = format!("[{{\"bt\":{}.{:06},", now / 1_000_000, now % 1_000_000);
                for place in 0..CHANNELS as u64 {
                    let begin = if place == 0 { "" } else { ",{" };
                    let value = value(self.count + place);
                    write!(payload, "{begin}\"n\":\"s{place}\",\"v\":{value}}}").unwrap();
                }
                payload.push(']');
                Message {
                    topic: "pack".to_owned(),
                    payload,
                }
            }
        }
    }
}

/// Who is fed.
struct Side<'a> {
    feeder: Feeder,
    stream: Stream,
    /// Readings taken so far.
    taken: Box<dyn Fn() -> u64 + 'a>,
    /// Seconds of the processor so far.
    cpu: Box<dyn Fn() -> f64 + 'a>,
    /// Readings, seconds, seconds of the processor, of all rounds.
    total: [f64; 3],
}

impl Side<'_> {
    /// Feeds for a while, and measures the second half on.
    fn round(&mut self, length: Duration) -> f64 {
        let readings = self.stream.shape.readings();
        let first = (self.taken)();
        let began = self.feeder.sent();
        let start = Instant::now();
        let mut measured: Option<(Instant, u64, f64)> = None;
        let mut asked = (start, first);
        while start.elapsed() < length {
            if asked.0.elapsed() > Duration::from_millis(5) {
                asked = (Instant::now(), (self.taken)());
            }
            if measured.is_none() && start.elapsed() > length / 4 {
                measured = Some((Instant::now(), (self.taken)(), (self.cpu)()));
            }
            let behind = (self.feeder.sent() - began) * readings;
            let is_far = behind.saturating_sub(asked.1 - first) > BEHIND * readings;
            let stream = &mut self.stream;
            if is_far || !self.feeder.publish(|| stream.next()) {
                std::thread::sleep(Duration::from_micros(100));
            }
        }
        let (since, before, cpu) = measured.unwrap();
        let (taken, seconds) = ((self.taken)() - before, since.elapsed().as_secs_f64());
        let spent = (self.cpu)() - cpu;
        for (total, more) in self.total.iter_mut().zip([taken as f64, seconds, spent]) {
            *total += more;
        }
        // The other side must not share the machine with what is left over here.
        let sent = (self.feeder.sent() - began) * readings;
        let limit = Instant::now() + Duration::from_secs(20);
        while (self.taken)() - first < sent * 99 / 100 && Instant::now() < limit {
            std::thread::sleep(Duration::from_millis(10));
        }
        taken as f64 / seconds
    }

    fn rate(&self) -> f64 {
        self.total[0] / self.total[1]
    }

    fn cpu_per_reading(&self) -> f64 {
        1e6 * self.total[2] / self.total[0]
    }
}

fn main() -> ExitCode {
    let mut met = true;
    for shape in [Shape::Single, Shape::Pack] {
        measure(shape, &mut met);
    }
    exit(met)
}

fn measure(shape: Shape, met: &mut bool) {
    let length = Duration::from_secs(number("SECONDS", 8));
    let brokers = [Mosquitto::start(), Mosquitto::start()];
    let bare = Bare::start(brokers[0].port);
    let daemon = Holdtrue::start(brokers[1].port, &shape.configuration());
    daemon.wait_log("subscribed");
    let record = daemon.newest_file();
    let inputs = || -> u64 {
        let query = "SELECT last_input FROM batches ORDER BY number DESC LIMIT 1";
        let mut statement = record.prepare_cached(query).unwrap();
        let last: i64 = statement.query_row([], |row| row.get(0)).unwrap();
        last.unsigned_abs()
    };
    let stat = format!("/proc/{}/stat", daemon.process());
    let side = |port, taken, cpu| Side {
        feeder: Feeder::connect(port),
        stream: Stream { shape, count: 0 },
        taken,
        cpu,
        total: [0.0; 3],
    };
    let readings = shape.readings();
    let mut sides = [
        side(
            brokers[0].port,
            Box::new(|| bare.count() * readings) as Box<dyn Fn() -> u64>,
            Box::new(|| bare.cpu()) as Box<dyn Fn() -> f64>,
        ),
        side(
            brokers[1].port,
            Box::new(&inputs),
            Box::new(|| cpu_seconds(&stat)),
        ),
    ];
    println!(
        "{} (load of the machine before: {})",
        match shape {
            Shape::Single => "one reading per message",
            Shape::Pack => "packs of 100 readings",
        },
        machine_load()
    );
    let opened = size(&daemon);
    for _ in 0..number("ROUNDS", 3) {
        let rates = sides.each_mut().map(|side| side.round(length));
        println!(
            "  readings/s: bare {:.0}, holdtrue {:.0}, {:.2} of it",
            rates[0],
            rates[1],
            rates[1] / rates[0]
        );
    }
    compare(shape, &sides, met);
    let bytes = (size(&daemon) - opened) as f64 / inputs() as f64;
    let what = format!("{bytes:.1} bytes per reading in the live file (at most {BYTES})");
    judge(&what, bytes <= BYTES, met);
}

/// Both sides over all rounds.
fn compare(shape: Shape, sides: &[Side<'_>; 2], met: &mut bool) {
    let [bare, holdtrue] = sides;
    println!(
        "  all rounds: bare {:.0} ({:.2} us of the processor per reading), holdtrue {:.0} \
         ({:.2} us)",
        bare.rate(),
        bare.cpu_per_reading(),
        holdtrue.rate(),
        holdtrue.cpu_per_reading()
    );
    match shape {
        Shape::Single => {
            let share = holdtrue.rate() / bare.rate();
            let what = format!("{share:.2} of the bare subscriber (at least {SHARE})");
            judge(&what, share >= SHARE, met);
        }
        Shape::Pack => {
            let what = format!("{:.0} readings/s (at least {PACKED})", holdtrue.rate());
            judge(&what, holdtrue.rate() >= PACKED, met);
        }
    }
}

/// Size of the record's newest file without its log, whose pages are written to the file later.
fn size(daemon: &Holdtrue) -> u64 {
    let file = daemon.newest_file();
    let page = |pragma: &str| -> i64 {
        let query = format!("PRAGMA {pragma}");
        file.query_row(&query, [], |row| row.get(0)).unwrap()
    };
    (page("page_count") * page("page_size")).unsigned_abs()
}
