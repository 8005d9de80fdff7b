//! Gran's plot of an alkalinity titration: beyond equivalence every drop of strong acid stays free, so
//!
//! ```text
//! F = (V₀ + v) 10^-pH = b (v - vₑ)
//! ```
//!
//! is a straight line through the equivalence volume vₑ, and the alkalinity is c vₑ / V₀. Gran, G. (1952) Determination of
//! the equivalence point in potentiometric titrations, Part II, Analyst 77, 661-671 (recalled). The activity coefficient
//! of H⁺ goes into the slope, so pH needs no conversion; salts of the sample that still take up protons in the range
//! fitted (sulfate, fluoride) do bend the line.

use crate::equilibrium::EquilibriumError;
use crate::equilibrium::treatment::acid_equivalents;
use crate::ledger::Ledger;
use crate::present::plot::{Axis, Curve, Marks, Panel, Plot, Point, Scale};
use crate::present::{Column, Table};
use crate::quantity::{Quantity, QuantityError};
use crate::units::{Style, Unit};
use crate::water::Titrant;

/// The readings of a titration.
#[derive(Debug, Clone)]
pub struct Readings {
    /// Volumes of titrant, in `unit`.
    pub volumes: Vec<f64>,
    /// pH after each.
    pub ph: Vec<f64>,
    /// The unit of the volumes.
    pub unit: Unit,
    /// Volume of the sample, L.
    pub sample_volume: Quantity,
    /// The acid.
    pub titrant: Titrant,
    /// The pH between which the line is fitted.
    pub between: (f64, f64),
}

/// A line through Gran's function.
#[derive(Debug, Clone)]
pub struct Gran {
    /// Equivalence volume, in the unit of the readings; its own input is the scatter about the line.
    pub volume: Quantity,
    /// Alkalinity, eq/L of sample.
    pub alkalinity: Quantity,
    /// Number of readings fitted.
    pub n_points: usize,
    /// Slope of the line per unit of volume.
    pub slope: f64,
    /// Standard deviation of the readings about the line.
    pub scatter: f64,
    readings: Readings,
}

/// Why there is no line.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum GranError {
    /// Lists of different length.
    #[error("{volumes} volumes and {ph} pH values: each volume has one pH")]
    Lengths {
        /// How many volumes.
        volumes: usize,
        /// How many pH.
        ph: usize,
    },
    /// The wrong way round.
    #[error("`between` runs from the lower pH to the higher: `[{1}, {0}]`, not `[{0}, {1}]`")]
    Between(f64, f64),
    /// A negative volume.
    #[error("{0} is no volume from a burette; volumes are zero or more")]
    Volume(f64),
    /// The sample's volume.
    #[error("`sample_volume` has to be above zero, not {0} L")]
    SampleVolume(f64),
    /// Too few readings to see a line and its scatter.
    #[error(
        "{found} of the readings lie between pH {low} and {high}, and a line with its scatter takes 3; \
         readings run from pH {least:.2} to {most:.2}"
    )]
    TooFew {
        /// Readings in the range.
        found: usize,
        /// Its lower end.
        low: f64,
        /// Its upper end.
        high: f64,
        /// Least pH read.
        least: f64,
        /// Largest pH read.
        most: f64,
    },
    /// No slope.
    #[error(
        "the free acid does not rise with the volume between pH {0} and {1}: these readings lie before equivalence"
    )]
    NotRising(f64, f64),
    /// A base.
    #[error("`titrant`: {0} is no acid; Gran's plot of alkalinity takes a strong acid, `0.1 mol/L HCl`")]
    NoAcid(String),
    /// The ledger does not know the acid.
    #[error(transparent)]
    Equilibrium(#[from] EquilibriumError),
    /// A number that is none.
    #[error(transparent)]
    Quantity(#[from] QuantityError),
}

/// Fits the line by least squares; the titrant's equivalents are those its formula has in the ledger.
///
/// # Errors
///
/// Says what is wrong with the readings, the range or the titrant.
pub fn gran(readings: Readings, ledger: &Ledger) -> Result<Gran, GranError> {
    check(&readings)?;
    let mut strength = Vec::new();
    for (formula, moles) in &readings.titrant.solutes {
        strength.push((moles, acid_equivalents(ledger, formula)?));
    }
    let normality: f64 = strength.iter().map(|(moles, n)| moles.value() * n).sum();
    if normality <= 0.0 {
        let formulas: Vec<&str> =
            readings.titrant.solutes.iter().map(|(formula, _)| formula.as_str()).collect();
        return Err(GranError::NoAcid(crate::text::list(&formulas)));
    }
    let Line { slope, root, scatter, sigma, n } = Line::through(&readings)?;
    let label = format!("Gran line through {n} readings");
    let volume = Quantity::measured(root, readings.unit.clone(), Some(sigma), &label)?;
    let litres = volume.to(&Unit::parse("L").expect("a known unit"))?;
    let sample = &readings.sample_volume;
    let alkalinity = normality * litres.value() / sample.value();
    let mut partials = vec![(&litres, normality / sample.value()), (sample, -alkalinity / sample.value())];
    partials.extend(strength.iter().map(|(moles, n)| (*moles, n * litres.value() / sample.value())));
    let alkalinity =
        Quantity::from_partials(alkalinity, Unit::parse("eq/L").expect("a known unit"), &partials)?;
    Ok(Gran { volume, alkalinity, n_points: n, slope, scatter, readings })
}

impl Gran {
    /// The plot: volume, Gran's function, and the line where it was fitted.
    #[must_use]
    pub fn table(&self) -> Table {
        let readings = &self.readings;
        let unit = readings.unit.display(Style::Ascii);
        let root = self.volume.value();
        let line = readings.points().map(|(v, ph, _)| match readings.is_fitted(ph) {
            true => crate::present::Cell::number(self.slope * (v - root)),
            false => crate::present::Cell::missing(),
        });
        Table::new([
            Column::numbers(format!("volume [{unit}]").as_str(), readings.volumes.iter().copied()),
            Column::numbers("pH", readings.ph.iter().copied()),
            Column::numbers(format!("F [{unit}]").as_str(), readings.points().map(|(.., f)| f)),
            Column::new(format!("line [{unit}]").as_str(), line),
        ])
        .expect("columns of one length")
    }
}

impl Gran {
    /// The plot: Gran's function of every reading, the line from its root to the last reading fitted, and the
    /// equivalence volume.
    #[must_use]
    pub fn plot(&self) -> Plot {
        let readings = &self.readings;
        let unit = readings.unit.display(Style::Ascii);
        let (root, points): (f64, Vec<_>) = (self.volume.value(), readings.points().collect());
        let end = points.iter().filter(|(_, ph, _)| readings.is_fitted(*ph)).map(|(v, ..)| *v);
        let end = end.fold(root, f64::max);
        let curve = |name: &str, points: Vec<(f64, f64)>, is_line| Curve {
            name: name.to_owned(),
            is_formula: false,
            points: points.into_iter().map(|(x, y)| Point { x, y, sigma: None }).collect(),
            is_line,
        };
        let curves = vec![
            curve("reading", points.iter().map(|(v, _, f)| (*v, *f)).collect(), false),
            curve("line fitted", vec![(root, 0.0), (end, self.slope * (end - root))], true),
            curve("equivalence volume", vec![(root, 0.0)], false),
        ];
        let (across, up): (Vec<f64>, Vec<f64>) =
            curves.iter().flat_map(|curve| &curve.points).map(|point| (point.x, point.y)).unzip();
        let axis = |name: &str, values: &[f64], room| {
            Axis::holding(&format!("{name} [{unit}]"), Scale::Linear, values, room)
        };
        Plot {
            title: None,
            x: axis("volume", &across, 0.0),
            panels: vec![Panel { y: axis("F", &up, 0.06), marks: Marks::Curves(curves) }],
        }
    }
}

impl Readings {
    /// Volume, pH and Gran's function, in the unit of the volumes.
    fn points(&self) -> impl Iterator<Item = (f64, f64, f64)> + '_ {
        let litre = Unit::parse("L").expect("a known unit");
        let sample = litre.convert(self.sample_volume.value(), &self.unit).unwrap_or(f64::NAN);
        let point = move |(v, ph): (&f64, &f64)| (*v, *ph, (sample + v) * 10_f64.powf(-ph));
        self.volumes.iter().zip(&self.ph).map(point)
    }

    fn is_fitted(&self, ph: f64) -> bool {
        (self.between.0..=self.between.1).contains(&ph)
    }
}

