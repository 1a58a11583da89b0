//! Any bytes on any kind of topic become inputs with finite values; every message leaves a trace.

#![no_main]

use holdtrue::configuration;
use holdtrue::payload::Intake;
use holdtrue_engine::event::Input;
use holdtrue_engine::time::Timestamp;
use libfuzzer_sys::fuzz_target;
use std::path::Path;
use std::sync::OnceLock;

/// One topic of each kind: plain number, JSON with everything that belongs to it, SenML.
const CONFIGURATION: &str = r#"
[node]
name = "n"
[broker]
url = "mqtt://127.0.0.1"
[[channel]]
name = "json"
unit = "m"
indication = { topic = "json", value = "/v", time = "/a/0/t", sequence = "/n",
    status = { value = "/q", good = ["ok", 0] } }
reference = { constant = 0, valid_when = { value = "/m", equals = ["zero", true, 1] } }
[[channel]]
name = "senml"
unit = "m"
indication = { topic = "senml", senml = "a",
    status = { senml = "ok", good = [true, 1, "x"] } }
reference = { senml = "b", sum = true }
[[channel]]
name = "plain"
unit = "m"
indication = { topic = "plain" }
reference = { constant = 0, valid_when = { topic = "gate", equals = ["on", 1, true] } }
"#;

/// 2026-03-01T12:00:00Z.
const RECEIVED: Timestamp = Timestamp(1_772_366_400_000_000_000);

fn intake() -> &'static Intake {
    static INTAKE: OnceLock<Intake> = OnceLock::new();
    INTAKE.get_or_init(|| {
        match configuration::from_text(CONFIGURATION, "", Path::new(""), RECEIVED) {
            Ok(read) => Intake::new(&read.intake),
            Err(problems) => panic!("{problems}"),
        }
    })
}

fuzz_target!(|payload: &[u8]| {
    for topic in ["json", "senml", "plain", "gate", "unknown"] {
        let mut inputs = Vec::new();
        intake().take(topic, payload, false, RECEIVED, &mut inputs);
        assert!(!inputs.is_empty(), "a message on {topic} left no trace");
        for input in inputs {
            match input {
                Input::Reading(reading) => assert!(reading.value.is_finite()),
                Input::Refused(refused) => assert!(refused.detail.len() < 2000),
                _ => {}
            }
        }
    }
});
