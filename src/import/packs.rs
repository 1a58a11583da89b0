//! SenML packs: one a line, or one over the whole file, read piece by piece.

use super::ImportError;
use super::entry::{self, Entry, What};
use super::mapping::{Column, Mapping};
use super::problem::{Problem, Problems};
use super::recording::Source;
use super::scan::{Piece, Scan};
use crate::payload::SenmlPlace;
use crate::payload::intake::Told;
use crate::payload::senml::{Base, Pack};

/// Records that are read at once; a longer pack is read in pieces.
const PIECE: usize = 1000;
/// A status record may stand anywhere in its pack, which then is read whole, up to so many records.
const WHOLE_MAX: usize = 100_000;

/// A file of packs that is being read.
pub(super) struct Packs {
    file: String,
    scan: Scan,
    pack: Pack,
    /// Position in the mapping of each wanted record.
    columns: Vec<usize>,
    /// Whether packs must be read whole.
    whole: bool,
    /// Base fields left by the earlier pieces of the pack.
    base: Base<'static>,
    /// An earlier piece could not be read: what follows has no base.
    lost: bool,
    /// The piece as a pack of its own, and where its records stand.
    text: String,
    records: Vec<u64>,
    found: Vec<bool>,
}

impl Packs {
    pub(super) fn open(source: &Source, mapping: &Mapping) -> Result<Self, ImportError> {
        let mut pack = Pack::default();
        let mut columns = Vec::new();
        // Records bear their names: conditions on other columns are for tables.
        let named = mapping.columns.iter().enumerate();
        for (index, column) in named.filter(|(_, column)| column.only_where.is_none()) {
            let place = SenmlPlace {
                name: column.name.clone(),
                sum: false,
                unit: None,
                status: column.status.clone(),
            };
            pack.want(&column.target, &place);
            columns.push(index);
        }
        let whole = columns
            .iter()
            .any(|&index| mapping.columns[index].status.is_some());
        Ok(Self {
            file: source.name(),
            scan: Scan::open(&source.path).map_err(|error| source.failed(error))?,
            pack,
            columns,
            whole,
            base: Base::default(),
            lost: false,
            text: String::new(),
            records: Vec::new(),
            found: vec![false; mapping.columns.len()],
        })
    }

    /// The mapped columns of which it had a record so far.
    pub(super) fn found(&self) -> impl Iterator<Item = usize> {
        (0..self.found.len()).filter(|column| self.found[*column])
    }

    /// Reads a pack or a piece of one; `false` after the last.
    pub(super) fn advance(
        &mut self,
        mapping: &Mapping,
        entries: &mut Vec<Entry>,
        problems: &mut Problems,
    ) -> Result<bool, std::io::Error> {
        let Some(ended) = self.collect(problems)? else {
            return Ok(false);
        };
        if !self.lost && !self.records.is_empty() {
            self.hear(mapping, entries, problems);
        }
        if ended {
            self.base = Base::default();
            self.lost = false;
        }
        Ok(true)
    }

    /// Collects the records of a piece and tells whether its pack ends with it; `None`: nothing is
    /// left.
    fn collect(&mut self, problems: &mut Problems) -> Result<Option<bool>, std::io::Error> {
        self.text.clear();
        self.text.push('[');
        self.records.clear();
        let most = if self.whole { WHOLE_MAX } else { PIECE };
        while self.records.len() < most {
            match self.scan.advance()? {
                Piece::Element => {
                    let (line, text) = self.scan.element();
                    if !self.records.is_empty() {
                        self.text.push(',');
                    }
                    self.text.push_str(&text);
                    self.records.push(line);
                }
                Piece::End => {
                    self.text.push(']');
                    return Ok(Some(true));
                }
                Piece::Bad(why) => {
                    self.note_line(problems, format!("is no SenML: {why}"));
                    self.records.clear();
                    return Ok(Some(true));
                }
                Piece::EndOfFile => return Ok(None),
            }
        }
        self.text.push(']');
        if self.whole && !self.lost {
            let message = format!(
                "a pack of {WHOLE_MAX} records or more can't be read with a status; write one \
                 pack a line"
            );
            self.note_line(problems, message);
            self.lost = true;
        }
        Ok(Some(false))
    }

    /// Reads the collected records.
    fn hear(&mut self, mapping: &Mapping, entries: &mut Vec<Entry>, problems: &mut Problems) {
        let heard = match self.pack.hear(&self.text, &mut self.base, None) {
            Ok(heard) => heard,
            Err(fault) => {
                let line = self.records.first().copied().unwrap_or_default();
                problems.note(|| self.problem(line, "", fault.detail));
                self.lost = true;
                return;
            }
        };
        for one in heard {
            let column = self.columns[one.wanted];
            let line = self.records[one.record];
            self.found[column] = true;
            let Column { name, target, .. } = &mapping.columns[column];
            let (at, what) = match one.told {
                Ok(Told::Reading {
                    phenomenon,
                    value,
                    excluded,
                    ..
                }) => (phenomenon, entry::value(target, value, excluded)),
                Ok(Told::Gate {
                    reference,
                    phenomenon,
                    open,
                }) => (phenomenon, What::Gate { reference, open }),
                Err(fault) => {
                    problems.note(|| self.problem(line, name, fault.detail));
                    continue;
                }
            };
            entries.push(Entry {
                at,
                what,
                column,
                line,
            });
        }
    }

    fn note_line(&self, problems: &mut Problems, message: String) {
        problems.note(|| self.problem(self.scan.line(), "", message));
    }

    fn problem(&self, line: u64, column: &str, message: String) -> Problem {
        Problem {
            file: self.file.clone(),
            line,
            column: column.to_owned(),
            value: String::new(),
            message,
        }
    }
}
