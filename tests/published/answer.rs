//! What the engine says to each kind of check.

use std::collections::BTreeMap;

use lysocline_engine::activity::Composition;
use lysocline_engine::chem::{Equation, GasStandard, LogK, Rational, Reaction, Species, rational};
use lysocline_engine::equilibrium::{State, activity as equations, equilibrate};
use lysocline_engine::ledger::{ActivityChoice, Ledger, file, shipped};
use lysocline_engine::named::{Named, Value};
use lysocline_engine::physics::{constants, water};
use lysocline_engine::solve::Settings;
use lysocline_engine::units::{Pressure, Temperature, Unit};
use lysocline_engine::water::{Sample, Treatment};

use super::check::{Case, Check, Entry, File, Kind};

/// What the engine answers to every expected value of a case, in their order.
pub fn answers(file: &File, check: &Check, case: &Case) -> Result<Vec<f64>, String> {
    let mut given = Given { values: &case.given, used: vec![] };
    let answer = answer(file, check, &mut given)?;
    given.all_used()?;
    case.expected.iter().map(|expected| answer(&expected.column)).collect()
}

type Answer = Box<dyn Fn(&str) -> Result<f64, String>>;

fn answer(file: &File, check: &Check, given: &mut Given) -> Result<Answer, String> {
    match check.kind {
        Kind::LogK => {
            let t = given.temperature()?;
            only("log_k", log_k_on_both_routes(&ledger(file, check)?, check, t)?)
        }
        Kind::Enthalpy => {
            let t = given.temperature()?;
            only("enthalpy [kJ/mol]", enthalpy(&derived(&ledger(file, check)?, check)?, t)?)
        }
        Kind::LogKConstantEnthalpy => {
            let (t, at) = (given.temperature()?, celsius(25.0)?);
            let reaction = derived(&ledger(file, check)?, check)?;
            let log_k = LogK::van_t_hoff(log_k(&reaction, at)?, at, enthalpy(&reaction, at)?, 0.0);
            only("log_k", log_k.at(t).map_err(text)?)
        }
        Kind::Sigma => {
            let t = given.temperature()?;
            let log_k = derived(&ledger(file, check)?, check)?.log_k_at(t).map_err(text)?;
            only("sigma", log_k.sigma().ok_or("no uncertainty is stated")?)
        }
        Kind::ConditionalLogK => {
            only("log_k", conditional_log_k(check, given.take("ionic_strength [mol/kg]")?)?)
        }
        Kind::ActivityCoefficient => {
            let (choice, ionic_strength) = (chosen(check)?, given.take("ionic_strength [mol/kg]")?);
            Ok(Box::new(move |column| {
                let ion = column.strip_prefix("gamma(").and_then(|rest| rest.strip_suffix(')'));
                let ion = ion.ok_or_else(|| unknown(column))?;
                // An ion, or a charge by itself.
                let (ions, charge) = match ion.parse() {
                    Ok(charge) => (vec![], charge),
                    Err(_) => {
                        let ion = Species::parse(ion).map_err(text)?;
                        (vec![ion.clone()], f64::from(ion.charge()))
                    }
                };
                let ions: Vec<&Species> = ions.iter().collect();
                let model = equations::model(&choice, &ions, Temperature::REFERENCE, Pressure::ATMOSPHERE);
                Ok(model.ln_gamma(0, charge, ionic_strength).exp())
            }))
        }
        Kind::MeanActivityCoefficient => {
            only("gamma", mean_activity_coefficient(check, given.take("molality [mol/kg]")?)?)
        }
        Kind::Molality => only("molality [mol/kg]", molality(check, given)?),
        Kind::Water => {
            let t = given.temperature()?.kelvin();
            Ok(Box::new(move |column| pure_water(t, column)))
        }
        Kind::Electron => electron(given),
        Kind::MarineConstant => {
            let (t, salinity) = (given.temperature()?, given.take("salinity")?);
            let there = shipped_constant(check)?.at_salinity(salinity).map_err(text)?;
            let log_k = log_k(&there, t)?;
            Ok(Box::new(move |column| match column {
                "log_k" => Ok(log_k),
                "pk" => Ok(-log_k),
                "ln_k" => Ok(log_k * constants::LN_10),
                "k" => Ok(10_f64.powf(log_k)),
                other => Err(unknown(other)),
            }))
        }
        Kind::PressureFactor => {
            let (t, p) = (given.temperature()?, given.take("hydrostatic pressure [bar]")?);
            let constant = shipped_constant(check)?.constant().map_err(text)?.clone();
            only("factor", constant.volume.ok_or("no volume of reaction")?.ln_factor(p, t).exp())
        }
        Kind::State => {
            let state = state(file, check, given)?;
            Ok(Box::new(move |column| observe(&state, column)))
        }
    }
}

