//! Certified and published least-squares results come out of the window, also after rows have left
//! and the stacks have flipped: NIST `StRD` (`tests/data/nist-strd`) and the thermometer of the GUM
//! (JCGM 100:2008, H.3).

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_possible_wrap,
    clippy::cast_sign_loss,
    reason = "counts and times of invented streams are small"
)]

use crate::support::double::Double;
use holdtrue_engine::fit::Row;
use holdtrue_engine::fit::basis::Columns;
use holdtrue_engine::fit::criterion;
use holdtrue_engine::fit::window::{Cut, Window};
use holdtrue_engine::time::Timestamp;

fn row(time: i64, error: f64) -> Row {
    Row {
        time: Timestamp(time),
        error,
        weight: 1.0,
        x: 0.0,
        influences: [0.0; 2],
    }
}

/// A window that held other rows before, flipped twice, and now holds just these: (x in ticks, y),
/// x rising.
fn window_of(rows: &[(i64, f64)], degree: u8, per_segment: usize) -> Window {
    let whole = rows.len() / per_segment * per_segment;
    assert_eq!(whole, rows.len(), "whole segments");
    let cut = Cut::rows(rows.len() as u32, (rows.len() / per_segment) as u32);
    let mut window = Window::new(Columns::time(degree), cut);
    let step = (rows[rows.len() - 1].0 - rows[0].0) / rows.len() as i64;
    let before = (rows.len() + rows.len() / 2).next_multiple_of(per_segment) as i64;
    for place in 0..before {
        window.insert(&row(
            rows[0].0 - (before - place) * step,
            7.0 + (place % 3) as f64,
        ));
    }
    for &(x, y) in rows {
        window.insert(&row(x, y));
    }
    assert_eq!(window.rows(), rows.len() as u64);
    assert_eq!(
        window.oldest(),
        Some(Timestamp(rows[0].0)),
        "the rows before have left"
    );
    window
}

/// Coefficients in powers of x − x0 and their standard deviations; x0 and `per_x` (ticks of one x)
/// in ticks. The expansion itself is done in double-double numbers, so that only the fit's own
/// digits are judged.
fn raw_powers(window: &Window, degree: usize, x0: i64, per_x: i64) -> (Vec<f64>, Vec<f64>, f64) {
    let columns = degree + 1;
    // u = offset + slope·(x − x0), both taken from the frame itself: u at its anchor is 0.
    let anchor = window.frame().anchor().0;
    let ticks = 1_i64 << 40;
    let per_tick = Double::from(window.frame().scaled(Timestamp(anchor + ticks)) / ticks as f64);
    let slope = per_tick * Double::from_integer(per_x);
    let offset = per_tick * Double::from_integer(x0 - anchor);
    // expand[j][k]: what u^k gives to (x − x0)^j.
    let mut expand = vec![vec![Double::ZERO; columns]; columns];
    expand[0][0] = Double::ONE;
    for k in 1..columns {
        for j in 0..=k {
            let lower = if j > 0 {
                expand[j - 1][k - 1] * slope
            } else {
                Double::ZERO
            };
            expand[j][k] = lower + expand[j][k - 1] * offset;
        }
    }
    let solved = window.total().solve(columns).expect("independent");
    let inverse = window
        .total()
        .covariance_factor(columns)
        .expect("independent");
    let rss = window.total().nested_rss()[degree];
    let s = (rss / (window.rows() as f64 - columns as f64)).sqrt();
    let (mut estimates, mut sds) = (Vec::new(), Vec::new());
    for line in &expand {
        let times = |column: &dyn Fn(usize) -> f64| {
            let sum = (0..columns).map(|k| line[k] * Double::from(column(k)));
            sum.fold(Double::ZERO, |sum, term| sum + term)
        };
        estimates.push(times(&|k| solved[k]));
        let squares = (0..columns)
            .map(|c| times(&|k| inverse[(k, c)]))
            .map(|x| x * x);
        sds.push(squares.fold(Double::ZERO, |sum, x| sum + x).sqrt().float() * s);
    }
    estimates[0] = estimates[0] + Double::from(window.level());
    (estimates.into_iter().map(Double::float).collect(), sds, s)
}

/// Correct significant digits, at most those that NIST certifies.
fn digits(found: f64, certified: f64) -> f64 {
    let relative = ((found - certified) / certified).abs();
    if relative == 0.0 {
        15.0
    } else {
        (-relative.log10()).min(15.0)
    }
}

