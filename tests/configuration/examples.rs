//! The examples in config/ are sound, and one of them shows every setting that there is.

use crate::support::NOW;
use holdtrue::configuration::{self, Protocol};
use holdtrue_engine::setup::{
    ChannelId, Clock, Criterion, ReferenceId, ReferenceKind, Stamped, WindowLength,
};
use holdtrue_engine::time::{Duration, Timestamp};
use std::path::{Path, PathBuf};

fn example(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("config")
        .join(name)
}

#[test]
fn every_example_is_accepted() {
    let mut seen = 0;
    for entry in std::fs::read_dir(example("")).unwrap() {
        let path = entry.unwrap().path();
        if path
            .extension()
            .is_some_and(|extension| extension == "toml")
        {
            let loaded = configuration::load(&path);
            assert!(loaded.is_ok(), "{}", loaded.unwrap_err());
            seen += 1;
        }
    }
    assert!(seen >= 2, "found only {seen} examples");
}

#[test]
fn the_example_of_every_setting_misses_none() {
    let text = std::fs::read_to_string(example("every-setting.toml")).unwrap();
    // A setting that cannot stand beside the others is shown in a comment; take those in as well.
    let uncovered = |line| match str::strip_prefix(line, "# ") {
        Some(setting)
            if setting
                .split_once(" = ")
                .is_some_and(|(key, _)| is_key(key)) =>
        {
            setting
        }
        _ => line,
    };
    let shown = text.lines().map(uncovered).collect::<Vec<_>>().join("\n");
    let table: toml::de::DeTable<'_> = toml::de::DeTable::parse(&shown).unwrap().into_inner();
    let mut present = std::collections::BTreeSet::new();
    collect("", &table, &mut present);
    let known = configuration::settings(&text, Path::new(""));
    assert!(
        known.len() > 60,
        "the parser asked for too little to mean anything: {known:?}"
    );
    // A channel's own reference has the settings of a [[reference]], and an influence quantity's
    // place those of an indication's, shown there.
    let shown = |key: &str| {
        present.contains(key)
            || key
                .strip_prefix("channel.")
                .is_some_and(|key| present.contains(key))
            || key
                .strip_prefix("channel.influences.")
                .is_some_and(|key| present.contains(&format!("channel.indication.{key}")))
    };
    let missing: Vec<_> = known
        .iter()
        .filter(|key| !key.starts_with("defaults.") && !shown(key))
        .collect();
    assert_eq!(
        missing,
        Vec::<&String>::new(),
        "config/every-setting.toml does not show these"
    );
}

fn is_key(word: &str) -> bool {
    word.bytes()
        .all(|byte| byte.is_ascii_lowercase() || byte == b'_')
}

fn collect(
    path: &str,
    table: &toml::de::DeTable<'_>,
    present: &mut std::collections::BTreeSet<String>,
) {
    use toml::de::DeValue;
    for (key, value) in table {
        let path = if path.is_empty() {
            key.get_ref().to_string()
        } else {
            format!("{path}.{}", key.get_ref())
        };
        match value.get_ref() {
            DeValue::Table(below) => collect(&path, below, present),
            DeValue::Array(list) => {
                for below in list
                    .iter()
                    .filter_map(|element| element.get_ref().as_table())
                {
                    collect(&path, below, present);
                }
            }
            _ => {}
        }
        present.insert(path);
    }
}

