//! A file from top to bottom: its tables, then what holds between them.

use super::draft::{Draft, position};
use super::problem::{Problem, Problems, Severity};
use super::reader::Section;
use super::source::Source;
use super::{Broker, Configuration, channel, crosscheck, name, reference, service};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceId, Setup};
use holdtrue_engine::time::Timestamp;
use sha2::{Digest, Sha256};
use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;
use toml::Spanned;
use toml::de::DeTable;

/// Reads and checks a configuration file. Files that it names are sought from its own folder.
///
/// # Errors
/// Everything that is wrong with it, warnings included.
pub fn load(path: &Path) -> Result<Configuration, Problems> {
    let file = path.display().to_string();
    let failed = |message: String| Problems {
        file: file.clone(),
        list: vec![Problem::at(Severity::Error, "", &(0..0), "", message)],
    };
    let bytes = std::fs::read(path).map_err(|error| failed(format!("can't be read: {error}")))?;
    let text = std::str::from_utf8(&bytes).map_err(|error| {
        failed(format!(
            "is not UTF-8 text from byte {} on",
            error.valid_up_to()
        ))
    })?;
    let folder = path.parent().unwrap_or(Path::new(""));
    from_text(text, &file, folder, now())
}

/// The same for the text of a file: `file` is its name in messages, `folder` where the files that
/// it names are sought, `now` tells which certificates have expired.
///
/// # Errors
/// Everything that is wrong with it, warnings included.
pub fn from_text(
    text: &str,
    file: &str,
    folder: &Path,
    now: Timestamp,
) -> Result<Configuration, Problems> {
    let source = Source::new(text);
    let (table, broken) = parse(&source, text);
    let read = read(&source, &table, folder, now);
    let list = source.into_problems(broken);
    let refused = list
        .iter()
        .any(|problem| problem.severity == Severity::Error);
    match read {
        Some(mut configuration) if !refused => {
            configuration.setup.fingerprint = fingerprint(text);
            configuration.warnings = list;
            Ok(configuration)
        }
        _ => Err(Problems {
            file: file.to_owned(),
            list,
        }),
    }
}

/// A broker that is known by its address alone, everything else by default.
///
/// # Errors
/// What is wrong with the address or the node's name.
pub fn broker_at(url: &str, node: &str) -> Result<Broker, String> {
    let text = format!("[node]\nname = {node:?}\n[broker]\nurl = {url:?}\n");
    let source = Source::new(&text);
    let (table, broken) = parse(&source, &text);
    let top = Section::top(&source, &table);
    let (node, _) = service::node(&top);
    let found = service::broker(&top, &node, Path::new("")).broker;
    let problems = source.into_problems(broken);
    let errors = problems
        .iter()
        .filter(|problem| problem.severity == Severity::Error);
    let messages: Vec<&str> = errors.map(|problem| problem.message.as_str()).collect();
    match found {
        Some(broker) if messages.is_empty() => Ok(broker),
        _ => Err(format!("error: {}", messages.join("; "))),
    }
}

/// Every setting that the parser looks for when it reads this text, as `channel.window`. Whoever
/// writes an example of everything can compare.
#[must_use]
pub fn settings(text: &str, folder: &Path) -> BTreeSet<String> {
    let source = Source::new(text);
    let (table, _) = parse(&source, text);
    read(&source, &table, folder, Timestamp(0));
    source.asked()
}

/// The TOML tree, and whether its syntax is broken; what is broken is noted.
fn parse<'text>(source: &Source<'text>, text: &'text str) -> (Spanned<DeTable<'text>>, bool) {
    let (table, errors) = DeTable::parse_recoverable(text);
    for error in &errors {
        source.error(&error.span().unwrap_or(0..0), "", error.message());
    }
    (table, !errors.is_empty())
}

