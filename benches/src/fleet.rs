//! A fleet whose readings are mostly plain ones: an indication a second from each sensor, and a
//! value of its own reference an hour, which makes the pair.

use crate::channel::{Case, reading, setup};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, Source};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceId, ReferenceKind};
use holdtrue_engine::time::{Duration, Timestamp};
use std::hint::black_box;

const HOUR: i64 = 3600;
const START: i64 = 1_700_000_000;

/// What is asked of the fleet beside the defaults.
#[derive(Clone, Copy, Debug)]
pub struct Fleet {
    /// How it is told.
    pub name: &'static str,
    pub clock: Clock,
    /// Whether silence is watched, so that every reading postpones an alarm.
    pub watches_silence: bool,
    pub channels: u32,
}

/// The engine and the seconds told to it so far.
pub struct Running {
    fleet: Fleet,
    engine: Engine,
    outputs: Vec<Output>,
    second: i64,
}

impl Running {
    #[must_use]
    pub fn new(fleet: Fleet) -> Self {
        let mut setup = setup(Case {
            name: "",
            spacing: 1,
            beyond_default: false,
        });
        setup.clock = fleet.clock;
        let (reference, channel) = (setup.references.remove(0), setup.channels.remove(0));
        for place in 0..fleet.channels {
            let mut reference = reference.clone();
            reference.name = format!("reference {place}");
            reference.kind = ReferenceKind::Measured;
            let mut channel = channel.clone();
            channel.name = format!("channel {place}");
            channel.reference = ReferenceId(place);
            if fleet.watches_silence {
                reference.stale_after = Some(Duration::from_seconds(4 * HOUR));
                channel.alarms.gap_after = Some(Duration::from_seconds(HOUR));
            }
            setup.references.push(reference);
            setup.channels.push(channel);
        }
        let mut engine = Engine::new();
        engine.step(&Input::Setup(Box::new(setup)), &mut Vec::new());
        Self {
            fleet,
            engine,
            outputs: Vec::new(),
            second: 0,
        }
    }

    /// The readings of the next seconds.
    pub fn readings(&mut self, seconds: i64) -> Vec<Input> {
        let mut inputs = Vec::new();
        for second in self.second..self.second + seconds {
            for place in 0..self.fleet.channels {
                // A second is shared out among the sensors.
                let share = 1_000_000_000 / i64::from(self.fleet.channels) * i64::from(place);
                let time = Timestamp((START + second) * 1_000_000_000 + share);
                let level = 20.0 + (1e-4 * second as f64).sin();
                let noise = (second as f64 * 0.618_033_988_749_895 + f64::from(place)).fract();
                let indication = Source::Indication(ChannelId(place));
                inputs.push(reading(indication, time, level + noise));
                if (second + i64::from(place) * 7) % HOUR == 0 {
                    let reference = Source::Reference(ReferenceId(place));
                    inputs.push(reading(reference, time, level));
                }
            }
        }
        self.second += seconds;
        inputs
    }

    /// Steps the engine; how many pairs came of it.
    pub fn run(&mut self, inputs: &[Input]) -> usize {
        let mut pairs = 0;
        for input in inputs {
            self.outputs.clear();
            self.engine.step(input, &mut self.outputs);
            let told = black_box(&self.outputs).iter();
            pairs += told.filter(|it| matches!(it, Output::Pair(_))).count();
        }
        pairs
    }
}
