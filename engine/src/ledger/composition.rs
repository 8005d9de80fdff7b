//! What seawater holds in fixed proportion to its salinity, and the sea that a marine ledger is evaluated in.
//!
//! A marine ledger keeps its constants as they were published, on the scales of pH they were published on; a [`Sea`] says
//! at which salinity and pressure they are needed. The ions that go with salinity are published ratios like any constant:
//! per mass of chlorinity, `Cl = S/1.80655`, or as mole fractions of the reference composition.

use crate::chem::{PhScale, Provenance};
use crate::named::{KeyFault, Named};
use crate::physics::seawater;
use crate::quantity::{Input, Part, Quantity};
use crate::units::{Pressure, Unit};

/// Salinity over chlorinity, by definition of 1969.
const SALINITY_PER_CHLORINITY: f64 = 1.806_55;

/// A constituent of seawater that goes with its salinity.
#[derive(Debug, Clone, PartialEq)]
pub struct Constituent {
    /// What it is called: `total boron`.
    pub name: String,
    /// The element or oxidation state counted: `B`, `S(VI)`.
    pub of: String,
    /// mol/kg(solution) per unit of practical salinity.
    pub per_salinity: f64,
    /// The ratio with what was published of its uncertainty: 1 with a relative sigma.
    factor: Part,
    /// The publication.
    pub source: String,
    /// How the ratio got here.
    pub provenance: Provenance,
}

/// The water a marine ledger is evaluated in.
#[derive(Debug, Clone)]
pub struct Sea {
    /// Practical salinity.
    pub salinity: f64,
    /// What the salinity was stated as, where that came with an uncertainty.
    pub stated_salinity: Option<Quantity>,
    /// Pressure, absolute.
    pub pressure: Pressure,
    /// The scale on which its pH is given and shown.
    pub ph_scale: PhScale,
}

impl Constituent {
    /// Reads a `[[composition]]` entry: `name`, `of`, and either `mass_per_chlorinity` (mass ratio) with `molar_mass`
    /// (g/mol), or `mole_fraction` of the reference composition, or `mol_per_salinity` (mol/kg(solution)); `relative_sigma`, `source`, `provenance`, `note`.
    ///
    /// # Errors
    ///
    /// A fault of a key.
    pub(super) fn read(file_key: &str, citation: &str, mut named: Named) -> Result<Self, KeyFault> {
        let needed = |key: &str, text: Option<String>| {
            text.ok_or_else(|| KeyFault::new(key, format!("`{key}` is missing")))
        };
        let name = named.text("name")?;
        let name = needed("name", name)?;
        let of = named.text("of")?;
        let of = needed("of", of)?;
        let ratio = named.number("mass_per_chlorinity")?;
        let molar_mass = named.number("molar_mass")?;
        let mole_fraction = named.number("mole_fraction")?;
        let per_salinity = named.number("mol_per_salinity")?;
        let sigma = named.number("relative_sigma")?;
        let source = named.text("source")?.unwrap_or_else(|| citation.to_string());
        let word = named.text("provenance")?;
        let provenance = Provenance::parse(&needed("provenance", word)?).ok_or_else(|| {
            KeyFault::new("provenance", "`provenance` is `read`, `computed`, `memory` or `stated`")
        })?;
        named.take("note");
        named.finish()?;
        let per_salinity = match (ratio, molar_mass, mole_fraction.or(per_salinity)) {
            (None, None, Some(per_salinity)) if mole_fraction.is_none() => per_salinity,
            (Some(ratio), Some(molar_mass), None) if molar_mass > 0.0 => {
                ratio / molar_mass / SALINITY_PER_CHLORINITY
            }
            (None, None, Some(fraction)) => {
                fraction * seawater::REFERENCE_SALINITY_PER_SALINITY / seawater::SEA_SALT_MOLAR_MASS
            }
            _ => {
                let message =
                    "a constituent is given by `mass_per_chlorinity` and `molar_mass`, or by `mole_fraction`";
                return Err(KeyFault::new("mass_per_chlorinity", message));
            }
        };
        let input = Input::named(&format!("{file_key}/{name}"), &name, sigma);
        let input = input.map_err(|error| KeyFault::new("relative_sigma", error.to_string()))?;
        let factor = Part { input, sensitivity: 1.0 };
        Ok(Self { name, of, per_salinity, factor, source, provenance })
    }

    /// Its relative standard uncertainty, where one was published.
    #[must_use]
    pub fn relative_sigma(&self) -> Option<f64> {
        self.factor.input.sigma()
    }

    /// The ratio over its published value: 1, with what was published of its uncertainty.
    #[must_use]
    pub fn factor(&self) -> Quantity {
        Quantity::from_parts(1.0, Unit::one(), vec![self.factor.clone()])
    }

    /// mol/kg(solution) in a sea, with the uncertainties of the ratio and of the salinity.
    #[must_use]
    pub fn amount_in(&self, sea: &Sea) -> Quantity {
        let amount = self.amount(sea.salinity);
        let salinity = sea.stated_salinity.iter().flat_map(Quantity::parts);
        let parts = amount.parts().iter().cloned().chain(salinity.map(|part| part.scaled(self.per_salinity)));
        Quantity::from_parts(amount.value(), amount.unit().clone(), parts.collect())
    }

    /// mol/kg(solution) at a practical salinity, with the uncertainty of the ratio.
    #[must_use]
    pub fn amount(&self, salinity: f64) -> Quantity {
        let amount = self.per_salinity * salinity;
        Quantity::from_parts(amount, Unit::known("mol/kg(solution)"), vec![self.factor.scaled(amount)])
    }
}

impl Sea {
    /// Pressure above that of the surface, bar.
    #[must_use]
    pub fn hydrostatic_bar(&self) -> f64 {
        self.pressure.bar() - Pressure::ATMOSPHERE.bar()
    }
}
