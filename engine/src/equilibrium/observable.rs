//! What can be asked of a state, in one grammar everywhere: tables, sweeps, records.
//!
//! ```text
//! observable := name [ "(" subject ")" ] [ "[" unit "]" ]         pH, m(Ca^2+) [mmol/kg], SI(calcite)
//! ```

use std::fmt;

use super::buffer::{Added, Answering};
use crate::chem::PhScale;
use crate::nearest::nearest;
use crate::text::list;
use crate::units::{Unit, UnitError};

/// Something that can be asked of a state; names are resolved by the state's ledger.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Observable {
    /// -log10 a(H⁺).
    Ph,
    /// -log10 a(e⁻).
    Pe,
    /// The potential against the standard hydrogen electrode that belongs to pe.
    Eh,
    /// The potential a couple alone would give.
    EhOf(String),
    /// pH of a seawater on a named scale.
    PhOn(PhScale),
    /// DIC over the buffer factor of CO2 by carbon.
    Revelle,
    /// A buffer factor.
    Buffer(Answering, Added),
    /// [HCO3^-]/[H^+] of a seawater, on the total scale.
    SubstrateInhibitor,
    /// Practical salinity of a seawater.
    Salinity,
    /// Temperature.
    Temperature,
    /// Pressure.
    Pressure,
    /// Density of the solution.
    Density,
    /// Ionic strength.
    IonicStrength,
    /// Alkalinity.
    Alkalinity,
    /// Acidity, to pH 8.3.
    Acidity,
    /// Dissolved inorganic carbon.
    Dic,
    /// Ca and Mg together.
    Hardness,
    /// 100 (C - A)/(C + A), percent.
    ChargeError,
    /// C - A.
    ChargeMisfit,
    /// d alkalinity / d pH of the water alone.
    BufferIntensity,
    /// Calcium carbonate that would form (positive) or dissolve until calcite is at equilibrium.
    CarbonatePotential,
    /// pH less the pH of equilibrium with calcite.
    Langelier,
    /// Molality of a species.
    Molality(String),
    /// Concentration of a species per litre of solution.
    Molarity(String),
    /// Activity of a species.
    Activity(String),
    /// log10 of an activity.
    LogActivity(String),
    /// Activity coefficient.
    Gamma(String),
    /// Total of an element or oxidation state in solution.
    Total(String),
    /// The same with solids.
    All(String),
    /// Saturation index.
    SaturationIndex(String),
    /// Saturation ratio.
    Omega(String),
    /// Fugacity of a gas.
    Fugacity(String),
    /// Partial pressure of a gas.
    PartialPressure(String),
    /// Mole fraction of a gas in dry air at the total pressure.
    MoleFraction(String),
    /// Amount of a solid that is there, or of something beside the water.
    Amount(String),
    /// Equivalent fraction on an exchanger.
    EquivalentFraction(String),
    /// Volume of a gas phase.
    GasVolume(String),
    /// Potential of a surface.
    SurfacePotential(String),
    /// Charge of a surface by its area.
    SurfaceCharge(String),
    /// Amount of something a treatment added.
    Added(String),
    /// Amount of something a treatment took away.
    Removed(String),
    /// A measured value that was not used, less the computed one.
    Misfit(String),
}

/// An observable with the unit it is wanted in.
#[derive(Debug, Clone, PartialEq)]
pub struct Asked {
    /// What is asked.
    pub observable: Observable,
    /// The unit it is wanted in, if one was named.
    pub unit: Option<Unit>,
}

/// Why an observable cannot be read or answered.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ObservableError {
    /// No observable of this name.
    #[error("no observable `{name}`{}", help(.nearest.as_deref()))]
    Unknown {
        /// The name asked for.
        name: String,
        /// The nearest one.
        nearest: Option<String>,
    },
    /// Brackets where none belong, or none where they do.
    #[error("`{0}` is asked as `{1}`")]
    Form(String, &'static str),
    /// A unit at fault.
    #[error("`{asked}`: {error}")]
    Unit {
        /// The observable as asked.
        asked: String,
        /// What is wrong with the unit.
        error: UnitError,
    },
    /// What the subject is made of is not in the water.
    #[error("`{asked}`: absent, since what it is made of is not in the water")]
    Absent {
        /// The observable as asked.
        asked: String,
    },
    /// The subject is not known or has no answer here.
    #[error("`{asked}`: {why}")]
    NoAnswer {
        /// The observable as asked.
        asked: String,
        /// Why there is no answer.
        why: String,
    },
}

fn help(nearest: Option<&str>) -> String {
    match nearest {
        Some(name) => format!("; did you mean `{name}`?"),
        None => format!("; there are {}", list(&NAMES.map(|(_, form, _)| form))),
    }
}

