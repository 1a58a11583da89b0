//! Recordings become inputs: which column is whose value, the order of time over several files,
//! what is refused and how it is said.

use holdtrue::configuration::{self, Configuration};
use holdtrue::import::mapping::Mapping;
use holdtrue::import::merge::Merge;
use holdtrue::import::recording::{Form, Source};
use holdtrue::import::survey::Survey;
use holdtrue::import::{ImportError, Words};
use holdtrue_engine::event::Input;
use holdtrue_engine::time::{Duration, Timestamp};
use proptest::prelude::*;
use std::path::Path;

/// 2026-01-01T00:00:00Z, in seconds.
const NEW_YEAR: i64 = 1_767_225_600;

/// Two channels with a laboratory between them, a temperature, and a known value with a gate.
const CONFIGURATION: &str = r#"
[node]
name = "north-works"
[broker]
url = "mqtt://127.0.0.1:1883"

[[reference]]
name = "lab/ph"
topic = "works/lab"
value = "/ph"

[[reference]]
name = "span-gas"
constant = 7.0
valid_when = { topic = "works/check", equals = ["span", 1] }

[[channel]]
name = "intake/ph-1"
unit = "pH"
indication = { topic = "works/ph1", value = "/v" }
reference = "lab/ph"
influences = [{ name = "temperature", topic = "works/t", value = "/t" }]

[[channel]]
name = "intake/ph-2"
unit = "pH"
indication = { topic = "works/ph2", value = "/v" }
reference = "span-gas"

[[channel]]
name = "outlet/ph"
unit = "pH"
indication = { topic = "works/ph3", value = "/v" }
reference = { value = "/reference" }
"#;

fn configuration() -> Configuration {
    let now = Timestamp(NEW_YEAR * 1_000_000_000);
    configuration::from_text(CONFIGURATION, "c.toml", Path::new(""), now).unwrap()
}

/// Files by their names, and what the command line says of them.
struct Files<'a> {
    files: &'a [(&'a str, &'a str)],
    words: Words,
}

/// `--map` and `--time`, the rest by default.
fn words(maps: &[&str], times: &[&str]) -> Words {
    let texts = |list: &[&str]| list.iter().map(|text| (*text).to_owned()).collect();
    Words {
        maps: texts(maps),
        times: texts(times),
        ..Words::default()
    }
}

impl Files<'_> {
    /// Everything that is wrong, or what the engine would be told.
    fn import(&self) -> Result<(Survey, Vec<Input>), String> {
        let read = Mapping::from_words(&self.words, &configuration());
        let mapping = read.map_err(|list| list.join("\n"))?;
        import(self.files, &mapping).map_err(|error| error.to_string())
    }

    /// What is wrong, the folder left out.
    fn problems(&self) -> String {
        match self.import() {
            Ok((survey, _)) => survey.problems.to_string(),
            Err(text) => text,
        }
    }

    /// The inputs in short.
    fn told(&self) -> Vec<String> {
        let (survey, inputs) = self.import().unwrap();
        assert_eq!(survey.problems.count, 0, "{}", survey.problems);
        assert_eq!(survey.extent().count, inputs.len() as u64);
        inputs.iter().map(short).collect()
    }
}

fn import(files: &[(&str, &str)], mapping: &Mapping) -> Result<(Survey, Vec<Input>), ImportError> {
    let folder = tempfile::tempdir().unwrap();
    let mut sources = Vec::new();
    for (name, text) in files {
        let path = folder.path().join(name);
        std::fs::write(&path, text).unwrap();
        let form = Form::of(&path).unwrap();
        sources.push(Source { path, form });
    }
    let mut survey = Survey::of(&sources, mapping, &mut |_| {})?;
    if survey.problems.count == 0 {
        survey.check(mapping)?;
    }
    let mut merge = Merge::new(&survey, mapping);
    let mut inputs = Vec::new();
    while let Some(entry) = merge.advance()? {
        inputs.push(entry.input());
    }
    let before = format!("{}/", folder.path().display());
    for problem in &mut survey.problems.named {
        problem.file = problem.file.replace(&before, "");
    }
    Ok((survey, inputs))
}

