//! What the record knows: documents that wait, documents that are retained, confirmed
//! subscriptions, old readings.

use super::batch::Event;
use super::row::document_of;
use super::search::Search;
use super::state_row::RetainedRow;
use super::writing::Record;
use super::{Day, Numbered, RecordError, layout};
use crate::document::Document;
use holdtrue_engine::event::{Reading, Source};
use holdtrue_engine::setup::ChannelId;
use holdtrue_engine::time::Timestamp;
use rusqlite::Connection;
use std::collections::{BTreeMap, BTreeSet};

impl Record {
    /// The documents that the broker has not acknowledged, in the order in which they were issued.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn outbox(&self) -> Result<Vec<Numbered>, RecordError> {
        self.with_newest(|day| {
            let mut statement = day.prepare(
                "SELECT number, retain, expires, topic, correlation, payload
                 FROM waiting_at_opening WHERE number NOT IN (SELECT number FROM settled)
                 UNION ALL SELECT number, retain, expires, topic, correlation, payload
                 FROM documents WHERE number NOT IN (SELECT number FROM settled)
                 ORDER BY number",
            )?;
            let rows = statement.query_map([], |row| {
                Ok(Numbered {
                    number: row.get(0)?,
                    document: document_of(row)?,
                })
            })?;
            rows.collect()
        })
        .map(Option::unwrap_or_default)
    }

    /// Number of the newest document.
    #[must_use]
    pub fn last_document(&self) -> i64 {
        self.place.last_document
    }

    /// The retained documents as they should stand at the broker, in order of their topics.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn standing(&self) -> Result<Vec<Document>, RecordError> {
        let rows = self.retained_rows()?;
        Ok(rows
            .into_iter()
            .map(|row| Document {
                topic: row.topic,
                payload: row.payload,
                retain: true,
                expires: row.expires,
                correlation: None,
            })
            .collect())
    }

    pub(super) fn retained_rows(&self) -> Result<Vec<RetainedRow>, RecordError> {
        let rows = self.with_newest(|day| {
            let mut own =
                day.prepare("SELECT expires, payload FROM documents WHERE number = ?1")?;
            let mut earlier =
                day.prepare("SELECT expires, payload FROM retained_at_opening WHERE topic = ?1")?;
            let mut rows = Vec::with_capacity(self.retained.len());
            for (topic, number) in &self.retained {
                let read = |row: &rusqlite::Row<'_>| {
                    Ok(RetainedRow {
                        number: *number,
                        topic: topic.clone(),
                        expires: row.get::<_, Option<i64>>(0)?.map(Timestamp),
                        payload: row.get(1)?,
                    })
                };
                let row = match own.query_row([number], read) {
                    Err(rusqlite::Error::QueryReturnedNoRows) => {
                        earlier.query_row([topic], read)?
                    }
                    other => other?,
                };
                rows.push(row);
            }
            Ok(rows)
        });
        rows.map(Option::unwrap_or_default)
    }

    /// Reads from the newest file; `None` if there is none.
    fn with_newest<T>(
        &self,
        read: impl FnOnce(&Connection) -> rusqlite::Result<T>,
    ) -> Result<Option<T>, RecordError> {
        let Some(newest) = self.days.last().copied() else {
            return Ok(None);
        };
        let path = self.path(newest);
        let done = match &self.live {
            Some(live) => read(&live.connection),
            None => read(&layout::open_to_read(&path)?),
        };
        done.map(Some)
            .map_err(|error| RecordError::from(error).of(&path))
    }

    /// The topic filters that the broker last confirmed for this daemon's session.
    #[must_use]
    pub fn subscriptions(&self) -> &BTreeSet<String> {
        &self.subscriptions
    }

    /// Replaces the confirmed topic filters, with the next commit.
    pub fn set_subscriptions(&mut self, filters: BTreeSet<String>) {
        self.subscriptions = filters;
        let text = self.subscriptions_text();
        self.batch.note(Event::Subscriptions(text));
    }

    pub(super) fn subscriptions_text(&self) -> String {
        serde_json::json!(self.subscriptions).to_string()
    }

    /// Bodies of the committed corrections of a channel of the configuration in force, as far as
    /// they are in files of the days from `from` on, in order.
    ///
    /// # Errors
    /// When a file can't be read.
    pub fn corrections(
        &mut self,
        channel: ChannelId,
        from: Timestamp,
    ) -> Result<Vec<String>, RecordError> {
        let number = self.batch.book_mut().of(Source::Indication(channel));
        let mut found = Vec::new();
        for name in self.days.iter().filter(|name| name.day_end() > from) {
            let day = Day::open(&self.path(*name))?;
            let read = || -> rusqlite::Result<Vec<String>> {
                let mut statement = day.connection.prepare(
                    "SELECT body FROM outputs WHERE kind = 'correction' AND subject = ?1
                     ORDER BY position",
                )?;
                statement.query_map([number], |row| row.get(0))?.collect()
            };
            found.extend(read().map_err(|error| RecordError::from(error).of(day.path()))?);
        }
        Ok(found)
    }

    /// Committed readings of any of `sources` with `from` ≤ phenomenon time < `to`, with their
    /// positions, in the order in which they were taken; at most `limit`.
    ///
    /// # Errors
    /// When a file can't be read.
    pub fn readings(
        &mut self,
        sources: &[Source],
        from: Timestamp,
        to: Timestamp,
        limit: usize,
    ) -> Result<Vec<(i64, Reading)>, RecordError> {
        let book = self.batch.book_mut();
        let search = Search {
            sources: sources.iter().map(|it| (book.of(*it), *it)).collect(),
            from,
            to,
            last: i64::MAX,
            limit,
        };
        let mut found = Vec::new();
        for name in &self.days {
            if search.concerns(name.day_end()) {
                let day = Day::open(&self.path(*name))?;
                search.search(&day, &mut found)?;
            }
        }
        Ok(found)
    }
}

/// Number of the newest retained document of each topic.
pub(super) fn retained_numbers(day: &Day) -> Result<BTreeMap<String, i64>, RecordError> {
    let mut retained = BTreeMap::new();
    let mut statement = day
        .connection
        .prepare("SELECT topic, number FROM retained_at_opening")?;
    let mut rows = statement.query([])?;
    while let Some(row) = rows.next()? {
        retained.insert(row.get(0)?, row.get(1)?);
    }
    let mut statement = day.connection.prepare(
        "SELECT topic, number, length(payload) FROM documents WHERE retain ORDER BY number",
    )?;
    let mut rows = statement.query([])?;
    while let Some(row) = rows.next()? {
        let topic: String = row.get(0)?;
        if row.get::<_, i64>(2)? == 0 {
            retained.remove(&topic);
        } else {
            retained.insert(topic, row.get(1)?);
        }
    }
    Ok(retained)
}

/// The newest note of confirmed filters.
pub(super) fn subscriptions(day: &Day) -> Result<BTreeSet<String>, RecordError> {
    use rusqlite::OptionalExtension;
    let text: Option<String> = day
        .connection
        .query_row(
            "SELECT body FROM events WHERE kind = 'subscriptions' ORDER BY rowid DESC LIMIT 1",
            [],
            |row| row.get(0),
        )
        .optional()
        .map_err(|error| RecordError::from(error).of(day.path()))?;
    let Some(text) = text else {
        return Ok(BTreeSet::new());
    };
    serde_json::from_str(&text)
        .map_err(|error| day.damaged(format!("the list of subscriptions can't be read ({error})")))
}
