//! Redox couples: two oxidation states of one element, or two ions of one complex, that exchange electrons.

use std::fmt;

use super::elimination::{Combination, Echelon, Sparse};
use super::formation::Formation;
use crate::chem::{Element, Rational, Species};
use crate::water::analyte::{oxidation_state, to_roman};

/// Two components that take up and give off electrons: `oxidised + n e^- + … = reduced + …`.
#[derive(Debug, Clone, PartialEq)]
pub struct Couple {
    /// The component that takes electrons up.
    pub oxidised: Species,
    /// The component that gives them off; water for oxygen, the hydrogen ion being the oxidised one of hydrogen.
    pub reduced: Species,
    /// The reduction, in whole numbers: `Σ νⱼ ln aⱼ + Σ nₖ ln Kₖ = 0` at equilibrium, νⱼ of the electron being minus
    /// [`Couple::electrons`].
    pub reduction: Formation,
    /// Electrons that the reduction takes up.
    pub electrons: i64,
}

impl Couple {
    /// Whether it is between water and its own gases, oxygen or hydrogen.
    #[must_use]
    pub fn is_of_water(&self) -> bool {
        self.element().is_some_and(of_water)
    }

    /// The element that changes its oxidation state; `None` for a complex of several.
    #[must_use]
    pub fn element(&self) -> Option<Element> {
        element_between(&self.oxidised, &self.reduced)
    }
}

/// `Fe(III)/Fe(II)`; ions of several elements by their formulas.
impl fmt::Display for Couple {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let state = |species: &Species| {
            let state = oxidation_state(species, self.element()?)?;
            state.is_integer().then(|| to_roman(state.to_integer() as i32))
        };
        match (self.element(), state(&self.oxidised), state(&self.reduced)) {
            (Some(element), Some(oxidised), Some(reduced)) => {
                write!(f, "{element}({oxidised})/{element}({reduced})")
            }
            _ => write!(f, "{}/{}", self.oxidised.key(), self.reduced.key()),
        }
    }
}

fn of_water(element: Element) -> bool {
    matches!(element, Element::H | Element::O)
}

/// The one element both are forms of: of water's own two, that which stands alone in one of them.
fn element_between(one: &Species, other: &Species) -> Option<Element> {
    let beside = |species: &Species| species.elements_beside_water().collect::<Vec<_>>();
    match (beside(one).as_slice(), beside(other).as_slice()) {
        ([a], [b]) if a == b => Some(*a),
        ([], []) => {
            let alone = |species: &Species| match species.composition() {
                [(element, _)] if *species != Species::proton() => Some(*element),
                _ => None,
            };
            alone(one).or_else(|| alone(other))
        }
        _ => None,
    }
}

/// Every couple of neighbouring oxidation states, and of ions of several elements that one balance relates.
pub(super) fn all(components: &[Species], balances: &[Combination]) -> Vec<Couple> {
    let mut couples: Vec<Couple> = Vec::new();
    for states in oxidation_states(components) {
        for (position, reduced) in states.iter().enumerate().skip(1) {
            let nearest = states[..position].iter().rev();
            couples.extend(nearest.filter_map(|ox| between(components, balances, *ox, *reduced)).take(1));
        }
    }
    for balance in balances {
        let several = |j: &usize| components[*j].elements_beside_water().nth(1).is_some();
        let ions: Vec<usize> = balance.row.keys().copied().filter(several).collect();
        if let [one, other] = ions.as_slice() {
            couples.extend(between(components, balances, *one, *other));
        }
    }
    couples
}

/// Components by element, from the highest oxidation state to the lowest.
fn oxidation_states(components: &[Species]) -> Vec<Vec<usize>> {
    let mut elements: Vec<Element> =
        components.iter().flat_map(|species| species.composition().iter().map(|(e, _)| *e)).collect();
    elements.sort_by_key(|element| element.symbol());
    elements.dedup();
    let of = |element: Element| {
        let states = (0..components.len()).filter_map(|j| {
            let species = &components[j];
            // Hydrogen(I) is the hydrogen ion.
            let is_water = element == Element::H && *species == Species::water();
            Some((oxidation_state(species, element)?, j)).filter(|_| !is_water)
        });
        let mut states: Vec<(Rational, usize)> = states.collect();
        states.sort_by(|a, b| b.cmp(a));
        states.into_iter().map(|(_, j)| j).collect()
    };
    elements.into_iter().map(of).collect()
}