/// `60 indication/0 7.25`: seconds since the new year, whose, what.
fn short(input: &Input) -> String {
    let seconds = |at: Timestamp| at.0 / 1_000_000_000 - NEW_YEAR;
    match input {
        Input::Reading(reading) => {
            assert_eq!(reading.received, reading.phenomenon);
            let source = format!("{:?}", reading.source);
            let source: String = source.chars().filter(|it| it.is_alphanumeric()).collect();
            let source = source.replace("ReferenceReferenceId", "Reference");
            let source = source.replace("InfluenceInfluenceId", "Influence");
            let source = source.replace("ChannelId", "Channel");
            let excluded = if reading.excluded { " excluded" } else { "" };
            format!(
                "{} {source} {}{excluded}",
                seconds(reading.phenomenon),
                reading.value
            )
        }
        Input::Gate(gate) => {
            let state = if gate.open { "open" } else { "shut" };
            format!(
                "{} gate{} {state}",
                seconds(gate.phenomenon),
                gate.reference.0
            )
        }
        other => panic!("no input of a recording: {other:?}"),
    }
}

#[test]
fn columns_become_indications_references_influences_and_gates_in_that_order_of_an_instant() {
    let text = "at,pH,lab pH,temp,check\n\
        2026-01-01T00:00:00Z,7.25,7.2,19.5,span\n\
        2026-01-01T00:01:00Z,7.26,,,\n\
        2026-01-01T00:02:00Z,7.27,,19.6,run\n\
        ,,,,\n";
    let files = Files {
        files: &[("a.csv", text)],
        words: words(
            &[
                "pH=intake/ph-1",
                "lab pH=reference:lab/ph",
                "temp=influence:intake/ph-1:temperature",
                "check=valid_when:span-gas",
            ],
            &["at"],
        ),
    };
    assert_eq!(
        files.told(),
        [
            "0 gate1 open",
            "0 Reference0 7.2",
            "0 Influence0 19.5",
            "0 IndicationChannel0 7.25",
            "60 IndicationChannel0 7.26",
            "120 gate1 shut",
            "120 Influence0 19.6",
            "120 IndicationChannel0 7.27",
        ]
    );
}

#[test]
fn files_of_different_forms_are_merged_by_time() {
    let senml = "[{\"bn\":\"works/\",\"bt\":1767225600,\"n\":\"ph3\",\"v\":6.5},\n\
        {\"n\":\"ph3\",\"t\":90,\"v\":6.6},{\"n\":\"other\",\"t\":90,\"v\":1}]\n\
        [{\"n\":\"works/ph3\",\"t\":1767225720,\"v\":6.7}]\n";
    let files = Files {
        files: &[
            (
                "later.csv",
                "sampled;pH\n1767225660;7,26\n1767225720;7,27\n",
            ),
            (
                "lab.jsonl",
                "{\"at\":1767225630,\"lab\":{\"ph\":7.2}}\n\
                 {\"at\":1767225700,\"lab\":{\"ph\":null}}\n",
            ),
            ("outlet.senml", senml),
        ],
        words: Words {
            time_format: "epoch".parse().unwrap(),
            decimal_comma: true,
            separator: Some(b';'),
            ..words(
                &[
                    "pH=intake/ph-1",
                    "/lab/ph=reference:lab/ph",
                    "works/ph3=outlet/ph",
                ],
                &["sampled", "/at"],
            )
        },
    };
    // In lab.jsonl "pH" is a member that no line has, in later.csv "/lab/ph" no column: each file
    // is asked for what it has.
    assert_eq!(
        files.told(),
        [
            "0 IndicationChannel2 6.5",
            "30 Reference0 7.2",
            "60 IndicationChannel0 7.26",
            "90 IndicationChannel2 6.6",
            "120 IndicationChannel0 7.27",
            "120 IndicationChannel2 6.7",
        ]
    );
}

#[test]
fn a_file_out_of_order_is_put_in_order_and_told() {
    let files = Files {
        files: &[(
            "a.csv",
            "at,v\n2026-01-01,1\n2026-01-03,3\n2026-01-02,2\n2026-01-04,4\n",
        )],
        words: words(&["v=intake/ph-1"], &["at"]),
    };
    let (survey, inputs) = files.import().unwrap();
    let told: Vec<String> = inputs.iter().map(short).collect();
    assert_eq!(
        told,
        [
            "0 IndicationChannel0 1",
            "86400 IndicationChannel0 2",
            "172800 IndicationChannel0 3",
            "259200 IndicationChannel0 4",
        ]
    );
    assert_eq!(survey.files[0].disorder, Duration::from_seconds(86_400));
    assert_eq!(survey.files[0].disorder_line, 4);
}

