//! A water sample: an analysis, what is done to it, and the ledger it is computed with. A value: every change gives a
//! new one.

use std::collections::BTreeMap;
use std::sync::Arc;

use super::analysis::{self, Analysis, Dissolved, Measured, Setting};
use super::redox::PE_RANGE;
use super::treatment::Treatment;
use crate::ledger::{Ledger, LedgerError};
use crate::named::{KeyFault, Value};
use crate::units::{Pressure, Temperature};

/// A water sample; cheap to clone.
#[derive(Clone, Debug)]
pub struct Sample(Arc<Inner>);

#[derive(Clone)]
struct Inner {
    name: Option<String>,
    setting: Setting,
    analysis: Analysis,
    treatments: Vec<Treatment>,
    ledger: Option<Ledger>,
    /// What a survey says of it in words: date, station.
    labels: BTreeMap<String, String>,
    /// The keys it was made of, for [`Sample::but`]; none for what an equilibrium left.
    entries: BTreeMap<String, Value>,
    notes: Vec<String>,
}

/// Why a sample cannot be made or treated so.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SampleError {
    /// A key is at fault.
    #[error(transparent)]
    Key(#[from] KeyFault),
    /// A mineral or gas no ledger knows.
    #[error(transparent)]
    Ledger(#[from] LedgerError),
    /// An analysis cannot be edited where there is none.
    #[error("this water has no analysis to edit, only what an equilibrium left dissolved: treat it instead")]
    NoAnalysis,
    /// A number out of its range.
    #[error("{0}")]
    Treatment(String),
}

impl Sample {
    /// A sample of named keys.
    ///
    /// # Errors
    ///
    /// The first fault with its key.
    pub fn read(entries: BTreeMap<String, Value>) -> Result<Self, SampleError> {
        let mut read = entries.clone();
        read.remove("ledger");
        let labels = take_labels(&mut read)?;
        let analysis::Read { name, setting, measured, defaults } = analysis::read(read)?;
        let notes = match defaults.as_slice() {
            [] => vec![],
            defaults => vec![format!("not given, so taken: {}", defaults.join(", "))],
        };
        let analysis = Analysis::Measured(Box::new(measured));
        Ok(Self(Arc::new(Inner {
            name,
            setting,
            analysis,
            treatments: vec![],
            ledger: None,
            labels,
            entries,
            notes,
        })))
    }

    /// A water of dissolved totals with no surroundings and no solids.
    #[must_use]
    pub fn dissolved(name: Option<String>, setting: Setting, dissolved: Dissolved, ledger: Ledger) -> Self {
        Self(Arc::new(Inner {
            name,
            setting,
            analysis: Analysis::Dissolved(dissolved),
            treatments: vec![],
            ledger: Some(ledger),
            labels: BTreeMap::new(),
            entries: BTreeMap::new(),
            notes: vec![],
        }))
    }

    /// A row of a survey that could not be read: it keeps its place, and its equilibrium fails with the reason.
    #[must_use]
    pub fn spoilt(name: Option<String>, labels: BTreeMap<String, String>, reason: String) -> Self {
        let setting =
            Setting { temperature: Temperature::REFERENCE, pressure: Pressure::ATMOSPHERE, water: 1.0 };
        let dissolved = Self::dissolved(name, setting, Dissolved::default(), Ledger::default());
        let inner = (*dissolved.0).clone();
        Self(Arc::new(Inner { analysis: Analysis::Spoilt(reason), ledger: None, labels, ..inner }))
    }

    /// What it is called.
    #[must_use]
    pub fn name(&self) -> Option<&str> {
        self.0.name.as_deref()
    }

    /// Temperature, pressure and amount of water at the analysis.
    #[must_use]
    pub fn setting(&self) -> Setting {
        self.0.setting
    }

    /// What fixes its totals.
    #[must_use]
    pub fn analysis(&self) -> &Analysis {
        &self.0.analysis
    }

    /// The laboratory analysis, unless it is what an equilibrium left.
    #[must_use]
    pub fn measured(&self) -> Option<&Measured> {
        match &self.0.analysis {
            Analysis::Measured(measured) => Some(measured),
            Analysis::Dissolved(_) | Analysis::Spoilt(_) => None,
        }
    }

    /// What is done to it, in order.
    #[must_use]
    pub fn treatments(&self) -> &[Treatment] {
        &self.0.treatments
    }

    /// The ledger that travels with it.
    #[must_use]
    pub fn ledger(&self) -> Option<&Ledger> {
        self.0.ledger.as_ref()
    }

    /// What is said of it in words: date, station.
    #[must_use]
    pub fn labels(&self) -> &BTreeMap<String, String> {
        &self.0.labels
    }

    /// The keys it was made of, as given.
    #[must_use]
    pub fn entries(&self) -> &BTreeMap<String, Value> {
        &self.0.entries
    }

    /// Defaults used, detection limits replaced.
    #[must_use]
    pub fn notes(&self) -> &[String] {
        &self.0.notes
    }

    /// The same analysis with some keys changed or added; treatments are kept. A key given as `()` is taken out.
    ///
    /// # Errors
    ///
    /// The first fault with its key, or [`SampleError::NoAnalysis`].
    pub fn but(&self, changes: BTreeMap<String, Option<Value>>) -> Result<Self, SampleError> {
        if self.measured().is_none() {
            return Err(SampleError::NoAnalysis);
        }
        let mut entries = self.0.entries.clone();
        for (key, value) in changes {
            match value {
                Some(value) => entries.insert(key, value),
                None => entries.remove(&key),
            };
        }
        let edited = Self::read(entries)?;
        let Inner { name, setting, analysis, entries, notes, labels, .. } = (*edited.0).clone();
        let labels = if labels.is_empty() { self.0.labels.clone() } else { labels };
        Ok(Self(Arc::new(Inner { name, setting, analysis, entries, notes, labels, ..(*self.0).clone() })))
    }

    /// The same, computed with this ledger unless another is named.
    #[must_use]
    pub fn with_ledger(&self, ledger: &Ledger) -> Self {
        Self(Arc::new(Inner { ledger: Some(ledger.clone()), ..(*self.0).clone() }))
    }

    /// The same with words added to it.
    #[must_use]
    pub fn with_labels(&self, labels: BTreeMap<String, String>, notes: Vec<String>) -> Self {
        let mut inner = (*self.0).clone();
        inner.labels.extend(labels);
        inner.notes.extend(notes);
        Self(Arc::new(inner))
    }

    /// The same with one more treatment.
    ///
    /// # Errors
    ///
    /// [`SampleError::Treatment`] for a number out of range.
    pub fn treated(&self, treatment: Treatment) -> Result<Self, SampleError> {
        check(&treatment)?;
        let mut inner = (*self.0).clone();
        inner.treatments.push(treatment);
        Ok(Self(Arc::new(inner)))
    }
}

impl std::fmt::Debug for Inner {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "Sample {:?} {:?}", self.name, self.treatments)
    }
}