fn observations(name: &str, per_x: f64) -> Vec<(i64, f64)> {
    let path = format!(
        "{}/tests/data/nist-strd/{name}.csv",
        env!("CARGO_MANIFEST_DIR")
    );
    let text = std::fs::read_to_string(path).expect("the data file");
    let number = |field: &str| field.parse::<f64>().expect("a number");
    let mut rows: Vec<_> = (text.lines().skip(1).filter_map(|line| line.split_once(',')))
        .map(|(y, x)| ((number(x) * per_x).round() as i64, number(y)))
        .collect();
    rows.sort_by_key(|row| row.0);
    rows
}

fn certified(name: &str) -> Vec<(f64, f64)> {
    let path = format!(
        "{}/tests/data/nist-strd/certified.csv",
        env!("CARGO_MANIFEST_DIR")
    );
    let text = std::fs::read_to_string(path).expect("the data file");
    let number = |field: &str| field.parse::<f64>().expect("a number");
    (text.lines().map(|line| line.split(',').collect::<Vec<_>>()))
        .filter(|fields| fields[0].eq_ignore_ascii_case(name))
        .map(|fields| (number(fields[2]), number(fields[3])))
        .collect()
}

/// Correct digits of the worst coefficient, at least: Norris 11, Pontius 11.5, Wampler1 8, Wampler2
/// 11, Wampler3 8; standard deviations 9 where certified non-zero.
#[test]
fn nist_strd_polynomials() {
    // Name, degree, nanoseconds of one x, digits.
    let cases = [
        ("norris", 1_u8, 1e10, 11.0),
        ("pontius", 2, 1e5, 11.5),
        ("wampler1", 5, 1e12, 8.0),
        ("wampler2", 5, 1e12, 11.0),
        ("wampler3", 5, 1e12, 8.0),
    ];
    for (name, degree, per_x, wanted) in cases {
        let rows = observations(name, per_x);
        let certified = certified(name);
        assert_eq!(
            certified.len(),
            usize::from(degree) + 2,
            "estimates and s of {name}"
        );
        let third = if rows.len().is_multiple_of(3) { 3 } else { 4 };
        for per_segment in [1, third] {
            let window = window_of(&rows, degree, per_segment);
            let found = raw_powers(&window, usize::from(degree), 0, per_x as i64);
            let (estimates, sds, s) = found;
            let estimate_digits = (estimates.iter().zip(&certified))
                .map(|(&found, &(estimate, _))| digits(found, estimate))
                .fold(15.0, f64::min);
            let s_certified = certified[usize::from(degree) + 1].0;
            let sd_digits = (sds
                .iter()
                .zip(&certified)
                .map(|(&found, &(_, sd))| (found, sd)))
            .chain([(s, s_certified)])
            .filter(|&(_, certified)| certified != 0.0)
            .map(|(found, certified)| digits(found, certified))
            .fold(15.0, f64::min);
            println!("{name}, {per_segment} rows a segment: {estimate_digits:.1}, {sd_digits:.1}");
            assert!(
                estimate_digits >= wanted,
                "{name}: {estimate_digits} digits"
            );
            assert!(
                sd_digits >= 9.0,
                "{name}: standard deviations {sd_digits} digits"
            );
            if s_certified == 0.0 {
                let largest = rows.iter().map(|row| row.1).fold(0.0, f64::max);
                assert!(s <= 1e-12 * largest, "{name} fits exactly, not to {s}");
            }
        }
    }
}

/// JCGM 100:2008, Table H.6: thermometer readings in °C and corrections b in °C.
const THERMOMETER: [(f64, f64); 11] = [
    (21.521, -0.171),
    (22.012, -0.169),
    (22.512, -0.166),
    (23.003, -0.159),
    (23.507, -0.164),
    (23.999, -0.165),
    (24.513, -0.156),
    (25.002, -0.157),
    (25.503, -0.159),
    (26.010, -0.161),
    (26.511, -0.160),
];
/// Ticks of one °C: they must divide 24.0085 °C, too.
const PER_DEGREE: f64 = 1e10;

fn ticks(celsius: f64) -> i64 {
    (celsius * PER_DEGREE).round() as i64
}

fn thermometer(degree: u8) -> Window {
    let rows: Vec<_> = THERMOMETER.iter().map(|&(t, b)| (ticks(t), b)).collect();
    window_of(&rows, degree, 1)
}

fn assert_near(found: f64, expected: f64, decimals: i32) {
    let tolerance = 0.500_001 * 10_f64.powi(-decimals);
    assert!(
        (found - expected).abs() <= tolerance,
        "{found}, expected {expected}"
    );
}

