//! Topics under `holdtrue/<node>/`.

use holdtrue_engine::event::{AlarmKind, Subject};
use holdtrue_engine::setup::Setup;

/// The topics of one node.
pub struct Topics<'a> {
    node: &'a str,
}

impl<'a> Topics<'a> {
    /// Of the node with this name.
    #[must_use]
    pub fn new(node: &'a str) -> Self {
        Self { node }
    }

    /// Whether the daemon lives, and how; retained, and the will.
    #[must_use]
    pub fn state(&self) -> String {
        format!("holdtrue/{}/state", self.node)
    }

    /// The correction in force of a channel; retained.
    #[must_use]
    pub fn correction(&self, channel: &str) -> String {
        format!("holdtrue/{}/correction/{channel}", self.node)
    }

    /// Every corrected value of a channel.
    #[must_use]
    pub fn corrected(&self, channel: &str) -> String {
        format!("holdtrue/{}/corrected/{channel}", self.node)
    }

    /// What lies ahead of a channel; retained.
    #[must_use]
    pub fn outlook(&self, channel: &str) -> String {
        format!("holdtrue/{}/outlook/{channel}", self.node)
    }

    /// The newest change of a channel's announced model, with its evidence; retained.
    #[must_use]
    pub fn degree(&self, channel: &str) -> String {
        format!("holdtrue/{}/degree/{channel}", self.node)
    }

    /// The newest step of a channel, with its evidence; retained.
    #[must_use]
    pub fn step(&self, channel: &str) -> String {
        format!("holdtrue/{}/step/{channel}", self.node)
    }

    /// An alarm; retained. `name` is the channel's or reference's, and not used for an alarm of
    /// the node. (None stands on an influence quantity today.)
    #[must_use]
    pub fn alarm(&self, subject: Subject, name: &str, kind: AlarmKind) -> String {
        let kind = kind.code();
        match subject {
            Subject::Node => format!("{}/{kind}", self.node_alarms()),
            Subject::Channel(_) => format!("holdtrue/{}/alarm/channel/{name}/{kind}", self.node),
            Subject::Reference(_) => {
                format!("holdtrue/{}/alarm/reference/{name}/{kind}", self.node)
            }
            Subject::Influence(_) => {
                format!("holdtrue/{}/alarm/influence/{name}/{kind}", self.node)
            }
        }
    }

    /// Below which the alarms of the node itself stand.
    #[must_use]
    pub fn node_alarms(&self) -> String {
        format!("holdtrue/{}/alarm/node", self.node)
    }

    /// What the newest quarantine means for a channel; retained.
    #[must_use]
    pub fn impact(&self, channel: &str) -> String {
        format!("holdtrue/{}/impact/{channel}", self.node)
    }

    /// The newest comparison of a channel's model with what a service found; retained.
    #[must_use]
    pub fn validation(&self, channel: &str) -> String {
        format!("holdtrue/{}/validation/{channel}", self.node)
    }

    /// Where an order of this verb goes.
    #[must_use]
    pub fn order(&self, verb: &str) -> String {
        format!("holdtrue/{}/order/{verb}", self.node)
    }

    /// What to subscribe to for all orders.
    #[must_use]
    pub fn orders(&self) -> String {
        self.order("#")
    }

    /// Answers to orders that name no other topic.
    #[must_use]
    pub fn answer(&self) -> String {
        format!("holdtrue/{}/answer", self.node)
    }

    /// What a person should be able to read about.
    #[must_use]
    pub fn notice(&self) -> String {
        format!("holdtrue/{}/notice", self.node)
    }

    /// Whether `topic` carries a retained document about a channel or reference that `setup` no
    /// longer has, or about another node.
    #[must_use]
    pub fn is_orphan(&self, topic: &str, setup: &Setup) -> bool {
        let Some(rest) = topic.strip_prefix(&format!("holdtrue/{}/", self.node)) else {
            return true;
        };
        let channel = |name: &str| setup.channels.iter().any(|channel| channel.name == name);
        let reference = |name: &str| setup.references.iter().any(|known| known.name == name);
        let without_kind = |rest: &'_ str| rest.rsplit_once('/').map(|(name, _)| name.to_owned());
        if let Some(name) = rest
            .strip_prefix("correction/")
            .or(rest.strip_prefix("degree/"))
            .or(rest.strip_prefix("step/"))
            .or(rest.strip_prefix("outlook/"))
            .or(rest.strip_prefix("validation/"))
            .or(rest.strip_prefix("impact/"))
        {
            !channel(name)
        } else if let Some(rest) = rest.strip_prefix("alarm/channel/") {
            !without_kind(rest).is_some_and(|name| channel(&name))
        } else if let Some(rest) = rest.strip_prefix("alarm/reference/") {
            !without_kind(rest).is_some_and(|name| reference(&name))
        } else {
            false
        }
    }
}

/// The name of what an alarm or notice is about; `None` if the setup has no such thing.
#[must_use]
pub fn subject_name(subject: Subject, setup: &Setup) -> Option<&str> {
    match subject {
        Subject::Node => Some(&setup.node),
        Subject::Channel(id) => setup.channels.get(id.0 as usize).map(|it| it.name.as_str()),
        Subject::Reference(id) => setup
            .references
            .get(id.0 as usize)
            .map(|it| it.name.as_str()),
        Subject::Influence(id) => setup
            .influences
            .get(id.0 as usize)
            .map(|it| it.name.as_str()),
    }
}
