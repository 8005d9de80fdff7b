//! Monte Carlo: the same water computed again and again with every input drawn from its uncertainty.
//!
//! Inputs are normal with their standard uncertainties and declared correlations (JCGM 101:2008, recalled). A draw moves
//! the measured values of the water and the constants of the ledger, and everything is solved anew, so what the
//! first-order uncertainty leaves out, curvature, comes in. Random numbers are a function of the seed, the draw and the
//! input alone, so a run is the same for any number of threads.

use std::collections::HashMap;

use super::run::{OnProgress, Origin, Run, each};
use crate::chem::{LogK, Reaction, Term};
use crate::equilibrium::uncertainty::assumed_slope;
use crate::equilibrium::{Asked, EquilibriumError, equilibrate};
use crate::ledger::Ledger;
use crate::nearest::nearest;
use crate::present::{Cell, Column, Table};
use crate::quantity::{Input, Quantity};
use crate::solve::Settings;
use crate::units::{Style, Temperature};
use crate::water::Sample;

use super::run::RunError;

/// The most draws: more is taken for a slip.
const MOST_DRAWS: usize = 1_000_000;

/// Which inputs vary.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Vary {
    /// Everything with a stated uncertainty.
    All,
    /// What was measured of the water.
    Measured,
    /// The ledger's constants.
    Constants,
    /// Inputs by the names budgets give them.
    Named(Vec<String>),
}

/// Why there is nothing to draw.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum MonteCarloError {
    /// No draws, or too many.
    #[error("`draws` is between 2 and {MOST_DRAWS}, not {0}")]
    Draws(usize),
    /// An input that has no uncertainty, or is none.
    #[error("`vary`: no input `{name}` with a stated uncertainty{}", help(.nearest.as_deref()))]
    NoInput {
        /// The name.
        name: String,
        /// The nearest one.
        nearest: Option<String>,
    },
    /// Nothing that varies.
    #[error(
        "`vary`: {0}; write `Ca: \"41.2 +/- 0.8 mg/L\"`, or fill in the constants with `.assume_sigma(0.05)`"
    )]
    Nothing(String),
    /// The water itself.
    #[error(transparent)]
    Equilibrium(#[from] EquilibriumError),
    /// A run of another kind.
    #[error("only a run of `monte_carlo` has a summary of its draws")]
    NoDraws,
    /// An observable no draw answers.
    #[error("{0}")]
    Observable(String),
}

fn help(nearest: Option<&str>) -> String {
    nearest.map(|name| format!("; did you mean `{name}`?")).unwrap_or_default()
}

/// Computes a water with `draws` draws of its inputs.
///
/// # Errors
///
/// What is wrong with `draws` or `vary`, or why the water has no equilibrium as given; a draw without one is a failed row.
pub fn monte_carlo(
    sample: &Sample,
    (draws, seed): (usize, u64),
    vary: &Vary,
    ledger: Option<&Ledger>,
    settings: &Settings,
    progress: OnProgress,
) -> Result<Run, MonteCarloError> {
    if !(2..=MOST_DRAWS).contains(&draws) {
        return Err(MonteCarloError::Draws(draws));
    }
    let state = equilibrate(sample, ledger, settings)?;
    let inputs = Inputs::of(sample, state.system().ledger(), vary)?;
    let numbers: Vec<usize> = (0..draws).collect();
    let outcomes = each(&numbers, progress, |draw| {
        let moved = inputs.draw(seed, *draw as u64);
        let sample = sample.moved(&mut |quantity| exact(quantity, &moved));
        let ledger = state.system().ledger().moved(|name, reaction| constant_moved(name, reaction, &moved));
        match equilibrate(&sample, Some(&ledger), settings) {
            Err(EquilibriumError::Stopped) => Err(EquilibriumError::Stopped),
            other => Ok(other.map_err(|error| error.to_string())),
        }
    })?;
    let axis = Column::numbers("draw", numbers.iter().map(|draw| *draw as f64));
    Ok(Run::new(vec![axis], outcomes).with_origin(Origin::Draws(Box::new(state))))
}