/// The inputs of a case; one that no calculation takes is a fault of the check.
struct Given<'a> {
    values: &'a BTreeMap<String, f64>,
    used: Vec<String>,
}

impl Given<'_> {
    fn find(&mut self, column: &str) -> Option<f64> {
        self.used.push(column.into());
        self.values.get(column).copied()
    }

    fn take(&mut self, column: &str) -> Result<f64, String> {
        self.find(column).ok_or_else(|| format!("`{column}` is not given"))
    }

    fn temperature(&mut self) -> Result<Temperature, String> {
        celsius(self.take("temperature [degC]")?)
    }

    fn all_used(&self) -> Result<(), String> {
        match self.values.keys().find(|column| !self.used.contains(column)) {
            Some(column) => Err(format!("`{column}` is given, and nothing takes it")),
            None => Ok(()),
        }
    }
}

/// The ledger the rows were calculated with.
fn ledger(file: &File, check: &Check) -> Result<Ledger, String> {
    let mut ledger = match check.ledger.as_deref() {
        Some("this file") => own_ledger(file, check)?,
        Some(name) => shipped::ledger(name, None).map_err(text)?,
        None => return Err("no ledger is named".into()),
    };
    if let Some(kept) = &check.model.only {
        for name in kept {
            ledger.reaction(name).map_err(text)?;
        }
        let dropped: Vec<String> =
            ledger.names().filter(|name| !kept.iter().any(|own| own == name)).map(str::to_string).collect();
        ledger = without(ledger, &dropped)?;
    }
    ledger = without(ledger, check.model.without.as_deref().unwrap_or_default())?;
    for [name, author] in &check.choose {
        ledger = ledger.choose(name, author).map_err(text)?;
    }
    Ok(match activity(check)? {
        Some(activity) => ledger.with_activity(activity),
        None => ledger,
    })
}

/// A constant of a shipped file, as `file/name`.
fn shipped_constant(check: &Check) -> Result<Reaction, String> {
    let named = check.constant.as_deref().ok_or("no `constant` is named")?;
    let (key, name) = named.split_once('/').ok_or("a constant is named as `file/name`")?;
    let files = shipped::constant_files().map_err(|faults| faults.join("; "))?;
    let file = files.get(key).ok_or_else(|| format!("no file `{key}` is shipped"))?;
    let found = file.constants.iter().find(|(own, _)| own == name);
    found.map(|(_, reaction)| reaction.clone()).ok_or_else(|| format!("`{key}` has no constant `{name}`"))
}

fn without(ledger: Ledger, names: &[String]) -> Result<Ledger, String> {
    names.iter().try_fold(ledger, |ledger, name| ledger.without(name).map_err(text))
}

/// A ledger of the `[[constant]]` entries of the file, with the ions its rows ask for that take part in no reaction.
fn own_ledger(file: &File, check: &Check) -> Result<Ledger, String> {
    let source = format!("[publication]\ncitation = \"{}\"\n{}", check.citation, file.text);
    let constants =
        file::read_constants(&file.name, &source).map_err(|faults| format!("{faults:?}"))?.constants;
    let mut ledger = Ledger::empty(&file.name, None);
    for (name, reaction) in &constants {
        ledger = ledger.with_reaction(name, reaction).map_err(text)?;
    }
    let asked = check.rows.iter().filter_map(|row| match row.first() {
        Some(Entry::Text(column)) => column.strip_prefix("m(")?.split_once(") [").map(|(species, _)| species),
        _ => None,
    });
    for species in asked {
        if ledger.find_species(species).is_err() {
            ledger = ledger.with_solute(Species::parse(species).map_err(text)?);
        }
    }
    Ok(ledger)
}

