//! What a water shares its matter with and what has amounts of its own: gas phases, solid solutions, exchangers, surfaces.

use std::collections::BTreeMap;

use super::concentration::{self, Amount, Per};
use crate::named::{self, KeyFault, Named, Value};
use crate::nearest::nearest;
use crate::quantity::Quantity;
use crate::text::list;
use crate::units::{Kind, Unit};

/// Something beside a water, of the size that it has beside the whole sample.
#[derive(Debug, Clone)]
pub enum Neighbour {
    /// A gas phase.
    Gas(GasPhase),
    /// An ideal solid solution, which forms where it can.
    SolidSolution {
        /// What it is called.
        name: String,
        /// Its end members, minerals by their names.
        members: Vec<String>,
    },
    /// An ion exchanger.
    Exchanger(Exchanger),
    /// A charged surface.
    Surface(Surface),
}

/// A gas phase; only the gases that are named go into it.
#[derive(Debug, Clone)]
pub struct GasPhase {
    /// What it is called: `headspace` or `bubble`.
    pub name: String,
    /// What stays as it is.
    pub kept: Kept,
    /// Volume at the start, L.
    pub volume: Quantity,
    /// Partial pressures at the start, bar, at the temperature of the analysis.
    pub pressures: Vec<(String, Quantity)>,
}

/// What stays as it is of a gas phase.
#[derive(Debug, Clone)]
pub enum Kept {
    /// Its volume, as it was at the start.
    Volume,
    /// Its pressure, bar, vapour of water included.
    Pressure(Quantity),
}

/// An ion exchanger.
#[derive(Debug, Clone)]
pub struct Exchanger {
    /// The solid, as in the brackets of `NaX(clay)`.
    pub name: String,
    /// Sites, eq/kg(water).
    pub capacity: Amount,
    /// How activities on it are counted.
    pub convention: Convention,
    /// The ion that is on all of it at the start; `None`: it starts in equilibrium with the water as analysed.
    pub form: Option<String>,
}

/// What the activity of an ion on an exchanger is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Convention {
    /// Its equivalent fraction (Gaines & Thomas 1953, J. Chem. Phys. 21, 714).
    GainesThomas,
    /// Its mole fraction (Vanselow 1932, Soil Sci. 33, 95).
    Vanselow,
    /// Its equivalent fraction, reactions written for one equivalent, `Ca0.5X(clay)` (Gapon 1933).
    Gapon,
}

/// A charged surface.
#[derive(Debug, Clone)]
pub struct Surface {
    /// What it is called.
    pub name: String,
    /// Kinds of site, as in the brackets of `XOH(ferric oxide)`, with their amounts, mol.
    pub sites: Vec<(String, Quantity)>,
    /// Area, m2.
    pub area: Quantity,
    /// How its charge depends on its potential.
    pub layer: Layer,
}

/// How the charge of a surface depends on its potential.
#[derive(Debug, Clone)]
pub enum Layer {
    /// By the equation of Gouy and Chapman, counter-ions of charge 1.
    Diffuse,
    /// In proportion, F/m2.
    ConstantCapacitance(Quantity),
}

impl Neighbour {
    /// What it is called.
    #[must_use]
    pub fn name(&self) -> &str {
        match self {
            Self::Gas(gas) => &gas.name,
            Self::SolidSolution { name, .. } => name,
            Self::Exchanger(exchanger) => &exchanger.name,
            Self::Surface(surface) => &surface.name,
        }
    }

    /// A solid solution.
    ///
    /// # Errors
    ///
    /// A fault for no member, or one named twice.
    pub fn solid_solution(name: &str, members: Vec<String>) -> Result<Self, String> {
        let twice = members.iter().enumerate().find(|(at, member)| members[..*at].contains(member));
        if let Some((_, member)) = twice {
            return Err(format!("the solid solution `{name}` has `{member}` twice"));
        }
        if members.len() < 2 {
            return Err(format!(
                "the solid solution `{name}` needs two end members or more, such as `[\"calcite\", \"magnesite\"]`; \
                 a pure mineral is allowed to form by `.allow`"
            ));
        }
        Ok(Self::SolidSolution { name: name.into(), members })
    }

