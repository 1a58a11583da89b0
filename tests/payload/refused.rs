//! Bad input: each kind is refused with its reason and a helpful detail, one refusal a message
//! where the message as a whole is bad, and nothing ever panics.

use crate::support::{Messages, RECEIVED, reading, reason, refused};
use holdtrue_engine::event::Input;
use holdtrue_engine::event::RefusedReason::{
    self, BadTime, Empty, Missing, NotFinite, Unreadable, WrongType,
};
use proptest::prelude::*;

fn json() -> Messages {
    Messages::new(
        r#"indication = { topic = "a", value = "/v", time = "/t", sequence = "/n" }
           reference = { topic = "b" }"#,
    )
}

/// Payload on a topic that is read as JSON, the reason, and a part of the detail.
const GARBAGE: &[(&str, RefusedReason, &str)] = &[
    ("", Empty, "empty"),
    ("  \n", Empty, "blanks"),
    ("{\"v\": 1", Unreadable, "EOF"),
    ("nonsense", Unreadable, "\\\"nonsense\\\""),
    ("{\"v\": 1, \"t\": 1, \"n\": 1} x", Unreadable, "trailing"),
    ("{\"v\": NaN, \"t\": 1, \"n\": 1}", NotFinite, "NaN"),
    (
        "{\"v\": -Infinity, \"t\": 1, \"n\": 1}",
        NotFinite,
        "-Infinity",
    ),
    ("{\"v\": 1e400, \"t\": 1, \"n\": 1}", NotFinite, "1e400"),
    ("{\"x\": 1, \"t\": 1, \"n\": 1}", Missing, "/v"),
    ("[1, 2]", Missing, "/v"),
    ("5", Missing, "/v"),
    ("{\"v\": 1, \"n\": 1}", Missing, "/t"),
    ("{\"v\": 1, \"t\": 1}", Missing, "/n"),
    (
        "{\"v\": \"1\", \"t\": 1, \"n\": 1}",
        WrongType,
        "not a number",
    ),
    ("{\"v\": null, \"t\": 1, \"n\": 1}", WrongType, "null"),
    ("{\"v\": [1], \"t\": 1, \"n\": 1}", WrongType, "[1]"),
    (
        "{\"v\": 1, \"t\": 1, \"n\": 1.5}",
        WrongType,
        "whole number",
    ),
    (
        "{\"v\": 1, \"t\": 1, \"n\": 99999999999999999999}",
        WrongType,
        "whole number",
    ),
    ("{\"v\": 1, \"t\": \"noon\", \"n\": 1}", BadTime, "noon"),
    (
        "{\"v\": 1, \"t\": \"2026-01-01T00:00:00\", \"n\": 1}",
        BadTime,
        "offset",
    ),
    ("{\"v\": 1, \"t\": null, \"n\": 1}", BadTime, "null"),
    ("{\"v\": 1, \"t\": 1e30, \"n\": 1}", BadTime, "time_unit"),
    (
        "{\"v\": 1, \"t\": 1772344800000, \"n\": 1}",
        BadTime,
        "time_unit",
    ),
];

#[test]
fn every_kind_of_garbage_has_its_reason() {
    let messages = json();
    for &(payload, reason, detail) in GARBAGE {
        let told = messages.take("a", payload);
        assert_eq!(
            told,
            [refused("a", Some("indication"), reason)],
            "{payload}"
        );
        let told = messages.inputs("a", payload.as_bytes(), false);
        assert!(
            format!("{told:?}").contains(detail),
            "{payload}: {told:?} lacks {detail}"
        );
    }
    for (payload, reason) in [
        ("12,5", Unreadable),
        ("NaN", NotFinite),
        ("1e400", NotFinite),
        ("7 pH", Unreadable),
    ] {
        assert_eq!(
            messages.take("b", payload),
            [refused("b", Some("reference"), reason)],
            "{payload}"
        );
    }
    let latin = messages.inputs("a", b"{\"v\": \"\xfc\"}", false);
    assert_eq!(
        crate::support::short(&latin[0]),
        refused("a", Some("indication"), Unreadable)
    );
}

