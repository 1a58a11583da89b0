//! A wrong configuration is refused with everything that is wrong, each with line, column, key,
//! value and way out; what is only doubtful is a warning.

use crate::support::{Case, HEAD, one, problems, read};
use holdtrue::configuration;
use holdtrue_engine::setup::{ReferenceKind, WindowLength};
use holdtrue_engine::time::Duration;

/// A sound channel `a`, whose first line is line 6 behind [`HEAD`].
const CHANNEL: &str = r#"[[channel]]
name = "a"
unit = "pH"
indication = { topic = "works/a", value = "/v", time = "/t" }
reference = { topic = "works/lab", value = "/v", time = "/t" }
"#;

fn channel_without_reference() -> &'static str {
    let end = CHANNEL.find("reference").expect("the channel has one");
    &CHANNEL[..end]
}

#[test]
fn a_sound_file_has_no_problems() {
    assert_eq!(problems(&format!("{HEAD}{CHANNEL}")), Vec::<String>::new());
}

/// One line added to a sound channel.
const SETTINGS: &[Case] = &[
    (
        "windw = \"30 d\"",
        "f:11:1: error: channel[1].windw",
        &["unknown", "window?"],
    ),
    (
        "zzz = 1",
        "f:11:1: error: channel[1].zzz",
        &["unknown key; known here: alarms, "],
    ),
    (
        "window = 30",
        "f:11:10: error: channel[1].window",
        &["30", "text in quotes"],
    ),
    (
        "window = \"30\"",
        "f:11:10: error: channel[1].window",
        &["no unit", "30 d", "pairs"],
    ),
    (
        "window = \"3 months\"",
        "f:11:10: error: channel[1].window",
        &["days with d"],
    ),
    (
        "window = \"0 d\"",
        "f:11:10: error: channel[1].window",
        &["longer than zero"],
    ),
    (
        "window = \"0 pairs\"",
        "f:11:10: error: channel[1].window",
        &["from 1 to"],
    ),
    (
        "segments = 0",
        "f:11:12: error: channel[1].segments",
        &["from 1 to 1024"],
    ),
    (
        "segments = 2.5",
        "f:11:12: error: channel[1].segments",
        &["2.5", "whole number"],
    ),
    (
        "max_degree = 6",
        "f:11:14: error: channel[1].max_degree",
        &["6", "from 0 to 5"],
    ),
    (
        "degree = -1",
        "f:11:10: error: channel[1].degree",
        &["-1", "from 0 to 5"],
    ),
    (
        "criterion = \"aic\"",
        "f:11:13: error: channel[1].criterion",
        &["\"bic\" or \"aicc\""],
    ),
    ("lag = 5", "f:11:7: error: channel[1].lag", &["\"10 s\""]),
    (
        "lateness = \"-1 s\"",
        "f:11:12: error: channel[1].lateness",
        &["not be negative"],
    ),
    (
        "max_permissible_error = 0.0",
        "f:11:25: error: channel[1].max",
        &["greater than zero"],
    ),
    (
        "max_permissible_error = -1",
        "f:11:25: error: channel[1].max",
        &["greater than zero"],
    ),
    (
        "max_permissible_error = nan",
        "f:11:25: error: channel[1].max",
        &["finite"],
    ),
    (
        "max_permissible_error = inf",
        "f:11:25: error: channel[1].max",
        &["finite"],
    ),
    (
        "max_drift_rate = 0",
        "f:11:18: error: channel[1].max_drift_rate",
        &["greater than zero"],
    ),
    (
        "resolution = -0.1",
        "f:11:14: error: channel[1].resolution",
        &["zero or more"],
    ),
    (
        "noise = \"x\"",
        "f:11:9: error: channel[1].noise",
        &["\"x\"", "finite number"],
    ),
    (
        "coverage = 1.0",
        "f:11:12: error: channel[1].coverage",
        &["below 1"],
    ),
    (
        "corrected_values = \"yes\"",
        "f:11:20: error: channel[1].corrected",
        &["true or false"],
    ),
    (
        "screening = \"of\"",
        "f:11:13: error: channel[1].screening",
        &["\"off\" or \"on\""],
    ),
    (
        "screening = { gate = 0.5 }",
        "f:11:22: error: channel[1].screening.gate",
        &["at least 1"],
    ),
    (
        "screening = { range = [1] }",
        "f:11:23: error: channel[1].screening.range",
        &["highest"],
    ),
    (
        "screening = { range = [2, 1] }",
        "f:11:23: error: channel[1].screening.range",
        &["lowest"],
    ),
    (
        "screening = { rang = [1, 2] }",
        "f:11:15: error: channel[1].screening.rang",
        &["range?"],
    ),
    (
        "steps = false\nstep_confirmation = 4.0",
        "f:12:21: error: channel[1].step_confirmation",
        &["steps = false"],
    ),
    (
        "screening = 3",
        "f:11:13: error: channel[1].screening",
        &["3 is not a table"],
    ),
    (
        "publish = { step = 0 }",
        "f:11:20: error: channel[1].publish.step",
        &["greater than"],
    ),
    (
        "publish = { max_age = \"0 s\" }",
        "f:11:23: error: channel[1].publish",
        &["longer than"],
    ),
    (
        "alarms = { delay = 0 }",
        "f:11:20: error: channel[1].alarms.delay",
        &["from 1"],
    ),
    (
        "alarms = { gap_after = 3 }",
        "f:11:24: error: channel[1].alarms.gap_after",
        &["quotes"],
    ),
    (
        "window = \"2 d\"",
        "f:11:10: warning: channel[1].window",
        &["three days", "daily cycle"],
    ),
    (
        "max_permissible_error = 0.2",
        "f:11:25: warning: channel[1].max",
        &["reference a", "zero"],
    ),
];

