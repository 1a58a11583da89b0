//! Any bytes as a recording: every value that is taken is finite, in the order of time, and
//! counted; whatever else is in the file is named.

#![no_main]

use holdtrue::configuration;
use holdtrue::import::ImportError;
use holdtrue::import::mapping::Mapping;
use holdtrue::import::merge::Merge;
use holdtrue::import::recording::{Form, Source};
use holdtrue::import::survey::Survey;
use holdtrue_engine::event::Input;
use holdtrue_engine::time::Timestamp;
use libfuzzer_sys::fuzz_target;
use std::path::{Path, PathBuf};
use std::sync::OnceLock;

const CONFIGURATION: &str = r#"
[node]
name = "n"
[broker]
url = "mqtt://127.0.0.1"
[[channel]]
name = "c"
unit = "m"
indication = { topic = "c", value = "/v" }
reference = { constant = 0, valid_when = { topic = "g", equals = ["on", 1] } }
"#;

/// Short names, so that a few bytes make a row.
const MAPPING: &str = r#"
missing = ["-"]
[[time]]
column = "t"
format = "epoch"
[[time]]
column = "at"
[[column]]
column = "v"
indication = "c"
status = { column = "q", good = [0] }
[[column]]
column = "g"
valid_when = "c"
"#;

fn mapping() -> &'static Mapping {
    static READ: OnceLock<Mapping> = OnceLock::new();
    READ.get_or_init(|| {
        let read = configuration::from_text(CONFIGURATION, "", Path::new(""), Timestamp(0));
        let read = read.unwrap_or_else(|problems| panic!("{problems}"));
        let mapping = Mapping::from_toml(MAPPING, "", &read);
        mapping.unwrap_or_else(|problems| panic!("{problems}"))
    })
}

/// One file for each fuzzing process.
fn file() -> PathBuf {
    std::env::temp_dir().join(format!("holdtrue-fuzz-recording-{}", std::process::id()))
}

fuzz_target!(|data: &[u8]| {
    let Some((form, bytes)) = data.split_first() else {
        return;
    };
    let form = [Form::Csv, Form::JsonLines, Form::Senml][usize::from(form % 3)];
    let path = file();
    std::fs::write(&path, bytes).expect("the folder for temporary files can be written to");
    let sources = [Source { path, form }];
    let survey = match Survey::of(&sources, mapping(), &mut |_| {}) {
        Ok(survey) => survey,
        Err(ImportError::Misfit(_) | ImportError::File { .. }) => return,
        Err(other) => panic!("{other}"),
    };
    let mut merge = Merge::new(&survey, mapping());
    let (mut count, mut last) = (0, None);
    while let Some(entry) = merge.advance().expect("the file has not changed") {
        assert!(last <= Some(entry.at), "in the order of time");
        if let Input::Reading(reading) = entry.input() {
            assert!(reading.value.is_finite());
        }
        last = Some(entry.at);
        count += 1;
    }
    assert_eq!(count, survey.extent().count);
});
