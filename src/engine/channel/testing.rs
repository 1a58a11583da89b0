//! Setups for the stations' unit tests.

use crate::setup::{
    AlarmSetup, ChannelSetup, Criterion, DecisionRule, FitSetup, PairNoise, PublishSetup,
    ReferenceId, ScreeningSetup, WindowLength,
};
use crate::time::Duration;

/// A channel with nothing declared that is not needed.
pub(crate) fn channel_setup() -> ChannelSetup {
    ChannelSetup {
        name: "hall/ph-1".to_owned(),
        unit: "pH".to_owned(),
        reference: ReferenceId(0),
        lag: Duration::ZERO,
        lateness: Duration::ZERO,
        max_gap: Duration::from_seconds(600),
        fit: FitSetup {
            window: WindowLength::Pairs(64),
            segments: 64,
            max_degree: 2,
            forced_degree: None,
            criterion: Criterion::Bic,
            max_span_degree: None,
            influences: 0,
            noise: PairNoise::default(),
        },
        screening: ScreeningSetup {
            enabled: true,
            range: None,
            gate: 5.0,
            lock_out_after: 5,
            stuck: None,
            max_rate: None,
        },
        max_permissible_error: None,
        decision_rule: DecisionRule::GuardBand { multiple: 1.0 },
        service_horizon: Duration::from_seconds(14 * 86_400),
        resolution: 0.0,
        noise: 0.0,
        max_drift_rate: None,
        coverage: 0.95,
        publish: PublishSetup {
            step: 0.5,
            max_age: Duration::from_seconds(3600),
        },
        alarms: AlarmSetup {
            delay: 3,
            deadband: 1.0,
            gap_after: None,
        },
        corrected_values: false,
    }
}