/// The activity model the rows were calculated with; `None`: the ledger's own.
fn activity(check: &Check) -> Result<Option<ActivityChoice>, String> {
    let model = &check.model;
    if model.neutral_gamma.is_some_and(|gamma| gamma != 1.0) {
        return Err("uncharged species have an activity coefficient of 1".into());
    }
    if model.gas.as_deref().is_some_and(|gas| gas != "ideal, activity = partial pressure in atm") {
        return Err("gases are ideal".into());
    }
    match model.activity_model.as_deref() {
        None => Ok(None),
        Some("ideal") => Ok(Some(ActivityChoice::Ideal)),
        Some("davies") => {
            let a = match &model.a {
                Some(Entry::Number(a)) => Some(*a),
                Some(Entry::Text(text)) if text == "of the temperature" => None,
                _ => return Err("`A` is a number or \"of the temperature\"".into()),
            };
            Ok(Some(ActivityChoice::Davies { a, b: model.b.ok_or("no `b`")?, water: model.water_activity }))
        }
        Some(name) => {
            let a = match &model.a {
                Some(Entry::Number(a)) => Some(*a),
                None => None,
                Some(Entry::Text(_)) => {
                    return Err("`A` is a number, or left to the properties of water".into());
                }
            };
            let options = numbers([("A", a), ("water_activity", model.water_activity)]);
            ActivityChoice::read(name, options).map(Some).map_err(text)
        }
    }
}

/// The activity model of a check that names one.
fn chosen(check: &Check) -> Result<ActivityChoice, String> {
    activity(check)?.ok_or_else(|| "no `activity_model`".into())
}

fn reaction_of(check: &Check) -> Result<&str, String> {
    check.reaction.as_deref().ok_or_else(|| "no `reaction`".into())
}

/// Gases counted from the pressure the check counts them from.
fn in_standard(reaction: &Reaction, check: &Check) -> Result<Reaction, String> {
    let asked = check.gas_standard.as_deref().unwrap_or("1 bar");
    let standard = GasStandard::parse(asked).ok_or_else(|| format!("no gas standard `{asked}`"))?;
    reaction.to_gas_standard(standard).map_err(text)
}

/// The reaction as a search of the ledger finds it; where the check knows the recipe, the search has to find that one.
fn derived(ledger: &Ledger, check: &Check) -> Result<Reaction, String> {
    let derived = ledger.derive(reaction_of(check)?).map_err(text)?;
    if let Some(recipe) = &check.recipe {
        let uses = derived.constant().map_err(text)?.history.uses();
        let found: BTreeMap<&str, Rational> =
            uses.iter().map(|(origin, n)| (origin.label.as_str(), *n)).collect();
        let wanted: BTreeMap<&str, Rational> =
            recipe.iter().map(|(name, n)| (name.as_str(), (*n).into())).collect();
        if found != wanted {
            return Err(format!("the search found {found:?}, the recipe is {wanted:?}"));
        }
    }
    in_standard(&derived, check)
}

/// The sum of constants that the recipe spells out.
fn summed(ledger: &Ledger, recipe: &BTreeMap<String, i64>, check: &Check) -> Result<Reaction, String> {
    let mut sum: Option<Reaction> = None;
    for (name, multiple) in recipe {
        let term = ledger.reaction(name).map_err(text)?.times((*multiple).into()).map_err(text)?;
        sum = Some(match sum {
            None => term,
            Some(sum) => sum.plus(&term).map_err(text)?,
        });
    }
    let sum = sum.ok_or("an empty recipe")?;
    let target = Equation::parse(reaction_of(check)?).map_err(text)?;
    let same = sum.equation().terms().iter().all(|(species, n)| target.coefficient(species) == *n);
    if !same || sum.equation().terms().len() != target.terms().len() {
        return Err(format!("the recipe adds up to `{}`", sum.equation()));
    }
    in_standard(&sum, check)
}

/// By a search of the ledger, and by the recipe where there is one: the two agree to rounding.
fn log_k_on_both_routes(ledger: &Ledger, check: &Check, t: Temperature) -> Result<f64, String> {
    let found = log_k(&derived(ledger, check)?, t)?;
    if let Some(recipe) = &check.recipe {
        let spelt_out = log_k(&summed(ledger, recipe, check)?, t)?;
        if (spelt_out - found).abs() > 1e-12 * found.abs().max(1.0) {
            return Err(format!("the search gives {found}, the recipe {spelt_out}"));
        }
    }
    Ok(found)
}

fn log_k(reaction: &Reaction, t: Temperature) -> Result<f64, String> {
    Ok(reaction.log_k_at(t).map_err(text)?.value())
}

fn enthalpy(reaction: &Reaction, t: Temperature) -> Result<f64, String> {
    reaction.constant().map_err(text)?.log_k.enthalpy(t).ok_or_else(|| "no enthalpy is known".into())
}

/// log10 K of molalities at an ionic strength: the constant at I = 0, converted.
fn conditional_log_k(check: &Check, ionic_strength: f64) -> Result<f64, String> {
    if check.model.water_activity != Some(1.0) {
        return Err("the activity of water is held at 1 here".into());
    }
    let log_k = check.model.log_k.ok_or("no `model.log_k`")?;
    converted(check, log_k, ionic_strength)?.log_k().map(|log_k| log_k.value()).map_err(text)
}

