//! Sums over one run: errors before and after correction, coverage, uncertainty. Errors are counted
//! in standard deviations of the sensor's noise, so that sensors of different size can be pooled.

use super::consumer::Applied;
use super::stream::Truth;
use serde::Serialize;

/// Sums of one kind of error.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize)]
pub struct Errors {
    /// How many.
    pub count: f64,
    /// Their sum.
    pub sum: f64,
    /// The sum of their squares.
    pub squares: f64,
}

impl Errors {
    fn add(&mut self, error: f64) {
        self.count += 1.0;
        self.sum += error;
        self.squares += error * error;
    }

    /// Adds another's sums.
    pub fn merge(&mut self, other: &Self) {
        self.count += other.count;
        self.sum += other.sum;
        self.squares += other.squares;
    }

    /// Their mean; `None` without any.
    #[must_use]
    pub fn mean(&self) -> Option<f64> {
        (self.count > 0.0).then(|| self.sum / self.count)
    }

    /// Their root mean square; `None` without any.
    #[must_use]
    pub fn rms(&self) -> Option<f64> {
        (self.count > 0.0).then(|| libm::sqrt(self.squares / self.count))
    }
}

/// All sums of one run.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize)]
pub struct Tally {
    /// Indications and reference values that the engine was given.
    pub readings: u64,
    /// Indication − true value, noise included, as a consumer without holdtrue sees it.
    pub seen_before: Errors,
    /// Indication + correction in force when it arrived − true value.
    pub seen_after: Errors,
    /// The systematic error.
    pub newest_before: Errors,
    /// The systematic error + the correction in force once the reading was taken in.
    pub newest_after: Errors,
    /// Standard uncertainty of the correction in force.
    pub uncertainty: Errors,
    /// Instants at which a document was in force …
    pub claimed: u64,
    /// … and its U held the systematic error that it left.
    pub covered: u64,
}

impl Tally {
    /// Takes an indication as a consumer does: with the document that was in force when it arrived.
    pub fn see(&mut self, truth: &Truth, applied: Option<Applied>, noise: f64) {
        if !truth.judged {
            return;
        }
        let before = truth.indication - truth.true_value;
        let correction = applied.map_or(0.0, |it| it.correction);
        self.seen_before.add(before / noise);
        self.seen_after.add((before + correction) / noise);
    }

    /// Takes the same instant once the engine has taken the reading in.
    pub fn judge(&mut self, truth: &Truth, applied: Option<Applied>, noise: f64) {
        if !truth.judged {
            return;
        }
        let correction = applied.map_or(0.0, |it| it.correction);
        let left = truth.systematic + correction;
        self.newest_before.add(truth.systematic / noise);
        self.newest_after.add(left / noise);
        if let Some(applied) = applied {
            self.claimed += 1;
            self.covered += u64::from(left.abs() <= applied.expanded);
            self.uncertainty.add(applied.u / noise);
        }
    }

    /// Adds another run's sums.
    pub fn merge(&mut self, other: &Self) {
        self.readings += other.readings;
        self.seen_before.merge(&other.seen_before);
        self.seen_after.merge(&other.seen_after);
        self.newest_before.merge(&other.newest_before);
        self.newest_after.merge(&other.newest_after);
        self.uncertainty.merge(&other.uncertainty);
        self.claimed += other.claimed;
        self.covered += other.covered;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn truth(systematic: f64, judged: bool) -> Truth {
        Truth {
            sensor: 0,
            day: 1.0,
            indication: 10.0 + systematic + 0.5,
            true_value: 10.0,
            systematic,
            influence: 0.0,
            judged,
        }
    }

    #[test]
    fn errors_are_counted_in_noise_and_broken_sensors_are_left_out() {
        let applied = Some(Applied {
            correction: -1.5,
            u: 0.25,
            expanded: 0.5,
        });
        let mut tally = Tally::default();
        tally.see(&truth(2.0, true), applied, 0.5);
        tally.judge(&truth(2.0, true), applied, 0.5);
        tally.judge(&truth(2.1, true), applied, 0.5);
        tally.judge(&truth(4.0, true), None, 0.5);
        tally.judge(&truth(9.0, false), applied, 0.5);
        assert_eq!(tally.seen_before.mean(), Some(5.0));
        assert_eq!(tally.seen_after.mean(), Some(2.0));
        assert_eq!((tally.claimed, tally.covered), (2, 1));
        let after = (1.0 + 1.44 + 64.0_f64) / 3.0;
        let rms = tally.newest_after.rms().unwrap_or_default();
        assert!((rms - libm::sqrt(after)).abs() < 1e-12, "{rms}");
        assert_eq!(tally.uncertainty.rms(), Some(0.5));
    }
}
