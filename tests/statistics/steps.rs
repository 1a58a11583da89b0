//! Steps of a sensor: how seldom noise and drift are called one, and how soon and where a real one
//! is found. A sample of `plant score --study steps`: with so few readings a rate of false steps is
//! held to what a true rate at its limit keeps in 95 of 100 samples; ten times the limit breaks
//! 51 200 readings nine times in ten, and 25 600 about three times in four. Real steps take all
//! their runs: of 41, the third slowest would decide.

use crate::studies::assert_holds;
use holdtrue_simulators::score::study::Study;

#[test]
fn noise_is_no_step() {
    assert_holds(Study::Steps, 6, |name| name.starts_with("noise,"), Some(20));
}

#[test]
fn drift_is_no_step_neither_at_its_onset_nor_in_the_first_window() {
    assert_holds(
        Study::Steps,
        10,
        |name| name.starts_with("drift,"),
        Some(10),
    );
}

#[test]
fn a_beginning_is_no_step() {
    let chosen = |name: &str| name.starts_with("beginning,");
    assert_holds(Study::Steps, 6, chosen, Some(100));
}

#[test]
fn a_step_of_three_sigma_in_white_noise_is_found_soon_and_at_its_place() {
    let chosen = |name: &str| name == "step, 3σ, white";
    let report = assert_holds(Study::Steps, 1, chosen, Some(400));
    let early = report
        .measures
        .iter()
        .find(|measure| measure.figure.starts_with("false steps before"));
    assert!(early.is_some_and(|early| early.value <= 0.0), "{early:?}");
}

#[test]
fn a_step_of_six_sigma_in_correlated_noise_is_found() {
    let chosen = |name: &str| name == "step, 6σ, AR(1) 0.8";
    assert_holds(Study::Steps, 1, chosen, Some(400));
}
