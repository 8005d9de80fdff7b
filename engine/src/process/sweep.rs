//! Sweeps over axes: every combination of their values, each an equilibrium of its own.

use std::collections::BTreeMap;

use super::run::{OnProgress, Run};
use crate::equilibrium::{Asked, EquilibriumError, Observable, ObservableError};
use crate::ledger::Ledger;
use crate::named::Value;
use crate::present::Column;
use crate::quantity::Quantity;
use crate::solve::Settings;
use crate::units::{Kind, Pressure, Temperature, Unit, UnitError};
use crate::water::{Sample, SampleError, Treatment};

/// The most points a sweep may have: more is taken for a slip.
const MOST_POINTS: usize = 1_000_000;
/// What precedes a key that is edited rather than treated.
const AS_MEASURED: &str = "as measured:";

/// One axis of a sweep.
#[derive(Debug, Clone, PartialEq)]
pub struct Axis {
    title: String,
    meaning: Meaning,
    values: Vec<f64>,
}

#[derive(Debug, Clone, PartialEq)]
enum Meaning {
    Temperature(Unit),
    Pressure(Unit),
    Ph,
    Fugacity(String, Unit),
    Saturation(String),
    /// A key of the analysis, with the unit its values are in.
    Measured(String, Option<Unit>),
}

/// Why a sweep cannot be made.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SweepError {
    /// An axis that is no observable.
    #[error(transparent)]
    Observable(#[from] ObservableError),
    /// An observable that no treatment sets.
    #[error(
        "`{0}` cannot be swept: an axis is `temperature`, `pressure`, `pH`, `f(CO2(g))`, `SI(calcite)`, \
         or a key of the analysis as `as measured: Ca`"
    )]
    NotAnAxis(String),
    /// The unit of an axis.
    #[error("`{axis}`: {error}")]
    Unit {
        /// The axis.
        axis: String,
        /// What is wrong with its unit.
        error: UnitError,
    },
    /// Too many points, or none.
    #[error("a sweep has between 1 and {MOST_POINTS} points, not {0}")]
    Points(usize),
    /// A point that is no water.
    #[error(transparent)]
    Sample(#[from] SampleError),
    /// Interrupted.
    #[error("interrupted")]
    Stopped,
}

impl Axis {
    /// An axis by its title, `f(CO2(g)) [uatm]`, with its values in that unit.
    ///
    /// # Errors
    ///
    /// Returns why the title names nothing that can be varied.
    pub fn new(title: &str, values: Vec<f64>) -> Result<Self, SweepError> {
        let meaning = match title.trim().strip_prefix(AS_MEASURED) {
            Some(key) => measured(key.trim())?,
            None => treatment(title)?,
        };
        Ok(Self { title: title.trim().to_string(), meaning, values })
    }

    /// Number of values.
    #[must_use]
    pub fn len(&self) -> usize {
        self.values.len()
    }

    /// Whether it has no values.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.values.is_empty()
    }

    /// The water at one value of the axis.
    fn at(&self, sample: &Sample, value: f64) -> Result<Sample, SweepError> {
        let unit_error = |error| SweepError::Unit { axis: self.title.clone(), error };
        match &self.meaning {
            Meaning::Temperature(unit) => {
                let kelvin =
                    unit.convert(value, &Unit::parse("K").expect("a known unit")).map_err(unit_error)?;
                Ok(sample
                    .treated(Treatment::WarmTo(Temperature::from_kelvin(kelvin).map_err(unit_error)?))?)
            }
            Meaning::Pressure(unit) => {
                let bar = unit.convert(value, &Kind::Pressure.default_unit()).map_err(unit_error)?;
                Ok(sample.treated(Treatment::CompressTo(Pressure::from_bar(bar).map_err(unit_error)?))?)
            }
            Meaning::Ph => Ok(sample.treated(Treatment::HoldPh { ph: value, reagent: None })?),
            Meaning::Fugacity(gas, unit) => {
                let fugacity = unit.convert(value, &Kind::Pressure.default_unit()).map_err(unit_error)?;
                Ok(sample.treated(Treatment::OpenTo { gas: gas.clone(), fugacity })?)
            }
            Meaning::Saturation(solid) => {
                Ok(sample.treated(Treatment::Saturate { solid: solid.clone(), index: value })?)
            }
            Meaning::Measured(key, unit) => {
                let value = match unit {
                    None => Value::Number(value),
                    Some(unit) => Value::Quantity(Quantity::exact(value, unit.clone())),
                };
                Ok(sample.but(BTreeMap::from([(key.clone(), Some(value))]))?)
            }
        }
    }
}

