//! A titration as an equilibrium after every addition from the burette, and the equivalence points of its curve.

use super::run::{OnProgress, Origin, Run};
use crate::equilibrium::{EquilibriumError, equilibrate};
use crate::ledger::Ledger;
use crate::present::{Column, Table};
use crate::quantity::Quantity;
use crate::solve::Settings;
use crate::units::{Style, Unit};
use crate::water::{Sample, Titrant, Treatment};

/// The axis of a titration.
pub const VOLUME: &str = "volume";
/// An equivalence point is found to this part of the steps it lies between.
const PART_OF_STEP: f64 = 1e-7;
/// Half the step of the central difference, as a part of the same.
const DIFFERENCE: f64 = 1e-4;

/// A measured volume of a water, a titrant, and the ledger the mixtures are computed with.
#[derive(Debug, Clone)]
pub struct Titration {
    water: Sample,
    titrant: Titrant,
    /// Litres.
    sample_volume: Quantity,
    /// What volumes of titrant are given in.
    unit: Unit,
    ledger: Option<Ledger>,
}

/// Why there is no titration.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum TitrationError {
    /// A volume that no burette delivers.
    #[error("`add`: {0} is no volume from a burette; volumes are zero or more, as in `linspace(0, 5, 51)`")]
    Volume(f64),
    /// The sample's volume.
    #[error("`sample_volume` has to be above zero, not {0} L")]
    SampleVolume(f64),
    /// A run of another kind.
    #[error("only a run of `titrate` has equivalence points")]
    NoTitration,
    /// Too few points.
    #[error("an equivalence point is seen between four volumes or more, and {0} have an equilibrium")]
    TooFew(usize),
    /// The run has no such column.
    #[error("{0}")]
    Table(String),
    /// An equilibrium that failed.
    #[error(transparent)]
    Equilibrium(#[from] EquilibriumError),
}

impl Titration {
    /// A titration of `sample_volume` of a water; `unit` is that of the volumes added.
    ///
    /// # Errors
    ///
    /// A volume that is not above zero, or of another kind.
    pub fn new(
        water: &Sample,
        titrant: Titrant,
        sample_volume: &Quantity,
        unit: Unit,
        ledger: Option<&Ledger>,
    ) -> Result<Self, TitrationError> {
        let litre = Unit::parse("L").expect("a known unit");
        let sample_volume =
            sample_volume.to(&litre).map_err(|error| TitrationError::Table(error.to_string()))?;
        if sample_volume.value() <= 0.0 {
            return Err(TitrationError::SampleVolume(sample_volume.value()));
        }
        unit.convert(1.0, &litre).map_err(|error| TitrationError::Table(error.to_string()))?;
        Ok(Self { water: water.clone(), titrant, sample_volume, unit, ledger: ledger.cloned() })
    }

    /// The water with so much titrant in it, in the unit of the volumes.
    ///
    /// # Errors
    ///
    /// [`TitrationError::Volume`] for what is negative or no number.
    pub fn at(&self, volume: f64) -> Result<Sample, TitrationError> {
        let litres = self.unit.convert(volume, &Unit::parse("L").expect("a known unit"));
        let litres = litres.ok().filter(|litres| litres.is_finite() && *litres >= 0.0);
        let added = Treatment::AddSolution {
            volume: litres.ok_or(TitrationError::Volume(volume))?,
            sample_volume: self.sample_volume.clone(),
            solution: self.titrant.clone(),
        };
        self.water.treated(added).map_err(|error| TitrationError::Table(error.to_string()))
    }

    /// An equilibrium after every volume, in parallel.
    ///
    /// # Errors
    ///
    /// A volume that is none, or that it was interrupted. A volume without equilibrium is a failed row.
    pub fn run(
        &self,
        volumes: &[f64],
        settings: &Settings,
        progress: OnProgress,
    ) -> Result<Run, TitrationError> {
        let samples: Vec<Sample> = volumes.iter().map(|volume| self.at(*volume)).collect::<Result<_, _>>()?;
        let run = Run::equilibrate(&samples, self.ledger.as_ref(), settings, progress)?;
        let title = format!("{VOLUME} [{}]", self.unit.display(Style::Ascii));
        let axis = Column::numbers(title.as_str(), volumes.iter().copied());
        Ok(Run::new(vec![axis], run.outcomes().to_vec())
            .with_origin(Origin::Titration(Box::new(self.clone()))))
    }

