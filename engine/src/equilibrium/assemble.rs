//! Names become indices: the species that can occur in a water, as rows of numbers at one temperature.

use std::collections::BTreeSet;
use std::sync::OnceLock;

use crate::activity::Model;
use crate::chem::{Element, PhScale, Rational, Species, rational};
use crate::ledger::{Couple, Formation, Formations, Ledger, LedgerError, Sea};
use crate::physics::constants::LN_10;
use crate::seawater::constants::{Place, by_scales, log_k_free};
use crate::seawater::scales::{ByScales, Scales};
use crate::solve::{Problem, Reservoir, Row, Total};
use crate::units::{Pressure, Temperature};
use crate::water::analyte::oxidation_state;

use super::activity;
use super::error::EquilibriumError;

/// The species, gases and solids that can occur with the components present, at one temperature and pressure.
#[derive(Debug, Clone)]
pub struct System {
    ledger: Ledger,
    temperature: Temperature,
    pressure: Pressure,
    /// Positions in the ledger's components, water left out: the solver's component k is `components[k]`.
    components: Vec<usize>,
    /// Positions in [`Formations::species`], with their rows.
    solutes: Vec<(usize, Row)>,
    phases: Vec<(usize, Row)>,
    /// What is on sites of solids.
    on_sites: Vec<(usize, Row)>,
    /// Redox couples in equilibrium: rows that are zero then.
    couples: Vec<(Couple, Row)>,
    model: Model,
    log_k: Vec<f64>,
    doubts: Vec<Option<Doubt>>,
    /// Worked out when a budget asks for it.
    by_scales: OnceLock<Vec<ByScales>>,
}

/// Why a reaction's log K is uncertain at this temperature.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Doubt {
    /// Known at another temperature only; used as it stands.
    OneTemperature(Temperature),
    /// So many kelvin outside its stated range.
    OutsideRange(f64),
}

impl System {
    /// Assembles the species formed of `present` components (positions in the ledger's components).
    ///
    /// # Errors
    ///
    /// [`EquilibriumError::Misclosure`] if two routes to one constant disagree.
    pub fn new(
        ledger: &Ledger,
        present: &BTreeSet<usize>,
        temperature: Temperature,
        pressure: Pressure,
    ) -> Result<Self, EquilibriumError> {
        let formations = ledger.formations();
        if let Some((name, _)) = formations.too_large.first().and_then(|k| ledger.reactions().nth(*k)) {
            return Err(LedgerError::TooLarge(name.into()).into());
        }
        let water = formations.component(&Species::water());
        let components: Vec<usize> = present.iter().copied().filter(|j| Some(*j) != water).collect();
        let (log_k, doubts) = constants(ledger, temperature);
        check_closure(ledger, temperature)?;
        let is_present = |formed: &Formation| {
            formed.stoichiometry.iter().all(|(j, _)| Some(*j) == water || components.contains(j))
        };
        let row_of = |formed: &Formation| row(formed, &components, water, &log_k);
        let formed = formations.species.iter().enumerate().filter(|(_, formed)| is_present(formed));
        let (solutes, others): (Vec<_>, Vec<_>) = formed
            .map(|(index, formed)| (index, row_of(formed)))
            .partition(|(i, _)| formations.species[*i].species.is_solute());
        let (on_sites, others): (Vec<_>, Vec<_>) =
            others.into_iter().partition(|(i, _)| formations.species[*i].species.is_on_sites());
        let phases =
            others.into_iter().filter(|(i, _)| formations.species[*i].species != Species::water()).collect();
        let dissolved: Vec<&Species> =
            solutes.iter().map(|(index, _)| &formations.species[*index].species).collect();
        let model = activity::model(ledger.activity(), &dissolved, temperature, pressure);
        let couples = vec![];
        let ledger = ledger.clone();
        let by_scales = OnceLock::new();
        Ok(Self {
            ledger,
            temperature,
            pressure,
            components,
            solutes,
            phases,
            on_sites,
            couples,
            model,
            log_k,
            doubts,
            by_scales,
        })
    }

