//! Second station: what may enter the fit.
//!
//! The gate looks at innovations (how far a pair is from what the fit expected), never at raw
//! values, and measures them with a robust scale. Expected is zero, so the scale is 1.4826 · median
//! |innovation|: about zero, not about the median, so that a fit lagging behind a steady drift
//! widens the gate instead of throwing the drift away. Rejected pairs count in the scale, so that a
//! sensor whose noise has grown is not shut out.
//!
//! ```text
//!             `lock_out_after` rejections of one sign in a row
//!   Watching ──────────────────────────────────────────────────▶ Locked out (lets everything in,
//!            ◀──────────────────────────────────────────────────              learns anew)
//!             as many fitting innovations in a row, or the window holds nothing from before
//! ```

use crate::cached::Cached;
use crate::median::upper_median;
use crate::setup::ChannelSetup;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// 1/Φ⁻¹(¾): makes the median absolute deviation of a normal variable its standard deviation (check
/// value V26).
pub(crate) const MAD_TO_SD: f64 = 1.482_602_218_505_602;
/// Innovations that the scale looks back on.
const RECENT: usize = 512;
/// Fewest innovations that make a scale.
const ENOUGH: usize = 16;

/// The scale is found anew when 1/this of what it looks back on has changed; see [`Least`].
const CHANGED_PART: usize = 8;

/// The residual standard deviation of the fit may widen the gate to so many times the robust scale.
/// In strongly correlated noise the latest innovations can all be small for a while; the whole
/// window knows better. Bounded, since what slipped in before there was a scale inflates it.
const RESIDUAL_REACH: f64 = 2.0;

/// The state of the station.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Screen {
    noise: Noise,
    /// Rejections in a row, negative for negative innovations.
    run: i64,
    locked: Option<Locked>,
}

/// What is known of the noise.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Noise {
    /// Latest standardised innovations; a ring once full.
    recent: Vec<f64>,
    /// Where the ring goes on.
    place: usize,
    #[serde(skip)]
    least: Cached<Least>,
}

/// What the median of the magnitudes can't fall below for a while. One change of the ring moves the
/// median by at most one place in their order, so the magnitude that stands so many places below it
/// bounds it for as many changes; nearly every pair passes by this bound alone, and a median need
/// not be found for it. No verdict depends on when the bound was found.
#[derive(Clone, Copy, Debug)]
struct Least {
    magnitude: f64,
    /// For so many changes more.
    holds_for: usize,
}

/// The screen has stopped rejecting.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
struct Locked {
    /// Phenomenon time of the pair at which it did.
    since: Timestamp,
    /// Fitting innovations in a row since then.
    fits: u32,
    /// What was known of the noise until then.
    noise: Noise,
}

/// What the screen says of a pair.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Verdict {
    /// It enters.
    Pass,
    /// It does not: |innovation| and the threshold it exceeds, both in the channel's unit.
    Reject { value: f64, threshold: f64 },
    /// It enters because the screen has just locked out.
    LocksOut { value: f64, threshold: f64 },
}

/// How far a pair lies from what the fit expects.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Innovation {
    /// Phenomenon time of the pair.
    pub(crate) time: Timestamp,
    /// Error minus expected error.
    pub(crate) value: f64,
    /// √(1/weight + leverage): its standard deviation in units of a full row's.
    pub(crate) spread: f64,
    /// Residual standard deviation of the fit.
    pub(crate) residual_sd: f64,
}

impl Screen {
    /// Whether it has stopped rejecting.
    pub(crate) fn is_locked_out(&self) -> bool {
        self.locked.is_some()
    }

    /// Judges a pair. `window_from`: oldest pair in the window; wanted while locked out.
    pub(crate) fn judge(
        &mut self,
        innovation: Innovation,
        window_from: Option<Timestamp>,
        setup: &ChannelSetup,
    ) -> Verdict {
        let standardised = innovation.value / innovation.spread;
        let verdict = if self.locked.is_some() {
            self.noise.learn(standardised);
            self.try_unlock(standardised, window_from, setup);
            Verdict::Pass
        } else {
            let verdict = self.gate(innovation, setup);
            self.noise.learn(standardised);
            verdict
        };
        if let Verdict::LocksOut { .. } = verdict {
            *self = Self {
                locked: Some(Locked {
                    since: innovation.time,
                    fits: 0,
                    noise: std::mem::take(&mut self.noise),
                }),
                ..Self::default()
            };
        }
        verdict
    }

