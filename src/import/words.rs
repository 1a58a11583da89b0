//! A mapping as the command line tells it: `pH=intake/ph-1`, `lab=reference:lab/ph`.

use super::mapping::{Column, Mapping, TimeColumn, repeated};
use super::names::Names;
use crate::payload::{Scalar, Status, Target};
use holdtrue_text::instant::offset_from_text;
use holdtrue_text::time_form::TimeForm;

/// What the command line says of the recordings.
#[derive(Clone, Debug, Default)]
pub struct Words {
    /// `COLUMN=SOURCE`: whose value a column is.
    pub maps: Vec<String>,
    /// Columns of times.
    pub times: Vec<String>,
    /// How they are written.
    pub time_format: TimeForm,
    /// `Z` or `+01:00`: the clock of times without an offset.
    pub utc_offset: Option<String>,
    /// `COLUMN=GOOD[,GOOD…]`: the column that says whether a row is to be used.
    pub status: Option<String>,
    /// Texts that stand for no value.
    pub missing: Vec<String>,
    /// The decimal sign is a comma.
    pub decimal_comma: bool,
    /// What separates CSV cells.
    pub separator: Option<u8>,
}

/// The mapping, or everything that is wrong with it.
pub(super) fn read(words: &Words, names: &Names<'_>) -> Result<Mapping, Vec<String>> {
    let mut wrong = Vec::new();
    let mut note = |message: String| wrong.push(message);
    let status = words.status.as_deref().and_then(|text| {
        let read = status(text);
        read.map_err(&mut note).ok()
    });
    let offset = words.utc_offset.as_deref().and_then(|text| {
        let read = offset_from_text(text);
        read.map_err(|message| note(format!("--utc-offset: {message}")))
            .ok()
    });
    let mut columns = Vec::new();
    for text in &words.maps {
        match column(text, names) {
            Ok((name, target)) => columns.push(Column {
                name,
                status: status.clone().filter(|_| !is_gate(&target)),
                target,
                only_where: None,
            }),
            Err(message) => note(format!("--map {text}: {message}")),
        }
    }
    if words.maps.is_empty() {
        note("say what the columns are, with --map COLUMN=SOURCE or --columns FILE".to_owned());
    }
    if let Some((_, later)) = repeated(&columns) {
        note(format!("--map {} is said twice", words.maps[later]));
    }
    let times = words.times.iter().map(|name| TimeColumn {
        name: name.clone(),
        form: words.time_format.clone(),
        ahead: offset,
    });
    let mapping = Mapping {
        times: times.collect(),
        columns,
        missing: words.missing.clone(),
        decimal_comma: words.decimal_comma,
        separator: words.separator,
    };
    if wrong.is_empty() {
        Ok(mapping)
    } else {
        Err(wrong)
    }
}

fn is_gate(target: &Target) -> bool {
    matches!(target, Target::Gate { .. })
}

/// `COLUMN=SOURCE`. The names of sources have neither `=` nor `:`, those of columns may.
fn column(text: &str, names: &Names<'_>) -> Result<(String, Target), String> {
    let (name, source) = text
        .rsplit_once('=')
        .filter(|(name, source)| !name.is_empty() && !source.is_empty())
        .ok_or("is not COLUMN=SOURCE, as pH=intake/ph-1")?;
    let parts: Vec<&str> = source.split(':').collect();
    let target = match parts[..] {
        [channel] | ["indication", channel] => names.indication(channel),
        ["reference", reference] => names.reference(reference),
        ["influence", channel, influence] => names.influence(channel, influence),
        ["valid_when", reference] => names.gate(reference),
        _ => Err(format!(
            "\"{source}\" is no source; write CHANNEL, reference:NAME, influence:CHANNEL:NAME or \
             valid_when:REFERENCE"
        )),
    }?;
    Ok((name.to_owned(), target))
}

/// `COLUMN=GOOD[,GOOD…]`; what reads as a number is compared as one, as well as by its text.
fn status(text: &str) -> Result<Status<String>, String> {
    let (place, good) = text
        .rsplit_once('=')
        .filter(|(place, good)| !place.is_empty() && !good.is_empty())
        .ok_or_else(|| format!("--status {text}: is not COLUMN=GOOD[,GOOD…], as flag=ok,0"))?;
    let texts = good.split(',').map(str::trim);
    let scalars = texts.flat_map(|word| {
        let number = word.parse().ok().filter(|number: &f64| number.is_finite());
        [
            Some(Scalar::Text(word.to_owned())),
            number.map(Scalar::Number),
        ]
    });
    Ok(Status {
        place: place.to_owned(),
        good: scalars.flatten().collect(),
    })
}