#[test]
fn the_values_arrive_where_they_belong() {
    let text = std::fs::read_to_string(example("every-setting.toml")).unwrap();
    let read = configuration::from_text(&text, "every-setting.toml", Path::new("x"), NOW).unwrap();
    assert_eq!(read.broker.host, "127.0.0.1");
    assert_eq!(read.broker.protocol, Protocol::V5);
    assert_eq!(read.record.folder, Path::new("x").join("record"));
    assert_eq!(read.page.unwrap().listen.port(), 8437);
    let setup = read.setup;
    assert_eq!(
        (setup.node.as_str(), setup.clock),
        ("harrow-mere", Clock::Live)
    );
    assert_eq!(setup.fingerprint.len(), 64);

    let lab = &setup.references[0];
    assert_eq!(
        (lab.name.as_str(), &lab.kind),
        ("lab/ph", &ReferenceKind::Measured)
    );
    assert_eq!((lab.uncertainty_each, lab.uncertainty_common), (0.01, 0.02));
    assert_eq!(
        lab.expires,
        Some(Timestamp(2_130_019_200_000_000_000)),
        "the end of 2037-06-30"
    );
    assert_eq!(lab.stale_after, Some(Duration::from_seconds(9 * 86_400)));
    let hourly = &setup.references[1];
    assert_eq!(hourly.stands_for, Duration::from_seconds(3600));
    assert_eq!(hourly.stamped, Stamped::End);
    assert_eq!(
        setup.references[2].kind,
        ReferenceKind::Constant {
            value: 0.0,
            gated: true
        }
    );
}

#[test]
fn the_channels_arrive_as_written() {
    let text = std::fs::read_to_string(example("every-setting.toml")).unwrap();
    let read = configuration::from_text(&text, "every-setting.toml", Path::new("x"), NOW).unwrap();
    let setup = read.setup;
    let ph = &setup.channels[0];
    assert_eq!((ph.name.as_str(), ph.unit.as_str()), ("intake/ph-1", "pH"));
    assert_eq!(ph.reference, ReferenceId(0));
    assert_eq!(
        ph.fit.window,
        WindowLength::Time(Duration::from_seconds(60 * 86_400))
    );
    assert_eq!(
        (ph.fit.segments, ph.fit.max_degree, ph.fit.forced_degree),
        (64, 2, None)
    );
    assert_eq!(ph.fit.criterion, Criterion::Bic);
    assert_eq!(ph.screening.range, Some((0.0, 14.0)));
    assert_eq!(ph.alarms.gap_after, Some(Duration::from_seconds(7200)));
    assert!(ph.corrected_values && !ph.monitor_only);
    let influences: Vec<_> = ph.influences.iter().map(|it| it.name.as_str()).collect();
    assert_eq!(influences, ["temperature", "flow"]);
    assert_eq!(ph.influences[0].unit.as_deref(), Some("Cel"));
    assert_eq!(setup.influences[0].name, "works/intake/t1 \"/t\"");
    assert_eq!(setup.influences[1].name, "works/intake/ph1 \"/flow\"");
    let checked = &setup.channels[8];
    assert_eq!(
        setup.references[checked.reference.0 as usize].kind,
        ReferenceKind::Checks {
            points: vec![ReferenceId(2), ReferenceId(3)]
        }
    );

    let levels = &setup.channels[4..8];
    let members: Vec<_> = levels
        .iter()
        .map(
            |channel| match &setup.references[channel.reference.0 as usize].kind {
                ReferenceKind::Group { members } => members.clone(),
                other => panic!("{other:?}"),
            },
        )
        .collect();
    assert_eq!(
        members[1],
        [ChannelId(4), ChannelId(6), ChannelId(7)],
        "leaves itself out"
    );
    assert_eq!(levels[3].fit.forced_degree, Some(1));
    assert!(!levels[3].screening.enabled);
    assert_eq!(
        levels[0].fit.window,
        WindowLength::Time(Duration::from_seconds(30 * 86_400)),
        "from [defaults]"
    );
    assert_eq!(
        read.intake.filters,
        ["works/#"],
        "the wildcard covers every topic"
    );
}

#[test]
fn the_fingerprint_is_of_the_files_bytes() {
    let text = std::fs::read_to_string(example("minimal.toml")).unwrap();
    let of = |text: &str| {
        configuration::from_text(text, "", Path::new(""), NOW)
            .unwrap()
            .setup
            .fingerprint
    };
    assert_eq!(of(&text), of(&text));
    assert_ne!(
        of(&text),
        of(&format!("{text}\n")),
        "a blank line is another file"
    );
}
