//! From cells as texts to cells as values, and to what is wrong with them.

use super::headers::PlannedColumn;
use super::layout::Line;
use super::number::{self, Reading};
use super::{CellFault, CsvCell, CsvOptions, CsvRow, MISSING, Replacement, RowFault};

/// One row; what stands in for values below their detection limits is added to `replacements`.
pub(super) fn read(
    row: &Line,
    width: usize,
    columns: &[PlannedColumn],
    options: &CsvOptions,
    replacements: &mut Vec<Replacement>,
) -> CsvRow {
    let mut read = CsvRow { line: row.line, cells: Vec::with_capacity(columns.len()), faults: Vec::new() };
    if row.cells.len() != width {
        // The cells may have moved, so none of them is read as a number.
        read.faults.push(RowFault::Ragged { line: row.line, found: row.cells.len(), expected: width });
        read.cells.extend(columns.iter().map(|column| text_cell(row.cells.get(column.values))));
        return read;
    }
    for column in columns {
        match read_cell(row, column, options) {
            Ok((cell, replacement)) => {
                read.cells.push(cell);
                replacements.extend(replacement);
            }
            Err(fault) => {
                read.cells.push(text_cell(row.cells.get(column.values)));
                read.faults.push(fault);
            }
        }
    }
    read
}

/// Whether the text marks a missing value.
pub(super) fn is_missing(text: &str, options: &CsvOptions) -> bool {
    let number = number::plain(text);
    let is_marker = |marker: &str| marker == text || (number.is_some() && number::plain(marker) == number);
    MISSING.contains(&text) || options.missing.iter().any(|marker| is_marker(marker.trim()))
}

fn read_cell(
    row: &Line,
    column: &PlannedColumn,
    options: &CsvOptions,
) -> Result<(CsvCell, Option<Replacement>), RowFault> {
    let text = &row.cells[column.values];
    let header = || column.header.to_string();
    if !column.header.is_numeric {
        return Ok((text_cell(Some(text)), None));
    }
    if is_missing(text, options) {
        return Ok((CsvCell::Missing, None));
    }
    match Reading::of(text).map_err(|fault| RowFault::Cell { line: row.line, column: header(), fault })? {
        Reading::Value { value, sigma } => {
            let sigma = with_own_column(value, sigma, row, column, options)?;
            Ok((CsvCell::Number { value, sigma }, None))
        }
        // What stands in for a value has its own uncertainty, or none.
        Reading::Below { limit } => {
            let used = options.below.stand_in(limit);
            let (original, column) = (text.clone(), header());
            Ok((used.clone(), Some(Replacement { line: row.line, column, original, used })))
        }
    }
}

/// The uncertainty of `value`, stated with it (`in_cell`) or in a column of its own, but not in both.
fn with_own_column(
    value: f64,
    in_cell: Option<f64>,
    row: &Line,
    column: &PlannedColumn,
    options: &CsvOptions,
) -> Result<Option<f64>, RowFault> {
    let Some(sigmas) = &column.sigmas else { return Ok(in_cell) };
    let text = &row.cells[sigmas.position];
    if is_missing(text, options) {
        return Ok(in_cell);
    }
    let stated = match in_cell {
        None => number::sigma(text),
        Some(_) => Err(CellFault::SigmaTwice { text: text.clone() }),
    };
    let fault = |fault| RowFault::Cell { line: row.line, column: sigmas.header.clone(), fault };
    let share = if sigmas.is_percent { value.abs() / 100.0 } else { 1.0 };
    stated.map(|stated| Some(stated * share)).map_err(fault)
}

/// In a column of texts only an empty cell is missing: `ND` may be a name.
fn text_cell(text: Option<&String>) -> CsvCell {
    text.filter(|text| !text.is_empty()).map_or(CsvCell::Missing, |text| CsvCell::Text(text.clone()))
}