/// One line added to a sound channel: (line, place and severity, parts of the message).
#[test]
fn each_channel_setting_is_checked() {
    for (line, begin, parts) in SETTINGS {
        one(&format!("{HEAD}{CHANNEL}{line}\n"), begin, parts);
    }
}

#[test]
fn settings_that_need_each_other_are_checked() {
    for (lines, begin, parts) in [
        (
            "window = \"10 pairs\"\nsegments = 11",
            "f:12:12: error: channel[1].segments",
            &["10 pairs", "at most 10"][..],
        ),
        (
            "max_degree = 1\ndegree = 2",
            "f:12:10: error: channel[1].degree",
            &["max_degree"],
        ),
        (
            "max_degree = 0\nwindow = \"10 ms\"\nlateness = \"0 s\"",
            "f:12:10: error: channel[1].window",
            &["1 ms"],
        ),
        (
            "window = \"4 d\"\nlateness = \"5 d\"",
            "f:11:10: warning: channel[1].window",
            &["lateness"],
        ),
    ] {
        one(&format!("{HEAD}{CHANNEL}{lines}\n"), begin, parts);
    }
    // The defaults fit themselves to what is told.
    let with = |lines: &str| {
        let setup = read(&format!("{HEAD}{CHANNEL}{lines}\n")).unwrap().setup;
        setup.channels[0].fit
    };
    assert_eq!(with("window = \"10 pairs\"").segments, 10);
    assert_eq!(with("window = \"1024 pairs\"").segments, 64);
    assert_eq!(
        (
            with("degree = 4").max_degree,
            with("degree = 4").forced_degree
        ),
        (4, Some(4))
    );
    assert_eq!(with("degree = 1").max_degree, 2);
}