    /// The same with these redox couples in equilibrium, whose components have to be present.
    #[must_use]
    pub fn with_couples(mut self, couples: Vec<Couple>) -> Self {
        let rows: Vec<Row> = couples.iter().map(|couple| self.couple_row(couple)).collect();
        self.couples = couples.into_iter().zip(rows).collect();
        self
    }

    /// The same species with the constants of another temperature; whether cycles close there is not asked.
    #[must_use]
    pub fn at(&self, temperature: Temperature) -> Self {
        let formations = self.ledger.formations();
        let (log_k, doubts) = constants(&self.ledger, temperature);
        let dissolved: Vec<&Species> =
            self.solutes.iter().map(|(index, _)| &formations.species[*index].species).collect();
        let model = activity::model(self.ledger.activity(), &dissolved, temperature, self.pressure);
        let by_scales = OnceLock::new();
        let mut system = Self { temperature, doubts, model, by_scales, ..self.clone() };
        for (index, row) in system.solutes.iter_mut().chain(&mut system.phases).chain(&mut system.on_sites) {
            row.ln_k = ln_k(&formations.species[*index], &log_k);
        }
        for (couple, row) in &mut system.couples {
            row.ln_k = ln_k(&couple.reduction, &log_k);
        }
        system.log_k = log_k;
        system
    }

    /// The same in a sea of another salinity, at the same totals; `None` outside seawater.
    #[must_use]
    pub fn at_salinity(&self, salinity: f64) -> Option<Self> {
        let sea = Sea { salinity, ..self.ledger.sea()? };
        let ledger = self.ledger.in_sea(sea).ok()?;
        Some(Self { ledger, ..self.clone() }.at(self.temperature))
    }

    /// The ledger.
    #[must_use]
    pub fn ledger(&self) -> &Ledger {
        &self.ledger
    }

    /// The temperature its constants hold for.
    #[must_use]
    pub fn temperature(&self) -> Temperature {
        self.temperature
    }

    /// The pressure its activity model holds for; constants are those of 1 atm.
    #[must_use]
    pub fn pressure(&self) -> Pressure {
        self.pressure
    }

    /// The activity model.
    #[must_use]
    pub fn model(&self) -> &Model {
        &self.model
    }

    /// Number of components present, water not counted.
    #[must_use]
    pub fn n_components(&self) -> usize {
        self.components.len()
    }

    /// Positions of its components in the ledger's components.
    #[must_use]
    pub fn components(&self) -> &[usize] {
        &self.components
    }

    /// The species that is component `k`.
    #[must_use]
    pub fn component_species(&self, k: usize) -> &Species {
        &self.formations().components[self.components[k]]
    }

    /// Position of a component among those present.
    #[must_use]
    pub fn component(&self, species: &Species) -> Option<usize> {
        self.components.iter().position(|j| self.formations().components[*j] == *species)
    }

    /// What is added to -log10 a(H^+) to have pH on the scale of the water: 0 outside seawater, where the hydrogen ion of
    /// the solver is the free one.
    #[must_use]
    pub fn ph_shift(&self) -> f64 {
        self.scales().map_or(0.0, |(sea, scales)| scales.shift_from_free(sea.ph_scale))
    }

    /// The same for a scale named; 0 outside seawater.
    #[must_use]
    pub fn ph_shift_on(&self, scale: PhScale) -> f64 {
        self.scales().map_or(0.0, |(_, scales)| scales.shift_from_free(scale))
    }

    /// The sea of a marine system with its scales of pH.
    #[must_use]
    pub fn scales(&self) -> Option<(Sea, Scales)> {
        let sea = self.ledger.sea()?;
        let scales = Scales::at(&self.ledger, &Place::of(&sea, self.temperature));
        Some((sea, scales))
    }

