//! What a channel may rest on is checked when the configuration is read: influence quantities,
//! known values, groups, and what must not be corrected.

use crate::support::{Case, HEAD, one, problems, read};
use holdtrue::payload::Target;
use holdtrue_engine::setup::{InfluenceId, ReferenceId, ReferenceKind};

/// A channel of five lines, and more of them.
fn channel(name: &str, reference: &str, more: &str) -> String {
    format!(
        "[[channel]]\nname = \"{name}\"\nunit = \"ppb\"\n\
         indication = {{ topic = \"works/{name}\", value = \"/v\", time = \"/at\" }}\n\
         reference = {reference}\n{more}"
    )
}

const LAB: &str = "{ topic = \"works/lab\", value = \"/v\", time = \"/at\" }";
const TEMPERATURE: &str =
    "{ name = \"temperature\", topic = \"hall\", value = \"/t\", time = \"/at\" }";

#[test]
fn one_source_serves_all_channels_that_name_its_place() {
    let own = "{ name = \"flow\", value = \"/flow\" }";
    let lab2 = LAB.replace("lab", "lab2");
    let text = format!(
        "{HEAD}{}{}",
        channel("a", LAB, &format!("influences = [{TEMPERATURE}]\n")),
        channel(
            "b",
            &lab2,
            &format!("influences = [{own}, {TEMPERATURE}]\n")
        ),
    );
    let read = read(&text).unwrap();
    assert!(read.warnings.is_empty(), "{:?}", read.warnings);
    let sources = |channel: usize| {
        let influences = read.setup.channels[channel].influences.iter();
        influences.map(|it| it.source.0).collect::<Vec<_>>()
    };
    assert_eq!((sources(0), sources(1)), (vec![0], vec![1, 0]));
    assert_eq!(
        read.intake.filters,
        ["hall", "works/a", "works/b", "works/lab", "works/lab2"]
    );
    assert_eq!(read.intake.topics["hall"].len(), 1, "read once");
    let payload: Vec<_> = read.intake.topics["works/b"]
        .iter()
        .map(|it| &it.target)
        .collect();
    assert!(
        matches!(
            payload[..],
            [Target::Influence(InfluenceId(1)), Target::Indication(_)]
        ),
        "the influence comes before the indication that it belongs to: {payload:?}"
    );
}

#[test]
fn another_channels_indication_may_act_on_a_sensor() {
    let hall = "[[channel]]\nname = \"hall-t\"\nunit = \"Cel\"\n\
                indication = { topic = \"hall\", value = \"/t\", time = \"/at\" }\n\
                reference = { topic = \"works/thermometer\", value = \"/v\", time = \"/at\" }\n";
    let text = format!(
        "{HEAD}{}{hall}",
        channel("a", LAB, &format!("influences = [{TEMPERATURE}]\n"))
    );
    let read = read(&text).unwrap();
    assert!(read.warnings.is_empty(), "{:?}", read.warnings);
    assert_eq!(read.intake.topics["hall"].len(), 2);
}

/// Influences of channel `a`, in line 11.
const INFLUENCES: &[Case] = &[
    (
        "[{ name = \"t\" }]",
        "f:11:15: error: channel[1].influences[1].value",
        &["JSON pointer"],
    ),
    (
        "[{ topic = \"hall\" }]",
        "f:11:15: error: channel[1].influences[1].name",
        &["missing", "temperature"],
    ),
    (
        "[{ name = \"t\", topic = \"hall\", tiem = \"/at\" }]",
        "f:11:45: error: channel[1].influences[1].tiem",
        &["time?"],
    ),
    (
        "[{ name = \"t\", topic = \"h\" }, { name = \"u\", topic = \"i\" }, \
         { name = \"v\", topic = \"j\" }]",
        "f:11:14: error: channel[1].influences",
        &["3 influence", "at most 2"],
    ),
    (
        "[{ name = \"t\", topic = \"h\" }, { name = \"t\", topic = \"i\" }]",
        "f:11:53: error: channel[1].influences[2].name",
        &["twice"],
    ),
    (
        "[{ name = \"t\", topic = \"h\" }, { name = \"u\", topic = \"h\" }]",
        "f:11:44: error: channel[1].influences[2]",
        &["same value"],
    ),
    (
        "[{ name = \"self\", value = \"/v\" }]",
        "f:11:40: error: channel[1].influences[1].value",
        &["channel a", "span drift", "max_span_degree"],
    ),
    (
        "[{ name = \"self\", topic = \"works/lab\", value = \"/v\", time = \"/at\" }]",
        "f:11:40: error: channel[1].influences[1].topic",
        &["reference a", "max_span_degree"],
    ),
    (
        "[{ name = \"loop\", topic = \"holdtrue/n/corrected/b\" }]",
        "f:11:40: error: channel[1].influences[1].topic",
        &["own output"],
    ),
];

