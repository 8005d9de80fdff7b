//! What was measured of the redox state, and which couples are taken to be in equilibrium.

use crate::named::{KeyFault, Named, Value};
use crate::nearest::nearest;
use crate::physics::electrode::{ELECTRODE_RANGE, ELECTRODES, volts_per_pe};
use crate::quantity::Quantity;
use crate::text::list;
use crate::units::{Kind, Temperature, Unit};

/// pe beyond which a value is taken for a slip: twice the span in which water is stable.
pub const PE_RANGE: (f64, f64) = (-20.0, 30.0);
/// pe and Eh given together may differ by so much: the digits people round to.
const SAME_PE: f64 = 0.05;

/// What is known of the redox state.
#[derive(Debug, Clone, Default)]
pub struct Redox {
    /// What fixes pe.
    pub potential: Option<Potential>,
    /// Couples in equilibrium beside those that a pe splits.
    pub couples: Couples,
}

/// What fixes pe.
#[derive(Debug, Clone)]
pub enum Potential {
    /// -log10 a(e⁻), or the potential it follows from.
    Measured(Electron),
    /// A couple whose oxidation states were both measured.
    Couple(String),
}

/// A measured activity of the electron.
#[derive(Debug, Clone)]
pub struct Electron {
    /// The key it was given under.
    pub key: &'static str,
    /// -log10 of the activity.
    pub pe: f64,
    /// The measured value, with the derivative of pe by it.
    pub value: (Quantity, f64),
    /// Change of pe per kelvin, at the same potential.
    pub per_kelvin: f64,
}

/// Which couples are in equilibrium.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub enum Couples {
    /// None but those that a pe splits.
    #[default]
    None,
    /// Those named.
    Named(Vec<String>),
    /// All that the ledger knows.
    All,
}

impl Electron {
    /// Takes another value of what was measured, as a random draw does.
    pub(super) fn change(&mut self, change: &mut dyn FnMut(&Quantity) -> Quantity) {
        let (value, slope) = &self.value;
        let changed = change(value);
        self.pe += slope * (changed.value() - value.value());
        self.value = (changed, *slope);
    }
}

impl Redox {
    /// Whether pe and couples were both left open: then nothing of it concerns electrons.
    #[must_use]
    pub fn is_silent(&self) -> bool {
        self.potential.is_none() && self.couples == Couples::None
    }
}

/// Reads `pe`, `Eh`, `ORP`, `electrode` and `couples`; potentials hold at the water's temperature.
///
/// # Errors
///
/// The first fault with its key.
pub(super) fn read(named: &mut Named, temperature: Temperature) -> Result<Redox, KeyFault> {
    let slope = volts_per_pe(temperature.kelvin());
    let given = [read_pe(named)?, read_eh(named, temperature)?, read_orp(named, temperature)?];
    let mut given = given.into_iter().flatten();
    let potential = given.next();
    for other in given {
        check_same(potential.as_ref().expect("there is a first"), &other, slope)?;
    }
    Ok(Redox { potential, couples: read_couples(named)? })
}

fn read_pe(named: &mut Named) -> Result<Option<Potential>, KeyFault> {
    let Some(value) = named.take("pe") else { return Ok(None) };
    if let Value::Text(text) = &value
        && text.trim().starts_with(|c: char| c.is_ascii_alphabetic())
    {
        return match text.contains('/') {
            true => Ok(Some(Potential::Couple(text.trim().into()))),
            false => Err(KeyFault::new(
                "pe",
                format!("`pe` takes a number or a couple such as \"Fe(III)/Fe(II)\", not \"{text}\""),
            )),
        };
    }
    let pe = crate::named::quantity("pe", value, Kind::Fraction)?;
    let electron = Electron { key: "pe", pe: pe.value(), value: (pe, 1.0), per_kelvin: 0.0 };
    checked(electron, "").map(Some)
}

fn read_eh(named: &mut Named, temperature: Temperature) -> Result<Option<Potential>, KeyFault> {
    let Some(eh) = potential(named, "Eh")? else { return Ok(None) };
    let electron = electron("Eh", eh, 0.0, 0.0, temperature.kelvin());
    checked(electron, " (a bare number is in volt)").map(Some)
}

