//! SenML packs are resolved as RFC 8428 says: examples of its section 5.1, check values V40 to V43.

use crate::support::{Messages, RECEIVED, RECEIVED_SECONDS, reading, refused};
use holdtrue_engine::event::RefusedReason;

/// Two records, `voltage` and `current` of one device.
fn device(extra: &str) -> Messages {
    Messages::new(&format!(
        r#"indication = {{ topic = "a", senml = "urn:dev:ow:10e2073a0108006:voltage"{extra} }}
           reference = {{ topic = "a", senml = "urn:dev:ow:10e2073a0108006:current" }}"#
    ))
}

/// One record, `t`.
fn single(extra: &str) -> Messages {
    Messages::new(&format!(
        r#"indication = {{ topic = "a", senml = "t"{extra} }}
           reference = {{ constant = 0 }}"#
    ))
}

/// V41.
#[test]
fn base_fields_and_relative_times_are_resolved_in_order_of_time() {
    let pack = r#"[
        {"bn":"urn:dev:ow:10e2073a0108006:","bt":1.276020076001e+09,"bu":"A","bver":5,
         "n":"voltage","u":"V","v":120.1},
        {"n":"current","t":-5,"v":1.2},
        {"n":"current","t":-4,"v":1.3},
        {"n":"current","t":-3,"v":1.4},
        {"n":"elsewhere","t":-3,"vs":"ignored"}
    ]"#;
    assert_eq!(
        device("").take("a", pack),
        [
            reading("reference", 1_276_020_071_001_000_000, 1.2),
            reading("reference", 1_276_020_072_001_000_000, 1.3),
            reading("reference", 1_276_020_073_001_000_000, 1.4),
            reading("indication", 1_276_020_076_001_000_000, 120.1),
        ]
    );
}

/// V42.
#[test]
fn records_have_their_own_units() {
    let pack = r#"[{"bn":"urn:dev:ow:10e2073a01080063","bt":1.320067464e+09,"bu":"%RH","v":20},
        {"u":"lon","v":24.30621},{"u":"lat","v":60.07965},
        {"t":60,"v":20.3},{"u":"%EL","t":150,"v":98}]"#;
    let with = |unit: &str| {
        Messages::new(&format!(
            r#"indication = {{ topic = "a",
                 senml = "urn:dev:ow:10e2073a01080063", senml_unit = "{unit}" }}
               reference = {{ constant = 0 }}"#
        ))
    };
    let wrong = || refused("a", Some("indication"), RefusedReason::WrongType);
    // Refusals stand where their records stand in time; 2011-10-31T13:24:24Z is 1320067464.
    assert_eq!(
        with("%RH").take("a", pack),
        [
            reading("indication", 1_320_067_464_000_000_000, 20.0),
            wrong(),
            wrong(),
            reading("indication", 1_320_067_524_000_000_000, 20.3),
            wrong(),
        ]
    );
    assert_eq!(
        with("%EL").take("a", pack)[4],
        reading("indication", 1_320_067_614_000_000_000, 98.0)
    );
}

