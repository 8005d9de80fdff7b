//! A gas mixture without water, as it was filled.

use super::neighbour::{gases, mole_fractions, pressure, refuse_ppm, volume};
use crate::chem::Species;
use crate::named::{self, KeyFault, Named, Value};
use crate::physics::constants::{BAR, GAS_CONSTANT};
use crate::quantity::Quantity;
use crate::units::{Kind, Temperature, Unit};

/// An ideal gas mixture: what was filled in, and what stays as it is while it reacts.
#[derive(Debug, Clone)]
pub struct GasMixture {
    /// Temperature.
    pub temperature: Temperature,
    /// The same in kelvin, as it was stated.
    pub kelvin: Quantity,
    /// What stays as it is.
    pub kept: Kept,
    /// Gases with their amounts at the start, mol.
    pub contents: Vec<(Species, Quantity)>,
    /// Gases that react with nothing.
    pub inert: Vec<Species>,
}

/// What stays as it is of a gas mixture.
#[derive(Debug, Clone)]
pub enum Kept {
    /// Its volume, L.
    Volume(Quantity),
    /// Its pressure, bar.
    Pressure(Quantity),
}

const EXAMPLE: &str =
    "write `gas(#{ temperature: \"100 degC\", volume: \"1 L\", n: #{ \"N2O4(g)\": \"0.05 mol\" } })`";

impl GasMixture {
    /// Reads a mixture: `temperature` (25 degC unless given), `volume` or `pressure`, which stays as it is, and one of `n`
    /// (amounts), `p` (partial pressures in the volume) and `x` (mole fractions at a `pressure`, with the `volume` that
    /// is filled); `inert` lists gases that react with nothing.
    ///
    /// # Errors
    ///
    /// A fault of the key concerned.
    pub fn read(mut given: Named) -> Result<Self, KeyFault> {
        let fault = |key: &str, message: String| KeyFault::new(key, message);
        let stated = given.quantity("temperature", Kind::Temperature)?;
        let stated = stated.unwrap_or_else(|| Quantity::exact(298.15, Unit::known("K")));
        let temperature =
            Temperature::try_from(&stated).map_err(|error| fault("temperature", error.to_string()))?;
        let kelvin = stated.to(&Unit::known("K")).map_err(|error| fault("temperature", error.to_string()))?;
        let litres = given.take("volume").map(|value| volume(Some(value), EXAMPLE)).transpose()?;
        let bar = given.take("pressure").map(|value| pressure("pressure", value)).transpose()?;
        if let Some(bar) = bar.as_ref().filter(|bar| bar.value() <= 0.0) {
            return Err(fault("pressure", format!("`pressure` is above zero, not {bar}")));
        }
        let [n, p, x] = ["n", "p", "x"].map(|key| given.take(key));
        let inert = given.texts("inert")?.unwrap_or_default();
        given.finish()?;
        let per_bar = BAR * 1e-3 / (GAS_CONSTANT * temperature.kelvin());
        let contents = match (n, p, x) {
            (Some(n), None, None) => each(gases("n", Some(n), EXAMPLE)?, amount)?,
            (None, Some(p), None) => {
                let litres = litres
                    .as_ref()
                    .ok_or_else(|| fault("p", format!("`p` needs the `volume` that is filled; {EXAMPLE}")))?;
                each(gases("p", Some(p), EXAMPLE)?, |gas, value| {
                    filled(gas, &pressure(gas, value)?, litres, per_bar, &kelvin)
                })?
            }
            (None, None, Some(x)) => {
                let (Some(litres), Some(bar)) = (&litres, &bar) else {
                    return Err(fault(
                        "x",
                        "`x` needs the `pressure` and the `volume` at the start, or give amounts under `n`"
                            .into(),
                    ));
                };
                let fractions = mole_fractions(gases("x", Some(x), EXAMPLE)?)?;
                let part = |(gas, x): (String, f64)| {
                    let own = Quantity::from_partials(x * bar.value(), Unit::known("bar"), &[(bar, x)]);
                    let own = own.map_err(|error| fault("pressure", error.to_string()))?;
                    Ok((named_gas("x", &gas)?, filled(&gas, &own, litres, per_bar, &kelvin)?))
                };
                fractions.into_iter().map(part).collect::<Result<_, KeyFault>>()?
            }
            _ => {
                return Err(fault("n", format!("one of `n`, `p` and `x` says what is filled in; {EXAMPLE}")));
            }
        };
        let total: f64 = contents.iter().map(|(_, moles)| moles.value()).sum();
        if contents.iter().any(|(_, moles)| moles.value() < 0.0) || total <= 0.0 {
            return Err(fault("n", "amounts of gases are not negative, and not all of them zero".into()));
        }
        let kept = match (litres, bar) {
            (_, Some(bar)) => Kept::Pressure(bar),
            (Some(litres), None) => Kept::Volume(litres),
            (None, None) => {
                return Err(fault(
                    "volume",
                    format!("`volume` or `pressure` says what stays as it is; {EXAMPLE}"),
                ));
            }
        };
        let inert = inert.iter().map(|gas| named_gas("inert", gas)).collect::<Result<_, _>>()?;
        Ok(Self { temperature, kelvin, kept, contents, inert })
    }
}

fn each(
    gases: std::collections::BTreeMap<String, Value>,
    read: impl Fn(&str, Value) -> Result<Quantity, KeyFault>,
) -> Result<Vec<(Species, Quantity)>, KeyFault> {
    gases.into_iter().map(|(gas, value)| Ok((named_gas(&gas, &gas)?, read(&gas, value)?))).collect()
}

fn amount(gas: &str, value: Value) -> Result<Quantity, KeyFault> {
    refuse_ppm(gas, &value)?;
    let read = named::quantity(gas, value, Kind::AmountOfSubstance)?;
    let moles = read.to(&Unit::known("mol"));
    moles.map_err(|error| KeyFault::new(gas, format!("`{gas}`: {error}; amounts of gases are in moles")))
}

/// Moles at a pressure in a volume, `p V / RT`.
fn filled(
    gas: &str,
    bar: &Quantity,
    litres: &Quantity,
    per_bar: f64,
    kelvin: &Quantity,
) -> Result<Quantity, KeyFault> {
    let moles = bar.value() * litres.value() * per_bar;
    let partials =
        [(bar, litres.value() * per_bar), (litres, bar.value() * per_bar), (kelvin, -moles / kelvin.value())];
    Quantity::from_partials(moles, Unit::known("mol"), &partials)
        .map_err(|error| KeyFault::new(gas, error.to_string()))
}

fn named_gas(key: &str, name: &str) -> Result<Species, KeyFault> {
    let species = Species::parse(name).map_err(|error| KeyFault::new(key, error.to_string()))?;
    if species.is_gas() {
        return Ok(species);
    }
    Err(KeyFault::new(key, format!("`{name}` is no gas; a gas is written `NO2(g)`")))
}
