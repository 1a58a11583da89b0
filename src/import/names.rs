//! The configuration's names of what a recording may hold, and what to say when there is none such.

use crate::configuration::Configuration;
use crate::payload::Target;
use holdtrue_engine::setup::{ChannelId, ReferenceId, ReferenceKind, Setup};

/// Two names at least this much alike (Jaro-Winkler, 0 … 1) are taken for a slip of the pen.
const ALIKE: f64 = 0.82;
/// So many names are shown where none is alike.
const SHOWN_MAX: usize = 8;

/// Finds targets by their names.
pub(super) struct Names<'a> {
    configuration: &'a Configuration,
}

impl<'a> Names<'a> {
    pub(super) fn new(configuration: &'a Configuration) -> Self {
        Self { configuration }
    }

    /// A channel's indication.
    pub(super) fn indication(&self, channel: &str) -> Result<Target, String> {
        self.channel(channel).map(Target::Indication)
    }

    /// A measured reference's value; a channel's own reference bears the channel's name.
    pub(super) fn reference(&self, name: &str) -> Result<Target, String> {
        let id = self.reference_id(name)?;
        let kind = &self.configuration.setup.references[id.0 as usize].kind;
        match kind {
            ReferenceKind::Measured => Ok(Target::Reference(id)),
            ReferenceKind::Constant { value, .. } => Err(format!(
                "the value of reference \"{name}\" is known, {value}; map nothing to it, but its \
                 valid_when if it has one"
            )),
            ReferenceKind::Group { .. } => Err(format!(
                "reference \"{name}\" is the median of channels; map their indications"
            )),
            ReferenceKind::Checks { .. } => Err(format!(
                "reference \"{name}\" is made of known values; map their valid_when"
            )),
        }
    }

    /// An influence quantity by the name that a channel gives it.
    pub(super) fn influence(&self, channel: &str, name: &str) -> Result<Target, String> {
        let id = self.channel(channel)?;
        let influences = &self.configuration.setup.channels[id.0 as usize].influences;
        let found = influences.iter().find(|influence| influence.name == name);
        found.map_or_else(
            || {
                let known = influences.iter().map(|influence| influence.name.as_str());
                let what = format!("influence \"{name}\" on channel \"{channel}\"");
                Err(unknown(&what, name, known))
            },
            |influence| Ok(Target::Influence(influence.source)),
        )
    }

    /// The `valid_when` of a known value.
    pub(super) fn gate(&self, reference: &str) -> Result<Target, String> {
        let id = self.reference_id(reference)?;
        let uses = self.configuration.intake.topics.values().flatten();
        let gate = uses
            .map(|used| &used.target)
            .find(|target| matches!(target, Target::Gate { reference, .. } if *reference == id));
        gate.cloned()
            .ok_or_else(|| format!("reference \"{reference}\" has no valid_when"))
    }

    fn channel(&self, name: &str) -> Result<ChannelId, String> {
        let channels = &self.configuration.setup.channels;
        let found = channels.iter().position(|channel| channel.name == name);
        found.map(ChannelId::at).ok_or_else(|| {
            let known = channels.iter().map(|channel| channel.name.as_str());
            unknown(&format!("channel \"{name}\""), name, known)
        })
    }

    fn reference_id(&self, name: &str) -> Result<ReferenceId, String> {
        let references = &self.configuration.setup.references;
        let found = references.iter().position(|known| known.name == name);
        found.map(ReferenceId::at).ok_or_else(|| {
            let known = references.iter().map(|reference| reference.name.as_str());
            unknown(&format!("reference \"{name}\""), name, known)
        })
    }
}

/// A target in words: `indication of intake/ph-1`.
pub(super) fn shown(target: &Target, setup: &Setup) -> String {
    let reference = |id: &ReferenceId| {
        let found = setup.references.get(id.0 as usize);
        found.map_or("", |reference| reference.name.as_str())
    };
    match target {
        Target::Indication(id) => {
            let found = setup.channels.get(id.0 as usize);
            let name = found.map_or("", |channel| channel.name.as_str());
            format!("indication of {name}")
        }
        Target::Reference(id) => format!("reference {}", reference(id)),
        Target::Gate { reference: id, .. } => format!("valid_when of {}", reference(id)),
        Target::Influence(id) => {
            let users = setup.channels.iter().flat_map(|channel| {
                let acting = channel.influences.iter().filter(|it| it.source == *id);
                acting.map(|influence| format!("{} on {}", influence.name, channel.name))
            });
            let users: Vec<String> = users.collect();
            format!("influence {}", users.join(", "))
        }
    }
}

/// "no channel "x" in the configuration; did you mean …?"
fn unknown<'n>(what: &str, wanted: &str, known: impl Iterator<Item = &'n str> + Clone) -> String {
    let nearest = known
        .clone()
        .map(|name| (strsim::jaro_winkler(name, wanted), name))
        .filter(|(likeness, _)| *likeness >= ALIKE)
        .max_by(|a, b| a.0.total_cmp(&b.0));
    let advice = if let Some((_, nearest)) = nearest {
        format!("; did you mean \"{nearest}\"?")
    } else {
        let shown: Vec<&str> = known.clone().take(SHOWN_MAX).collect();
        match (shown.len(), known.count()) {
            (0, _) => String::new(),
            (some, all) if some < all => format!("; it has {}, …", shown.join(", ")),
            _ => format!("; it has {}", shown.join(", ")),
        }
    };
    format!("the configuration has no {what}{advice}")
}
