//! What is beside a water, against equations solved by hand and against differences of whole solves.

use std::collections::BTreeMap;

use super::surface::gouy_chapman;
use super::{State, equilibrate};
use crate::chem::Reaction;
use crate::ledger::{Ledger, shipped};
use crate::named::{Named, Value};
use crate::physics::constants::{FARADAY, GAS_CONSTANT};
use crate::quantity::Quantity;
use crate::solve::Settings;
use crate::units::Temperature;
use crate::water::neighbour::{Exchanger, GasPhase, Surface};
use crate::water::{Dose, Neighbour, Sample, Treatment};

const KELVIN: f64 = 298.15;

fn value(text: &str) -> Value {
    text.parse().map_or_else(|_| Value::Text(text.into()), Value::Number)
}

fn map(entries: &[(&str, &str)]) -> BTreeMap<String, Value> {
    entries.iter().map(|(key, text)| ((*key).to_string(), value(text))).collect()
}

fn water(entries: &[(&str, &str)]) -> Sample {
    Sample::read(map(entries)).unwrap()
}

fn beside(water: &Sample, neighbour: Neighbour) -> Sample {
    water.treated(Treatment::Beside(Box::new(neighbour))).unwrap()
}

/// The freshwater ledger with reactions of its own.
fn book(reactions: &[(&str, &str)]) -> Ledger {
    let mut book = shipped::ledger("freshwater", None).unwrap();
    for (equation, log_k) in reactions {
        let options = Named::new(BTreeMap::from([
            ("log_k".to_string(), value(log_k)),
            ("source".to_string(), Value::Text("of a test".into())),
        ]));
        let reaction = Reaction::read(equation, Some(equation), options, Some(equation)).unwrap();
        book = book.with_reaction(equation, &reaction).unwrap();
    }
    book
}

fn solve(water: &Sample, book: &Ledger) -> State {
    equilibrate(water, Some(book), &Settings::default()).unwrap_or_else(|error| panic!("{error}"))
}

fn get(state: &State, asked: &str) -> f64 {
    state.get(asked).unwrap_or_else(|error| panic!("{error}")).value()
}

fn sensitivity(quantity: &Quantity, label: &str) -> f64 {
    let named = |exactly: bool| {
        let is_it = |own: &str| if exactly { own == label } else { own.contains(label) };
        quantity.parts().iter().find(|part| is_it(part.input.label()))
    };
    let part = named(true).or_else(|| named(false));
    part.unwrap_or_else(|| panic!("nothing of {label} in {quantity:?}")).sensitivity
}

#[track_caller]
fn close(a: f64, b: f64, tolerance: f64) {
    assert!((a - b).abs() <= tolerance * b.abs(), "{a} is not {b}");
}

const GASES: [(&str, &str); 1] = [("N2(g) <=> N2(aq)", "-3.19")];

fn headspace(litres: &str, pressures: &[(&str, &str)]) -> Neighbour {
    let given = [("volume".to_string(), value(litres)), ("p".to_string(), Value::Map(map(pressures)))];
    Neighbour::Gas(GasPhase::headspace(Named::new(given.into())).unwrap())
}

fn bubble(litres: &str, fractions: &[(&str, &str)]) -> Neighbour {
    let given = [
        ("volume".to_string(), value(litres)),
        ("pressure".to_string(), value("1 atm")),
        ("x".to_string(), Value::Map(map(fractions))),
    ];
    Neighbour::Gas(GasPhase::bubble(Named::new(given.into())).unwrap())
}

