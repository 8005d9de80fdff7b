//! Conditions as they are stated with a constant, and what the unit of a K says about them.

use super::conditions::{
    Conditions, GasStandard, GasUnit, HoldingPressure, Medium, PhScale, SoluteUnit, Terms,
};
use super::equation::Equation;
use super::formula::Species;
use super::rational;
use super::salt::Salt;
use super::statement::TERMS;
use crate::named::{self, KeyFault, Named, Value};
use crate::nearest::nearest;
use crate::quantity::Quantity;
use crate::text::list;
use crate::units::{Kind, Pressure, Unit};

/// The practical salinity at which a function of salinity is quoted.
pub const STANDARD_SALINITY: f64 = 35.0;

/// Takes `ionic_strength`, `medium`, `salinity`, `ph_scale`, `basis`, `gas_standard` and `pressure` out of the options.
///
/// # Errors
///
/// Returns the fault of the option that does not fit the reaction or the others.
pub(super) fn read(options: &mut Named, equation: &Equation) -> Result<Stated, KeyFault> {
    let (medium, salinity_is_default) = read_medium(options)?;
    let ph_scale = read_ph_scale(options, &medium, equation)?;
    let (solutes, gases, basis) = read_basis(options, &medium, equation)?;
    let pressure = match options.quantity("pressure", Kind::Pressure)? {
        None => HoldingPressure::default(),
        Some(pressure) => HoldingPressure(
            Pressure::try_from(&pressure)
                .map_err(|error| KeyFault::new("pressure", format!("`pressure`: {error}")))?
                .bar(),
        ),
    };
    let conditions = Conditions { medium, solutes, ph_scale, gases, pressure };
    Ok(Stated { conditions, basis, salinity_is_default })
}

/// Conditions, and whether a basis was among what was said.
pub(super) struct Stated {
    pub conditions: Conditions,
    basis: Option<String>,
    /// `medium: "seawater"` alone: right for a function of salinity, which is then quoted at 35.
    pub salinity_is_default: bool,
}

/// Practical salinity: a bare number or one in PSU.
///
/// # Errors
///
/// Returns a fault of `key` for anything else, and outside 0 to 100.
pub fn salinity(key: &str, value: Value) -> Result<f64, KeyFault> {
    let practical = match value {
        Value::Number(number) => Some(number),
        other => {
            let quantity = named::quantity(key, other, Kind::Salinity)?;
            (quantity.unit().symbol() == "PSU").then(|| quantity.value())
        }
    };
    match practical {
        Some(salinity) if (0.0..=100.0).contains(&salinity) => Ok(salinity),
        Some(salinity) => Err(KeyFault::new(key, format!("a salinity of {salinity} is no seawater's"))),
        None => Err(KeyFault::new(key, format!("`{key}` is practical salinity; write `35` or `\"35 PSU\"`"))),
    }
}

/// Whether a constant may leave its salinity open.
///
/// # Errors
///
/// A fault of `medium` where the two do not go together.
pub(super) fn check_salinity(stated: &Stated, depends_on_salinity: bool) -> Result<(), KeyFault> {
    let is_seawater = matches!(stated.conditions.medium, Medium::Seawater { .. });
    match (depends_on_salinity, is_seawater) {
        (true, false) => Err(KeyFault::new(
            "medium",
            "a function of salinity holds in seawater: give it `medium: \"seawater\"`",
        )),
        (false, true) if stated.salinity_is_default => {
            Err(KeyFault::new("medium", "`medium: \"seawater\"` needs its `salinity`, such as 35"))
        }
        _ => Ok(()),
    }
}