#[test]
fn oversize_is_refused_before_it_is_looked_at() {
    let messages = json();
    let limit = 256 * 1024;
    let padded = |length: usize| {
        let text = "{\"v\": 1, \"t\": 1772344800, \"n\": 1}";
        format!("{text}{}", " ".repeat(length - text.len()))
    };
    assert_eq!(
        reason(&messages.take("a", &padded(limit + 1))[0]),
        RefusedReason::Oversize
    );
    assert_eq!(
        reason(&messages.take("a", &padded(1_000_000))[0]),
        RefusedReason::Oversize
    );
    let expected = reading("indication", 1_772_344_800_000_000_000, 1.0);
    assert_eq!(
        messages.take("a", &padded(limit)),
        [expected.replace("None", "Some(1)")]
    );
    let details = format!(
        "{:?}",
        messages.inputs("a", padded(1_000_000).as_bytes(), false)
    );
    assert!(
        details.contains("1000000 bytes") && details.len() < 600,
        "{details}"
    );
}

#[test]
fn unknown_topics_are_told() {
    let messages = json();
    for topic in ["c", "a/b", "", "A"] {
        assert_eq!(
            messages.take(topic, "1"),
            [refused(topic, None, RefusedReason::UnknownTopic)]
        );
    }
}

#[test]
fn deep_nesting_ends_no_stack() {
    let messages = json();
    let deep = |inner: &str| format!("{}{inner}{}", "[".repeat(100_000), "]".repeat(100_000));
    let told = messages.take("a", &format!("{{\"v\": {}}}", deep("1")));
    assert_eq!(
        told,
        [refused("a", Some("indication"), RefusedReason::Missing)],
        "no time"
    );
    let told = messages.take("a", &format!("{{\"v\": {}, \"t\": 1}}", deep("1")));
    assert_eq!(
        told,
        [refused("a", Some("indication"), RefusedReason::WrongType)]
    );
    let told = messages.take("a", &"[".repeat(200_000));
    assert_eq!(
        told,
        [refused("a", Some("indication"), RefusedReason::Unreadable)]
    );
    let told = messages.take("a", &"{\"v\":".repeat(40_000));
    assert_eq!(
        told,
        [refused("a", Some("indication"), RefusedReason::Unreadable)]
    );
}

#[test]
fn a_message_that_serves_several_channels_belongs_to_none_when_it_is_unreadable() {
    let messages = Messages::with_second(
        r#"indication = { topic = "a", value = "/1" }
           reference = { constant = 0 }"#,
        r#"indication = { topic = "a", value = "/2" }
           reference = { constant = 0 }"#,
    );
    assert_eq!(
        messages.take("a", "{"),
        [refused("a", None, RefusedReason::Unreadable)]
    );
    let half = messages.take("a", "{\"1\": 5}");
    assert_eq!(half[0], reading("indication", RECEIVED, 5.0));
    assert_eq!(reason(&half[1]), RefusedReason::Missing);
}

proptest! {
    #[test]
    fn any_bytes_become_inputs_and_never_a_panic(
        payload in prop_oneof![
            prop::collection::vec(any::<u8>(), 0..200),
            "[\\[\\]{}:,\"a-z0-9.eE+\\-\\\\ ]{0,80}".prop_map(String::into_bytes),
            concat!(
                "\\{\"v\": ?[0-9eE.+-]{1,12}, ",
                "\"t\": ?(\"[0-9TZ:.+-]{1,30}\"|[0-9eE.-]{1,22}), \"n\": ?[0-9-]{1,20}\\}"
            )
                .prop_map(String::into_bytes),
            "\\[\\{\"n\":\"t\",\"(v|t|bt|bv|s|bs)\":[0-9eE.+-]{1,20},\"v\":[0-9eE.-]{1,9}\\}\\]"
                .prop_map(String::into_bytes),
        ],
        retained in any::<bool>(),
    ) {
        let senml = Messages::new(
            "indication = { topic = \"a\", senml = \"t\" }\nreference = { topic = \"b\" }",
        );
        for messages in [json(), senml] {
            for topic in ["a", "b"] {
                let told = messages.inputs(topic, &payload, retained);
                prop_assert!(!told.is_empty(), "every message leaves a trace");
                for input in told {
                    if let Input::Reading(reading) = input {
                        prop_assert!(reading.value.is_finite() && !retained);
                        prop_assert!(reading.value != 0.0 || reading.value.is_sign_positive());
                    }
                }
            }
        }
    }
}
