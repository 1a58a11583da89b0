//! What the broker's session may have forgotten and is owed: subscriptions and retained documents.
//!
//! The record keeps the confirmed subscriptions, and they stand there only while there is a
//! connection and nothing is owed: an empty list tells the next start that the retained documents
//! may be missing as well.

use std::collections::{BTreeMap, BTreeSet};
use std::time::Duration;
use tokio::time::Instant;

/// A refused subscription is asked for again this often: a permission may have been given
/// meanwhile.
const ASK_AGAIN_EVERY: Duration = Duration::from_mins(3);
/// After the record failed, what is owed is tried again after this long.
const RECORD_AGAIN_AFTER: Duration = Duration::from_secs(5);

/// What is owed.
pub(super) struct Memory {
    /// Not every subscription has been answered since this process began or the session was lost.
    must_subscribe: bool,
    /// Filters that the broker refuses, and why.
    refused: BTreeMap<String, String>,
    ask_again: Option<Instant>,
    steps: Steps,
    not_before: Instant,
}

/// What the record still has to be told, in this order.
struct Steps {
    /// That the session was lost.
    forget: bool,
    /// The retained documents, for the outbox.
    documents: Documents,
    /// What the broker confirmed.
    confirmed: Option<BTreeSet<String>>,
}

#[derive(Clone, Copy, PartialEq, Eq)]
enum Documents {
    Stand,
    Owed,
    /// In the outbox, but not yet on the disk.
    Noted,
}

/// The next thing to do with the record.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) enum Step {
    /// Make the noted subscriptions void.
    Forget,
    /// Put the retained documents into the outbox.
    PublishStanding,
    /// Note these subscriptions.
    Note(BTreeSet<String>),
}

impl Memory {
    /// At the start. `remembered`: the record knows subscriptions that were confirmed.
    pub(super) fn new(remembered: bool) -> Self {
        Self {
            must_subscribe: true,
            refused: BTreeMap::new(),
            ask_again: None,
            steps: Steps {
                forget: false,
                documents: if remembered {
                    Documents::Stand
                } else {
                    Documents::Owed
                },
                confirmed: None,
            },
            not_before: Instant::now(),
        }
    }

    /// The broker had our session: where nothing is to be asked, what it had confirmed holds on.
    pub(super) fn session_kept(&mut self, confirmed: &BTreeSet<String>) {
        if !self.must_subscribe && self.steps.confirmed.is_none() && !confirmed.is_empty() {
            self.steps.confirmed = Some(confirmed.clone());
        }
    }

    /// The broker no longer had our session.
    pub(super) fn session_lost(&mut self) {
        self.must_subscribe = true;
        self.steps = Steps {
            forget: true,
            documents: Documents::Owed,
            confirmed: None,
        };
        self.not_before = Instant::now();
    }

    /// Whether a new connection has to subscribe.
    pub(super) fn must_subscribe(&self) -> bool {
        self.must_subscribe
    }

    /// The broker answered what was asked: of `filters` it refused these. Says which of them it
    /// did not refuse before, and whether it has changed its mind.
    pub(super) fn subscribed(
        &mut self,
        filters: &[String],
        refused: &[(String, String)],
    ) -> (Vec<(String, String)>, bool) {
        let first = std::mem::replace(&mut self.must_subscribe, false);
        let refused: BTreeMap<String, String> = refused.iter().cloned().collect();
        let new = refused
            .iter()
            .filter(|(filter, _)| !self.refused.contains_key(*filter))
            .map(|(filter, why)| (filter.clone(), why.clone()))
            .collect();
        let confirmed = filters
            .iter()
            .filter(|filter| !refused.contains_key(*filter))
            .cloned()
            .collect();
        let changed = first || refused.len() != self.refused.len();
        self.ask_again = (!refused.is_empty()).then(|| Instant::now() + ASK_AGAIN_EVERY);
        self.refused = refused;
        self.steps.confirmed = Some(confirmed);
        (new, changed)
    }

    /// Filters that the broker refuses, and why.
    pub(super) fn refused(&self) -> &BTreeMap<String, String> {
        &self.refused
    }

    /// Refused filters to ask for again now.
    pub(super) fn ask_again(&mut self, clock: Instant) -> Vec<String> {
        if self.ask_again.is_none_or(|due| due > clock) {
            return Vec::new();
        }
        self.ask_again = Some(clock + ASK_AGAIN_EVERY);
        self.refused.keys().cloned().collect()
    }

    fn next_step(&self) -> Option<Step> {
        if self.steps.forget {
            return Some(Step::Forget);
        }
        match self.steps.documents {
            Documents::Owed => Some(Step::PublishStanding),
            Documents::Noted => None,
            Documents::Stand => self.steps.confirmed.clone().map(Step::Note),
        }
    }