/// Where an indication stands.
const PLACES: &[Case] = &[
    (
        "{ topic = \"a/+\" }",
        "f:9:24: error: channel[1].indication.topic",
        &["wildcard"],
    ),
    (
        "{ topic = \"\" }",
        "f:9:24: error: channel[1].indication.topic",
        &["1 to"],
    ),
    (
        "{ value = \"/v\" }",
        "f:9:14: error: channel[1].indication.topic",
        &["missing"],
    ),
    (
        "{ topic = \"a\", value = \"v\" }",
        "f:9:37: error: channel[1].ind",
        &["write \"/v\""],
    ),
    (
        "{ topic = \"a\", time = \"/t\" }",
        "f:9:36: error: channel[1].ind",
        &["`value`"],
    ),
    (
        "{ topic = \"a\", value = \"/v\", senml = \"x\" }",
        "f:9:51: error: ",
        &["JSON or SenML"],
    ),
    (
        "{ topic = \"a\", senml = \"\" }",
        "f:9:37: error: ",
        &["empty"],
    ),
    (
        "{ topic = \"a\", senml = \"x\", time = \"/t\" }",
        "f:9:49: error: ",
        &["bear their time"],
    ),
    (
        "{ topic = \"a\", value = \"/v\", sum = true }",
        "f:9:49: error: ",
        &["SenML"],
    ),
    (
        "{ topic = \"a\", value = \"/v\", time_unit = \"ms\" }",
        "f:9:55: error: ",
        &["`time`"],
    ),
    (
        "{ topic = \"a\", value = \"/v\", time = \"/t\", time_unit = \"m\" }",
        "f:9:68: error: ",
        &["\"s\" or \"ms\""],
    ),
    (
        "{ topic = \"a\", value = \"/v\", status = { value = \"/q\" } }",
        "f:9:52: error: ",
        &["good"],
    ),
    (
        "{ topic = \"a\", value = \"/v\", status = { good = [1] } }",
        "f:9:52: error: ",
        &["value"],
    ),
    (
        "{ topic = \"a\", value = \"/v\", vaule = \"/q\" }",
        "f:9:43: error: ",
        &["value?"],
    ),
    (
        "\"a\"",
        "f:9:14: error: channel[1].indication",
        &["\"a\" is not a table"],
    ),
    (
        "{ topic = \"holdtrue/n/corrected/a\" }",
        "f:9:24: error: ",
        &["own output", "feed"],
    ),
    (
        "{ topic = \"works/lab\", value = \"/v\" }",
        "f:10:23: error: ",
        &["same time", "circle"],
    ),
    (
        "{ topic = \"works/lab\", senml = \"x\" }",
        "f:10:23: error: ",
        &["one format", "SenML"],
    ),
];

/// Where a value stands: (indication, begin of the problem, parts).
#[test]
fn places_are_checked() {
    for (place, begin, parts) in PLACES {
        let channel = format!(
            "[[channel]]\nname = \"a\"\nunit = \"pH\"\nindication = {place}\n\
             reference = {{ topic = \"works/lab\", value = \"/v\", time = \"/t\" }}\n"
        );
        one(&format!("{HEAD}{channel}"), begin, parts);
    }
}

/// A channel's own reference, in line 10.
const REFERENCES: &[Case] = &[
    (
        "\"lab\"",
        "f:10:13: error: channel[1].reference",
        &["no reference \"lab\""],
    ),
    (
        "3",
        "f:10:13: error: channel[1].reference",
        &["3 is not a table"],
    ),
    (
        "{ }",
        "f:10:13: error: channel[1].reference",
        &["topic", "constant", "group", "payload"],
    ),
    (
        "{ constant = 1, topic = \"b\" }",
        "f:10:13: error: ",
        &["several kinds"],
    ),
    ("{ constant = nan }", "f:10:26: error: ", &["finite"]),
    (
        "{ constant = 1, time = \"/t\" }",
        "f:10:36: error: ",
        &["measured"],
    ),
    (
        "{ constant = 1, stale_after = \"1 d\" }",
        "f:10:43: error: ",
        &["measured"],
    ),
    (
        "{ topic = \"b\", valid_when = { equals = [1] } }",
        "f:10:41: error: ",
        &["constant"],
    ),
    (
        "{ constant = 1, valid_when = { value = \"/m\" } }",
        "f:10:42: error: ",
        &["equals"],
    ),
    (
        "{ topic = \"b\", stands_for = \"1 h\" }",
        "f:10:13: error: ",
        &["stamped", "\"middle\""],
    ),
    (
        "{ topic = \"b\", stamped = \"end\" }",
        "f:10:38: error: ",
        &["stands_for"],
    ),
    (
        "{ topic = \"b\", stamped = \"mid\", stands_for = \"1 h\" }",
        "f:10:38: error: ",
        &["\"end\""],
    ),
    (
        "{ topic = \"b\", uncertainty = 0.1 }",
        "f:10:42: error: ",
        &["0.1 is not a table"],
    ),
    (
        "{ topic = \"b\", uncertainty = { each = -1 } }",
        "f:10:51: error: ",
        &["zero or more"],
    ),
    (
        "{ topic = \"b\", uncertainty = { eahc = 1 } }",
        "f:10:44: error: ",
        &["each?"],
    ),
    (
        "{ topic = \"b\", expires = \"soon\" }",
        "f:10:38: error: ",
        &["\"2027-06-30\""],
    ),
    (
        "{ topic = \"b\", expires = 2025-12-31 }",
        "f:10:38: warning: ",
        &["expired", "renew"],
    ),
    (
        "{ topic = \"b\", sequence = \"/n\" }",
        "f:10:39: error: ",
        &["`value`"],
    ),
];

