//! Mixing river and sea along an estuary.
//!
//! A river is computed with a ledger at zero ionic strength, the sea with stoichiometric constants; no one set of constants
//! holds for both. What is the same in both is what mixing conserves: alkalinity (Dickson 1981), inorganic carbon, calcium
//! and nutrients per kilogram of solution. So each end is computed with its own ledger, the conserved totals are mixed by
//! mass, and the mixture is a seawater of the salinity that the sea brings, with constants that hold from salinity 1 up.
//! What else the river holds (sodium, chloride, magnesium, sulfate, …) is left out, since in the mixture it is taken to be
//! in proportion to salinity: the mixture says which. Below salinity 1 the river's own ledger is the better one.

use std::collections::BTreeMap;

use crate::chem::{Element, Rational, Species};
use crate::equilibrium::{EquilibriumError, State};
use crate::named::Value;
use crate::quantity::Quantity;
use crate::water::Sample;
use crate::water::analyte::oxidation_state;

/// What is conserved, by the key of a seawater and the observable it is read from.
const CONSERVED: [(&str, &str); 7] = [
    ("alkalinity", "alkalinity [eq/kg(solution)]"),
    ("DIC", "DIC [mol/kg(solution)]"),
    ("Ca", "total(Ca) [mol/kg(solution)]"),
    ("phosphate", "total(P) [mol/kg(solution)]"),
    ("silicate", "total(Si) [mol/kg(solution)]"),
    ("ammonium", "total(N(-III)) [mol/kg(solution)]"),
    ("sulfide", "total(S(-II)) [mol/kg(solution)]"),
];

/// Constants that hold from salinity 1 up, over all temperatures of surface waters.
const ESTUARINE: [(&str, &str); 2] = [("K1 K2", "Millero 2006"), ("KF", "Dickson Riley 1979")];

/// `fraction` (by mass, 0 to 1) of the sea in the river.
///
/// # Errors
///
/// Returns that `sea` is no seawater, a fraction out of range, or what the ends have no answer to.
pub fn mixture(river: &State, sea: &State, fraction: f64) -> Result<Sample, EquilibriumError> {
    let refuse = |why: String| EquilibriumError::Unreachable(why);
    let ledger = sea.system().ledger();
    let Some(salty) = ledger.sea() else {
        return Err(refuse("the sea of an estuary is a state of `seawater(#{ … })`".into()));
    };
    if !(0.0..=1.0).contains(&fraction) {
        return Err(refuse(format!("the fraction of the sea in a mixture is 0 to 1, not {fraction}")));
    }
    let mix = |river: f64, sea: f64| (1.0 - fraction) * river + fraction * sea;
    let fresh = river.system().ledger().sea().map_or(0.0, |sea| sea.salinity);
    let temperature = mix(river.temperature().celsius(), sea.temperature().celsius());
    let mut entries = BTreeMap::from([
        ("name".to_string(), Value::Text(format!("{:.3} sea", fraction))),
        ("salinity".to_string(), Value::Number(mix(fresh, salty.salinity))),
        ("temperature".to_string(), Value::Text(format!("{temperature} degC"))),
        ("ph_scale".to_string(), Value::Text(salty.ph_scale.word().into())),
    ]);
    for (key, observable) in CONSERVED {
        let ends = [(river, 1.0 - fraction), (sea, fraction)].map(|(end, share)| {
            let total = end.get(observable);
            (total.ok(), share)
        });
        let parts: Vec<(&Quantity, f64)> =
            ends.iter().filter_map(|(total, share)| Some((total.as_ref()?, *share))).collect();
        let Some((first, _)) = parts.first() else { continue };
        let value: f64 = parts.iter().map(|(total, share)| total.value() * share).sum();
        let mixed = Quantity::from_partials(value, first.unit().clone(), &parts);
        let mixed = mixed.map_err(|error| refuse(error.to_string()))?;
        if value != 0.0 {
            entries.insert(key.to_string(), Value::Quantity(mixed));
        }
    }
    let sample = Sample::read_seawater(entries).map_err(|error| refuse(error.to_string()))?;
    let sample = if fraction < 1.0 { sample.with_labels(BTreeMap::new(), left_out(river)) } else { sample };
    let book =
        ESTUARINE.into_iter().try_fold(ledger.clone(), |book, (name, author)| book.choose(name, author))?;
    Ok(sample.with_ledger(&book))
}

/// What the mixture does not take from the river, in words.
fn left_out(river: &State) -> Vec<String> {
    let system = river.system();
    // A brackish water's ions are those of its salinity, which is mixed.
    if system.ledger().sea().is_some() {
        return vec![];
    }
    let dissolved = river.dissolved().iter().enumerate().filter(|(_, total)| **total > 0.0);
    let species = dissolved.map(|(k, _)| system.component_species(k));
    let left: Vec<String> =
        species.filter(|species| !is_carried(species)).map(|species| format!("`{species}`")).collect();
    let words = |left: String| {
        format!(
            "of the river, alkalinity, inorganic carbon, calcium, phosphate, silicate, ammonium and sulfide are mixed in; \
             {left} left out, since these ions go with the salinity of the mixture"
        )
    };
    match left.as_slice() {
        [] => vec![],
        [one] => vec![words(format!("its {one} is"))],
        [others @ .., last] => vec![words(format!("its {} and {last} are", others.join(", ")))],
    }
}

/// Whether a component of a river comes with what is conserved.
fn is_carried(species: &Species) -> bool {
    let element = |symbol| Element::from_symbol(symbol).expect("a known element");
    let holds = |symbol| species.count(element(symbol)) != Rational::from_integer(0);
    let reduced =
        |symbol, state| oxidation_state(species, element(symbol)) == Some(Rational::from_integer(state));
    *species == Species::proton()
        || ["C", "Ca", "P", "Si"].into_iter().any(holds)
        || reduced("N", -3)
        || reduced("S", -2)
}
