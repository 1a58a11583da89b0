//! Documents about a change of the announced model in one term, with the numbers that decided it.

use super::correction::Criterion;
use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::DegreeChange;
use holdtrue_engine::fit::Term;
use holdtrue_engine::setup::ChannelSetup;
use serde::Serialize;

/// The newest change of a channel's announced model.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct DegreeDocument<'a> {
    schema_version: u32,
    channel: &'a str,
    at: String,
    term: &'static str,
    influence: Option<&'a str>,
    from: u8,
    to: u8,
    criterion: Criterion<'a>,
    gain: f64,
    judged_by: &'a str,
    needed: f64,
    held_segments: u32,
    needed_segments: u32,
    segments: u32,
    effective_sample_size: f64,
    lag_one: f64,
    rss: &'a [f64],
    refused: Option<&'static str>,
}

impl<'a> DegreeDocument<'a> {
    /// Of one change of `channel`.
    #[must_use]
    pub fn new(change: &'a DegreeChange, channel: &'a ChannelSetup) -> Self {
        let evidence = &change.evidence;
        let (term, place) = match change.term {
            Term::Zero => ("zero", None),
            Term::Span => ("span", None),
            Term::Influence(place) => ("influence", Some(usize::from(place))),
        };
        let influence = place.and_then(|place| channel.influences.get(place));
        Self {
            schema_version: SCHEMA_VERSION,
            channel: &channel.name,
            at: word::time(change.at),
            term,
            influence: influence.map(|influence| influence.name.as_str()),
            from: change.from,
            to: change.to,
            criterion: Criterion {
                name: &evidence.criterion.name,
                values: &evidence.criterion.values,
            },
            gain: evidence.gain,
            judged_by: &evidence.judged_by,
            needed: evidence.needed,
            held_segments: evidence.held_segments,
            needed_segments: evidence.needed_segments,
            segments: evidence.segments,
            effective_sample_size: evidence.effective_sample_size,
            lag_one: evidence.lag_one,
            rss: &evidence.rss,
            refused: change.refused.map(word::span_refusal),
        }
    }
}
