//! What a channel says of its pairs and of its announced model.

use super::Scene;
use super::pairing::Pair;
use crate::event::{DegreeChange, Flag, Output, PairFate, RefusedReason, Rejection, Subject};
use crate::fit::{Change, SpanRefusal, Term};
use crate::report::Report;
use crate::wording::readable;

/// Says what became of a pair; a rejection is counted and told to people as well.
pub(super) fn tell_fate(
    pair: &Pair,
    rejected: Option<Rejection>,
    scene: &Scene<'_>,
    report: &mut Report<'_>,
) {
    report.say(fate(pair, rejected, scene));
    if let Some(rejection) = rejected {
        let subject = Subject::Channel(scene.id);
        report.refuse(scene.now, subject, rejection.reason, || {
            format!(
                "{}: pair at {} with indication {} and reference {} {} ({} above {})",
                scene.setup.name,
                pair.time,
                readable(pair.indication),
                readable(pair.reference),
                scene.setup.unit,
                readable(rejection.value),
                readable(rejection.threshold)
            )
        });
    }
}

/// Says that a pair stays out of the fit because an influence quantity was not told beside it.
pub(super) fn tell_unattached(
    pair: &Pair,
    influence: usize,
    rejection: Rejection,
    scene: &Scene<'_>,
    report: &mut Report<'_>,
) {
    report.say(fate(pair, Some(rejection), scene));
    let subject = Subject::Channel(scene.id);
    report.refuse(scene.now, subject, rejection.reason, || {
        format!(
            "{}: pair at {} has no {} beside it and stays out of the fit",
            scene.setup.name, pair.time, scene.setup.influences[influence].name
        )
    });
}

/// Says that a pair is kept out because of its reference: its channels shifted together by so much,
/// and so much is permitted. It is counted, but people are told once, on the reference.
pub(super) fn tell_struck(
    pair: &Pair,
    (value, threshold): (f64, f64),
    scene: &Scene<'_>,
    report: &mut Report<'_>,
) {
    let rejection = Rejection {
        reason: RefusedReason::ReferenceDoubted,
        value,
        threshold,
    };
    let subject = Subject::Channel(scene.id);
    report.counters.add(subject, rejection.reason);
    report.say(fate(pair, Some(rejection), scene));
}

/// Says what has become of a pair in the end, when many are told at once: a rejection is counted,
/// but people are told once, of all of them.
pub(super) fn tell_quietly(
    pair: &Pair,
    rejected: Option<Rejection>,
    scene: &Scene<'_>,
    report: &mut Report<'_>,
) {
    if let Some(rejection) = rejected {
        let subject = Subject::Channel(scene.id);
        report.counters.add(subject, rejection.reason);
    }
    report.say(fate(pair, rejected, scene));
}

fn fate(pair: &Pair, rejected: Option<Rejection>, scene: &Scene<'_>) -> Output {
    Output::Pair(PairFate {
        channel: scene.id,
        phenomenon: pair.time,
        indication: pair.indication + 0.0,
        reference: pair.reference + 0.0,
        flag: Flag::of_fate(rejected),
        rejected,
    })
}

/// Says that the announced model changed in one term, with its evidence; people are told as well.
pub(super) fn tell_change(change: Change, scene: &Scene<'_>, report: &mut Report<'_>) {
    let (code, text) = in_words(&change, scene);
    report.say(Output::Degree(Box::new(DegreeChange {
        channel: scene.id,
        at: scene.now,
        term: change.term,
        from: change.from,
        to: change.to,
        evidence: change.evidence,
        refused: change.refused,
    })));
    let subject = Subject::Channel(scene.id);
    report.notice(scene.now, subject, code, || text);
}

/// The code of a change's notice, and its text.
fn in_words(change: &Change, scene: &Scene<'_>) -> (&'static str, String) {
    let Change {
        term,
        from,
        to,
        evidence,
        refused,
    } = change;
    let (gain, judged_by) = (evidence.gain, &evidence.judged_by);
    let segments = evidence.held_segments;
    let decided = match refused {
        Some(refusal) => format!("{} (it gains {gain:.1})", why_refused(*refusal)),
        None => format!(
            "the richer model gains {gain:.1} (judged by {judged_by}), held for {segments} segments"
        ),
    };
    let (code, what) = match term {
        Term::Zero if to > from => (
            "degree-raised",
            format!("degree of the drift was raised from {from} to {to}"),
        ),
        Term::Zero => (
            "degree-lowered",
            format!("degree of the drift was lowered from {from} to {to}"),
        ),
        Term::Span => (
            "model-changed",
            format!("span now has {to} coefficients, before {from}"),
        ),
        Term::Influence(place) => {
            let named = scene.setup.influences.get(usize::from(*place));
            let name = named.map_or("", |influence| influence.name.as_str());
            let taken = if to > from { "now in" } else { "no longer in" };
            ("model-changed", format!("effect of {name} is {taken} use"))
        }
    };
    (code, format!("{}: the {what}: {decided}", scene.setup.name))
}

/// Why a span was withdrawn, in words.
fn why_refused(refusal: SpanRefusal) -> &'static str {
    match refusal {
        SpanRefusal::FewSegments => "there are too few segments",
        SpanRefusal::NoSpread => "the level no longer varies",
        SpanRefusal::RegressorNoise => "noise in the level would bend it",
    }
}
