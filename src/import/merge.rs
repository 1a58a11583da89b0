//! The second reading: all files as one recording in the order of time. A file is opened when its
//! first instant has come, and closed behind its last.

use super::ImportError;
use super::entry::Entry;
use super::mapping::Mapping;
use super::ordered::Ordered;
use super::survey::{FileSurvey, Survey};
use holdtrue_engine::time::Timestamp;
use std::collections::VecDeque;

/// All files as one.
pub struct Merge<'survey> {
    mapping: &'survey Mapping,
    /// Files that are not yet open, by their first instants.
    waiting: VecDeque<&'survey FileSurvey>,
    open: Vec<Open>,
}

/// An open file with the value that comes next.
struct Open {
    next: Entry,
    file: Ordered,
}

impl<'survey> Merge<'survey> {
    /// Of the files that were surveyed.
    #[must_use]
    pub fn new(survey: &'survey Survey, mapping: &'survey Mapping) -> Self {
        Self {
            mapping,
            waiting: survey.files.iter().collect(),
            open: Vec::new(),
        }
    }

    /// The next value; `None` after the last.
    ///
    /// # Errors
    /// When a file can't be read or has changed since it was surveyed.
    pub fn advance(&mut self) -> Result<Option<Entry>, ImportError> {
        while let Some(file) = self.waiting.front()
            && self.has_come(file)
        {
            let mut ordered = Ordered::open(file, self.mapping)?;
            if let Some(next) = ordered.next(self.mapping)? {
                self.open.push(Open {
                    next,
                    file: ordered,
                });
            }
            self.waiting.pop_front();
        }
        let places = self.open.iter().enumerate();
        let first = places.min_by_key(|(_, open)| open.next.order());
        let Some((place, _)) = first else {
            return Ok(None);
        };
        let open = &mut self.open[place];
        let entry = match open.file.next(self.mapping)? {
            Some(following) => std::mem::replace(&mut open.next, following),
            None => self.open.remove(place).next,
        };
        Ok(Some(entry))
    }

    /// Whether a file must be open to know what comes next.
    fn has_come(&self, file: &FileSurvey) -> bool {
        let soonest: Option<Timestamp> = self.open.iter().map(|open| open.next.at).min();
        soonest.is_none_or(|soonest| file.extent.first <= Some(soonest))
    }
}
