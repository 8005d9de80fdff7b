//! A ledger as text that [`super::file::load`] reads back.
//!
//! Every constant is written out, so that the file stands for itself; shipped formation data are named by their file, as
//! one value of theirs rests on several inputs. A constant that depends on several inputs keeps its standard uncertainty
//! and loses its correlation with others.

use std::collections::BTreeMap;
use std::fmt::Write;

use super::GasModel;
use super::composition::Constituent;
use super::formation::in_bar;
use super::influence;
use super::ledger::Ledger;
use super::shipped;
use crate::chem::{Constant, Provenance, Reaction};
use crate::quantity::Quantity;
use crate::units::{Temperature, Unit};

/// The ledger in the layout of ledger files.
#[must_use]
pub fn to_text(ledger: &Ledger) -> String {
    let basis =
        if ledger.is_marine() { "in mol/kg(solution) of seawater" } else { "molal, at zero ionic strength" };
    let mut text = format!("# A ledger of equilibrium constants: {basis}, gases counted from 1 bar.\n");
    head(&mut text, ledger);
    let mut named: BTreeMap<&str, Vec<String>> = BTreeMap::new();
    let mut own = Vec::new();
    for (name, reaction) in ledger.formation_data() {
        match shipped_formation(name, reaction) {
            Some((file, species)) => named.entry(file).or_default().push(species),
            None => own.push((name, reaction)),
        }
    }
    for (file, species) in &named {
        let _ = write!(text, "\n[[from]]\nfile = {}\nformations = {}\n", quoted(file), quoted_list(species));
    }
    for constituent in ledger.composition() {
        composition(&mut text, constituent);
    }
    for (name, reaction) in ledger.reactions() {
        entry(&mut text, name, reaction, false);
    }
    for (name, reaction) in own {
        entry(&mut text, name, reaction, true);
    }
    text
}

fn head(text: &mut String, ledger: &Ledger) {
    let _ = writeln!(text, "name = {}", quoted(ledger.name()));
    if let Some(edition) = ledger.edition() {
        let _ = writeln!(text, "edition = {}", quoted(edition));
    }
    if ledger.is_marine() {
        text.push_str("medium = \"seawater\"\n");
    }
    let _ = writeln!(text, "activity_model = {}", quoted(ledger.activity().name()));
    let options = ledger.activity().written(|species| ledger.find_species(species.key()).is_ok());
    if !options.is_empty() {
        let options: Vec<String> = options.iter().map(|(key, value)| format!("{key} = {value}")).collect();
        let _ = writeln!(text, "activity_options = {{ {} }}", options.join(", "));
    }
    if ledger.gas_model() != GasModel::default() {
        let _ = writeln!(text, "gas_model = {}", quoted(ledger.gas_model().name()));
    }
    let solutes: Vec<String> = ledger.solutes().map(|species| species.key().to_string()).collect();
    if !solutes.is_empty() {
        let _ = writeln!(text, "solutes = {}", quoted_list(&solutes));
    }
}

/// The file and species of formation data that are as shipped.
fn shipped_formation(name: &str, reaction: &Reaction) -> Option<(&'static str, String)> {
    let files = shipped::constant_files().ok()?;
    files.iter().find_map(|(key, file)| {
        let same = |(own, other): &&(String, Reaction)| {
            own == name && in_bar(other).is_ok_and(|other| other == *reaction)
        };
        file.formations.iter().find(same)?;
        let species =
            name.strip_prefix("formation of ")?.rsplit_once(", ").map_or(name, |(species, _)| species);
        Some((*key, species.to_string()))
    })
}

fn entry(text: &mut String, name: &str, reaction: &Reaction, is_formation: bool) {
    let Ok(constant) = reaction.constant() else { return };
    let _ = write!(
        text,
        "\n[[constant]]\nname = {}\nreaction = {}\n",
        quoted(name),
        quoted(&reaction.equation().to_string())
    );
    if is_formation {
        text.push_str("formation = true\n");
    }
    seawater(text, reaction, constant);
    value(text, constant);
    if let Some(range) = constant.log_k.range() {
        let ends = [temperature(range.lowest), temperature(range.highest)];
        let _ = writeln!(text, "range = {}", quoted_list(&ends));
    }
    let own = Quantity::from_parts(0.0, Unit::one(), constant.history.parts());
    if let Some(sigma) = own.sigma() {
        let _ = writeln!(text, "sigma = {sigma:?}");
    }
    if let Some(input) = only_input(constant) {
        let _ = writeln!(text, "input = {}", quoted(input));
    }
    text.push_str(&influence::written(constant.history.influences(), quoted));
    if let (Some(volume), None) = (&constant.volume, constant.conditions.medium.salinity()) {
        let volume = volume.quantity(constant.temperature);
        let _ = writeln!(text, "volume = {}", quoted(&exactly(&volume)));
    }
    origin(text, constant);
    let conversions = constant.history.conversions();
    if !conversions.is_empty() {
        let _ = writeln!(text, "history = {}", quoted_list(conversions));
    }
}

