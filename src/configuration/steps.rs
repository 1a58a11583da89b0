//! `steps` and `step_confirmation` of a channel: whether steps of the sensor end its stretch.

use super::reader::Section;

/// How many standard uncertainties make a step; `None` with `steps = false`.
pub(super) fn read(section: &Section<'_>, default: Option<f64>) -> Option<f64> {
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
    let confirmation = confirmation.map(|found| found.value).or(default);
    confirmation.filter(|_| wanted)
}
