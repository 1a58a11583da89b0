//! A run written to a folder: readings, truth beside them, and a configuration that fits.

use crate::configuration;
use crate::message::{Topics, time_text};
use crate::plant::Plant;
use crate::truth::Truth;
use std::fmt;
use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::{Path, PathBuf};

/// Form of the readings file.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Form {
    /// `readings.jsonl`: one object a line.
    JsonLines,
    /// `readings.csv`: with a header.
    Csv,
}

impl Form {
    /// The readings file's name.
    #[must_use]
    pub fn file_name(self) -> &'static str {
        match self {
            Self::JsonLines => "readings.jsonl",
            Self::Csv => "readings.csv",
        }
    }
}

/// A file could not be written.
#[derive(Debug)]
pub struct WriteError {
    /// Which.
    pub path: PathBuf,
    /// Why.
    pub cause: io::Error,
}

impl fmt::Display for WriteError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(out, "writing {}", self.path.display())
    }
}

impl std::error::Error for WriteError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        Some(&self.cause)
    }
}

/// What was written.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Written {
    /// Values in the readings file.
    pub readings: u64,
    /// The files.
    pub files: Vec<PathBuf>,
}

/// Writes the run of `plant` into `folder` (made if missing): readings, `truth.csv` (the truth at
/// each indication),
/// `truth.json` (parameters, faults, expected alarms) and `holdtrue.toml`. `progress` is told of
/// every value.
///
/// # Errors
/// The first file that can't be written, with the reason.
pub fn write(
    plant: Plant,
    form: Form,
    folder: &Path,
    mut progress: impl FnMut(u64),
) -> Result<Written, WriteError> {
    let failed = |path: &Path| {
        let path = path.to_owned();
        move |cause| WriteError { path, cause }
    };
    std::fs::create_dir_all(folder).map_err(failed(folder))?;
    let truth = Truth::of(&plant, plant.days);
    let settings = configuration::text(
        &plant.scenario,
        plant.days,
        &configuration::Surroundings::default(),
    );

    let readings_path = folder.join(form.file_name());
    let truth_path = folder.join("truth.csv");
    let samples_written = write_samples(plant, form, &readings_path, &truth_path, &mut progress)?;

    let json_path = folder.join("truth.json");
    let json = serde_json::to_string_pretty(&truth)
        .map_err(|error| failed(&json_path)(io::Error::other(error)))?;
    std::fs::write(&json_path, json + "\n").map_err(failed(&json_path))?;
    let settings_path = folder.join("holdtrue.toml");
    std::fs::write(&settings_path, settings).map_err(failed(&settings_path))?;
    Ok(Written {
        readings: samples_written,
        files: vec![readings_path, truth_path, json_path, settings_path],
    })
}

/// Writes the readings and the truth at each indication; says how many readings.
fn write_samples(
    plant: Plant,
    form: Form,
    readings_path: &Path,
    truth_path: &Path,
    progress: &mut impl FnMut(u64),
) -> Result<u64, WriteError> {
    let failed = |path: &Path| {
        let path = path.to_owned();
        move |cause| WriteError { path, cause }
    };
    let open = |path: &Path| File::create(path).map(BufWriter::new).map_err(failed(path));
    let mut readings = open(readings_path)?;
    let mut truths = open(truth_path)?;
    let topics = Topics::new(&plant.scenario);
    let channels: Vec<&str> = plant
        .scenario
        .kits
        .iter()
        .map(|kit| kit.instrument.name)
        .collect();
    if form == Form::Csv {
        writeln!(readings, "topic,at,value,seq").map_err(failed(readings_path))?;
    }
    writeln!(
        truths,
        "at,channel,indication,true_value,true_error,systematic_error"
    )
    .map_err(failed(truth_path))?;
    let mut count = 0;
    for sample in plant {
        let (topic, at) = (topics.of(&sample), time_text(sample.at));
        let (value, sequence) = (sample.value, sample.sequence);
        match form {
            Form::JsonLines => writeln!(
                readings,
                r#"{{"topic":"{topic}","at":"{at}","value":{value},"seq":{sequence}}}"#
            ),
            Form::Csv => writeln!(readings, "{topic},{at},{value},{sequence}"),
        }
        .map_err(failed(readings_path))?;
        if !sample.is_reference {
            let (true_value, error) = (sample.true_value, sample.true_error());
            let (channel, systematic) = (channels[sample.sensor], sample.systematic_error);
            writeln!(
                truths,
                "{at},{channel},{value},{true_value},{error},{systematic}"
            )
            .map_err(failed(truth_path))?;
        }
        count += 1;
        progress(count);
    }
    readings.flush().map_err(failed(readings_path))?;
    truths.flush().map_err(failed(truth_path))?;
    Ok(count)
}
