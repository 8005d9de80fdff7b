//! Alkalinity and acidity: how many protons a species can take up or give off, counted from a zero level.
//!
//! The zero level of an acid-base system is the species that dominates at pH 4.5, 25 degC and zero ionic strength
//! (Dickson, A.G. (1981) An exact definition of total alkalinity and a procedure for the estimation of alkalinity and
//! total inorganic carbon from titration data, Deep-Sea Res. 28A, 609-623); water is at zero. Complexes count by the
//! ligands and hydroxide they hold, so a metal ion stands at zero itself. In terms of components, with hⱼ the protons
//! that component j carries in its zero-level species,
//!
//! ```text
//! alkalinity = Σ_i (Σ_j ν_ij h_j - ν_iH) c_i = Σ_j h_j T_j - T_H
//! ```
//!
//! so an alkalinity is a linear combination of totals. Acidity is counted the other way, from pH 8.3.

use crate::chem::{Element, Rational, Species, rational};
use crate::ledger::{Formation, Formations, Ledger};
use crate::units::Temperature;

/// pH of the zero level of alkalinity.
pub const ALKALINITY_PH: f64 = 4.5;
/// pH of the zero level of acidity.
pub const ACIDITY_PH: f64 = 8.3;

/// Protons each component carries in its zero-level species, by position in [`Formations::components`].
#[derive(Debug, Clone, PartialEq)]
pub struct ZeroLevel {
    protons: Vec<Rational>,
    proton: Option<usize>,
}

impl ZeroLevel {
    /// The zero level of a ledger's acid-base systems at a pH.
    #[must_use]
    pub fn at(ledger: &Ledger, ph: f64) -> Self {
        let formations = ledger.formations();
        let log_k: Vec<f64> = ledger
            .reactions()
            .map(|(_, r)| r.constant().map_or(0.0, |c| c.log_k.nearest_to(Temperature::REFERENCE).0))
            .collect();
        let proton = formations.component(&Species::proton());
        let protons = 0..formations.components.len();
        let protons = protons.map(|component| carried(formations, component, proton, &log_k, ph)).collect();
        Self { protons, proton }
    }

    /// Protons that a component carries in its zero-level species.
    #[must_use]
    pub fn of_component(&self, component: usize) -> Rational {
        self.protons[component]
    }

    /// Equivalents of alkalinity in a mole of a species.
    #[must_use]
    pub fn weight(&self, formed: &Formation) -> Rational {
        let carried: Rational = formed.stoichiometry.iter().map(|(j, nu)| nu * self.protons[*j]).sum();
        carried - self.proton.map_or_else(|| 0.into(), |proton| formed.coefficient(proton))
    }
}

fn carried(
    formations: &Formations,
    component: usize,
    proton: Option<usize>,
    log_k: &[f64],
    ph: f64,
) -> Rational {
    let Some(proton) = proton else { return 0.into() };
    let species = &formations.components[component];
    let is_metal_ion = species.charge() > 0 && species.count(Element::H) == 0.into();
    if component == proton || *species == Species::water() || is_metal_ion {
        return 0.into();
    }
    let water = formations.component(&Species::water());
    let of_this_alone = |formed: &&Formation| {
        formed.species.is_solute()
            && formed.coefficient(component) == 1.into()
            && formed.stoichiometry.iter().all(|(j, _)| *j == component || *j == proton || Some(*j) == water)
    };
    let abundance = |formed: &Formation| {
        let formation: f64 = formed.multiples.iter().map(|(k, n)| rational::to_f64(*n) * log_k[*k]).sum();
        formation - ph * rational::to_f64(formed.coefficient(proton))
    };
    let dominant =
        formations.species.iter().filter(of_this_alone).max_by(|a, b| abundance(a).total_cmp(&abundance(b)));
    dominant.map_or_else(|| 0.into(), |formed| formed.coefficient(proton))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::ledger::shipped;

    #[test]
    fn weights_are_those_of_the_trade() {
        let book = shipped::ledger("freshwater", None).unwrap();
        let level = ZeroLevel::at(&book, ALKALINITY_PH);
        let weight = |key: &str| {
            let species = Species::parse(key).unwrap();
            rational::to_f64(level.weight(book.formations().formation(&species).unwrap()))
        };
        for (key, expected) in [
            ("H^+", -1.0),
            ("OH^-", 1.0),
            ("HCO3^-", 1.0),
            ("CO3^2-", 2.0),
            ("CO2(aq)", 0.0),
            ("CaCO3(aq)", 2.0),
            ("CaHCO3^+", 1.0),
            ("CaOH^+", 1.0),
            ("Ca^2+", 0.0),
            ("SO4^2-", 0.0),
            ("HSO4^-", -1.0),
            ("F^-", 0.0),
            ("HF(aq)", -1.0),
            ("H4SiO4(aq)", 0.0),
            ("H3SiO4^-", 1.0),
            ("NO3^-", 0.0),
            // Phosphate stands at H2PO4^- (Dickson 1981), boron at the acid, nitrogen(-III) at ammonium, sulfide at H2S.
            ("H3PO4(aq)", -1.0),
            ("H2PO4^-", 0.0),
            ("HPO4^2-", 1.0),
            ("PO4^3-", 2.0),
            ("B(OH)3(aq)", 0.0),
            ("B(OH)4^-", 1.0),
            ("NH4^+", 0.0),
            ("NH3(aq)", 1.0),
            ("H2S(aq)", 0.0),
            ("HS^-", 1.0),
            // Metals stand at their ions, whichever complex dominates at pH 4.5: FeOH^2+ holds one hydroxide.
            ("Fe^2+", 0.0),
            ("FeOH^+", 1.0),
            ("FeHCO3^+", 1.0),
            ("FeCO3(aq)", 2.0),
            ("FeSO4(aq)", 0.0),
            ("Fe^3+", 0.0),
            ("FeOH^2+", 1.0),
            ("Fe(OH)2^+", 2.0),
            ("Fe(OH)4^-", 4.0),
            ("Fe2(OH)2^4+", 2.0),
            ("Fe3(OH)4^5+", 4.0),
            ("Mn^2+", 0.0),
            ("MnOH^+", 1.0),
            ("MnHCO3^+", 1.0),
            ("MnCO3(aq)", 2.0),
            ("Al^3+", 0.0),
            ("AlOH^2+", 1.0),
            ("Al(OH)3(aq)", 3.0),
            ("Al(OH)4^-", 4.0),
            ("AlF4^-", 0.0),
            ("AlSO4^+", 0.0),
        ] {
            assert_eq!(weight(key), expected, "{key}");
        }
    }
}
