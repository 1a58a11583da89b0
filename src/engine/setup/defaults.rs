//! What holds where a configuration says nothing.

use super::{
    AlarmSetup, ChannelSetup, Criterion, DecisionRule, FitSetup, PairNoise, PublishSetup,
    ReferenceId, ReferenceKind, ReferenceSetup, ScreeningSetup, Stamped, WindowLength,
};
use crate::time::Duration;

const DAY: i64 = 86_400;

impl ChannelSetup {
    /// A channel with every setting at its default: nothing is declared of the sensor, and nothing
    /// limits it.
    #[must_use]
    pub fn new(name: impl Into<String>, unit: impl Into<String>, reference: ReferenceId) -> Self {
        Self {
            name: name.into(),
            unit: unit.into(),
            reference,
            influences: Vec::new(),
            lag: Duration::ZERO,
            lateness: Duration::from_seconds(10),
            max_gap: Duration::from_seconds(15 * 60),
            fit: FitSetup::default(),
            screening: ScreeningSetup::default(),
            // One in 16 000 by chance, at each signal of a chart that signals once in 100 000
            // readings.
            steps: Some(4.0),
            max_permissible_error: None,
            decision_rule: DecisionRule::default(),
            // Two weekly rounds of a technician (common practice).
            service_horizon: Duration::from_seconds(14 * DAY),
            resolution: 0.0,
            noise: 0.0,
            max_drift_rate: None,
            max_correction: None,
            max_correction_rate: None,
            hold_limit: None,
            coverage: 0.95,
            publish: PublishSetup::default(),
            alarms: AlarmSetup::default(),
            corrected_values: false,
            monitor_only: false,
        }
    }
}

impl ReferenceSetup {
    /// A reference with every setting at its default: exact, never stale, without a certificate.
    #[must_use]
    pub fn new(name: impl Into<String>, kind: ReferenceKind) -> Self {
        Self {
            name: name.into(),
            kind,
            uncertainty_each: 0.0,
            uncertainty_common: 0.0,
            certificate: None,
            expires: None,
            // Time to send a reference away (common practice).
            expiry_notice: Duration::from_seconds(30 * DAY),
            stale_after: None,
            stands_for: Duration::ZERO,
            stamped: Stamped::End,
        }
    }
}

impl Default for FitSetup {
    fn default() -> Self {
        Self {
            window: WindowLength::Time(Duration::from_seconds(30 * DAY)),
            segments: 64,
            max_degree: 2,
            forced_degree: None,
            criterion: Criterion::Bic,
            max_span_degree: None,
            influences: 0,
            noise: PairNoise::default(),
        }
    }
}

/// White noise fails a gate of five robust standard deviations once in two million (common
/// practice: 3.5 to 5).
impl Default for ScreeningSetup {
    fn default() -> Self {
        Self {
            enabled: true,
            range: None,
            gate: 5.0,
            lock_out_after: 5,
            stuck: None,
            max_rate: None,
        }
    }
}

/// Guard band w = U, the cautious one.
impl Default for DecisionRule {
    fn default() -> Self {
        Self::GuardBand { multiple: 1.0 }
    }
}

impl Default for PublishSetup {
    fn default() -> Self {
        Self {
            step: 0.25,
            max_age: Duration::from_seconds(DAY),
            dead_zone: 2.0,
        }
    }
}

/// Three reference cycles, one standard uncertainty (common practice).
impl Default for AlarmSetup {
    fn default() -> Self {
        Self {
            delay: 3,
            deadband: 1.0,
            gap_after: None,
        }
    }
}
