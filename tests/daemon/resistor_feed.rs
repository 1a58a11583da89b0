//! A real drift through the whole chain: the record of a standard resistor, fed over Mosquitto by
//! `plant feed` into the real daemon, must come out as its publisher fitted it.
//!
//! Source: NIST, readings of a standard resistor (e-Handbook of Statistical Methods, 1.4.2.7),
//! public domain; `tests/data/standard-resistor/SOURCE.txt` says where it was taken and what of it
//! is published. `derived_fit.csv` there was computed from it in exact rational arithmetic.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::Listener;
use crate::live::mosquitto::Mosquitto;
use clap::Parser;
use serde_json::Value;
use std::path::{Path, PathBuf};

/// Readings in the record.
const READINGS: f64 = 1000.0;
/// Days in a mean year, by which slopes are told.
const YEAR: f64 = 365.25;

/// A correction document, as far as these tests look at it.
struct Document {
    json: Value,
}

impl Document {
    fn number(&self, pointer: &str) -> f64 {
        let found = self.json.pointer(pointer).and_then(Value::as_f64);
        found.unwrap_or_else(|| panic!("no number at {pointer} in {}", self.json))
    }

    fn numbers(&self, key: &str) -> Vec<f64> {
        let list = self.json[key].as_array().expect("a list");
        list.iter()
            .map(|it| it.as_f64().expect("a number"))
            .collect()
    }

    /// An instant in days since 1970.
    fn day(&self, pointer: &str) -> f64 {
        let text = self
            .json
            .pointer(pointer)
            .and_then(Value::as_str)
            .expect("a time");
        let at: jiff::Timestamp = text.parse().expect("RFC 3339");
        at.as_millisecond() as f64 / 86_400_000.0
    }

    /// The error's coefficients (minus the correction's) as a polynomial in days since `day`.
    fn coefficients_since(&self, day: f64) -> Vec<f64> {
        let zero = self.numbers("zero");
        let shift = self.day("/origin") - day;
        // p(t − shift) by repeated synthetic division (Horner's shift).
        let mut shifted: Vec<f64> = zero.iter().map(|c| -c).collect();
        for low in 0..shifted.len() {
            for k in (low..shifted.len() - 1).rev() {
                shifted[k] -= shift * shifted[k + 1];
            }
        }
        shifted
    }

    /// The estimated error on a day since 1970.
    fn error_on(&self, day: f64) -> f64 {
        let t = day - self.day("/origin");
        -self
            .numbers("zero")
            .iter()
            .rev()
            .fold(0.0, |sum, c| sum * t + c)
    }
}

fn data() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/standard-resistor")
}

/// Feeds the record into a daemon whose channel has these further lines; returns its documents.
fn fed(channel: &str, time: [&str; 2]) -> Vec<Document> {
    let broker = Mosquitto::start();
    let listener = Listener::start(broker.port, "holdtrue/#");
    let settings = format!(
        "[[channel]]\nname = \"bench/resistor\"\nunit = \"ohm\"\nreference = {{ constant = 0.0 }}\n\
         indication = {{ topic = \"bench\", value = \"/ohm\", \
         time = \"/at\", sequence = \"/seq\" }}\n\
         lateness = \"20 d\"\nscreening = \"off\"\n\
         publish = {{ step = 1e-12, max_age = \"400 d\" }}\n{channel}\n"
    );
    let mut daemon = Holdtrue::prepare_with(broker.port, "time = \"readings\"", "", &settings);
    daemon.launch();
    daemon.wait_log("subscribed");
    let file = data().join("data.csv");
    let url = format!("mqtt://127.0.0.1:{}", broker.port);
    let words = [
        "plant",
        "feed",
        file.to_str().expect("a plain path"),
        "--broker",
        &url,
    ];
    let fields = [
        "--topic",
        "bench",
        "--field",
        "ohm=resistance_ohm",
        "--field",
        "seq=seq",
    ];
    let times = ["--field", time[0], "--time-format", time[1]];
    let words = [&words[..], &fields, &times].concat();
    let arguments =
        holdtrue_simulators::command::Arguments::try_parse_from(words).expect("good words");
    holdtrue_simulators::command::run(arguments).expect("all rows acknowledged");
    // The configuration is the first input.
    daemon.wait_count("SELECT count(*) FROM raw_readings", 1000);
    assert!(daemon.stop().success());
    listener.wait_state("stopped");
    listener
        .on("holdtrue/test/correction/")
        .iter()
        .filter(|message| !message.retained && !message.payload.is_empty())
        .map(|message| Document {
            json: message.json(),
        })
        .collect()
}

