//! Electrons: which couples of a water are in equilibrium, and what pe says.
//!
//! Oxidation states are components of their own and stay so: their totals are exact down to traces, and an alkalinity is
//! linear in them. A couple in equilibrium is a reservoir that delivers its own reduction, so much of one state for so
//! much of the other (see [`System::couples_held`]). The electron is a component that no dissolved species contains, so
//! its total is what pyrite and the like take or give; a pe is its fixed activity.
//!
//! Which couples: those asked for with `couples`, and where a pe is known, those of every element given whole and those of
//! water itself with the oxygen and hydrogen dissolved in it, unless these were measured.

use std::collections::BTreeSet;

use super::assemble::{System, carriers};
use super::error::EquilibriumError;
use super::uncertainty::{Slopes, Variable};
use crate::chem::{Element, Species, rational};
use crate::ledger::{Couple, Formations, Ledger};
use crate::nearest::nearest;
use crate::physics::constants::LN_10;
use crate::solve::{Converged, Reservoir, Row};
use crate::text::list;
use crate::water::Analyte;
use crate::water::analyte::oxidation_state;
use crate::water::redox::{Couples, Potential, Redox};

/// Water gives off a gas of its own above this fugacity, bar, so it is not in equilibrium with a pe that implies more.
pub const STABLE: f64 = 1.0;

/// The part electrons play in one water.
#[derive(Debug, Clone, Default)]
pub struct Plan {
    /// The couples in equilibrium.
    pub couples: Vec<Couple>,
    /// What fixes pe.
    pub pe: Option<Pe>,
}

/// What fixes pe during an analysis.
#[derive(Debug, Clone)]
pub enum Pe {
    /// A number.
    Value(crate::water::redox::Electron),
    /// A couple both of whose states were measured.
    Of(Box<Couple>),
}

impl Plan {
    /// The plan of an analysis: `given` are the amounts with the components that carry them, `present` all components of
    /// the water and its treatments. A pe that only a treatment holds splits what it has to, too.
    ///
    /// # Errors
    ///
    /// A couple the ledger does not know, under the key it was named by, or an element given whole that cannot be split.
    pub fn new(
        redox: &Redox,
        pe_is_held_later: bool,
        ledger: &Ledger,
        given: &[(&Analyte, &str, usize)],
        present: &BTreeSet<usize>,
    ) -> Result<Self, EquilibriumError> {
        if redox.is_silent() && !pe_is_held_later {
            return Ok(Self::default());
        }
        let formations = ledger.formations();
        let mut plan = Self { couples: asked(&redox.couples, ledger, present)?, pe: None };
        match &redox.potential {
            None if !pe_is_held_later => return Ok(plan),
            None => {}
            Some(Potential::Measured(electron)) => plan.pe = Some(Pe::Value(electron.clone())),
            Some(Potential::Couple(name)) => {
                let couple = find(ledger, name, "pe")?;
                check_measured(&couple, formations, given)?;
                // A couple in equilibrium with others gives their common pe by its totals.
                if !plan.couples.contains(&couple) {
                    plan.pe = Some(Pe::Of(Box::new(couple)));
                }
            }
        }
        for (analyte, key, _) in given {
            if let Analyte::Element(element) = analyte {
                plan.add(splitting(*element, key, formations)?);
            }
        }
        let measured = |couple: &Couple| {
            given
                .iter()
                .any(|(_, _, j)| [&couple.oxidised, &couple.reduced].contains(&&formations.components[*j]))
        };
        plan.add(of_water(formations).filter(|own| !measured(own)).collect());
        Ok(plan)
    }

    /// The plan of a water whose couples are known by name.
    ///
    /// # Errors
    ///
    /// A couple the ledger does not know.
    pub fn named(
        names: &[String],
        pe_is_held_later: bool,
        ledger: &Ledger,
    ) -> Result<Self, EquilibriumError> {
        let couples = names.iter().map(|name| find(ledger, name, "couples")).collect::<Result<_, _>>()?;
        let mut plan = Self { couples, pe: None };
        if pe_is_held_later {
            plan.add(of_water(ledger.formations()).collect());
        }
        Ok(plan)
    }

    /// Components that have to be present for it.
    #[must_use]
    pub fn components(&self, formations: &Formations) -> BTreeSet<usize> {
        let of_pe = match &self.pe {
            Some(Pe::Of(couple)) => Some(&**couple),
            _ => None,
        };
        let couples = self.couples.iter().chain(of_pe);
        let parts = couples.flat_map(|couple| couple.reduction.stoichiometry.iter().map(|(j, _)| *j));
        let electron = formations.component(&Species::electron()).filter(|_| self.pe.is_some());
        parts.chain(electron).collect()
    }

    /// Adds couples that are not in it yet, unless pe is read from them.
    fn add(&mut self, couples: Vec<Couple>) {
        for couple in couples {
            let gives_pe = matches!(&self.pe, Some(Pe::Of(own)) if **own == couple);
            if !gives_pe && !self.couples.contains(&couple) {
                self.couples.push(couple);
            }
        }
    }
}