    /// A screen that watches, with the noise as this one knows it without the last `latest`
    /// innovations, which a step pulled away. If it has locked out, what it knew before, without
    /// those of them that came until then.
    pub(crate) fn carried_on(&self, latest: usize) -> Self {
        let (mut noise, latest) = match &self.locked {
            Some(locked) => {
                let since = self.noise.recent.len();
                (locked.noise.clone(), latest.saturating_sub(since))
            }
            None => (self.noise.clone(), latest),
        };
        noise.forget(latest);
        Self {
            noise,
            ..Self::default()
        }
    }

    /// Forgets the latest innovations, those of pairs of these times, which were struck; with them
    /// goes a lock-out that they brought about.
    pub(crate) fn forget_latest(&mut self, times: &[Timestamp]) {
        let oldest = times.iter().min();
        match &self.locked {
            Some(locked) if Some(&locked.since) >= oldest => *self = self.carried_on(times.len()),
            _ => {
                self.noise.forget(times.len());
                self.run = 0;
            }
        }
    }

    fn gate(&mut self, innovation: Innovation, setup: &ChannelSetup) -> Verdict {
        if self.noise.least_magnitude().is_some_and(|least| {
            let sure = setup.screening.gate * (MAD_TO_SD * least) * innovation.spread;
            least > 0.0 && innovation.value.abs() <= sure
        }) {
            self.run = 0;
            return Verdict::Pass;
        }
        self.gate_by_scale(innovation, setup)
    }

    fn gate_by_scale(&mut self, innovation: Innovation, setup: &ChannelSetup) -> Verdict {
        let Some(robust) = self.scale(0.0, setup) else {
            return Verdict::Pass;
        };
        let scale = innovation
            .residual_sd
            .clamp(robust, RESIDUAL_REACH * robust);
        let threshold = setup.screening.gate * scale * innovation.spread;
        let value = innovation.value.abs();
        if value <= threshold {
            self.run = 0;
            return Verdict::Pass;
        }
        let sign: i64 = if innovation.value > 0.0 { 1 } else { -1 };
        self.run = if self.run.signum() == sign {
            self.run + sign
        } else {
            sign
        };
        if self.run.unsigned_abs() >= u64::from(setup.screening.lock_out_after.max(1)) {
            return Verdict::LocksOut { value, threshold };
        }
        Verdict::Reject { value, threshold }
    }

    /// Counts fitting innovations against the noise alone (the scale about the median): as long as
    /// the fit is off by more than the noise allows, they do not fit.
    fn try_unlock(
        &mut self,
        standardised: f64,
        window_from: Option<Timestamp>,
        setup: &ChannelSetup,
    ) {
        let centre = upper_median(&mut self.noise.recent.clone());
        let scale = self.scale(centre, setup);
        let Some(locked) = &mut self.locked else {
            return;
        };
        let fits = scale.is_some_and(|scale| standardised.abs() <= setup.screening.gate * scale);
        locked.fits = if fits { locked.fits + 1 } else { 0 };
        let forgotten = window_from.is_some_and(|from| from > locked.since);
        if locked.fits >= setup.screening.lock_out_after.max(1) || forgotten {
            self.locked = None;
            self.run = 0;
        }
    }

    /// Robust scale of the recent innovations about `centre`, floored by what can't be smaller: the
    /// resolution's q/√12 (GUM F.2.2.1) and the declared noise. `None` while there are too few, or
    /// where they are all the same and nothing is declared: then there is no telling.
    fn scale(&self, centre: f64, setup: &ChannelSetup) -> Option<f64> {
        if self.noise.recent.len() < ENOUGH {
            return None;
        }
        let recent = &self.noise.recent;
        let mut distances: Vec<f64> = recent.iter().map(|z| (z - centre).abs()).collect();
        let robust = MAD_TO_SD * upper_median(&mut distances);
        let scale = robust
            .max(setup.resolution / 12.0_f64.sqrt())
            .max(setup.noise);
        (scale > 0.0).then_some(scale)
    }
}

impl Noise {
    fn learn(&mut self, standardised: f64) {
        if self.recent.len() < RECENT {
            self.recent.push(standardised);
        } else {
            self.recent[self.place] = standardised;
            self.place = (self.place + 1) % RECENT;
        }
        if let Some(least) = self.least.get_mut() {
            match least.holds_for.checked_sub(1) {
                Some(left) => least.holds_for = left,
                None => self.least.forget(),
            }
        }
    }

    /// What the upper median of the magnitudes is no less than; `None` while there are too few.
    fn least_magnitude(&self) -> Option<f64> {
        if self.recent.len() < ENOUGH {
            return None;
        }
        let least = self.least.get_or_find(|| {
            let mut magnitudes: Vec<f64> = self.recent.iter().map(|z| z.abs()).collect();
            let holds_for = magnitudes.len() / CHANGED_PART;
            let place = magnitudes.len() / 2 - holds_for;
            Least {
                magnitude: *magnitudes.select_nth_unstable_by(place, f64::total_cmp).1,
                holds_for,
            }
        });
        Some(least.magnitude)
    }