/// The document that all readings have gone into.
fn last_of_all(documents: &[Document]) -> &Document {
    let last = documents.last().expect("documents were published");
    assert!(
        (last.number("/window/pairs") - READINGS).abs() < 0.5,
        "{}",
        last.json
    );
    last
}

/// Rows of a table beside the data.
fn rows(file: &str) -> Vec<csv::StringRecord> {
    let mut table = csv::Reader::from_path(data().join(file)).expect("the table is there");
    table.records().map(|row| row.expect("a row")).collect()
}

#[test]
fn on_run_number_the_published_line_comes_out() {
    // Run numbers as seconds since 1970; 50 segments of 20 rows weigh the same, so that the
    // published fit is the plain one.
    let documents = fed(
        "window = \"1000 pairs\"\nsegments = 50\nmax_degree = 1\ndegree = 1",
        ["at=seq:time", "epoch"],
    );
    let last = last_of_all(&documents);
    let line = last.coefficients_since(0.0);
    let slope = line[1] / 86_400.0;
    // The covariance of the document speaks for correlated residuals: it is the plain one times one
    // factor, which the publisher's line knows nothing of. The plain variance of a slope over the
    // run numbers 1 … n is s²·12/(n·(n² − 1)) (Draper & Smith, Applied Regression Analysis, 1.4);
    // the factor follows, and with it the plain variance of the intercept.
    let sd = last.number("/residual_sd");
    let slope_variance = sd * sd * 12.0 / (READINGS * (READINGS * READINGS - 1.0));
    let published = |i: usize, j: usize| last.number(&format!("/covariance/{i}/{j}"));
    let inflation = published(1, 1) / (86_400.0 * 86_400.0) / slope_variance;
    let covariance = |i: usize, j: usize| published(i, j) / inflation;
    let back = -last.day("/origin");
    let intercept_variance =
        covariance(0, 0) + 2.0 * back * covariance(0, 1) + back * back * covariance(1, 1);
    println!(
        "intercept {} (sd {}), slope {slope} (sd {}), residual sd {}, inflation {inflation}",
        line[0],
        intercept_variance.sqrt(),
        covariance(1, 1).sqrt() / 86_400.0,
        last.number("/residual_sd")
    );
    // Neighbouring readings tell nearly the same (lag-1 correlation 0.97): an honest variance is
    // many times the plain one.
    assert!(inflation > 10.0, "{inflation}");
    // To the digits that are printed.
    let printed = [
        (line[0], 27.91, 0.005),
        (intercept_variance.sqrt(), 1.209e-3, 0.0005e-3),
        (slope, 2.097e-4, 0.0005e-4),
        (covariance(1, 1).sqrt() / 86_400.0, 2.092e-6, 0.0005e-6),
        (last.number("/residual_sd"), 0.0191, 0.000_05),
    ];
    for (found, expected, half_digit) in printed {
        assert!(
            (found - expected).abs() <= half_digit,
            "{found} for {expected}"
        );
    }
}

