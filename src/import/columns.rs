//! A mapping as a TOML file tells it.

use super::mapping::{Column, Mapping, TimeColumn, repeated};
use super::names::Names;
use crate::configuration::Problems;
use crate::configuration::problem::Severity;
use crate::configuration::reader::Section;
use crate::configuration::source::{Found, Source};
use crate::payload::{Status, Target};
use holdtrue_text::instant::offset_from_text;
use holdtrue_text::time_form::TimeForm;
use toml::de::DeTable;

/// The ways to say whose value a column is.
const WHOSE: [&str; 4] = ["indication", "reference", "influence", "valid_when"];

/// The mapping, or everything that is wrong with it.
pub(super) fn read(text: &str, file: &str, names: &Names<'_>) -> Result<Mapping, Problems> {
    let source = Source::new(text);
    let (table, errors) = DeTable::parse_recoverable(text);
    for error in &errors {
        source.error(&error.span().unwrap_or(0..0), "", error.message());
    }
    let top = Section::top(&source, &table);
    let separator = top.text("separator");
    let mapping = Mapping {
        times: top.sections("time").iter().filter_map(time).collect(),
        columns: columns(&top, names),
        missing: top.texts("missing").iter().map(text_of).collect(),
        decimal_comma: top.truth("decimal_comma").is_some_and(|found| found.value),
        separator: separator.and_then(|found| {
            let read = super::table::separator(found.value);
            read.map_err(|message| top.wrong(&found, message)).ok()
        }),
    };
    top.finish();
    let list = source.into_problems(!errors.is_empty());
    let refused = list
        .iter()
        .any(|problem| problem.severity == Severity::Error);
    if refused {
        return Err(Problems {
            file: file.to_owned(),
            list,
        });
    }
    Ok(mapping)
}

/// `[[time]]`
fn time(section: &Section<'_>) -> Option<TimeColumn> {
    let name = section.need_text("column", "name the column of times");
    let form = section.text("format");
    let offset = section.text("utc_offset");
    section.finish();
    let form = form.map(|found| {
        let read = found.value.parse();
        read.map_err(|message: String| section.wrong(&found, message))
            .ok()
    });
    let ahead = offset.and_then(|found| {
        let read = offset_from_text(found.value);
        read.map_err(|message| section.wrong(&found, message)).ok()
    });
    Some(TimeColumn {
        name: name?.value.to_owned(),
        form: form.unwrap_or(Some(TimeForm::default()))?,
        ahead,
    })
}

/// `[[column]]`
fn columns(top: &Section<'_>, names: &Names<'_>) -> Vec<Column> {
    let sections = top.sections("column");
    if sections.is_empty() && !top.has("column") {
        top.missing("column", "say with a [[column]] each what the columns are");
    }
    let mut columns = Vec::new();
    for section in &sections {
        let name = section.need_text("column", "name the column of the recording");
        let target = target(section, names);
        let status = section.section("status");
        let status = status.and_then(|status| condition(&status, "good"));
        let only_where = section.section("only_where");
        let only_where = only_where.and_then(|only| condition(&only, "equals"));
        if let (Some(Target::Gate { .. }), Some(place)) = (&target, section.place("status")) {
            section.wrong(
                &place,
                "says nothing of a valid_when, which is a state itself",
            );
        }
        section.finish();
        let (Some(name), Some(target)) = (name, target) else {
            continue;
        };
        columns.push(Column {
            name: name.value.to_owned(),
            target,
            status,
            only_where,
        });
        if repeated(&columns).is_some() {
            section.wrong(&name, "is mapped to the same twice");
            columns.pop();
        }
    }
    columns
}

/// Exactly one of the ways to say whose value it is.
fn target(section: &Section<'_>, names: &Names<'_>) -> Option<Target> {
    let told: Vec<&'static str> = WHOSE.into_iter().filter(|key| section.has(key)).collect();
    let [whose] = told[..] else {
        section.error(format!("must have one of {}", WHOSE.join(", ")));
        return None;
    };
    if whose == "influence" {
        let table = section.section(whose)?;
        let channel = table.need_text("channel", "name the channel that it acts on");
        let name = table.need_text("name", "as that channel names it");
        table.finish();
        let (channel, name) = (channel?, name?);
        let read = names.influence(channel.value, name.value);
        return read.map_err(|message| table.wrong(&name, message)).ok();
    }
    let found = section.text(whose)?;
    let read = match whose {
        "indication" => names.indication(found.value),
        "reference" => names.reference(found.value),
        _ => names.gate(found.value),
    };
    read.map_err(|message| section.wrong(&found, message)).ok()
}

/// A column and the values that count.
fn condition(section: &Section<'_>, key: &'static str) -> Option<Status<String>> {
    let place = section.need_text("column", "name the column that says it");
    let good = section.scalars(key);
    if good.is_empty() {
        section.missing(key, "list the values that count, as [\"ok\"] or [0]");
    }
    section.finish();
    Some(Status {
        place: place?.value.to_owned(),
        good: good.into_iter().map(|found| found.value).collect(),
    })
}

fn text_of(found: &Found<&str>) -> String {
    found.value.to_owned()
}
