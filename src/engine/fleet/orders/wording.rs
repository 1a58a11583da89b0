//! What answers say to people.

use crate::event::{Comparison, Fouling, Problem, SawTooth, Serviced};
use crate::wording::readable;

/// What a service event led to, in one or a few sentences.
pub(super) fn done(serviced: &Serviced, unit: &str) -> String {
    let mut text = format!(
        "{} {} at {}: {}.",
        serviced.about.name(),
        serviced.act.word(),
        serviced.performed,
        stretches(serviced)
    );
    if let Some(comparison) = &serviced.comparison {
        text.push_str(&compared(comparison, unit));
    }
    if let Some(fouling) = serviced.fouling {
        text.push_str(&split(fouling, unit));
    }
    if let Some(saw_tooth) = serviced.saw_tooth.filter(|teeth| teeth.cleanings > 1) {
        text.push_str(&teeth(saw_tooth, unit));
    }
    text
}

/// Why an order was refused.
pub(super) fn refused(problems: &[Problem]) -> String {
    let lines: Vec<String> = problems.iter().map(line).collect();
    format!("refused, nothing was changed. {}", lines.join("; "))
}

/// Field and value, as far as they are known, and the way out.
fn line(problem: &Problem) -> String {
    let place = format!("{} {}", problem.field, problem.value);
    match place.trim() {
        "" => problem.way_out.clone(),
        place => format!("{place}: {}", problem.way_out),
    }
}

fn stretches(serviced: &Serviced) -> String {
    match &serviced.stretches[..] {
        [] => "the history already begins later, so that no correction changes".to_owned(),
        [(_, number)] => format!("stretch {number} begins"),
        many => format!("new stretches begin for {} channels", many.len()),
    }
}

fn compared(comparison: &Comparison, unit: &str) -> String {
    let found: Vec<String> = comparison
        .points
        .iter()
        .map(|point| readable(point.error))
        .collect();
    let verdict = if comparison.satisfactory {
        "the model held"
    } else {
        "the model did not hold; look for a step, a wrong reference value or a wrong time"
    };
    format!(
        " As found, the error was {} {unit}; expected {} ± {} {unit}: En {}, {verdict}.",
        found.join(", "),
        readable(comparison.predicted_error),
        readable(comparison.predicted_uncertainty),
        readable(comparison.en),
    )
}

fn split(fouling: Fouling, unit: &str) -> String {
    let part = format!(
        " Fouling made {} {unit} of the error",
        readable(fouling.fouling_error)
    );
    match fouling.drift_error {
        Some(drift) => format!("{part}, drift {} {unit}.", readable(drift)),
        None => format!("{part}."),
    }
}

fn teeth(saw_tooth: SawTooth, unit: &str) -> String {
    let apart = saw_tooth
        .mean_interval_days
        .map_or_else(String::new, |days| format!(", {} d apart", readable(days)));
    let fouling = saw_tooth.mean_fouling.map_or_else(String::new, |mean| {
        format!(", mean fouling {} {unit}", readable(mean))
    });
    format!(" {} cleanings so far{apart}{fouling}.", saw_tooth.cleanings)
}
