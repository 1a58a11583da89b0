//! A real drift: the standard-resistor record (tests/data/standard-resistor), through the window.

use holdtrue_engine::fit::mean::Plain;
use holdtrue_engine::fit::{Fit, Row};
use holdtrue_engine::setup::{FitSetup, WindowLength};
use holdtrue_engine::time::{Duration, Timestamp};
use jiff::civil::Date;

const DATA: &str = include_str!("../data/standard-resistor/data.csv");
const DERIVED: &str = include_str!("../data/standard-resistor/derived_fit.csv");
const DAY: i64 = 86_400 * 1_000_000_000;
const DAYS_PER_YEAR: f64 = 365.25;

struct Reading {
    number: i64,
    /// Days since the first date.
    day: i64,
    ohm: f64,
}

fn readings() -> Vec<Reading> {
    let first: Date = "1980-02-05".parse().expect("a date");
    DATA.lines()
        .skip(1)
        .map(|line| {
            let fields: Vec<&str> = line.split(',').collect();
            let date: Date = fields[1].parse().expect("a date");
            Reading {
                number: fields[0].parse().expect("a number"),
                day: i64::from(date.since(first).expect("near").get_days()),
                ohm: fields[2].parse().expect("a number"),
            }
        })
        .collect()
}

fn fit(window: WindowLength, max_degree: u8, forced_degree: Option<u8>) -> Fit {
    Fit::new(FitSetup {
        window,
        segments: 64,
        max_degree,
        forced_degree,
        ..FitSetup::default()
    })
}

fn row(day: i64, ohm: f64) -> Row {
    Row {
        time: Timestamp(day * DAY),
        error: ohm,
        weight: 1.0,
        x: 0.0,
        influences: [0.0; 2],
    }
}

/// A published figure of so many digits: right to half a unit of the last one.
fn assert_printed(found: f64, published: f64, half_unit: f64) {
    assert!(
        (found - published).abs() <= half_unit,
        "{found} is not {published}"
    );
}

#[test]
fn the_published_line_on_run_number_comes_out() {
    let mut fit = fit(WindowLength::Pairs(1000), 2, Some(1));
    for reading in readings() {
        fit.insert(row(reading.number, reading.ohm));
    }
    let Plain {
        coefficients,
        covariance,
        residual_sd,
        degrees_of_freedom,
        ..
    } = fit.plain(1, Timestamp(0)).expect("1000 rows");
    assert_printed(coefficients[0], 27.91, 0.005);
    assert_printed(covariance[0][0].sqrt(), 1.209e-3, 0.0005e-3);
    assert_printed(coefficients[1], 2.097e-4, 0.0005e-4);
    assert_printed(covariance[1][1].sqrt(), 2.092e-6, 0.0005e-6);
    assert_printed(residual_sd, 0.0191, 0.00005);
    assert_printed(degrees_of_freedom, 998.0, 0.0);
    // The published band does not take the rows for independent: their residuals are strongly
    // correlated, and the plain standard deviation is far too small.
    let published = fit.published().expect("1000 rows");
    let honest = published.covariance[1][1].sqrt();
    assert!(honest > 4.0 * covariance[1][1].sqrt());
    assert_eq!((fit.degree(), published.degree), (1, 1));
}

#[test]
fn exact_figures_of_all_degrees_come_out() {
    for (dataset, by_day) in [
        ("resistance_on_days_since_1980-02-05", true),
        ("resistance_on_seq", false),
    ] {
        let mut fit = fit(WindowLength::Pairs(1000), 5, None);
        for reading in readings() {
            let time = if by_day { reading.day } else { reading.number };
            assert!(!fit.insert(row(time, reading.ohm)).too_old);
        }
        let mut compared = 0;
        for line in DERIVED.lines().filter(|line| line.starts_with(dataset)) {
            let fields: Vec<&str> = line.split(',').collect();
            let number = |place: usize| fields[place].parse::<f64>().expect("a number");
            let degree: u8 = fields[2].parse().expect("a degree");
            let plain = fit.plain(degree, Timestamp(0)).expect("1000 rows");
            let close = |found: f64, expected: f64| (found / expected - 1.0).abs() < 1e-10;
            let rss = plain.residual_sum_of_squares;
            assert!(close(rss, number(3)), "degree {degree}: {rss}");
            for (power, &found) in plain.coefficients.iter().enumerate() {
                let expected = number(5 + power);
                assert!(
                    close(found, expected),
                    "degree {degree}: {found} {expected}"
                );
                compared += 1;
            }
        }
        assert_eq!(compared, 1 + 2 + 3 + 4 + 5);
    }
}

/// Slopes of the last two years recomputed from the record (plain line over the readings of two
/// years), ohm per year.
#[test]
fn a_two_year_window_follows_the_slope() {
    let window = WindowLength::Time(Duration(DAY * 1461 / 2));
    let mut fit = fit(window, 2, Some(1));
    let mut readings = readings();
    readings.sort_by_key(|reading| reading.day);
    let slope = |fit: &Fit| fit.published().expect("rows").coefficients[1] * DAYS_PER_YEAR;
    let mut after_two_years = None;
    for reading in readings {
        if reading.day > 730 && after_two_years.is_none() {
            after_two_years = Some(slope(&fit));
        }
        fit.insert(row(reading.day, reading.ohm));
        assert!(fit.decide(true).is_none(), "a forced degree is not judged");
    }
    let early = after_two_years.expect("the record goes on");
    let late = slope(&fit);
    println!("slopes in ohm per year: {early} after two years, {late} at the end");
    assert!((early / 0.0486 - 1.0).abs() < 0.02, "{early}");
    assert!((late / 0.0312 - 1.0).abs() < 0.02, "{late}");
}

/// With the degree free, the drift is announced, and the published mean is near what comes next.
#[test]
fn with_the_degree_free_the_mean_is_near_the_next_month() {
    let window = WindowLength::Time(Duration(DAY * 1461 / 2));
    let mut fit = fit(window, 2, None);
    let mut readings = readings();
    readings.sort_by_key(|reading| reading.day);
    let mut squares = (0.0, 0.0, 0);
    for (place, reading) in readings.iter().enumerate() {
        if fit.insert(row(reading.day, reading.ohm)).closed
            && let Some(change) = fit.decide(true)
        {
            println!(
                "day {}: degree {} to {}",
                reading.day, change.from, change.to
            );
        }
        let next: Vec<f64> = readings[place + 1..]
            .iter()
            .take_while(|later| later.day <= reading.day + 30)
            .map(|later| later.ohm)
            .collect();
        if reading.day > 365 && next.len() >= 5 {
            let mean = next.iter().sum::<f64>() / next.len() as f64;
            let published = fit.published().expect("rows");
            let ahead = |t: f64| {
                published
                    .coefficients
                    .iter()
                    .rev()
                    .fold(0.0, |sum, c| sum * t + c)
            };
            squares.0 += (ahead(15.0) - mean) * (ahead(15.0) - mean);
            squares.1 += (27.868 - mean) * (27.868 - mean);
            squares.2 += 1;
        }
    }
    let root = |sum: f64| (sum / f64::from(squares.2)).sqrt();
    let (corrected, as_calibrated) = (root(squares.0), root(squares.1));
    println!("RMS error of the next month's mean: {corrected} ohm, uncorrected {as_calibrated}");
    assert!(fit.degree() >= 1, "the drift was announced");
    assert!(corrected < 0.1 * as_calibrated);
}
