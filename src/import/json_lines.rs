//! A file of JSON lines: one object a line, its members by pointer.

use super::ImportError;
use super::cell;
use super::entry::{self, Entry, What};
use super::mapping::Mapping;
use super::problem::{Problem, Problems};
use super::recording::Source;
use crate::payload::fault::excerpt;
use crate::payload::json::{holds_one_of, is_number, text_of};
use crate::payload::pick::{Picked, Picker, Slot};
use crate::payload::{Pointer, Target, literal};
use holdtrue_engine::time::Timestamp;
use holdtrue_text::lines::{BadLine, Lines};

/// A file of JSON lines that is being read.
pub(super) struct JsonLines {
    lines: Lines,
    form: Form,
    found: Vec<bool>,
}

/// What is sought in each line.
struct Form {
    file: String,
    picker: Picker,
    times: Vec<Slot>,
    wanted: Vec<Wanted>,
}

/// A column that is imported; its position is that in the mapping.
struct Wanted {
    slot: Slot,
    status: Option<Slot>,
    only_where: Option<Slot>,
}

/// Something that can't be read.
struct Bad {
    column: String,
    value: String,
    message: String,
    /// Then nothing in the line is of use.
    time: bool,
}

impl JsonLines {
    pub(super) fn open(source: &Source, mapping: &Mapping) -> Result<Self, ImportError> {
        let file = source.name();
        if mapping.times.is_empty() {
            let message = format!("{file}: say which member is the time, with --time");
            return Err(ImportError::Misfit(message));
        }
        let mut picker = Picker::default();
        let mut slot = |name: &String| {
            let pointer = pointer(name)
                .map_err(|message| ImportError::Misfit(format!("{file}: {message}")))?;
            Ok::<_, ImportError>(picker.want(&pointer))
        };
        let mut times = Vec::new();
        for time in &mapping.times {
            times.push(slot(&time.name)?);
        }
        let mut wanted = Vec::new();
        for column in &mapping.columns {
            let status = column.status.as_ref().map(|status| slot(&status.place));
            let only_where = column.only_where.as_ref().map(|only| slot(&only.place));
            wanted.push(Wanted {
                slot: slot(&column.name)?,
                status: status.transpose()?,
                only_where: only_where.transpose()?,
            });
        }
        Ok(Self {
            lines: Lines::open(&source.path).map_err(|error| source.failed(error))?,
            found: vec![false; wanted.len()],
            form: Form {
                file,
                picker,
                times,
                wanted,
            },
        })
    }

    /// The mapped columns of which it had a value so far.
    pub(super) fn found(&self) -> impl Iterator<Item = usize> {
        (0..self.found.len()).filter(|column| self.found[*column])
    }

    /// Reads a line; `false` after the last.
    pub(super) fn advance(
        &mut self,
        mapping: &Mapping,
        entries: &mut Vec<Entry>,
        problems: &mut Problems,
    ) -> Result<bool, std::io::Error> {
        let read = match self.lines.advance() {
            Ok(None) => return Ok(false),
            Err(BadLine::File(error)) => return Err(error),
            Ok(Some(text)) => self.form.picked(text),
            Err(why) => Err(format!("the line {why}")),
        };
        let picked = match read {
            Ok(picked) => picked,
            Err(message) => {
                let line = self.lines.line();
                problems.note(|| self.form.problem(line, "", "", message));
                return Ok(true);
            }
        };
        let earlier = entries.len();
        let mut at = None;
        let mut bad = Vec::new();
        for (index, wanted) in self.form.wanted.iter().enumerate() {
            self.found[index] |= picked.get(wanted.slot).is_some();
            match self.form.entry(index, wanted, &picked, mapping, &mut at) {
                Ok(None) => {}
                Ok(Some((at, what))) => entries.push(Entry {
                    at,
                    what,
                    column: index,
                    line: 0,
                }),
                Err(found) => {
                    let ends = found.time;
                    bad.push(found);
                    if ends {
                        break;
                    }
                }
            }
        }
        drop(picked);
        let line = self.lines.line();
        for entry in &mut entries[earlier..] {
            entry.line = line;
        }
        for Bad {
            column,
            value,
            message,
            ..
        } in bad
        {
            problems.note(|| self.form.problem(line, &column, &value, message));
        }
        Ok(true)
    }
}