fn check(treatment: &Treatment) -> Result<(), SampleError> {
    let refuse = |message: String| Err(SampleError::Treatment(message));
    match treatment {
        Treatment::OpenTo { gas, fugacity } if !(fugacity.is_finite() && *fugacity > 0.0) => {
            refuse(format!("the fugacity of `{gas}` must be above zero, not {fugacity} bar"))
        }
        Treatment::Saturate { solid, index: value } | Treatment::Allow { solid, above: value }
            if !value.is_finite() =>
        {
            refuse(format!("the saturation index of `{solid}` must be a finite number"))
        }
        Treatment::HoldPh { ph, .. } if !(-2.0..=17.0).contains(ph) => {
            refuse(format!("pH {ph} lies outside -2 to 17"))
        }
        Treatment::HoldPe { pe, .. } if !(PE_RANGE.0..=PE_RANGE.1).contains(pe) => {
            refuse(format!("pe {pe} lies outside {} to {}", PE_RANGE.0, PE_RANGE.1))
        }
        _ => Ok(()),
    }
}

fn take_labels(entries: &mut BTreeMap<String, Value>) -> Result<BTreeMap<String, String>, KeyFault> {
    match entries.remove("labels") {
        None => Ok(BTreeMap::new()),
        Some(Value::Map(map)) => map
            .into_iter()
            .map(|(key, value)| match value {
                Value::Text(text) => Ok((key, text)),
                other => {
                    Err(KeyFault::new("labels", format!("the label `{key}` is a text, not {}", other.kind())))
                }
            })
            .collect(),
        Some(other) => {
            Err(KeyFault::new("labels", format!("`labels` takes a map of texts, not {}", other.kind())))
        }
    }
}
