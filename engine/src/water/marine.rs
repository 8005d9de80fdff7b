//! The analysis of a seawater: as [`super::analysis`], with the salinity that fixes its conservative ions, amounts per
//! kilogram of solution, and a pH that has a scale and perhaps a temperature of its own.

use std::collections::BTreeMap;

use super::analysis::{self, Evidence, Measured, Read};
use super::concentration::Solution;
use crate::chem::{PhScale, reaction};
use crate::ledger::Sea;
use crate::named::{KeyFault, Named, Value};
use crate::nearest::nearest;
use crate::physics::{gas_exchange, seawater};
use crate::quantity::Quantity;
use crate::text::list;
use crate::units::{KgOf, Kind, Pressure, Temperature, Unit};

/// The nutrients, by the names oceanographers give them, as the amounts they are.
pub const NUTRIENTS: [(&str, &str); 4] =
    [("phosphate", "P"), ("silicate", "Si"), ("ammonium", "N(-III)"), ("sulfide", "S(-II)")];

/// Keys that a seawater has besides those of any sample.
pub const KEYS: [&str; 11] = [
    "salinity",
    "ph_scale",
    "pH_temperature",
    "fCO2_temperature",
    "air_pressure",
    "depth",
    "latitude",
    "phosphate",
    "silicate",
    "ammonium",
    "sulfide",
];

/// A latitude at which depth and pressure belong together where none is given.
const COMMON_LATITUDE: f64 = 45.0;

/// Reads the keys of a seawater.
///
/// # Errors
///
/// Returns the first fault with its key.
pub fn read(entries: BTreeMap<String, Value>) -> Result<Read, KeyFault> {
    let mut named = Named::new(entries);
    let (mut defaults, mut notes) = (Vec::new(), Vec::new());
    let name = named.text("name")?;
    let (salinity, stated_salinity) = read_salinity(&mut named, &mut notes)?;
    read_depth(&mut named, &mut notes)?;
    let (setting, temperature) = analysis::read_setting(&mut named, &mut defaults)?;
    let ph_scale = read_scale(&mut named)?;
    let ph_temperature = read_temperature(&mut named, "pH_temperature")?;
    let co2_temperature = read_temperature(&mut named, "fCO2_temperature")?;
    let sea = Sea { salinity, stated_salinity, pressure: setting.pressure, ph_scale };
    let air = named.quantity("air_pressure", Kind::Pressure)?;
    let air = air.map_or(Ok(Pressure::ATMOSPHERE), |given| analysis::pressure_of("air_pressure", &given))?;
    let density = analysis::read_density(&mut named)?;
    let volume_temperature = read_temperature(&mut named, "volume_temperature")?;
    let make_up = named.text("make_up")?;

    let mut named = Named::new(in_solution(named.rest())?);
    let co2 = with_fugacity(&mut named, co2_temperature.unwrap_or(setting.temperature), salinity, air)?;
    let evidence = analysis::read_evidence(&mut named, co2)?;
    let measured_at = measured_at(ph_temperature, co2_temperature, &evidence)?;
    let mut measured = Measured {
        evidence,
        make_up,
        density,
        volume_temperature,
        temperature: temperature.filter(|_| measured_at.is_none()),
        sea: Some(sea),
        measured_at,
        ..Measured::default()
    };
    for (key, value) in named.rest() {
        measured.amounts.push(read_amount(key, value)?);
    }
    if measured.evidence.ph.is_some() {
        notes.push(format!("pH is on the {} scale", ph_scale.word()));
    }
    note_litres(&measured, salinity, &mut notes);
    analysis::check_make_up(&measured)?;
    analysis::check_neutrality(&measured.evidence)?;
    Ok(Read { name, setting, measured, defaults, notes })
}

/// Density of the sample as its volumes were measured, 20 degC unless said otherwise, at the surface.
#[must_use]
pub fn solution(measured: &Measured, salinity: f64) -> Solution {
    let at = measured.volume_temperature.map_or(293.15, Temperature::kelvin);
    let density = measured.density.unwrap_or_else(|| seawater::density(at, salinity, 0.0) / 1000.0);
    Solution::seawater(density, salinity)
}

fn read_temperature(named: &mut Named, key: &'static str) -> Result<Option<Temperature>, KeyFault> {
    named.take(key).map(|value| reaction::temperature(key, value)).transpose()
}