fn read_orp(named: &mut Named, temperature: Temperature) -> Result<Option<Potential>, KeyFault> {
    let (orp, electrode) = (potential(named, "ORP")?, named.take("electrode"));
    match (orp, electrode) {
        (None, None) => Ok(None),
        (None, Some(_)) => Err(KeyFault::new(
            "electrode",
            "`electrode` belongs to `ORP`, which was not given; `Eh` counts from the hydrogen electrode already",
        )),
        (Some(_), None) => Err(KeyFault::new(
            "ORP",
            format!(
                "`ORP` needs the reference electrode it was read against: give `electrode`, one of {}, or its potential \
                 against the hydrogen electrode, \"0.21 V\"; a value against that electrode itself is `Eh`",
                list(&ELECTRODES.map(|own| own.name))
            ),
        )),
        (Some(orp), Some(electrode)) => {
            let (reference, per_kelvin) = reference(electrode, temperature)?;
            let electron = electron("ORP", orp, reference, per_kelvin, temperature.kelvin());
            checked(electron, " (a bare number is in volt)").map(Some)
        }
    }
}

/// A potential in volt.
fn potential(named: &mut Named, key: &str) -> Result<Option<Quantity>, KeyFault> {
    let Some(given) = named.quantity(key, Kind::Potential)? else { return Ok(None) };
    let volt = Unit::parse("V").expect("a known unit");
    given.to(&volt).map(Some).map_err(|error| KeyFault::new(key, error.to_string()))
}

/// A potential read against a reference, as pe.
fn electron(key: &'static str, read: Quantity, reference: f64, per_kelvin: f64, kelvin: f64) -> Electron {
    let slope = volts_per_pe(kelvin);
    let pe = (read.value() + reference) / slope;
    Electron { key, pe, value: (read, 1.0 / slope), per_kelvin: per_kelvin / slope - pe / kelvin }
}

/// Potential of a reference electrode, V, and its change per kelvin.
fn reference(electrode: Value, temperature: Temperature) -> Result<(f64, f64), KeyFault> {
    if let Value::Text(name) = &electrode
        && name.trim().starts_with(|c: char| c.is_ascii_alphabetic())
    {
        let Some(found) = ELECTRODES.iter().find(|own| own.name == name.trim()) else {
            let help = match nearest(name, ELECTRODES.map(|own| own.name)) {
                Some(near) => format!("did you mean \"{near}\"?"),
                None => format!(
                    "there are {}; another is given by its potential, \"0.21 V\"",
                    list(&ELECTRODES.map(|own| own.name))
                ),
            };
            return Err(KeyFault::new(
                "electrode",
                format!("`electrode`: no reference electrode \"{name}\"; {help}"),
            ));
        };
        let (low, high) = ELECTRODE_RANGE;
        let celsius = temperature.celsius();
        if !(low - 10.0..=high + 10.0).contains(&celsius) {
            let message = format!(
                "`electrode`: its potential is known from {low} to {high} degC, and the water has {celsius} degC: give it \
                 as a number, \"0.21 V\""
            );
            return Err(KeyFault::new("electrode", message));
        }
        return Ok((found.at(celsius), found.per_kelvin));
    }
    let given = crate::named::quantity("electrode", electrode, Kind::Potential)?;
    let volt = given.to(&Unit::parse("V").expect("a known unit"));
    let volt = volt.map_err(|error| KeyFault::new("electrode", error.to_string()))?.value();
    if volt.abs() > 1.0 {
        return Err(KeyFault::new(
            "electrode",
            format!("`electrode`: {volt} V against the hydrogen electrode? write \"210 mV\""),
        ));
    }
    Ok((volt, 0.0))
}

fn checked(electron: Electron, hint: &str) -> Result<Potential, KeyFault> {
    if (PE_RANGE.0..=PE_RANGE.1).contains(&electron.pe) {
        return Ok(Potential::Measured(electron));
    }
    let Electron { key, pe, .. } = electron;
    let message = format!(
        "`{key}` amounts to pe {pe:.4}, which lies outside {} to {}: water is stable from about -10 to 21{hint}",
        PE_RANGE.0, PE_RANGE.1
    );
    Err(KeyFault::new(key, message))
}

fn check_same(first: &Potential, other: &Potential, slope: f64) -> Result<(), KeyFault> {
    let told = |potential: &Potential| match potential {
        Potential::Measured(own) => format!("`{}` (pe {:.2}, Eh {:.3} V)", own.key, own.pe, own.pe * slope),
        Potential::Couple(couple) => format!("`pe` (from {couple})"),
    };
    match (first, other) {
        (Potential::Measured(a), Potential::Measured(b)) if (a.pe - b.pe).abs() <= SAME_PE => Ok(()),
        (_, Potential::Measured(b)) => Err(KeyFault::new(
            b.key,
            format!("{} and {} disagree: keep one of them", told(first), told(other)),
        )),
        _ => Err(KeyFault::new("pe", "`pe` is given twice")),
    }
}

