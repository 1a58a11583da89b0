//! A load on the broker: stamped readings of many channels at a steady rate, and a memory of which
//! of them the broker acknowledged, and when.

use rumqttc::{AsyncClient, Event, EventLoop, Incoming, MqttOptions, Outgoing, QoS};
use std::collections::{BTreeMap, VecDeque};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};
use std::thread::JoinHandle;
use std::time::{Duration, Instant, SystemTime};

/// Messages on the way to the broker at most.
const ON_THE_WAY: usize = 90;

/// A channel's name.
pub(crate) fn channel(place: usize) -> String {
    format!("load/{place}")
}

/// One configured channel for each place, with a constant reference.
pub(crate) fn channels(count: usize, rest: &str) -> String {
    let one = |place| {
        format!(
            "[[channel]]\nname = \"{}\"\nunit = \"V\"\n\
             reference = {{ constant = 1.0, uncertainty = {{ each = 0.001 }} }}\n\
             indication = {{ topic = \"plant/{place}\", value = \"/v\", time = \"/t\", \
             time_unit = \"us\", sequence = \"/n\" }}\n{rest}\n",
            channel(place)
        )
    };
    (0..count).map(one).collect()
}

/// A reading as it was published.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Stamped {
    /// Microseconds since 1970.
    pub(crate) time: i64,
    pub(crate) value: f64,
}

/// What was published and what the broker said to it.
#[derive(Debug)]
pub(crate) struct Log {
    /// By channel, then in the order of the running number, which counts from 0.
    pub(crate) published: Vec<Vec<Stamped>>,
    /// By channel and running number: when the broker acknowledged it.
    pub(crate) acknowledged: BTreeMap<(usize, usize), Instant>,
    /// When a connection was found to be lost, after the last acknowledgement on it.
    pub(crate) lost: Vec<Instant>,
    /// From the first message to the last acknowledgement.
    pub(crate) took: Duration,
}

/// A publisher at work in a thread of its own.
pub(crate) struct Load {
    stop: Arc<AtomicBool>,
    acknowledged: Arc<AtomicU64>,
    thread: JoinHandle<Log>,
}

impl Load {
    /// Publishes `rate` readings a second, the channels in turn, until it is told to end.
    pub(crate) fn start(port: u16, channels: usize, rate: u32) -> Self {
        let (stop, acknowledged) = (Arc::default(), Arc::default());
        let sender = Sender::new(port, channels, rate, Arc::clone(&acknowledged));
        let told = Arc::clone(&stop);
        let thread = std::thread::spawn(move || {
            tokio::runtime::Builder::new_current_thread()
                .enable_all()
                .build()
                .unwrap()
                .block_on(sender.work(&told))
        });
        Self {
            stop,
            acknowledged,
            thread,
        }
    }

    /// How many readings the broker has acknowledged so far.
    pub(crate) fn acknowledged(&self) -> u64 {
        self.acknowledged.load(Ordering::Relaxed)
    }

    /// Ends it, once everything on the way has been answered.
    pub(crate) fn finish(self) -> Log {
        self.stop.store(true, Ordering::Relaxed);
        self.thread.join().unwrap()
    }
}

struct Sender {
    client: AsyncClient,
    events: EventLoop,
    rate: u32,
    log: Log,
    /// Handed to the client.
    unsent: VecDeque<(usize, usize)>,
    /// By packet number.
    on_the_way: BTreeMap<u16, (usize, usize)>,
    count: Arc<AtomicU64>,
}

impl Sender {
    fn new(port: u16, channels: usize, rate: u32, count: Arc<AtomicU64>) -> Self {
        let mut options = MqttOptions::new("load", "127.0.0.1", port);
        options
            .set_clean_session(true)
            .set_keep_alive(Duration::from_secs(5));
        let (client, events) = AsyncClient::new(options, ON_THE_WAY);
        Self {
            client,
            events,
            rate,
            log: Log {
                published: vec![Vec::new(); channels],
                acknowledged: BTreeMap::new(),
                lost: Vec::new(),
                took: Duration::ZERO,
            },
            unsent: VecDeque::new(),
            on_the_way: BTreeMap::new(),
            count,
        }
    }

    async fn work(mut self, stop: &AtomicBool) -> Log {
        let began = Instant::now();
        let mut made = 0_u64;
        let mut pulse = tokio::time::interval(Duration::from_millis(5));
        loop {
            let ending = stop.load(Ordering::Relaxed);
            if ending && self.unsent.is_empty() && self.on_the_way.is_empty() {
                self.log.took = began.elapsed();
                return self.log;
            }
            let due = began.elapsed().as_micros() * u128::from(self.rate) / 1_000_000;
            while !ending && u128::from(made) < due && self.publish_next(made) {
                made += 1;
            }
            tokio::select! {
                event = self.events.poll() => match event {
                    Ok(event) => self.note(&event),
                    Err(_) => self.forget_the_way().await,
                },
                _ = pulse.tick() => {}
            }
        }
    }

    /// Whether there was room for it.
    fn publish_next(&mut self, turn: u64) -> bool {
        if self.unsent.len() + self.on_the_way.len() >= ON_THE_WAY {
            return false;
        }
        let count = self.log.published.len();
        let place = usize::try_from(turn).unwrap() % count;
        let number = self.log.published[place].len();
        let reading = stamped(place, number, self.log.published[place].last());
        let payload = format!(
            "{{\"v\":{:?},\"t\":{},\"n\":{number}}}",
            reading.value, reading.time
        );
        let topic = format!("plant/{place}");
        let handed = self
            .client
            .try_publish(topic, QoS::AtLeastOnce, false, payload);
        if handed.is_ok() {
            self.log.published[place].push(reading);
            self.unsent.push_back((place, number));
        }
        handed.is_ok()
    }

    fn note(&mut self, event: &Event) {
        match event {
            Event::Outgoing(Outgoing::Publish(packet)) => {
                let reading = self.unsent.pop_front().unwrap();
                self.on_the_way.insert(*packet, reading);
            }
            Event::Incoming(Incoming::PubAck(answer)) => {
                if let Some(reading) = self.on_the_way.remove(&answer.pkid) {
                    self.log.acknowledged.insert(reading, Instant::now());
                    self.count.fetch_add(1, Ordering::Relaxed);
                }
            }
            _ => {}
        }
    }

    /// Of what was on its way when a connection broke, nobody knows. The client must not send it
    /// again.
    async fn forget_the_way(&mut self) {
        self.log.lost.push(Instant::now());
        self.events.clean();
        self.events.pending.clear();
        self.events.state.events.clear();
        self.unsent.clear();
        self.on_the_way.clear();
        tokio::time::sleep(Duration::from_millis(20)).await;
    }
}

/// The next reading of a channel, now: a slow drift of its own and a jitter that no fit explains.
fn stamped(place: usize, number: usize, before: Option<&Stamped>) -> Stamped {
    let now = SystemTime::UNIX_EPOCH.elapsed().unwrap().as_micros();
    let now = i64::try_from(now).unwrap();
    let turn = number as f64;
    let drift = 1e-5 * place as f64 * turn;
    let jitter = (12.9898 * turn + 78.233 * place as f64).sin() * 43_758.545_3;
    Stamped {
        // Each reading is known by its time.
        time: before.map_or(now, |before| now.max(before.time + 1)),
        value: 1.0 + drift + 0.01 * jitter.fract(),
    }
}