/// V40, V43.
#[test]
fn times_below_2_to_the_28_count_from_now() {
    let messages = single("");
    for (record, nanoseconds) in [
        (r#"{"n":"t","v":1}"#.to_owned(), RECEIVED),
        (
            r#"{"n":"t","t":-30,"v":1}"#.to_owned(),
            RECEIVED - 30_000_000_000,
        ),
        (
            r#"{"n":"t","t":0.5,"v":1}"#.to_owned(),
            RECEIVED + 500_000_000,
        ),
        (
            r#"{"n":"t","t":268435455.999999999,"v":1}"#.to_owned(),
            RECEIVED + 268_435_455_999_999_999,
        ),
        (
            r#"{"n":"t","t":268435456,"v":1}"#.to_owned(),
            268_435_456_000_000_000,
        ),
        (
            format!(r#"{{"n":"t","bt":{RECEIVED_SECONDS},"t":-10,"v":1}}"#),
            RECEIVED - 10_000_000_000,
        ),
        (
            r#"{"n":"t","bt":1320067464.000000001,"t":0.5,"v":1}"#.to_owned(),
            1_320_067_464_500_000_001,
        ),
    ] {
        let told = messages.take("a", &format!("[{record}]"));
        assert_eq!(told, [reading("indication", nanoseconds, 1.0)], "{record}");
    }
}

/// V43.
#[test]
fn base_value_and_base_sum_are_added() {
    let pack = r#"[{"bn":"x","bv":20,"bs":100},{"bn":"t","v":0.5,"s":3},{"v":-1}]"#;
    let told = |extra: &str| single(extra).take("a", pack);
    let value = |value| reading("indication", RECEIVED, value);
    assert_eq!(told(""), [value(20.5), value(19.0)]);
    assert_eq!(
        told(", sum = true"),
        [value(103.0), value(100.0)],
        "a missing sum counts as zero"
    );
}

#[test]
fn status_records_of_the_same_pack_exclude() {
    let messages = single(", status = { senml = \"ok\", good = [true, \"fine\", 1] }");
    let excluded = |pack: &str| -> Vec<bool> {
        messages
            .take("a", pack)
            .iter()
            .map(|told| told.contains("excluded: true"))
            .collect()
    };
    assert_eq!(
        excluded(r#"[{"n":"t","v":1},{"n":"ok","vb":true}]"#),
        [false]
    );
    assert_eq!(
        excluded(r#"[{"n":"t","v":1},{"n":"ok","vb":false}]"#),
        [true]
    );
    assert_eq!(
        excluded(r#"[{"n":"t","v":1},{"n":"ok","vs":"fine"}]"#),
        [false]
    );
    assert_eq!(excluded(r#"[{"n":"t","v":1},{"n":"ok","v":1}]"#), [false]);
    assert_eq!(
        excluded(r#"[{"n":"t","v":1}]"#),
        [true],
        "no status is no good status"
    );
    let in_force = r#"[{"n":"ok","t":-10,"vb":true},{"n":"t","t":-9,"v":1},
                       {"n":"ok","t":-5,"vb":false},{"n":"t","t":-4,"v":2},
                       {"n":"t","t":-11,"v":3}]"#;
    assert_eq!(
        excluded(in_force),
        [false, false, true],
        "the latest up to the record's time"
    );
}

#[test]
fn gates_may_be_records() {
    let messages = Messages::new(
        r#"indication = { topic = "a", senml = "t" }
           reference = { constant = 7,
             valid_when = { senml = "mode", equals = ["zero", true, 2] } }"#,
    );
    for (field, open) in [
        (r#""vs":"zero""#, true),
        (r#""vb":true"#, true),
        (r#""v":2"#, true),
        (r#""v":3"#, false),
        (r#""vb":false"#, false),
    ] {
        let told = messages.take(
            "a",
            &format!(r#"[{{"n":"t","v":1}},{{"n":"mode",{field}}}]"#),
        );
        assert_eq!(told.len(), 2);
        assert_eq!(
            told[0],
            crate::support::gate(RECEIVED, open),
            "{field}: gates come first"
        );
    }
}

#[test]
fn what_must_not_be_used_is_refused_with_its_reason() {
    use RefusedReason::{BadTime, Missing, NotFinite, Unreadable, WrongType};
    let messages = single("");
    let whole = |pack: &str| {
        let told = messages.take("a", pack);
        assert_eq!(told.len(), 1, "{pack}: {told:?}");
        crate::support::reason(&told[0])
    };
    for (pack, reason) in [
        // Labels that must be understood, versions (RFC 8428 section 4.4).
        (r#"[{"n":"t","v":1},{"n":"u","v":1,"x_":0}]"#, Unreadable),
        (r#"[{"n":"t","v":1,"bver":11}]"#, Unreadable),
        (r#"[{"n":"t","v":1,"bver":0}]"#, Unreadable),
        (r#"[{"n":"t","v":1,"bver":"10"}]"#, Unreadable),
        // Not a pack.
        (r#"{"n":"t","v":1}"#, WrongType),
        ("[1]", WrongType),
        (r#"[{"n":"t","v":1}"#, Unreadable),
        (r#"[{"n":"t","v":NaN}]"#, NotFinite),
        // Base fields that cannot be read.
        (r#"[{"bn":5},{"n":"t","v":1}]"#, WrongType),
        (r#"[{"bt":"now"},{"n":"t","v":1}]"#, WrongType),
        (r#"[{"bv":1e400},{"n":"t","v":1}]"#, NotFinite),
        // The wanted record.
        ("[]", Missing),
        (r#"[{"n":"u","v":1}]"#, Missing),
        (r#"[{"bn":"t"}]"#, Missing),
        (r#"[{"n":"t"}]"#, WrongType),
        (r#"[{"n":"t","vs":"1"}]"#, WrongType),
        (r#"[{"n":"t","v":"1"}]"#, WrongType),
        (r#"[{"n":"t","v":null}]"#, WrongType),
        (r#"[{"n":"t","v":1e400}]"#, NotFinite),
        (r#"[{"n":"t","v":1e308,"bv":1e308}]"#, NotFinite),
        (r#"[{"n":"t","v":1,"t":"now"}]"#, WrongType),
        (r#"[{"n":"t","v":1,"t":1e30}]"#, BadTime),
    ] {
        assert_eq!(whole(pack), reason, "{pack}");
    }
    for sound in [
        r#"[{"n":"t","v":1,"bver":10}]"#,
        r#"[{"n":"t","v":1,"bver":26}]"#,
        r#"[{"n":"t","v":1,"unknown":{"a":[1]}}]"#,
        r#"[{"n":"t","v":1,"ut":60,"s":2}]"#,
        r#"[{"n":"t","v":1},{"n":"u","v":1e400},{"n":"w","v":"x"}]"#,
    ] {
        let told = messages.take("a", sound);
        assert_eq!(told, [reading("indication", RECEIVED, 1.0)], "{sound}");
    }
}

#[test]
fn a_bad_record_does_not_take_the_others_with_it() {
    let pack = r#"[{"n":"t","t":-3,"v":1},{"n":"t","t":-2,"v":1e400},{"n":"t","t":-1,"v":3}]"#;
    assert_eq!(
        single("").take("a", pack),
        [
            reading("indication", RECEIVED - 3_000_000_000, 1.0),
            refused("a", Some("indication"), RefusedReason::NotFinite),
            reading("indication", RECEIVED - 1_000_000_000, 3.0),
        ]
    );
}