#[test]
fn a_headspace_shares_its_gas_with_the_water() {
    // p = n/(V/RT + K w) of a gas that does nothing but dissolve, in 0.5 kg of pure water.
    let book =
        book(&GASES).with_activity(crate::ledger::ActivityChoice::read("ideal", Named::default()).unwrap());
    let pure = water(&[("pH", "electroneutral"), ("water", "0.5")]);
    let state = solve(&beside(&pure, headspace("2 L", &[("N2(g)", "0.8 bar")])), &book);
    let per_bar = 100.0 / (GAS_CONSTANT * KELVIN);
    let n = 0.8 * 2.0 * per_bar;
    let p = n / (2.0 * per_bar + 10_f64.powf(-3.19) * 0.5);
    close(get(&state, "p(N2(g))"), p, 1e-12);
    close(get(&state, "f(N2(g))"), p, 1e-12);
    close(get(&state, "n(N2(g))"), p * 2.0 * per_bar, 1e-12);
    close(get(&state, "all(N)"), 2.0 * n / 0.5, 1e-12);
    close(get(&state, "volume(headspace)"), 2.0, 1e-14);
    // 3.17 kPa of vapour at 25 degC.
    close(get(&state, "p(headspace)") - p, 0.03169, 2e-3);
}

#[test]
fn the_budget_of_a_headspace_is_that_of_differences() {
    let book = book(&GASES);
    let lake = |alkalinity: &str, litres: &str, p: &str, celsius: &str| {
        let lake = water(&[
            ("pH", "8 +/- 0.02"),
            ("alkalinity", alkalinity),
            ("Ca", "1 mmol/kg"),
            ("temperature", celsius),
        ]);
        solve(&beside(&lake, headspace(litres, &[("CO2(g)", p), ("N2(g)", "1")])), &book)
    };
    let given = ("2 +/- 0.05 mmol/kg", "0.5 +/- 0.01 L", "0.05 +/- 0.001 bar", "20 +/- 0.1 degC");
    let state = lake(given.0, given.1, given.2, given.3);
    for asked in ["pH", "p(CO2(g))", "n(CO2(g))", "x(CO2(g))", "p(headspace)", "all(C)"] {
        let found = state.get(asked).unwrap();
        let difference =
            |more: State, less: State, by: f64| (get(&more, asked) - get(&less, asked)) / (2.0 * by);
        let volume = difference(
            lake(given.0, "0.501 L", given.2, given.3),
            lake(given.0, "0.499 L", given.2, given.3),
            0.001,
        );
        let pressure = difference(
            lake(given.0, given.1, "0.0501 bar", given.3),
            lake(given.0, given.1, "0.0499 bar", given.3),
            0.0001,
        );
        let size = found.value().abs();
        let checked = |label: &str, expected: f64, scale: f64| {
            let own = sensitivity(&found, label);
            assert!(
                (own - expected).abs() * scale < 3e-5 * size,
                "{asked} by {label}: {own} is not {expected}"
            );
        };
        checked("volume", volume, 0.5);
        checked("p(CO2(g))", pressure, 0.05);
    }
}

#[test]
fn a_bubble_keeps_its_pressure_or_vanishes() {
    let book = book(&GASES);
    let lake = water(&[("pH", "8"), ("alkalinity", "2 mmol/kg")]);
    let state = solve(&beside(&lake, bubble("0.1 L", &[("CO2(g)", "0.05"), ("N2(g)", "0.95")])), &book);
    let sum = get(&state, "p(CO2(g))") + get(&state, "p(N2(g))");
    let vapour = get(&state, "p(bubble)") - sum;
    close(get(&state, "p(bubble)"), 1.01325, 1e-10);
    close(vapour, 0.03169, 2e-3);
    close(get(&state, "x(CO2(g))") + get(&state, "x(N2(g))"), 1.0, 1e-12);
    close(get(&state, "x(N2(g))"), get(&state, "p(N2(g))") / sum, 1e-10);
    let ideal = get(&state, "n(bubble)") * GAS_CONSTANT * KELVIN / 100.0 / sum;
    close(get(&state, "volume(bubble)"), ideal, 1e-10);
    // Nitrogen that is dissolved and in the gas is what was filled in.
    let filled = 2.0 * 0.95 * 1.01325 * 0.1 * 100.0 / (GAS_CONSTANT * KELVIN);
    close(get(&state, "all(N)"), filled, 1e-10);
    let small = solve(&beside(&lake, bubble("1 mL", &[("CO2(g)", "1")])), &book);
    assert_eq!(get(&small, "volume(bubble)"), 0.0);
    assert!(small.get("p(bubble)").unwrap_err().to_string().contains("has vanished"));
}

