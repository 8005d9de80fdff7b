//! Formation of every species of a ledger from components the engine picks itself.
//!
//! A component is a species that the others are formed from. The simplest ones are preferred: water, the hydrogen ion,
//! then monatomic ions, then the ions that occur in most reactions. Which ones are picked changes no result; the solver
//! re-bases on the most concentrated species anyway.
//!
//! Oxidation states are components of their own: reactions with electrons form nothing from anything, but for gases and
//! solids that no other reaction makes known (pyrite). Those that relate what is dissolved are kept apart, as electron
//! balances from which [`Formations::couple`] makes [`Couple`]s; which of them are in equilibrium is up to a water.

use std::cmp::Reverse;
use std::collections::BTreeSet;

use super::couple::Couple;
use super::elimination::{Combination, Echelon, Sparse, TooLarge};
use crate::chem::{GasStandard, Rational, Reaction, ReactionError, Species};

/// Every species of a ledger as a formation reaction from its components.
#[derive(Debug, Clone, Default)]
pub struct Formations {
    /// The components. The electron is one if it takes part in any reaction, though it is no species.
    pub components: Vec<Species>,
    /// All species, components included, solutes first, each group in order of spelling.
    pub species: Vec<Formation>,
    /// Reactions that the others already imply, with the cycle each would close.
    pub leftovers: Vec<Leftover>,
    /// Reactions with electrons among components, each independent of those before: `Σ νⱼ ln aⱼ + Σ nₖ ln Kₖ = 0`, with
    /// components by their index.
    balances: Vec<Combination>,
    /// Reactions left out because their coefficients outgrow 64 bits, by their index in the order of names.
    pub too_large: Vec<usize>,
}

/// One species formed from components: ln a = Σ νⱼ ln aⱼ + Σ nₖ ln Kₖ.
#[derive(Debug, Clone, PartialEq)]
pub struct Formation {
    /// The species formed.
    pub species: Species,
    /// Coefficient of each component, by its index in [`Formations::components`].
    pub stoichiometry: Vec<(usize, Rational)>,
    /// Multiple of each of the ledger's reactions, by its index in the order of names.
    pub multiples: Vec<(usize, Rational)>,
}

/// A reaction that was not needed.
#[derive(Debug, Clone)]
pub struct Leftover {
    /// The reaction, by its index in the order of names.
    pub reaction: usize,
    /// The sum of reactions that leaves nothing: Σ nₖ log Kₖ should be zero.
    pub cycle: Vec<(usize, Rational)>,
}

impl Formations {
    /// Eliminates reactions in order of preference: smaller stated sigma first, unstated last, then fewer species, then
    /// the name; those with electrons last.
    pub(super) fn of(reactions: &[(&str, &Reaction)], solutes: &BTreeSet<Species>) -> Self {
        let electron = Species::electron();
        let has_electrons = |index: usize| reactions[index].1.equation().coefficient(&electron) != 0.into();
        let mut order: Vec<usize> = (0..reactions.len()).collect();
        order.sort_by(|a, b| {
            let rank = |index: usize| (has_electrons(index), preference(&reactions[index]));
            rank(*a).partial_cmp(&rank(*b)).expect("no NaN")
        });

        let columns = columns(order.iter().map(|index| reactions[*index].1), solutes);
        let column_of =
            |species: &Species| columns.iter().position(|known| known == species).expect("every species");
        let is_phase = |column: usize| columns[column].is_gas() || columns[column].is_solid();
        let mut echelon = Echelon::default();
        let mut among_components = Vec::new();
        let (mut leftovers, mut too_large) = (Vec::new(), Vec::new());
        for index in order {
            let terms = reactions[index].1.equation().terms();
            let row: Sparse = terms.iter().map(|(species, c)| (column_of(species), *c)).collect();
            let mut reduced = Combination { row, multiples: Sparse::from([(index, 1.into())]) };
            if echelon.reduce(&mut reduced).is_err() {
                too_large.push(index);
                continue;
            }
            let pivot = reduced.row.first_key_value().map(|(pivot, _)| *pivot);
            if has_electrons(index) && pivot.is_some_and(|pivot| !is_phase(pivot)) {
                among_components.push((index, reduced));
                continue;
            }
            match echelon.add_combination(reduced) {
                Ok(None) => {}
                Ok(Some(cycle)) => {
                    leftovers.push(Leftover { reaction: index, cycle: cycle.multiples.into_iter().collect() })
                }
                Err(TooLarge) => too_large.push(index),
            }
        }

        let component_columns: Vec<usize> =
            (0..columns.len()).filter(|c| echelon.row_of(*c).is_none()).rev().collect();
        let mut species: Vec<Formation> = (0..columns.len())
            .filter(|column| columns[*column] != electron)
            .map(|column| {
                formation(columns[column].clone(), column, echelon.row_of(column), &component_columns)
            })
            .collect();
        species.sort_by_key(|formed| (!formed.species.is_solute(), formed.species.clone()));
        let components = component_columns.iter().map(|column| columns[*column].clone()).collect();
        let position = |column: usize| component_columns.iter().position(|c| *c == column);
        let mut independent = Echelon::default();
        let mut balances = Vec::new();
        for (index, balance) in among_components {
            let components = balance.row.iter().map(|(c, nu)| (position(*c).expect("components only"), *nu));
            let balance = Combination { row: components.collect(), multiples: balance.multiples };
            match independent.add_combination(balance.clone()) {
                Ok(None) => balances.push(balance),
                Ok(Some(cycle)) => {
                    leftovers.push(Leftover { reaction: index, cycle: cycle.multiples.into_iter().collect() })
                }
                Err(TooLarge) => too_large.push(index),
            }
        }
        Self { components, species, leftovers, balances, too_large }
    }

