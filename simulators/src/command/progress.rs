//! Progress bars, on a terminal only.

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use std::io::IsTerminal;

/// A bar on standard error; hidden unless that is a terminal. Without a `length` it only counts.
#[must_use]
pub fn bar(length: Option<u64>, what: &str) -> ProgressBar {
    let target = if std::io::stderr().is_terminal() {
        ProgressDrawTarget::stderr()
    } else {
        ProgressDrawTarget::hidden()
    };
    let bar = ProgressBar::with_draw_target(length, target);
    let template = match length {
        Some(_) => format!("{{bar:40}} {{percent:>3}} %  {{human_pos}} {what}  {{eta}} left"),
        None => format!("{{spinner}} {{human_pos}} {what}  {{per_sec}}"),
    };
    if let Ok(style) = ProgressStyle::with_template(&template) {
        bar.set_style(style);
    }
    bar
}
