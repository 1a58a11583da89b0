//! `holdtrue check` as an operator or a script uses it: texts, JSON, exit codes.

use std::path::Path;
use std::process::{Command, Output};

const SOUND: &str = "[node]\nname = \"n\"\n[broker]\nurl = \"mqtt://127.0.0.1\"\n[[channel]]\n\
                     name = \"a\"\nunit = \"pH\"\nindication = { topic = \"works/a\" }\n\
                     reference = { constant = 7.0, uncertainty = { common = 0.01 } }\n";

fn holdtrue(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_holdtrue"))
        .args(arguments)
        .env_remove("RUST_LOG")
        .output()
        .expect("the command was built for this test")
}

/// Writes a configuration and checks it: exit code, standard output, standard error.
fn check(text: &str, more: &[&str]) -> (i32, String, String) {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let path = folder.path().join("holdtrue.toml");
    std::fs::write(&path, text).expect("the folder is ours");
    let path = path.to_str().expect("its name is text");
    let output = holdtrue(&[&["check", "--config", path], more].concat());
    let text = |bytes: Vec<u8>| {
        String::from_utf8(bytes)
            .expect("the output is text")
            .replace(path, "FILE")
    };
    (
        output.status.code().expect("it ended by itself"),
        text(output.stdout),
        text(output.stderr),
    )
}

#[test]
fn a_sound_file_ends_with_0_and_says_what_would_be_done() {
    let (code, out, err) = check(SOUND, &[]);
    assert_eq!((code, err.as_str()), (0, ""));
    for part in [
        "node      n, live clock",
        "broker    127.0.0.1:1883, MQTT 5, no TLS",
        "subscribe works/a",
        "channel   a (pH)",
        "against the known value 7 pH, u 0 each and 0.01 common",
        "window 30 d in 64 segments, degree up to 2",
        "sound: 1 channel, 0 warnings",
    ] {
        assert!(out.contains(part), "{out}\nlacks {part}");
    }
}

#[test]
fn warnings_are_shown_and_do_not_refuse() {
    let (code, out, _) = check(&format!("{SOUND}window = \"1 d\"\n"), &[]);
    assert_eq!(code, 0);
    assert!(
        out.starts_with("FILE:10:10: warning: channel[1].window: holds fewer than"),
        "{out}"
    );
    assert!(out.ends_with("sound: 1 channel, 1 warning\n"), "{out}");
}

/// From what is declared: noise 0.02 and a limit of 0.08 in 30 days, σ/ω = 7.5 d. The widest
/// spacing is T³(ω/3.3σ)²/12 = 30·(0.08/(3.3·0.02))²/12 = 3.67 d (Weatherhead et al. 1998, solved
/// for it).
#[test]
fn whether_the_cadence_can_show_the_drift_is_said_before_the_first_pair() {
    let limited = format!("{SOUND}max_permissible_error = 0.08\n");
    let (_, out, _) = check(&limited, &[]);
    assert!(
        out.contains("cadence: can't be judged: declare noise"),
        "{out}"
    );
    assert!(
        out.contains("error 0.08 pH with a guard band of 1·U"),
        "{out}"
    );
    let (_, out, _) = check(&format!("{limited}noise = 0.02\n"), &[]);
    assert!(out.contains("pairs come at least every 3.7 d"), "{out}");
    // Six times the noise: 36 times as often.
    let simple = "noise = 0.12\ndecision_rule = \"simple\"\n";
    let (_, out, _) = check(&format!("{limited}{simple}"), &["--json"]);
    let answer: serde_json::Value = serde_json::from_str(&out).unwrap();
    let text = answer["cadence"][0]["text"].as_str().unwrap();
    assert!(text.contains("at least every 2.4 h"), "{text}");
    // In pairs: (3.3·0.02·√12·1000/0.08)^⅔ = 201.4 of them.
    let pairs = "noise = 0.02\nwindow = \"1000 pairs\"\n";
    let (_, out, _) = check(&format!("{limited}{pairs}"), &[]);
    assert!(
        out.contains("shows after 202 pairs: within the window"),
        "{out}"
    );
    // Nothing to see without limits.
    let (_, out, _) = check(SOUND, &[]);
    assert!(!out.contains("cadence"), "{out}");
}

#[test]
fn a_wrong_file_ends_with_2_and_says_everything() {
    let (code, out, _) = check(&format!("{SOUND}windw = \"1 d\"\nsegments = 0\n"), &[]);
    assert_eq!(code, 2);
    assert_eq!(
        out,
        "FILE:10:1: error: channel[1].windw: unknown key; did you mean window?\n\
         FILE:11:12: error: channel[1].segments: 0 is not a whole number from 1 to 1024\n\n\
         refused: 2 errors, 0 warnings\n"
    );
    let absent = holdtrue(&["check", "--config", "/no/such/file.toml"]);
    assert_eq!(absent.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&absent.stdout).contains("can't be read"));
}

#[test]
fn json_says_the_same_to_a_program() {
    let (code, out, _) = check(&format!("{SOUND}window = \"1 d\"\n"), &["--json"]);
    let answer: serde_json::Value = serde_json::from_str(&out).unwrap();
    assert_eq!((code, &answer["sound"]), (0, &true.into()));
    assert_eq!(answer["configuration"].as_str().map(str::len), Some(64));
    assert_eq!(answer["subscriptions"], serde_json::json!(["works/a"]));
    assert_eq!(answer["problems"][0]["severity"], "warning");
    assert_eq!(
        (
            &answer["problems"][0]["line"],
            &answer["problems"][0]["column"]
        ),
        (&10.into(), &10.into())
    );

    let (code, out, _) = check(&SOUND.replace("pH", ""), &["--json"]);
    let answer: serde_json::Value = serde_json::from_str(&out).unwrap();
    assert_eq!((code, &answer["sound"]), (2, &false.into()), "{out}");
    assert_eq!(answer["problems"][0]["key"], "channel[1].unit");
    assert!(answer["configuration"].is_null() && answer["node"].is_null());
}

#[test]
fn wrong_usage_ends_with_2_and_help_with_0() {
    for arguments in [
        &["chekc"][..],
        &["check"],
        &["check", "--config"],
        &[],
        &["check", "--conf", "x"],
    ] {
        assert_eq!(holdtrue(arguments).status.code(), Some(2), "{arguments:?}");
    }
    let bad_filter = holdtrue(&["--log", "a=b=c", "check", "--config", "x"]);
    assert_eq!(bad_filter.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&bad_filter.stderr).contains("a=b=c"));
    for arguments in [&["--help"][..], &["check", "--help"], &["--version"]] {
        let output = holdtrue(arguments);
        assert_eq!(output.status.code(), Some(0), "{arguments:?}");
    }
    let help = String::from_utf8(holdtrue(&["check", "--help"]).stdout).unwrap();
    assert!(
        help.contains("Example:\n  holdtrue check --config"),
        "{help}"
    );
}

#[test]
fn the_examples_pass_the_command() {
    for name in ["minimal.toml", "every-setting.toml"] {
        let path = Path::new(env!("CARGO_MANIFEST_DIR"))
            .join("config")
            .join(name);
        let output = holdtrue(&["check", "--config", path.to_str().unwrap()]);
        assert_eq!(
            output.status.code(),
            Some(0),
            "{}",
            String::from_utf8_lossy(&output.stdout)
        );
    }
}