    /// What to do now.
    pub(super) fn step(&self, clock: Instant) -> Option<Step> {
        self.next_step().filter(|_| clock >= self.not_before)
    }

    /// When something is to be done.
    pub(super) fn due(&self) -> Option<Instant> {
        let step = self.next_step().map(|_| self.not_before);
        [step, self.ask_again].into_iter().flatten().min()
    }

    /// A step was done.
    pub(super) fn done(&mut self, step: &Step) {
        match step {
            Step::Forget => self.steps.forget = false,
            Step::PublishStanding => self.steps.documents = Documents::Noted,
            Step::Note(_) => self.steps.confirmed = None,
        }
    }

    /// The record failed; the step is still owed.
    pub(super) fn failed(&mut self, clock: Instant) {
        self.not_before = clock + RECORD_AGAIN_AFTER;
    }

    /// Everything noted so far is on the disk.
    pub(super) fn committed(&mut self) {
        if self.steps.documents == Documents::Noted {
            self.steps.documents = Documents::Stand;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn filters(names: &[&str]) -> Vec<String> {
        names.iter().map(|name| (*name).to_owned()).collect()
    }

    #[tokio::test]
    async fn after_a_lost_session_each_step_is_owed_until_it_is_on_the_disk() {
        let mut memory = Memory::new(true);
        assert!(memory.must_subscribe(), "the first connection subscribes");
        let clock = Instant::now();
        assert_eq!(memory.step(clock), None);
        memory.session_lost();
        let clock = Instant::now();
        assert_eq!(memory.step(clock), Some(Step::Forget));
        memory.failed(clock);
        assert_eq!(memory.step(clock), None, "not at once again");
        let later = clock + RECORD_AGAIN_AFTER;
        assert_eq!(memory.step(later), Some(Step::Forget), "still owed");
        memory.done(&Step::Forget);
        memory.subscribed(&filters(&["a"]), &[]);
        assert_eq!(memory.step(later), Some(Step::PublishStanding));
        memory.done(&Step::PublishStanding);
        assert_eq!(
            memory.step(later),
            None,
            "subscriptions are not noted before the documents are on the disk"
        );
        memory.committed();
        let noted = Step::Note(BTreeSet::from(["a".to_owned()]));
        assert_eq!(memory.step(later), Some(noted.clone()));
        memory.done(&noted);
        assert_eq!(memory.step(later), None);
        assert!(!memory.must_subscribe());
    }

    #[tokio::test]
    async fn a_kept_session_is_noted_again_unless_it_is_asked_for_anyway() {
        let all: BTreeSet<String> = filters(&["a"]).into_iter().collect();
        let mut memory = Memory::new(true);
        memory.session_kept(&all);
        assert_eq!(
            memory.step(Instant::now()),
            None,
            "the answer will be noted"
        );
        memory.subscribed(&filters(&["a"]), &[]);
        memory.done(&Step::Note(all.clone()));
        assert_eq!(memory.step(Instant::now()), None);
        memory.session_kept(&all);
        assert_eq!(memory.step(Instant::now()), Some(Step::Note(all)));
    }

    #[tokio::test]
    async fn a_loss_before_the_commit_makes_the_documents_owed_again() {
        let mut memory = Memory::new(false);
        let clock = Instant::now();
        assert_eq!(memory.step(clock), Some(Step::PublishStanding));
        memory.done(&Step::PublishStanding);
        memory.session_lost();
        memory.committed();
        memory.done(&Step::Forget);
        assert_eq!(
            memory.step(Instant::now()),
            Some(Step::PublishStanding),
            "the new broker has none of them"
        );
    }

    #[tokio::test]
    async fn what_was_refused_is_asked_for_again_and_told_once() {
        let mut memory = Memory::new(true);
        let all = filters(&["a", "b"]);
        let no = [("b".to_owned(), "NotAuthorized".to_owned())];
        assert_eq!(memory.subscribed(&all, &no), (no.to_vec(), true));
        assert_eq!(memory.refused().len(), 1);
        let clock = Instant::now();
        assert!(memory.ask_again(clock).is_empty());
        assert_eq!(memory.ask_again(clock + ASK_AGAIN_EVERY), ["b"]);
        assert!(memory.ask_again(clock + ASK_AGAIN_EVERY).is_empty());
        assert_eq!(memory.subscribed(&all, &no), (Vec::new(), false));
        assert_eq!(memory.subscribed(&all, &[]), (Vec::new(), true));
        assert!(memory.refused().is_empty());
        let noted = Step::Note(all.into_iter().collect());
        assert_eq!(memory.step(Instant::now()), Some(noted));
    }
}
