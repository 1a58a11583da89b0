//! The rows of a view, file by file, for export.

use super::{Day, RecordError, View};
use rusqlite::types::ValueRef;

/// Which rows of a view are wanted.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Choice {
    /// Column and text that it must have.
    pub equal: Option<(String, String)>,
    /// Column of times with the first text that is wanted …
    pub from: Option<(String, String)>,
    /// … and the last.
    pub to: Option<(String, String)>,
}

impl Day {
    /// The columns of a view.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn view_columns(&self, view: &View) -> Result<Vec<String>, RecordError> {
        let statement = self
            .connection
            .prepare(&format!("SELECT * FROM {}", view.name));
        let statement = statement.map_err(|error| RecordError::from(error).of(self.path()))?;
        let names = statement.column_names();
        Ok(names.into_iter().map(str::to_owned).collect())
    }

    /// Hands every wanted row of a view to `take`, in the record's order, cell by cell.
    ///
    /// # Errors
    /// When the file can't be read, or what `take` says.
    pub fn view_rows<E: From<RecordError>>(
        &self,
        view: &View,
        choice: &Choice,
        mut take: impl FnMut(&[ValueRef<'_>]) -> Result<(), E>,
    ) -> Result<(), E> {
        let failed = |error| RecordError::from(error).of(self.path());
        let conditions = [
            (&choice.equal, "="),
            (&choice.from, ">="),
            (&choice.to, "<="),
        ];
        let mut parameters = Vec::new();
        let mut wanted = Vec::new();
        for (condition, sign) in conditions {
            if let Some((column, text)) = condition {
                parameters.push(text.as_str());
                wanted.push(format!("{column} {sign} ?{}", parameters.len()));
            }
        }
        let filter = if wanted.is_empty() {
            String::new()
        } else {
            format!(" WHERE {}", wanted.join(" AND "))
        };
        let text = format!("SELECT * FROM {}{filter} ORDER BY position", view.name);
        let mut statement = self.connection.prepare(&text).map_err(failed)?;
        let columns = statement.column_count();
        let parameters = rusqlite::params_from_iter(parameters);
        let mut rows = statement.query(parameters).map_err(failed)?;
        while let Some(row) = rows.next().map_err(failed)? {
            let cells = (0..columns).map(|column| row.get_ref(column));
            let cells: Vec<ValueRef<'_>> = cells.collect::<Result<_, _>>().map_err(failed)?;
            take(&cells)?;
        }
        Ok(())
    }

    /// How often the engine said what after an input, by kind.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn outputs_after(&self, input: i64) -> Result<Vec<(String, u64)>, RecordError> {
        let read = || -> rusqlite::Result<Vec<(String, u64)>> {
            let mut statement = self
                .connection
                .prepare("SELECT kind, count(*) FROM outputs WHERE input > ?1 GROUP BY kind")?;
            let rows = statement.query_map([input], |row| {
                let count: i64 = row.get(1)?;
                Ok((row.get(0)?, count.unsigned_abs()))
            })?;
            rows.collect()
        };
        read().map_err(|error| RecordError::from(error).of(self.path()))
    }
}