    /// Replaces the quantities that it was given by.
    pub(super) fn move_quantities(&mut self, change: &mut dyn FnMut(&Quantity) -> Quantity) {
        let mut moved = |quantity: &mut Quantity| *quantity = change(quantity);
        match self {
            Self::Gas(gas) => {
                moved(&mut gas.volume);
                gas.pressures.iter_mut().for_each(|(_, pressure)| moved(pressure));
                if let Kept::Pressure(pressure) = &mut gas.kept {
                    moved(pressure);
                }
            }
            Self::SolidSolution { .. } => {}
            Self::Exchanger(exchanger) => moved(&mut exchanger.capacity.moles),
            Self::Surface(surface) => {
                surface.sites.iter_mut().for_each(|(_, sites)| moved(sites));
                moved(&mut surface.area);
                if let Layer::ConstantCapacitance(capacitance) = &mut surface.layer {
                    moved(capacitance);
                }
            }
        }
    }
}

impl GasPhase {
    /// A gas phase of given volume: `volume` and `p`, partial pressures at the start by gas.
    ///
    /// # Errors
    ///
    /// A fault of the key concerned.
    pub fn headspace(mut given: Named) -> Result<Self, KeyFault> {
        let example = "write `.headspace(#{ volume: \"50 mL\", p: #{ \"CO2(g)\": \"0.05 bar\" } })`";
        let (litres, filled) = (given.take("volume"), given.take("p"));
        given.finish()?;
        let volume = volume(litres, example)?;
        let gases = gases("p", filled, example)?;
        let pressure = |(gas, value): (String, Value)| {
            // In budgets it is told from the constant of the gas.
            let read = pressure(&format!("p({gas})"), value);
            let pressure = read.map_err(|fault| KeyFault::new(gas.clone(), fault.message))?;
            if pressure.value() < 0.0 {
                return Err(KeyFault::new(gas.clone(), format!("the pressure of `{gas}` is negative")));
            }
            Ok((gas, pressure))
        };
        let pressures = gases.into_iter().map(pressure).collect::<Result<_, _>>()?;
        Ok(Self { name: "headspace".into(), kept: Kept::Volume, volume, pressures })
    }

    /// A gas phase of given pressure: `pressure`, `x`, mole fractions in the dry gas at the start, and `volume`, that at
    /// the start.
    ///
    /// # Errors
    ///
    /// A fault of the key concerned.
    pub fn bubble(mut given: Named) -> Result<Self, KeyFault> {
        let example = "write `.bubble(#{ pressure: \"1 atm\", x: #{ \"CO2(g)\": 0.05, \"N2(g)\": 0.95 }, volume: \"100 mL\" })`";
        let [whole, litres, fractions] = ["pressure", "volume", "x"].map(|key| given.take(key));
        given.finish()?;
        let whole = whole.ok_or_else(|| missing("pressure", example))?;
        let whole = pressure("pressure", whole)?;
        if whole.value() <= 0.0 {
            return Err(KeyFault::new("pressure", "the pressure of a gas phase is above zero"));
        }
        let gases = gases("x", fractions, example)?;
        let volume =
            volume(litres, "an unlimited gas keeps its fugacities: `.open_to(\"CO2(g)\", \"420 uatm\")`")?;
        let fractions = mole_fractions(gases)?;
        let part = |x: f64| Quantity::from_partials(x * whole.value(), Unit::known("bar"), &[(&whole, x)]);
        let part = |(gas, x): (String, f64)| {
            let pressure = part(x).map_err(|error| KeyFault::new("pressure", error.to_string()))?;
            Ok((gas, pressure))
        };
        let pressures = fractions.into_iter().map(part).collect::<Result<_, KeyFault>>()?;
        Ok(Self { name: "bubble".into(), kept: Kept::Pressure(whole), volume, pressures })
    }
}

/// Mole fractions that add up to 1.
///
/// # Errors
///
/// A fault of a gas whose fraction is none, or of `x` where they do not add up.
pub fn mole_fractions(gases: BTreeMap<String, Value>) -> Result<Vec<(String, f64)>, KeyFault> {
    let fraction = |(gas, value): (String, Value)| {
        let read = named::quantity(&gas, value, Kind::Fraction)?;
        let x = read.to(&Unit::one()).map_or(f64::NAN, |read| read.value());
        if !(0.0..=1.0).contains(&x) {
            let message = format!("the mole fraction of `{gas}` lies between 0 and 1, not at {x}");
            return Err(KeyFault::new(gas.clone(), message));
        }
        Ok((gas, x))
    };
    let fractions: Vec<(String, f64)> = gases.into_iter().map(fraction).collect::<Result<_, _>>()?;
    let sum: f64 = fractions.iter().map(|(_, x)| x).sum();
    if (sum - 1.0).abs() > 1e-6 {
        let message = format!(
            "the mole fractions add up to {sum}, not to 1: name every gas, such as `N2(g)` for the rest"
        );
        return Err(KeyFault::new("x", message));
    }
    Ok(fractions.into_iter().map(|(gas, x)| (gas, x / sum)).collect())
}

