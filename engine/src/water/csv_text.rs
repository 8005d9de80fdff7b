//! The text of a CSV file as located cells: what stands where, and what is wrong with it.
//!
//! Nothing here knows chemistry. A file becomes columns with titles and units, and rows of cells; the caller says
//! which titles hold numbers. What cannot be read without guessing (a decimal comma, an encoding other than UTF-8,
//! a lower bound) is refused with the way out. A bad cell spoils its row, a bad header the file.

use std::collections::BTreeMap;
use std::fmt;
use std::str::FromStr;

use crate::nearest::nearest;

mod error;
mod headers;
mod layout;
mod number;
mod rows;
#[cfg(test)]
mod tests;

pub use error::{CsvError, UnknownBelow};
pub use number::CellFault;

/// The texts that mark a missing value unless [`CsvOptions::missing`] adds to them. An empty cell is one of them.
pub const MISSING: [&str; 5] = ["", "NA", "ND", "-", "n.a."];

/// How a file is to be read.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct CsvOptions {
    /// Further texts that mark a missing value. One that is a number marks every text of that number: `-9999`
    /// also marks `-9999.0`.
    pub missing: Vec<String>,
    /// What stands in for a value below its detection limit.
    pub below: Below,
    /// New headers by the header in the file: `Hydrogencarbonate mg/l` to `alkalinity [mg/L as HCO3^-]`.
    pub columns: BTreeMap<String, String>,
    /// Units of columns whose header states none, by header.
    pub units: BTreeMap<String, String>,
}

/// What stands in for a value below its detection limit L.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub enum Below {
    /// L/2 with the standard uncertainty L/√12: any value from 0 to L is equally likely (JCGM 100:2008, 4.3.7).
    #[default]
    Half,
    /// 0, with no uncertainty stated.
    Zero,
    /// L itself, with no uncertainty stated.
    Limit,
    /// A missing value.
    Skip,
}

/// What the cells of a column are, as far as the caller knows from its title.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ColumnKind {
    /// Numbers: any other text is a fault of its row.
    Numbers,
    /// Texts, whatever they look like.
    Texts,
    /// Numbers if a unit is stated or if all that is there reads as numbers, texts otherwise.
    ByContent,
}

/// A file that has been read.
#[derive(Debug, Clone, PartialEq)]
pub struct CsvText {
    /// The columns, from left to right. Those of uncertainties are part of the columns they belong to.
    pub columns: Vec<Header>,
    /// The rows with anything in them, from top to bottom.
    pub rows: Vec<CsvRow>,
    /// Every value below a detection limit, and what stands in for it.
    pub replacements: Vec<Replacement>,
}

/// The header of one column.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Header {
    /// What the column holds, without the unit.
    pub title: String,
    /// The unit in square brackets after it.
    pub unit: Option<String>,
    /// Whether its cells are numbers.
    pub is_numeric: bool,
}

/// One row.
#[derive(Debug, Clone, PartialEq)]
pub struct CsvRow {
    /// The line of the file it begins in, counted from 1.
    pub line: u64,
    /// One cell for each column; the cell of a fault is the text found there.
    pub cells: Vec<CsvCell>,
    /// All that is wrong with it. A row with faults should not be computed with.
    pub faults: Vec<RowFault>,
}

/// One cell.
#[derive(Debug, Clone, PartialEq)]
pub enum CsvCell {
    /// A number in the unit of its column.
    Number {
        /// The value.
        value: f64,
        /// Its standard uncertainty, from the cell (`41.2 +/- 0.8`) or from the column `… +/-`.
        sigma: Option<f64>,
    },
    /// A text, without the white space around it.
    Text(String),
    /// No value.
    Missing,
}

/// What is wrong with a row, and where.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum RowFault {
    /// The row has not as many cells as the header.
    #[error("line {line}: {found} cells where the header has {expected}{}", ragged_advice(*.found > *.expected))]
    Ragged {
        /// The line of the row.
        line: u64,
        /// Its cells.
        found: usize,
        /// The cells of the header.
        expected: usize,
    },
    /// A cell of a column of numbers is none.
    #[error("line {line}, `{column}`: {fault}")]
    Cell {
        /// The line of the row.
        line: u64,
        /// The header of the column.
        column: String,
        /// Why the text is no number.
        fault: CellFault,
    },
}

/// A value below its detection limit, and what stands in for it.
#[derive(Debug, Clone, PartialEq)]
pub struct Replacement {
    /// The line of the row.
    pub line: u64,
    /// The header of the column.
    pub column: String,
    /// The text of the cell, as `<0.05`.
    pub original: String,
    /// What is used instead.
    pub used: CsvCell,
}

