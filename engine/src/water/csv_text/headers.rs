//! From headers and options to columns: names, units, which column is the uncertainty of which.

use std::fmt;

use super::layout::Lines;
use super::{ColumnKind, CsvError, CsvOptions, Header, number, rows};
use crate::nearest::nearest;

/// A header as it stands in the file or in the options, in its parts.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct RawHeader {
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
pub(super) struct PlannedColumn {
    pub header: Header,
    /// Position of the values in the file.
    pub values: usize,
    /// Position, header and meaning of the uncertainties.
    pub sigmas: Option<PlannedSigma>,
}

pub(super) struct PlannedSigma {
    pub position: usize,
    pub header: String,
    pub is_percent: bool,
}

/// The headers of the file after `columns` and `units` have been applied, one a position.
pub(super) fn of(lines: &Lines, options: &CsvOptions) -> Result<Vec<RawHeader>, CsvError> {
    let mut texts: Vec<String> = lines.header.clone();
    for (from, to) in &options.columns {
        if to.trim().is_empty() {
            return Err(CsvError::EmptyNewHeader { header: from.clone() });
        }
        // By the headers of the file alone: two columns may swap their names.
        let position = position_of(from, &[&lines.header], "columns")?;
        texts[position].clone_from(to);
    }
    let mut headers: Vec<RawHeader> = texts.iter().map(|text| RawHeader::parse(text)).collect();
    for (name, unit) in &options.units {
        let position = position_of(name, &[&texts, &lines.header], "units")?;
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

/// The position of the header an option names, in the first of these lists that has it.
fn position_of(asked: &str, lists: &[&Vec<String>], option: &'static str) -> Result<usize, CsvError> {
    let asked = asked.trim();
    let found = lists.iter().find_map(|texts| texts.iter().position(|text| text.trim() == asked));
    let headers = lists.first().map(|texts| texts.to_vec()).unwrap_or_default();
    found.ok_or_else(|| CsvError::NoSuchHeader {
        option,
        asked: asked.to_owned(),
        nearest: nearest(asked, headers.iter().map(String::as_str)).map(str::to_owned),
        headers,
    })
}

/// The columns to be read: those of values, each with that of its uncertainties.
pub(super) fn plan(
    lines: &Lines,
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
fn reads_as_numbers(lines: &Lines, position: usize, options: &CsvOptions) -> bool {
    let texts = lines.rows.iter().filter_map(|row| row.cells.get(position));
    let mut present = texts.filter(|text| !rows::is_missing(text, options)).peekable();
    present.peek().is_some() && present.all(|text| number::Reading::of(text).is_ok())
}