/// Name, form as it is written, and what it is, in order of listing.
pub const NAMES: [(&str, &str, &str); 46] = [
    (
        "pH",
        "pH",
        "-log10 of the activity of H^+; in seawater on the sample's scale, on another as pH(free), pH(nbs)",
    ),
    ("pe", "pe", "-log10 of the activity of the electron, from the couples in equilibrium"),
    ("Eh", "Eh", "potential against the standard hydrogen electrode, V"),
    ("Eh", "Eh(Fe(III)/Fe(II))", "potential that a couple alone gives, in equilibrium with others or not, V"),
    ("temperature", "temperature", "temperature, degC"),
    ("pressure", "pressure", "pressure, bar"),
    ("density", "density", "density of the solution, kg/L"),
    ("ionic_strength", "ionic_strength", "ionic strength, mol/kg(water)"),
    ("alkalinity", "alkalinity", "alkalinity, eq/kg(water)"),
    ("acidity", "acidity", "acidity to pH 8.3, eq/kg(water)"),
    ("DIC", "DIC", "dissolved inorganic carbon, mol/kg(water)"),
    ("hardness", "hardness", "calcium and magnesium, mol/kg(water)"),
    ("charge_error", "charge_error", "100 (C - A)/(C + A) over the charges of the ions as computed, %"),
    ("charge_misfit", "charge_misfit", "cations less anions, eq/kg(water)"),
    ("buffer_intensity", "buffer_intensity", "strong base per unit of pH, water alone, eq/kg(water)"),
    (
        "CCPP",
        "CCPP",
        "calcium carbonate that would form (negative: dissolve) until calcite is at equilibrium, mol/kg(water)",
    ),
    ("Langelier", "Langelier", "pH less the pH at which calcite would be at equilibrium, alkalinity kept"),
    ("m", "m(Ca^2+)", "molality, mol/kg(water)"),
    ("c", "c(Ca^2+)", "concentration, mol/L"),
    ("a", "a(Ca^2+)", "activity"),
    ("log_a", "log_a(Ca^2+)", "log10 of the activity"),
    ("gamma", "gamma(Ca^2+)", "activity coefficient"),
    ("total", "total(Ca)", "total dissolved, mol/kg(water)"),
    ("all", "all(Ca)", "total with solids, gases, exchangers and surfaces, mol/kg(water)"),
    ("SI", "SI(calcite)", "saturation index, log10 of the ratio below"),
    ("Omega", "Omega(calcite)", "activity product over solubility product"),
    ("f", "f(CO2(g))", "fugacity, bar"),
    ("p", "p(CO2(g))", "partial pressure, bar"),
    (
        "x",
        "x(CO2(g))",
        "mole fraction in dry air at the total pressure, in the gas, solid or exchanger beside the water",
    ),
    ("n", "n(calcite)", "amount of a solid, or of anything beside the water, mol"),
    ("E", "E(CaX2(clay))", "equivalent fraction on an exchanger"),
    ("volume", "volume(bubble)", "volume of a gas phase, L"),
    ("potential", "potential(ferric oxide)", "electric potential of a surface, V"),
    ("surface_charge", "surface_charge(ferric oxide)", "charge of a surface by its area, C/m2"),
    ("added", "added(NaOH)", "amount a treatment added, mol/kg(water)"),
    ("removed", "removed(CO2(g))", "amount a treatment took away, mol/kg(water)"),
    ("misfit", "misfit(DIC)", "a measured value not used, less the computed one"),
    ("salinity", "salinity", "practical salinity of a seawater"),
    ("Revelle", "Revelle", "Revelle factor, d ln [CO2] / d ln DIC at constant alkalinity"),
    (
        "substrate_inhibitor_ratio",
        "substrate_inhibitor_ratio",
        "[HCO3^-]/[H^+] of a seawater, H^+ on the total scale, mol/mol",
    ),
    ("gamma_DIC", "gamma_DIC", "1/(d ln [CO2] / d DIC) at constant alkalinity, mol/kg"),
    ("gamma_TA", "gamma_TA", "1/(d ln [CO2] / d alkalinity) at constant DIC, mol/kg"),
    ("beta_DIC", "beta_DIC", "1/(d ln [H^+] / d DIC) at constant alkalinity, mol/kg"),
    ("beta_TA", "beta_TA", "1/(d ln [H^+] / d alkalinity) at constant DIC, mol/kg"),
    ("omega_DIC", "omega_DIC", "1/(d ln [CO3^2-] / d DIC) at constant alkalinity, mol/kg"),
    ("omega_TA", "omega_TA", "1/(d ln [CO3^2-] / d alkalinity) at constant DIC, mol/kg"),
];

