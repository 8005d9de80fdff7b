//! From the units of a laboratory report to moles per kilogram of water.
//!
//! ```text
//! m = c / (ρ - s)            c mol/L; ρ density, s dissolved mass, both kg/L
//! m = b / (1 - s/ρ)          b mol per kg of solution
//! ```
//!
//! Where no density is given, that of pure water is raised by [`SALT_TERM`] of the dissolved mass, a common
//! approximation: 0.68 for NaCl at 1 mol/L and 25 degC (density 1.0365 kg/L), 0.73 for seawater of salinity 35.

use super::analyte::Analyte;
use crate::chem::{Species, rational};
use crate::physics::seawater;
use crate::quantity::Quantity;
use crate::units::{Base, Exponent, KgOf, Kind, Unit};

/// Kilograms by which a litre of solution outweighs a litre of water, per kilogram of salt dissolved in it.
pub const SALT_TERM: f64 = 0.7;

/// What a litre and a kilogram of a solution hold.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Solution {
    /// Density of the solution, kg/L.
    pub density: f64,
    /// Dissolved mass per litre, kg/L.
    pub dissolved: f64,
    /// The kilogram that totals are counted per: of water, in seawater of solution.
    pub basis: KgOf,
}

impl Solution {
    /// Pure water of the given density, kg/L.
    #[must_use]
    pub fn pure(density: f64) -> Self {
        Self { density, dissolved: 0.0, basis: KgOf::Water }
    }

    /// A solution with `dissolved` kg of salts a litre, in water of the given density.
    #[must_use]
    pub fn with_salts(water_density: f64, dissolved: f64) -> Self {
        Self { density: water_density + SALT_TERM * dissolved, dissolved, basis: KgOf::Water }
    }

    /// Seawater of a density, kg/L, and practical salinity: totals are per kilogram of solution.
    #[must_use]
    pub fn seawater(density: f64, salinity: f64) -> Self {
        let dissolved = density * (1.0 - seawater::water_content(salinity));
        Self { density, dissolved, basis: KgOf::Solution }
    }

    /// Kilograms that totals are counted per in a litre.
    #[must_use]
    pub fn basis_per_litre(&self) -> f64 {
        match self.basis {
            KgOf::Water => self.water_per_litre(),
            KgOf::Solution => self.density,
        }
    }

    /// Kilograms of water in a litre.
    #[must_use]
    pub fn water_per_litre(&self) -> f64 {
        self.density - self.dissolved
    }

    /// Kilograms of water in a kilogram of solution.
    #[must_use]
    pub fn water_per_kilogram(&self) -> f64 {
        self.water_per_litre() / self.density
    }
}

/// An amount as given: per what, and with it moles (or equivalents) of what.
#[derive(Debug, Clone)]
pub struct Amount {
    /// Moles, or equivalents, in the basis below; correlated with what was typed.
    pub moles: Quantity,
    /// What it is per.
    pub per: Per,
}

/// The denominator of an amount.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Per {
    /// A litre of solution.
    Litre,
    /// A kilogram of water.
    Water,
    /// A kilogram of solution.
    Solution,
}

