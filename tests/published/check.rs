//! The files of checks as they are written, and as a list of cases to compare. The layout is described in the README.

use std::collections::BTreeMap;

use serde::Deserialize;

/// A file of checks.
#[derive(Deserialize)]
pub struct File {
    /// Name without extension.
    #[serde(skip)]
    pub name: String,
    /// The whole text, from which the engine reads a ledger of the file's own.
    #[serde(skip)]
    pub text: String,
    /// The checks.
    #[serde(rename = "check")]
    pub checks: Vec<Check>,
}

/// One check; a key that is not listed here is refused.
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Check {
    pub id: String,
    pub kind: Kind,
    pub reaction: Option<String>,
    pub gas_standard: Option<String>,
    pub recipe: Option<BTreeMap<String, i64>>,
    pub ledger: Option<String>,
    pub constant: Option<String>,
    #[serde(default)]
    pub choose: Vec<[String; 2]>,
    #[serde(default)]
    pub sample: BTreeMap<String, Entry>,
    #[serde(default)]
    pub steps: Vec<Vec<String>>,
    #[serde(default)]
    pub model: Model,
    #[serde(default)]
    pub given: Vec<String>,
    pub columns: Vec<String>,
    pub rows: Vec<Vec<Entry>>,
    pub tolerance: BTreeMap<String, Entry>,
    pub difference: Option<String>,
    pub agreement: Option<BTreeMap<String, Entry>>,
    pub quantity: String,
    pub citation: String,
    pub provenance: String,
    pub conditions: String,
    pub uncertainty: Option<String>,
    pub note: Option<String>,
}

/// What has to be calculated.
#[derive(Deserialize, Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
#[serde(rename_all = "snake_case")]
pub enum Kind {
    LogK,
    Enthalpy,
    LogKConstantEnthalpy,
    Sigma,
    ConditionalLogK,
    ActivityCoefficient,
    MeanActivityCoefficient,
    Molality,
    Water,
    Electron,
    MarineConstant,
    PressureFactor,
    State,
}

/// How the rows were calculated.
#[derive(Deserialize, Default)]
#[serde(deny_unknown_fields)]
pub struct Model {
    pub activity_model: Option<String>,
    #[serde(rename = "A")]
    pub a: Option<Entry>,
    pub b: Option<f64>,
    pub delta_epsilon: Option<f64>,
    pub salt: Option<String>,
    pub water_activity: Option<f64>,
    pub neutral_gamma: Option<f64>,
    pub gas: Option<String>,
    pub log_k: Option<f64>,
    pub without: Option<Vec<String>>,
    pub only: Option<Vec<String>>,
}

/// A number or a text.
#[derive(Deserialize, Clone, Debug)]
#[serde(untagged)]
pub enum Entry {
    Number(f64),
    Text(String),
}

/// A row to calculate: what is put in, and what has to come out.
pub struct Case {
    /// Counted from 1; the first where one calculation serves all rows.
    pub row: usize,
    pub given: BTreeMap<String, f64>,
    pub expected: Vec<Expected>,
}

/// A value to meet.
pub struct Expected {
    pub column: String,
    pub value: f64,
    /// Largest distance from `value`.
    pub tolerance: f64,
    /// The distance that would count as agreement, where a difference is marked.
    pub agreement: Option<f64>,
}

impl File {
    /// Reads a file of this folder.
    pub fn read(name: &str) -> Result<Self, String> {
        let text = std::fs::read_to_string(super::folder().join(format!("{name}.toml")));
        let text = text.map_err(|error| format!("{name}.toml: {error}"))?;
        let file: Self = toml::from_str(&text).map_err(|error| format!("{name}.toml: {error}"))?;
        Ok(Self { name: name.into(), text, ..file })
    }
}

impl Check {
    /// The rows, each with its inputs and the values to meet.
    pub fn cases(&self) -> Result<Vec<Case>, String> {
        if self.columns == ["observable", "value", "tolerance"] {
            let expected = self.rows.iter().map(|row| by_row(row)).collect::<Result<_, _>>()?;
            return Ok(vec![Case { row: 1, given: BTreeMap::new(), expected }]);
        }
        self.rows.iter().enumerate().map(|(i, row)| self.case(i + 1, row)).collect()
    }

    fn case(&self, row: usize, entries: &[Entry]) -> Result<Case, String> {
        if entries.len() != self.columns.len() {
            return Err(format!(
                "row {row} has {} entries for {} columns",
                entries.len(),
                self.columns.len()
            ));
        }
        let mut case = Case { row, given: BTreeMap::new(), expected: vec![] };
        for (column, entry) in self.columns.iter().zip(entries) {
            let value = entry.number()?;
            if self.given.contains(column) {
                case.given.insert(column.clone(), value);
                continue;
            }
            let tolerance =
                self.tolerance.get(column).ok_or_else(|| format!("no tolerance for `{column}`"))?;
            let agreement = self.agreement.as_ref().and_then(|limits| limits.get(column));
            case.expected.push(Expected {
                column: column.clone(),
                value,
                tolerance: tolerance.limit(value)?,
                agreement: agreement.map(|limit| limit.limit(value)).transpose()?,
            });
        }
        Ok(case)
    }
}

fn by_row(row: &[Entry]) -> Result<Expected, String> {
    match row {
        [Entry::Text(column), Entry::Number(value), tolerance] => {
            let tolerance = tolerance.limit(*value)?;
            Ok(Expected { column: column.clone(), value: *value, tolerance, agreement: None })
        }
        other => Err(format!("{other:?} is no observable with its value and tolerance")),
    }
}

impl Entry {
    /// A plain number.
    pub fn number(&self) -> Result<f64, String> {
        match self {
            Self::Number(number) => Ok(*number),
            Self::Text(text) => Err(format!("`{text}` is no number")),
        }
    }

    /// A tolerance: absolute, or in per cent of the value.
    fn limit(&self, value: f64) -> Result<f64, String> {
        match self {
            Self::Number(limit) => Ok(*limit),
            Self::Text(text) => {
                let percent = text.strip_suffix('%').and_then(|number| number.trim().parse::<f64>().ok());
                let percent = percent.ok_or_else(|| format!("`{text}` is no tolerance"))?;
                Ok(percent / 100.0 * value.abs())
            }
        }
    }
}