impl Exchanger {
    /// An exchanger of `capacity`, or of a map of `capacity`, `convention` (`"Gaines-Thomas"`, `"Vanselow"`, `"Gapon"`)
    /// and `form`, the ion that is on it at the start.
    ///
    /// # Errors
    ///
    /// A fault of the key concerned.
    pub fn read(name: &str, given: Value) -> Result<Self, KeyFault> {
        let mut given = match given {
            Value::Map(map) => Named::new(map),
            capacity => Named::new([("capacity".to_string(), capacity)].into()),
        };
        let capacity = given.quantity("capacity", Kind::Alkalinity)?;
        let (convention, form) = (given.text("convention")?, given.text("form")?);
        given.finish()?;
        let capacity = capacity.ok_or_else(|| {
            missing("capacity", "write `.exchanger(\"clay\", \"2 meq/kg\")`, per kilogram of water")
        })?;
        let wrong = || {
            let message = "the sites of an exchanger are equivalents per kilogram of water, above zero, such as `2 meq/kg`";
            KeyFault::new("capacity", message)
        };
        let capacity = concentration::alkalinity(&capacity).map_err(|_| wrong())?;
        if capacity.per != Per::Water || capacity.moles.value() <= 0.0 {
            return Err(wrong());
        }
        let convention = convention.map_or(Ok(Convention::GainesThomas), |word| Convention::named(&word))?;
        Ok(Self { name: name.into(), capacity, convention, form })
    }
}