/// Practical salinity, and what it was stated as where that came with an uncertainty.
fn read_salinity(named: &mut Named, notes: &mut Vec<String>) -> Result<(f64, Option<Quantity>), KeyFault> {
    let given = named.take("salinity").ok_or_else(|| {
        KeyFault::new(
            "salinity",
            "a seawater needs its `salinity`, such as 35 (practical) or \"35.2 g/kg\" (absolute)",
        )
    })?;
    let stated = match &given {
        Value::Text(text) => Quantity::parse(text, Kind::Salinity, "salinity").ok(),
        Value::Quantity(quantity) => Some(quantity.clone()),
        _ => None,
    };
    let is_uncertain = |stated: &Quantity| stated.sigma().is_some_and(|sigma| sigma > 0.0);
    let absolute = stated.as_ref().filter(|given| given.unit().symbol() != "PSU").and_then(|given| {
        ["g/kg", "g/kg(solution)"].iter().find_map(|unit| given.to(&Unit::known(unit)).ok())
    });
    let Some(absolute) = absolute else {
        return Ok((reaction::salinity("salinity", given)?, stated.filter(is_uncertain)));
    };
    let per_absolute = 1.0 / seawater::REFERENCE_SALINITY_PER_SALINITY;
    let practical = absolute.value() * per_absolute;
    notes.push(format!(
        "absolute salinity {} g/kg as practical salinity {practical:.4}, of the reference composition",
        absolute.value()
    ));
    let stated = Quantity::from_partials(practical, Unit::known("PSU"), &[(&absolute, per_absolute)]);
    let stated = stated.map_err(|error| KeyFault::new("salinity", error.to_string()))?;
    Ok((reaction::salinity("salinity", Value::Number(practical))?, Some(stated).filter(is_uncertain)))
}

/// A depth becomes the pressure there.
fn read_depth(named: &mut Named, notes: &mut Vec<String>) -> Result<(), KeyFault> {
    let latitude = named.number("latitude")?;
    if latitude.is_some_and(|latitude| !(-90.0..=90.0).contains(&latitude)) {
        return Err(KeyFault::new("latitude", "`latitude` is in degrees, -90 to 90"));
    }
    let Some(depth) = named.quantity("depth", Kind::Length)? else { return Ok(()) };
    let depth =
        depth.to(&Unit::known("m")).map_err(|error| KeyFault::new("depth", error.to_string()))?.value();
    if !(0.0..=11_000.0).contains(&depth) {
        return Err(KeyFault::new("depth", format!("`depth` is {depth} m, and the ocean has 0 to 11000 m")));
    }
    if let Some(pressure) = named.take("pressure") {
        *named = with(std::mem::take(named), "pressure", pressure);
        return Ok(());
    }
    let at = latitude.unwrap_or(COMMON_LATITUDE);
    let pressure = seawater::pressure_at_depth(depth, at);
    notes.push(format!("depth {depth} m at latitude {at} as a pressure of {pressure:.1} dbar"));
    *named = with(std::mem::take(named), "pressure", Value::Text(format!("{pressure} dbar")));
    Ok(())
}

fn with(mut named: Named, key: &str, value: Value) -> Named {
    let mut entries = named.rest();
    entries.insert(key.into(), value);
    Named::new(entries)
}

fn read_scale(named: &mut Named) -> Result<PhScale, KeyFault> {
    let words = ["total", "seawater", "free", "nbs"];
    match named.text("ph_scale")? {
        None => Ok(PhScale::Total),
        Some(word) => PhScale::parse(&word).filter(|_| words.contains(&word.as_str())).ok_or_else(|| {
            let help =
                nearest(&word, words).map(|close| format!("; did you mean `{close}`?")).unwrap_or_default();
            let message =
                format!("`{word}` is no scale of pH in seawater: the scales are {}{help}", list(&words));
            KeyFault::new("ph_scale", message)
        }),
    }
}

/// The temperature of the laboratory in which pH, a fugacity or both were measured; what is measured with them, carbon and
/// alkalinity, does not change with temperature.
fn measured_at(
    ph: Option<Temperature>,
    co2: Option<Temperature>,
    evidence: &Evidence,
) -> Result<Option<Temperature>, KeyFault> {
    let fault = |key: &str, message: &str| Err(KeyFault::new(key, message));
    match (ph, co2) {
        (Some(_), _) if evidence.ph.is_none() => {
            fault("pH_temperature", "`pH_temperature` is that of a measured `pH`: give that too")
        }
        (_, Some(_)) if evidence.co2.is_none() => fault(
            "fCO2_temperature",
            "`fCO2_temperature` is that of a measured `fCO2`, `pCO2` or `xCO2`: give that too",
        ),
        (Some(ph), Some(co2)) if ph == co2 => Ok(Some(ph)),
        (Some(_), _) if evidence.co2.is_some() => fault(
            "pH_temperature",
            "a pH and a fugacity measured at different temperatures do not belong to one equilibrium: give both at one \
             (`pH_temperature` with the same `fCO2_temperature`), or either with `DIC` or `alkalinity`, which do not \
             change with temperature",
        ),
        (_, Some(_)) if evidence.ph.is_some() => fault(
            "fCO2_temperature",
            "a fugacity and a pH measured at different temperatures do not belong to one equilibrium: give both at one \
             (`fCO2_temperature` with the same `pH_temperature`), or either with `DIC` or `alkalinity`",
        ),
        (ph, co2) => Ok(ph.or(co2)),
    }
}