#[test]
fn every_sensor_in_one_column_is_told_apart_by_another() {
    let text = "when,sensor,value,quality\n\
        01.01.2026 01:00,PH1,7.25,0\n\
        01.01.2026 01:00,PH2,7.05,0\n\
        01.01.2026 01:01,PH1,7.26,4\n\
        01.01.2026 01:01,PH9,broken,0\n\
        01.01.2026 01:02,PH2,n/a,0\n";
    let mapping = r#"
        missing = ["n/a"]

        [[time]]
        column = "when"
        format = "%d.%m.%Y %H:%M"
        utc_offset = "+01:00"

        [[column]]
        column = "value"
        indication = "intake/ph-1"
        only_where = { column = "sensor", equals = ["PH1"] }
        status = { column = "quality", good = [0] }

        [[column]]
        column = "value"
        indication = "intake/ph-2"
        only_where = { column = "sensor", equals = ["PH2"] }
    "#;
    let mapping = Mapping::from_toml(mapping, "m.toml", &configuration()).unwrap();
    let (survey, inputs) = import(&[("a.csv", text)], &mapping).unwrap();
    assert_eq!(survey.problems.count, 0, "{}", survey.problems);
    assert_eq!((survey.extent().count, survey.extent().excluded), (3, 1));
    let told: Vec<String> = inputs.iter().map(short).collect();
    assert_eq!(
        told,
        [
            "0 IndicationChannel0 7.25",
            "0 IndicationChannel1 7.05",
            "60 IndicationChannel0 7.26 excluded",
        ]
    );
}

#[test]
fn a_status_may_stand_anywhere_in_its_pack() {
    let text = "[{\"bt\":1767225600,\"n\":\"q\",\"vs\":\"ok\"},{\"n\":\"p\",\"v\":1}]\n\
        [{\"bt\":1767225660,\"n\":\"p\",\"v\":2},{\"n\":\"q\",\"vs\":\"bad\"}]\n";
    let files = Files {
        files: &[("a.senml", text)],
        words: Words {
            status: Some("q=ok".to_owned()),
            ..words(&["p=intake/ph-1"], &[])
        },
    };
    let told = files.told();
    assert_eq!(
        told,
        ["0 IndicationChannel0 1", "60 IndicationChannel0 2 excluded"]
    );
}

#[test]
fn a_pack_over_a_whole_file_is_read_in_pieces_with_its_base() {
    let records: Vec<String> = (0..5000)
        .map(|index| format!("{{\"n\":\"p\",\"t\":{index},\"v\":{index}}}"))
        .collect();
    let text = format!(
        "[{{\"bn\":\"s/\",\"bt\":1767225600,\"bv\":0.5}},\n{}]",
        records.join(",\n")
    );
    let files = Files {
        files: &[("a.senml", &text)],
        words: words(&["s/p=intake/ph-1"], &[]),
    };
    let told = files.told();
    assert_eq!(told.len(), 5000);
    assert_eq!(told[4999], "4999 IndicationChannel0 4999.5");
}

proptest! {
    /// The same values in one file and in order, or over three files and in any order within each.
    #[test]
    fn how_values_are_distributed_over_files_plays_no_part(
        values in prop::collection::vec((0_i64..50, 0_usize..3, 0_usize..3), 1..60),
        shuffle in any::<u64>(),
    ) {
        const MAPS: [&str; 3] = ["a=intake/ph-1", "b=reference:lab/ph", "c=valid_when:span-gas"];
        let mut seen = std::collections::BTreeSet::new();
        let mut values = values;
        values.retain(|(time, column, _)| seen.insert((*time, *column)));
        let row = |(time, column, _): &(i64, usize, usize)| {
            let cell = |place: usize| if place == *column { "1" } else { "" };
            format!("{},{},{},{}\n", NEW_YEAR + time, cell(0), cell(1), cell(2))
        };
        let whole = |text: String| format!("at,a,b,c\n{text}");
        let told = |files: &[(&str, &str)]| {
            let words = Words { time_format: "epoch".parse().unwrap(), ..words(&MAPS, &["at"]) };
            Files { files, words }.told()
        };
        let mut sorted = values.clone();
        sorted.sort_unstable();
        let expected = told(&[("one.csv", &whole(sorted.iter().map(row).collect()))]);
        let key = |index: usize| (index as u64).wrapping_mul(shuffle | 1).rotate_left(17);
        let mut order: Vec<usize> = (0..values.len()).collect();
        order.sort_by_key(|index| key(*index));
        let part = |file: usize| {
            let rows = order.iter().map(|index| &values[*index]);
            whole(rows.filter(|value| value.2 == file).map(row).collect())
        };
        let parts = [part(0), part(1), part(2)];
        let split = told(&[("x.csv", &parts[0]), ("y.csv", &parts[1]), ("z.csv", &parts[2])]);
        prop_assert_eq!(split, expected);
    }
}

