//! Treatments in scripts that change what a water holds: reagents, evaporation, mixing, and reagents found for a target.

use rhai::plugin::*;
use rhai::{Array, Dynamic, FLOAT, Map};

use super::named::{named, number, one_or_many, value};
use super::reaction::plain;
use super::sample::{known, treated};
use super::{Fail, ScriptResult, Vocabulary, docs, fail};
use crate::chem::Species;
use crate::equilibrium::Asked;
use crate::named::Value;
use crate::quantity::Quantity;
use crate::units::{Kind, Unit};
use crate::water::concentration;
use crate::water::{Adjust, Dose, Sample, Treatment};

/// Registers the functions.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary.module(rhai::exported_module!(treatment_functions)).pure(&[
        "with_solid",
        "dose",
        "remove",
        "concentrate",
        "mix",
        "adjust",
    ]);
}

fn dose(verb: &str, reagent: &str, amount: &Dynamic) -> Result<Dose, Fail> {
    Dose::read(verb, reagent, value(amount)?).map_err(|message| {
        let at = usize::from(!message.contains("formula") && !message.contains("charge"));
        super::faults::advised(&message).argument(at)
    })
}

fn mixed(parts: &[(Sample, f64)]) -> ScriptResult<Sample> {
    Ok(Sample::mixed(parts).map_err(Fail::from)?)
}

/// `[[a, 0.7], [b, 0.3]]`.
fn parts(list: &Array) -> Result<Vec<(Sample, f64)>, Fail> {
    let wrong = |found: &Dynamic| {
        fail(format!("`mix` takes pairs of a water and its kilograms, not {}", docs::described(found)))
            .help("write `mix([[a, 0.7], [b, 0.3]])`")
            .argument(0)
    };
    let pair = |item: &Dynamic| {
        let pair = item.read_lock::<Array>().filter(|pair| pair.len() == 2).ok_or_else(|| wrong(item))?;
        let water = pair[0].clone().try_cast::<Sample>().ok_or_else(|| wrong(&pair[0]))?;
        let share = number(&pair[1]).ok_or_else(|| wrong(&pair[1]))?;
        Ok((water, share))
    };
    list.iter().map(pair).collect()
}

/// Targets in the order of their names; each keeps the unit it was given in.
fn targets(until: Option<Value>) -> Result<Vec<(String, Quantity)>, Fail> {
    let example = "write `until_is: #{ \"SI(calcite)\": 0.1 }`";
    let Some(Value::Map(map)) = until else {
        return Err(fail("`until_is` takes a map of observables and their targets")
            .help(example)
            .key("until_is"));
    };
    let target = |(name, given): (String, Value)| {
        let asked = Asked::parse(&name).map_err(|error| Fail::from(error).key(name.clone()))?;
        let unit = Unit::one();
        let target = match given {
            Value::Number(number) => Quantity::exact(number, unit),
            Value::Quantity(quantity) => quantity,
            Value::Text(text) => Quantity::parse_any(&text, &unit, &name)
                .map_err(|error| Fail::from(error).key(name.clone()))?,
            other => {
                let message =
                    format!("the target of `{name}` is a number or a quantity, not {}", other.kind());
                return Err(fail(message).help(example).key(name));
            }
        };
        let fits = asked.unit.is_none() || *target.unit() == Unit::one();
        if !fits {
            let message = format!("the unit of `{name}` is named twice: in its brackets and in its target");
            return Err(fail(message).key(name));
        }
        Ok((name, target))
    };
    map.into_iter().map(target).collect()
}

/// The least and the most of a reagent from `between: [a, b]`, or `between: #{ "NaOH": [a, b] }`.
fn bounds(between: Option<&Value>, reagent: &str) -> Result<Option<(Value, Value)>, String> {
    match between {
        None => Ok(None),
        Some(Value::List(ends)) if ends.len() == 2 => Ok(Some((ends[0].clone(), ends[1].clone()))),
        Some(Value::Map(by_reagent)) => bounds(by_reagent.get(reagent), reagent),
        Some(_) => Err("`between` takes the least and the most of a reagent: `[0, \"2 mmol/kg\"]`".into()),
    }
}

/// What is done to a water.
#[export_module]
mod treatment_functions {
    use super::*;

    /// So much of a solid is there with the water (mol/kg(water), or text with a unit); it dissolves or grows.
    ///
    /// ```rhai
    /// let water = sample(#{ pH: "electroneutral" }).with_solid("calcite", "1 umol/kg").equilibrate();
    /// water.amount("calcite").value   // 0
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn with_solid(sample: &mut Sample, solid: &str, amount: Dynamic) -> ScriptResult<Sample> {
        known(sample, solid)?;
        let given = crate::named::quantity(solid, value(&amount)?, Kind::Amount);
        let given = given.map_err(|fault| fail(fault.message).argument(1))?;
        // A mineral known by its name alone has no formula to weigh.
        let substance = Species::parse(solid).unwrap_or_else(|_| Species::water());
        let read = match sample
            .ledger()
            .map_or_else(|| crate::ledger::shipped::ledger("freshwater", None).ok(), |own| Some(own.clone()))
        {
            Some(ledger) => concentration::substance(ledger.find_phase(solid).unwrap_or(&substance), &given),
            None => concentration::substance(&substance, &given),
        };
        let amount = read.map_err(|message| fail(message).argument(1))?;
        if amount.moles.value() < 0.0 {
            return fail(format!("{} of `{solid}` is negative", amount.moles)).argument(1).raise();
        }
        treated(sample, Treatment::WithSolid { solid: solid.into(), amount })
    }

