//! The text of a CSV file as located cells: what stands where, and what is wrong with it.
//!
//! Nothing here knows chemistry. A file becomes columns with titles and units, and rows of cells; the caller says
//! which titles hold numbers. What cannot be read without guessing (a decimal comma, an encoding other than UTF-8,
//! a lower bound) is refused with the way out. A bad cell spoils its row, a bad header the file.

use std::collections::BTreeMap;
use std::fmt;

use crate::nearest::nearest;

mod layout;
mod number;
#[cfg(test)]
mod tests;

pub use layout::CsvError;
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
        let headers = headers(&lines, options)?;
        let plan = plan(&lines, headers, options, kind)?;
        let mut replacements = Vec::new();
        let width = lines.header.len();
        let rows =
            lines.rows.iter().map(|row| read_row(row, width, &plan, options, &mut replacements)).collect();
        Ok(Self { columns: plan.into_iter().map(|column| column.header).collect(), rows, replacements })
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

/// A header as it stands in the file or in the options, in its parts.
#[derive(Debug, Clone, PartialEq)]
struct RawHeader {
    title: String,
    unit: Option<String>,
    is_sigma: bool,
}

impl RawHeader {
    /// `name`, `name [unit]`, `name +/- [unit]` or `name [unit] +/-`; `±` for `+/-`.
    fn parse(text: &str) -> Self {
        let text = text.split_whitespace().collect::<Vec<_>>().join(" ").replace('±', "+/-");
        let (text, mark_last) = without_mark(&text);
        let (name, unit) = match text.strip_suffix(']').and_then(|rest| rest.rsplit_once('[')) {
            Some((name, unit)) if !name.trim().is_empty() && !unit.trim().is_empty() => (name, Some(unit)),
            _ => (text, None),
        };
        let (name, mark_first) = without_mark(name);
        Self {
            title: name.to_owned(),
            unit: unit.map(|unit| unit.trim().to_owned()),
            is_sigma: mark_first || mark_last,
        }
    }
}

impl fmt::Display for RawHeader {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mark = if self.is_sigma { " +/-" } else { "" };
        match &self.unit {
            Some(unit) => write!(f, "{}{mark} [{unit}]", self.title),
            None => write!(f, "{}{mark}", self.title),
        }
    }
}

fn without_mark(text: &str) -> (&str, bool) {
    let text = text.trim();
    text.strip_suffix("+/-").map_or((text, false), |rest| (rest.trim(), true))
}

/// A column to be read: where its values and their uncertainties stand.
struct PlannedColumn {
    header: Header,
    /// Position of the values in the file.
    values: usize,
    /// Position, header and meaning of the uncertainties.
    sigmas: Option<PlannedSigma>,
}

struct PlannedSigma {
    position: usize,
    header: String,
    is_percent: bool,
}

/// The headers of the file after `columns` and `units` have been applied, one a position.
fn headers(lines: &layout::Lines, options: &CsvOptions) -> Result<Vec<RawHeader>, CsvError> {
    let mut in_file: Vec<String> = lines.header.clone();
    for (from, to) in &options.columns {
        let position = position_of(from, &in_file, &lines.header, "columns")?;
        in_file[position].clone_from(to);
    }
    let mut headers: Vec<RawHeader> = in_file.iter().map(|text| RawHeader::parse(text)).collect();
    for (name, unit) in &options.units {
        let position = position_of(name, &in_file, &lines.header, "units")?;
        let header = &mut headers[position];
        if header.unit.is_some() {
            return Err(CsvError::UnitTwice { header: header.to_string(), unit: unit.clone() });
        }
        header.unit = Some(unit.clone());
    }
    for (position, header) in headers.iter().enumerate() {
        if let Some(first) = headers[..position].iter().position(|other| other == header) {
            return Err(CsvError::DuplicateHeader {
                header: header.to_string(),
                first: first + 1,
                second: position + 1,
            });
        }
    }
    Ok(headers)
}

/// The position of the header an option names, by its present text or by that in the file.
fn position_of(
    asked: &str,
    headers: &[String],
    in_file: &[String],
    option: &'static str,
) -> Result<usize, CsvError> {
    let asked = asked.trim();
    let found = [headers, in_file].iter().find_map(|texts| texts.iter().position(|text| text == asked));
    found.ok_or_else(|| CsvError::NoSuchHeader {
        option,
        asked: asked.to_owned(),
        nearest: nearest(asked, headers.iter().map(String::as_str)).map(str::to_owned),
        headers: headers.to_vec(),
    })
}

fn plan(
    lines: &layout::Lines,
    headers: Vec<RawHeader>,
    options: &CsvOptions,
    kind: impl Fn(&str) -> ColumnKind,
) -> Result<Vec<PlannedColumn>, CsvError> {
    let mut columns: Vec<PlannedColumn> = Vec::new();
    for (position, header) in headers.iter().enumerate().filter(|(_, header)| !header.is_sigma) {
        let is_numeric = match kind(&header.title) {
            ColumnKind::Numbers => true,
            ColumnKind::Texts => false,
            ColumnKind::ByContent => header.unit.is_some() || reads_as_numbers(lines, position, options),
        };
        let header = Header { title: header.title.clone(), unit: header.unit.clone(), is_numeric };
        columns.push(PlannedColumn { header, values: position, sigmas: None });
    }
    for (position, header) in headers.iter().enumerate().filter(|(_, header)| header.is_sigma) {
        let column = column_of_sigma(header, &mut columns)?;
        let is_percent = header.unit.as_deref() == Some("%") && column.header.unit.as_deref() != Some("%");
        column.header.is_numeric = true;
        column.sigmas = Some(PlannedSigma { position, header: header.to_string(), is_percent });
    }
    Ok(columns)
}