#[test]
fn the_budget_of_a_bubble_is_that_of_differences() {
    let book = book(&GASES);
    let state = |litres: &str| {
        let lake = water(&[("pH", "8"), ("alkalinity", "2 mmol/kg")]);
        solve(&beside(&lake, bubble(litres, &[("CO2(g)", "0.05"), ("N2(g)", "0.95")])), &book)
    };
    let found = state("0.1 +/- 0.001 L");
    for asked in ["pH", "volume(bubble)", "n(N2(g))", "x(CO2(g))"] {
        let expected = (get(&state("0.1001 L"), asked) - get(&state("0.0999 L"), asked)) / 2e-4;
        let own = sensitivity(&found.get(asked).unwrap(), "volume");
        assert!((own - expected).abs() < 1e-5 * expected.abs(), "{asked}: {own} is not {expected}");
    }
}

#[test]
fn fractions_in_a_solid_solution_are_saturations_of_its_members() {
    let book = shipped::ledger("freshwater", None).unwrap();
    let lake = water(&[
        ("pH", "8.5"),
        ("alkalinity", "4 mmol/kg"),
        ("Ca", "2 +/- 0.02 mmol/kg"),
        ("Mg", "2 mmol/kg"),
    ]);
    let members = vec!["calcite".to_string(), "magnesite".to_string()];
    let solution = Neighbour::solid_solution("Mg-calcite", members).unwrap();
    let state = solve(&beside(&lake, solution.clone()), &book);
    close(get(&state, "Omega(calcite)"), get(&state, "x(calcite)"), 1e-9);
    close(get(&state, "Omega(magnesite)"), get(&state, "x(magnesite)"), 1e-9);
    close(get(&state, "x(calcite)") + get(&state, "x(magnesite)"), 1.0, 1e-12);
    close(get(&state, "n(calcite)") + get(&state, "n(magnesite)"), get(&state, "n(Mg-calcite)"), 1e-12);
    close(get(&state, "all(Ca)"), 2e-3, 1e-10);
    close(get(&state, "total(Mg)") + get(&state, "n(magnesite)"), 2e-3, 1e-10);
    let by_calcium = sensitivity(&state.get("n(Mg-calcite)").unwrap(), "Ca");
    let at = |calcium: &str| {
        let lake = water(&[("pH", "8.5"), ("alkalinity", "4 mmol/kg"), ("Ca", calcium), ("Mg", "2 mmol/kg")]);
        get(&solve(&beside(&lake, solution.clone()), &book), "n(Mg-calcite)")
    };
    let expected = (at("2.001 mmol/kg") - at("1.999 mmol/kg")) / 2e-6;
    close(by_calcium * mol_factor(by_calcium, expected), expected, 1e-5);
    let soft =
        water(&[("pH", "7"), ("alkalinity", "0.1 mmol/kg"), ("Ca", "0.1 mmol/kg"), ("Mg", "0.1 mmol/kg")]);
    let without = solve(&beside(&soft, solution), &book);
    assert_eq!(get(&without, "n(Mg-calcite)"), 0.0);
    assert!(get(&without, "Omega(calcite)") + get(&without, "Omega(magnesite)") < 1.0);
}

/// 1, or 1000 where an input was written in mmol.
fn mol_factor(own: f64, expected: f64) -> f64 {
    if (own * 1000.0 / expected - 1.0).abs() < 0.01 { 1000.0 } else { 1.0 }
}

const CLAY: [(&str, &str); 2] = [
    ("2 NaX(clay) + Ca^2+ <=> CaX2(clay) + 2 Na^+", "0.80 +/- 0.05"),
    ("NaX(clay) + K^+ <=> KX(clay) + Na^+", "0.70 +/- 0.05"),
];

