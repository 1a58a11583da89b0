//! The daemon's configuration for a scenario, as a TOML text that its operator could have written.

use crate::instrument::PLANT;
use crate::scenario::{Kit, Scenario};
use crate::truth::{GAP_AFTER_HOURS, STALE_AFTER_HOURS};
use std::fmt::Write;

/// What a configuration needs to know beside the scenario.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Surroundings {
    /// The broker.
    pub broker_url: String,
    /// Where the record goes.
    pub record_folder: String,
    /// Longest time between two commits of the record, as the configuration writes it.
    pub commit: &'static str,
    /// Channel of which every corrected value is published as well.
    pub corrected: Option<&'static str>,
}

impl Default for Surroundings {
    fn default() -> Self {
        Self {
            broker_url: "mqtt://127.0.0.1:1883".to_owned(),
            record_folder: "record".to_owned(),
            commit: "1 s",
            corrected: None,
        }
    }
}

/// The configuration for a run of `scenario` laid out over `days` days.
#[must_use]
pub fn text(scenario: &Scenario, days: f64, surroundings: &Surroundings) -> String {
    let mut toml = format!(
        "# Configuration for the invented plant Harrow Mere, scenario {:?}.\n\
         # The readings bear times of their own, so now is the newest reading's time.\n\n\
         [node]\nname = \"{PLANT}\"\ntime = \"readings\"\n\n\
         [broker]\nurl = {}\n\n\
         [record]\nfolder = {}\ncommit = {}\n",
        scenario.name,
        quoted(&surroundings.broker_url),
        quoted(&surroundings.record_folder),
        quoted(surroundings.commit),
    );
    for kit in &scenario.kits {
        reference(&mut toml, kit);
        channel(&mut toml, kit, days);
        if surroundings.corrected == Some(kit.instrument.name) {
            toml.push_str("corrected_values = true\n");
        }
    }
    toml
}

/// The `[[reference]]` of one sensor.
fn reference(toml: &mut String, kit: &Kit) {
    let instrument = &kit.instrument;
    let (each, common) = (
        short(instrument.reference_each),
        short(instrument.reference_common),
    );
    let _ = write!(
        toml,
        "\n[[reference]]\nname = {}\ntopic = {}\nvalue = \"/value\"\ntime = \"/at\"\n\
         uncertainty = {{ each = {each}, common = {common} }}\n\
         stale_after = \"{STALE_AFTER_HOURS} h\"\n",
        quoted(&instrument.reference()),
        quoted(&instrument.reference_topic()),
    );
}

/// The `[[channel]]` of one sensor.
fn channel(toml: &mut String, kit: &Kit, days: f64) {
    let instrument = &kit.instrument;
    let (low, high) = instrument.span;
    let _ = write!(
        toml,
        "\n[[channel]]\nname = {name}\nunit = {unit}\n\
         indication = {{ topic = {topic}, value = \"/value\", \
         time = \"/at\", sequence = \"/seq\" }}\n\
         reference = {reference}\nlateness = \"1 min\"\nmax_gap = \"1 h\"\n\
         window = \"{window} d\"\nresolution = {resolution}\nnoise = {noise}\n\
         max_permissible_error = {limit}\nmax_correction = {most}\n",
        name = quoted(instrument.name),
        unit = quoted(instrument.unit),
        topic = quoted(&instrument.topic()),
        reference = quoted(&instrument.reference()),
        window = instrument.window_days,
        resolution = short(instrument.resolution()),
        noise = instrument.noise,
        limit = instrument.max_permissible_error,
        // Planted errors are let run past their limit, to see the correction follow them.
        most = short(20.0 * instrument.max_permissible_error),
    );
    if let Some(rate) = kit.permitted_rate(days) {
        let _ = writeln!(toml, "max_drift_rate = {}", short(rate));
    }
    let _ = write!(
        toml,
        "screening = {{ range = [{low:?}, {high:?}] }}\n\
         alarms = {{ gap_after = \"{GAP_AFTER_HOURS} h\" }}\n",
    );
}

/// A float with at most six significant digits, so that products of table values read as a person
/// would write them.
fn short(value: f64) -> f64 {
    format!("{value:.5e}").parse().unwrap_or(value)
}

/// A TOML basic string.
fn quoted(text: &str) -> String {
    let escaped = text.replace('\\', "\\\\").replace('"', "\\\"");
    format!("\"{escaped}\"")
}