fn check(readings: &Readings) -> Result<(), GranError> {
    let (low, high) = readings.between;
    if readings.volumes.len() != readings.ph.len() {
        return Err(GranError::Lengths { volumes: readings.volumes.len(), ph: readings.ph.len() });
    }
    if low >= high || low.is_nan() || high.is_nan() {
        return Err(GranError::Between(low, high));
    }
    if let Some(volume) = readings.volumes.iter().find(|volume| !(volume.is_finite() && **volume >= 0.0)) {
        return Err(GranError::Volume(*volume));
    }
    if readings.sample_volume.value() <= 0.0 {
        return Err(GranError::SampleVolume(readings.sample_volume.value()));
    }
    Ok(())
}

/// A straight line with where it crosses zero.
struct Line {
    slope: f64,
    root: f64,
    scatter: f64,
    /// Standard uncertainty of the root.
    sigma: f64,
    n: usize,
}

impl Line {
    fn through(readings: &Readings) -> Result<Self, GranError> {
        let (low, high) = readings.between;
        let fitted: Vec<(f64, f64)> =
            readings.points().filter(|(_, ph, _)| readings.is_fitted(*ph)).map(|(v, _, f)| (v, f)).collect();
        let n = fitted.len();
        if n < 3 {
            let least = readings.ph.iter().copied().fold(f64::INFINITY, f64::min);
            let most = readings.ph.iter().copied().fold(f64::NEG_INFINITY, f64::max);
            return Err(GranError::TooFew { found: n, low, high, least, most });
        }
        let mean = |value: &dyn Fn(&(f64, f64)) -> f64| fitted.iter().map(value).sum::<f64>() / n as f64;
        let (v, f) = (mean(&|point| point.0), mean(&|point| point.1));
        let s_vv: f64 = fitted.iter().map(|point| (point.0 - v).powi(2)).sum();
        let s_vf: f64 = fitted.iter().map(|point| (point.0 - v) * (point.1 - f)).sum();
        let slope = s_vf / s_vv;
        if !(slope.is_finite() && slope > 0.0) {
            return Err(GranError::NotRising(low, high));
        }
        let root = v - f / slope;
        let residual: f64 = fitted.iter().map(|point| (point.1 - slope * (point.0 - root)).powi(2)).sum();
        let scatter = (residual / (n as f64 - 2.0)).sqrt();
        // Error of the abscissa at zero: s/b √(1/n + (vₑ - v̄)²/S_vv).
        let sigma = scatter / slope * (1.0 / n as f64 + (root - v).powi(2) / s_vv).sqrt();
        Ok(Self { slope, root, scatter, sigma, n })
    }
}