/// A bare `/kg` is a kilogram of solution.
fn in_solution(entries: BTreeMap<String, Value>) -> Result<BTreeMap<String, Value>, KeyFault> {
    let kind_of = |key: &str| match key {
        "alkalinity" => Some(Kind::Alkalinity),
        "pH" | "from" | "fCO2" | "pCO2" | "xCO2" | "labels" => None,
        _ => Some(Kind::Amount),
    };
    let mut read = BTreeMap::new();
    for (key, value) in entries {
        let number = matches!(value, Value::Number(_) | Value::Text(_) | Value::Quantity(_));
        let value = match kind_of(&key).filter(|_| number) {
            Some(kind) => {
                if let Value::Number(number) = value
                    && number.abs() > 1.0
                {
                    let message = format!("`{key}`: {number} mol/kg? write \"{number} umol/kg\"");
                    return Err(KeyFault::new(key, message));
                }
                if let Ok(given) = crate::named::quantity(&key, value.clone(), kind) {
                    let unit = given.unit().per_kg_of(KgOf::Solution);
                    let relabelled = Quantity::from_partials(given.value(), unit, &[(&given, 1.0)]);
                    Value::Quantity(
                        relabelled.map_err(|error| KeyFault::new(key.clone(), error.to_string()))?,
                    )
                } else {
                    value
                }
            }
            None => value,
        };
        read.insert(key, value);
    }
    Ok(read)
}

/// The fugacity of CO2, bar, where it was given as partial pressure or as mole fraction in dry air.
fn with_fugacity(
    named: &mut Named,
    temperature: Temperature,
    salinity: f64,
    air: Pressure,
) -> Result<Option<Quantity>, KeyFault> {
    let t = temperature.kelvin();
    let factor = gas_exchange::fugacity_factor(t, air.bar());
    let mut given: Vec<(&str, Quantity, f64)> = Vec::new();
    let dry = air.bar() - gas_exchange::vapour_pressure(t, salinity);
    for (key, kind, per_unit) in [
        ("fCO2", Kind::Pressure, 1.0),
        ("pCO2", Kind::Pressure, factor),
        ("xCO2", Kind::Fraction, factor * dry),
    ] {
        if let Some(quantity) = named.quantity(key, kind)? {
            let own = if kind == Kind::Pressure { "bar" } else { "1" };
            let plain =
                quantity.to(&Unit::known(own)).map_err(|error| KeyFault::new(key, error.to_string()))?;
            given.push((key, plain, per_unit));
        }
    }
    if let [(one, ..), (two, ..), ..] = given.as_slice() {
        return Err(KeyFault::new(*two, format!("`{one}` and `{two}` state the same CO2: keep one")));
    }
    let Some((key, given, per_unit)) = given.pop() else { return Ok(None) };
    if given.value() <= 0.0 {
        return Err(KeyFault::new(key, format!("`{key}` must be above zero")));
    }
    let fugacity =
        Quantity::from_partials(given.value() * per_unit, Unit::known("bar"), &[(&given, per_unit)]);
    fugacity.map(Some).map_err(|error| KeyFault::new(key, error.to_string()))
}

fn read_amount(key: String, value: Value) -> Result<analysis::Given, KeyFault> {
    match NUTRIENTS.iter().find(|(name, _)| *name == key) {
        Some((_, analyte)) => analysis::read_amount_of(analyte, &key, value),
        None => analysis::read_amount(key, value, &KEYS),
    }
}

/// An amount per litre needs a density: the one used is said.
fn note_litres(measured: &Measured, salinity: f64, notes: &mut Vec<String>) {
    use super::concentration::Per;
    let amounts = measured.amounts.iter().map(|(_, key, amount)| (key.as_str(), amount));
    let alkalinity = measured.evidence.alkalinity.iter().map(|amount| ("alkalinity", amount));
    let dic = measured.evidence.dic.iter().map(|amount| ("DIC", amount));
    let per_litre = amounts.chain(alkalinity).chain(dic).filter(|(_, amount)| amount.per == Per::Litre);
    let keys: Vec<&str> = per_litre.map(|(key, _)| key).collect();
    if !keys.is_empty() && measured.density.is_none() {
        let at = measured.volume_temperature.map_or(20.0, Temperature::celsius);
        let density = solution(measured, salinity).density;
        notes.push(format!(
            "{} per litre by a density of {density:.5} kg/L, of this salinity at {at:.1} degC: give `density` or \
             `volume_temperature` if the laboratory's was another",
            list(&keys)
        ));
    }
}