    /// Position of a component.
    #[must_use]
    pub fn component(&self, species: &Species) -> Option<usize> {
        self.components.iter().position(|component| component == species)
    }

    /// Every couple of neighbouring oxidation states that reactions with electrons relate.
    #[must_use]
    pub fn couples(&self) -> Vec<Couple> {
        super::couple::all(&self.components, &self.balances)
    }

    /// The couple of two components, whichever way round they are named; `None` where no reactions relate them.
    #[must_use]
    pub fn couple(&self, one: usize, other: usize) -> Option<Couple> {
        super::couple::between(&self.components, &self.balances, one, other)
    }

    /// How a species is formed.
    #[must_use]
    pub fn formation(&self, species: &Species) -> Option<&Formation> {
        self.species.iter().find(|formed| formed.species == *species)
    }
}

impl Formation {
    /// Coefficient of a component.
    #[must_use]
    pub fn coefficient(&self, component: usize) -> Rational {
        let found = self.stoichiometry.iter().find(|(index, _)| *index == component);
        found.map_or_else(|| 0.into(), |(_, coefficient)| *coefficient)
    }
}

/// A row `1 s + Σ aⱼ bⱼ = 0` reads `ln a_s = ln K - Σ aⱼ ln a_bⱼ`; a component is formed from itself.
fn formation(species: Species, column: usize, made: Option<&Combination>, components: &[usize]) -> Formation {
    let position =
        |column: usize| components.iter().position(|c| *c == column).expect("rows hold components only");
    let Some(made) = made else {
        return Formation { species, stoichiometry: vec![(position(column), 1.into())], multiples: vec![] };
    };
    let others = made.row.iter().filter(|(other, _)| **other != column);
    Formation {
        species,
        stoichiometry: others.map(|(other, coefficient)| (position(*other), -coefficient)).collect(),
        multiples: made.multiples.iter().map(|(reaction, multiple)| (*reaction, *multiple)).collect(),
    }
}

fn preference<'a>((name, reaction): &(&'a str, &Reaction)) -> (f64, usize, &'a str) {
    let sigma = reaction.log_k().ok().and_then(|log_k| log_k.sigma()).unwrap_or(f64::INFINITY);
    (sigma, reaction.equation().terms().len(), name)
}

/// Species from those to be formed to those to form others from.
fn columns<'a>(reactions: impl Iterator<Item = &'a Reaction>, solutes: &BTreeSet<Species>) -> Vec<Species> {
    let mut occurrences = std::collections::BTreeMap::<Species, usize>::new();
    for solute in solutes.iter().chain(&[Species::water(), Species::proton()]) {
        occurrences.entry(solute.clone()).or_default();
    }
    for reaction in reactions {
        for (species, _) in reaction.equation().terms() {
            *occurrences.entry(species.clone()).or_default() += 1;
        }
    }
    let mut columns: Vec<(Species, usize)> = occurrences.into_iter().collect();
    columns.sort_by_key(|(species, count)| (fitness(species), *count, Reverse(species.clone())));
    columns.into_iter().map(|(species, _)| species).collect()
}

/// How well a species serves as a component, from worst to best.
fn fitness(species: &Species) -> u8 {
    let elements = species.elements_beside_water().count();
    let atoms: Rational = species.composition().iter().map(|(_, count)| *count).sum();
    match () {
        () if *species == Species::electron() => 7,
        () if *species == Species::water() => 6,
        () if *species == Species::proton() => 5,
        () if !species.is_solute() => 0,
        () if species.charge() != 0 && atoms == 1.into() => 4,
        () if elements == 1 && species.charge() != 0 => 3,
        () if elements == 1 => 2,
        () => 1,
    }
}

/// The reaction with its gases counted from 1 bar, as every ledger keeps it.
///
/// # Errors
///
/// [`ReactionError::NotForLedger`], or as [`Reaction::constant`].
pub(super) fn in_bar(reaction: &Reaction) -> Result<Reaction, ReactionError> {
    reaction.check_for_ledger()?;
    reaction.to_gas_standard(GasStandard::Bar)
}

/// The same for a ledger of seawater.
pub(super) fn in_bar_at_sea(reaction: &Reaction) -> Result<Reaction, ReactionError> {
    reaction.check_for_sea_ledger()?;
    reaction.to_gas_standard(GasStandard::Bar)
}