/// References: (lines, begin of the problem, parts). Each is the channel's own, in line 10.
#[test]
fn references_are_checked() {
    for (reference, begin, parts) in REFERENCES {
        let channel = channel_without_reference();
        let text = format!("{HEAD}{channel}reference = {reference}\n");
        one(&text, begin, parts);
    }
}

#[test]
fn a_certificate_lasts_through_its_last_day() {
    let text = |expires: &str| {
        let reference = format!("{{ topic = \"b\", expires = {expires} }}");
        let channel = channel_without_reference();
        format!("{HEAD}{channel}reference = {reference}\n")
    };
    // NOW is the first instant of 2026.
    assert_eq!(problems(&text("2026-01-01")), Vec::<String>::new());
    assert_eq!(
        problems(&text("\"2026-01-01T00:00:01Z\"")),
        Vec::<String>::new()
    );
    assert_eq!(problems(&text("2025-12-31")).len(), 1);
    assert_eq!(problems(&text("2025-12-31T23:59:59Z")).len(), 1);
}

#[test]
fn groups_need_three_others() {
    let channel = |name: &str, group: &str| {
        format!(
            "[[channel]]\nname = \"{name}\"\nunit = \"m\"\nindication = {{ topic = \"{name}\" }}\n\
             reference = {{ group = [{group}] }}\n"
        )
    };
    let others = ["b", "c", "d"]
        .map(|name| channel(name, "\"a\", \"b\", \"c\", \"d\""))
        .concat();
    let with = |group: &str| format!("{HEAD}{}{others}", channel("a", group));
    let sound = read(&with("\"a\", \"d\", \"c\", \"b\"")).unwrap();
    let ReferenceKind::Group { members } = &sound.setup.references[0].kind else {
        panic!()
    };
    assert_eq!(
        members.iter().map(|id| id.0).collect::<Vec<_>>(),
        [3, 2, 1],
        "without itself"
    );

    one(
        &with("\"a\", \"b\", \"c\""),
        "f:10:23: error: channel[1].reference.group",
        &["2 other", "3"],
    );
    let twice = problems(&with("\"b\", \"c\", \"b\", \"d\""));
    assert_eq!(
        twice,
        ["f:10:34: error: channel[1].reference.group: \"b\" is named twice"]
    );
    let unknown = problems(&with("\"b\", \"c\", \"e\""));
    assert!(
        unknown.len() == 2 && unknown[1].contains("no channel \"e\""),
        "{unknown:?}"
    );
}

/// What stands before `[broker]`.
const HEADS: &[Case] = &[
    (
        "[node]\nname = \"a/b\"",
        "f:2:8: error: node.name",
        &["one level"],
    ),
    (
        "[node]\nname = \"n\"\ntime = \"clok\"",
        "f:3:8: error: node.time",
        &["\"clock\" or"],
    ),
    (
        "[node]\nname = \"n\"\n[record]\nfolder = \"\"",
        "f:4:10: error: record.folder",
        &["empty"],
    ),
    (
        "[node]\nname = \"n\"\n[record]\ncommit = \"1 ms\"",
        "f:4:10: error: ",
        &["0.01 s to 60 s"],
    ),
    (
        "[node]\nname = \"n\"\n[page]\nlisten = \"x\"",
        "f:4:10: error: page.listen",
        &["8437"],
    ),
    (
        "[node]\nname = \"n\"\n[page]\nlisten = \"[::1]:1\"",
        "f:3:1: warning: page",
        &["no page"],
    ),
    (
        "[node]\nname = \"n\"\n[nod]\n",
        "f:3:2: error: nod",
        &["node?"],
    ),
    ("[node]", "f:1:1: error: node.name", &["missing"]),
];

