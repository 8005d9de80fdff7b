//! The equilibrium solver: numbers and indices, no names.
//!
//! # The programme
//!
//! With λ_j = ln of the activity of component j, species i of formation ν_i, K_i has
//! `ln c_i = ln K_i - ln γ_i + w_i ln a_w + ν_i·λ`. At given activity coefficients the equilibrium is the one minimum of
//! a convex function, the dual of the Gibbs energy (White, Johnson & Dantzig 1958; recalled):
//!
//! ```text
//! minimise  Φ(λ) = Σ_i c_i(λ) - T·λ     subject to   G_f(λ) = 0 (reservoirs),   G_p(λ) <= 0 (minerals)
//! ```
//!
//! where G is the ln saturation of a phase. Stationarity is the mass balance, and the multipliers are amounts:
//!
//! ```text
//! Σ_i ν_i c_i + Σ_p ν_p n_p = T + Σ_f ν_f E_f,     n_p >= 0,   n_p G_p = 0
//! ```
//!
//! Any point that meets these conditions is the answer, so [`Certificate`] checks them and [`solve`] returns nothing else.
//!
//! # The files follow the algorithm
//!
//! - `problem`, `settings`: what is given, what is demanded, what can go wrong. `exact`: sums without rounding.
//! - `basis`: the stoichiometry in the basis of the most concentrated species, exactly. `system`: the state in it.
//! - `feasibility`: totals that force exact zeros, or that nothing can satisfy.
//! - `inner`: Newton's method on logarithmic balances, with Φ as merit, at given γ and given phases. `dense`: LU.
//! - `phases`: which phases are present. `mixtures`: how much of each mixture. `ionic_strength`: γ and the activity of water.
//!   `specific`: γ that depends on more than the ionic strength.
//! - `prepared`: many solves of one stoichiometry.
//! - `sensitivity`: derivatives of an answer. `certificate`: what is checked. `scalar`: conditions that are not totals, as one equation outside all this.

mod basis;
mod certificate;
pub(crate) mod dense;
mod exact;
mod feasibility;
mod inner;
mod ionic_strength;
mod mixtures;
mod phases;
mod prepared;
mod problem;
pub mod scalar;
pub mod sensitivity;
mod settings;
mod specific;
mod system;
#[cfg(test)]
mod tests;

pub use certificate::Certificate;
pub use exact::Total;
pub use prepared::Prepared;
pub use problem::{Coefficient, Mineral, Mixture, Problem, Reservoir, Row};
pub use settings::{Input, Settings, SolveError};
pub use system::{Effort, Warm};

use crate::activity::Model;
use ionic_strength::Settled;
use system::{Column, System};

/// A certified equilibrium. Concentrations in mol/kg(water); logarithms natural; an exact zero is minus infinity.
#[derive(Debug, Clone)]
pub struct Converged {
    /// ln of the activity of each component; infinite where a component is absent. Shape `(n_components,)`.
    pub ln_a: Vec<f64>,
    /// ln of the concentration of each species. Shape `(n_species,)`.
    pub ln_c: Vec<f64>,
    /// ln of the amount of each other, mol/kg(water). Shape `(n_others,)`.
    pub ln_others: Vec<f64>,
    /// ln γ of each species. Shape `(n_species,)`.
    pub ln_gamma: Vec<f64>,
    /// `½ Σ z² c`, mol/kg(water).
    pub ionic_strength: f64,
    /// ln of the activity of water.
    pub ln_water_activity: f64,
    /// Amount that each reservoir has delivered to the system; negative: taken from it. Shape `(n_reservoirs,)`.
    pub reservoir_amount: Vec<f64>,
    /// Amount of each mineral. Shape `(n_minerals,)`.
    pub mineral_amount: Vec<f64>,
    /// Whether each mineral is present; one present in the amount zero is at the boundary of its field. Shape
    /// `(n_minerals,)`.
    pub mineral_present: Vec<bool>,
    /// ln saturation of each mineral relative to its target; 0 when present. Shape `(n_minerals,)`.
    pub mineral_ln_saturation: Vec<f64>,
    /// Each mixture. Shape `(n_mixtures,)`.
    pub mixtures: Vec<Mixed>,
    /// What the solve took.
    pub effort: Effort,
    /// What was checked.
    pub certificate: Certificate,
    /// A start for a neighbouring problem.
    pub warm: Warm,
}

/// A mixture in an answer.
#[derive(Debug, Clone, PartialEq)]
pub struct Mixed {
    /// Sum of the amounts of its members; 0 where it is absent.
    pub amount: f64,
    /// ln of the sum of the saturations of its members relative to the target; 0 when present.
    pub ln_saturation: f64,
    /// ln of the mole fraction of each member, or of the one it would have. Shape `(n_members,)`.
    pub ln_x: Vec<f64>,
}