    /// Where the curve of pH over volume is steepest, found between the volumes of a run by further equilibria.
    ///
    /// # Errors
    ///
    /// [`TitrationError::TooFew`], or an equilibrium that failed.
    fn steepest(
        &self,
        points: &[(f64, f64)],
        settings: &Settings,
    ) -> Result<Vec<(f64, f64)>, TitrationError> {
        if points.len() < 4 {
            return Err(TitrationError::TooFew(points.len()));
        }
        let slopes: Vec<f64> =
            points.windows(2).map(|pair| ((pair[1].1 - pair[0].1) / (pair[1].0 - pair[0].0)).abs()).collect();
        let mut found = Vec::new();
        for k in 1..slopes.len() - 1 {
            if slopes[k] > slopes[k - 1] && slopes[k] >= slopes[k + 1] {
                found.push(self.steepest_between(points[k - 1].0, points[k + 2].0, settings)?);
            }
        }
        Ok(found)
    }

    /// Golden-section search for the largest |dpH/dV|.
    fn steepest_between(
        &self,
        low: f64,
        high: f64,
        settings: &Settings,
    ) -> Result<(f64, f64), TitrationError> {
        const GOLDEN: f64 = 0.381_966_011_250_105_1;

        let width = high - low;
        let ph = |volume: f64| -> Result<f64, TitrationError> {
            Ok(equilibrate(&self.at(volume)?, self.ledger.as_ref(), settings)?.ph())
        };
        let half = DIFFERENCE * width;
        let slope = |volume: f64| -> Result<f64, TitrationError> {
            let below = (volume - half).max(0.0);
            Ok(((ph(volume + half)? - ph(below)?) / (volume + half - below)).abs())
        };
        let (mut left, mut right) = (low, high);
        let mut inner = [left + GOLDEN * width, right - GOLDEN * width];
        let mut steepness = [slope(inner[0])?, slope(inner[1])?];
        while right - left > PART_OF_STEP * width {
            if steepness[0] > steepness[1] {
                (right, inner[1], steepness[1]) = (inner[1], inner[0], steepness[0]);
                inner[0] = left + GOLDEN * (right - left);
                steepness[0] = slope(inner[0])?;
            } else {
                (left, inner[0], steepness[0]) = (inner[0], inner[1], steepness[1]);
                inner[1] = right - GOLDEN * (right - left);
                steepness[1] = slope(inner[1])?;
            }
        }
        let volume = 0.5 * (left + right);
        Ok((volume, ph(volume)?))
    }
}

/// The equivalence points of a titration, taken where pH changes fastest: volume, pH, and the titrant up to there per
/// litre of the sample.
///
/// A point of inflection lies close to equivalence, not on it: the weaker the acid-base pair or the more dilute the
/// water, the further off. [`super::gran`] extrapolates instead.
///
/// # Errors
///
/// A run of another kind, too few points, or an equilibrium that failed.
pub fn equivalence_points(run: &Run, settings: &Settings) -> Result<Table, TitrationError> {
    let Origin::Titration(titration) = run.origin() else { return Err(TitrationError::NoTitration) };
    let fault = |error: &dyn std::fmt::Display| TitrationError::Table(error.to_string());
    let axis = &run.axes()[0];
    let volumes = axis.present().map_err(|error| fault(&error))?;
    let mut points: Vec<(f64, f64)> = volumes
        .iter()
        .zip(run.outcomes())
        .filter_map(|(volume, outcome)| Some((*volume, outcome.as_ref().ok()?.ph())))
        .collect();
    points.sort_by(|a, b| a.0.total_cmp(&b.0));
    points.dedup_by(|a, b| a.0 == b.0);
    let found = titration.steepest(&points, settings)?;
    let litre = Unit::parse("L").expect("a known unit");
    let per_litre = |(volume, _): &(f64, f64)| {
        let litres = titration.unit.convert(*volume, &litre).unwrap_or(f64::NAN);
        let strength = titration.titrant.solutes[0].1.value();
        1000.0 * strength * litres / titration.sample_volume.value()
    };
    let columns = [
        Column::numbers(axis.title().clone(), found.iter().map(|(volume, _)| *volume)),
        Column::numbers("pH", found.iter().map(|(_, ph)| *ph)),
        Column::numbers("titrant [mmol/L]", found.iter().map(per_litre)),
    ];
    Table::new(columns).map_err(|error| fault(&error))
}