    /// Forgets the latest so many.
    fn forget(&mut self, latest: usize) {
        let kept = self.recent.len().saturating_sub(latest);
        self.recent.rotate_left(self.place);
        self.recent.truncate(kept);
        self.place = 0;
        self.least.forget();
    }
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;
    use crate::channel::testing::channel_setup;
    use rand_chacha::ChaCha8Rng;
    use rand_chacha::rand_core::SeedableRng as _;
    use rand_distr::{Distribution as _, StandardNormal};

    fn setup() -> ChannelSetup {
        let mut setup = channel_setup();
        setup.screening.gate = 5.0;
        setup.screening.lock_out_after = 5;
        setup
    }

    fn innovation(value: f64) -> Innovation {
        Innovation {
            time: Timestamp(0),
            value,
            spread: 1.0,
            residual_sd: 0.0,
        }
    }

    fn judge(screen: &mut Screen, value: f64) -> Verdict {
        screen.judge(innovation(value), None, &setup())
    }

    /// A screen that has seen `count` innovations of ±1.
    fn seasoned(count: i32) -> Screen {
        let mut screen = Screen::default();
        for index in 0..count {
            let value = if index % 2 == 0 { 1.0 } else { -1.0 };
            assert_eq!(judge(&mut screen, value), Verdict::Pass);
        }
        screen
    }

    /// Check value V26: 1/Φ⁻¹(¾).
    #[test]
    fn the_constant_of_the_mad_is_the_inverse_quartile() {
        assert!((MAD_TO_SD * crate::quantile::normal(0.75) - 1.0).abs() < 1e-15);
    }

    /// Check value V27: median 10.1, MAD 0.1; 14.0 scores 26.3 (Hampel).
    #[test]
    fn hampel_score() {
        let values = [10.1, 10.2, 9.9, 10.0, 10.1, 14.0, 10.2];
        let centre = upper_median(&mut values.clone());
        assert_eq!(centre, 10.1);
        let mut distances = values.map(|value| (value - centre).abs());
        let scale = MAD_TO_SD * upper_median(&mut distances);
        assert!((scale / MAD_TO_SD - 0.1).abs() < 1e-12);
        assert!(((14.0 - centre) / scale - 26.3).abs() < 0.05);
        assert!((14.0 - centre) / scale > 3.0);
    }

    #[test]
    fn nothing_is_rejected_before_there_is_a_scale() {
        let mut screen = seasoned(15);
        assert_eq!(judge(&mut screen, 1e6), Verdict::Pass);
        assert!(matches!(judge(&mut screen, 1e6), Verdict::Reject { .. }));
    }

    #[test]
    fn an_outlier_is_rejected_with_value_and_threshold() {
        let mut screen = seasoned(64);
        let Verdict::Reject { value, threshold } = judge(&mut screen, -9.0) else {
            panic!("an outlier of nine scales must not pass");
        };
        assert_eq!(value, 9.0);
        assert!((threshold - 5.0 * MAD_TO_SD).abs() < 1e-12);
        assert_eq!(judge(&mut screen, 1.0), Verdict::Pass);
    }

    /// The bound that saves the median changes no verdict, through quiet and noisy times, outliers,
    /// a step and zeros.
    #[test]
    fn what_passes_by_the_bound_passes_by_the_scale() {
        let (mut rejected, mut bounded) = (0, 0);
        for seed in 0..20 {
            let mut source = ChaCha8Rng::seed_from_u64(4000 + seed);
            let mut screen = Screen::default();
            for index in 0..3000 {
                let z: f64 = StandardNormal.sample(&mut source);
                let value = match index {
                    0..40 | 2000..2700 => 0.0,
                    1000..1400 => 6.0 * z,
                    1600..1700 => 20.0 + z,
                    _ if index % 97 == 0 => 8.0 * z,
                    _ => z,
                };
                let innovation = innovation(value);
                if !screen.is_locked_out() {
                    let (mut by_bound, mut by_scale) = (screen.clone(), screen.clone());
                    let expected = by_scale.gate_by_scale(innovation, &setup());
                    assert_eq!(
                        by_bound.gate(innovation, &setup()),
                        expected,
                        "{seed}: {index}"
                    );
                    assert_eq!(by_bound, by_scale);
                    bounded += u32::from(by_bound.noise.least.get_mut().is_some());
                }
                let verdict = screen.judge(innovation, None, &setup());
                rejected += u32::from(matches!(verdict, Verdict::Reject { .. }));
            }
        }
        assert!(rejected > 200 && bounded > 40_000, "{rejected}, {bounded}");
    }