/// The column whose uncertainties stand under `header`: of the same name, and of the same unit if it states one.
fn column_of_sigma<'a>(
    header: &RawHeader,
    columns: &'a mut [PlannedColumn],
) -> Result<&'a mut PlannedColumn, CsvError> {
    let namesakes: Vec<usize> =
        (0..columns.len()).filter(|idx| columns[*idx].header.title == header.title).collect();
    let Some(first) = namesakes.first() else {
        return Err(CsvError::SigmaWithoutColumn { header: header.to_string(), title: header.title.clone() });
    };
    let same_unit = |idx: &&usize| columns[**idx].header.unit == header.unit;
    let by_unit = namesakes.iter().find(same_unit).copied();
    let only_one = namesakes.len() == 1 && matches!(header.unit.as_deref(), None | Some("%"));
    let idx = by_unit.or_else(|| only_one.then_some(*first)).ok_or_else(|| CsvError::SigmaUnit {
        header: header.to_string(),
        column: columns[*first].header.to_string(),
    })?;
    let column = &mut columns[idx];
    if let Some(other) = &column.sigmas {
        return Err(CsvError::SigmaTwice {
            first: other.header.clone(),
            second: header.to_string(),
            column: column.header.to_string(),
        });
    }
    Ok(column)
}

/// Whether there is a number in this column, and nothing but numbers and missing values.
fn reads_as_numbers(lines: &layout::Lines, position: usize, options: &CsvOptions) -> bool {
    let texts = lines.rows.iter().filter_map(|row| row.cells.get(position));
    let mut present = texts.filter(|text| !is_missing(text, options)).peekable();
    present.peek().is_some() && present.all(|text| number::Reading::of(text).is_ok())
}

fn is_missing(text: &str, options: &CsvOptions) -> bool {
    let added = options.missing.iter().map(|marker| marker.trim());
    let same_number =
        |marker: &str| number::plain(marker).zip(number::plain(text)).is_some_and(|(a, b)| a == b);
    MISSING.into_iter().chain(added).any(|marker| marker == text || same_number(marker))
}

fn read_row(
    row: &layout::Line,
    width: usize,
    columns: &[PlannedColumn],
    options: &CsvOptions,
    replacements: &mut Vec<Replacement>,
) -> CsvRow {
    let mut faults = Vec::new();
    if row.cells.len() != width {
        // The cells may have moved, so none of them is read as a number.
        faults.push(RowFault::Ragged { line: row.line, found: row.cells.len(), expected: width });
        let cells = columns.iter().map(|column| text_cell(row.cells.get(column.values))).collect();
        return CsvRow { line: row.line, cells, faults };
    }
    let mut cells = Vec::with_capacity(columns.len());
    for column in columns {
        if !column.header.is_numeric {
            cells.push(text_cell(row.cells.get(column.values)));
            continue;
        }
        let text = &row.cells[column.values];
        let cell = number_cell(text, options).map_err(|fault| (column.header.to_string(), fault));
        let cell = cell.and_then(|cell| with_sigma(cell, row, column, options));
        match cell {
            Ok((cell, is_replaced)) => {
                if is_replaced {
                    replacements.push(Replacement {
                        line: row.line,
                        column: column.header.to_string(),
                        original: text.clone(),
                        used: cell.clone(),
                    });
                }
                cells.push(cell);
            }
            Err((column, fault)) => {
                faults.push(RowFault::Cell { line: row.line, column, fault });
                cells.push(text_cell(Some(text)));
            }
        }
    }
    CsvRow { line: row.line, cells, faults }
}

/// In a column of texts only an empty cell is missing: `ND` may be a name.
fn text_cell(text: Option<&String>) -> CsvCell {
    text.filter(|text| !text.is_empty()).map_or(CsvCell::Missing, |text| CsvCell::Text(text.clone()))
}

/// The cell, and whether it stands in for a value below its detection limit.
fn number_cell(text: &str, options: &CsvOptions) -> Result<(CsvCell, bool), CellFault> {
    if is_missing(text, options) {
        return Ok((CsvCell::Missing, false));
    }
    Ok(match number::Reading::of(text)? {
        number::Reading::Value { value, sigma } => (CsvCell::Number { value, sigma }, false),
        number::Reading::Below { limit } => (options.below.stand_in(limit), true),
    })
}

/// The cell with the uncertainty that stands in its own column; what stands in for a value keeps its own.
fn with_sigma(
    (cell, is_replaced): (CsvCell, bool),
    row: &layout::Line,
    column: &PlannedColumn,
    options: &CsvOptions,
) -> Result<(CsvCell, bool), (String, CellFault)> {
    let Some(planned) = &column.sigmas else { return Ok((cell, is_replaced)) };
    let text = &row.cells[planned.position];
    if is_missing(text, options) {
        return Ok((cell, is_replaced));
    }
    let stated = number::sigma(text).map_err(|fault| (planned.header.clone(), fault))?;
    let cell = match cell {
        CsvCell::Number { value, sigma: None } if !is_replaced => {
            let sigma = if planned.is_percent { value.abs() * stated / 100.0 } else { stated };
            CsvCell::Number { value, sigma: Some(sigma) }
        }
        CsvCell::Number { sigma: Some(_), .. } if !is_replaced => {
            return Err((planned.header.clone(), CellFault::SigmaTwice { text: text.clone() }));
        }
        other => other,
    };
    Ok((cell, is_replaced))
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
