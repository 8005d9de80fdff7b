//! Indices of the trade that ask what a water would do: each is one more equilibrium of its dissolved totals.

use super::analysis::{Outcome, delivered, ln_saturation};
use super::dosing::Dosed;
use super::error::EquilibriumError;
use super::state::State;
use super::uncertainty::{Conditions, Held, Influence, Stage, Variable};
use crate::chem::rational;
use crate::physics::constants::LN_10;
use crate::quantity::{Quantity, QuantityError};
use crate::solve::scalar::{self, Tolerance};
use crate::solve::{Problem, Reservoir, Row, Settings, solve};
use crate::units::Unit;
use crate::water::Treatment;

/// ln of the fugacities of CO2, bar, between which the saturation pH is looked for.
const FUGACITIES: (f64, f64) = (-30.0, 5.0);
const FUGACITY_INTERVALS: usize = 20;

/// Calcium carbonate that a water deposits until calcite is at equilibrium, mol/kg(water); negative if it dissolves some.
///
/// The water is closed to gases, so that acidity, and alkalinity less twice the calcium, stay as they are: with x deposited
/// the alkalinity falls by 2 x, which is how the marble test reads it. As mg/L of CaCO3 it is the trade's calcium carbonate
/// precipitation potential.
///
/// # Errors
///
/// Returns that the ledger knows no calcite, or why there is no equilibrium.
pub fn carbonate_potential(state: &State) -> Result<Quantity, EquilibriumError> {
    let calcite = Treatment::Saturate { solid: "calcite".into(), index: 0.0 };
    let water = state.sample(&[])?.treated(calcite);
    let water = water.map_err(|error| EquilibriumError::Unreachable(error.to_string()))?;
    super::equilibrate(&water, None, &Settings::default())?.solid_amount_quantity("calcite")
}

/// The pH at which the same water, with its calcium and alkalinity, would be at equilibrium with calcite: what the
/// Langelier index counts from.
///
/// Langelier, W.F. (1936) The analytical control of anti-corrosion water treatment, J. Am. Water Works Assoc. 28,
/// 1500-1521 (recalled). That pH is reached by giving or taking CO2, which leaves calcium and alkalinity as they are.
///
/// # Errors
///
/// Returns that the water has no calcium or carbon, or that no amount of CO2 saturates it.
pub fn saturation_ph(state: &State) -> Result<Quantity, EquilibriumError> {
    let system = state.system();
    let ledger = system.ledger();
    let absent = || EquilibriumError::Unreachable("the water has no calcium or no carbon".into());
    let (_, calcite) = system.phase(ledger.find_phase("calcite")?).ok_or_else(absent)?;
    let (_, gas) = system.phase(ledger.find_phase("CO2(g)")?).ok_or_else(absent)?;
    let mut problem = system.problem(state.dissolved());
    problem.reservoirs.push(Reservoir { row: gas.clone(), ln_value: 0.0 });
    let mut totals = state.dissolved().to_vec();
    let mut saturation = |ln_fugacity: f64| {
        problem.reservoirs[0].ln_value = ln_fugacity;
        let converged = solve(&problem, system.model(), &Settings::default(), None);
        let converged =
            converged.map_err(|error| EquilibriumError::named(error, system, &["CO2(g)".into()], &[]))?;
        totals = delivered(&problem, &converged);
        Ok::<f64, EquilibriumError>(ln_saturation(calcite, &converged))
    };
    // With nearly all CO2 taken away carbonate vanishes too, and saturation falls again: of two roots the trade's is the
    // one with more CO2.
    let tolerance = Tolerance { x: 1e-12, f: 1e-12 };
    let roots = scalar::all_roots(&mut saturation, FUGACITIES, FUGACITY_INTERVALS, tolerance)?.roots;
    let Some(root) = roots.last() else {
        let why = "no amount of CO2 brings this water to equilibrium with calcite";
        return Err(EquilibriumError::Unreachable(why.into()));
    };
    saturation(root.x)?;
    let outcome = at_saturation(state, totals, calcite, gas)?;
    let proton = system.proton();
    let ph = system.ph_shift() - outcome.converged.ln_a[proton] / LN_10;
    let Some(stage) = Stage::new(&outcome) else {
        return Quantity::measured(ph, Unit::one(), None, "pH of saturation").map_err(undefined);
    };
    let slopes = [(Variable::LnActivity(proton), -1.0 / LN_10)];
    let partials = Influence::of(&slopes, &[(&outcome, &stage)]).partials(system);
    let partials: Vec<(&Quantity, f64)> =
        partials.iter().map(|(quantity, slope)| (quantity, *slope)).collect();
    Quantity::from_partials(ph, Unit::one(), &partials).map_err(undefined)
}

/// The water with so much CO2 that calcite is at equilibrium, as an outcome in which calcite is held by giving CO2.
fn at_saturation(
    state: &State,
    totals: Vec<f64>,
    calcite: &Row,
    gas: &Row,
) -> Result<Outcome, EquilibriumError> {
    let system = state.system();
    let reservoir = Reservoir { row: calcite.clone(), ln_value: 0.0 };
    let problem = Problem { reservoirs: vec![reservoir.clone()], ..system.problem(&totals) };
    let converged = solve(&problem, system.model(), &Settings::default(), None);
    let converged =
        converged.map_err(|error| EquilibriumError::named(error, system, &["calcite".into()], &[]))?;
    let mut supply = vec![0.0; totals.len()];
    for (k, nu) in &gas.stoichiometry {
        supply[*k] = rational::to_f64(*nu);
    }
    let unit = |k: usize| (0..totals.len()).map(|own| f64::from(u8::from(own == k))).collect();
    let dissolved = state.dissolved_quantities().into_iter().enumerate();
    let phase = Some(system.ledger().find_phase("calcite")?.clone());
    let conditions = Conditions {
        held: vec![Held { phase, ..Held::chosen(reservoir, supply) }],
        measured: dissolved.map(|(k, (_, total))| (total, unit(k))).collect(),
        temperature: state.temperature_quantity(),
        ..Conditions::default()
    };
    Ok(Outcome {
        system: system.clone(),
        converged,
        totals,
        exchanged: vec![],
        solids: vec![],
        dosed: Dosed::default(),
        beside: super::beside::Beside::default(),
        conditions: Some(conditions),
    })
}

fn undefined(error: QuantityError) -> EquilibriumError {
    EquilibriumError::Unreachable(error.to_string())
}