/// JCGM 100:2008, H.3.3 to H.3.5; more digits recomputed with exact fractions.
#[test]
fn gum_thermometer() {
    let window = thermometer(1);
    let (y, sds, s) = raw_powers(&window, 1, ticks(20.0), PER_DEGREE as i64);
    assert_near(y[0], -0.171_203_790, 9);
    assert_near(sds[0], 0.002_877_598, 9);
    assert_near(y[1], 0.002_182_698, 9);
    assert_near(sds[1], 0.000_667_939, 9);
    assert_near(s, 0.003_497_564, 9);
    assert_near(window.total().nested_rss()[1] * 1e4, 1.100_966, 6);

    let at_30 = window
        .predict(1, Timestamp(ticks(30.0)))
        .expect("eleven rows");
    assert_near(at_30.error, -0.149_376_813, 9);
    assert_near(at_30.residual_sd * at_30.leverage.sqrt(), 0.004_138_596, 9);
    assert_near(
        at_30.residual_sd * (1.0 + at_30.leverage).sqrt(),
        0.005_418_573,
        9,
    );
    assert_near(at_30.degrees_of_freedom, 9.0, 9);
    // r(y1, y2) from three variances: u²(30 °C) = u1² + 100 u2² + 20 r u1 u2.
    let u_30 = at_30.residual_sd * at_30.leverage.sqrt();
    let r = (u_30 * u_30 - sds[0] * sds[0] - 100.0 * sds[1] * sds[1]) / (20.0 * sds[0] * sds[1]);
    assert_near(r, -0.930_430, 6);

    // With the origin at the mean, 24.0085 °C, estimates are uncorrelated (H.3.5).
    let (y, sds, s) = raw_powers(&window, 1, ticks(24.0085), PER_DEGREE as i64);
    assert_near(y[0], -0.1625, 4);
    assert_near(sds[0], 0.0011, 4);
    assert_near(sds[0], s / 11_f64.sqrt(), 9);
    assert_near(sds[1], 0.000_667_939, 9);
}

/// Criteria of the thermometer for degrees 0 … 3 (recomputed with exact fractions): degree 2 gains
/// less than six.
#[test]
fn thermometer_criteria() {
    let rss = thermometer(3).total().nested_rss();
    let expected = [
        (2.407_273e-4, -114.0272, -112.5272, -113.2314),
        (1.100_966e-4, -120.6325, -117.2040, -119.4388),
        (6.589_069e-5, -124.2795, -117.6128, -122.6879),
        (6.569_973e-5, -122.3114, -110.3114, -120.3219),
    ];
    for (degree, (expected_rss, aic, aicc, bic)) in expected.into_iter().enumerate() {
        let (found, parameters) = (rss[degree], degree + 2);
        assert!(
            (found / expected_rss - 1.0).abs() < 1e-6,
            "degree {degree}: {found}"
        );
        assert_near(
            criterion::aic(11.0, found, parameters).expect("defined"),
            aic,
            4,
        );
        assert_near(
            criterion::aicc(11.0, found, parameters).expect("defined"),
            aicc,
            4,
        );
        assert_near(
            criterion::bic(11.0, found, parameters).expect("defined"),
            bic,
            4,
        );
    }
}

/// The load cell of Pontius is a quadratic by both criteria (recomputed with exact fractions).
#[test]
fn load_cell_is_a_quadratic() {
    let rss = window_of(&observations("pontius", 1e5), 4, 4)
        .total()
        .nested_rss();
    let expected = [
        (-485.9804, -481.5804),
        (-673.3064, -667.6938),
        (-671.9867, -665.3070),
        (-670.5278, -662.9400),
    ];
    for (degree, (aicc, bic)) in (1..).zip(expected) {
        let found = criterion::aicc(40.0, rss[degree], degree + 2).expect("defined");
        assert_near(found, aicc, 4);
        let found = criterion::bic(40.0, rss[degree], degree + 2).expect("defined");
        assert_near(found, bic, 4);
    }
}

/// e = indication − reference (VIM 2.16): 10.3 against 10.0 is an error of +0.3, and that is what
/// the fit expects.
#[test]
fn the_error_is_indication_minus_reference() {
    let mut window = Window::new(Columns::time(0), Cut::rows(4, 4));
    for second in 0..4 {
        window.insert(&row(second * 1_000_000_000, 10.3 - 10.0));
    }
    let expected = window
        .predict(0, Timestamp(5_000_000_000))
        .expect("four rows")
        .error;
    assert!(
        (expected - 0.3).abs() < 1e-14,
        "an error of +0.3, a correction of −0.3"
    );
}
