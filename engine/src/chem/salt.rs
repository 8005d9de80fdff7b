//! Salts that make up a medium: their ions, ionic strength and mass.

use super::formula::Species;
use super::rational::{self, Rational};

/// A strong electrolyte as it dissolves.
#[derive(Debug, Clone, PartialEq)]
pub struct Salt {
    /// Its formula.
    pub formula: String,
    /// Ionic strength per mole: half the sum of z² over its ions.
    pub strength_per_mole: f64,
    /// Molar mass, kg/mol.
    pub molar_mass: f64,
}

/// Ions that a medium's salt is looked for among.
const CATIONS: [&str; 10] =
    ["H^+", "Li^+", "Na^+", "K^+", "NH4^+", "Rb^+", "Cs^+", "Mg^2+", "Ca^2+", "Ba^2+"];
const ANIONS: [&str; 8] = ["Cl^-", "Br^-", "I^-", "F^-", "NO3^-", "ClO4^-", "OH^-", "SO4^2-"];

impl Salt {
    /// Reads a formula such as `NaCl`, `CaCl2` or `Na2SO4`.
    #[must_use]
    pub fn parse(formula: &str) -> Option<Self> {
        let whole = Species::parse(formula).ok()?;
        let molar_mass = whole.molar_mass()? / 1000.0;
        let ions = |texts: &[&str]| -> Vec<Species> {
            texts.iter().map(|text| Species::parse(text).expect("an ion of the list")).collect()
        };
        for cation in ions(&CATIONS) {
            for anion in ions(&ANIONS) {
                let (z_plus, z_minus) =
                    (i64::from(cation.charge()), i64::from(anion.charge().unsigned_abs()));
                let (n_cations, n_anions) = if z_plus == z_minus { (1, 1) } else { (z_minus, z_plus) };
                if is_made_of(&whole, (&cation, n_cations), (&anion, n_anions)) {
                    let twice = n_cations * z_plus * z_plus + n_anions * z_minus * z_minus;
                    let strength_per_mole = rational::to_f64(Rational::new(twice, 2));
                    return Some(Self { formula: formula.into(), strength_per_mole, molar_mass });
                }
            }
        }
        None
    }
}

fn is_made_of(whole: &Species, cation: (&Species, i64), anion: (&Species, i64)) -> bool {
    let elements = [whole, cation.0, anion.0].into_iter().flat_map(|species| species.composition());
    elements.into_iter().all(|(element, _)| {
        let of_ions: Rational = cation.0.count(*element) * Rational::from_integer(cation.1)
            + anion.0.count(*element) * Rational::from_integer(anion.1);
        whole.count(*element) == of_ions
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ionic_strength_follows_from_the_charges() {
        let strength = |formula| Salt::parse(formula).map(|salt| salt.strength_per_mole);
        assert_eq!(strength("NaCl"), Some(1.0));
        assert_eq!(strength("CaCl2"), Some(3.0));
        assert_eq!(strength("Na2SO4"), Some(3.0));
        assert_eq!(strength("MgSO4"), Some(4.0));
        assert_eq!(strength("NaClO4"), Some(1.0));
        assert_eq!(strength("NH4NO3"), Some(1.0));
        assert_eq!(strength("CaCO3"), None);
        assert_eq!(strength("sugar"), None);
    }
}
