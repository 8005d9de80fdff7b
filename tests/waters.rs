//! Waters for the other modules: invented, from soft to brackish.

use std::collections::BTreeMap;

use lysocline_engine::equilibrium::{State, equilibrate};
use lysocline_engine::ledger::{Ledger, shipped};
use lysocline_engine::named::Value;
use lysocline_engine::solve::Settings;
use lysocline_engine::water::Sample;
use proptest::prelude::*;

/// The ledger most waters are computed with.
pub fn freshwater() -> Ledger {
    shipped::ledger("freshwater", None).expect("a shipped ledger")
}

/// Keys and values of a sample: a bare number as text is a number.
pub fn entries(pairs: &[(&str, &str)]) -> BTreeMap<String, Value> {
    let value = |text: &str| text.parse().map_or_else(|_| Value::Text(text.into()), Value::Number);
    pairs.iter().map(|(key, text)| ((*key).to_string(), value(text))).collect()
}

/// A sample of keys and values that are right.
pub fn sample(pairs: &[(&str, &str)]) -> Sample {
    Sample::read(entries(pairs)).unwrap_or_else(|error| panic!("{error}"))
}

/// The equilibrium of a sample that has one.
pub fn state(sample: &Sample) -> State {
    equilibrate(sample, None, &Settings::default())
        .unwrap_or_else(|error| panic!("{error}\n{:?}", sample.entries()))
}

/// A number a state answers.
pub fn get(state: &State, observable: &str) -> f64 {
    state.get(observable).unwrap_or_else(|error| panic!("{error}")).value()
}

/// Sixty waters of a survey that share nothing but their analytes.
pub fn survey() -> Vec<Sample> {
    (0..60)
        .map(|i| {
            let x = f64::from(i);
            let of = |least: f64, most: f64, turn: f64| {
                format!("{} mmol/kg", least * (most / least).powf((x * turn).fract()))
            };
            let (temperature, ph) = (2.0 + (x * 7.3) % 35.0, 6.2 + (x * 0.77) % 3.0);
            sample(&[
                ("name", &format!("station {i}")),
                ("temperature", &format!("{temperature} degC")),
                ("pH", &ph.to_string()),
                ("DIC", &of(0.1, 8.0, 0.618)),
                ("Ca", &of(0.05, 5.0, 0.414)),
                ("Mg", &of(0.02, 3.0, 0.732)),
                ("Na", &of(0.1, 80.0, 0.236)),
                ("K", &of(0.02, 2.0, 0.317)),
                ("Cl", &of(0.1, 90.0, 0.236)),
                ("SO4^2-", &of(0.05, 5.0, 0.541)),
                ("F", &of(0.001, 0.1, 0.873)),
                ("Si", &of(0.05, 0.8, 0.142)),
                ("Sr", &of(0.0005, 0.02, 0.646)),
                ("Ba", &of(0.0001, 0.002, 0.167)),
            ])
        })
        .collect()
}

/// Any water between rain and brackish, its pH and inorganic carbon known; amounts in mol/kg.
pub fn any_water() -> impl Strategy<Value = BTreeMap<String, Value>> {
    let analytes = ["Ca", "Mg", "Na", "K", "Cl", "SO4^2-", "NO3^-", "F", "Si", "Sr", "Ba"];
    let amounts = proptest::collection::vec(
        prop_oneof![1 => Just(None), 4 => (-6.0..-2.0).prop_map(Some)],
        analytes.len(),
    );
    (2.0..60.0, 5.5..10.5, -5.0..-1.8, amounts).prop_map(
        move |(temperature, ph, carbon, amounts): (f64, f64, f64, Vec<Option<f64>>)| {
            let amounts = analytes
                .iter()
                .zip(amounts)
                .filter_map(|(key, log)| log.map(|log| ((*key).to_string(), 10_f64.powf(log))));
            let known = [("temperature", temperature), ("pH", ph), ("DIC", 10_f64.powf(carbon))];
            let known = known.map(|(key, value)| (key.to_string(), value));
            known.into_iter().chain(amounts).map(|(key, value)| (key, Value::Number(value))).collect()
        },
    )
}
