//! Messages in, input events out: what each format says arrives exactly.

use crate::support::{Messages, RECEIVED, gate, reading, refused};
use holdtrue_engine::event::RefusedReason;

#[test]
fn a_plain_number_is_a_reading_at_its_arrival() {
    let messages = Messages::new(
        r#"indication = { topic = "a" }
           reference = { topic = "b" }"#,
    );
    for (payload, value) in [
        ("7.25", 7.25),
        (" 7.25\r\n", 7.25),
        ("-1e-3", -0.001),
        ("+.5", 0.5),
        ("1013", 1013.0),
        ("0.1000000000000000055511151231257827", 0.1),
    ] {
        assert_eq!(
            messages.take("a", payload),
            [reading("indication", RECEIVED, value)]
        );
        assert_eq!(
            messages.take("b", payload),
            [reading("reference", RECEIVED, value)]
        );
    }
    let zero = messages.take("a", "-0.0");
    assert!(
        format!("{zero:?}").contains("value: 0.0"),
        "no negative zero: {zero:?}"
    );
}

#[test]
fn json_values_are_found_by_pointer_with_their_times() {
    let messages = Messages::new(
        r#"indication = { topic = "a", value = "/d/0/v", time = "/d/0/at", sequence = "/n" }
           reference = { topic = "b", value = "", uncertainty = { each = 1 } }"#,
    );
    let payload =
        |at: &str| format!(r#"{{"n": 42, "d": [{{"v": 7.30, "at": {at}, "x": [{{}}]}}]}}"#);
    for (at, nanoseconds) in [
        ("\"2026-03-01T06:00:00Z\"", 1_772_344_800_000_000_000),
        (
            "\"2026-03-01T07:00:00.000000001+01:00\"",
            1_772_344_800_000_000_001,
        ),
        ("\"2026-03-01\"", 1_772_323_200_000_000_000),
        ("\"1980-02-05\"", 318_556_800_000_000_000),
        ("1772344800", 1_772_344_800_000_000_000),
        ("1772344800.123456789", 1_772_344_800_123_456_789),
        ("1.772344800123e9", 1_772_344_800_123_000_000),
        ("-5", -5_000_000_000),
    ] {
        let expected = reading("indication", nanoseconds, 7.3).replace("None", "Some(42)");
        assert_eq!(messages.take("a", &payload(at)), [expected], "{at}");
    }
    assert_eq!(
        messages.take("b", " 3.5 "),
        [reading("reference", RECEIVED, 3.5)],
        "no pointer"
    );
}

#[test]
fn times_may_count_other_units() {
    for (unit, number) in [
        ("s", "1772344800"),
        ("ms", "1772344800000"),
        ("us", "1772344800000000"),
        ("ns", "1772344800000000000"),
    ] {
        let messages = Messages::new(&format!(
            r#"indication = {{ topic = "a", value = "/v", time = "/t", time_unit = "{unit}" }}
               reference = {{ constant = 0 }}"#
        ));
        let expected = reading("indication", 1_772_344_800_000_000_000, 1.0);
        assert_eq!(
            messages.take("a", &format!(r#"{{"v":1,"t":{number}}}"#)),
            [expected],
            "{unit}"
        );
    }
}

#[test]
fn one_payload_may_tell_gate_reference_and_indication_in_this_order() {
    let messages = Messages::new(
        r#"indication = { topic = "a", value = "/v", time = "/t",
             status = { value = "/q", good = ["ok", 0] } }
           reference = { value = "/r" }"#,
    );
    let at = 1_000_000_000_000_000_000;
    assert_eq!(
        messages.take("a", r#"{"v": 1, "r": 2, "t": 1000000000, "q": "ok"}"#),
        [
            reading("reference", at, 2.0),
            reading("indication", at, 1.0)
        ]
    );
    for (status, excluded) in [
        ("\"ok\"", false),
        ("0", false),
        ("\"bad\"", true),
        ("null", true),
    ] {
        let payload = format!(r#"{{"v": 1, "r": 2, "t": 1000000000, "q": {status}}}"#);
        let told = &messages.take("a", &payload)[1];
        assert_eq!(
            told.contains("excluded: true"),
            excluded,
            "{status}: {told}"
        );
    }
    let absent = messages.take("a", r#"{"v": 1, "r": 2, "t": 1000000000}"#);
    assert!(
        absent[1].contains("excluded: true"),
        "no status is no good status: {absent:?}"
    );

    let gated = Messages::new(
        r#"indication = { topic = "a", value = "/v", time = "/t" }
           reference = { constant = 7,
             valid_when = { value = "/mode", equals = ["zero", 3, true] } }"#,
    );
    for (mode, open) in [
        ("\"zero\"", true),
        ("3.0", true),
        ("true", true),
        ("\"run\"", false),
        ("3.1", false),
    ] {
        let payload = format!(r#"{{"t": 1000000000, "v": 1, "mode": {mode}}}"#);
        assert_eq!(
            gated.take("a", &payload),
            [gate(at, open), reading("indication", at, 1.0)]
        );
    }
    let half = gated.take("a", r#"{"t": 1000000000, "v": 1}"#);
    assert_eq!(
        half,
        [
            refused("a", Some("reference"), RefusedReason::Missing),
            reading("indication", at, 1.0)
        ]
    );
}

#[test]
fn a_gate_may_have_a_topic_of_its_own_and_be_retained() {
    let messages = Messages::new(
        r#"indication = { topic = "a" }
           reference = { constant = 7, valid_when = { topic = "mode", equals = ["zero", 1] } }"#,
    );
    for (payload, open) in [
        ("zero", true),
        ("\"zero\"", true),
        ("1", true),
        ("run", false),
        ("ZERO", false),
    ] {
        assert_eq!(
            messages.take("mode", payload),
            [gate(RECEIVED, open)],
            "{payload}"
        );
        assert_eq!(
            messages.take_retained("mode", payload),
            [gate(RECEIVED, open)],
            "{payload}"
        );
    }
    let json = Messages::new(
        r#"indication = { topic = "a" }
           reference = { constant = 7,
             valid_when = { topic = "mode", value = "/m", time = "/t", equals = [true] } }"#,
    );
    let retained = json.take_retained("mode", r#"{"m": true, "t": "2026-01-01T00:00:00Z"}"#);
    assert_eq!(
        retained,
        [gate(1_767_225_600_000_000_000, true)],
        "its own time counts"
    );
}

#[test]
fn retained_values_are_the_brokers_memory_and_refused_once() {
    let messages = Messages::new(
        r#"indication = { topic = "a", value = "/v", time = "/t" }
           reference = { constant = 7, valid_when = { value = "/mode", equals = ["zero"] } }"#,
    );
    let payload = r#"{"v": 1, "t": 1000000000, "mode": "zero"}"#;
    let told = messages.take_retained("a", payload);
    assert_eq!(
        told,
        [refused("a", Some("indication"), RefusedReason::Retained)],
        "and its gate"
    );
    let both = Messages::new(
        r#"indication = { topic = "a", value = "/v", time = "/t" }
           reference = { constant = 7,
             valid_when = { topic = "a", value = "/mode", time = "/t", equals = ["zero"] } }"#,
    );
    assert_eq!(
        both.take_retained("a", payload),
        [
            gate(1_000_000_000_000_000_000, true),
            refused("a", Some("indication"), RefusedReason::Retained)
        ],
        "a gate declared with its topic is a state of its own"
    );
}