impl CsvText {
    /// Reads a file; `kind` says of a title (without unit) what its column holds.
    ///
    /// The separator is the one of `,`, `;` and tab that stands most often in the header line.
    ///
    /// # Errors
    ///
    /// Returns a [`CsvError`] when the file as a whole cannot be read: its encoding, its header, or an option
    /// that names no column. A fault of one row is in [`CsvRow::faults`].
    ///
    /// # Examples
    ///
    /// ```
    /// use lysocline_engine::water::csv_text::{ColumnKind, CsvCell, CsvOptions, CsvText};
    ///
    /// # fn main() -> Result<(), lysocline_engine::water::csv_text::CsvError> {
    /// let file = "name,pH,Ca [mg/L],Ca +/- [mg/L]\nnorth basin,8.15,41.2,0.8\nsouth basin,\"7,9\",<0.05,\n";
    /// let survey = CsvText::read(file.as_bytes(), &CsvOptions::default(), |_| ColumnKind::ByContent)?;
    /// assert_eq!(survey.columns[2].to_string(), "Ca [mg/L]");
    /// assert_eq!(survey.rows[0].cells[2], CsvCell::Number { value: 41.2, sigma: Some(0.8) });
    /// assert_eq!(
    ///     survey.replacements[0].to_string(),
    ///     "line 3, `Ca [mg/L]`: `<0.05` is taken as 0.025 +/- 0.0144"
    /// );
    /// # Ok(())
    /// # }
    /// ```
    pub fn read(
        bytes: &[u8],
        options: &CsvOptions,
        kind: impl Fn(&str) -> ColumnKind,
    ) -> Result<Self, CsvError> {
        let lines = layout::Lines::read(layout::decoded(bytes)?)?;
        let headers = headers::of(&lines, options)?;
        let plan = headers::plan(&lines, headers, options, kind)?;
        let mut replacements = Vec::new();
        let width = lines.header.len();
        let rows = lines.rows.iter().map(|row| rows::read(row, width, &plan, options, &mut replacements));
        Ok(Self {
            rows: rows.collect(),
            columns: plan.into_iter().map(|column| column.header).collect(),
            replacements,
        })
    }
}

impl fmt::Display for Header {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match &self.unit {
            Some(unit) => write!(f, "{} [{unit}]", self.title),
            None => f.write_str(&self.title),
        }
    }
}

impl fmt::Display for Replacement {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self { line, column, original, used } = self;
        write!(f, "line {line}, `{column}`: `{original}` is taken as ")?;
        match used {
            CsvCell::Number { value, sigma: Some(sigma) } => {
                write!(f, "{value} +/- {}", number::to_three_digits(*sigma))
            }
            CsvCell::Number { value, sigma: None } => write!(f, "{value}"),
            CsvCell::Text(text) => f.write_str(text),
            CsvCell::Missing => f.write_str("missing"),
        }
    }
}

impl Header {
    /// The header as it should read, where its last word looks like a unit: `Ca (mg/L)` and `Ca mg/L` give
    /// `Ca [mg/L]`. For the message about a title that means nothing.
    #[must_use]
    pub fn suggestion(&self) -> Option<String> {
        let (name, last) = self.title.rsplit_once([' ', ','])?;
        let unit = last.trim_start_matches('(').trim_end_matches(')');
        let like_a_unit = unit.contains('/') || ["%", "°C", "degC", "ppm", "ppb"].contains(&unit);
        (self.unit.is_none() && like_a_unit)
            .then(|| format!("{} [{unit}]", name.trim_end_matches([',', ' '])))
    }
}

impl FromStr for Below {
    type Err = UnknownBelow;

    /// `half`, `zero`, `limit` or `skip`.
    fn from_str(text: &str) -> Result<Self, UnknownBelow> {
        let policies =
            [("half", Self::Half), ("zero", Self::Zero), ("limit", Self::Limit), ("skip", Self::Skip)];
        let found = policies.iter().find(|(name, _)| *name == text);
        found.map(|(_, policy)| *policy).ok_or_else(|| UnknownBelow {
            asked: text.to_owned(),
            nearest: nearest(text, policies.iter().map(|(name, _)| *name)).map(str::to_owned),
        })
    }
}

impl Below {
    fn stand_in(self, limit: f64) -> CsvCell {
        match self {
            Self::Half => CsvCell::Number { value: limit / 2.0, sigma: Some(limit / 12.0_f64.sqrt()) },
            Self::Zero => CsvCell::Number { value: 0.0, sigma: None },
            Self::Limit => CsvCell::Number { value: limit, sigma: None },
            Self::Skip => CsvCell::Missing,
        }
    }
}

fn ragged_advice(too_many: bool) -> &'static str {
    if too_many {
        ": put a text with a separator in it in quotes, and write decimals with a point"
    } else {
        ": separate empty cells too"
    }
}