/// The medium, and whether it is seawater of a salinity that was not said.
fn read_medium(options: &mut Named) -> Result<(Medium, bool), KeyFault> {
    let stated = options.quantity("ionic_strength", Kind::Amount)?.map(ionic_strength).transpose()?;
    let text = options.text("medium")?;
    let salinity = options.take("salinity").map(|value| self::salinity("salinity", value)).transpose()?;
    let may_depend_on_it = TERMS.iter().any(|(option, _)| options.has(option));
    if let (Some("seawater"), None, None, true) = (text.as_deref(), salinity, stated, may_depend_on_it) {
        return Ok((Medium::Seawater { salinity: STANDARD_SALINITY }, true));
    }
    medium_of(text, salinity, stated).map(|medium| (medium, false))
}

fn medium_of(
    text: Option<String>,
    salinity: Option<f64>,
    stated: Option<(f64, SoluteUnit)>,
) -> Result<Medium, KeyFault> {
    match (text.as_deref(), salinity, stated) {
        (Some("seawater"), Some(salinity), None) => Ok(Medium::Seawater { salinity }),
        (Some("seawater"), Some(_), Some(_)) => Err(KeyFault::new(
            "ionic_strength",
            "the ionic strength of seawater follows from its salinity: leave `ionic_strength` out",
        )),
        (Some("seawater"), None, _) => {
            Err(KeyFault::new("medium", "`medium: \"seawater\"` needs its `salinity`, such as 35"))
        }
        (_, Some(_), _) => {
            Err(KeyFault::new("salinity", "`salinity` belongs to `medium: \"seawater\"`: give that too"))
        }
        (Some(text), None, stated) => salt_solution(text, stated),
        (None, None, Some((value, per))) => Ok(of_ionic_strength(value, per, None)),
        (None, None, None) => Ok(Medium::InfiniteDilution),
    }
}

/// `0.7 mol/kg NaCl`.
fn salt_solution(text: &str, stated: Option<(f64, SoluteUnit)>) -> Result<Medium, KeyFault> {
    let fault = || {
        let message = format!(
            "`{text}` is no medium: write \"0.7 mol/kg NaCl\" (a salt of common ions), or \"seawater\" with its `salinity`"
        );
        KeyFault::new("medium", message)
    };
    let (amount, formula) = text.trim().rsplit_once(' ').ok_or_else(fault)?;
    let salt = Salt::parse(formula).ok_or_else(fault)?;
    let amount = Quantity::parse(amount, Kind::Amount, "medium")
        .map_err(|error| KeyFault::new("medium", format!("`medium`: {error}")))?;
    let (amount, per) = ionic_strength(amount).map_err(|fault| KeyFault::new("medium", fault.message))?;
    let value = amount * salt.strength_per_mole;
    match stated {
        Some((stated, unit)) if unit != per || (stated / value - 1.0).abs() > 0.01 => Err(KeyFault::new(
            "ionic_strength",
            format!("`medium` has an ionic strength of {value} {per}, `ionic_strength` says {stated} {unit}"),
        )),
        _ => Ok(of_ionic_strength(value, per, Some(salt.formula))),
    }
}

fn of_ionic_strength(value: f64, per: SoluteUnit, salt: Option<String>) -> Medium {
    if value == 0.0 { Medium::InfiniteDilution } else { Medium::IonicStrength { value, per, salt } }
}

/// An ionic strength in mol/kg(water) or mol/L.
fn ionic_strength(given: Quantity) -> Result<(f64, SoluteUnit), KeyFault> {
    let fault = |message: String| KeyFault::new("ionic_strength", message);
    let per_kg = ["mol/kg", "mol/kg(water)"].iter().find_map(|unit| given.to(&Unit::known(unit)).ok());
    let (value, per) = match (per_kg, given.to(&Unit::known("mol/L"))) {
        (Some(molal), _) => (molal.value(), SoluteUnit::Molal),
        (None, Ok(molar)) => (molar.value(), SoluteUnit::Molar),
        (None, Err(_)) => {
            return Err(fault(format!(
                "an ionic strength or salt is given in `mol/kg` (of water) or `mol/L`, not in `{}`",
                given.unit()
            )));
        }
    };
    if value < 0.0 {
        return Err(fault(format!("an ionic strength of {value} is negative")));
    }
    Ok((value, per))
}