/// A constant of the check's reaction at I = 0, taken to an ionic strength by the check's model.
fn converted(check: &Check, log_k: f64, ionic_strength: f64) -> Result<Reaction, String> {
    let reaction = Reaction::read(reaction_of(check)?, None, numbers([("log_k", Some(log_k))]), None);
    let model = &check.model;
    let a = model.a.as_ref().map(Entry::number).transpose()?;
    let mut options = vec![("A", a), ("b", model.b), ("delta_epsilon", model.delta_epsilon)];
    options.retain(|(_, value)| value.is_some());
    let mut options: BTreeMap<String, Value> =
        options.into_iter().filter_map(|(key, value)| Some((key.into(), Value::Number(value?)))).collect();
    options.insert("beyond_range".into(), Value::Flag(true));
    let name = model.activity_model.as_deref().ok_or("no `activity_model`")?;
    reaction.map_err(text)?.to_ionic_strength(ionic_strength, name, Named::new(options)).map_err(text)
}

fn numbers<const N: usize>(options: [(&str, Option<f64>); N]) -> Named {
    let entries = options.into_iter().filter_map(|(key, value)| Some((key.into(), Value::Number(value?))));
    Named::new(entries.collect())
}

/// Mean activity coefficient of a salt: from the parameters of its ions, or from `delta_epsilon`: K of its dissolution in
/// molalities is K of activities over the product of its coefficients.
fn mean_activity_coefficient(check: &Check, molality: f64) -> Result<f64, String> {
    let dissolution = Equation::parse(reaction_of(check)?).map_err(text)?;
    let ions = || dissolution.terms().iter().filter(|(species, _)| species.is_solute());
    let sum = |of: &dyn Fn(&Species) -> f64| -> f64 {
        ions().map(|(species, n)| rational::to_f64(*n) * of(species)).sum()
    };
    let ionic_strength = molality * sum(&|ion| f64::from(ion.charge()).powi(2)) / 2.0;
    if check.model.delta_epsilon.is_none() {
        let (ions, n): (Vec<&Species>, Vec<f64>) =
            ions().map(|(species, n)| (species, rational::to_f64(*n))).unzip();
        let model = equations::model(&chosen(check)?, &ions, Temperature::REFERENCE, Pressure::ATMOSPHERE);
        let charges: Vec<f64> = ions.iter().map(|ion| f64::from(ion.charge())).collect();
        let molalities: Vec<f64> = n.iter().map(|n| n * molality).collect();
        let at = Composition { charges: &charges, molalities: &molalities, ionic_strength };
        let sum_ln: f64 = model.ln_gammas(at).iter().zip(&n).map(|(ln_gamma, n)| n * ln_gamma).sum();
        return Ok((sum_ln / n.iter().sum::<f64>()).exp());
    }
    let log_k = converted(check, 0.0, ionic_strength)?.log_k().map_err(text)?.value();
    Ok(10_f64.powf(-log_k / sum(&|_| 1.0)))
}

/// mol/kg(water) of a salt solution that is its own medium.
fn molality(check: &Check, given: &mut Given) -> Result<f64, String> {
    let (molarity, density) = (given.take("molarity [mol/L]")?, given.take("density [kg/L]")?);
    let salt = check.model.salt.as_deref().ok_or("no `model.salt`")?;
    let stated = [("log_k", "0"), ("medium", &format!("{molarity} mol/L {salt}")), ("basis", "molar")];
    let stated = stated.map(|(key, value)| (key.to_string(), Value::Text(value.into())));
    let reaction = Reaction::read("H2O <=> H^+ + OH^-", None, Named::new(stated.into()), None);
    let molal = reaction.and_then(|reaction| reaction.to_molal(numbers([("density", Some(density))])));
    let molal = molal.map_err(text)?;
    let medium = &molal.constant().map_err(text)?.conditions.medium;
    medium.ionic_strength().ok_or_else(|| "no ionic strength".into())
}

fn pure_water(t: f64, column: &str) -> Result<f64, String> {
    let density = water::density(t);
    let permittivity = water::relative_permittivity(t, density);
    let a = water::debye_huckel_a(t, density, permittivity);
    match column {
        "density [kg/m3]" => Ok(density),
        "permittivity" => Ok(permittivity),
        "A_gamma [kg^0.5/mol^0.5]" => Ok(a),
        "A_phi [kg^0.5/mol^0.5]" => Ok(a * constants::LN_10 / 3.0),
        "B_gamma [kg^0.5/(mol^0.5 angstrom)]" => Ok(water::debye_huckel_b(t, density, permittivity) * 1e-10),
        other => Err(unknown(other)),
    }
}