/// Everything below the top. `None` only if the broker could not be read at all.
fn read<'source>(
    source: &'source Source<'source>,
    table: &'source Spanned<DeTable<'source>>,
    folder: &Path,
    now: Timestamp,
) -> Option<Configuration> {
    let top = Section::top(source, table);
    let (node, clock) = service::node(&top);
    let broker = service::broker(&top, &node, folder);
    let record = service::record(&top, folder);
    let page = service::page(&top);
    let mut draft = Draft::new(now);
    let defaults = top.section("defaults");
    read_entries(
        &top,
        defaults.as_ref(),
        clock == Clock::Readings,
        &mut draft,
    );
    top.finish();
    let Draft {
        references,
        influences,
        channels,
        wires,
        ..
    } = draft;
    let intake = crosscheck::tables(source, &node, &broker.subscribe, broker.max_payload, wires);
    let setup = Setup {
        node,
        clock,
        fingerprint: String::new(),
        references,
        influences,
        channels,
    };
    Some(Configuration {
        broker: broker.broker?,
        record,
        page,
        setup,
        intake,
        warnings: Vec::new(),
    })
}

/// `[[reference]]` and `[[channel]]`.
fn read_entries<'source>(
    top: &Section<'source>,
    defaults: Option<&'source Section<'source>>,
    readings_clock: bool,
    draft: &mut Draft,
) {
    let references = top.sections("reference");
    let channels: Vec<Section<'_>> = top
        .sections("channel")
        .into_iter()
        .map(|section| section.with_defaults(defaults))
        .collect();
    if channels.is_empty() && !top.has("channel") {
        top.missing("channel", "add at least one [[channel]]");
    }
    // Names first: a group may name a channel that comes later.
    let mut taken = BTreeMap::new();
    let reference_names = names(&references, "reference", &mut taken);
    let channel_names = names(&channels, "channel", &mut BTreeMap::new());
    for (index, name) in channel_names.iter().enumerate() {
        draft
            .channel_ids
            .entry(name.clone())
            .or_insert(ChannelId(position(index)));
    }
    for (index, name) in reference_names.iter().enumerate() {
        draft
            .reference_ids
            .entry(name.clone())
            .or_insert(ReferenceId(position(index)));
    }
    for (section, name) in references.iter().zip(&reference_names) {
        reference::read(section, name, None, draft);
    }
    for (section, name) in channels.iter().zip(&channel_names) {
        if let Some(found) = section.place("reference")
            && !section.is_text("reference")
            && taken.contains_key(name)
        {
            let message = format!(
                "a channel's own reference bears the channel's name, and a [[reference]] named \
                 \"{name}\" exists; rename that one"
            );
            section.wrong(&found, message);
        }
        channel::read(section, name, readings_clock, draft);
    }
    crosscheck::refuse_influence_on_itself(top.source(), draft);
    crosscheck::warn_about_references(&channels, draft);
    crosscheck::warn_about_unused(&references, draft);
    if let Some(defaults) = defaults.filter(|_| !channels.is_empty()) {
        for found in ["name", "indication"]
            .into_iter()
            .filter_map(|key| defaults.place(key))
        {
            defaults.wrong(
                &found,
                "belongs to each channel, it can't be the same for all",
            );
        }
        defaults.finish();
    }
}

/// The checked names of a list of entries.
fn names(
    sections: &[Section<'_>],
    what: &str,
    taken: &mut BTreeMap<String, String>,
) -> Vec<String> {
    let mut names = Vec::new();
    for section in sections {
        let found = section.need_text("name", "levels with /, as \"intake/ph-1\"");
        if let Some(found) = &found {
            if let Err(message) = name::check_name(found.value) {
                section.wrong(found, message);
            }
            let earlier = taken.insert(found.value.to_owned(), section.path().to_owned());
            if let Some(earlier) = earlier {
                let message = format!(
                    "\"{}\" is already the name of {earlier}; each {what} needs its own",
                    found.value
                );
                section.wrong(found, message);
            }
        }
        names.push(
            found
                .map(|found| found.value.to_owned())
                .unwrap_or_default(),
        );
    }
    names
}

/// SHA-256 of the file's bytes in lower-case hexadecimal.
fn fingerprint(text: &str) -> String {
    use std::fmt::Write;
    Sha256::digest(text.as_bytes())
        .iter()
        .fold(String::new(), |mut hex, byte| {
            // Writing to a String cannot fail.
            let _ = write!(hex, "{byte:02x}");
            hex
        })
}

/// The system's clock; before 1970 counts as 1970.
fn now() -> Timestamp {
    let since = std::time::SystemTime::now().duration_since(std::time::UNIX_EPOCH);
    Timestamp(since.map_or(0, |since| {
        i64::try_from(since.as_nanos()).unwrap_or(i64::MAX)
    }))
}
