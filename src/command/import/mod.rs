//! `holdtrue import`: recordings become a record.

mod answer;

use super::Ending;
use crate::configuration::{self, Configuration};
use crate::import::into_record::{Imported, Place, into_record};
use crate::import::mapping::Mapping;
use crate::import::problem::Problems;
use crate::import::recording::{Form, Source};
use crate::import::survey::Survey;
use crate::import::{ImportError, Words};
use crate::keeper::RestoreError;
use clap::Args;
use holdtrue_simulators::command::progress;
use holdtrue_text::time_form::TimeForm;
use std::io;
use std::path::PathBuf;

/// Help of `--map`.
const MAP_HELP: &str = "Whose value a column is: CHANNEL (its indication), reference:NAME, \
    influence:CHANNEL:NAME or valid_when:REFERENCE. A column is one of a CSV file, a JSON pointer \
    or a member's name in JSON lines, a record's resolved name in SenML";

/// Values between two looks at the progress bar.
const SHOWN_EVERY: u64 = 1000;

/// Arguments of an import.
#[derive(Debug, Args)]
#[expect(clippy::struct_excessive_bools, reason = "each is a flag of its own")]
pub(super) struct Import {
    /// The recordings: .csv or .tsv with a header line, JSON lines (.jsonl, .ndjson), or SenML
    /// (.senml).
    #[arg(required = true, value_name = "FILE")]
    files: Vec<PathBuf>,
    /// The configuration file, as for `run`; the clock that it names does not matter.
    #[arg(long, value_name = "FILE")]
    config: PathBuf,
    /// Folder of the record that is made.
    #[arg(long, value_name = "FOLDER", required_unless_present = "dry_run")]
    record: Option<PathBuf>,
    #[command(flatten)]
    columns: Columns,
    /// Form of the files, if their names do not tell.
    #[arg(long)]
    format: Option<Form>,
    /// Leave out what can't be read, and count it, instead of importing nothing.
    #[arg(long)]
    skip_bad: bool,
    /// Only say what would be imported.
    #[arg(long)]
    dry_run: bool,
    /// Go on with a record that is there already.
    #[arg(long)]
    append: bool,
    /// One JSON object on standard output instead of text.
    #[arg(long)]
    json: bool,
}

/// What the columns are, and how they are written.
#[derive(Debug, Args)]
struct Columns {
    // A doc comment would need backticks, which a terminal shows.
    #[arg(long = "map", value_name = "COLUMN=SOURCE", help = MAP_HELP)]
    maps: Vec<String>,
    /// The same in a TOML file, with more to say.
    #[arg(long = "columns", value_name = "FILE", conflicts_with_all = [
        "maps", "times", "time_format", "utc_offset", "status", "missing", "decimal_comma",
        "separator",
    ])]
    file: Option<PathBuf>,
    /// Column of the time; of several, in each file the first that it has.
    #[arg(long = "time", value_name = "COLUMN")]
    times: Vec<String>,
    /// How times are written: rfc3339, date, epoch, epoch-ms, or a pattern such as
    /// "%d.%m.%Y %H:%M".
    #[arg(long, value_name = "FORMAT", default_value = "rfc3339")]
    time_format: TimeForm,
    /// Which clock times without an offset are told by: Z, or as +01:00.
    #[arg(long, value_name = "OFFSET", allow_hyphen_values = true)]
    utc_offset: Option<String>,
    /// Column that says whether a row is to be used, and what it says then.
    #[arg(long, value_name = "COLUMN=GOOD[,GOOD]")]
    status: Option<String>,
    /// A text that stands for no value, as an empty cell does.
    #[arg(long, value_name = "TEXT", allow_hyphen_values = true)]
    missing: Vec<String>,
    /// The decimal sign of CSV cells is a comma.
    #[arg(long)]
    decimal_comma: bool,
    /// Separator of CSV cells [default: a comma, in .tsv files a tab].
    #[arg(long, value_name = "CHARACTER", value_parser = crate::import::separator)]
    separator: Option<u8>,
}

/// Why nothing was imported.
enum Failure {
    /// Usage, configuration, mapping, or files that do not fit.
    Refused(String),
    /// Some of the files can't be read as told.
    Unreadable(Problems),
    /// The record says otherwise than this program would.
    Differs(String),
    /// The disk.
    Outside(String),
}