/// pe = Eh F/(ln(10) R T), from the engine's constants.
fn electron(given: &mut Given) -> Result<Answer, String> {
    let t = given.temperature()?.kelvin();
    let slope = constants::LN_10 * constants::GAS_CONSTANT * t / constants::FARADAY;
    match given.find("Eh [V]") {
        None => only("slope [V]", slope),
        Some(potential) => only("pe", potential / slope),
    }
}

/// The equilibrium of the sample after the steps.
fn state(file: &File, check: &Check, given: &mut Given) -> Result<State, String> {
    let ledger = ledger(file, check)?;
    let equilibrium =
        |sample: &Sample| equilibrate(sample, Some(&ledger), &Settings::default()).map_err(text);
    let entries = entries(check, given)?;
    let read = if entries.contains_key("salinity") { Sample::read_seawater } else { Sample::read };
    let mut sample = read(entries).map_err(text)?;
    for step in &check.steps {
        let words: Vec<&str> = step.iter().map(String::as_str).collect();
        sample = match words.as_slice() {
            ["open_to", gas, column] => {
                let fugacity = in_bar(column, given.take(column)?)?;
                sample.treated(Treatment::OpenTo { gas: (*gas).into(), fugacity }).map_err(text)?
            }
            ["saturate", solid] => {
                sample.treated(Treatment::Saturate { solid: (*solid).into(), index: 0.0 }).map_err(text)?
            }
            ["hold_ph", column, reagent] => {
                let reagent = Some((*reagent).into());
                sample.treated(Treatment::HoldPh { ph: given.take(column)?, reagent }).map_err(text)?
            }
            ["close"] => equilibrium(&sample)?.sample(&[]).map_err(text)?,
            other => return Err(format!("no step {other:?}")),
        };
    }
    equilibrium(&sample)
}

/// The keys of the sample, with columns of the row in place; a temperature that is given counts.
fn entries(check: &Check, given: &mut Given) -> Result<BTreeMap<String, Value>, String> {
    let mut entries = BTreeMap::new();
    for (key, entry) in &check.sample {
        let value = match entry {
            Entry::Number(number) => Value::Number(*number),
            Entry::Text(column) if check.given.contains(column) => {
                let value = given.take(column)?;
                match column.split_once(" [") {
                    Some((_, unit)) => Value::Text(format!("{value} {}", unit.trim_end_matches(']'))),
                    None => Value::Number(value),
                }
            }
            Entry::Text(text) => Value::Text(text.clone()),
        };
        entries.insert(key.clone(), value);
    }
    if let Some(temperature) = given.find("temperature [degC]") {
        entries.insert("temperature".into(), Value::Text(format!("{temperature} degC")));
    }
    Ok(entries)
}

/// A column such as `log10 f(CO2(g)) [atm]` in bar; `first` tells columns of one name apart.
fn in_bar(column: &str, value: f64) -> Result<f64, String> {
    let (name, unit) =
        column.strip_suffix(']').and_then(|column| column.split_once(" [")).ok_or_else(|| unknown(column))?;
    let name = name.strip_prefix("first ").unwrap_or(name);
    let value = if name.starts_with("log10 f(") { 10_f64.powf(value) } else { value };
    let (unit, bar) = (Unit::parse(unit).map_err(text)?, Unit::parse("bar").map_err(text)?);
    unit.convert(value, &bar).map_err(text)
}

fn observe(state: &State, column: &str) -> Result<f64, String> {
    let (log, observable) = match column.strip_prefix("log10 ") {
        Some(observable) => (true, observable),
        None => (false, column),
    };
    // Totals per litre of solution have a name of their own in the files.
    let observable = observable.strip_prefix("c_").unwrap_or(observable);
    let value = state.get(observable).map_err(text)?.value();
    Ok(if log { value.log10() } else { value })
}

/// A calculation with one answer.
fn only(column: &'static str, value: f64) -> Result<Answer, String> {
    Ok(Box::new(move |asked| if asked == column { Ok(value) } else { Err(unknown(asked)) }))
}

fn unknown(column: &str) -> String {
    format!("nothing answers to the column `{column}`")
}

fn celsius(t: f64) -> Result<Temperature, String> {
    Temperature::from_celsius(t).map_err(text)
}

fn text(error: impl ToString) -> String {
    error.to_string()
}