/// A file, the flags, and what is said.
type Case = ([(&'static str, &'static str); 1], Words, &'static str);

fn csv(text: &'static str) -> [(&'static str, &'static str); 1] {
    [("a.csv", text)]
}

/// The first pH, from the column v.
fn ph1() -> Words {
    words(&["v=intake/ph-1"], &["at"])
}

fn assert_said(cases: Vec<Case>) {
    for (files, words, message) in cases {
        let told = Files {
            files: &files,
            words,
        }
        .problems();
        assert!(
            told.contains(message),
            "{files:?}\n{told}\nlacks\n{message}"
        );
    }
}

#[test]
fn a_cell_that_cannot_be_read_is_named_with_its_place_and_the_way_out() {
    assert_said(vec![
        (
            csv("at,v\n2026-01-01,7,25\n"),
            ph1(),
            "a.csv:2: the row has 3 cells where the header has 2",
        ),
        (
            csv("at,v\n2026-01-01,\"7,25\"\n"),
            ph1(),
            "a.csv:2: v: \"7,25\" is not a number; if its decimal sign \
             is a comma, say --decimal-comma",
        ),
        (
            csv("at,v\n2026-01-01,n/a\n"),
            ph1(),
            "a.csv:2: v: \"n/a\" is not a number; if it stands for \
             no value, name it with --missing",
        ),
        (
            csv("at,v\n2026-01-01,NaN\n"),
            ph1(),
            "a.csv:2: v: \"NaN\" is no finite number; if it stands for \
             no value, name it with --missing",
        ),
        (
            csv("at,v\n01.02.2026,1\n"),
            ph1(),
            "a.csv:2: at: \"01.02.2026\" is neither RFC 3339 nor a date; if the \
             recording writes times otherwise, say how with --time-format",
        ),
        (
            csv("at,v\n2026-01-01 12:00:00,1\n"),
            ph1(),
            "a.csv:2: at: \"2026-01-01 12:00:00\" has no offset from UTC; say \
             which clock it is with --utc-offset, as Z or +01:00",
        ),
        (
            csv("at,v\n2026-02-30,1\n"),
            ph1(),
            "a.csv:2: at: \"2026-02-30\" no such day",
        ),
        (
            csv("at,v\n,1\n"),
            ph1(),
            "a.csv:2: at: \"\" is neither RFC 3339 nor a date",
        ),
    ]);
}

#[test]
fn columns_that_are_not_there_or_taken_twice_are_named() {
    assert_said(vec![
        (
            csv("at;v\n2026-01-01;1\n"),
            ph1(),
            "a.csv: has no column of times at; it has: at;v; is another character its separator?",
        ),
        (
            csv("at,w\n2026-01-01,1\n"),
            ph1(),
            "a.csv: has none of the mapped columns; it has: at, w",
        ),
        (
            csv("at,v\n"),
            words(&["v=intake/ph-1"], &[]),
            "say which column is the time, with --time",
        ),
        (
            csv("at,v\n"),
            Words {
                status: Some("q=0".into()),
                ..ph1()
            },
            "has no column q, which goes with v",
        ),
        (
            csv("at,v,w\n"),
            words(&["v=intake/ph-1", "w=intake/ph-1"], &["at"]),
            "v and w are mapped to the same value; keep one",
        ),
    ]);
}

#[test]
fn json_and_senml_that_cannot_be_read_are_named_with_their_place() {
    let json = |text: &'static str| [("a.jsonl", text)];
    let senml = |text: &'static str| [("a.senml", text)];
    assert_said(vec![
        (
            json("{\"at\":\"2026-01-01\",\"v\":\"7\"}\n"),
            ph1(),
            "a.jsonl:1: v: \"\\\"7\\\"\" is not a JSON number",
        ),
        (
            json("{\"v\":7}\n"),
            ph1(),
            "a.jsonl:1: at: is not there, and so there is no time",
        ),
        (
            json("{\"at\":\"2026-01-01\",\"v\":7\n[1]\n"),
            ph1(),
            "a.jsonl:2: the line is no JSON object; a pack of records is read as senml",
        ),
        (
            json("{\"at\":\"2026-01-01\"}\n"),
            ph1(),
            "none of the files has v, which the mapping names",
        ),
        (
            senml("[{\"n\":\"v\",\"v\":7}]"),
            ph1(),
            "a time below 2^28 s counts from now",
        ),
        (
            senml("{\"n\":\"v\",\"v\":7}"),
            ph1(),
            "a.senml:2: is no SenML: an array, [ … ], must begin here",
        ),
        (
            senml("[{\"n\":\"v\",\"t\":1767225600,\"vs\":\"7\"}]"),
            ph1(),
            "a.senml:1: v: the record v holds no number",
        ),
    ]);
}

#[test]
fn a_bad_value_costs_itself_and_a_bad_time_its_row() {
    let files = Files {
        files: &[(
            "a.csv",
            "at,v,w\n2026-01-01,x,2\nnoon,3,4\n2026-01-03,5,6\n",
        )],
        words: words(&["v=intake/ph-1", "w=intake/ph-2"], &["at"]),
    };
    let (survey, inputs) = files.import().unwrap();
    assert_eq!(survey.problems.count, 2, "{}", survey.problems);
    let told: Vec<String> = inputs.iter().map(short).collect();
    assert_eq!(
        told,
        [
            "0 IndicationChannel1 2",
            "172800 IndicationChannel0 5",
            "172800 IndicationChannel1 6",
        ]
    );
}

#[test]
fn names_that_the_configuration_does_not_have_are_told_with_those_it_has() {
    let cases = [
        ("v", "is not COLUMN=SOURCE"),
        (
            "v=intake/ph1",
            "no channel \"intake/ph1\"; did you mean \"intake/ph-1\"?",
        ),
        ("v=reference:lab/pH", "did you mean \"lab/ph\"?"),
        (
            "v=reference:span-gas",
            "is known, 7; map nothing to it, but its valid_when",
        ),
        (
            "v=valid_when:lab/ph",
            "reference \"lab/ph\" has no valid_when",
        ),
        (
            "v=influence:intake/ph-1:pressure",
            "has no influence \"pressure\" on channel \"intake/ph-1\"; it has temperature",
        ),
        (
            "v=influence:intake/ph-2:pressure",
            "has no influence \"pressure\" on channel \"intake/ph-2\"",
        ),
        (
            "v=colour:red",
            "\"colour:red\" is no source; write CHANNEL, reference:NAME",
        ),
    ];
    for (map, message) in cases {
        let told = Files {
            files: &[],
            words: words(&[map], &["at"]),
        }
        .problems();
        assert!(told.contains(message), "{map}: {told}");
    }
    let own = words(&["v=reference:outlet/ph"], &["at"]);
    assert!(Mapping::from_words(&own, &configuration()).is_ok());
    let twice = words(&["v=intake/ph-1", "v=intake/ph-1"], &["at"]);
    let told = Mapping::from_words(&twice, &configuration()).unwrap_err();
    assert_eq!(told, ["--map v=intake/ph-1 is said twice"]);
}

#[test]
fn words_that_can_not_be_understood_are_all_told_at_once() {
    let wrong = Words {
        status: Some("q".to_owned()),
        utc_offset: Some("CET".to_owned()),
        ..words(&[], &["at"])
    };
    let told = Mapping::from_words(&wrong, &configuration()).unwrap_err();
    for (told, message) in told.iter().zip([
        "--status q: is not COLUMN=GOOD[,GOOD…], as flag=ok,0",
        "--utc-offset: \"CET\" is no offset from UTC; write Z, or as +01:00 or -03:30",
        "say what the columns are, with --map COLUMN=SOURCE or --columns FILE",
    ]) {
        assert_eq!(told, message);
    }
    assert_eq!(told.len(), 3);
}

#[test]
fn a_cell_that_is_no_text_is_named_and_the_next_row_read() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("a.csv");
    std::fs::write(&path, b"at,v\n2026-01-01,\xb5\n2026-01-02,2\n").unwrap();
    let mapping = Mapping::from_words(&words(&["v=intake/ph-1"], &["at"]), &configuration());
    let form = Form::Csv;
    let survey = Survey::of(&[Source { path, form }], &mapping.unwrap(), &mut |_| {}).unwrap();
    let told = survey.problems.to_string();
    assert!(
        told.ends_with("a.csv:2: v: \"\u{fffd}\" is not UTF-8; convert the file"),
        "{told}"
    );
    assert_eq!((survey.problems.count, survey.extent().count), (1, 1));
}