fn read_couples(named: &mut Named) -> Result<Couples, KeyFault> {
    let names = named.texts("couples")?;
    Ok(match names {
        None => Couples::None,
        Some(names) if names == ["all"] => Couples::All,
        Some(names) if names == ["none"] => Couples::None,
        Some(names) => {
            if let Some(wrong) = names.iter().find(|name| !name.contains('/')) {
                let message = format!(
                    "`couples` takes \"all\" or a list such as [\"Fe(III)/Fe(II)\"]; \"{wrong}\" names no couple"
                );
                return Err(KeyFault::new("couples", message));
            }
            Couples::Named(names)
        }
    })
}

/// A temperature in degC as text with a unit, for tests.
#[cfg(test)]
fn celsius(text: &str) -> Temperature {
    crate::chem::reaction::temperature("temperature", Value::Text(text.into())).expect("a temperature")
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;
    use std::collections::BTreeMap;

    fn redox(entries: &[(&str, &str)], temperature: &str) -> Result<Redox, KeyFault> {
        let value = |text: &str| match text.parse() {
            Ok(number) => Value::Number(number),
            Err(_) => Value::Text(text.into()),
        };
        let entries: BTreeMap<String, Value> =
            entries.iter().map(|(key, text)| ((*key).to_string(), value(text))).collect();
        read(&mut Named::new(entries), celsius(temperature))
    }

    fn pe(entries: &[(&str, &str)], temperature: &str) -> f64 {
        match redox(entries, temperature).unwrap().potential.unwrap() {
            Potential::Measured(electron) => electron.pe,
            Potential::Couple(couple) => panic!("{couple}"),
        }
    }

    #[track_caller]
    fn refused(entries: &[(&str, &str)], key: &str, words: &str) {
        let fault = redox(entries, "25 degC").unwrap_err();
        assert_eq!(fault.key, key, "{fault}");
        assert!(fault.message.contains(words), "{fault}");
    }

    #[test]
    fn potentials_become_pe() {
        assert_abs_diff_eq!(pe(&[("Eh", "0.43")], "25 degC"), 7.2685, epsilon = 5e-5);
        assert_abs_diff_eq!(pe(&[("Eh", "300 mV")], "5 degC"), 5.4357, epsilon = 5e-5);
        let orp = [("ORP", "231 mV"), ("electrode", "Ag/AgCl saturated KCl")];
        assert_abs_diff_eq!(pe(&orp, "25 degC"), 7.2685, epsilon = 5e-5);
        let number = [("ORP", "0.22"), ("electrode", "0.21 V")];
        assert_abs_diff_eq!(pe(&number, "25 degC"), 7.2685, epsilon = 5e-5);
        // Both keys, rounded as people do.
        assert_abs_diff_eq!(pe(&[("pe", "7.27"), ("Eh", "0.43")], "25 degC"), 7.27, epsilon = 1e-12);
    }

    #[test]
    fn a_couple_is_told_from_a_number_with_its_uncertainty() {
        assert_eq!(pe(&[("pe", "4.0 +/- 0.1")], "25 degC"), 4.0);
        let couple = redox(&[("pe", "Fe(III)/Fe(II)")], "25 degC").unwrap().potential;
        assert!(matches!(couple, Some(Potential::Couple(name)) if name == "Fe(III)/Fe(II)"));
    }

    #[test]
    fn what_cannot_be_meant_is_refused() {
        refused(&[("pe", "4"), ("Eh", "0.43")], "Eh", "disagree");
        refused(&[("pe", "Fe(III)/Fe(II)"), ("Eh", "0.43")], "Eh", "from Fe(III)/Fe(II)");
        refused(&[("pe", "40")], "pe", "water is stable from about -10 to 21");
        refused(&[("Eh", "430")], "Eh", "a bare number is in volt");
        refused(&[("ORP", "0.2")], "ORP", "give `electrode`");
        refused(&[("electrode", "0.2")], "electrode", "belongs to `ORP`");
        refused(&[("ORP", "0.2"), ("electrode", "Ag/AgCl saturatd KCl")], "electrode", "did you mean");
        refused(&[("pe", "iron")], "pe", "a couple such as");
        refused(&[("couples", "iron")], "couples", "names no couple");
        refused(&[("pe", "4 mV")], "pe", "mV");
    }
}
