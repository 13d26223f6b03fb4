//! The numbers behind a figure, as a table that can be written as CSV.

use super::FigureError;

/// A cell.
#[derive(Debug, Clone, PartialEq)]
pub enum Cell {
    /// A number; one that is not finite is left empty in CSV.
    Number(f64),
    /// A text.
    Text(String),
}

/// Rows under named columns; every row has one cell for each column.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Table {
    columns: Vec<String>,
    rows: Vec<Vec<Cell>>,
}

impl Table {
    /// A table without rows.
    #[must_use]
    pub fn new(columns: &[&str]) -> Self {
        Self { columns: columns.iter().map(|&name| name.to_owned()).collect(), rows: Vec::new() }
    }

    /// Names of the columns.
    #[must_use]
    pub fn columns(&self) -> &[String] {
        &self.columns
    }

    /// The rows.
    #[must_use]
    pub fn rows(&self) -> &[Vec<Cell>] {
        &self.rows
    }

    /// Appends a row.
    pub(super) fn push<const N: usize>(&mut self, row: [Cell; N]) {
        debug_assert_eq!(N, self.columns.len(), "a cell for each column");
        self.rows.push(row.into());
    }

    /// The table as CSV with a header row; numbers read back to the same bits.
    ///
    /// # Errors
    /// [`FigureError::Table`] if the text cannot be made; texts are valid UTF-8, so only memory could be the reason.
    ///
    /// ```
    /// use evenpoise::figures::table::Table;
    /// assert_eq!(Table::new(&["round", "ess_fraction"]).to_csv()?, "round,ess_fraction\n");
    /// # Ok::<(), evenpoise::figures::FigureError>(())
    /// ```
    pub fn to_csv(&self) -> Result<String, FigureError> {
        let mut writer = csv::Writer::from_writer(Vec::new());
        let broken = |error: &dyn std::fmt::Display| FigureError::Table(error.to_string());
        writer.write_record(&self.columns).map_err(|error| broken(&error))?;
        for row in &self.rows {
            let cells = row.iter().map(|cell| match cell {
                Cell::Number(value) if value.is_finite() => format!("{value:?}"),
                Cell::Number(_) => String::new(),
                Cell::Text(text) => text.clone(),
            });
            writer.write_record(cells).map_err(|error| broken(&error))?;
        }
        let bytes = writer.into_inner().map_err(|error| broken(&error))?;
        String::from_utf8(bytes).map_err(|error| broken(&error))
    }
}

impl From<f64> for Cell {
    fn from(value: f64) -> Self {
        Self::Number(value)
    }
}

impl From<Option<f64>> for Cell {
    fn from(value: Option<f64>) -> Self {
        Self::Number(value.unwrap_or(f64::NAN))
    }
}

impl From<&str> for Cell {
    fn from(value: &str) -> Self {
        Self::Text(value.to_owned())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn csv_keeps_every_bit_and_quotes_texts() {
        let mut table = Table::new(&["name", "value"]);
        table.push(["level, \"crest\"".into(), (0.1 + 0.2).into()]);
        table.push(["none".into(), None.into()]);
        let csv = table.to_csv().unwrap();
        assert_eq!(csv, "name,value\n\"level, \"\"crest\"\"\",0.30000000000000004\nnone,\n");
    }
}