impl Form {
    fn picked<'text>(&self, text: &'text str) -> Result<Picked<'text>, String> {
        if !text.trim_start().starts_with('{') {
            return Err(
                "the line is no JSON object; a pack of records is read as senml".to_owned(),
            );
        }
        let picked = self.picker.pick(text);
        picked.map_err(|error| format!("the line is not sound JSON: {error}"))
    }

    /// What a line holds for a column, if anything.
    fn entry(
        &self,
        index: usize,
        wanted: &Wanted,
        picked: &Picked<'_>,
        mapping: &Mapping,
        at: &mut Option<Timestamp>,
    ) -> Result<Option<(Timestamp, What)>, Bad> {
        let column = &mapping.columns[index];
        if let (Some(slot), Some(only)) = (wanted.only_where, &column.only_where) {
            let here = picked.get(slot);
            if !here.is_some_and(|raw| holds_one_of(raw, &only.good)) {
                return Ok(None);
            }
        }
        let Some(raw) = picked.get(wanted.slot) else {
            return Ok(None);
        };
        let missing = text_of(raw).is_some_and(|text| mapping.is_missing(&text));
        if raw == "null" || missing || mapping.is_missing(raw) {
            return Ok(None);
        }
        let at = match *at {
            Some(at) => at,
            None => *at.insert(self.time(picked, mapping)?),
        };
        if let Target::Gate {
            reference, open, ..
        } = &column.target
        {
            let what = What::Gate {
                reference: *reference,
                open: holds_one_of(raw, open),
            };
            return Ok(Some((at, what)));
        }
        let excluded = match (wanted.status, &column.status) {
            (Some(slot), Some(status)) => {
                let here = picked.get(slot);
                !here.is_some_and(|raw| holds_one_of(raw, &status.good))
            }
            _ => false,
        };
        let bad = |message: &str| Bad {
            column: column.name.clone(),
            value: excerpt(raw),
            message: message.to_owned(),
            time: false,
        };
        if !is_number(raw) {
            return Err(bad(
                "is not a JSON number; if it stands for no value, name it with --missing",
            ));
        }
        let value =
            literal::number(raw).map_err(|_| bad("is no finite number that can be held"))?;
        Ok(Some((at, entry::value(&column.target, value, excluded))))
    }

    /// The first time that the line has.
    fn time(&self, picked: &Picked<'_>, mapping: &Mapping) -> Result<Timestamp, Bad> {
        let mut told = self.times.iter().zip(&mapping.times);
        let told = told.find_map(|(slot, time)| Some((picked.get(*slot)?, time)));
        let bad = |column: &str, value: String, message: String| Bad {
            column: column.to_owned(),
            value,
            message,
            time: true,
        };
        let Some((raw, time)) = told else {
            let name = mapping.times.first().map_or("", |time| time.name.as_str());
            return Err(bad(
                name,
                String::new(),
                "is not there, and so there is no time".to_owned(),
            ));
        };
        match text_of(raw) {
            Some(text) => cell::time(&text, time),
            None => cell::time(raw, time),
        }
        .map_err(|message| bad(&time.name, excerpt(raw), message))
    }

    fn problem(&self, line: u64, column: &str, value: &str, message: String) -> Problem {
        Problem {
            file: self.file.clone(),
            line,
            column: column.to_owned(),
            value: value.to_owned(),
            message,
        }
    }
}

/// A pointer as it is, or the pointer to a member at the top.
fn pointer(name: &str) -> Result<Pointer, String> {
    if name.starts_with('/') {
        return Pointer::parse(name);
    }
    Pointer::parse(&format!("/{}", name.replace('~', "~0").replace('/', "~1")))
}
