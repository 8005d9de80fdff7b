//! Charged surfaces: site groups that react with the water, in the electric field of their own charge.
//!
//! With λ = -Fψ/RT of the potential ψ as one more unknown, a site species of charge z has `ln n = ln K + ν·λ + z λ`, and
//! the charge of the surface balances what its layer holds at that potential:
//!
//! ```text
//! diffuse layer           Σ z n = (A/F) sqrt(8 R T ε c) sinh(Fψ/2RT)      Gouy 1910, Chapman 1913; c the ionic strength
//! constant capacitance    Σ z n = (A/F) C ψ                               Schindler & Stumm
//! ```
//!
//! A hyperbolic sine is the difference of two exponentials, so the first is a balance like any other: of site species and
//! of two rows `κ exp(±λ/2)` that count in it with ±1/2. The programme stays convex. The second is the same with 1/64 for
//! 1/2, whose sine is nearly a straight line, and κ set so that the line meets it at the potential found. As c and that
//! depend on the answer, it is solved again until they stay.
//!
//! The charge of a surface is not compensated in the water, which carries the opposite one in its charge misfit: that is
//! the diffuse layer, as part of the water. Constants are intrinsic, for ψ = 0.

use super::assemble::System;
use super::beside::{ActsOn, Host, HostKind, Load, Member, Place, Stated, change, on_sites};
use super::error::EquilibriumError;
use super::gas_phase::moles;
use crate::chem::Species;
use crate::ledger::{Formation, Ledger};
use crate::physics::constants::{FARADAY, GAS_CONSTANT, VACUUM_PERMITTIVITY};
use crate::physics::water;
use crate::quantity::Quantity;
use crate::solve::{Coefficient, Converged, Row};
use crate::units::Temperature;
use crate::water::neighbour::{Layer, Surface};

/// Ionic strength to begin with, mol/kg(water).
const START: f64 = 0.01;
/// Relative change of κ that counts as none.
const SETTLED: f64 = 1e-12;

/// A surface in numbers.
#[derive(Debug, Clone)]
pub struct Charged {
    /// Square metres per kilogram of water.
    pub area: f64,
    /// The area of the whole sample as it was stated, m2.
    pub stated_area: Quantity,
    /// F/m2; `None`: a diffuse layer.
    capacitance: Option<f64>,
    /// The component that stands for λ.
    pub charge: usize,
    kelvin: f64,
    /// κ, eq/kg(water).
    amplitude: f64,
}

impl Charged {
    /// The reciprocal of what the two rows of the layer count.
    fn divisor(&self) -> i64 {
        if self.capacitance.is_some() { 64 } else { 2 }
    }

    /// The two rows of the layer.
    pub(super) fn rows(&self) -> [Row; 2] {
        let row = |sign: i64| Row {
            stoichiometry: vec![(self.charge, Coefficient::new(sign, self.divisor()))],
            ln_k: self.amplitude.ln(),
            charge: 0.0,
            water: 0.0,
        };
        [row(1), row(-1)]
    }

    /// The potential in V.
    #[must_use]
    pub fn potential(&self, converged: &Converged) -> f64 {
        converged.ln_a[self.charge] * self.volts()
    }

    /// dψ/dλ, V.
    #[must_use]
    pub fn volts(&self) -> f64 {
        -GAS_CONSTANT * self.kelvin / FARADAY
    }

    /// κ for an ionic strength and λ.
    fn amplitude_at(&self, ionic_strength: f64, lambda: f64) -> f64 {
        let divisor = self.divisor() as f64;
        match self.capacitance {
            None => self.area * charge_density_scale(self.kelvin, ionic_strength) / FARADAY,
            Some(capacitance) => {
                let x = lambda / divisor;
                let straightened = if x == 0.0 { 1.0 } else { x / x.sinh() };
                0.5 * divisor * divisor * straightened * capacitance * self.area * -self.volts() / FARADAY
            }
        }
    }

    /// Takes up the ionic strength and the potential of an answer; whether they still moved κ.
    pub(super) fn update(&mut self, converged: &Converged) -> bool {
        let amplitude = self.amplitude_at(converged.ionic_strength, converged.ln_a[self.charge]);
        let moved = (amplitude / self.amplitude - 1.0).abs() > SETTLED;
        self.amplitude = amplitude;
        moved
    }
}