/// What stands in `[broker]`, from line 4 on.
const BROKERS: &[Case] = &[
    (
        "url = \"tcp://x\"",
        "f:4:7: error: broker.url",
        &["mqtts://"],
    ),
    (
        "url = \"mqtt://u:secret@x\"",
        "f:4:7: error: broker.url",
        &["password_file"],
    ),
    ("prot = 5", "f:4:1: error: broker.prot", &["protocol?"]),
    (
        "protocol = 3",
        "f:4:12: error: broker.protocol",
        &["from 4 to 5"],
    ),
    (
        "keep_alive = \"1 s\"",
        "f:4:14: error: broker.keep_alive",
        &["from 5 s"],
    ),
    (
        "session_expiry = \"1 h\"",
        "f:4:18: warning: broker.session_expiry",
        &["lost"],
    ),
    (
        "max_payload = 9999999",
        "f:4:15: error: broker.max_payload",
        &["max_packet", "2097152"],
    ),
    (
        "ca_file = \"Cargo.toml\"",
        "f:4:11: error: broker.ca_file",
        &["mqtts://"],
    ),
    (
        "ca_file = \"absent.pem\"",
        "f:4:11: error: broker.ca_file",
        &["absent.pem", "can't be read"],
    ),
    (
        "password_file = \"Cargo.toml\"",
        "f:3:1: error: broker.username",
        &["user name"],
    ),
    (
        "subscribe = \"#\"",
        "f:4:13: error: broker.subscribe",
        &["list of texts"],
    ),
    (
        "subscribe = [\"works/#\", 3]",
        "f:4:25: error: broker.subscribe",
        &["3 is not"],
    ),
    (
        "subscribe = [\"works/#\", \"#\"]",
        "f:4:25: error: broker.subscribe",
        &["own output"],
    ),
    (
        "subscribe = [\"+/n/#\"]",
        "f:4:14: error: broker.subscribe",
        &["own output holdtrue/n/"],
    ),
    (
        "subscribe = [\"$share/g/works/#\"]",
        "f:4:14: error: ",
        &["without $share"],
    ),
    (
        "subscribe = [\"wroks/#\"]",
        "f:4:14: warning: broker.subscribe",
        &["covers no topic"],
    ),
];

#[test]
fn services_are_checked() {
    for (head, begin, parts) in HEADS {
        let text = format!("{head}\n[broker]\nurl = \"mqtt://127.0.0.1\"\n{CHANNEL}");
        let found = problems(&text);
        let wanted = found.iter().find(|line| line.starts_with(begin));
        let wanted = wanted.unwrap_or_else(|| panic!("{text}\n{}", found.join("\n")));
        assert!(parts.iter().all(|part| wanted.contains(part)), "{wanted}");
    }
    for (lines, begin, parts) in BROKERS {
        let url = if lines.starts_with("url") {
            ""
        } else {
            "url = \"mqtt://127.0.0.1\"\n"
        };
        let text = format!("[node]\nname = \"n\"\n[broker]\n{lines}\n{url}{CHANNEL}");
        let found = problems(&text);
        let wanted = found.iter().find(|line| line.starts_with(begin));
        let wanted = wanted.unwrap_or_else(|| panic!("{text}\n{}", found.join("\n")));
        assert!(parts.iter().all(|part| wanted.contains(part)), "{wanted}");
        assert!(
            !found.join("\n").contains("secret"),
            "a password must not be shown: {found:?}"
        );
    }
}

