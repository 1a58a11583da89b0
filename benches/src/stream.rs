//! An irregular stream of rows without end, cheap enough not to show in the times.

/// Rows of one round.
const ROUND: usize = 1 << 14;

/// Rows (time in nanoseconds since 1970, error).
pub struct Stream {
    steps: Vec<i64>,
    errors: Vec<f64>,
    place: usize,
    time: i64,
}

impl Default for Stream {
    fn default() -> Self {
        // A linear congruential generator will do for irregular times and noise.
        let mut state = 0x2545_f491_4f6c_dd1d_u64;
        let mut uniform = move || {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            (state >> 11) as f64 / (1_u64 << 53) as f64
        };
        let steps = (0..ROUND)
            .map(|_| (-(1.0 - uniform()).ln() * 60e9) as i64 + 1)
            .collect();
        let errors = (0..ROUND)
            .map(|place| {
                let noise = (0..12).map(|_| uniform()).sum::<f64>() - 6.0;
                20.0 + 0.3 * (place as f64 * std::f64::consts::TAU / ROUND as f64).sin()
                    + 0.1 * noise
            })
            .collect();
        Self {
            steps,
            errors,
            place: 0,
            time: 1_700_000_000_000_000_000,
        }
    }
}

impl Iterator for Stream {
    type Item = (i64, f64);

    fn next(&mut self) -> Option<(i64, f64)> {
        self.place = (self.place + 1) % ROUND;
        self.time += self.steps[self.place];
        Some((self.time, self.errors[self.place]))
    }
}
