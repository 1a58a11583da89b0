//! The demo: the whole chain over real MQTT holds an invented plant true, and says so; what is not
//! so, it names.

#![cfg(feature = "demo")]

use holdtrue::demo::{self, DemoError, DemoOptions};

fn options(days: f64, seed: u64) -> DemoOptions {
    DemoOptions {
        days: Some(days),
        seed,
        record: None,
        json: false,
        expect_the_impossible: false,
    }
}

#[test]
fn a_short_run_is_held_true() {
    assert!(demo::run(&options(20.0, 1)).expect("every part works"));
}

#[test]
fn an_alarm_that_never_comes_makes_the_answer_no() {
    let options = DemoOptions {
        expect_the_impossible: true,
        ..options(20.0, 2)
    };
    assert!(!demo::run(&options).expect("every part works"));
}

#[test]
fn lengths_that_make_no_sense_are_refused() {
    for days in [0.0, 19.9, 121.0, f64::NAN, f64::INFINITY] {
        let refused = demo::run(&options(days, 1));
        assert!(matches!(refused, Err(DemoError::Usage(_))), "{days}");
    }
}