#[test]
fn names_and_places_are_used_once() {
    let second = CHANNEL
        .replace("works/a", "works/b")
        .replace("works/lab", "works/lab2");
    one(
        &format!("{HEAD}{CHANNEL}{second}"),
        "f:12:8: error: channel[2].name",
        &["channel[1]"],
    );
    let second = second
        .replace("name = \"a\"", "name = \"b\"")
        .replace("works/b", "works/a");
    one(
        &format!("{HEAD}{CHANNEL}{second}"),
        "f:14:24: error: channel[2].indication.topic",
        &["\"/v\" of \"works/a\"", "channel a"],
    );
    let second = CHANNEL
        .replace("works/a", "works/b")
        .replace("name = \"a\"", "name = \"b\"");
    one(
        &format!("{HEAD}{CHANNEL}{second}"),
        "f:15:23: error: channel[2].reference.topic",
        &["reference a", "[[reference]]"],
    );
    let named = "[[reference]]\nname = \"a\"\ntopic = \"c\"\n";
    let found = problems(&format!("{HEAD}{CHANNEL}{named}"));
    assert!(
        found.len() == 2
            && found[0].starts_with("f:10:13: error: channel[1].reference")
            && found[0].contains("rename")
            && found[1].contains("warning: reference[1].name: no channel is judged"),
        "{found:?}"
    );
}

#[test]
fn one_gate_topic_may_serve_many_references() {
    let channel = |name: &str| {
        format!(
            "[[channel]]\nname = \"{name}\"\nunit = \"m\"\nindication = {{ topic = \"{name}\" }}\n\
             reference = {{ constant = 0, valid_when = {{ topic = \"mode\", \
             equals = [\"zero\"] }} }}\n"
        )
    };
    let read = read(&format!("{HEAD}{}{}", channel("a"), channel("b"))).unwrap();
    assert_eq!(read.intake.filters, ["a", "b", "mode"]);
    assert_eq!(read.intake.topics["mode"].len(), 2);
}

#[test]
fn defaults_count_for_all_channels() {
    let second = CHANNEL
        .replace("works/a", "works/b")
        .replace("works/lab", "works/lab2")
        .replace("name = \"a\"", "name = \"b\"");
    let text = format!(
        "{HEAD}[defaults]\nwindow = \"90 d\"\nlateness = \"1 h\"\nalarms = {{ delay = 7 }}\n\
         {CHANNEL}{second}window = \"60 d\"\n"
    );
    let channels = read(&text).unwrap().setup.channels;
    let days = |days: i64| WindowLength::Time(Duration::from_seconds(days * 86_400));
    assert_eq!(
        (channels[0].fit.window, channels[1].fit.window),
        (days(90), days(60))
    );
    assert!(
        channels
            .iter()
            .all(|channel| channel.lateness == Duration::from_seconds(3600))
    );
    assert!(channels.iter().all(|channel| channel.alarms.delay == 7));

    let wrong = text
        .replace("\"90 d\"", "\"90 x\"")
        .replace("lateness", "latenes");
    let found = problems(&wrong);
    assert_eq!(found.len(), 2, "a wrong default is named once: {found:?}");
    assert!(
        found[0].starts_with("f:7:10: error: defaults.window"),
        "{found:?}"
    );
    assert!(
        found[1].contains("defaults.latenes: unknown key; did you mean lateness?"),
        "{found:?}"
    );
    let name = text.replace("[defaults]\n", "[defaults]\nname = \"x\"\n");
    assert!(problems(&name)[0].contains("belongs to each channel"));
}

#[test]
fn readings_without_times_are_doubtful_on_the_readings_clock() {
    let plain = "[[channel]]\nname = \"a\"\nunit = \"m\"\nindication = { topic = \"a\" }\n\
                 reference = { constant = 0 }\n";
    assert_eq!(problems(&format!("{HEAD}{plain}")), Vec::<String>::new());
    let head = HEAD.replace("name = \"n\"", "name = \"n\"\ntime = \"readings\"");
    one(
        &format!("{head}{plain}"),
        "f:10:24: warning: channel[1].indication.topic",
        &["arrival"],
    );
}

#[test]
fn weak_references_are_doubtful() {
    let with = |uncertainty: &str, limit: &str| {
        let text = CHANNEL.replace(
            "reference = { topic = \"works/lab\",",
            &format!("reference = {{ uncertainty = {uncertainty}, topic = \"works/lab\","),
        );
        problems(&format!("{HEAD}{text}max_permissible_error = {limit}\n"))
    };
    // U = 2·√(0.03² + 0.04²) = 0.1.
    assert_eq!(
        with("{ each = 0.03, common = 0.04 }", "0.41"),
        Vec::<String>::new()
    );
    let found = with("{ each = 0.03, common = 0.04 }", "0.39");
    assert!(found.len() == 1 && found[0].contains("warning") && found[0].contains("4 times"));
}