/// Solves for the equilibrium of `problem` with the activity `model`.
///
/// `warm` may be the end of an earlier solve; it is used if it belongs to the same stoichiometry (other constants,
/// totals and models are fine) and otherwise ignored. The answer does not depend on it beyond rounding.
///
/// # Errors
///
/// Returns [`SolveError::BadInput`] when the problem is malformed; `Infeasible`, `Unbounded` and `Overdetermined` when it
/// has no solution, with the reason; `NoIonicStrength`, `WaterActivityNotConverged`, `ActivityNotConverged` when the activity model has none;
/// `NotConverged`, `PhasesNotSettled` and `Uncertified` when a solution was not found to the tolerances; `Stopped` when
/// interrupted.
///
/// # Examples
///
/// Pure water: components H, OH⁻ formed with the solvent, and electroneutrality as the total of H.
///
/// ```
/// use lysocline_engine::activity::Model;
/// use lysocline_engine::solve::{Problem, Row, Settings, Total, solve};
///
/// let ln_10 = std::f64::consts::LN_10;
/// let problem = Problem {
///     n_components: 1,
///     species: vec![
///         Row::new(&[(0, 1)], 0.0).with_charge(1.0),
///         Row::new(&[(0, -1)], -14.0 * ln_10).with_charge(-1.0).with_water(1.0),
///     ],
///     totals: vec![Total::from(0.0)],
///     ..Problem::default()
/// };
/// let converged = solve(&problem, &Model::IDEAL, &Settings::default(), None)?;
/// assert!((converged.ln_a[0] / ln_10 + 7.0).abs() < 1e-13); // pH 7
/// # Ok::<(), lysocline_engine::solve::SolveError>(())
/// ```
pub fn solve(
    problem: &Problem,
    model: &Model,
    settings: &Settings,
    warm: Option<&Warm>,
) -> Result<Converged, SolveError> {
    problem.validate()?;
    let start = warm.map_or((0.0, 0.0), |warm| (warm.ionic_strength, warm.ln_water_activity));
    match attempt(System::new(problem, warm)?, model, settings, start) {
        Err(failure) if failure.is_open() => {
            // Newton's method does not end where the totals lie on the boundary of what is possible, or beyond.
            let absent = feasibility::zeros(problem)?;
            if !absent.contains(&true) {
                return Err(failure);
            }
            let mut system = System::new(problem, None)?;
            system.absent = absent;
            attempt(system, model, settings, (0.0, 0.0))
        }
        outcome => outcome,
    }
}

/// Solves from where `system` is, and from an ionic strength with its ln of the activity of water.
fn attempt(
    mut system: System,
    model: &Model,
    settings: &Settings,
    start: (f64, f64),
) -> Result<Converged, SolveError> {
    let settled = ionic_strength::settle(&mut system, model, settings, start)?;
    let Settled { ionic_strength, ln_water_activity, .. } = settled;
    let phases = Phases::read(&mut system);
    let certificate = certificate::certify(&system, &settled, &phases, model);
    if !certificate.meets(settings) {
        return Err(SolveError::Uncertified { certificate: Box::new(certificate) });
    }
    Ok(Converged {
        ln_a: component_activities(&system),
        ln_c: system.ln_c[..system.problem.species.len()].to_vec(),
        ln_others: system.ln_c[system.problem.species.len()..system.problem.first_member()].to_vec(),
        ln_gamma: std::mem::take(&mut system.ln_gamma),
        ionic_strength,
        ln_water_activity,
        reservoir_amount: phases.reservoir_amount,
        mineral_amount: phases.mineral_amount,
        mineral_present: phases.mineral_present,
        mineral_ln_saturation: phases.mineral_ln_saturation,
        mixtures: phases.mixtures,
        effort: Effort { pivots: system.basis.pivots, ..system.effort },
        certificate,
        warm: system.warm(ionic_strength, ln_water_activity),
    })
}

impl Mixed {
    fn read(system: &System, mixture_idx: usize) -> Self {
        let ln_fractions = system.ln_fractions(mixture_idx);
        let ln_saturation = system.mixture_saturation(mixture_idx);
        let ln_amount = system.level_of(system.amount_row(mixture_idx));
        Self {
            amount: if system.mixture_present[mixture_idx] { ln_amount.exp() } else { 0.0 },
            ln_saturation,
            ln_x: ln_fractions.iter().map(|ln_x| ln_x - ln_saturation).collect(),
        }
    }
}

fn component_activities(system: &System) -> Vec<f64> {
    (0..system.problem.n_components)
        .map(|k| system.basis.scale(k) * system.level_of(system.basis.unit_row(k)))
        .collect()
}

/// Amounts and saturations of reservoirs and minerals, as in [`Converged`].
struct Phases {
    reservoir_amount: Vec<f64>,
    /// The sum of absolute terms that each of these amounts is the difference of.
    reservoir_terms: Vec<f64>,
    mineral_amount: Vec<f64>,
    mineral_present: Vec<bool>,
    mineral_ln_saturation: Vec<f64>,
    mixtures: Vec<Mixed>,
}

impl Phases {
    fn read(system: &mut System) -> Self {
        let n_minerals = system.problem.minerals.len();
        let saturation = |p| match system.mineral_row(p) {
            row if system.absent[row] => f64::NEG_INFINITY,
            row => system.level_of(row),
        };
        let mut phases = Self {
            reservoir_amount: vec![0.0; system.problem.reservoirs.len()],
            reservoir_terms: vec![0.0; system.problem.reservoirs.len()],
            mineral_amount: system.mineral_amount.clone(),
            mineral_present: vec![false; n_minerals],
            mineral_ln_saturation: (0..n_minerals).map(saturation).collect(),
            mixtures: (0..system.problem.mixtures.len()).map(|p| Mixed::read(system, p)).collect(),
        };
        for column in 0..system.basis.n {
            if system.column[column] != Column::Held {
                continue;
            }
            if let Some(mineral_idx) = system.mineral_of(column) {
                phases.mineral_present[mineral_idx] = true;
            }
            if let Some(reservoir_idx) = system.reservoir_of(column) {
                let (amount, terms) = system.held_amount(column);
                phases.reservoir_amount[reservoir_idx] = -amount;
                phases.reservoir_terms[reservoir_idx] = terms;
            }
        }
        phases
    }
}
