//! The regressors of span and influence terms: however far from zero they are, and wherever they
//! go, they cost no digits.

use holdtrue_engine::fit::Row;
use holdtrue_engine::fit::basis::Columns;
use holdtrue_engine::fit::window::{Cut, Window};
use holdtrue_engine::time::Timestamp;

const DAY: i64 = 86_400_000_000_000;
const START: i64 = 1_700_000_000_000_000_000;
/// Slope on x and on an influence quantity, and the error at x = 0, q = 0.
const SLOPE: f64 = -0.05;
const EFFECT: f64 = 0.02;
const ZERO: f64 = 0.25;

/// A window of 64 segments of 4 rows with errors exactly linear in x and q, after `rows` rows.
fn window(rows: u32, x_of: impl Fn(f64) -> f64, q_of: impl Fn(f64) -> f64) -> Window {
    let mut window = Window::new(Columns::new(1, 2, 1), Cut::rows(256, 64));
    for i in 0..rows {
        let at = f64::from(i);
        let (x, q) = (x_of(at), q_of(at));
        window.insert(&Row {
            time: Timestamp(START + i64::from(i) * DAY),
            error: ZERO + SLOPE * x + EFFECT * q,
            weight: 1.0,
            x,
            influences: [q, 0.0],
        });
    }
    window
}

/// Relative errors of the slopes on x and q, solved from all rows.
fn misses(window: &Window) -> [f64; 2] {
    let columns = window.columns();
    let solved = window
        .total()
        .solve(columns.count())
        .expect("independent columns");
    let slope = solved[columns.span_place(0)];
    // Slope at the newest instant is slope + rate·u, and the rate is none.
    assert!((solved[columns.span_place(1)] / SLOPE).abs() < 1e-8);
    let effect = solved[columns.influence_place(0)];
    [slope / SLOPE - 1.0, effect / EFFECT - 1.0].map(f64::abs)
}

fn wave(at: f64) -> f64 {
    (at * 0.37).sin()
}

/// Errors are about 5e4, so their last digit is 7e-12, and a slope over ±1 of the regressor can be
/// known to that: 1.5e-10 of it at best.
#[test]
fn a_level_of_a_million_costs_no_digits() {
    let window = window(1000, |at| 1e6 + wave(at), |at| 300.0 + wave(2.3 * at));
    let centre = window.centre();
    assert!((centre.x - 1e6).abs() < 1.0 && (centre.influences[0] - 300.0).abs() < 1.0);
    let [slope, effect] = misses(&window);
    assert!(slope < 1e-9 && effect < 3e-9, "{slope} {effect}");
}

/// The centre is the first rows', and stays: a coefficient means the same from document to
/// document. It follows where staying would cost digits.
#[test]
fn the_centre_stays_until_the_rows_are_far_off() {
    let near = |rows| window(rows, |at| 20.0 + wave(at) + 0.005 * at, |at| wave(2.3 * at));
    assert_eq!(near(40).centre(), near(3000).centre());
    let step = |at: f64| if at < 500.0 { 0.0 } else { 1e6 };
    let far = |rows| window(rows, |at| wave(at) + step(at), |at| wave(2.3 * at));
    assert!(far(500).centre().x.abs() < 1.0);
    let moved = far(1500);
    assert!((moved.centre().x - 1e6).abs() < 1.0, "{:?}", moved.centre());
    let [slope, effect] = misses(&moved);
    assert!(slope < 1e-9 && effect < 3e-9, "{slope} {effect}");
}

/// What a consumer makes of an indication after zero and span checks, given as (reference value,
/// indication): the fit of zero and span to the checks, applied as `SpanSide::Reference` says.
fn corrected(checks: &[(f64, f64)], indication: f64) -> f64 {
    let mut window = Window::new(Columns::new(0, 1, 0), Cut::rows(64, 64));
    for (day, &(reference, shown)) in (0..).zip(checks) {
        window.insert(&Row {
            time: Timestamp(START + day * DAY),
            error: shown - reference,
            weight: 1.0,
            x: reference,
            influences: [0.0; 2],
        });
    }
    let solved = window.total().solve(2).expect("two levels");
    let (zero, slope) = (solved[0] + window.level(), solved[1]);
    let distance = indication - window.centre().x;
    indication + (-zero - slope * distance) / (1.0 + slope)
}

/// Zero and span checks are pairs at two levels, and the fit makes of them what the prescribed
/// two-point drift corrections do.
#[test]
fn zero_and_span_checks_are_corrected_as_prescribed() {
    // 40 CFR 1065.672, example (from memory): before and after, reference gases 0 and 1800.
    let checks = [(0.0, 0.6), (1800.0, 1800.5), (0.0, -5.2), (1800.0, 1695.8)];
    let found = corrected(&checks, 435.5);
    assert!((found - 450.1928).abs() < 5e-5, "{found}");
    // 40 CFR 60, Appendix A-4, Method 7E, Eq. 7E-5B (from memory): C_0 0.5, C_m 49 at C_ma 50.
    let found = corrected(&[(0.0, 0.5), (50.0, 49.0)], 50.0);
    assert!((found - 51.0309).abs() < 5e-5, "{found}");
}
