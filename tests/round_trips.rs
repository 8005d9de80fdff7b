//! What has to come back unchanged, whatever the water: no reference value is needed.

use std::collections::BTreeMap;

use lysocline_engine::equilibrium::{State, equilibrate};
use lysocline_engine::named::Value;
use lysocline_engine::solve::Settings;
use lysocline_engine::water::{Sample, Treatment};
use proptest::prelude::*;
use rayon::prelude::*;

use crate::waters::{any_water, freshwater, get, sample, state};

/// Relative distance of two numbers, absolute near zero.
fn apart(a: f64, b: f64) -> f64 {
    (a - b).abs() / a.abs().max(b.abs()).max(f64::MIN_POSITIVE)
}

fn read(water: BTreeMap<String, Value>) -> Sample {
    Sample::read(water).unwrap_or_else(|error| panic!("{error}"))
}

fn treated(sample: &Sample, treatment: Treatment) -> State {
    state(&sample.treated(treatment).unwrap_or_else(|error| panic!("{error}")))
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 100, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn a_state_taken_as_a_sample_has_the_same_equilibrium(water in any_water()) {
        let first = state(&read(water));
        let again = state(&first.sample(&[]).unwrap());
        prop_assert!((get(&first, "pH") - get(&again, "pH")).abs() < 1e-9);
        for observable in ["ionic_strength", "alkalinity", "DIC", "f(CO2(g))"] {
            prop_assert!(apart(get(&first, observable), get(&again, observable)) < 1e-9, "{observable}");
        }
    }

    #[test]
    fn contact_with_a_gas_at_the_fugacity_it_has_changes_nothing(water in any_water()) {
        let before = state(&read(water));
        let fugacity = get(&before, "f(CO2(g))");
        let after = treated(&before.sample(&[]).unwrap(), Treatment::OpenTo { gas: "CO2(g)".into(), fugacity });
        prop_assert!((get(&before, "pH") - get(&after, "pH")).abs() < 1e-9);
        prop_assert!(apart(get(&before, "DIC"), get(&after, "DIC")) < 1e-9);
        prop_assert!(get(&after, "added(CO2(g))").abs() < 1e-9 * get(&after, "DIC"));
    }

    #[test]
    fn a_solid_held_at_the_index_it_has_neither_dissolves_nor_forms(water in any_water()) {
        let before = state(&read(water));
        for solid in ["calcite", "gypsum", "fluorite", "dolomite"] {
            let Ok(index) = before.get(&format!("SI({solid})")) else { continue };
            let held = Treatment::Saturate { solid: solid.into(), index: index.value() };
            let after = treated(&before.sample(&[]).unwrap(), held);
            let least = ["total(Ca)", "DIC"].map(|total| get(&before, total)).into_iter().fold(f64::INFINITY, f64::min);
            prop_assert!(get(&after, &format!("n({solid})")).abs() < 1e-9 * least, "{solid}");
            prop_assert!((get(&before, "pH") - get(&after, "pH")).abs() < 1e-9, "{solid}");
        }
    }

    #[test]
    fn any_two_of_ph_alkalinity_carbon_and_its_fugacity_give_the_same_water(water in any_water()) {
        let first = state(&read(water.clone()));
        let values = [("pH", "pH"), ("alkalinity", "alkalinity"), ("DIC", "DIC"), ("fCO2", "f(CO2(g))")];
        let values = values.map(|(key, observable)| (key, get(&first, observable)));
        for (i, (one, a)) in values.iter().enumerate() {
            for (other, b) in &values[i + 1..] {
                let mut pair = water.clone();
                pair.remove("pH");
                pair.remove("DIC");
                pair.insert((*one).into(), Value::Number(*a));
                pair.insert((*other).into(), Value::Number(*b));
                let again = state(&read(pair));
                prop_assert!((get(&first, "pH") - get(&again, "pH")).abs() < 1e-7, "{one} and {other}: pH {} {}", get(&first, "pH"), get(&again, "pH"));
                prop_assert!(apart(get(&first, "DIC"), get(&again, "DIC")) < 1e-7, "{one} and {other}: DIC {} {}", get(&first, "DIC"), get(&again, "DIC"));
            }
        }
    }
}

/// K belongs to the reaction as written: backwards 1/K, twice K².
#[test]
fn a_constant_written_backwards_or_doubled_is_the_same_constant() {
    let ledger = freshwater();
    let names: Vec<&str> = ledger.names().collect();
    let waters = [
        sample(&[
            ("pH", "7.9"),
            ("DIC", "3 mmol/kg"),
            ("Ca", "2 mmol/kg"),
            ("Mg", "1 mmol/kg"),
            ("Na", "9 mmol/kg"),
            ("K", "0.3 mmol/kg"),
            ("Cl", "9 mmol/kg"),
            ("SO4^2-", "2 mmol/kg"),
            ("F", "0.1 mmol/kg"),
            ("Si", "0.5 mmol/kg"),
            ("Sr", "5 umol/kg"),
            ("Ba", "0.4 umol/kg"),
        ]),
        sample(&[("pH", "electroneutral"), ("temperature", "10 degC")])
            .treated(Treatment::OpenTo { gas: "CO2(g)".into(), fugacity: 4.2e-4 })
            .and_then(|sample| sample.treated(Treatment::Saturate { solid: "calcite".into(), index: 0.0 }))
            .unwrap(),
    ];
    for water in &waters {
        let plain = equilibrate(water, Some(&ledger), &Settings::default()).unwrap();
        names.par_iter().for_each(|name| {
            for multiple in [-1, 2, -3] {
                let rewritten = ledger.reaction(name).unwrap().times(multiple.into()).unwrap();
                let ledger = ledger.replace(name, &rewritten).unwrap();
                let other = equilibrate(water, Some(&ledger), &Settings::default())
                    .unwrap_or_else(|error| panic!("{name} times {multiple}: {error}"));
                compare(&plain, &other, &format!("{name} times {multiple}"));
            }
        });
    }
}

fn compare(plain: &State, other: &State, what: &str) {
    assert!((get(plain, "pH") - get(other, "pH")).abs() < 1e-10, "{what}: pH");
    for formed in plain.system().solutes() {
        let observable = format!("m({})", formed.species.key());
        let (a, b) = (get(plain, &observable), get(other, &observable));
        assert!(apart(a, b) < 1e-10, "{what}: {observable} is {a} and {b}");
    }
    for (formed, _) in plain.system().phases() {
        let observable = format!("SI({})", formed.species.key());
        assert!((get(plain, &observable) - get(other, &observable)).abs() < 1e-10, "{what}: {observable}");
    }
}