/// The couple of two components that balances relate through nothing but hydrogen ions, water and electrons.
pub(super) fn between(
    components: &[Species],
    balances: &[Combination],
    one: usize,
    other: usize,
) -> Option<Couple> {
    let place = |species: Species| components.iter().position(|own| *own == species);
    let (electron, proton, water) =
        (place(Species::electron())?, place(Species::proton())?, place(Species::water())?);
    // Columns in the order of elimination: everything else first, so that a row is left that holds only these.
    let mut last = vec![one, other];
    last.extend([proton, water, electron].into_iter().filter(|j| *j != one && *j != other));
    let mut columns: Vec<usize> = (0..components.len()).filter(|j| !last.contains(j)).collect();
    let pivot = columns.len();
    columns.extend(&last);
    let column_of = |j: usize| columns.iter().position(|own| *own == j).expect("every component");
    let mut echelon = Echelon::default();
    for balance in balances {
        let row: Sparse = balance.row.iter().map(|(j, nu)| (column_of(*j), *nu)).collect();
        echelon.add_combination(Combination { row, multiples: balance.multiples.clone() }).ok()?;
    }
    let row = echelon.row_of(pivot)?;
    let nu = |j: usize| row.row.get(&column_of(j)).copied().unwrap_or_else(|| 0.into());
    let electrons = nu(electron);
    if electrons == 0.into() || nu(other) == 0.into() {
        return None;
    }
    // Electrons stand with what they reduce.
    let (oxidised, reduced) =
        if (electrons > 0.into()) == (nu(one) > 0.into()) { (one, other) } else { (other, one) };
    // The row reads Σ νⱼ ln aⱼ = ln K: turned so that electrons are taken up, in whole numbers.
    let whole = row.row.values().fold(1, |so_far: i64, nu| so_far * (nu * so_far).denom());
    let scale = Rational::from_integer(if electrons > 0.into() { -whole } else { whole });
    let stoichiometry = row.row.iter().map(|(column, nu)| (columns[*column], nu * scale));
    let multiples = row.multiples.iter().map(|(reaction, multiple)| (*reaction, -multiple * scale));
    Some(Couple {
        oxidised: components[oxidised].clone(),
        reduced: components[reduced].clone(),
        reduction: Formation {
            species: Species::electron(),
            stoichiometry: stoichiometry.collect(),
            multiples: multiples.collect(),
        },
        electrons: (electrons * scale).to_integer().abs(),
    })
}

#[cfg(test)]
mod tests {
    use crate::chem::rational;
    use crate::ledger::shipped;

    #[test]
    fn couples_are_named_by_their_states() {
        let book = shipped::ledger("freshwater", None).unwrap();
        let names: Vec<String> = book.formations().couples().iter().map(ToString::to_string).collect();
        for name in [
            "Fe(III)/Fe(II)",
            "S(VI)/S(-II)",
            "N(V)/N(-III)",
            "C(IV)/C(-IV)",
            "O(0)/O(-II)",
            "H(I)/H(0)",
            "Fe(CN)6^3-/Fe(CN)6^4-",
        ] {
            assert!(names.iter().any(|own| own == name), "{name} in {names:?}");
        }
        assert_eq!(names.len(), 7, "{names:?}");
    }

    /// log K as it follows from the published reaction, and all of them balanced in charge.
    #[test]
    fn a_couple_is_a_reduction() {
        let book = shipped::ledger("freshwater", None).unwrap();
        let formations = book.formations();
        let log_k: Vec<f64> = book.reactions().map(|(_, r)| r.log_k().unwrap().value()).collect();
        for (name, expected) in [("Fe(III)/Fe(II)", -13.02), ("S(VI)/S(-II)", -33.69)] {
            let couples = formations.couples();
            let couple = couples.iter().find(|couple| couple.to_string() == name).unwrap();
            let sum: f64 =
                couple.reduction.multiples.iter().map(|(k, n)| rational::to_f64(*n) * log_k[*k]).sum();
            assert!((sum - expected).abs() < 1e-12, "{name}: {sum}");
        }
        for couple in formations.couples() {
            let electron = formations.component(&crate::chem::Species::electron()).unwrap();
            assert_eq!(couple.reduction.coefficient(electron), (-couple.electrons).into(), "{couple}");
            let terms = couple.reduction.stoichiometry.iter();
            let charge: f64 = terms
                .map(|(j, nu)| rational::to_f64(*nu) * f64::from(formations.components[*j].charge()))
                .sum();
            assert!(charge.abs() < 1e-12, "{couple}: {charge}");
        }
    }
}
