//! What the tests of the fit share: double-double numbers and a batch least squares made of them.

#![allow(dead_code, reason = "each test uses its own part of this")]

pub(crate) mod batch;
pub(crate) mod double;

/// Property tests invent the same cases in every run, so that a failure is a change's and not the
/// day's.
pub(crate) fn seeded() -> proptest::test_runner::Config {
    proptest::test_runner::Config {
        rng_seed: proptest::test_runner::RngSeed::Fixed(20_260_103),
        failure_persistence: None,
        ..proptest::test_runner::Config::default()
    }
}
