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
