//! Any bytes as an order, live: always recorded, always answered, and what is refused changes
//! nothing.

#![no_main]

use holdtrue::configuration;
use holdtrue::payload::{OrderIntake, OrderMessage};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, ReplyTo};
use holdtrue_engine::time::Timestamp;
use libfuzzer_sys::fuzz_target;
use std::path::Path;
use std::sync::OnceLock;

const CONFIGURATION: &str = r#"
[node]
name = "n"
[broker]
url = "mqtt://127.0.0.1"
[[reference]]
name = "lab"
topic = "lab"
[[channel]]
name = "a"
unit = "m"
indication = { topic = "a" }
reference = "lab"
"#;

/// 2026-03-01T12:00:00Z.
const RECEIVED: Timestamp = Timestamp(1_772_366_400_000_000_000);

/// An engine that knows a channel and a reference.
fn engine() -> Engine {
    static ENGINE: OnceLock<Engine> = OnceLock::new();
    let ready = || match configuration::from_text(CONFIGURATION, "", Path::new(""), RECEIVED) {
        Ok(read) => {
            let mut engine = Engine::new();
            engine.step(&Input::Setup(Box::new(read.setup)), &mut Vec::new());
            engine
        }
        Err(problems) => panic!("{problems}"),
    };
    ENGINE.get_or_init(ready).clone()
}

fuzz_target!(|payload: &[u8]| {
    let reply = ReplyTo {
        topic: String::from_utf8_lossy(payload).into_owned(),
        correlation: Some(payload.to_vec()),
    };
    let message = OrderMessage {
        verb: "service",
        payload,
        retained: false,
        reply_to: Some(&reply),
    };
    let order = OrderIntake::new("n").take(&message, RECEIVED);
    let order = order.expect("only an empty retained message is no order");
    let mut engine = engine();
    let before = engine.state().clone();
    let mut said = Vec::new();
    engine.step(&order, &mut said);
    let answers: Vec<_> = said
        .iter()
        .filter_map(|output| match output {
            Output::Answer(answer) => Some(answer),
            _ => None,
        })
        .collect();
    assert_eq!(answers.len(), 1, "answered once");
    assert_eq!(answers[0].accepted, answers[0].problems.is_empty());
    if !answers[0].accepted {
        assert!(*engine.state() == before, "a refused order changes nothing");
    }
});