#[test]
fn a_pack_too_long_to_be_read_whole_is_refused_only_with_a_status() {
    let records = vec!["{\"n\":\"p\",\"v\":1}"; 100_000].join(",");
    let text = format!("[{{\"bt\":1767225600}},{records}]");
    let files = [("a.senml", text.as_str())];
    let plain = words(&["p=intake/ph-1"], &[]);
    let with_status = Words {
        status: Some("q=ok".to_owned()),
        ..plain.clone()
    };
    let read = |words| {
        Files {
            files: &files,
            words,
        }
        .import()
        .unwrap()
        .0
    };
    assert_eq!(read(plain).extent().count, 100_000);
    let survey = read(with_status);
    let told = survey.problems.to_string();
    assert!(
        told.contains("a pack of 100000 records or more can't be read with a status"),
        "{told}"
    );
    assert_eq!((survey.problems.count, survey.extent().count), (1, 0));
}

#[test]
fn a_mapping_file_is_refused_with_everything_that_is_wrong_with_it() {
    let text = "missing = [1]\nseparator = \"ab\"\ncolour = 1\n\n\
        [[time]]\ncolumn = \"at\"\nformat = \"american\"\nutc_offset = \"CET\"\n\n\
        [[column]]\ncolumn = \"v\"\nindication = \"intake/ph9\"\n\n\
        [[column]]\ncolumn = \"w\"\nindication = \"intake/ph-1\"\nreference = \"lab/ph\"\n\n\
        [[column]]\ncolumn = \"x\"\nvalid_when = \"span-gas\"\nstatus = { column = \"q\" }\n";
    let problems = Mapping::from_toml(text, "m.toml", &configuration()).unwrap_err();
    let told = problems.to_string();
    for part in [
        "m.toml:1:12: error: missing: 1 is not a list of texts",
        "m.toml:2:13: error: separator: must be one character, or the word tab",
        "m.toml:3:1: error: colour: unknown key",
        "m.toml:7:10: error: time[1].format: \"american\" is not a time format",
        "m.toml:8:14: error: time[1].utc_offset: \"CET\" is no offset from UTC",
        "m.toml:12:14: error: column[1].indication: the configuration has no channel",
        "column[2]: must have one of indication, reference, influence, valid_when",
        "column[3].status.good: is missing",
        "column[3].status: says nothing of a valid_when",
    ] {
        assert!(told.contains(part), "{told}\nlacks\n{part}");
    }
    assert_eq!(problems.list.len(), 9, "{told}");
}

