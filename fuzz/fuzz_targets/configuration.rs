//! Any text is either a configuration or a list of problems with places inside the text.

#![no_main]

use holdtrue::configuration;
use holdtrue::payload::Intake;
use holdtrue_engine::time::Timestamp;
use libfuzzer_sys::fuzz_target;
use std::path::Path;

fuzz_target!(|text: &str| {
    // A file name in the text must not make the fuzzer read this machine.
    if text.contains("_file") || text.contains("client_") {
        return;
    }
    match configuration::from_text(text, "", Path::new("/nonexistent"), Timestamp(0)) {
        Ok(read) => {
            let _ = Intake::new(&read.intake);
            assert!(!read.setup.channels.is_empty());
        }
        Err(problems) => {
            assert!(!problems.list.is_empty());
            let lines = text.matches('\n').count() + 1;
            assert!(
                problems
                    .list
                    .iter()
                    .all(|problem| (1..=lines).contains(&problem.line))
            );
        }
    }
});