/// What the draws of a run say of some observables, beside the value and first-order uncertainty of the water as given.
///
/// # Errors
///
/// A run of another kind, or an observable that cannot be read.
pub fn summary(run: &Run, observables: &[String]) -> Result<Table, MonteCarloError> {
    let Origin::Draws(state) = run.origin() else { return Err(MonteCarloError::NoDraws) };
    let fault = |error: &dyn std::fmt::Display| MonteCarloError::Observable(error.to_string());
    let (mut titles, mut rows) = (Vec::new(), Vec::new());
    for text in observables {
        let asked = Asked::parse(text).map_err(|error| fault(&error))?;
        let given = state.answer(&asked).map_err(|error| fault(&error))?;
        let unit = match given.unit().display(Style::Ascii) {
            unit if unit.is_empty() || unit == "1" => String::new(),
            unit => format!(" [{unit}]"),
        };
        titles.push(format!("{}{unit}", asked.observable));
        let column = run.column(text).map_err(|error: RunError| fault(&error))?;
        rows.push((given, column));
    }
    let numbers = |title: &str, number: &dyn Fn(&(Quantity, Column)) -> Option<f64>| {
        Column::new(title, rows.iter().map(|row| number(row).map_or_else(Cell::missing, Cell::number)))
    };
    Table::new([
        Column::chemistry("observable", titles.iter().map(String::as_str)),
        numbers("value", &|(given, _)| Some(given.value())),
        numbers("first-order sigma", &|(given, _)| given.sigma()),
        numbers("mean", &|(_, column)| column.mean().ok()),
        numbers("sd", &|(_, column)| column.standard_deviation().ok()),
        numbers("2.5 %", &|(_, column)| column.quantile(0.025).ok()),
        numbers("median", &|(_, column)| column.median().ok()),
        numbers("97.5 %", &|(_, column)| column.quantile(0.975).ok()),
        numbers("draws", &|(_, column)| column.present().ok().map(|draws| draws.len() as f64)),
    ])
    .map_err(|error| fault(&error))
}

/// The inputs that vary, in the order they are met in the water and then in the ledger.
struct Inputs {
    inputs: Vec<Input>,
    /// Lower triangle L of the correlations, `L Lᵀ = R`, by rows; empty where none were declared.
    factor: Vec<Vec<f64>>,
}

/// How far each input is moved, in its own unit.
type Moved = HashMap<Input, f64>;

impl Inputs {
    fn of(sample: &Sample, ledger: &Ledger, vary: &Vary) -> Result<Self, MonteCarloError> {
        let mut quantities = Vec::new();
        let _ = sample.moved(&mut |quantity| {
            quantities.push(quantity.clone());
            quantity.clone()
        });
        let measured =
            quantities.iter().flat_map(|quantity| quantity.parts().iter().map(|part| part.input.clone()));
        let constants = ledger.reactions().flat_map(|(name, reaction)| {
            let history = reaction.constant().ok().map(|constant| &constant.history);
            let stated = history.into_iter().flat_map(|history| history.parts()).map(|part| part.input);
            let influences = history.into_iter().flat_map(|history| history.influences());
            let influences = influences.map(|influence| influence.input.clone());
            stated
                .chain(influences)
                .chain(unknown_slope(name, reaction).map(|(input, _)| input))
                .collect::<Vec<_>>()
        });
        let stated = |input: &Input| input.sigma().is_some_and(|sigma| sigma > 0.0);
        let found: Vec<Input> = match vary {
            Vary::All | Vary::Named(_) => measured.chain(constants).filter(stated).collect(),
            Vary::Measured => measured.filter(stated).collect(),
            Vary::Constants => constants.filter(stated).collect(),
        };
        let mut inputs: Vec<Input> = Vec::new();
        for input in found {
            if !inputs.contains(&input) {
                inputs.push(input);
            }
        }
        if let Vary::Named(names) = vary {
            for name in names {
                if !inputs.iter().any(|input| input.label() == name) {
                    let nearest = nearest(name, inputs.iter().map(Input::label)).map(str::to_string);
                    return Err(MonteCarloError::NoInput { name: name.clone(), nearest });
                }
            }
            inputs.retain(|input| names.iter().any(|name| name == input.label()));
        }
        if inputs.is_empty() {
            return Err(MonteCarloError::Nothing("no input has a stated uncertainty".into()));
        }
        let factor = correlated(&inputs, &quantities);
        Ok(Self { inputs, factor })
    }