fn salty() -> Sample {
    water(&[
        ("pH", "7"),
        ("Na", "10 mmol/kg"),
        ("Ca", "1 +/- 0.01 mmol/kg"),
        ("K", "0.5 mmol/kg"),
        ("Cl", "12.5 mmol/kg"),
    ])
}

fn exchanger(entries: &[(&str, &str)]) -> Neighbour {
    Neighbour::Exchanger(Exchanger::read("clay", Value::Map(map(entries))).unwrap())
}

#[test]
fn an_exchanger_obeys_its_constants_in_either_convention() {
    let book = book(&CLAY);
    for (convention, of) in [("Gaines-Thomas", "E"), ("Vanselow", "x")] {
        let given = [("capacity", "5 meq/kg"), ("convention", convention), ("form", "Na^+")];
        let state = solve(&beside(&salty(), exchanger(&given)), &book);
        let on = |species: &str| get(&state, &format!("{of}({species}(clay))"));
        let a = |ion: &str| get(&state, &format!("a({ion})"));
        close((on("CaX2") * a("Na^+").powi(2) / (on("NaX").powi(2) * a("Ca^2+"))).log10(), 0.80, 1e-10);
        close((on("KX") * a("Na^+") / (on("NaX") * a("K^+"))).log10(), 0.70, 1e-10);
        close(on("CaX2") + on("NaX") + on("KX"), 1.0, 1e-12);
        let n = |species: &str| get(&state, &format!("n({species}(clay))"));
        close(2.0 * n("CaX2") + n("NaX") + n("KX"), 5e-3, 1e-12);
        close(get(&state, "all(Na)"), 15e-3, 1e-12);
        close(get(&state, "total(Ca)") + n("CaX2"), 1e-3, 1e-12);
    }
}

#[test]
fn an_exchanger_that_lay_in_a_water_leaves_it_as_it_is() {
    let book = book(&CLAY);
    let before = solve(&salty(), &book);
    for convention in ["Gaines-Thomas", "Vanselow"] {
        let water =
            beside(&salty(), exchanger(&[("capacity", "5 +/- 0.1 meq/kg"), ("convention", convention)]));
        let state = solve(&water, &book);
        for asked in ["pH", "total(Ca)", "total(Na)", "total(K)"] {
            close(get(&state, asked), get(&before, asked), 1e-11);
        }
        // The water does not depend on it, nor on its constants.
        for part in state.get("total(Ca)").unwrap().parts() {
            let allowed = if part.input.label().contains("Ca") && !part.input.label().contains("clay") {
                2.0
            } else {
                1e-9
            };
            assert!(part.sensitivity.abs() < allowed, "{part:?}");
        }
        // 1 meq/kg of potassium more shifts both.
        let dose = Dose::read("dose", "KCl", value("1 mmol/kg")).unwrap();
        let dosed = solve(&water.treated(Treatment::Dose(dose)).unwrap(), &book);
        assert!(get(&dosed, "total(K)") < 1.5e-3 && get(&dosed, "total(Ca)") > 1e-3);
    }
}

#[test]
fn the_budget_of_an_exchanger_is_that_of_differences() {
    for convention in ["Gaines-Thomas", "Vanselow"] {
        let state = |log_k: &str, capacity: &str| {
            let book = book(&[(CLAY[0].0, log_k), CLAY[1]]);
            let water = beside(&salty(), exchanger(&[("capacity", capacity), ("convention", convention)]));
            let dose = Dose::read("dose", "KCl", value("1 mmol/kg")).unwrap();
            solve(&water.treated(Treatment::Dose(dose)).unwrap(), &book)
        };
        let found = state("0.80 +/- 0.05", "5 +/- 0.1 meq/kg").get("total(K)").unwrap();
        let total = |log_k: &str, capacity: &str| get(&state(log_k, capacity), "total(K)");
        let by_constant = (total("0.801", "5 meq/kg") - total("0.799", "5 meq/kg")) / 2e-3;
        close(sensitivity(&found, "CaX2"), by_constant, 1e-4);
        let by_capacity = (total("0.80", "5.005 meq/kg") - total("0.80", "4.995 meq/kg")) / 1e-5;
        let own = sensitivity(&found, "capacity");
        close(own * mol_factor(own, by_capacity), by_capacity, 1e-4);
    }
}

