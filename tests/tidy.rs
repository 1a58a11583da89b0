//! House rules that a machine can check: what stands at the top of a file, how long lines are, what
//! must not be left.

use std::path::{Path, PathBuf};

/// Longest line of Rust code, in characters.
const LINE_MAX: usize = 100;
/// Longest source file before its tests; above it, the file probably has two duties.
const FILE_LINES_MAX: usize = 500;

#[test]
fn every_source_file_says_its_duty_first() {
    for file in rust_files() {
        let text = read(&file);
        let first = text.lines().next().unwrap_or_default();
        assert!(
            first.starts_with("//!"),
            "{}: the first line must say what it is for",
            show(&file)
        );
    }
}

#[test]
fn lines_and_files_stay_readable() {
    for file in rust_files() {
        let text = read(&file);
        for (number, line) in text.lines().enumerate() {
            assert!(
                line.chars().count() <= LINE_MAX,
                "{}:{}: longer than {LINE_MAX} characters",
                show(&file),
                number + 1
            );
        }
        let before_tests = text
            .lines()
            .take_while(|line| *line != "#[cfg(test)]")
            .count();
        assert!(
            before_tests <= FILE_LINES_MAX || file.starts_with(root().join("tests")),
            "{}: {before_tests} lines before its tests, more than {FILE_LINES_MAX}",
            show(&file)
        );
    }
}

#[test]
fn nothing_is_left_open() {
    // Written in pieces, so that this file does not find itself.
    let open = [
        ["to", "do!("].concat(),
        ["un", "implemented!("].concat(),
        ["#[ig", "nore"].concat(),
        ["FIX", "ME"].concat(),
        ["TO", "DO"].concat(),
        ["XX", "X"].concat(),
    ];
    for file in rust_files() {
        let text = read(&file);
        for word in &open {
            assert!(!text.contains(word), "{}: contains {word}", show(&file));
        }
    }
}

#[test]
fn the_engine_uses_no_asynchronous_runtime_and_no_input_or_output() {
    for file in rust_files()
        .into_iter()
        .filter(|file| file.starts_with(root().join("src/engine")))
    {
        let text = read(&file);
        let code = text.split("#[cfg(test)]").next().unwrap_or_default();
        for word in [
            "tokio",
            "std::fs",
            "std::net",
            "std::io",
            "std::env",
            "println!",
            "thread_local!",
        ] {
            assert!(!code.contains(word), "{}: contains {word}", show(&file));
        }
    }
}

fn root() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
}

fn show(file: &Path) -> String {
    file.strip_prefix(root())
        .unwrap_or(file)
        .display()
        .to_string()
}

fn read(file: &Path) -> String {
    std::fs::read_to_string(file).unwrap_or_else(|error| panic!("{}: {error}", file.display()))
}

fn rust_files() -> Vec<PathBuf> {
    let mut files = Vec::new();
    for folder in ["src", "simulators", "tests", "benches", "fuzz"] {
        collect(&root().join(folder), &mut files);
    }
    assert!(
        files.len() > 10,
        "the search found too little to mean anything: {files:?}"
    );
    files
}

fn collect(folder: &Path, files: &mut Vec<PathBuf>) {
    let Ok(entries) = std::fs::read_dir(folder) else {
        return;
    };
    for entry in entries {
        let path = entry
            .expect("the listing of a source folder can be read")
            .path();
        if path.is_dir()
            && path
                .file_name()
                .is_some_and(|name| name != "target" && name != "corpus")
        {
            collect(&path, files);
        } else if path.extension().is_some_and(|extension| extension == "rs") {
            files.push(path);
        }
    }
    files.sort();
}