impl Convention {
    const ALL: [(&'static str, Self); 3] =
        [("Gaines-Thomas", Self::GainesThomas), ("Vanselow", Self::Vanselow), ("Gapon", Self::Gapon)];

    fn named(word: &str) -> Result<Self, KeyFault> {
        let found = Self::ALL.iter().find(|(name, _)| *name == word).map(|(_, convention)| *convention);
        found.ok_or_else(|| unknown("convention", word, &Self::ALL.map(|(name, _)| name)))
    }

    /// As it is written.
    #[must_use]
    pub fn word(self) -> &'static str {
        Self::ALL.iter().find(|(_, own)| *own == self).map_or("", |(word, _)| word)
    }
}

impl Surface {
    /// A surface from `sites` (moles, moles per gram, or a map of these by kind of site), `area` (per mass), `mass`,
    /// `model` (`"diffuse layer"`, `"constant capacitance"`) and, for the latter, `capacitance`.
    ///
    /// # Errors
    ///
    /// A fault of the key concerned.
    pub fn read(name: &str, mut given: Named) -> Result<Self, KeyFault> {
        let example = "write `#{ sites: \"2.25 mmol/g\", area: \"600 m2/g\", mass: \"0.1 g\", model: \"diffuse layer\" }`";
        let mass = given.quantity("mass", Kind::Mass)?;
        let area = given.quantity("area", Kind::SpecificArea)?;
        let capacitance = given.quantity("capacitance", Kind::Capacitance)?;
        let (model, sites) = (given.text("model")?, given.take("sites"));
        given.finish()?;
        let mass = positive("mass", &mass.ok_or_else(|| missing("mass", example))?, "g")?;
        let without = "a surface without an area has no charge density; give `area: \"600 m2/g\"`";
        let area = positive("area", &area.ok_or_else(|| missing("area", without))?, "m2/g")?;
        let sites = match sites.ok_or_else(|| missing("sites", example))? {
            Value::Map(map) => map.into_iter().collect(),
            one => vec![(name.to_string(), one)],
        };
        let sites: Vec<_> = sites
            .into_iter()
            .map(|(site, value)| site_amount(site, value, &mass))
            .collect::<Result<_, _>>()?;
        if sites.is_empty() {
            return Err(missing("sites", example));
        }
        let layer = Layer::named(model.as_deref(), capacitance)?;
        let area = product(&area, &mass, "m2")?;
        Ok(Self { name: name.into(), sites, area, layer })
    }
}

impl Layer {
    fn named(model: Option<&str>, capacitance: Option<Quantity>) -> Result<Self, KeyFault> {
        match (model, capacitance) {
            (Some("diffuse layer") | None, None) => Ok(Self::Diffuse),
            (Some("constant capacitance"), Some(capacitance)) => {
                Ok(Self::ConstantCapacitance(positive("capacitance", &capacitance, "F/m2")?))
            }
            (Some("diffuse layer") | None, Some(_)) => {
                let message = "`capacitance` belongs to `model: \"constant capacitance\"`";
                Err(KeyFault::new("capacitance", message))
            }
            (Some("constant capacitance"), None) => Err(missing(
                "capacitance",
                "the constant capacitance model needs one, such as `\"1.0 F/m2\"`",
            )),
            (Some(word), _) => Err(unknown("model", word, &["diffuse layer", "constant capacitance"])),
        }
    }
}

/// Moles of one kind of site, given as such or per gram of the solid.
fn site_amount(site: String, value: Value, mass: &Quantity) -> Result<(String, Quantity), KeyFault> {
    let wrong = |why: String| KeyFault::new("sites", format!("sites of `{site}`: {why}"));
    let (mol, per_gram) = (Unit::known("mol"), Unit::known("mol/g"));
    let read = match value {
        Value::Number(number) => Quantity::measured(number, mol.clone(), None, "sites"),
        Value::Text(text) => Quantity::parse_any(&text, &mol, "sites"),
        Value::Quantity(quantity) => Ok(quantity),
        other => return Err(wrong(format!("an amount is needed, not {}", other.kind()))),
    };
    let read = read.map_err(|error| wrong(error.to_string()))?;
    let moles = match (read.to(&mol), read.to(&per_gram)) {
        (Ok(moles), _) => moles,
        (_, Ok(per_gram)) => product(&per_gram, mass, "mol")?,
        _ => {
            return Err(wrong(
                "they are given in moles, `\"0.2 mmol\"`, or per mass, `\"2.25 mmol/g\"`".into(),
            ));
        }
    };
    if moles.value() <= 0.0 {
        return Err(wrong("there are more than none".into()));
    }
    Ok((site, moles))
}

/// A gas pressure in bar; ppm is no pressure.
///
/// # Errors
///
/// A fault of `key`.
pub fn pressure(key: &str, value: Value) -> Result<Quantity, KeyFault> {
    refuse_ppm(key, &value)?;
    let read = named::quantity(key, value, Kind::Pressure)?;
    read.to(&Unit::known("bar")).map_err(|error| KeyFault::new(key, error.to_string()))
}

/// A gas given in parts per million says not of what.
///
/// # Errors
///
/// A fault of `key` that says what to write.
pub fn refuse_ppm(key: &str, value: &Value) -> Result<(), KeyFault> {
    match value {
        Value::Text(text) if text.trim().ends_with("ppm") || text.trim().ends_with("ppb") => {
            Err(KeyFault::new(
                key,
                format!(
                    "`{key}`: a gas is not given in ppm; write its pressure, `\"420 uatm\"`, or mole fractions under `x`"
                ),
            ))
        }
        _ => Ok(()),
    }
}

/// A volume above zero, in L.
///
/// # Errors
///
/// A fault of `volume`.
pub fn volume(value: Option<Value>, advice: &str) -> Result<Quantity, KeyFault> {
    let value = value.ok_or_else(|| missing("volume", advice))?;
    positive("volume", &named::quantity("volume", value, Kind::Volume)?, "L")
}

/// Gases by name.
///
/// # Errors
///
/// A fault of `key` for anything but a map with gases in it.
pub fn gases(key: &str, value: Option<Value>, example: &str) -> Result<BTreeMap<String, Value>, KeyFault> {
    match value {
        Some(Value::Map(gases)) if !gases.is_empty() => Ok(gases),
        Some(Value::Map(_)) | None => Err(missing(key, example)),
        Some(other) => {
            Err(KeyFault::new(key, format!("`{key}` takes a map of gases, not {}; {example}", other.kind())))
        }
    }
}

fn positive(key: &str, given: &Quantity, unit: &str) -> Result<Quantity, KeyFault> {
    let converted = given.to(&Unit::known(unit)).map_err(|error| KeyFault::new(key, error.to_string()))?;
    if converted.value() > 0.0 {
        return Ok(converted);
    }
    Err(KeyFault::new(key, format!("`{key}` is above zero, not {given}")))
}

fn product(a: &Quantity, b: &Quantity, unit: &str) -> Result<Quantity, KeyFault> {
    let partials = [(a, b.value()), (b, a.value())];
    Quantity::from_partials(a.value() * b.value(), Unit::known(unit), &partials)
        .map_err(|error| KeyFault::new("mass", error.to_string()))
}

fn missing(key: &str, advice: &str) -> KeyFault {
    KeyFault::new(key, format!("`{key}` is missing; {advice}"))
}

fn unknown(key: &str, word: &str, words: &[&str]) -> KeyFault {
    let near = nearest(word, words.iter().copied());
    let help = near
        .map_or_else(|| format!("it is one of {}", list(words)), |near| format!("did you mean `{near}`?"));
    KeyFault::new(key, format!("no {key} `{word}`; {help}"))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn given(entries: &[(&str, Value)]) -> Named {
        Named::new(entries.iter().map(|(key, value)| ((*key).to_string(), value.clone())).collect())
    }

    fn text(text: &str) -> Value {
        Value::Text(text.into())
    }

    fn map(entries: &[(&str, Value)]) -> Value {
        Value::Map(entries.iter().map(|(key, value)| ((*key).to_string(), value.clone())).collect())
    }

    #[test]
    fn a_headspace_has_a_volume_and_pressures() {
        let p = map(&[("CO2(g)", text("0.05 bar"))]);
        let gas = GasPhase::headspace(given(&[("volume", text("50 mL")), ("p", p.clone())])).unwrap();
        assert_eq!((gas.volume.value(), gas.pressures[0].1.value()), (0.05, 0.05));
        let fault = |entries: &[(&str, Value)]| GasPhase::headspace(given(entries)).unwrap_err().message;
        assert!(fault(&[("volume", text("0 L")), ("p", p.clone())]).contains("`volume` is above zero"));
        assert!(fault(&[("p", p)]).contains("`volume` is missing"));
        let ppm = map(&[("CO2(g)", text("420 ppm"))]);
        assert!(fault(&[("volume", text("1 L")), ("p", ppm)]).contains("`\"420 uatm\"`"));
    }

    #[test]
    fn mole_fractions_add_up() {
        let x = map(&[("CO2(g)", Value::Number(0.05)), ("N2(g)", Value::Number(0.9))]);
        let bubble = given(&[("pressure", text("1 atm")), ("x", x), ("volume", text("100 mL"))]);
        let message = GasPhase::bubble(bubble).unwrap_err().message;
        assert!(message.contains("add up to 0.95"), "{message}");
    }

    #[test]
    fn a_surface_has_an_area() {
        let message =
            |entries: &[(&str, Value)]| Surface::read("ferric oxide", given(entries)).unwrap_err().message;
        let (sites, mass) = (("sites", text("2.25 mmol/g")), ("mass", text("0.1 g")));
        assert!(message(&[sites.clone(), mass.clone()]).contains("`area` is missing"));
        let area = ("area", text("600 m2/g"));
        let model = ("model", text("difuse layer"));
        assert!(message(&[sites.clone(), mass.clone(), area.clone(), model]).contains("`diffuse layer`"));
        let surface = Surface::read("ferric oxide", given(&[sites, mass, area])).unwrap();
        assert!((surface.area.value() - 60.0).abs() < 1e-12);
        assert!((surface.sites[0].1.value() - 2.25e-4).abs() < 1e-16);
    }

    #[test]
    fn an_exchanger_has_sites_by_the_kilogram_of_water() {
        assert_eq!(Exchanger::read("clay", text("2 meq/kg")).unwrap().capacity.moles.value(), 2e-3);
        let message = |value: Value| Exchanger::read("clay", value).unwrap_err().message;
        assert!(message(text("2 meq/L")).contains("per kilogram of water"));
        let odd = map(&[("capacity", text("2 meq/kg")), ("convention", text("Vanslow"))]);
        assert!(message(odd).contains("did you mean `Vanselow`?"));
    }
}
