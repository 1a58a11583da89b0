//! What the tests of the configuration share: when it is read, a sound beginning, and what is said
//! about a text.

use holdtrue::configuration::{self, Configuration, Problems, Severity};
use holdtrue_engine::time::Timestamp;
use std::path::Path;

/// 2026-01-01T00:00:00Z.
pub(crate) const NOW: Timestamp = Timestamp(1_767_225_600_000_000_000);

/// A sound beginning, five lines long.
pub(crate) const HEAD: &str = "[node]\nname = \"n\"\n[broker]\nurl = \"mqtt://127.0.0.1\"\n\n";

/// A piece of configuration, how its one problem begins, and what its message says.
pub(crate) type Case = (&'static str, &'static str, &'static [&'static str]);

/// Reads a configuration.
pub(crate) fn read(text: &str) -> Result<Configuration, Problems> {
    configuration::from_text(text, "f.toml", Path::new(""), NOW)
}

/// All problems as lines, errors and warnings.
pub(crate) fn problems(text: &str) -> Vec<String> {
    let list = match read(text) {
        Ok(configuration) => configuration.warnings,
        Err(problems) => {
            let is_error = |severity| severity == Severity::Error;
            assert!(problems.list.iter().any(|it| is_error(it.severity)));
            problems.list
        }
    };
    list.iter().map(|problem| problem.line_for("f")).collect()
}

/// Asserts that exactly one problem is found, and that its line begins and goes on like this.
pub(crate) fn one(text: &str, begin: &str, parts: &[&str]) {
    let found = problems(text);
    assert_eq!(found.len(), 1, "{text}\n{}", found.join("\n"));
    assert!(
        found[0].starts_with(begin),
        "{}\nbegins not with {begin}",
        found[0]
    );
    for part in parts {
        assert!(found[0].contains(part), "{}\nlacks {part}", found[0]);
    }
}
