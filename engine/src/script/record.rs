//! `record` and `expect`: the values a script is about, and its own expected answers.

use rhai::Dynamic;
use rhai::plugin::*;

use super::host::Shown;
use super::numbers::general;
use super::reaction::plain;
use super::{Fail, Host, ScriptResult, Vocabulary, fail};
use crate::quantity::Quantity;
use crate::units::{Style, Unit};

/// Registers the functions.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary.module(rhai::exported_module!(record_functions));
}

/// A value a script marked.
#[derive(Debug, Clone, PartialEq)]
pub struct Record {
    /// What it is called; no two records of a run share a label.
    pub label: String,
    /// The value.
    pub value: Recorded,
    /// What a check expected, if it comes from one.
    pub expected: Option<Expected>,
}

/// What was recorded.
#[derive(Debug, Clone, PartialEq)]
pub enum Recorded {
    /// A number with its standard uncertainty, both in the unit.
    Number {
        /// The value.
        value: f64,
        /// Its standard uncertainty; `None` where not known.
        sigma: Option<f64>,
        /// In ASCII; empty for a plain number.
        unit: String,
    },
    /// A text or a truth value.
    Text(String),
}

/// The answer a check expected.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Expected {
    /// The expected value, in the unit of the value.
    pub value: f64,
    /// How far the value may be from it.
    pub tolerance: f64,
}

/// The records of a run, in order.
#[derive(Debug, Default)]
pub struct Records {
    list: Vec<Record>,
    /// Whether a label may be used once only: in a script, not at the prompt, where an entry may be repeated.
    once: bool,
}

impl Records {
    /// All of them.
    #[must_use]
    pub fn all(&self) -> &[Record] {
        &self.list
    }

    /// A script begins.
    pub(super) fn begin(&mut self) {
        *self = Self { list: Vec::new(), once: true };
    }

    fn add(&mut self, record: Record) -> Result<(), Fail> {
        match self.list.iter_mut().find(|other| other.label == record.label) {
            None => self.list.push(record),
            Some(_) if self.once => {
                return Err(fail(format!("`{}` is recorded twice", record.label))
                    .help("give each result a label of its own; in a loop make the label from the row, `pH of ${name}`")
                    .argument(0));
            }
            Some(other) => *other = record,
        }
        Ok(())
    }

    /// Checks may share a label, as in a loop: the second is `label (2)`.
    fn add_check(&mut self, record: Record) -> Record {
        let taken = |label: &str| self.list.iter().any(|other| other.label == label);
        let mut label = record.label.clone();
        let mut n = 2;
        while self.once && taken(&label) {
            label = format!("{} ({n})", record.label);
            n += 1;
        }
        let record = Record { label, ..record };
        self.list.retain(|other| other.label != record.label);
        self.list.push(record.clone());
        record
    }
}

fn recorded(value: &Dynamic) -> Result<Recorded, Fail> {
    let text = |text: String| Ok(Recorded::Text(text));
    if let Some(quantity) = value.read_lock::<Quantity>() {
        let unit = if *quantity.unit() == Unit::one() {
            String::new()
        } else {
            quantity.unit().display(Style::Ascii)
        };
        return Ok(Recorded::Number { value: quantity.value(), sigma: quantity.sigma(), unit });
    }
    if let Some(words) = value.read_lock::<rhai::ImmutableString>() {
        return text(words.to_string());
    }
    if let Ok(truth) = value.as_bool() {
        return text(truth.to_string());
    }
    let number = plain("`record`", value).map_err(|_| {
        fail(format!("`record` keeps a number, a quantity or a text, not {}", super::docs::described(value)))
            .help("of a table or a run record the numbers that matter: `record(\"mean pH\", t.column(\"pH\").mean)`")
            .argument(1)
    })?;
    Ok(Recorded::Number { value: number, sigma: None, unit: String::new() })
}

/// The value as a number in its own unit.
fn own_number(given: &Dynamic) -> Result<f64, Fail> {
    match given.read_lock::<Quantity>() {
        Some(quantity) => Ok(quantity.value()),
        None => plain("`expect`", given),
    }
}

/// An absolute tolerance, or a percentage of the expected value.
fn tolerance(given: &Dynamic, expected: f64) -> Result<f64, Fail> {
    let wrong = || fail("a tolerance is a number, or a percentage such as `\"0.5 %\"`").argument(3);
    let number = match given.read_lock::<rhai::ImmutableString>() {
        None => plain("a tolerance", given).map_err(|_| wrong())?,
        Some(text) => {
            let percent = text.trim().strip_suffix('%').and_then(|number| number.trim().parse::<f64>().ok());
            percent.ok_or_else(wrong)? / 100.0 * expected.abs()
        }
    };
    if number >= 0.0 { Ok(number) } else { Err(wrong()) }
}

/// Results worth keeping, and checks inside a script.
#[export_module]
mod record_functions {
    use super::*;

    /// Marks a result worth keeping under a label of its own: it stands in the report, and `lysocline seal` writes it into
    /// the file so that `lysocline verify` can tell whether it still comes out the same.
    ///
    /// ```rhai
    /// record("pH of rain", sample(#{ pH: "electroneutral" }).open_to("CO2(g)", "420 uatm").equilibrate().pH)
    /// ```
    #[rhai_fn(return_raw)]
    pub fn record(context: NativeCallContext, label: &str, value: Dynamic) -> ScriptResult<()> {
        let host = Host::of(&context);
        host.rests_on(&value);
        let record = Record { label: label.to_owned(), value: recorded(&value)?, expected: None };
        host.records().add(record.clone())?;
        host.report(Shown::Record(record));
        Ok(())
    }

    /// Fails the run when a value is further from the expected one than a tolerance: a number in the value's own unit, or
    /// a percentage. The value is recorded under the label.
    ///
    /// ```rhai
    /// expect("pH of rain", sample(#{ pH: "electroneutral" }).open_to("CO2(g)", "420 uatm").equilibrate().pH, 5.6, 0.01)
    /// ```
    #[rhai_fn(return_raw)]
    pub fn expect(
        context: NativeCallContext,
        label: &str,
        value: Dynamic,
        expected: Dynamic,
        tolerance: Dynamic,
    ) -> ScriptResult<()> {
        let found = own_number(&value)?;
        let expected = own_number(&expected)?;
        let allowed = super::tolerance(&tolerance, expected)?;
        if (found - expected).abs() <= allowed {
            let host = Host::of(&context);
            host.rests_on(&value);
            let value = recorded(&value)?;
            let expected = Some(Expected { value: expected, tolerance: allowed });
            let record = host.records().add_check(Record { label: label.to_owned(), value, expected });
            host.report(Shown::Record(record));
            return Ok(());
        }
        let (found, expected, allowed) = (general(found, 8), general(expected, 8), general(allowed, 3));
        fail(format!("`{label}` is {found}, expected {expected} within {allowed}")).argument(1).raise()
    }
}