    /// How log10 K of a reaction answers to what the scales of pH are made of; not at all outside seawater.
    #[must_use]
    pub fn by_scales(&self, reaction: usize) -> ByScales {
        let Some(sea) = self.ledger.sea() else { return ByScales::default() };
        self.by_scales.get_or_init(|| by_scales(&self.ledger, &sea, self.temperature))[reaction]
    }

    /// Position of the hydrogen ion, which is always present.
    #[must_use]
    pub fn proton(&self) -> usize {
        self.component(&Species::proton()).expect("every water has hydrogen ions")
    }

    /// Solutes, in the order of the solver's species.
    pub fn solutes(&self) -> impl ExactSizeIterator<Item = &Formation> {
        self.solutes.iter().map(|(index, _)| &self.formations().species[*index])
    }

    /// Position of a solute.
    #[must_use]
    pub fn solute(&self, species: &Species) -> Option<usize> {
        self.solutes().position(|formed| formed.species == *species)
    }

    /// Gases and solids that the components present can form.
    pub fn phases(&self) -> impl ExactSizeIterator<Item = (&Formation, &Row)> {
        self.phases.iter().map(|(index, row)| (&self.formations().species[*index], row))
    }

    /// A gas or solid by its species.
    #[must_use]
    pub fn phase(&self, species: &Species) -> Option<(&Formation, &Row)> {
        self.phases().find(|(formed, _)| formed.species == *species)
    }

    /// Redox couples in equilibrium.
    pub fn couples(&self) -> impl ExactSizeIterator<Item = (&Couple, &Row)> {
        self.couples.iter().map(|(couple, row)| (couple, row))
    }

    /// The reduction of a couple as a row of the solver, zero at equilibrium.
    #[must_use]
    pub fn couple_row(&self, couple: &Couple) -> Row {
        let water = self.formations().component(&Species::water());
        row(&couple.reduction, &self.components, water, &self.log_k)
    }

    /// ln K of a species, whether or not its components are present.
    #[must_use]
    pub fn formation_ln_k(&self, formed: &Formation) -> f64 {
        ln_k(formed, &self.log_k)
    }

    /// The couples in equilibrium as what the solver holds. A reservoir that delivers a reaction, so much oxidised for so
    /// much reduced, delivers nothing else: it sets the reaction in equilibrium.
    #[must_use]
    pub fn couples_held(&self) -> Vec<Reservoir> {
        self.couples.iter().map(|(_, row)| Reservoir { row: row.clone(), ln_value: 0.0 }).collect()
    }

    /// Position of the electron, where any reaction with electrons plays a part.
    #[must_use]
    pub fn electron(&self) -> Option<usize> {
        self.component(&Species::electron())
    }

    /// The formation of anything that is no solute: a gas, a solid, an ion or group on sites.
    #[must_use]
    pub fn formed_row(&self, species: &Species) -> Option<&Row> {
        let of = |index: usize| &self.formations().species[index].species;
        let mut all = self.phases.iter().chain(&self.on_sites);
        all.find(|(index, _)| of(*index) == species).map(|(_, row)| row)
    }

    /// Why the constants behind a species are uncertain at this temperature, with the reactions concerned.
    pub fn doubts<'a>(&'a self, formed: &'a Formation) -> impl Iterator<Item = (&'a str, Doubt)> {
        let names: Vec<&str> = self.ledger.names().collect();
        formed.multiples.iter().filter_map(move |(k, _)| self.doubts[*k].map(|doubt| (names[*k], doubt)))
    }

    /// The one temperature a reaction's constant is known at, where that is not the system's.
    #[must_use]
    pub fn known_only_at(&self, reaction: usize) -> Option<Temperature> {
        match self.doubts[reaction] {
            Some(Doubt::OneTemperature(known)) => Some(known),
            _ => None,
        }
    }

    /// The solver's problem without surroundings and solids.
    #[must_use]
    pub fn problem(&self, totals: &[f64]) -> Problem {
        Problem {
            n_components: self.n_components(),
            species: self.solutes.iter().map(|(_, row)| row.clone()).collect(),
            totals: totals.iter().map(|total| Total::from(*total)).collect(),
            ..Problem::default()
        }
    }

    fn formations(&self) -> &Formations {
        self.ledger.formations()
    }
}