#[test]
fn gapon_takes_one_site_an_ion() {
    let message = |reactions: &[(&str, &str)]| {
        let water = beside(&salty(), exchanger(&[("capacity", "5 meq/kg"), ("convention", "Gapon")]));
        equilibrate(&water, Some(&book(reactions)), &Settings::default()).unwrap_err().to_string()
    };
    assert!(message(&CLAY).contains("write `Ca0.5X(clay)`"), "{}", message(&CLAY));
    assert!(message(&[]).contains("no exchange reactions"), "{}", message(&[]));
    let gapon = book(&[("NaX(clay) + 0.5 Ca^2+ <=> Ca0.5X(clay) + Na^+", "0.3")]);
    let state =
        solve(&beside(&salty(), exchanger(&[("capacity", "5 meq/kg"), ("convention", "Gapon")])), &gapon);
    let ratio = get(&state, "E(Ca0.5X(clay))") / get(&state, "E(NaX(clay))");
    close((ratio * get(&state, "a(Na^+)") / get(&state, "a(Ca^2+)").sqrt()).log10(), 0.3, 1e-10);
}

/// Intrinsic protolysis constants of hydrous ferric oxide (Dzombak & Morel 1990; recalled).
const OXIDE: [(&str, &str); 2] = [
    ("XOH(ferric oxide) + H^+ <=> XOH2^+(ferric oxide)", "7.29 +/- 0.1"),
    ("XOH(ferric oxide) <=> XO^-(ferric oxide) + H^+", "-8.93 +/- 0.1"),
];

fn surface(entries: &[(&str, &str)]) -> Neighbour {
    let mut given = map(&[("sites", "2.25 mmol/g"), ("area", "600 m2/g"), ("mass", "0.1 g")]);
    given.extend(map(entries));
    Neighbour::Surface(Surface::read("ferric oxide", Named::new(given)).unwrap())
}

/// Potential and charge (C/m2) at a pH, by bisection on the potential, for a layer of this charge at a potential.
fn by_hand(ph: f64, layer: impl Fn(f64) -> f64) -> (f64, f64) {
    let (sites, area) = (2.25e-4, 60.0);
    let charge = |psi: f64| {
        let y = FARADAY * psi / (GAS_CONSTANT * KELVIN);
        let (plus, minus) = (10_f64.powf(7.29 - ph) * (-y).exp(), 10_f64.powf(ph - 8.93) * y.exp());
        FARADAY / area * sites * (plus - minus) / (1.0 + plus + minus)
    };
    let (mut low, mut high) = (-1.0, 1.0);
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if charge(middle) > layer(middle) { low = middle } else { high = middle }
    }
    (low, charge(low))
}

#[test]
fn a_surface_is_charged_as_by_hand() {
    let book = book(&OXIDE);
    for ph in [4.0, 6.0, 8.0, 8.11, 10.0] {
        let salt = water(&[("pH", "7"), ("Na", "0.1 mol/kg"), ("Cl", "0.1 mol/kg")])
            .treated(Treatment::HoldPh { ph, reagent: None })
            .unwrap();
        let state = solve(&beside(&salt, surface(&[])), &book);
        let strength = get(&state, "ionic_strength");
        let (potential, charge) = by_hand(ph, |psi| gouy_chapman(psi, strength, Temperature::REFERENCE));
        assert!((get(&state, "potential(ferric oxide)") - potential).abs() < 1e-11, "{ph}");
        assert!((get(&state, "surface_charge(ferric oxide)") - charge).abs() < 1e-10, "{ph}");
        let constant = surface(&[("model", "constant capacitance"), ("capacitance", "1.1 F/m2")]);
        let state = solve(&beside(&salt, constant), &book);
        let (potential, charge) = by_hand(ph, |psi| 1.1 * psi);
        assert!((get(&state, "potential(ferric oxide)") - potential).abs() < 1e-10, "{ph}");
        assert!((get(&state, "surface_charge(ferric oxide)") - charge).abs() < 1e-10, "{ph}");
    }
}

