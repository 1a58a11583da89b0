//! `steps` and `step_confirmation` of a channel: whether steps of the sensor end its stretch.

use super::reader::Section;

/// Standard uncertainties that make a step: one in 16 000 by chance, at each signal of a chart that
/// signals once in 100 000 readings.
const CONFIRMATION: f64 = 4.0;

/// How many standard uncertainties make a step; `None` with `steps = false`.
pub(super) fn read(section: &Section<'_>) -> Option<f64> {
    let wanted = section.truth("steps");
    let confirmation = section.number_in(
        "step_confirmation",
        |multiple| (2.0..=8.0).contains(&multiple),
        "2 to 8 standard uncertainties",
    );
    let wanted = wanted.is_none_or(|found| found.value);
    if let (false, Some(found)) = (wanted, &confirmation) {
        section.wrong(
            found,
            "says nothing with steps = false; leave one of them out",
        );
    }
    wanted.then(|| confirmation.map_or(CONFIRMATION, |found| found.value))
}
