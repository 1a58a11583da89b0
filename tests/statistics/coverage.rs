//! Is U honest? How often ê ± U holds the true systematic error at the newest pair, in noise of
//! every kind, sampled in every way, with the degree fixed and with the degree free. Cases and
//! bounds are those of `plant score --study coverage`.

use crate::studies::assert_holds;
use holdtrue_simulators::score::study::Study;

/// Stretches per drift in white noise, looked at 56 times each …
const WHITE_RUNS: u64 = 400;
/// … and in correlated noise.
const CORRELATED_RUNS: u64 = 100;

#[test]
fn fixed_degrees_cover_in_every_kind_of_noise_and_pattern() {
    for pattern in ["even", "lognormal", "gappy"] {
        let chosen = |name: &str| name.starts_with("fixed") && name.ends_with(pattern);
        assert_holds(Study::Coverage, 6, chosen, None);
    }
}

/// Noise is correlated from pair to pair here; where that leaves next to nothing, the share is
/// reported without a bound.
#[test]
fn fixed_degrees_cover_with_few_pairs() {
    let chosen = |name: &str| name.starts_with("fixed") && name.ends_with("pairs");
    assert_holds(Study::Coverage, 18, chosen, None);
}

#[test]
fn a_free_degree_covers_from_the_onset_of_a_drift_on() {
    let chosen = |name: &str| name.starts_with("free, white,");
    assert_holds(Study::Coverage, 8, chosen, Some(WHITE_RUNS));
}

#[test]
fn a_free_degree_covers_in_correlated_noise() {
    for kind in ["free, AR(1) 0.8,", "free, white + AR(1) 0.95,"] {
        let chosen = |name: &str| name.starts_with(kind);
        assert_holds(Study::Coverage, 8, chosen, Some(CORRELATED_RUNS));
    }
}