#[test]
fn a_mapping_file_says_all_that_the_command_line_says() {
    let text = r#"
        separator = ";"
        decimal_comma = true
        missing = ["n/a"]

        [[time]]
        column = "at"
        format = "epoch"

        [[column]]
        column = "pH"
        indication = "intake/ph-1"
        status = { column = "q", good = ["ok"] }

        [[column]]
        column = "lab"
        reference = "lab/ph"
        status = { column = "q", good = ["ok"] }

        [[column]]
        column = "t"
        influence = { channel = "intake/ph-1", name = "temperature" }
        status = { column = "q", good = ["ok"] }

        [[column]]
        column = "check"
        valid_when = "span-gas"
    "#;
    let told = Words {
        time_format: "epoch".parse().unwrap(),
        missing: vec!["n/a".to_owned()],
        decimal_comma: true,
        separator: Some(b';'),
        status: Some("q=ok".to_owned()),
        ..words(
            &[
                "pH=intake/ph-1",
                "lab=reference:lab/ph",
                "t=influence:intake/ph-1:temperature",
                "check=valid_when:span-gas",
            ],
            &["at"],
        )
    };
    let file = Mapping::from_toml(text, "m.toml", &configuration()).unwrap();
    assert_eq!(Ok(file), Mapping::from_words(&told, &configuration()));
}

#[test]
fn the_example_of_a_mapping_shows_every_setting_and_is_accepted() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("config");
    let configuration = configuration::load(&folder.join("every-setting.toml")).unwrap();
    let text = std::fs::read_to_string(folder.join("import/columns.toml")).unwrap();
    let mapping = Mapping::from_toml(&text, "columns.toml", &configuration);
    let mapping = mapping.unwrap_or_else(|problems| panic!("{problems}"));
    assert_eq!((mapping.times.len(), mapping.columns.len()), (2, 5));
    for key in [
        "separator",
        "decimal_comma",
        "missing",
        "format",
        "utc_offset",
        "status",
        "good",
        "indication",
        "reference",
        "influence",
        "valid_when",
        "only_where",
        "equals",
    ] {
        assert!(text.contains(&format!("{key} = ")), "{key} is not shown");
    }
}
