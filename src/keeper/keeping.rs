//! Old files of the record go, and that is said.

use super::Keeper;
use crate::document;
use crate::record::Retention;
use holdtrue_engine::event::{Notice, Output, Subject};
use holdtrue_engine::setup::{Setup, WindowLength};
use holdtrue_engine::time::{Duration, Timestamp};

/// A window that counts pairs may reach back so far (common practice: yearly calibrations).
const PAIRS_REACH: Duration = Duration::from_seconds(366 * 86_400);

impl<T> Keeper<T> {
    /// How much of the record is kept from now on.
    pub fn retain(&mut self, retention: Retention) {
        self.retention = retention;
        self.may_be_old = true;
    }

    /// Notes what is to be removed, with the batch at hand.
    pub(super) fn remove_old(&mut self, now: Timestamp) {
        if !std::mem::take(&mut self.may_be_old) {
            return;
        }
        let day = self.day_instant(now);
        let needed_from = day.minus(reach(&self.setup));
        let removals = match self.record.removals(self.retention, day, needed_from) {
            Ok(removals) => removals,
            Err(error) => {
                tracing::warn!(%error, "old files can't be looked for");
                return;
            }
        };
        for removal in removals {
            let limits = if removal.within_window {
                "; windows of channels reach into it: after a quarantine or a late result they \
                 can't be fitted anew as far back as they should be. Give the record more room"
            } else {
                ""
            };
            let text = format!(
                "record file {} is removed: {}{limits}",
                removal.name, removal.why
            );
            if removal.within_window {
                tracing::warn!("{text}");
            } else {
                tracing::info!("{text}");
            }
            self.record.remove(&removal);
            self.tell(now, "record-file-removed", text);
        }
    }

    /// Publishes a notice that the engine did not cause.
    pub fn tell(&mut self, at: Timestamp, code: &str, text: String) {
        let notice = Output::Notice(Notice {
            at,
            subject: Subject::Node,
            code: code.to_owned(),
            text,
            held_back: 0,
        });
        if let Some(document) = document::render(&notice, &self.setup) {
            self.publish(document);
        }
    }
}

/// How far back the longest window reaches.
fn reach(setup: &Setup) -> Duration {
    let windows = setup
        .channels
        .iter()
        .map(|channel| match channel.fit.window {
            WindowLength::Time(length) => length,
            WindowLength::Pairs(_) => PAIRS_REACH,
        });
    windows.max().unwrap_or(Duration::ZERO)
}