impl Asked {
    /// Reads an observable.
    ///
    /// # Errors
    ///
    /// Returns an unknown name with the nearest one, or a unit that cannot be read.
    pub fn parse(text: &str) -> Result<Self, ObservableError> {
        let text = text.trim();
        let (body, unit) = match text.strip_suffix(']').and_then(|text| text.rsplit_once('[')) {
            Some((body, unit)) => {
                let unit = Unit::parse(unit.trim());
                (
                    body.trim(),
                    Some(unit.map_err(|error| ObservableError::Unit { asked: text.into(), error })?),
                )
            }
            None => (text, None),
        };
        if let Some(gas) = SHORT_FOR_GAS.iter().find_map(|(short, long)| (*short == body).then_some(long)) {
            return Ok(Self { observable: about(gas, "CO2(g)".into()), unit });
        }
        let (name, subject) = match body.split_once('(') {
            Some((name, rest)) => {
                let subject = rest.strip_suffix(')').map(|subject| subject.trim().to_string());
                (name.trim(), Some(subject.unwrap_or_default()))
            }
            None => (body, None),
        };
        let Some((_, form, _)) = NAMES.iter().find(|(known, ..)| *known == name) else {
            let nearest = nearest(name, NAMES.map(|(known, ..)| known)).map(|name| form_of(name).to_string());
            return Err(ObservableError::Unknown { name: body.into(), nearest });
        };
        if let ("pH", Some(scale)) = (name, &subject) {
            return on_scale(scale, body).map(|observable| Self { observable, unit });
        }
        let takes = |subject: bool| {
            NAMES.iter().any(|(known, form, _)| *known == name && form.contains('(') == subject)
        };
        let observable = match subject {
            None if takes(false) => plain(name),
            Some(subject) if takes(true) && !subject.is_empty() => about(name, subject),
            _ => return Err(ObservableError::Form(body.into(), form)),
        };
        Ok(Self { observable, unit })
    }
}

fn form_of(name: &str) -> &'static str {
    NAMES.iter().find(|(known, ..)| *known == name).map_or("", |(_, form, _)| form)
}

/// The CO2 of a seawater goes out by the keys it comes in.
const SHORT_FOR_GAS: [(&str, &str); 3] = [("fCO2", "f"), ("pCO2", "p"), ("xCO2", "x")];

const BUFFERS: [(&str, Answering, Added); 6] = [
    ("gamma_DIC", Answering::CarbonDioxide, Added::Carbon),
    ("gamma_TA", Answering::CarbonDioxide, Added::Alkalinity),
    ("beta_DIC", Answering::HydrogenIon, Added::Carbon),
    ("beta_TA", Answering::HydrogenIon, Added::Alkalinity),
    ("omega_DIC", Answering::Carbonate, Added::Carbon),
    ("omega_TA", Answering::Carbonate, Added::Alkalinity),
];

fn on_scale(scale: &str, body: &str) -> Result<Observable, ObservableError> {
    let scales = [PhScale::Free, PhScale::Total, PhScale::Seawater, PhScale::Nbs];
    let found = scales.into_iter().find(|known| known.word() == scale);
    found.map(Observable::PhOn).ok_or_else(|| ObservableError::NoAnswer {
        asked: body.into(),
        why: format!("the scales of pH are {}", list(&scales.map(PhScale::word))),
    })
}

fn plain(name: &str) -> Observable {
    if let Some((_, of, by)) = BUFFERS.iter().find(|(known, ..)| *known == name) {
        return Observable::Buffer(*of, *by);
    }
    match name {
        "salinity" => Observable::Salinity,
        "Revelle" => Observable::Revelle,
        "substrate_inhibitor_ratio" => Observable::SubstrateInhibitor,
        "pH" => Observable::Ph,
        "pe" => Observable::Pe,
        "Eh" => Observable::Eh,
        "temperature" => Observable::Temperature,
        "pressure" => Observable::Pressure,
        "density" => Observable::Density,
        "ionic_strength" => Observable::IonicStrength,
        "alkalinity" => Observable::Alkalinity,
        "acidity" => Observable::Acidity,
        "DIC" => Observable::Dic,
        "hardness" => Observable::Hardness,
        "charge_error" => Observable::ChargeError,
        "charge_misfit" => Observable::ChargeMisfit,
        "buffer_intensity" => Observable::BufferIntensity,
        "Langelier" => Observable::Langelier,
        _ => Observable::CarbonatePotential,
    }
}