#[test]
fn a_titration_of_a_surface_takes_up_what_its_charge_says() {
    // Acid beyond what the water itself takes is on the surface: 60 m2 per kg of water.
    let book = book(&OXIDE);
    let salt = water(&[("pH", "electroneutral"), ("Na", "0.1 mol/kg"), ("Cl", "0.1 mol/kg")]);
    let acid = Dose::read("dose", "HCl", value("0.1 mmol/kg")).unwrap();
    let state = solve(&beside(&salt.treated(Treatment::Dose(acid)).unwrap(), surface(&[])), &book);
    let free = get(&state, "m(H^+)") - get(&state, "m(OH^-)");
    let on_it = get(&state, "surface_charge(ferric oxide)") * 60.0 / FARADAY;
    close(free + on_it, 1e-4, 1e-9);
}

#[test]
fn the_budget_of_a_surface_is_that_of_differences() {
    let state = |log_k: &str, model: &[(&str, &str)], area: &str| {
        let salt = water(&[("pH", "electroneutral"), ("Na", "0.1 mol/kg"), ("Cl", "0.1 mol/kg")]);
        let acid = Dose::read("dose", "HCl", value("0.1 mmol/kg")).unwrap();
        let mut given = model.to_vec();
        given.push(("area", area));
        let water = beside(&salt.treated(Treatment::Dose(acid)).unwrap(), surface(&given));
        solve(&water, &book(&[(OXIDE[0].0, log_k), OXIDE[1]]))
    };
    let models: [&[(&str, &str)]; 2] =
        [&[], &[("model", "constant capacitance"), ("capacitance", "1.1 F/m2")]];
    for model in models {
        for asked in ["pH", "surface_charge(ferric oxide)", "potential(ferric oxide)"] {
            let found = state("7.29 +/- 0.1", model, "600 +/- 10 m2/g").get(asked).unwrap();
            let at = |log_k: &str, area: &str| get(&state(log_k, model, area), asked);
            let by_constant = (at("7.291", "600 m2/g") - at("7.289", "600 m2/g")) / 2e-3;
            close(sensitivity(&found, "XOH2^+"), by_constant, 2e-3);
            let by_area = (at("7.29", "600.1 m2/g") - at("7.29", "599.9 m2/g")) / 0.2;
            close(sensitivity(&found, "area"), by_area, 2e-3);
        }
    }
}

#[test]
fn a_vanselow_exchanger_and_a_surface_and_a_gas_together_are_certified() {
    let mut reactions = CLAY.to_vec();
    reactions.extend(OXIDE);
    reactions.extend(GASES);
    let book = book(&reactions);
    let mut lake =
        water(&[("pH", "8"), ("alkalinity", "2 mmol/kg"), ("Ca", "1 mmol/kg"), ("Na", "1 mmol/kg")]);
    for neighbour in [
        exchanger(&[("capacity", "5 meq/kg"), ("convention", "Vanselow")]),
        surface(&[]),
        bubble("0.1 L", &[("CO2(g)", "0.05"), ("N2(g)", "0.95")]),
    ] {
        lake = beside(&lake, neighbour);
    }
    let state = solve(&lake, &book);
    assert!(state.certificate().meets(&Settings::default()));
    assert_eq!(get(&state, "n(NaX(clay))").signum(), 1.0);
    assert!(state.get("pH").unwrap().parts().len() > 2);
}
