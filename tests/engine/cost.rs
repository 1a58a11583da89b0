//! What a pair costs: judging the whole window at every pair of a dense stream would cost more than
//! all else together, and say nothing new.

use crate::support::{Noise, at, channel, constant, engine, indication, node, reference};
use holdtrue_engine::fit::{Fit, Row};
use holdtrue_engine::setup::Clock;
use std::time::Instant;

/// A pair of a steady, dense stream costs clearly less than one judgement: both timed here, in one
/// run on one machine.
#[test]
fn a_dense_stream_is_not_judged_at_every_pair() {
    let pairs = 8000_u32;
    let mut noise = Noise::new(71, 0.0);
    let errors: Vec<f64> = (0..pairs).map(|_| 10.0 + noise.draw()).collect();
    let mut setup = channel("a", 0);
    // With both declared, every reading could be stuck.
    setup.noise = 1.0;
    setup.resolution = 0.1;
    let mut fit = Fit::new(setup.fit);
    let mut engine = engine(node(
        Clock::Readings,
        vec![reference("zero", constant(0.0))],
        vec![setup],
    ));
    let mut outputs = Vec::new();
    let begin = Instant::now();
    for (second, error) in (0..).zip(&errors) {
        engine.step(&indication(0, f64::from(second), *error), &mut outputs);
    }
    let per_pair = begin.elapsed().as_secs_f64() / f64::from(pairs);

    for (second, &error) in (0..).zip(&errors) {
        fit.insert(Row {
            time: at(f64::from(second)),
            error,
            weight: 1.0,
            x: 0.0,
            influences: [0.0; 2],
        });
    }
    let rounds = 500_u32;
    let begin = Instant::now();
    for _ in 0..rounds {
        assert!(std::hint::black_box(&fit).published().is_some());
    }
    let per_judgement = begin.elapsed().as_secs_f64() / f64::from(rounds);
    println!(
        "{:.2} us a pair, {:.2} us a judgement",
        1e6 * per_pair,
        1e6 * per_judgement
    );
    assert!(
        per_pair < 0.7 * per_judgement,
        "{per_pair} s a pair, {per_judgement} s a judgement"
    );
}