fn read_ph_scale(options: &mut Named, medium: &Medium, equation: &Equation) -> Result<PhScale, KeyFault> {
    let fault = |message: String| KeyFault::new("ph_scale", message);
    let words: Vec<&str> = PhScale::ALL.into_iter().map(PhScale::word).collect();
    let given = match options.text("ph_scale")? {
        None => None,
        Some(word) => Some(PhScale::parse(&word).ok_or_else(|| {
            let help = nearest(&word, words.iter().copied())
                .map(|close| format!("; did you mean `{close}`?"))
                .unwrap_or_default();
            fault(format!("`{word}` is no scale of pH: the scales are {}{help}", list(&words)))
        })?),
    };
    let has_protons = equation.coefficient(&Species::proton()) != 0.into();
    if given.is_some() && !has_protons {
        return Err(fault(format!("`ph_scale` means nothing here: `H^+` takes no part in `{equation}`")));
    }
    match (medium, given) {
        (Medium::InfiniteDilution, None | Some(PhScale::Activity)) => Ok(PhScale::Activity),
        (Medium::InfiniteDilution, Some(scale)) => Err(fault(format!(
            "the {} scale needs the solution the constant was measured in: give `ionic_strength` or `medium`",
            scale.word()
        ))),
        (Medium::IonicStrength { .. }, Some(scale @ (PhScale::Total | PhScale::Seawater))) => {
            Err(fault(format!(
                "the {} scale counts HSO4^- of seawater: give `medium: \"seawater\"` and `salinity`",
                scale.word()
            )))
        }
        (Medium::Seawater { .. }, None) if has_protons => {
            Err(fault(format!("a constant of seawater with `H^+` needs `ph_scale`, one of {}", list(&words))))
        }
        (_, scale) => Ok(scale.unwrap_or(PhScale::Free)),
    }
}

type Basis = (SoluteUnit, GasUnit, Option<String>);

fn read_basis(options: &mut Named, medium: &Medium, equation: &Equation) -> Result<Basis, KeyFault> {
    const BASES: [&str; 4] = ["molal", "molar", "pressure", "concentration"];
    let standard = match options.text("gas_standard")? {
        None => None,
        Some(text) => Some(GasStandard::parse(&text).ok_or_else(|| {
            KeyFault::new("gas_standard", format!("`{text}` is no gas standard: it is `1 bar` or `1 atm`"))
        })?),
    };
    let gases = GasUnit::Pressure(standard.unwrap_or_default());
    let basis = options.text("basis")?;
    let fault = |message: String| Err(KeyFault::new("basis", message));
    let has_gases = equation.terms().iter().any(|(species, _)| species.is_gas());
    let by_medium = match medium {
        Medium::Seawater { .. } => SoluteUnit::PerKgSolution,
        _ => SoluteUnit::Molal,
    };
    let (solutes, gases) = match basis.as_deref() {
        None => match medium {
            Medium::IonicStrength { per: SoluteUnit::Molar, .. }
                if equation.terms().iter().any(|(species, _)| species.is_solute()) =>
            {
                return fault(
                    "the medium is stated per litre: say whether the constant is, too, with `basis: \"molar\"` or \
                     `basis: \"molal\"`"
                        .into(),
                );
            }
            _ => (by_medium, gases),
        },
        Some("molal") => (SoluteUnit::Molal, gases),
        Some("molar") => (SoluteUnit::Molar, gases),
        Some(word @ ("pressure" | "concentration")) if !has_gases => {
            return fault(format!("`basis: \"{word}\"` is for gases, and `{equation}` has none"));
        }
        Some("pressure") => (by_medium, gases),
        Some("concentration") if standard.is_some() => {
            return fault(
                "a constant of concentrations has no gas standard: leave `gas_standard` out".into(),
            );
        }
        Some("concentration") => (SoluteUnit::Molar, GasUnit::Concentration),
        Some(word) => {
            let help =
                nearest(word, BASES).map(|close| format!("; did you mean `{close}`?")).unwrap_or_default();
            return fault(format!("`{word}` is no basis: the bases are {}{help}", list(&BASES)));
        }
    };
    Ok((solutes, gases, basis))
}