/// The couples asked for with `couples`. All of them are those of elements that are present.
fn asked(
    couples: &Couples,
    ledger: &Ledger,
    present: &BTreeSet<usize>,
) -> Result<Vec<Couple>, EquilibriumError> {
    let formations = ledger.formations();
    let is_present = |species: &Species| formations.component(species).is_some_and(|j| present.contains(&j));
    match couples {
        Couples::None => Ok(vec![]),
        Couples::Named(names) => names.iter().map(|name| find(ledger, name, "couples")).collect(),
        Couples::All => {
            let mut found: Vec<Couple> = Vec::new();
            // A couple brings its other state in, and that the next.
            loop {
                let reached = |species: &Species| {
                    is_present(species)
                        || found.iter().any(|own| own.oxidised == *species || own.reduced == *species)
                };
                let more: Vec<Couple> = formations
                    .couples()
                    .into_iter()
                    .filter(|own| !found.contains(own))
                    .filter(|own| own.is_of_water() || reached(&own.oxidised) || reached(&own.reduced))
                    .collect();
                if more.is_empty() {
                    return Ok(found);
                }
                found.extend(more);
            }
        }
    }
}

/// A couple by its name: two oxidation states, or two ions, in either order.
///
/// # Errors
///
/// A fault of `key` with the nearest couple.
pub fn find(ledger: &Ledger, name: &str, key: &str) -> Result<Couple, EquilibriumError> {
    let formations = ledger.formations();
    let fault = |why: String| EquilibriumError::Analyte { key: key.into(), why };
    let sides: Option<(&str, &str)> = name.split_once('/');
    let component = |text: &str| -> Option<usize> {
        let text = text.trim();
        let by_formula = Species::parse(text).ok().and_then(|species| formations.component(&species));
        let by_state = || {
            let (symbol, _) = text.strip_suffix(')')?.split_once('(')?;
            let element = Element::from_symbol(symbol)?;
            // Water and the hydrogen ion stand for their elements here, which no amount is given of.
            match text {
                "O(-II)" => return formations.component(&Species::water()),
                "H(I)" => return formations.component(&Species::proton()),
                _ => {}
            }
            let state = Analyte::parse(text).ok()?.oxidation_state()?;
            let of = carriers(formations, element);
            of.into_iter().find(|j| oxidation_state(&formations.components[*j], element) == Some(state))
        };
        by_formula.or_else(by_state)
    };
    let found = sides.and_then(|(one, other)| formations.couple(component(one)?, component(other)?));
    found.ok_or_else(|| {
        let known: Vec<String> = formations.couples().iter().map(ToString::to_string).collect();
        let help = match nearest(name, known.iter().map(String::as_str)) {
            Some(near) => format!("did you mean `{near}`?"),
            None if known.is_empty() => "it has no reaction with electrons".into(),
            None => format!("there are {}", list(&known)),
        };
        fault(format!("the ledger has no reaction for the couple `{name}`; {help}"))
    })
}

/// Both states of the couple that pe is taken from have to be measured.
fn check_measured(
    couple: &Couple,
    formations: &Formations,
    given: &[(&Analyte, &str, usize)],
) -> Result<(), EquilibriumError> {
    let states = [&couple.oxidised, &couple.reduced];
    let of_water = [Species::water(), Species::proton()];
    let is_given = |species: &Species| {
        of_water.contains(species)
            || given.iter().any(|(analyte, _, j)| {
                formations.components[*j] == *species && !matches!(analyte, Analyte::Element(_))
            })
    };
    match states.iter().find(|species| !is_given(species)) {
        None => Ok(()),
        Some(missing) => Err(EquilibriumError::Analyte {
            key: "pe".into(),
            why: format!(
                "to take it from {couple} both have to be given as amounts; what {missing} stands for is missing"
            ),
        }),
    }
}

/// The couples between all oxidation states of an element.
fn splitting(element: Element, key: &str, formations: &Formations) -> Result<Vec<Couple>, EquilibriumError> {
    let states = carriers(formations, element).len();
    let couples: Vec<Couple> =
        formations.couples().into_iter().filter(|couple| couple.element() == Some(element)).collect();
    if states <= couples.len() + 1 {
        return Ok(couples);
    }
    Err(EquilibriumError::Analyte {
        key: key.into(),
        why: format!(
            "the ledger knows {states} oxidation states of {element} and no reaction with electrons that relates them, so pe \
             cannot split it: name the state, as in `{element}(II)`, or give the ledger a reaction with `.with_reaction`"
        ),
    })
}

fn of_water(formations: &Formations) -> impl Iterator<Item = Couple> {
    formations.couples().into_iter().filter(Couple::is_of_water)
}