/// `sqrt(8 R T ε c)` of the equation of Gouy and Chapman, C/m2, at T kelvin and an ionic strength in mol/kg(water).
fn charge_density_scale(kelvin: f64, ionic_strength: f64) -> f64 {
    let density = water::density(kelvin);
    let permittivity = water::relative_permittivity(kelvin, density) * VACUUM_PERMITTIVITY;
    (8.0 * GAS_CONSTANT * kelvin * permittivity * ionic_strength * density).sqrt()
}

/// A surface in indices, with its sites at the start; `charge` is the component that stands for its potential.
pub(super) fn read(
    given: &Surface,
    system: &System,
    water: f64,
    charge: usize,
) -> Result<(Host, Vec<Load>), EquilibriumError> {
    let ledger = system.ledger();
    let (mut members, mut loads) = (Vec::new(), Vec::new());
    for (site, amount) in &given.sites {
        let neutral = reference(site, ledger)?;
        let per_kg = moles(amount.value() / water, &[(amount, 1.0 / water)])?;
        loads.push((per_kg, change(system, &neutral.stoichiometry)));
        for formed in on_sites(ledger, site) {
            if let Some(row) = system.formed_row(&formed.species) {
                let mut row = row.clone();
                let z = i64::from(formed.species.charge());
                if z != 0 {
                    row.stoichiometry.push((charge, z.into()));
                }
                members.push(Member { species: formed.species.clone(), row });
            }
        }
    }
    let capacitance = match &given.layer {
        Layer::Diffuse => None,
        Layer::ConstantCapacitance(capacitance) => Some(capacitance),
    };
    let mut charged = Charged {
        area: given.area.value() / water,
        stated_area: given.area.clone(),
        capacitance: capacitance.map(Quantity::value),
        charge,
        kelvin: system.temperature().kelvin(),
        amplitude: 1.0,
    };
    charged.amplitude = charged.amplitude_at(START, 0.0);
    let layer = members.len()..members.len() + 2;
    let size = |quantity: &Quantity| Stated {
        quantity: quantity.clone(),
        acts_on: ActsOn::Rows(layer.clone()),
        by: 1.0 / quantity.value(),
    };
    let stated = [&given.area].into_iter().chain(capacitance).map(size).collect();
    let kind = HostKind::Surface(charged);
    Ok((Host { name: given.name.clone(), kind, members, place: Place::Rows(0), stated }, loads))
}

/// The neutral hydroxyl group of a kind of site, in which all of it begins.
pub(super) fn reference<'a>(site: &str, ledger: &'a Ledger) -> Result<&'a Formation, EquilibriumError> {
    let fault = |why: String| EquilibriumError::Analyte { key: site.into(), why };
    let neutral = Species::parse(&format!("XOH({site})")).map_err(|error| fault(error.to_string()))?;
    let species = on_sites(ledger, site);
    if species.len() < 2 {
        return Err(fault(format!(
            "the ledger has no reactions of this site; give them by `.with_reaction`, such as `XOH({site}) + H^+ <=> XOH2^+({site})`"
        )));
    }
    let found = species.into_iter().find(|formed| formed.species == neutral);
    found.ok_or_else(|| fault(format!("its sites begin as `{neutral}`, which no reaction of the ledger has")))
}

/// Charge density of a diffuse layer, C/m2, by the equation of Gouy and Chapman for counter-ions of charge 1.
///
/// `potential` in V, ionic strength in mol/kg(water).
#[must_use]
pub fn gouy_chapman(potential: f64, ionic_strength: f64, at: Temperature) -> f64 {
    let kelvin = at.kelvin();
    charge_density_scale(kelvin, ionic_strength)
        * (FARADAY * potential / (2.0 * GAS_CONSTANT * kelvin)).sinh()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_charge_of_a_diffuse_layer_at_25_degrees() {
        // 0.1174 sqrt(c) sinh(19.46 ψ), c in mol/L, as textbooks print it (Dzombak & Morel 1990, equation 2.2; recalled).
        let at = Temperature::REFERENCE;
        let printed = 0.1174 * 0.1_f64.sqrt() * (19.46_f64 * 0.1).sinh();
        assert!((gouy_chapman(0.1, 0.1, at) / printed - 1.0).abs() < 2e-3);
    }
}
