//! Rare events in a sample: what a limit on their true rate lets a sample of some size show.

/// Readings from which on a rate is held to its limit as it stands.
pub const ENOUGH: f64 = 3e6;
/// A smaller sample is held to what a true rate at the limit keeps with this probability.
const KEPT: f64 = 0.95;

/// The rate per 100 000 readings that a sample may show where `rate` is promised: the smallest
/// number of events that a Poisson count at the promised rate does not exceed in 95 of 100 samples.
#[must_use]
pub fn permitted(rate: f64, readings: f64) -> f64 {
    if readings >= ENOUGH {
        return rate;
    }
    let mean = rate * readings * 1e-5;
    let mut probability = libm::exp(-mean);
    let mut kept = probability;
    let mut events = 0_u32;
    while kept < KEPT {
        events += 1;
        probability *= mean / f64::from(events);
        kept += probability;
    }
    f64::from(events) / readings * 1e5
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Poisson with mean 0.256: 0.774, 0.973; 0.512: 0.599, 0.906, 0.985; 1.536: 0.801 up to two,
    /// 0.929, 0.980.
    #[test]
    fn small_samples_are_held_to_what_the_promised_rate_keeps() {
        for (rate, readings, events) in [
            (1.0, 25_600.0, 1.0),
            (1.0, 51_200.0, 2.0),
            (3.0, 51_200.0, 4.0),
            (1.0, 3e6, 30.0),
            (3.0, 6e6, 180.0),
        ] {
            let most = permitted(rate, readings) * readings * 1e-5;
            assert!((most - events).abs() < 1e-9, "{rate} {readings}: {most}");
        }
    }
}