/// A reservoir of electrons at a pe.
#[must_use]
pub fn fixed_pe(electron: usize, pe: f64) -> Reservoir {
    Reservoir { row: Row::new(&[(electron, 1)], 0.0), ln_value: -pe * LN_10 }
}

/// pe at which a couple would be in equilibrium with a composition; not finite where one of its states is absent.
#[must_use]
pub fn pe_of(couple: &Couple, system: &System, converged: &Converged) -> f64 {
    -ln_electron(couple, system, converged) / LN_10
}

/// ln of the activity of the electron that a couple would give.
pub(super) fn ln_electron(couple: &Couple, system: &System, converged: &Converged) -> f64 {
    let row = system.couple_row(couple);
    let electron = system.electron();
    let others = row.stoichiometry.iter().filter(|(k, _)| Some(*k) != electron);
    let sum: f64 = others.map(|(k, nu)| rational::to_f64(*nu) * converged.ln_a[*k]).sum();
    (row.ln_k + sum + row.water * converged.ln_water_activity) / couple.electrons as f64
}

/// Fugacity, bar, of the gas water would give off at a pe: of oxygen or of hydrogen, by the couple of water.
#[derive(Debug, Clone, PartialEq)]
pub struct Implied {
    /// The gas: `O2(g)`, `H2(g)`.
    pub gas: Species,
    /// The couple of water that it belongs to.
    pub couple: Couple,
    /// ln of its fugacity, bar.
    pub ln_fugacity: f64,
}

/// The fugacities of oxygen and hydrogen that the pe of a composition implies, whether or not these are there.
#[must_use]
pub fn implied(system: &System, converged: &Converged) -> Vec<Implied> {
    let Some(electron) = system.electron() else { return vec![] };
    if !converged.ln_a[electron].is_finite() {
        return vec![];
    }
    let formations = system.ledger().formations();
    let mut found = Vec::new();
    for couple in of_water(formations) {
        let dissolved = if couple.reduced == Species::water() { &couple.oxidised } else { &couple.reduced };
        let Some(j) = formations.component(dissolved) else { continue };
        let gas = formations
            .species
            .iter()
            .find(|formed| formed.species.is_gas() && formed.stoichiometry == [(j, 1.into())]);
        let Some(gas) = gas else { continue };
        // ln a of what is dissolved, from the couple at this pe: Σ νⱼ ln aⱼ + ln K = 0 solved for it.
        let nu = rational::to_f64(couple.reduction.coefficient(j));
        let row = system.couple_row(&couple);
        let own = system.component(dissolved);
        let others = row.stoichiometry.iter().filter(|(k, _)| Some(*k) != own);
        let sum: f64 = others.map(|(k, nu)| rational::to_f64(*nu) * converged.ln_a[*k]).sum();
        let ln_a = -(row.ln_k + sum + row.water * converged.ln_water_activity) / nu;
        let ln_fugacity = ln_a + system.formation_ln_k(gas);
        found.push(Implied { gas: gas.species.clone(), couple, ln_fugacity });
    }
    found
}

/// The derivatives of ln of an implied fugacity. The constant of the gas's solubility, which the couple of water holds as
/// well, leaves no trace where the published reaction is that of the gas.
pub(super) fn implied_slopes(implied: &Implied, system: &System) -> Option<Slopes> {
    let formations = system.ledger().formations();
    let couple = &implied.couple;
    let dissolved = if couple.reduced == Species::water() { &couple.oxidised } else { &couple.reduced };
    let nu = rational::to_f64(couple.reduction.coefficient(formations.component(dissolved)?));
    let row = system.couple_row(couple);
    let own = system.component(dissolved);
    let others = row.stoichiometry.iter().filter(|(k, _)| Some(*k) != own);
    let mut slopes: Slopes =
        others.map(|(k, other)| (Variable::LnActivity(*k), -rational::to_f64(*other) / nu)).collect();
    slopes.push((Variable::LnWaterActivity, -row.water / nu));
    let position = formations.couples().iter().position(|own| own == couple)?;
    slopes.push((Variable::CoupleLnK(position), -1.0 / nu));
    let gas = formations.species.iter().position(|formed| formed.species == implied.gas)?;
    slopes.push((Variable::FormationLnK(gas), 1.0));
    Some(slopes)
}

/// The couples of water among `couples` that a pe leaves in equilibrium: those whose gas stays below [`STABLE`].
#[must_use]
pub fn stable(couples: &[Couple], system: &System, converged: &Converged) -> Vec<Couple> {
    let implied = implied(system, converged);
    let stays = |couple: &&Couple| {
        !couple.is_of_water()
            || implied.iter().any(|own| own.couple == **couple && own.ln_fugacity <= STABLE.ln())
    };
    couples.iter().filter(stays).cloned().collect()
}

/// The same without those of water.
#[must_use]
pub fn without_water(couples: &[Couple]) -> Vec<Couple> {
    couples.iter().filter(|couple| !couple.is_of_water()).cloned().collect()
}
