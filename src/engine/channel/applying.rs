//! Applies a correction as a consumer does, and says where it was learned.
//!
//! With Z and S the document's zero and span at the indication's time and G the sum of its
//! influence terms there: c = (Z + G + S·(i − centre)) / (1 − S) where the span is a function of
//! the reference value (solved for the unknown true level x = i + c), and c = Z + G + S·(i −
//! centre) where it is one of the indication.

use super::judgement::polynomial;
use super::{Scene, levels};
use crate::event::Correction;
use crate::fit::basis::MAX_INFLUENCES;
use crate::setup::SpanSide;
use crate::time::Timestamp;

/// Beyond what the fit has seen begins this part of the range past its ends …
const MARGIN_PART: f64 = 0.05;
/// … and so many standard deviations of the residuals more, since indications carry noise.
const MARGIN_DEVIATIONS: f64 = 3.0;
/// A span that takes this part of the indication away cannot be solved for the level.
const SPAN_MAX: f64 = 0.9;

/// An indication's correction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Applied {
    pub(super) correction: f64,
    /// Variance of the fit's part of it.
    pub(super) variance: f64,
    /// The level lies beyond what the fit has seen.
    pub(super) beyond: bool,
}

/// Corrects an indication; `None` if the span leaves nothing to divide by.
pub(super) fn apply(
    document: &Correction,
    time: Timestamp,
    indication: f64,
    influences: [f64; MAX_INFLUENCES],
) -> Option<Applied> {
    let days = time.since(document.origin).days();
    let span = polynomial(&document.span, days);
    let scale = match document.span_side {
        SpanSide::Reference if span.abs() > SPAN_MAX => return None,
        SpanSide::Reference => 1.0 - span,
        SpanSide::Indication => 1.0,
    };
    let from_centre = if document.span.is_empty() {
        0.0
    } else {
        indication - document.span_centre
    };
    let zero = polynomial(&document.zero, days) + influenced(document, influences);
    let correction = (zero + span * from_centre) / scale + 0.0;
    let level = levels::regressor(document.span_side, indication, indication + correction);
    let phi = row(document, days, level, influences);
    let variance = quadratic(&document.covariance, &phi) / (scale * scale);
    Some(Applied {
        correction,
        variance,
        beyond: is_beyond(level, document.range, document.residual_sd),
    })
}

/// The influence quantities at an instant, as far as they matter to a correction.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Acting {
    pub(super) values: [f64; MAX_INFLUENCES],
    /// One of them lies beyond what the fit has seen.
    pub(super) beyond: bool,
    /// Places of those that were not told within `max_gap` before the instant, and so are taken at
    /// their centres …
    pub(super) assumed: Vec<u8>,
    /// … and what these may do at most within what the fit has seen.
    pub(super) assumed_effect: f64,
}

impl Acting {
    /// Each as it was told last. (A corrected value does not wait for the next.)
    pub(super) fn of(document: &Correction, time: Timestamp, scene: &Scene<'_>) -> Self {
        let mut acting = Self::default();
        for ((place, term), influence) in (0_u8..)
            .zip(&document.influences)
            .zip(&scene.setup.influences)
        {
            let value = &mut acting.values[usize::from(place)];
            *value = term.centre;
            if !term.in_force {
                continue;
            }
            let last = scene.influences[influence.source.0 as usize].last_until(time);
            let last = last.filter(|last| time.since(last.time) <= scene.setup.max_gap);
            if let Some(last) = last {
                *value = last.value;
                acting.beyond |= is_beyond(last.value, term.range, 0.0);
            } else {
                let (lowest, highest) = term.range;
                let reach = (highest - term.centre).max(term.centre - lowest);
                acting.assumed.push(place);
                acting.assumed_effect += (term.coefficient * reach).abs();
            }
        }
        acting
    }
}

/// The correction that a document states for a level, on its own side.
pub(super) fn at_level(
    document: &Correction,
    time: Timestamp,
    level: f64,
    influences: [f64; MAX_INFLUENCES],
) -> f64 {
    let days = time.since(document.origin).days();
    let span = if document.span.is_empty() {
        0.0
    } else {
        polynomial(&document.span, days) * (level - document.span_centre)
    };
    polynomial(&document.zero, days) + span + influenced(document, influences)
}

/// The correction that a document states for the level at which its error was judged, and the
/// variance of the fit's part of it, at another instant.
pub(super) fn judged_again(document: &Correction, time: Timestamp) -> (f64, f64) {
    let mut centres = [0.0; MAX_INFLUENCES];
    for (centre, term) in centres.iter_mut().zip(&document.influences) {
        *centre = term.centre;
    }
    let days = time.since(document.origin).days();
    let phi = row(document, days, document.judged_at, centres);
    (
        at_level(document, time, document.judged_at, centres) + 0.0,
        quadratic(&document.covariance, &phi),
    )
}

/// Whether a value lies beyond the range that the fit has seen, by more than noise.
pub(super) fn is_beyond(value: f64, (lowest, highest): (f64, f64), deviation: f64) -> bool {
    let margin = MARGIN_PART * (highest - lowest) + MARGIN_DEVIATIONS * deviation;
    value < lowest - margin || value > highest + margin
}

/// The sum of the influence terms.
fn influenced(document: &Correction, influences: [f64; MAX_INFLUENCES]) -> f64 {
    let terms = document.influences.iter().zip(influences);
    terms
        .map(|(term, value)| term.coefficient * (value - term.centre))
        .sum()
}

/// The entries that a document's covariance belongs to: powers of time, those times the level, and
/// the influence quantities.
fn row(
    document: &Correction,
    days: f64,
    level: f64,
    influences: [f64; MAX_INFLUENCES],
) -> Vec<f64> {
    let powers = |first: f64| std::iter::successors(Some(first), move |power| Some(power * days));
    let terms = document.influences.iter().zip(influences);
    powers(1.0)
        .take(document.zero.len())
        .chain(powers(level - document.span_centre).take(document.span.len()))
        .chain(terms.map(|(term, value)| value - term.centre))
        .collect()
}

/// φᵀCφ; entries of φ that the covariance has no row for are known exactly.
fn quadratic(covariance: &[Vec<f64>], phi: &[f64]) -> f64 {
    let sum: f64 = covariance
        .iter()
        .zip(phi)
        .map(|(row, own)| own * row.iter().zip(phi).map(|(c, phi)| c * phi).sum::<f64>())
        .sum();
    sum.max(0.0)
}
