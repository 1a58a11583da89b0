//! One channel as it is configured by default, fed through the engine's door, and beside it the
//! fit alone: what the judgement of an error costs per pair.

use crate::Stream;
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, Reading, Source};
use holdtrue_engine::fit::{Fit, Row};
use holdtrue_engine::setup::{
    AlarmSetup, ChannelId, ChannelInfluence, ChannelSetup, Clock, Criterion, DecisionRule,
    FitSetup, InfluenceId, InfluenceSetup, PairNoise, PublishSetup, ReferenceId, ReferenceKind,
    ReferenceSetup, ScreeningSetup, Setup, Stamped, WindowLength,
};
use holdtrue_engine::time::{Duration, Timestamp};
use std::hint::black_box;

const DAY: i64 = 86_400;
const START: i64 = 1_767_225_600_000_000_000;

/// What is configured, and how often there is a pair.
#[derive(Clone, Copy, Debug)]
pub struct Case {
    /// In words.
    pub name: &'static str,
    /// Seconds between pairs.
    pub spacing: i64,
    /// With a span of degree 1 and one influence quantity; the default has neither.
    pub beyond_default: bool,
}

impl Case {
    /// Pairs in a full window, the default one of 30 days.
    #[must_use]
    pub fn pairs(&self) -> usize {
        usize::try_from(30 * DAY / self.spacing).expect("positive")
    }
}

/// The engine with one channel, the same fit alone, and the stream of their pairs.
pub struct Peers {
    case: Case,
    engine: Engine,
    outputs: Vec<Output>,
    fit: Fit,
    errors: Stream,
    next: i64,
}

impl Peers {
    /// Nothing fed yet.
    #[must_use]
    pub fn new(case: Case) -> Self {
        let setup = setup(case);
        let fit = Fit::new(setup.channels[0].fit);
        let mut engine = Engine::new();
        engine.step(&Input::Setup(Box::new(setup)), &mut Vec::new());
        Self {
            case,
            engine,
            outputs: Vec::new(),
            fit,
            errors: Stream::default(),
            next: 0,
        }
    }

    /// The next pairs, as inputs of the engine and as rows of the fit.
    pub fn pairs(&mut self, count: usize) -> (Vec<Input>, Vec<Row>) {
        let (mut inputs, mut rows) = (Vec::new(), Vec::new());
        for (_, error) in self.errors.by_ref().take(count) {
            let place = self.next;
            self.next += 1;
            let time = Timestamp(START + place * self.case.spacing * 1_000_000_000);
            let turn = place as f64;
            // Without a span the reference is a constant, 0, and told by the configuration.
            let (x, warmth) = if self.case.beyond_default {
                (20.0 + (0.618 * turn).sin(), 15.0 + (0.0371 * turn).sin())
            } else {
                (0.0, 0.0)
            };
            let error = if self.case.beyond_default {
                error - 0.2 * (x - 20.0) + 0.2 * (warmth - 15.0)
            } else {
                error
            };
            if self.case.beyond_default {
                inputs.push(reading(Source::Influence(InfluenceId(0)), time, warmth));
                inputs.push(reading(Source::Reference(ReferenceId(0)), time, x));
            }
            inputs.push(reading(Source::Indication(ChannelId(0)), time, x + error));
            rows.push(Row {
                time,
                error,
                weight: 1.0,
                x,
                influences: [warmth, 0.0],
            });
        }
        (inputs, rows)
    }

    /// Everything: pairing, screening, fit, breaks, judgement, outlook.
    pub fn through_engine(&mut self, inputs: &[Input]) {
        for input in inputs {
            self.outputs.clear();
            self.engine.step(input, &mut self.outputs);
            black_box(&self.outputs);
        }
    }

    /// The fit alone: what it expects, the row, and the announced model where segments closed.
    pub fn through_fit(&mut self, rows: &[Row]) {
        for row in rows {
            black_box(self.fit.predict(row.time, row.x, row.influences));
            if self.fit.insert(*row).closed {
                black_box(self.fit.decide(true));
            }
        }
    }
}

pub(crate) fn reading(source: Source, time: Timestamp, value: f64) -> Input {
    Input::Reading(Reading {
        source,
        received: time,
        phenomenon: time,
        value,
        sequence: None,
        excluded: false,
    })
}

/// The defaults of the configuration, with a limit so that there is an outlook.
pub(crate) fn setup(case: Case) -> Setup {
    let seconds = Duration::from_seconds;
    let kind = if case.beyond_default {
        ReferenceKind::Measured
    } else {
        ReferenceKind::Constant {
            value: 0.0,
            gated: false,
        }
    };
    let reference = ReferenceSetup {
        name: "lab".to_owned(),
        kind,
        uncertainty_each: 0.0,
        uncertainty_common: 0.0,
        certificate: None,
        expires: None,
        expiry_notice: seconds(30 * DAY),
        stale_after: None,
        stands_for: Duration::ZERO,
        stamped: Stamped::End,
    };
    let influences = vec![ChannelInfluence {
        source: InfluenceId(0),
        name: "temperature".to_owned(),
        unit: None,
    }];
    let channel = ChannelSetup {
        name: "channel".to_owned(),
        unit: "pH".to_owned(),
        reference: ReferenceId(0),
        influences: if case.beyond_default {
            influences
        } else {
            Vec::new()
        },
        lag: Duration::ZERO,
        lateness: seconds(10),
        max_gap: seconds(15 * 60),
        fit: FitSetup {
            window: WindowLength::Time(seconds(30 * DAY)),
            segments: 64,
            max_degree: 2,
            forced_degree: None,
            criterion: Criterion::Bic,
            max_span_degree: case.beyond_default.then_some(1),
            influences: u8::from(case.beyond_default),
            noise: PairNoise {
                reference: 0.001,
                indication: 0.0,
            },
        },
        screening: ScreeningSetup {
            enabled: true,
            range: None,
            gate: 5.0,
            lock_out_after: 5,
            stuck: None,
            max_rate: None,
        },
        steps: Some(4.0),
        max_permissible_error: Some(30.0),
        decision_rule: DecisionRule::GuardBand { multiple: 1.0 },
        service_horizon: seconds(14 * DAY),
        resolution: 0.0,
        noise: 0.0,
        max_drift_rate: None,
        max_correction: None,
        max_correction_rate: None,
        hold_limit: None,
        coverage: 0.95,
        publish: PublishSetup {
            step: 0.25,
            max_age: seconds(DAY),
            ..PublishSetup::default()
        },
        alarms: AlarmSetup {
            delay: 3,
            deadband: 1.0,
            gap_after: None,
        },
        corrected_values: false,
        monitor_only: false,
    };
    Setup {
        node: "bench".to_owned(),
        clock: Clock::Readings,
        fingerprint: "00".repeat(32),
        references: vec![reference],
        influences: if case.beyond_default {
            vec![InfluenceSetup {
                name: "hall /t".to_owned(),
            }]
        } else {
            Vec::new()
        },
        channels: vec![channel],
    }
}
