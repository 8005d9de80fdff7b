//! Samples from a survey: each row of a CSV file becomes a sample; a bad cell spoils its row, not the file.

use std::collections::BTreeMap;

use super::analysis::KEYS;
use super::analyte::{Analyte, AnalyteError};
use super::csv_text::{ColumnKind, CsvCell, CsvError, CsvOptions, CsvText, Header};
use super::marine;
use super::sample::Sample;
use crate::named::Value;
use crate::quantity::{Quantity, QuantityError};
use crate::text::list;
use crate::units::{Kind, Unit, UnitError};

/// A survey that was read.
#[derive(Debug, Clone)]
pub struct Survey {
    /// One sample a row; a row with a fault is a spoilt sample that names it.
    pub samples: Vec<Sample>,
    /// Values below a detection limit and what stands in for them, in words.
    pub replacements: Vec<String>,
    /// Faults of rows, in words.
    pub faults: Vec<String>,
}

/// Why a file is no survey.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SurveyError {
    /// The text is at fault.
    #[error(transparent)]
    Csv(#[from] CsvError),
    /// A header carries a unit that cannot be read, or one of another kind.
    #[error("column `{column}`: {error}")]
    Unit {
        /// The header.
        column: String,
        /// What is wrong with its unit.
        error: UnitError,
    },
    /// A header with a unit that names nothing a sample knows.
    #[error("column `{column}`: {error}")]
    Analyte {
        /// The header.
        column: String,
        /// Why it names nothing.
        error: AnalyteError,
    },
}

/// Keys of a sample that a column of text may set.
const TEXT_KEYS: [&str; 1] = ["name"];

impl Survey {
    /// Reads a CSV file with units in its header.
    ///
    /// A column is an amount or another key of a sample if its title is one; columns that are neither become labels.
    ///
    /// # Errors
    ///
    /// Returns what is wrong with the file or with a header; faults of rows are in the samples.
    pub fn read(bytes: &[u8], options: &CsvOptions) -> Result<Self, SurveyError> {
        let mut text = CsvText::read(bytes, options, kind)?;
        // A salinity makes seawaters of the rows, and a depth more than words about them.
        let is_marine = text.columns.iter().any(|header| header.title == "salinity");
        if is_marine {
            text = CsvText::read(bytes, options, marine_kind)?;
        }
        let column = |header: &Header| Column::of(header, is_marine);
        let columns = text.columns.iter().map(column).collect::<Result<Vec<_>, _>>()?;
        let mut faults = Vec::new();
        let samples = text.rows.iter().map(|row| {
            let mut notes: Vec<String> =
                text.replacements.iter().filter(|r| r.line == row.line).map(ToString::to_string).collect();
            notes.extend(not_measured(&columns, &row.cells));
            let sample = if row.faults.is_empty() {
                read_row(&columns, &row.cells, is_marine)
                    .map_err(|message| format!("line {}: {message}", row.line))
            } else {
                Err(row.faults.iter().map(ToString::to_string).collect::<Vec<_>>().join("; "))
            };
            let labels = labels(&columns, &row.cells);
            match sample {
                Ok(sample) => sample.with_labels(labels, notes),
                Err(fault) => {
                    faults.push(fault.clone());
                    Sample::spoilt(name(&columns, &row.cells), labels, fault)
                }
            }
        });
        let samples = samples.collect();
        Ok(Self {
            samples,
            replacements: text.replacements.iter().map(ToString::to_string).collect(),
            faults,
        })
    }
}

/// A column with what it means.
struct Column {
    title: String,
    meaning: Meaning,
}

enum Meaning {
    /// A key of a sample, with the unit of its numbers; `None`: the default of the key.
    Key(Option<Unit>),
    /// Words about the sample.
    Label,
}

impl Column {
    fn of(header: &Header, is_marine: bool) -> Result<Self, SurveyError> {
        let title = header.title.clone();
        let unit = header.unit.as_deref().map(Unit::parse).transpose();
        let unit = unit.map_err(|error| SurveyError::Unit { column: header.to_string(), error })?;
        let analyte = Analyte::parse(&title);
        let is_key = KEYS.contains(&title.as_str()) || (is_marine && marine::KEYS.contains(&title.as_str()));
        if is_key || analyte.is_ok() {
            if let (Some(unit), Some(kind)) = (&unit, kind_of(&title)) {
                kind.check(unit).map_err(|error| SurveyError::Unit { column: header.to_string(), error })?;
            }
            return Ok(Self { title, meaning: Meaning::Key(unit) });
        }
        // A unit of concentration on something unknown is a misspelt analyte rather than a label.
        match (unit, analyte) {
            (Some(unit), Err(error)) if Kind::Amount.accepts(&unit) => {
                Err(SurveyError::Analyte { column: header.to_string(), error })
            }
            _ => Ok(Self { title: header.to_string(), meaning: Meaning::Label }),
        }
    }
}

fn kind(title: &str) -> ColumnKind {
    match title {
        title if TEXT_KEYS.contains(&title) => ColumnKind::Texts,
        title if KEYS.contains(&title) || Analyte::parse(title).is_ok() => ColumnKind::Numbers,
        _ => ColumnKind::Texts,
    }
}