    fn draw(&self, seed: u64, draw: u64) -> Moved {
        let z: Vec<f64> =
            (0..self.inputs.len()).map(|input| standard_normal(seed, draw, input as u64)).collect();
        let z = |i: usize| match self.factor.get(i) {
            None => z[i],
            Some(row) => row.iter().zip(&z).map(|(l, z)| l * z).sum(),
        };
        let moved = |(i, input): (usize, &Input)| (input.clone(), z(i) * input.sigma().unwrap_or(0.0));
        self.inputs.iter().enumerate().map(moved).collect()
    }
}

/// The Cholesky factor of the correlations between inputs; a pivot that vanishes leaves a column of zeros.
fn correlated(inputs: &[Input], quantities: &[Quantity]) -> Vec<Vec<f64>> {
    let n = inputs.len();
    let between = |a: &Input, b: &Input| {
        quantities.iter().map(|quantity| quantity.input_correlation(a, b)).find(|r| *r != 0.0).unwrap_or(0.0)
    };
    let r: Vec<Vec<f64>> =
        (0..n).map(|i| (0..=i).map(|j| between(&inputs[i], &inputs[j])).collect()).collect();
    if (0..n).all(|i| r[i][..i].iter().all(|r| *r == 0.0)) {
        return vec![];
    }
    let mut l = vec![vec![0.0; n]; n];
    for i in 0..n {
        for j in 0..=i {
            let known: f64 = (0..j).map(|k| l[i][k] * l[j][k]).sum();
            l[i][j] = if i == j {
                (r[i][i] - known).max(0.0).sqrt()
            } else if l[j][j] > 1e-9 {
                (r[i][j] - known) / l[j][j]
            } else {
                0.0
            };
        }
    }
    l
}

/// The value with its inputs moved, known exactly.
fn exact(quantity: &Quantity, moved: &Moved) -> Quantity {
    let shift: f64 =
        quantity.parts().iter().filter_map(|part| Some(part.sensitivity * moved.get(&part.input)?)).sum();
    Quantity::exact(quantity.value() + shift, quantity.unit().clone())
}

/// log K with its inputs moved, at every temperature.
fn constant_moved(name: &str, reaction: &Reaction, moved: &Moved) -> Option<LogK> {
    let constant = reaction.constant().ok()?;
    let parts = constant.history.parts();
    let shift: f64 = parts.iter().filter_map(|part| Some(part.sensitivity * moved.get(&part.input)?)).sum();
    let mut log_k = constant.log_k.shifted(shift);
    for influence in constant.history.influences() {
        if let Some(by) = moved.get(&influence.input)
            && let Ok(sum) = log_k.plus(&influence.on_log_k.scaled(*by))
        {
            log_k = sum;
        }
    }
    if let (Some((input, known)), Some(value)) =
        (unknown_slope(name, reaction), log_k.only_at().map(|at| log_k.nearest_to(at).0))
        && let Some(slope) = moved.get(&input)
    {
        let at_zero = value - slope * known.kelvin();
        return Some(LogK::function(&[(Term::One, at_zero), (Term::T, *slope)]));
    }
    Some(log_k)
}

/// The change with temperature of a constant known at one temperature only, an input of its own.
fn unknown_slope(name: &str, reaction: &Reaction) -> Option<(Input, Temperature)> {
    let known = reaction.constant().ok()?.log_k.only_at()?;
    Some((assumed_slope(name, reaction, known)?, known))
}

/// A standard normal number that depends on nothing but its three arguments (Box and Muller 1958).
fn standard_normal(seed: u64, draw: u64, input: u64) -> f64 {
    let start = mixed(mixed(mixed(seed) ^ draw) ^ input);
    let uniform = |bits: u64| ((bits >> 11) as f64 + 0.5) / (1_u64 << 53) as f64;
    let (u, v) = (uniform(mixed(start)), uniform(mixed(start ^ 0x5555_5555_5555_5555)));
    (-2.0 * u.ln()).sqrt() * (std::f64::consts::TAU * v).cos()
}

/// One step of SplitMix64 (Steele, Lea and Flood 2014): every bit of the result depends on every bit given.
fn mixed(x: u64) -> u64 {
    let x = x.wrapping_add(0x9E37_79B9_7F4A_7C15);
    let x = (x ^ (x >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    let x = (x ^ (x >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
    x ^ (x >> 31)
}
