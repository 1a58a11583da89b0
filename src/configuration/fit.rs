//! How a channel is fitted: `window`, `segments`, degrees and criterion.

use super::quantity;
use super::reader::Section;
use holdtrue_engine::fit::basis::{MAX_INFLUENCES, MAX_SPAN_DEGREE, MOST_INFLUENCES};
use holdtrue_engine::setup::{Criterion, FitSetup, PairNoise, WindowLength};
use holdtrue_engine::time::Duration;

/// A day.
const DAY: Duration = Duration::from_seconds(86_400);
/// Most segments.
const SEGMENTS_MAX: u32 = 1024;
/// Shortest slice of time that a window is cut into.
const SEGMENT_MIN: Duration = Duration(1_000_000);
/// Highest degree.
const DEGREE_LIMIT: u8 = 5;

/// Reads `window`, `segments`, `max_degree`, `max_span_degree`, `degree` and `criterion`; `noise`
/// and the number of influence quantities come from elsewhere.
pub(super) fn read(section: &Section<'_>, noise: PairNoise, influences: usize) -> FitSetup {
    let default = FitSetup::default();
    let (window, segments) = window(section, &default);
    let (max_degree, forced_degree) = degrees(section, default.max_degree);
    let criterion = section.choice(
        "criterion",
        &[("bic", Criterion::Bic), ("aicc", Criterion::Aicc)],
    );
    FitSetup {
        window,
        segments,
        max_degree,
        forced_degree,
        criterion: criterion.map_or(default.criterion, |found| found.value),
        max_span_degree: span_degree(section, max_degree),
        influences: u8::try_from(influences.min(MAX_INFLUENCES)).unwrap_or(MOST_INFLUENCES),
        noise,
    }
}

/// The window, and the number of its segments; of those, not told, no more than there are pairs.
fn window(section: &Section<'_>, default: &FitSetup) -> (WindowLength, u32) {
    let window = section
        .text("window")
        .and_then(|found| match quantity::window(found.value) {
            Ok(window) => Some(window),
            Err(message) => {
                section.wrong(&found, message);
                None
            }
        });
    let window = window.unwrap_or(default.window);
    let told = section.integer_in("segments", 1..=SEGMENTS_MAX);
    let segments = told.as_ref().map_or(default.segments, |found| found.value);
    let segments = match window {
        WindowLength::Pairs(pairs) if pairs < segments => {
            if let Some(found) = &told {
                let message =
                    format!("more segments than the window's {pairs} pairs; write at most {pairs}");
                section.wrong(found, message);
            }
            pairs
        }
        WindowLength::Time(length) if length.0 / i64::from(segments) < SEGMENT_MIN.0 => {
            let at = section
                .place("window")
                .or_else(|| section.place("segments"));
            if let Some(found) = at {
                section.wrong(&found, "its segments would be shorter than 1 ms");
            }
            segments
        }
        _ => segments,
    };
    (window, segments)
}

/// Highest degree, and the one that is told.
fn degrees(section: &Section<'_>, default: u8) -> (u8, Option<u8>) {
    let max_degree = section.integer_in("max_degree", 0..=DEGREE_LIMIT);
    let forced = section.integer_in("degree", 0..=DEGREE_LIMIT);
    let forced_degree = forced.as_ref().map(|found| found.value);
    if let (Some(found), Some(max)) = (&forced, &max_degree)
        && found.value > max.value
    {
        section.wrong(
            found,
            format!("is above max_degree, which is {}", max.value),
        );
    }
    let max_degree =
        max_degree.map_or(default.max(forced_degree.unwrap_or(0)), |found| found.value);
    (max_degree, forced_degree)
}

/// `max_span_degree`: how fast the span may drift; absent, the error is taken not to depend on the
/// level.
fn span_degree(section: &Section<'_>, max_degree: u8) -> Option<u8> {
    let found = section.integer_in("max_span_degree", 0..=MAX_SPAN_DEGREE)?;
    if found.value > max_degree {
        let message = format!(
            "is above max_degree, which is {max_degree}: a span that drifts moves the zero as well"
        );
        section.wrong(&found, message);
    }
    Some(found.value)
}

/// What a window makes hard to see. A cycle needs three periods in the window, or it is taken for
/// drift: with one period every run of a trial raised the degree. An influence quantity that causes
/// it, if declared, tells it apart.
pub(super) fn warn_about_window(section: &Section<'_>, fit: &FitSetup, lateness: Duration) {
    let WindowLength::Time(length) = fit.window else {
        return;
    };
    let Some(found) = section.place("window") else {
        return;
    };
    let warn = |message: &str| section.source().warn(&found.span, &found.key, message);
    let may_rise = fit.forced_degree.is_none() && fit.max_degree > 0;
    if length.0 < 3 * DAY.0 && may_rise && fit.influences == 0 {
        warn(
            "holds fewer than three days: a daily cycle (temperature, sun) would be taken for \
             drift; lengthen it, or declare what causes the cycle in `influences`, unless the \
             sensor has no such cycle",
        );
    }
    if lateness > length {
        warn("is shorter than `lateness`: the latest readings would find their window gone");
    }
}