fn marine_kind(title: &str) -> ColumnKind {
    match title {
        "ph_scale" => ColumnKind::Texts,
        title if marine::KEYS.contains(&title) => ColumnKind::Numbers,
        title => kind(title),
    }
}

fn kind_of(key: &str) -> Option<Kind> {
    match key {
        "temperature" | "volume_temperature" | "pH_temperature" | "fCO2_temperature" => {
            Some(Kind::Temperature)
        }
        "salinity" => Some(Kind::Salinity),
        "depth" => Some(Kind::Length),
        "latitude" | "ph_scale" => None,
        "air_pressure" | "pressure" | "fCO2" | "pCO2" => Some(Kind::Pressure),
        "density" => Some(Kind::Density),
        "alkalinity" => Some(Kind::Alkalinity),
        "pH" | "xCO2" => Some(Kind::Fraction),
        "water" => Some(Kind::Mass),
        key if KEYS.contains(&key) && key != "DIC" => None,
        _ => Some(Kind::Amount),
    }
}

fn read_row(columns: &[Column], cells: &[CsvCell], is_marine: bool) -> Result<Sample, String> {
    let mut entries = BTreeMap::new();
    for (column, cell) in columns.iter().zip(cells) {
        let Meaning::Key(unit) = &column.meaning else { continue };
        let value = match cell {
            CsvCell::Missing => continue,
            CsvCell::Text(text) => Value::Text(text.clone()),
            CsvCell::Number { value, sigma } => number(*value, *sigma, unit.as_ref(), &column.title)
                .map_err(|error| format!("`{}`: {error}", column.title))?,
        };
        entries.insert(column.title.clone(), value);
    }
    let read = if is_marine { Sample::read_seawater } else { Sample::read };
    read(entries).map_err(|error| error.to_string())
}

fn number(value: f64, sigma: Option<f64>, unit: Option<&Unit>, label: &str) -> Result<Value, QuantityError> {
    match (unit, sigma, kind_of(label)) {
        (None, None, _) | (None, _, None) => Ok(Value::Number(value)),
        (None, Some(_), Some(kind)) => {
            Quantity::measured(value, kind.default_unit(), sigma, label).map(Value::Quantity)
        }
        (Some(unit), sigma, _) => Quantity::measured(value, unit.clone(), sigma, label).map(Value::Quantity),
    }
}

/// What a row leaves empty is taken as none of it, which has to be said.
fn not_measured(columns: &[Column], cells: &[CsvCell]) -> Option<String> {
    let is_empty = |(column, cell): &(&Column, &CsvCell)| {
        **cell == CsvCell::Missing
            && matches!(column.meaning, Meaning::Key(_))
            && (Analyte::parse(&column.title).is_ok()
                || marine::NUTRIENTS.iter().any(|(name, _)| *name == column.title))
    };
    let empty: Vec<&str> =
        columns.iter().zip(cells).filter(is_empty).map(|(column, _)| column.title.as_str()).collect();
    (!empty.is_empty()).then(|| format!("not measured, so taken as none: {}", list(&empty)))
}

fn labels(columns: &[Column], cells: &[CsvCell]) -> BTreeMap<String, String> {
    let words = columns.iter().zip(cells).filter_map(|(column, cell)| match (&column.meaning, cell) {
        (Meaning::Label, CsvCell::Text(text)) => Some((column.title.clone(), text.clone())),
        _ => None,
    });
    words.collect()
}

fn name(columns: &[Column], cells: &[CsvCell]) -> Option<String> {
    columns.iter().zip(cells).find_map(|(column, cell)| match cell {
        CsvCell::Text(text) if column.title == "name" => Some(text.clone()),
        _ => None,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn read(text: &str) -> Survey {
        Survey::read(text.as_bytes(), &CsvOptions::default()).unwrap()
    }

    #[test]
    fn rows_become_samples_and_bad_cells_spoil_their_row() {
        let survey = read(
            "name,date,pH,alkalinity [mg/L as CaCO3],Ca [mg/L],F [mg/L]\n\"north, 5 m\",2026-05-02,8.1,120,41.2,<0.05\n\
             south,2026-05-03,\"7,9\",110,39,0.1\n",
        );
        assert_eq!(survey.samples.len(), 2);
        assert_eq!(survey.samples[0].name(), Some("north, 5 m"));
        assert_eq!(survey.samples[0].labels()["date"], "2026-05-02");
        assert_eq!(survey.replacements.len(), 1);
        assert_eq!(survey.faults.len(), 1);
        assert_eq!(survey.samples[1].name(), Some("south"));
    }

    #[test]
    fn a_misspelt_analyte_or_unit_stops_the_file() {
        let error =
            |text: &str| Survey::read(text.as_bytes(), &CsvOptions::default()).unwrap_err().to_string();
        assert!(error("pH,Cq [mg/L]\n8,1\n").contains("column `Cq [mg/L]`: `Cq` is no element"));
        assert!(error("pH,Ca [mgg/L]\n8,1\n").contains("unknown unit"));
        assert!(error("pH,temperature [mg/L]\n8,1\n").contains("is no unit of temperature"));
    }
}