impl Import {
    /// Imports.
    pub(super) fn run(&self) -> Ending {
        let out = &mut io::stdout();
        let (ending, written) = match self.carry_out() {
            Ok(done) => {
                let ending = match done.survey.problems.count {
                    0 => Ending::Done,
                    _ => Ending::No,
                };
                (ending, done.tell(self.json, out))
            }
            Err(failure) => (failure.ending(), failure.tell(self.json, out)),
        };
        match written {
            Err(error) if error.kind() != io::ErrorKind::BrokenPipe => Ending::Failed,
            _ => ending,
        }
    }

    fn carry_out(&self) -> Result<Done, Failure> {
        let loaded = configuration::load(&self.config);
        let configuration = loaded.map_err(|problems| Failure::Refused(problems.to_string()))?;
        let mapping = self.columns.mapping(&configuration)?;
        let folder = self.record.as_deref().filter(|_| !self.dry_run);
        let place = folder.map(|folder| Place {
            folder,
            append: self.append,
        });
        // Before a large recording is read for nothing.
        if let Some(place) = place {
            place.check()?;
        }
        let mut sources = Vec::new();
        for path in &self.files {
            let form = self.format.map_or_else(|| Form::of(path), Ok);
            sources.push(Source {
                path: path.clone(),
                form: form.map_err(Failure::Refused)?,
            });
        }
        let bar = progress::bar(None, "rows looked at");
        let surveyed = Survey::of(&sources, &mapping, &mut |rows| bar.inc(rows));
        bar.finish_and_clear();
        let survey = surveyed?;
        if survey.problems.count > 0 && !self.skip_bad {
            return Err(Failure::Unreadable(survey.problems));
        }
        survey.check(&mapping)?;
        let imported = match place {
            Some(place) => Some(Self::write(place, &survey, &mapping, &configuration)?),
            None => None,
        };
        Ok(Done {
            configuration,
            mapping,
            survey,
            imported,
        })
    }

    fn write(
        place: Place<'_>,
        survey: &Survey,
        mapping: &Mapping,
        configuration: &Configuration,
    ) -> Result<Imported, ImportError> {
        let bar = progress::bar(Some(survey.extent().count), "values");
        let mut waiting = 0;
        let mut advance = |values| {
            // The bar costs more than a value.
            waiting += values;
            if waiting >= SHOWN_EVERY {
                bar.inc(std::mem::take(&mut waiting));
            }
        };
        let setup = &configuration.setup;
        let imported = into_record(survey, mapping, setup, place, &mut advance);
        bar.finish_and_clear();
        imported
    }
}

impl Columns {
    fn mapping(&self, configuration: &Configuration) -> Result<Mapping, Failure> {
        if let Some(path) = &self.file {
            let file = path.display().to_string();
            let text = std::fs::read_to_string(path)
                .map_err(|error| Failure::Refused(format!("{file}: can't be read: {error}")))?;
            let read = Mapping::from_toml(&text, &file, configuration);
            return read.map_err(|problems| Failure::Refused(problems.to_string()));
        }
        let words = Words {
            maps: self.maps.clone(),
            times: self.times.clone(),
            time_format: self.time_format.clone(),
            utc_offset: self.utc_offset.clone(),
            status: self.status.clone(),
            missing: self.missing.clone(),
            decimal_comma: self.decimal_comma,
            separator: self.separator,
        };
        let read = Mapping::from_words(&words, configuration);
        read.map_err(|list| Failure::Refused(list.join("\n")))
    }
}

/// What was read, and what became of it.
struct Done {
    configuration: Configuration,
    mapping: Mapping,
    survey: Survey,
    /// `None` after a dry run.
    imported: Option<Imported>,
}

impl Failure {
    fn ending(&self) -> Ending {
        match self {
            Self::Refused(_) | Self::Unreadable(_) => Ending::Wrong,
            Self::Differs(_) => Ending::No,
            Self::Outside(_) => Ending::Failed,
        }
    }
}

impl From<ImportError> for Failure {
    fn from(error: ImportError) -> Self {
        match error {
            ImportError::Restore(RestoreError::Differs { .. }) => Self::Differs(error.to_string()),
            ImportError::File { .. }
            | ImportError::Changed { .. }
            | ImportError::Record(_)
            | ImportError::Restore(_) => Self::Outside(error.to_string()),
            ImportError::Misfit(_) | ImportError::Disorder { .. } => {
                Self::Refused(error.to_string())
            }
        }
    }
}