#[test]
fn everything_is_said_at_once_in_file_order() {
    let text = "[node]\nname = \"n n\"\nfoo = 1\n[broker]\nurl = \"x\"\nsubscribe = [\"#\"]\n\
                [[channel]]\nname = \"a\"\nindication = { topic = \"holdtrue/n n/x\" }\n\
                window = \"1\"\n";
    let found = problems(text);
    let places: Vec<_> = found
        .iter()
        .map(|line| line.split(": ").nth(2).unwrap())
        .collect();
    assert_eq!(
        places,
        [
            "node.name",
            "node.foo",
            "broker.url",
            "broker.subscribe",
            "channel[1].unit",
            "channel[1].reference",
            "channel[1].indication.topic",
            "channel[1].window",
        ],
        "{found:#?}"
    );
}

#[test]
fn broken_syntax_does_not_hide_the_rest() {
    let text = format!("{HEAD}{CHANNEL}window = \nsegments = 0\n");
    let found = problems(&text);
    assert!(
        found.iter().any(|line| line.starts_with("f:11:")),
        "{found:#?}"
    );
    assert!(
        found
            .iter()
            .any(|line| line.starts_with("f:12:12: error: channel[1].segments"))
    );
    assert!(
        !found.iter().any(|line| line.contains("missing")),
        "{found:#?}"
    );
    let twice = problems(&format!("{HEAD}{CHANNEL}unit = \"m\"\n"));
    assert!(
        twice.len() == 1 && twice[0].starts_with("f:11:1: error: "),
        "{twice:#?}"
    );
    for text in [
        "\u{0}",
        "[[[",
        "= = =",
        "[node",
        "\"",
        "a.b.c.d = [[[{",
        "\u{feff}x",
    ] {
        assert!(read(text).is_err(), "{text:?}");
    }
}

#[test]
fn a_file_that_cannot_be_read_is_a_problem_with_its_reason() {
    let folder = tempfile::tempdir().unwrap();
    let absent = configuration::load(&folder.path().join("absent.toml")).unwrap_err();
    assert!(
        absent
            .to_string()
            .contains("absent.toml:1:1: error: can't be read"),
        "{absent}"
    );
    let path = folder.path().join("latin.toml");
    std::fs::write(&path, b"[node]\nname = \"\xfc\"\n").unwrap();
    let latin = configuration::load(&path).unwrap_err();
    assert!(
        latin.to_string().contains("not UTF-8 text from byte 15"),
        "{latin}"
    );
}

#[test]
fn files_are_sought_beside_the_configuration_and_passwords_are_not_shown() {
    let folder = tempfile::tempdir().unwrap();
    std::fs::write(
        folder.path().join("password"),
        "secret words\nsecond line\n",
    )
    .unwrap();
    std::fs::write(folder.path().join("ca.pem"), "").unwrap();
    let text = format!("{HEAD}{CHANNEL}").replace(
        "url = \"mqtt://127.0.0.1\"",
        "url = \"mqtts://broker\"\nca_file = \"ca.pem\"\nusername = \"u\"\n\
         password_file = \"password\"",
    );
    let path = folder.path().join("f.toml");
    std::fs::write(&path, &text).unwrap();
    let broker = configuration::load(&path).unwrap().broker;
    let login = broker.login.as_ref().unwrap();
    assert_eq!(
        (login.username.as_str(), login.password.as_str()),
        ("u", "secret words")
    );
    assert_eq!(
        broker.tls.as_ref().unwrap().ca_file,
        folder.path().join("ca.pem")
    );
    assert_eq!(
        (broker.port, broker.client_id.as_str()),
        (8883, "holdtrue-n")
    );
    assert!(!format!("{broker:?}").contains("secret"), "{broker:?}");

    std::fs::write(
        &path,
        text.replace("mqtts", "mqtt")
            .replace("ca_file = \"ca.pem\"\n", ""),
    )
    .unwrap();
    let open = configuration::load(&path).unwrap().warnings;
    assert!(
        open.len() == 1 && open[0].message.contains("in the clear"),
        "{open:?}"
    );
}