fn about(name: &str, subject: String) -> Observable {
    match name {
        "Eh" => Observable::EhOf(subject),
        "m" => Observable::Molality(subject),
        "c" => Observable::Molarity(subject),
        "a" => Observable::Activity(subject),
        "log_a" => Observable::LogActivity(subject),
        "gamma" => Observable::Gamma(subject),
        "total" => Observable::Total(subject),
        "all" => Observable::All(subject),
        "SI" => Observable::SaturationIndex(subject),
        "Omega" => Observable::Omega(subject),
        "f" => Observable::Fugacity(subject),
        "p" => Observable::PartialPressure(subject),
        "x" => Observable::MoleFraction(subject),
        "n" => Observable::Amount(subject),
        "E" => Observable::EquivalentFraction(subject),
        "volume" => Observable::GasVolume(subject),
        "potential" => Observable::SurfacePotential(subject),
        "surface_charge" => Observable::SurfaceCharge(subject),
        "added" => Observable::Added(subject),
        "removed" => Observable::Removed(subject),
        _ => Observable::Misfit(subject),
    }
}

impl fmt::Display for Observable {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (name, subject) = match self {
            Self::Ph => ("pH", None),
            Self::Pe => ("pe", None),
            Self::Eh => ("Eh", None),
            Self::EhOf(subject) => ("Eh", Some(subject)),
            Self::PhOn(scale) => return write!(f, "pH({})", scale.word()),
            Self::Salinity => ("salinity", None),
            Self::Revelle => ("Revelle", None),
            Self::SubstrateInhibitor => ("substrate_inhibitor_ratio", None),
            Self::Buffer(of, by) => {
                let found = BUFFERS.iter().find(|(_, own_of, own_by)| (own_of, own_by) == (of, by));
                (found.map_or("", |(name, ..)| name), None)
            }
            Self::Temperature => ("temperature", None),
            Self::Pressure => ("pressure", None),
            Self::Density => ("density", None),
            Self::IonicStrength => ("ionic_strength", None),
            Self::Alkalinity => ("alkalinity", None),
            Self::Acidity => ("acidity", None),
            Self::Dic => ("DIC", None),
            Self::Hardness => ("hardness", None),
            Self::ChargeError => ("charge_error", None),
            Self::ChargeMisfit => ("charge_misfit", None),
            Self::BufferIntensity => ("buffer_intensity", None),
            Self::CarbonatePotential => ("CCPP", None),
            Self::Langelier => ("Langelier", None),
            Self::Molality(subject) => ("m", Some(subject)),
            Self::Molarity(subject) => ("c", Some(subject)),
            Self::Activity(subject) => ("a", Some(subject)),
            Self::LogActivity(subject) => ("log_a", Some(subject)),
            Self::Gamma(subject) => ("gamma", Some(subject)),
            Self::Total(subject) => ("total", Some(subject)),
            Self::All(subject) => ("all", Some(subject)),
            Self::SaturationIndex(subject) => ("SI", Some(subject)),
            Self::Omega(subject) => ("Omega", Some(subject)),
            Self::Fugacity(subject) => ("f", Some(subject)),
            Self::PartialPressure(subject) => ("p", Some(subject)),
            Self::MoleFraction(subject) => ("x", Some(subject)),
            Self::Amount(subject) => ("n", Some(subject)),
            Self::EquivalentFraction(subject) => ("E", Some(subject)),
            Self::GasVolume(subject) => ("volume", Some(subject)),
            Self::SurfacePotential(subject) => ("potential", Some(subject)),
            Self::SurfaceCharge(subject) => ("surface_charge", Some(subject)),
            Self::Added(subject) => ("added", Some(subject)),
            Self::Removed(subject) => ("removed", Some(subject)),
            Self::Misfit(subject) => ("misfit", Some(subject)),
        };
        match subject {
            None => f.write_str(name),
            Some(subject) => write!(f, "{name}({subject})"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn observables_are_read_and_written_back() {
        for (_, form, _) in NAMES {
            assert_eq!(Asked::parse(form).unwrap().observable.to_string(), form);
        }
        let asked = Asked::parse("m(Ca^2+) [mmol/kg]").unwrap();
        assert_eq!(asked.observable, Observable::Molality("Ca^2+".into()));
        assert_eq!(asked.unit.unwrap().symbol(), "mmol/kg");
        assert_eq!(Asked::parse("f(CO2(g))").unwrap().observable, Observable::Fugacity("CO2(g)".into()));
    }

    #[test]
    fn faults_name_the_right_form() {
        let message = |text: &str| Asked::parse(text).unwrap_err().to_string();
        assert_eq!(message("ph"), "no observable `ph`; did you mean `pH`?");
        assert_eq!(message("SI"), "`SI` is asked as `SI(calcite)`");
        assert_eq!(message("DIC(x)"), "`DIC(x)` is asked as `DIC`");
        assert_eq!(
            message("pH(fre)"),
            "`pH(fre)`: the scales of pH are `free`, `total`, `seawater` and `nbs`"
        );
        assert!(message("m(Ca^2+) [mmol/kgg]").starts_with("`m(Ca^2+) [mmol/kgg]`: unknown unit"));
    }
}