    #[test]
    fn leverage_and_weight_widen_the_threshold() {
        let mut screen = seasoned(64);
        let innovation = Innovation {
            time: Timestamp(0),
            value: 9.0,
            spread: 2.0,
            residual_sd: 0.0,
        };
        assert_eq!(screen.judge(innovation, None, &setup()), Verdict::Pass);
    }

    #[test]
    fn rejections_of_both_signs_never_lock_out_and_the_scale_follows_the_noise() {
        let mut screen = seasoned(128);
        let mut rejected = 0;
        for index in 0..300 {
            let value = if index % 2 == 0 { 20.0 } else { -20.0 };
            if matches!(judge(&mut screen, value), Verdict::Reject { .. }) {
                rejected += 1;
            }
            assert!(!screen.is_locked_out());
        }
        assert!((120..=135).contains(&rejected), "{rejected}");
    }

    #[test]
    fn five_of_one_sign_lock_out_and_fitting_ones_unlock() {
        let mut screen = seasoned(64);
        for _ in 0..4 {
            assert!(matches!(judge(&mut screen, 30.0), Verdict::Reject { .. }));
        }
        assert!(matches!(judge(&mut screen, 30.0), Verdict::LocksOut { .. }));
        // The fit has not followed yet: far off, with the old noise.
        for index in 0..40 {
            let noise = if index % 2 == 0 { 1.0 } else { -1.0 };
            assert_eq!(judge(&mut screen, 28.0 + noise), Verdict::Pass);
        }
        assert!(screen.is_locked_out());
        // Now it has.
        for index in 0..5 {
            assert!(screen.is_locked_out(), "{index}");
            judge(&mut screen, if index % 2 == 0 { 1.0 } else { -1.0 });
        }
        assert!(!screen.is_locked_out());
    }

    #[test]
    fn a_window_without_anything_from_before_unlocks() {
        let mut screen = seasoned(64);
        for _ in 0..5 {
            judge(&mut screen, 30.0);
        }
        let later = Innovation {
            time: Timestamp(2),
            value: 30.0,
            spread: 1.0,
            residual_sd: 0.0,
        };
        screen.judge(later, Some(Timestamp(0)), &setup());
        assert!(screen.is_locked_out());
        screen.judge(later, Some(Timestamp(1)), &setup());
        assert!(!screen.is_locked_out());
    }

    #[test]
    fn carried_on_it_knows_the_noise_from_before_the_step() {
        let mut screen = seasoned(64);
        for _ in 0..3 {
            judge(&mut screen, 30.0);
        }
        assert_eq!(screen.carried_on(3), seasoned(64));
        for _ in 0..20 {
            judge(&mut screen, 30.0);
        }
        assert!(screen.is_locked_out());
        let carried = screen.carried_on(23);
        assert!(!carried.is_locked_out());
        assert_eq!(carried, seasoned(64));
    }

    /// A full ring has begun to overwrite its oldest.
    #[test]
    fn the_latest_of_a_full_ring_are_forgotten() {
        let mut noise = Noise::default();
        for value in 0..700 {
            noise.learn(f64::from(value));
        }
        noise.forget(10);
        let expected: Vec<f64> = (188..690).map(f64::from).collect();
        assert_eq!(noise.recent, expected);
        noise.forget(1000);
        assert!(noise.recent.is_empty());
    }

    #[test]
    fn a_stuck_sensor_without_declared_noise_is_not_shut_out() {
        let mut screen = Screen::default();
        for _ in 0..50 {
            assert_eq!(judge(&mut screen, 0.0), Verdict::Pass);
        }
        assert_eq!(judge(&mut screen, 0.5), Verdict::Pass);
    }

    #[test]
    fn resolution_and_noise_floor_the_scale() {
        let mut with_floor = setup();
        with_floor.resolution = 0.1;
        let mut screen = Screen::default();
        for _ in 0..50 {
            screen.judge(innovation(0.0), None, &with_floor);
        }
        let threshold = 5.0 * 0.1 / 12.0_f64.sqrt();
        assert_eq!(
            screen.judge(innovation(0.9 * threshold), None, &with_floor),
            Verdict::Pass
        );
        assert!(matches!(
            screen.judge(innovation(1.1 * threshold), None, &with_floor),
            Verdict::Reject { threshold: told, .. } if (told - threshold).abs() < 1e-15
        ));
    }
}