/// log10 K of every reaction at a temperature, and what is doubtful about it.
fn constants(ledger: &Ledger, temperature: Temperature) -> (Vec<f64>, Vec<Option<Doubt>>) {
    if let Some(sea) = ledger.sea() {
        // A state in seawater warns of its own of constants outside their range: see `seawater::constants`.
        let log_k = log_k_free(ledger, &sea, temperature);
        let certain = vec![None; log_k.len()];
        return (log_k, certain);
    }
    let read = ledger.reactions().map(|(_, reaction)| {
        let Ok(constant) = reaction.constant() else { return (0.0, None) };
        let (log_k, away) = constant.log_k.nearest_to(temperature);
        let outside = constant.log_k.outside(temperature);
        // A tenth of a kelvin is what 298 K and 25 degC differ by, and well below what matters.
        let doubt = match constant.log_k.only_at() {
            Some(known) if away > 0.2 => Some(Doubt::OneTemperature(known)),
            _ if outside > 0.0 => Some(Doubt::OutsideRange(outside)),
            _ => None,
        };
        (log_k, doubt)
    });
    read.unzip()
}

/// The cycles that leftover reactions close must close.
fn check_closure(ledger: &Ledger, temperature: Temperature) -> Result<(), EquilibriumError> {
    for leftover in &ledger.formations().leftovers {
        let cycle = ledger.cycle(leftover, temperature);
        if cycle.contradicts() {
            return Err(EquilibriumError::Misclosure(Box::new(cycle)));
        }
    }
    Ok(())
}

fn row(formed: &Formation, components: &[usize], water: Option<usize>, log_k: &[f64]) -> Row {
    let position = |j: usize| components.iter().position(|own| *own == j);
    let stoichiometry: Vec<(usize, Rational)> =
        formed.stoichiometry.iter().filter_map(|(j, nu)| position(*j).map(|k| (k, *nu))).collect();
    Row {
        stoichiometry,
        ln_k: ln_k(formed, log_k),
        // A couple is a reaction, whose charges add up.
        charge: if formed.species == Species::electron() { 0.0 } else { f64::from(formed.species.charge()) },
        water: water.map_or(0.0, |water| rational::to_f64(formed.coefficient(water))),
    }
}

fn ln_k(formed: &Formation, log_k: &[f64]) -> f64 {
    formed.multiples.iter().map(|(k, n)| rational::to_f64(*n) * log_k[*k]).sum::<f64>() * LN_10
}

/// The components that carry an element, water and the hydrogen ion left out: those that hold no other element where there
/// are any, since a complex such as Fe(CN)6^3- is counted as itself. Oxygen and hydrogen are carried by their own gases.
pub(super) fn carriers(formations: &Formations, element: Element) -> Vec<usize> {
    let components = 0..formations.components.len();
    let carries = |j: &usize| {
        let species = &formations.components[*j];
        let is_of_water = matches!(element, Element::H | Element::O);
        species.count(element) != 0.into()
            && *species != Species::water()
            && !species.is_on_sites()
            && (!is_of_water || oxidation_state(species, element) == Some(0.into()))
    };
    let all: Vec<usize> = components.filter(carries).collect();
    let alone = |j: &usize| formations.components[*j].elements_beside_water().nth(1).is_none();
    let alone: Vec<usize> = all.iter().copied().filter(alone).collect();
    if alone.is_empty() { all } else { alone }
}

/// The component that inorganic carbon is counted by.
pub(super) fn inorganic_carbon(formations: &Formations) -> Option<usize> {
    let carriers = carriers(formations, Element::C);
    let is_inorganic =
        |j: &&usize| oxidation_state(&formations.components[**j], Element::C) == Some(4.into());
    carriers.iter().find(is_inorganic).or(carriers.first()).copied()
}
