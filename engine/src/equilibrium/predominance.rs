//! Which species or solid holds most of an element: the fields of a pe-pH diagram, one point at a time.

use super::error::EquilibriumError;
use super::state::State;
use crate::chem::{Element, Species, rational};
use crate::ledger::Ledger;
use crate::solve::Settings;
use crate::water::{Sample, Treatment};

/// What holds most of an element.
#[derive(Debug, Clone, PartialEq)]
pub struct Predominant {
    /// The solute or solid.
    pub species: Species,
    /// Its share of all the element there is, solids included, from 0 to 1.
    pub share: f64,
}

/// A point of a pe-pH diagram: the water at this pe and pH with these solids allowed, and what holds most of an element.
///
/// pH is held by hydrogen ions and pe by electrons, so the totals of all other elements are those of the sample; an element
/// given whole is split over its oxidation states, and water itself takes part as far as it is stable.
///
/// # Errors
///
/// As [`super::equilibrate`]; [`EquilibriumError::Unreachable`] where the water holds nothing of the element.
///
/// # Examples
///
/// ```
/// use std::collections::BTreeMap;
/// use lysocline_engine::chem::Element;
/// use lysocline_engine::equilibrium::predominance::at;
/// use lysocline_engine::named::Value;
/// use lysocline_engine::solve::Settings;
/// use lysocline_engine::water::Sample;
///
/// let keys = [("pH", Value::Number(7.0)), ("Fe", Value::Text("10 umol/kg".into()))];
/// let water = Sample::read(keys.map(|(key, value)| (key.to_string(), value)).into())?;
/// let iron = Element::from_symbol("Fe").expect("a known element");
/// let field = |pe, ph| at(&water, iron, (pe, ph), &["ferrihydrite"], None, &Settings::default());
/// assert_eq!(field(2.0, 5.0)?.species.key(), "Fe^2+");
/// assert_eq!(field(10.0, 8.0)?.species.mineral_name(), Some("ferrihydrite"));
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
pub fn at(
    water: &Sample,
    element: Element,
    (pe, ph): (f64, f64),
    solids: &[&str],
    ledger: Option<&Ledger>,
    settings: &Settings,
) -> Result<Predominant, EquilibriumError> {
    let held = [Treatment::HoldPh { ph, reagent: None }, Treatment::HoldPe { pe, reagent: None }];
    let allowed = solids.iter().map(|solid| Treatment::Allow { solid: (*solid).into(), above: 0.0 });
    let water = held.into_iter().chain(allowed).try_fold(water.clone(), |water, treatment| {
        water.treated(treatment).map_err(|error| EquilibriumError::Unreachable(error.to_string()))
    })?;
    let state = super::equilibrate(&water, ledger, settings)?;
    of(&state, element)
        .ok_or_else(|| EquilibriumError::Unreachable(format!("the water holds nothing of {element}")))
}

/// What holds most of an element in a state; `None` where there is none of it.
#[must_use]
pub fn of(state: &State, element: Element) -> Option<Predominant> {
    let atoms = |species: &Species| rational::to_f64(species.count(element));
    let solutes = state.system().solutes().zip(&state.converged().ln_c);
    let dissolved = solutes.map(|(formed, ln_c)| (&formed.species, atoms(&formed.species) * ln_c.exp()));
    let solids = state.solids().iter().map(|solid| (&solid.species, atoms(&solid.species) * solid.amount));
    let all: Vec<(&Species, f64)> = dissolved.chain(solids).filter(|(_, held)| *held > 0.0).collect();
    let sum: f64 = all.iter().map(|(_, held)| held).sum();
    let (species, held) = all.into_iter().max_by(|a, b| a.1.total_cmp(&b.1))?;
    Some(Predominant { species: species.clone(), share: held / sum })
}