fn measured(key: &str) -> Result<Meaning, SweepError> {
    let Some((key, unit)) = key.strip_suffix(']').and_then(|key| key.split_once('[')) else {
        return Ok(Meaning::Measured(key.to_string(), None));
    };
    let unit = Unit::parse(unit.trim()).map_err(|error| SweepError::Unit { axis: key.to_string(), error })?;
    Ok(Meaning::Measured(key.trim().to_string(), Some(unit)))
}

fn treatment(title: &str) -> Result<Meaning, SweepError> {
    let asked = Asked::parse(title)?;
    let unit = |kind: Kind| -> Result<Unit, SweepError> {
        let unit = asked.unit.clone().unwrap_or_else(|| kind.default_unit());
        kind.check(&unit).map_err(|error| SweepError::Unit { axis: title.to_string(), error })?;
        Ok(unit)
    };
    match asked.observable.clone() {
        Observable::Temperature => Ok(Meaning::Temperature(unit(Kind::Temperature)?)),
        Observable::Pressure => Ok(Meaning::Pressure(unit(Kind::Pressure)?)),
        Observable::Ph => Ok(Meaning::Ph),
        Observable::Fugacity(gas) => Ok(Meaning::Fugacity(gas, unit(Kind::Pressure)?)),
        Observable::SaturationIndex(solid) => Ok(Meaning::Saturation(solid)),
        _ => Err(SweepError::NotAnAxis(title.to_string())),
    }
}

/// Solves every combination of the axes' values, the last axis fastest.
///
/// # Errors
///
/// Returns an axis that cannot be applied, or that it was interrupted; a point without equilibrium is a failed row.
pub fn sweep(
    sample: &Sample,
    axes: &[Axis],
    ledger: Option<&Ledger>,
    settings: &Settings,
    progress: OnProgress,
) -> Result<Run, SweepError> {
    let points = axes
        .iter()
        .try_fold(1_usize, |points, axis| points.checked_mul(axis.values.len()))
        .unwrap_or(usize::MAX);
    if points == 0 || points > MOST_POINTS || axes.is_empty() {
        return Err(SweepError::Points(if axes.is_empty() { 0 } else { points }));
    }
    let mut samples = vec![sample.clone()];
    let mut values: Vec<Vec<f64>> = vec![vec![]];
    for axis in axes {
        let mut next = Vec::with_capacity(samples.len() * axis.values.len());
        let mut next_values = Vec::with_capacity(next.capacity());
        for (sample, so_far) in samples.iter().zip(&values) {
            for value in &axis.values {
                next.push(axis.at(sample, *value)?);
                next_values.push(so_far.iter().copied().chain([*value]).collect());
            }
        }
        (samples, values) = (next, next_values);
    }
    let run = Run::equilibrate(&samples, ledger, settings, progress);
    let run = run.map_err(|_: EquilibriumError| SweepError::Stopped)?;
    let column =
        |(k, axis): (usize, &Axis)| Column::numbers(axis.title.as_str(), values.iter().map(|point| point[k]));
    Ok(Run::new(axes.iter().enumerate().map(column).collect(), run.outcomes().to_vec()))
}