impl Per {
    const ALL: [(Self, &'static str); 3] =
        [(Self::Litre, "L"), (Self::Water, "kg(water)"), (Self::Solution, "kg(solution)")];

    /// What an amount per this is multiplied by to be per kilogram of the solution's basis.
    #[must_use]
    pub fn to_basis(self, solution: &Solution) -> f64 {
        match (self, solution.basis) {
            (Self::Litre, _) => 1.0 / solution.basis_per_litre(),
            (Self::Water, KgOf::Water) | (Self::Solution, KgOf::Solution) => 1.0,
            (Self::Solution, KgOf::Water) => 1.0 / solution.water_per_kilogram(),
            (Self::Water, KgOf::Solution) => solution.water_per_kilogram(),
        }
    }

    /// What a mass per this is multiplied by to be per litre, salts left out of account.
    #[must_use]
    pub fn to_litre(self, water_density: f64) -> f64 {
        if self == Self::Litre { 1.0 } else { water_density }
    }
}

/// Reads an amount of an analyte in moles of the analyte; a bare `/kg` is per kilogram of water.
///
/// Mass without `as` is the mass of the analyte as written.
///
/// # Errors
///
/// Returns words for a unit of another kind, an `as` of something else, or an element without atomic mass.
pub fn amount(analyte: &Analyte, given: &Quantity) -> Result<Amount, String> {
    let expressed = given.unit().expressed_as();
    let (grams_per_mole, moles_of_analyte) = match expressed {
        None => (analyte.molar_mass(), 1.0),
        Some(text) => {
            let species = Species::parse(text).map_err(|error| error.to_string())?;
            let atoms = species.count(analyte.element());
            if atoms == 0.into() {
                return Err(format!(
                    "`as {text}` has no {}: write it as something that holds it",
                    analyte.element()
                ));
            }
            (species.molar_mass(), rational::to_f64(atoms / analyte.atoms()))
        }
    };
    let plain = relabelled(given, given.unit().with_expressed_as(None))?;
    let (moles, per) = in_moles(&plain, grams_per_mole, &analyte.to_string(), Kind::Amount)?;
    let moles = scaled(moles, moles_of_analyte / equivalents_per_mole(analyte, &plain)?)?;
    Ok(Amount { moles, per })
}

/// Reads an amount of a substance, a reagent, in moles of its formula; a bare `/kg` is per kilogram of water.
///
/// # Errors
///
/// Returns words for a unit of another kind, an `as` of something it does not hold, or an unknown molar mass.
pub fn substance(substance: &Species, given: &Quantity) -> Result<Amount, String> {
    let (grams_per_mole, per_formula) = match given.unit().expressed_as() {
        None => (substance.molar_mass(), 1.0),
        Some(text) => {
            let part = Species::parse(text).map_err(|error| error.to_string())?;
            let element =
                part.elements_beside_water().next().filter(|_| part.elements_beside_water().count() == 1);
            let held =
                element.map_or_else(|| 0.into(), |element| substance.count(element) / part.count(element));
            if held == 0.into() {
                return Err(format!(
                    "`as {text}` counts nothing of {substance}: name an element it holds, or give moles"
                ));
            }
            (part.molar_mass(), 1.0 / rational::to_f64(held))
        }
    };
    let plain = relabelled(given, given.unit().with_expressed_as(None))?;
    let (moles, per) = in_moles(&plain, grams_per_mole, &substance.to_string(), Kind::Amount)?;
    Ok(Amount { moles: scaled(moles, per_formula)?, per })
}

/// A mole of an ion of charge z has |z| equivalents; 1 where moles or grams were given.
fn equivalents_per_mole(analyte: &Analyte, given: &Quantity) -> Result<f64, String> {
    if given.unit().dimension().exponent(Base::Equivalents) == Exponent::ZERO {
        return Ok(1.0);
    }
    match analyte {
        Analyte::Species(species) if species.charge() != 0 => Ok(f64::from(species.charge().abs())),
        _ => Err(format!(
            "equivalents of {analyte} need its charge: write the ion as the key, such as `Ca^2+`, or give moles"
        )),
    }
}

/// Reads an alkalinity in equivalents.
///
/// # Errors
///
/// Returns words for a mass without `as`, since it could be meant as several species.
pub fn alkalinity(given: &Quantity) -> Result<Amount, String> {
    let (grams_per_mole, equivalents) = match given.unit().expressed_as() {
        None => (None, 1.0),
        Some(text) => {
            let species = Species::parse(text).map_err(|error| error.to_string())?;
            let equivalents = match species.key() {
                "CaCO3(aq)" | "CO3^2-" | "CaO(aq)" | "Ca(OH)2(aq)" => 2.0,
                "HCO3^-" | "OH^-" | "NaOH(aq)" => 1.0,
                _ => return Err(format!("alkalinity is not expressed as {text}: `as CaCO3` or `as HCO3^-`")),
            };
            (species.molar_mass(), equivalents)
        }
    };
    let plain = relabelled(given, given.unit().with_expressed_as(None))?;
    in_moles(&plain, grams_per_mole, "alkalinity", Kind::Alkalinity)
        .map_err(|message| {
            if given.unit().expressed_as().is_none() && message.contains("molar mass") {
                "a mass of alkalinity says not of what: write `mg/L as CaCO3` or `mg/L as HCO3^-`".into()
            } else {
                message
            }
        })
        .and_then(|(moles, per)| scaled(moles, equivalents).map(|moles| Amount { moles, per }))
}

/// Moles per litre, per kilogram of water or of solution, from moles or grams per any of them.
fn in_moles(
    given: &Quantity,
    grams_per_mole: Option<f64>,
    what: &str,
    kind: Kind,
) -> Result<(Quantity, Per), String> {
    let given = relabelled(given, given.unit().per_kg_of(KgOf::Water))?;
    for (per, denominator) in Per::ALL {
        let unit =
            |numerator: &str| Unit::parse(&format!("{numerator}/{denominator}")).expect("a known unit");
        if let Ok(moles) = given.to(&unit("mol")) {
            return Ok((moles, per));
        }
        if let Ok(grams) = given.to(&unit("g")) {
            let molar_mass =
                grams_per_mole.ok_or_else(|| format!("the molar mass of {what} is not known: give moles"))?;
            let moles = grams.value() / molar_mass;
            let moles = Quantity::from_partials(moles, unit("mol"), &[(&grams, 1.0 / molar_mass)]);
            return moles.map(|moles| (moles, per)).map_err(|error| error.to_string());
        }
    }
    Err(kind.check(given.unit()).map_or_else(|error| error.to_string(), |()| "is no concentration".into()))
}

/// The same number in a unit that says more or less of what it is, not another size.
fn relabelled(quantity: &Quantity, unit: Unit) -> Result<Quantity, String> {
    Quantity::from_partials(quantity.value(), unit, &[(quantity, 1.0)]).map_err(|error| error.to_string())
}

fn scaled(quantity: Quantity, factor: f64) -> Result<Quantity, String> {
    let unit = quantity.unit().clone();
    Quantity::from_partials(quantity.value() * factor, unit, &[(&quantity, factor)])
        .map_err(|error| error.to_string())
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    #[track_caller]
    fn case(key: &str, text: &str, per: Per, moles: f64) {
        let given = Quantity::parse(text, Kind::Amount, key).unwrap();
        let amount = amount(&Analyte::parse(key).unwrap(), &given).unwrap();
        assert_eq!(amount.per, per);
        assert_relative_eq!(amount.moles.value(), moles, max_relative = 1e-12);
    }

    #[test]
    fn amounts_become_moles() {
        case("Ca", "40.078 mg/L", Per::Litre, 1e-3);
        case("Ca^2+", "2 meq/L", Per::Litre, 1e-3);
        case("SO4^2-", "1 mmol/kg(solution)", Per::Solution, 1e-3);
    }

    #[test]
    fn expressed_as_counts_the_element() {
        case("NO3^-", "14.007 mg/L as N", Per::Litre, 1e-3);
        case("N", "62.004 mg/L as NO3^-", Per::Litre, 1e-3);
        case("Si", "60.083 mg/kg as SiO2", Per::Water, 1e-3);
        case("Cl", "35.45 ppm", Per::Solution, 1e-3);
    }

    #[test]
    fn alkalinity_needs_to_know_of_what() {
        let read = |text: &str| alkalinity(&Quantity::parse(text, Kind::Alkalinity, "alkalinity").unwrap());
        assert_relative_eq!(read("100.086 mg/L as CaCO3").unwrap().moles.value(), 2e-3, max_relative = 1e-12);
        assert_relative_eq!(read("61.016 mg/L as HCO3^-").unwrap().moles.value(), 1e-3, max_relative = 1e-4);
        assert_relative_eq!(read("2.35 meq/L").unwrap().moles.value(), 2.35e-3, max_relative = 1e-12);
    }

    #[test]
    fn a_litre_of_salt_water_holds_less_water() {
        // NaCl 1 mol/L at 25 degC: density 1.0365 kg/L gives 1.022 mol/kg(water).
        let solution = Solution { density: 1.0365, dissolved: 0.058443, basis: KgOf::Water };
        assert_relative_eq!(Per::Litre.to_basis(&solution), 1.022, max_relative = 5e-4);
        let estimated = Solution::with_salts(0.99705, 0.058443);
        assert_relative_eq!(Per::Litre.to_basis(&estimated), 1.022, max_relative = 2e-3);
    }
}
