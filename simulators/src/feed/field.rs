//! Which columns become which members of the payload.

use std::str::FromStr;

/// How a column's cells are read.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// A number; an integer stays one.
    Number,
    /// Text, unchanged.
    Text,
    /// A time, sent as RFC 3339 in UTC.
    Time,
}

/// `KEY=COLUMN[:KIND]`.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Field {
    /// Member of the payload.
    pub key: String,
    /// Column of the file.
    pub column: String,
    /// How it is read.
    pub kind: Kind,
}

impl FromStr for Field {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let (key, rest) = text
            .split_once('=')
            .ok_or_else(|| format!("{text:?} is not KEY=COLUMN[:KIND]"))?;
        let (column, kind) = match rest.rsplit_once(':') {
            None => (rest, Kind::Number),
            Some((column, "number")) => (column, Kind::Number),
            Some((column, "text")) => (column, Kind::Text),
            Some((column, "time")) => (column, Kind::Time),
            Some((_, other)) => {
                return Err(format!("{other:?} is not a kind: number, text or time"));
            }
        };
        if key.is_empty() || column.is_empty() {
            return Err(format!("{text:?} lacks a key or a column"));
        }
        Ok(Self {
            key: key.to_owned(),
            column: column.to_owned(),
            kind,
        })
    }
}

/// `KEY=JSON`, added to every payload.
#[derive(Clone, Debug, PartialEq)]
pub struct Constant {
    /// Member of the payload.
    pub key: String,
    /// Its value.
    pub value: serde_json::Value,
}

impl FromStr for Constant {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let (key, json) = text
            .split_once('=')
            .ok_or_else(|| format!("{text:?} is not KEY=JSON"))?;
        if key.is_empty() {
            return Err(format!("{text:?} lacks a key"));
        }
        let value = serde_json::from_str(json)
            .map_err(|error| format!("{json:?} is not JSON ({error}); text needs quotes"))?;
        Ok(Self {
            key: key.to_owned(),
            value,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn fields_name_a_key_a_column_and_a_kind() {
        let field = |key: &str, column: &str, kind| {
            Ok(Field {
                key: key.into(),
                column: column.into(),
                kind,
            })
        };
        assert_eq!("value=ohm".parse(), field("value", "ohm", Kind::Number));
        assert_eq!("at=date:time".parse(), field("at", "date", Kind::Time));
        assert_eq!("q=flag:text".parse(), field("q", "flag", Kind::Text));
        for wrong in ["value", "=ohm", "value=", "value=ohm:colour"] {
            assert!(wrong.parse::<Field>().is_err(), "{wrong}");
        }
    }

    #[test]
    fn constants_are_json() {
        let constant: Constant = "reference=0".parse().unwrap();
        assert_eq!(constant.value, serde_json::json!(0));
        assert!("unit=ohm".parse::<Constant>().is_err());
        assert!("unit=\"ohm\"".parse::<Constant>().is_ok());
    }
}