impl Stated {
    /// A K with its unit, as a pure number in the conditions which that unit fixes.
    ///
    /// # Errors
    ///
    /// Returns the units that the exponents of the reaction demand if the unit is none of them, or what contradicts it.
    pub fn of_unit(&mut self, k: &Quantity, equation: &Equation) -> Result<Quantity, KeyFault> {
        let fault = |message: String| KeyFault::new("k", message);
        let terms = Terms::of(equation, &self.conditions);
        let (n_solutes, n_gases) = (rational::to_f64(terms.solutes), rational::to_f64(equation.gas_made()));
        let standard = if k.unit().symbol().contains("atm") { GasStandard::Atm } else { GasStandard::Bar };
        let mut demanded: Vec<String> = Vec::new();
        for (solute, solutes) in self.solute_units() {
            for gases in [GasUnit::Pressure(standard), GasUnit::Concentration] {
                if gases == GasUnit::Concentration && solutes != SoluteUnit::Molar && n_solutes != 0.0 {
                    continue;
                }
                let Some(unit) = unit_of(solute, n_solutes, gases, n_gases) else { continue };
                if let Ok(number) = k.to(&unit) {
                    self.take(k, solutes, n_solutes, gases, n_gases)?;
                    return Ok(Quantity::from_parts(number.value(), Unit::one(), number.parts().to_vec()));
                }
                let symbol = unit.symbol();
                if !demanded.contains(&symbol) {
                    demanded.push(symbol);
                }
            }
        }
        let demanded = if demanded == ["1"] { "a pure number".into() } else { list(&demanded) };
        Err(fault(format!(
            "`k` in `{}` does not fit `{equation}`, whose exponents demand {demanded}",
            k.unit()
        )))
    }

    /// Units a dissolved species may be counted in, with what each means here.
    fn solute_units(&self) -> [(&'static str, SoluteUnit); 4] {
        let bare = match self.conditions.medium {
            Medium::Seawater { .. } => SoluteUnit::PerKgSolution,
            _ => SoluteUnit::Molal,
        };
        [
            ("mol/kg", bare),
            ("mol/L", SoluteUnit::Molar),
            ("mol/kg(water)", SoluteUnit::Molal),
            ("mol/kg(solution)", SoluteUnit::PerKgSolution),
        ]
    }

    /// Takes over what the unit fixes, unless something else was said.
    fn take(
        &mut self,
        k: &Quantity,
        solutes: SoluteUnit,
        n_solutes: f64,
        gases: GasUnit,
        n_gases: f64,
    ) -> Result<(), KeyFault> {
        let conditions = &mut self.conditions;
        let fixed = (
            if n_solutes == 0.0 { conditions.solutes } else { solutes },
            if n_gases == 0.0 { conditions.gases } else { gases },
        );
        if let Some(basis) = &self.basis
            && fixed != (conditions.solutes, conditions.gases)
        {
            let message = format!("`k` in `{}` contradicts `basis: \"{basis}\"`: leave one out", k.unit());
            return Err(KeyFault::new("k", message));
        }
        (conditions.solutes, conditions.gases) = fixed;
        Ok(())
    }
}

fn unit_of(solute: &str, n_solutes: f64, gases: GasUnit, n_gases: f64) -> Option<Unit> {
    let gas = match gases {
        GasUnit::Pressure(GasStandard::Bar) => "bar",
        GasUnit::Pressure(GasStandard::Atm) => "atm",
        GasUnit::Concentration => "mol/L",
    };
    let solutes = Unit::known(solute).powf(n_solutes).ok()?;
    solutes.times(&Unit::known(gas).powf(n_gases).ok()?).ok()
}