/// What goes with salinity.
fn composition(text: &mut String, constituent: &Constituent) {
    let _ = write!(
        text,
        "\n[[composition]]\nname = {}\nof = {}\nmol_per_salinity = {:?}\n",
        quoted(&constituent.name),
        quoted(&constituent.of),
        constituent.per_salinity
    );
    if let Some(sigma) = constituent.relative_sigma() {
        let _ = writeln!(text, "relative_sigma = {sigma:?}");
    }
    let _ = write!(
        text,
        "source = {}\nprovenance = {}\n",
        quoted(&constituent.source),
        quoted(&constituent.provenance.to_string())
    );
}

/// The conditions of a constant of seawater.
fn seawater(text: &mut String, reaction: &Reaction, constant: &Constant) {
    let Some(salinity) = constant.conditions.medium.salinity() else { return };
    text.push_str("medium = \"seawater\"\n");
    let _ = writeln!(text, "salinity = {salinity:?}");
    if reaction.terms().is_ok_and(|terms| terms.protons != 0.into()) {
        let _ = writeln!(text, "ph_scale = {}", quoted(constant.conditions.ph_scale.word()));
    }
    if let Some(range) = constant.log_k.salinities() {
        let _ = writeln!(text, "salinity_range = [{:?}, {:?}]", range.lowest, range.highest);
    }
    if let Some(volume) = &constant.volume {
        for (key, terms) in volume.written() {
            let terms: Vec<String> =
                terms.iter().map(|(term, value)| format!("{} = {value:?}", quoted(term))).collect();
            let _ = writeln!(text, "{key} = {{ {} }}", terms.join(", "));
        }
    }
}

fn value(text: &mut String, constant: &Constant) {
    match constant.log_k.terms() {
        Some(terms) => {
            let mut terms: Vec<String> = terms
                .iter()
                .map(|(term, value)| format!("{} = {value:?}", quoted(&term.written())))
                .collect();
            if terms.is_empty() {
                terms.push("\"1\" = 0.0".into());
            }
            let _ = writeln!(text, "log_k_terms = {{ {} }}", terms.join(", "));
        }
        None => {
            let _ = writeln!(text, "log_k = {:?}", constant.log_k.nearest_to(constant.temperature).0);
        }
    }
    if constant.temperature != Temperature::REFERENCE {
        let _ = writeln!(text, "temperature = {}", quoted(&temperature(constant.temperature)));
    }
}

fn origin(text: &mut String, constant: &Constant) {
    let uses = constant.history.uses();
    let mut sources: Vec<&str> =
        uses.iter().map(|(origin, _)| origin.source.as_deref().unwrap_or("not stated")).collect();
    sources.dedup();
    let provenance = match uses {
        [(origin, _)] => origin.provenance,
        _ => Provenance::Computed,
    };
    let _ = write!(
        text,
        "source = {}\nprovenance = {}\n",
        quoted(&sources.join("; ")),
        quoted(&provenance.to_string())
    );
}

/// The name of the one input behind a constant, by which it stays the same value as where it was published.
fn only_input(constant: &Constant) -> Option<&str> {
    let [(origin, multiple)] = constant.history.uses() else { return None };
    let [part] = origin.parts.as_slice() else { return None };
    if *multiple != 1.into() || part.sensitivity != 1.0 {
        return None;
    }
    part.input.name()
}

/// A quantity with every digit, as `Quantity::parse` reads it.
fn exactly(quantity: &Quantity) -> String {
    let sigma = quantity.sigma().map_or_else(String::new, |sigma| format!(" +/- {sigma:?}"));
    format!("{:?}{sigma} {}", quantity.value(), quantity.unit().symbol())
}

/// In degC where that reads back as the same temperature, else in kelvin.
fn temperature(temperature: Temperature) -> String {
    let celsius = temperature.celsius();
    let exact = Temperature::from_celsius(celsius).is_ok_and(|back| back == temperature);
    if exact { format!("{celsius} degC") } else { format!("{} K", temperature.kelvin()) }
}

fn quoted(text: &str) -> String {
    toml::Value::String(text.to_string()).to_string()
}

fn quoted_list(texts: &[String]) -> String {
    format!("[{}]", texts.iter().map(|text| quoted(text)).collect::<Vec<_>>().join(", "))
}
