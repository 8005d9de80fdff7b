//! Sweeps over axes: every combination of their values, each an equilibrium of its own.

use std::collections::BTreeMap;

use super::run::{OnProgress, Run};
use crate::equilibrium::{Asked, EquilibriumError, Observable, ObservableError};
use crate::ledger::Ledger;
use crate::named::Value;
use crate::physics::electrode::volts_per_pe;
use crate::present::Column;
use crate::quantity::Quantity;
use crate::solve::Settings;
use crate::units::{Kind, Pressure, Style, Temperature, Unit, UnitError};
use crate::water::{Dose, Sample, SampleError, Treatment};

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
    Pe,
    /// Eh, in a unit of potential.
    Eh(Unit),
    Fugacity(String, Unit),
    Saturation(String),
    /// So much of a reagent, in a unit.
    Dose(String, Unit),
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
        "`{0}` cannot be swept: an axis is `temperature`, `pressure`, `pH`, `pe`, `Eh`, `f(CO2(g))`, `SI(calcite)`, `added(HCl)`, \
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

    /// The title with the unit its values are in, also where the default is meant.
    fn heading(&self) -> String {
        match &self.meaning {
            Meaning::Temperature(unit)
            | Meaning::Pressure(unit)
            | Meaning::Eh(unit)
            | Meaning::Fugacity(_, unit)
            | Meaning::Dose(_, unit)
                if !self.title.ends_with(']') =>
            {
                format!("{} [{}]", self.title, unit.display(Style::Ascii))
            }
            _ => self.title.clone(),
        }
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
            Meaning::Pe => Ok(sample.treated(Treatment::HoldPe { pe: value, reagent: None })?),
            Meaning::Eh(unit) => {
                let volt = unit.convert(value, &Kind::Potential.default_unit()).map_err(unit_error)?;
                let pe = volt / volts_per_pe(temperature_of(sample).kelvin());
                Ok(sample.treated(Treatment::HoldPe { pe, reagent: None })?)
            }
            Meaning::Fugacity(gas, unit) => {
                let fugacity = unit.convert(value, &Kind::Pressure.default_unit()).map_err(unit_error)?;
                Ok(sample.treated(Treatment::OpenTo { gas: gas.clone(), fugacity })?)
            }
            Meaning::Saturation(solid) => {
                Ok(sample.treated(Treatment::Saturate { solid: solid.clone(), index: value })?)
            }
            Meaning::Dose(reagent, unit) => {
                let amount = Value::Quantity(Quantity::exact(value, unit.clone()));
                let dose = Dose::read("dose", reagent, amount).map_err(SampleError::Treatment)?;
                Ok(sample.treated(Treatment::Dose(dose))?)
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

/// The temperature a water has after its treatments so far.
fn temperature_of(sample: &Sample) -> Temperature {
    let warmed = sample.treatments().iter().rev().find_map(|treatment| match treatment {
        Treatment::WarmTo(temperature) => Some(*temperature),
        _ => None,
    });
    warmed.unwrap_or(sample.setting().temperature)
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
        Observable::Pe => Ok(Meaning::Pe),
        Observable::Eh => Ok(Meaning::Eh(unit(Kind::Potential)?)),
        Observable::Fugacity(gas) => Ok(Meaning::Fugacity(gas, unit(Kind::Pressure)?)),
        Observable::SaturationIndex(solid) => Ok(Meaning::Saturation(solid)),
        Observable::Added(reagent) => Ok(Meaning::Dose(reagent, unit(Kind::Amount)?)),
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
    let column = |(k, axis): (usize, &Axis)| {
        Column::numbers(axis.heading().as_str(), values.iter().map(|point| point[k]))
    };
    Ok(Run::new(axes.iter().enumerate().map(column).collect(), run.outcomes().to_vec()))
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn lake() -> Sample {
        let text = |key: &str, value: &str| (key.to_string(), Value::Text(value.to_string()));
        let keys =
            [text("pH", "8"), text("alkalinity", "2 meq/L"), text("Ca", "40 mg/L"), text("Cl", "3 mg/L")];
        Sample::read(keys.into()).unwrap()
    }

    fn swept(axes: &[(&str, &[f64])]) -> Result<Run, SweepError> {
        let axes = axes
            .iter()
            .map(|(title, values)| Axis::new(title, values.to_vec()))
            .collect::<Result<Vec<_>, _>>()?;
        sweep(&lake(), &axes, None, &Settings::default(), &|_| ())
    }

    #[test]
    fn the_last_axis_varies_fastest() {
        let run =
            swept(&[("temperature", &[5.0, 25.0]), ("f(CO2(g)) [uatm]", &[300.0, 600.0, 900.0])]).unwrap();
        let values = |axis: usize| run.axes()[axis].present().unwrap();
        assert_eq!(values(0), [5.0, 5.0, 5.0, 25.0, 25.0, 25.0]);
        assert_eq!(values(1), [300.0, 600.0, 900.0, 300.0, 600.0, 900.0]);
        for (state, celsius) in run.states().zip(values(0)) {
            assert_eq!(state.temperature().celsius(), celsius);
        }
        let fugacity = run.column("f(CO2(g)) [uatm]").unwrap().present().unwrap();
        assert_eq!(fugacity, values(1));
    }

    #[test]
    fn a_treatment_keeps_totals_and_an_edit_changes_the_analysis() {
        let treated = swept(&[("pH", &[7.0])]).unwrap().column("DIC").unwrap().present().unwrap()[0];
        let edited =
            swept(&[("as measured: pH", &[7.0])]).unwrap().column("DIC").unwrap().present().unwrap()[0];
        let before =
            swept(&[("as measured: pH", &[8.0])]).unwrap().column("DIC").unwrap().present().unwrap()[0];
        assert_abs_diff_eq!(treated, before, epsilon = 1e-15);
        // At pH 7 the same alkalinity holds more CO2.
        assert!(edited > 1.1 * before);
    }

    #[test]
    fn a_point_without_equilibrium_is_a_failed_row() {
        let run = swept(&[("as measured: pH", &[8.0, 11.9])]).unwrap();
        assert!(run.outcomes()[0].is_ok());
        assert!(run.outcomes()[1].as_ref().unwrap_err().contains("contradict each other"));
        assert_eq!(run.failures().n_rows(), 1);
        assert_eq!(run.table(&["pH".to_string()]).unwrap().ok().n_rows(), 1);
    }

    #[test]
    fn what_cannot_be_swept_says_what_can() {
        let message = |title: &str| swept(&[(title, &[1.0])]).unwrap_err().to_string();
        assert!(message("charge_error").contains("an axis is `temperature`"));
        assert!(message("temperature [mg/L]").contains("is no unit of temperature"));
        assert_eq!(swept(&[("pH", &[])]).unwrap_err(), SweepError::Points(0));
    }
}
