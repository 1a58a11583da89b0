//! What the tests of the record share.

use holdtrue::document::Document;
use holdtrue::record::{Archive, RealDisk, Record, RecordError, Turn};
use holdtrue_engine::event::{Input, Notice, Output, Reading, Source, Subject};
use holdtrue_engine::setup::{ChannelId, Setup};
use holdtrue_engine::time::Timestamp;
use std::path::Path;

/// A reading of the first channel, received a little later.
pub(crate) fn reading(time: i64, value: f64) -> Input {
    Input::Reading(Reading {
        source: Source::Indication(ChannelId(0)),
        received: Timestamp(time + 7),
        phenomenon: Timestamp(time),
        value,
        sequence: None,
        excluded: false,
    })
}

/// An output.
pub(crate) fn notice(text: &str) -> Output {
    Output::Notice(Notice {
        at: Timestamp(1),
        subject: Subject::Node,
        code: "test".to_owned(),
        text: text.to_owned(),
        held_back: 0,
    })
}

/// A document.
pub(crate) fn document(topic: &str, payload: &str, retain: bool) -> Document {
    Document {
        topic: topic.to_owned(),
        payload: payload.as_bytes().to_vec(),
        retain,
        expires: None,
        correlation: None,
    }
}

/// Opens a record, with a file to write to.
pub(crate) fn open(folder: &Path) -> Record {
    // Seals are then made at once and not beside.
    let mut record = Record::open_on(folder, Box::new(RealDisk)).unwrap();
    if record.live().is_none() {
        turn(&mut record, Timestamp(0));
    }
    record
}

/// Begins a new file.
pub(crate) fn turn(record: &mut Record, now: Timestamp) {
    record
        .turn(Turn {
            now,
            day: now,
            setup: &Setup::default(),
            state: Vec::new(),
            waiting: Vec::new(),
        })
        .unwrap();
}

/// Every recorded input with its position and its outputs.
pub(crate) fn told(folder: &Path) -> Vec<(i64, Input, Vec<String>)> {
    let mut all = Vec::new();
    Archive::open(folder)
        .unwrap()
        .walk::<RecordError>(|row| {
            let outputs = row.outputs.iter().map(|said| said.body.clone());
            all.push((row.position, row.input.clone(), outputs.collect()));
            Ok(())
        })
        .unwrap();
    all
}

/// A connection of another process to the newest file.
pub(crate) fn live(folder: &Path) -> rusqlite::Connection {
    let archive = Archive::open(folder).unwrap();
    let newest = *archive.days().last().unwrap();
    rusqlite::Connection::open(archive.path(newest)).unwrap()
}
