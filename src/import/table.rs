//! A CSV file: which of its columns are wanted, and its rows as entries.

use super::ImportError;
use super::cell;
use super::entry::{self, Entry, What};
use super::mapping::Mapping;
use super::problem::{Problem, Problems};
use super::recording::Source;
use crate::payload::Target;
use crate::payload::fault::excerpt;
use holdtrue_engine::time::Timestamp;
use holdtrue_text::csv_rows::{BadRow, CsvRows};

/// A CSV file that is being read.
pub(super) struct Table {
    file: String,
    rows: CsvRows,
    /// Position of the column of times in the file, and in the mapping.
    time: (usize, usize),
    wanted: Vec<Wanted>,
}

/// A column that is imported.
struct Wanted {
    /// Position in the mapping.
    column: usize,
    /// Positions in the file.
    place: usize,
    status: Option<usize>,
    only_where: Option<usize>,
}

impl Table {
    pub(super) fn open(source: &Source, mapping: &Mapping) -> Result<Self, ImportError> {
        let file = source.name();
        let by_name = source.path.extension().is_some_and(|name| name == "tsv");
        let separator = mapping
            .separator
            .unwrap_or(if by_name { b'\t' } else { b',' });
        let rows = CsvRows::open(&source.path, separator).map_err(|error| source.failed(error))?;
        let misfit = |what: String| {
            let known = rows.columns().join(", ");
            let hint = match rows.columns() {
                [only] if only.contains([';', '\t', '|', ',']) => {
                    "; is another character its separator?"
                }
                _ => "",
            };
            ImportError::Misfit(format!("{file}: {what}; it has: {known}{hint}"))
        };
        if mapping.times.is_empty() {
            return Err(misfit(
                "say which column is the time, with --time".to_owned(),
            ));
        }
        let mut times = mapping.times.iter().enumerate();
        let time = times
            .find_map(|(index, time)| Some((rows.position(&time.name)?, index)))
            .ok_or_else(|| {
                let names: Vec<&str> = mapping.times.iter().map(|it| it.name.as_str()).collect();
                misfit(format!("has no column of times {}", names.join(" or ")))
            })?;
        let mut wanted = Vec::new();
        for (index, column) in mapping.columns.iter().enumerate() {
            let Some(place) = rows.position(&column.name) else {
                continue;
            };
            let beside = |name: &String| {
                let told = || {
                    misfit(format!(
                        "has no column {name}, which goes with {}",
                        column.name
                    ))
                };
                rows.position(name).ok_or_else(told)
            };
            let status = column.status.as_ref().map(|status| beside(&status.place));
            let only_where = column.only_where.as_ref().map(|only| beside(&only.place));
            wanted.push(Wanted {
                column: index,
                place,
                status: status.transpose()?,
                only_where: only_where.transpose()?,
            });
        }
        if wanted.is_empty() {
            return Err(misfit("has none of the mapped columns".to_owned()));
        }
        refuse_rivals(&wanted, mapping).map_err(misfit)?;
        Ok(Self {
            file,
            rows,
            time,
            wanted,
        })
    }

    /// The mapped columns that it has.
    pub(super) fn found(&self) -> impl Iterator<Item = usize> {
        self.wanted.iter().map(|wanted| wanted.column)
    }

    /// Reads a row; `false` after the last.
    pub(super) fn advance(
        &mut self,
        mapping: &Mapping,
        entries: &mut Vec<Entry>,
        problems: &mut Problems,
    ) -> Result<bool, BadRow> {
        match self.rows.advance() {
            Ok(false) => return Ok(false),
            Ok(true) => {}
            Err(BadRow::File(error)) => return Err(BadRow::File(error)),
            Err(why) => {
                problems.note(|| self.problem("", "", format!("the row {why}")));
                return Ok(true);
            }
        }
        let mut at = None;
        for wanted in &self.wanted {
            match self.entry(wanted, mapping, &mut at) {
                Ok(entry) => entries.extend(entry),
                Err(Bad { place, message }) => {
                    problems.note(|| {
                        let (column, value) = (&self.rows.columns()[place], self.rows.cell(place));
                        let value = excerpt(&value.map_or_else(|lossy| lossy, str::to_owned));
                        self.problem(column, &value, message)
                    });
                    // Without a time nothing in the row is of use, and that is said once.
                    if place == self.time.0 {
                        break;
                    }
                }
            }
        }
        Ok(true)
    }

    /// What a column of this row holds, if it holds anything.
    fn entry(
        &self,
        wanted: &Wanted,
        mapping: &Mapping,
        at: &mut Option<Timestamp>,
    ) -> Result<Option<Entry>, Bad> {
        let column = &mapping.columns[wanted.column];
        if let (Some(place), Some(only)) = (wanted.only_where, &column.only_where)
            && !cell::is_one_of(self.cell(place)?, &only.good)
        {
            return Ok(None);
        }
        let text = self.cell(wanted.place)?;
        if mapping.is_missing(text) {
            return Ok(None);
        }
        let at = match *at {
            Some(at) => at,
            None => *at.insert(self.time(mapping)?),
        };
        let what = if let Target::Gate {
            reference, open, ..
        } = &column.target
        {
            What::Gate {
                reference: *reference,
                open: cell::is_one_of(text, open),
            }
        } else {
            let excluded = match (wanted.status, &column.status) {
                (Some(place), Some(status)) => !cell::is_one_of(self.cell(place)?, &status.good),
                _ => false,
            };
            let value = cell::number(text, mapping).map_err(|message| Bad {
                place: wanted.place,
                message,
            })?;
            entry::value(&column.target, value, excluded)
        };
        Ok(Some(Entry {
            at,
            what,
            column: wanted.column,
            line: self.rows.line(),
        }))
    }

    fn time(&self, mapping: &Mapping) -> Result<Timestamp, Bad> {
        let (place, index) = self.time;
        let text = self.cell(place)?;
        cell::time(text, &mapping.times[index]).map_err(|message| Bad { place, message })
    }

    fn cell(&self, place: usize) -> Result<&str, Bad> {
        self.rows.cell(place).map_err(|_| Bad {
            place,
            message: "is not UTF-8; convert the file".to_owned(),
        })
    }

    fn problem(&self, column: &str, value: &str, message: String) -> Problem {
        Problem {
            file: self.file.clone(),
            line: self.rows.line(),
            column: column.to_owned(),
            value: value.to_owned(),
            message,
        }
    }
}

/// A cell that can't be read.
struct Bad {
    place: usize,
    message: String,
}

/// Two columns of one row that are the same value can't both be right.
fn refuse_rivals(wanted: &[Wanted], mapping: &Mapping) -> Result<(), String> {
    let open = wanted.iter().map(|it| &mapping.columns[it.column]);
    let open: Vec<_> = open.filter(|column| column.only_where.is_none()).collect();
    for (index, later) in open.iter().enumerate() {
        let rival = open[..index].iter().find(|it| it.target == later.target);
        if let Some(rival) = rival {
            return Err(format!(
                "{} and {} are mapped to the same value; keep one",
                rival.name, later.name
            ));
        }
    }
    Ok(())
}

/// What separates CSV cells: one character, or the word tab.
///
/// # Errors
/// Says that.
pub fn separator(text: &str) -> Result<u8, String> {
    match (text, text.as_bytes()) {
        ("tab", _) => Ok(b'\t'),
        (_, [one]) => Ok(*one),
        _ => Err("must be one character, or the word tab".to_owned()),
    }
}