#[test]
fn influences_are_checked() {
    for (influences, begin, parts) in INFLUENCES {
        let more = format!("influences = {influences}\n");
        one(&format!("{HEAD}{}", channel("a", LAB, &more)), begin, parts);
    }
}

#[test]
fn one_place_is_read_in_one_way() {
    let other = TEMPERATURE.replace("/at", "/when");
    let lab2 = LAB.replace("lab", "lab2");
    one(
        &format!(
            "{HEAD}{}{}",
            channel("a", LAB, &format!("influences = [{TEMPERATURE}]\n")),
            channel("b", &lab2, &format!("influences = [{other}]\n")),
        ),
        "f:17:15: error: channel[2].influences[1]",
        &["influence on channel a", "alike"],
    );
}

/// A declared cause of a cycle tells it apart from drift, in however short a window.
#[test]
fn a_short_window_is_doubtful_unless_the_cause_of_the_cycle_is_declared() {
    let short = channel("a", LAB, "window = \"2 d\"\n");
    one(
        &format!("{HEAD}\n{short}"),
        "f:12:10: warning: channel[1].window",
        &["three days", "influences"],
    );
    let told = format!("{HEAD}{short}influences = [{TEMPERATURE}]\n");
    assert_eq!(problems(&told), Vec::<String>::new());
}

/// Zero gas and span gas, one gate topic for both.
const GASES: &str = r#"
[[reference]]
name = "zero"
constant = 0
uncertainty = { each = 0.1, common = 0.4 }
valid_when = { topic = "works/valve", equals = ["zero"] }

[[reference]]
name = "span"
constant = 80
uncertainty = { each = 0.2, common = 0.3 }
valid_when = { topic = "works/valve", equals = ["span"] }
"#;

#[test]
fn several_known_values_make_one_reference_with_the_largest_uncertainty() {
    let text = format!(
        "{HEAD}{}{GASES}",
        channel("a", "{ checks = [\"zero\", \"span\"] }", "")
    );
    let read = read(&text).unwrap();
    assert!(read.warnings.is_empty(), "{:?}", read.warnings);
    let setup = &read.setup;
    let reference = &setup.references[setup.channels[0].reference.0 as usize];
    let points = vec![ReferenceId(0), ReferenceId(1)];
    assert_eq!(reference.kind, ReferenceKind::Checks { points });
    assert_eq!(reference.name, "a");
    let uncertainty = (reference.uncertainty_each, reference.uncertainty_common);
    assert_eq!(uncertainty, (0.2, 0.4));
    assert_eq!(read.intake.filters, ["works/a", "works/valve"]);
}

/// The reference of channel `a`, in line 10.
const CHECKS: &[Case] = &[
    (
        "{ checks = [\"zero\"] }",
        "f:10:24: error: channel[1].reference.checks",
        &["at least two"],
    ),
    (
        "{ checks = [\"zero\", \"zero\"] }",
        "f:10:33: error: channel[1].reference.checks",
        &["twice"],
    ),
    (
        "{ checks = [\"zero\", \"spam\"] }",
        "f:10:33: error: channel[1].reference.checks",
        &["no reference \"spam\"", "span"],
    ),
    (
        "{ checks = [\"zero\", \"always\"] }",
        "f:10:33: error: channel[1].reference.checks",
        &["\"always\"", "valid_when"],
    ),
    (
        "{ checks = [\"zero\", \"span\"], certificate = \"C\" }",
        "f:10:56: error: channel[1].reference.certificate",
        &["each of the references"],
    ),
    (
        "{ checks = [\"zero\", \"span\"], constant = 3 }",
        "f:10:13: error: channel[1].reference",
        &["several kinds"],
    ),
    (
        "{ checks = [\"zero\", \"span\"], stale_after = \"1 d\" }",
        "f:10:56: error: channel[1].reference.stale_after",
        &["measured"],
    ),
];

#[test]
fn known_values_are_checked() {
    let always = "[[reference]]\nname = \"always\"\nconstant = 3\n";
    for (reference, begin, parts) in CHECKS {
        let text = format!("{HEAD}{}{GASES}{always}", channel("a", reference, ""));
        let found: Vec<String> = problems(&text)
            .into_iter()
            .filter(|line| !line.contains("no channel is judged against"))
            .collect();
        let wanted = found.iter().find(|line| line.starts_with(begin));
        let wanted = wanted.unwrap_or_else(|| panic!("{text}\n{}", found.join("\n")));
        assert!(parts.iter().all(|part| wanted.contains(part)), "{wanted}");
    }
}