#[test]
fn on_days_all_degrees_agree_with_exact_arithmetic() {
    let exact = rows("derived_fit.csv");
    let exact = exact.iter().filter(|row| row[0].contains("on_days"));
    let start = 3687.0; // 1980-02-05 in days since 1970
    let mut degrees = 0;
    for row in exact {
        let degree: usize = row[2].parse().expect("a degree");
        let number = |column: usize| row[column].parse::<f64>().expect("a number");
        let documents = fed(
            &format!(
                "window = \"1000 pairs\"\nsegments = 50\nmax_degree = {degree}\ndegree = {degree}"
            ),
            ["at=date:time", "date"],
        );
        let last = last_of_all(&documents);
        let found = last.coefficients_since(start);
        assert_eq!(found.len(), degree + 1);
        let sd = last.number("/residual_sd");
        let rss = sd * sd * (READINGS - degree as f64 - 1.0);
        let close = |found: f64, exact: f64| (found / exact - 1.0).abs();
        let worst = (0..=degree)
            .map(|k| close(found[k], number(5 + k)))
            .fold(0.0, f64::max);
        println!(
            "degree {degree}: coefficients {worst:.1e}, RSS {:.1e}",
            close(rss, number(3))
        );
        assert!(worst < 1e-10, "degree {degree}: {found:?}");
        assert!(close(rss, number(3)) < 1e-10, "degree {degree}: RSS {rss}");
        degrees += 1;
    }
    assert_eq!(degrees, 5);
}

#[test]
fn with_a_window_of_two_years_the_slope_of_its_time_comes_out() {
    let documents = fed(
        "window = \"730.5 d\"\nsegments = 64\nmax_degree = 1\ndegree = 1",
        ["at=date:time", "date"],
    );
    let two_years = 3687.0 + 730.5;
    let after = documents
        .iter()
        .find(|document| document.day("/window/to") >= two_years);
    let after = after.expect("the record is longer than two years");
    let end = documents.last().expect("documents were published");
    for (document, expected) in [(after, 0.0486), (end, 0.0312)] {
        let slope = -document.numbers("zero")[1] * YEAR;
        println!(
            "slope {slope} ohm a year up to {}",
            document.json["window"]["to"]
        );
        assert!(
            (slope / expected - 1.0).abs() < 0.02,
            "{slope} for {expected}"
        );
    }
}

#[test]
fn with_the_degree_free_the_correction_is_near_the_next_months_mean() {
    let documents = fed(
        "window = \"730.5 d\"\nsegments = 64\nmax_degree = 2",
        ["at=date:time", "date"],
    );
    let mut degree = 0.0;
    for document in &documents {
        if document.number("/degree") > degree || document.number("/degree") < degree {
            degree = document.number("/degree");
            println!("degree {degree} from {}", document.json["issued"]);
        }
    }
    // Mean of each month, and what the document in force at its beginning said.
    let readings: Vec<(f64, String, f64)> = rows("data.csv")
        .iter()
        .map(|row| {
            let date: jiff::civil::Date = row[1].parse().expect("a date");
            let start = jiff::civil::date(1970, 1, 1);
            let day = f64::from(start.until(date).expect("in range").get_days());
            (
                day,
                row[1][..7].to_owned(),
                row[2].parse().expect("a resistance"),
            )
        })
        .collect();
    let mut months: std::collections::BTreeMap<&str, Vec<(f64, f64)>> =
        std::collections::BTreeMap::new();
    for (day, month, ohm) in &readings {
        months.entry(month).or_default().push((*day, *ohm));
    }
    let (mut squares, mut count) = (0.0, 0.0);
    for (month, values) in &months {
        let first = values
            .iter()
            .map(|(day, _)| *day)
            .fold(f64::INFINITY, f64::min);
        let known = documents
            .iter()
            .rev()
            .find(|document| document.day("/issued") < first);
        let Some(known) = known else { continue };
        let mean = |of: &dyn Fn(&(f64, f64)) -> f64| {
            values.iter().map(of).sum::<f64>() / values.len() as f64
        };
        let off = mean(&|(day, _)| known.error_on(*day)) - mean(&|(_, ohm)| *ohm);
        println!(
            "{month}: off by {off:+.4} ohm, degree {}",
            known.number("/degree")
        );
        if values[0].0 >= 3687.0 + 365.0 {
            squares += off * off;
            count += 1.0;
        }
    }
    let rms = f64::sqrt(squares / count);
    println!("root mean square over {count} months after the first year: {rms:.4} ohm");
    // The months' means themselves scatter by about 0.01 ohm around any smooth curve.
    assert!(count > 40.0 && rms < 0.02, "{rms}");
}
