//! What a channel says of its pairs and of its degree.

use super::Scene;
use super::pairing::Pair;
use crate::event::{DegreeChange, Flag, Output, PairFate, RefusedReason, Rejection, Subject};
use crate::fit::{Change, Term};
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

/// Says that the announced degree changed, with its evidence; a rise is also told to people.
pub(super) fn tell_degree(change: Change, scene: &Scene<'_>, report: &mut Report<'_>) {
    let Change {
        term,
        from,
        to,
        evidence,
        ..
    } = change;
    if term != Term::Zero {
        tell_term(term, (from, to), scene, report);
        return;
    }
    let (code, word) = if to > from {
        ("degree-raised", "raised")
    } else {
        ("degree-lowered", "lowered")
    };
    let (gain, segments) = (evidence.gain, evidence.held_segments);
    let judged_by = evidence.judged_by.clone();
    report.say(Output::Degree(Box::new(DegreeChange {
        channel: scene.id,
        at: scene.now,
        from,
        to,
        evidence,
    })));
    report.notice(scene.now, Subject::Channel(scene.id), code, || {
        format!(
            "{}: the degree of the drift was {word} from {from} to {to}: the higher one gains \
             {gain:.1} (judged by {judged_by}), held for {segments} segments",
            scene.setup.name
        )
    });
}

/// Says that span terms or an influence quantity came into use or went out of it.
fn tell_term(term: Term, (from, to): (u8, u8), scene: &Scene<'_>, report: &mut Report<'_>) {
    let what = match term {
        Term::Zero => "zero".to_owned(),
        Term::Span => "span".to_owned(),
        Term::Influence(place) => {
            let named = scene.setup.influences.get(usize::from(place));
            named.map_or_else(String::new, |it| format!("influence of {}", it.name))
        }
    };
    report.notice(scene.now, Subject::Channel(scene.id), "model-changed", || {
        format!(
            "{}: the model of the error now has {to} coefficients for the {what}, before {from}",
            scene.setup.name
        )
    });
}