    /// So much of a reagent dissolves (mol/kg(water), or text with a unit): a neutral formula, or the equation of its
    /// dissolution. How much it was is `added(HCl)`. Acids and bases are dosed in practice by local codes and licensed
    /// judgement, with protection for eyes and skin.
    ///
    /// ```rhai
    /// let lake = sample(#{ pH: 8, alkalinity: "2 meq/kg", Ca: "1 mmol/kg" });
    /// fmt(lake.dose("HCl", "1 mmol/kg").equilibrate().alkalinity.value, ".4f")   // "0.0010"
    /// ```
    #[rhai_fn(name = "dose", pure, return_raw)]
    pub fn dose_reagent(sample: &mut Sample, reagent: &str, amount: Dynamic) -> ScriptResult<Sample> {
        treated(sample, Treatment::Dose(super::dose("dose", reagent, &amount)?))
    }
    /// So much of a substance is taken away: `removed(CO2(aq))`.
    ///
    /// ```rhai
    /// let spring = sample(#{ pH: 7, DIC: "5 mmol/kg", Ca: "2 mmol/kg" });
    /// spring.remove("CO2(aq)", "0.5 mmol/kg").equilibrate().pH > spring.equilibrate().pH   // true
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn remove(sample: &mut Sample, substance: &str, amount: Dynamic) -> ScriptResult<Sample> {
        treated(sample, Treatment::Remove(super::dose("remove", substance, &amount)?))
    }
    /// Water evaporates until the rest holds so many times as much; below 1, pure water is added. What would precipitate
    /// stays dissolved unless it is allowed to form.
    ///
    /// ```rhai
    /// let brine = sample(#{ pH: 7, Na: "10 mmol/kg", Cl: "10 mmol/kg" }).concentrate(10);
    /// fmt(brine.equilibrate().total("Cl").value, ".2f")   // "0.10"
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn concentrate(sample: &mut Sample, factor: Dynamic) -> ScriptResult<Sample> {
        let factor = plain("a factor", &factor)?;
        treated(sample, Treatment::Concentrate(factor))
    }

    /// A kilogram of water made of two: `mix(a, b, 0.3)` holds 0.3 kg of b and 0.7 kg of a. Its temperature is their mean
    /// by mass.
    ///
    /// ```rhai
    /// let cold = sample(#{ temperature: 5, pH: 7, Cl: "1 mmol/kg" });
    /// let warm = sample(#{ temperature: 25, pH: 7, Cl: "3 mmol/kg" });
    /// mix(cold, warm, 0.5).equilibrate().temperature.value   // 15
    /// ```
    #[rhai_fn(name = "mix", return_raw)]
    pub fn mix_two(a: Sample, b: Sample, share: Dynamic) -> ScriptResult<Sample> {
        let share: FLOAT = plain("a share", &share)?;
        if !(0.0..=1.0).contains(&share) {
            return fail(format!("the share of the second water is between 0 and 1, not {share}"))
                .help("`mix(a, b, 0.3)` takes 0.3 kg of b and 0.7 kg of a; `mix([[a, 2], [b, 5]])` takes any kilograms")
                .argument(2)
                .raise();
        }
        mixed(&[(a, 1.0 - share), (b, share)])
    }
    /// Waters mixed by their kilograms: `mix([[a, 0.7], [b, 0.3]])`.
    #[rhai_fn(name = "mix", return_raw)]
    pub fn mix_list(waters: Array) -> ScriptResult<Sample> {
        mixed(&parts(&waters)?)
    }

    /// So much of a reagent as brings the water to a target, or of several to several: keys `add`, `until_is`, and
    /// `between` for the least and the most (0 to 1 mol/kg(water) unless given). How much it was is `added(Ca(OH)2)`; how
    /// many amounts would do is among the warnings. Dosing in practice follows local codes and licensed judgement.
    ///
    /// ```rhai
    /// let soft = sample(#{ pH: 6.5, alkalinity: "0.4 meq/kg", Ca: "0.2 mmol/kg" });
    /// let hard = soft.adjust(#{ add: "Ca(OH)2", until_is: #{ pH: 8 } }).equilibrate();
    /// fmt(hard.pH.value, ".6f")   // "8.000000"
    /// ```
    #[rhai_fn(pure, return_raw)]
    pub fn adjust(sample: &mut Sample, options: Map) -> ScriptResult<Sample> {
        let mut map = options.clone();
        let add = map.remove("add").ok_or_else(|| {
            fail("`adjust` needs `add`, the reagent")
                .help("write `#{ add: \"Ca(OH)2\", until_is: #{ \"SI(calcite)\": 0.1 } }`")
        })?;
        let reagents = one_or_many(&add).map_err(|fault| fault.key("add"))?;
        for reagent in &reagents {
            crate::water::treatment::substance(reagent)
                .map_err(|message| super::super::faults::advised(&message).key("add"))?;
        }
        let mut options = named(&map)?;
        let targets = targets(options.take("until_is"))?;
        let between = options.take("between");
        options.finish().map_err(Fail::from)?;
        let adjust = Adjust::new(&reagents, targets, |reagent| bounds(between.as_ref(), reagent));
        let adjust = adjust.map_err(|message| {
            let key = if message.starts_with("`until_is`") {
                "until_is"
            } else if message.starts_with("`add`") {
                "add"
            } else {
                "between"
            };
            super::super::faults::advised(&message).key(key)
        })?;
        treated(sample, Treatment::Adjust(Box::new(adjust)))
    }
}