#[test]
fn a_reference_that_nobody_names_is_doubtful() {
    let text = format!("{HEAD}{}{GASES}", channel("a", "\"zero\"", ""));
    one(
        &text,
        "f:19:8: warning: reference[2].name",
        &["no channel is judged against", "remove"],
    );
}

#[test]
fn what_already_bears_a_correction_is_no_truth() {
    for (topic, part) in [
        ("holdtrue/n/corrected/b", "own output"),
        ("holdtrue/n/state", "own output"),
        ("holdtrue/other/corrected/b", "another node"),
    ] {
        let reference = format!("{{ topic = \"{topic}\" }}");
        one(
            &format!("{HEAD}{}", channel("a", &reference, "")),
            "f:10:23: error: channel[1].reference.topic",
            &[part, "own topic"],
        );
        let corrected = channel("a", LAB, "").replace("works/a", topic);
        one(
            &format!("{HEAD}{corrected}"),
            "f:9:24: error: channel[1].indication.topic",
            &[part],
        );
    }
    // What another node says of itself, or a plant's own topic of that name, bears no correction.
    for topic in ["holdtrue/other/measured/b", "works/corrected/b"] {
        let reference = format!("{{ topic = \"{topic}\" }}");
        let text = format!("{HEAD}{}", channel("a", &reference, ""));
        assert_eq!(problems(&text), Vec::<String>::new(), "{topic}");
    }
}

#[test]
fn two_sensors_may_not_be_each_others_reference() {
    let of =
        |other: &str| format!("{{ topic = \"works/{other}\", value = \"/v\", time = \"/at\" }}");
    let text = format!(
        "{HEAD}{}{}",
        channel("a", &of("b"), ""),
        channel("b", &of("a"), "")
    );
    let found = problems(&text);
    assert_eq!(found.len(), 2, "{found:#?}");
    assert!(
        found.iter().all(|line| line.contains("circle")),
        "{found:#?}"
    );
    // In a longer circle too, and through a named reference.
    let named =
        "[[reference]]\nname = \"of-c\"\ntopic = \"works/c\"\nvalue = \"/v\"\ntime = \"/at\"\n";
    let text = format!(
        "{HEAD}{}{}{}{named}",
        channel("a", &of("b"), ""),
        channel("b", "\"of-c\"", ""),
        channel("c", &of("a"), "")
    );
    let found = problems(&text);
    assert!(!found.is_empty() && read(&text).is_err(), "{found:#?}");
    assert!(
        found.iter().any(|line| line.contains("circle")),
        "{found:#?}"
    );
}

#[test]
fn a_safety_measurement_is_monitored_and_never_corrected() {
    let read_one = read(&format!(
        "{HEAD}{}",
        channel("a", LAB, "monitor_only = true\n")
    ))
    .unwrap();
    assert!(read_one.setup.channels[0].monitor_only && read_one.warnings.is_empty());
    one(
        &format!(
            "{HEAD}{}",
            channel("a", LAB, "monitor_only = true\ncorrected_values = true\n")
        ),
        "f:12:20: error: channel[1].corrected_values",
        &["monitor_only", "remove"],
    );
    let group = |others: [&str; 3]| format!("{{ group = [\"{}\"] }}", others.join("\", \""));
    let others = [
        ("b", ["a", "c", "d"]),
        ("c", ["a", "b", "d"]),
        ("d", ["a", "b", "c"]),
    ]
    .map(|(name, others)| channel(name, &group(others), ""))
    .concat();
    one(
        &format!(
            "{HEAD}{}{others}",
            channel("a", &group(["b", "c", "d"]), "monitor_only = true\n")
        ),
        "f:10:13: error: channel[1].reference",
        &["median of its neighbours", "reference of its own"],
    );
    let member = format!(
        "{HEAD}{}{others}",
        channel("a", LAB, "monitor_only = true\n")
    );
    assert_eq!(
        problems(&member),
        Vec::<String>::new(),
        "it may be a member"
    );
}

/// Zero, or all that may be held back, in the defaults.
#[test]
fn all_channels_can_be_monitored_by_default() {
    let text = format!(
        "{HEAD}[defaults]\nmonitor_only = true\n{}",
        channel("a", LAB, "")
    );
    assert!(read(&text).unwrap().setup.channels[0].monitor_only);
}
