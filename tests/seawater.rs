//! The marine carbonate system: pairs that give each other back, a second solver, finite differences, and the fresh end.

use std::collections::BTreeMap;

use approx::assert_relative_eq;
use lysocline_engine::chem::PhScale;
use lysocline_engine::equilibrium::{Asked, State, equilibrate};
use lysocline_engine::ledger::{Ledger, Sea, file, save, shipped};
use lysocline_engine::named::Value;
use lysocline_engine::seawater::constants::{Place, log_k_free};
use lysocline_engine::seawater::estuary;
use lysocline_engine::solve::Settings;
use lysocline_engine::units::{Pressure, Temperature};
use lysocline_engine::water::{Sample, Treatment};

use crate::waters::{entries, get, state as solved};

fn book() -> Ledger {
    shipped::ledger("seawater", None).unwrap()
}

#[track_caller]
fn sea(pairs: &[(&str, &str)]) -> Sample {
    Sample::read_seawater(entries(pairs)).unwrap_or_else(|error| panic!("{error}"))
}

#[track_caller]
fn state(pairs: &[(&str, &str)]) -> State {
    solved(&sea(pairs))
}

/// A brackish, a tropical, a cold deep and an oxygen-free water.
const WATERS: [&[(&str, &str)]; 4] = [
    &[("salinity", "8"), ("temperature", "14 degC"), ("DIC", "1650 umol/kg"), ("alkalinity", "1700 umol/kg")],
    &[
        ("salinity", "36"),
        ("temperature", "28 degC"),
        ("DIC", "1950 umol/kg"),
        ("alkalinity", "2330 umol/kg"),
    ],
    &[
        ("salinity", "34.7"),
        ("temperature", "1.5 degC"),
        ("pressure", "4000 dbar"),
        ("DIC", "2290 umol/kg"),
        ("alkalinity", "2400 umol/kg"),
        ("phosphate", "2.4 umol/kg"),
        ("silicate", "140 umol/kg"),
    ],
    &[
        ("salinity", "22"),
        ("temperature", "9 degC"),
        ("pressure", "1000 dbar"),
        ("DIC", "3900 umol/kg"),
        ("alkalinity", "4200 umol/kg"),
        ("phosphate", "6 umol/kg"),
        ("silicate", "300 umol/kg"),
        ("ammonium", "80 umol/kg"),
        ("sulfide", "300 umol/kg"),
    ],
];

/// Derivative of an answer by an input of this label; 0 where it does not depend on it.
fn sensitivity(state: &State, asked: &str, label: &str) -> f64 {
    let answer = state.get(asked).unwrap_or_else(|error| panic!("{error}"));
    answer.parts().iter().find(|part| part.input.label() == label).map_or(0.0, |part| part.sensitivity)
}

/// The same water from another pair of what it was computed to have.
fn from_pair(water: &[(&str, &str)], first: &State, pair: [&str; 2]) -> State {
    let given: Vec<&(&str, &str)> =
        water.iter().filter(|(key, _)| !["DIC", "alkalinity"].contains(key)).collect();
    let mut keys = entries(&given.into_iter().copied().collect::<Vec<_>>());
    for key in pair {
        keys.insert(key.into(), Value::Quantity(first.get(key).unwrap()));
    }
    solved(&Sample::read_seawater(keys).unwrap_or_else(|error| panic!("{error}")))
}

#[test]
fn every_pair_gives_the_others_back() {
    const KEYS: [&str; 6] = ["DIC", "alkalinity", "pH", "fCO2", "pCO2", "xCO2"];
    for water in WATERS {
        let first = state(water);
        for (i, one) in KEYS.iter().enumerate() {
            for other in &KEYS[i + 1..] {
                // Three ways to state one fugacity.
                if one.ends_with("CO2") && other.ends_with("CO2") {
                    continue;
                }
                let again = from_pair(water, &first, [one, other]);
                for key in KEYS {
                    let (a, b) = (get(&first, key), get(&again, key));
                    assert!((a / b - 1.0).abs() < 1e-10, "{one} and {other} give {key} {b}, not {a}");
                }
            }
        }
    }
}

/// [H^+] of a pair of DIC and alkalinity by bisection of the explicit sum of Dickson (1981): no convex problem, no ledger
/// beyond the constants on the free scale.
pub fn bisected_ph(
    ledger: &Ledger,
    sea: Sea,
    t: Temperature,
    dic: f64,
    alkalinity: f64,
    totals: &[(&str, f64)],
) -> f64 {
    let names: Vec<&str> = ledger.names().collect();
    let log_k = log_k_free(ledger, &sea, t);
    let k = |name: &str| 10_f64.powf(log_k[names.iter().position(|own| *own == name).unwrap()]);
    let amount = |name: &str| {
        let given = totals.iter().find(|(own, _)| *own == name).map(|(_, total)| *total);
        let conservative = ledger.composition().find(|own| own.name == name);
        given.or(conservative.map(|own| own.amount(sea.salinity).value())).unwrap_or(0.0)
    };
    let (k1, k2) = (k("K1"), k("K2"));
    let excess = |h: f64| {
        let carbonate = dic * (k1 * h + 2.0 * k1 * k2) / (h * h + k1 * h + k1 * k2);
        let one = |total: &str, k: f64| amount(total) * k / (k + h);
        let (p1, p2, p3) = (k("K1P"), k("K2P"), k("K3P"));
        let phosphate = amount("phosphate") * (p1 * p2 * h + 2.0 * p1 * p2 * p3 - h * h * h)
            / (h * h * h + p1 * h * h + p1 * p2 * h + p1 * p2 * p3);
        carbonate
            + one("total boron", k("KB"))
            + k("KW") / h
            + phosphate
            + one("silicate", k("KSi"))
            + one("ammonium", k("KNH4"))
            + one("sulfide", k("KH2S"))
            - h
            - amount("total sulfate") * h / (h + k("KS"))
            - amount("total fluoride") * h / (h + k("KF"))
            - alkalinity
    };
    let (mut low, mut high) = (2.0_f64, 12.0_f64);
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if excess(10_f64.powf(-middle)) < 0.0 { low = middle } else { high = middle }
    }
    0.5 * (low + high)
}

#[test]
fn bisection_of_the_explicit_alkalinity_gives_the_same_ph() {
    for water in WATERS {
        let state = state(water);
        let ledger = state.system().ledger();
        let nutrients: Vec<(&str, f64)> = ["phosphate", "silicate", "ammonium", "sulfide"]
            .into_iter()
            .zip(["total(P)", "total(Si)", "total(N(-III))", "total(S(-II))"])
            .map(|(name, asked)| (name, get(&state, asked)))
            .collect();
        let ph = bisected_ph(
            ledger,
            ledger.sea().unwrap(),
            state.temperature(),
            get(&state, "DIC"),
            get(&state, "alkalinity"),
            &nutrients,
        );
        assert!((get(&state, "pH(free)") - ph).abs() < 1e-9, "{} and {ph}", get(&state, "pH(free)"));
    }
}

#[test]
fn buffer_factors_are_finite_differences() {
    for water in WATERS {
        let first = state(water);
        let with = |key: &str, factor: f64| {
            let keys: BTreeMap<String, Option<Value>> = ["DIC", "alkalinity"]
                .into_iter()
                .map(|own| {
                    let scale = if own == key { factor } else { 1.0 };
                    let text = format!("{} mol/kg(solution)", get(&first, own) * scale);
                    (own.to_string(), Some(Value::Text(text)))
                })
                .collect();
            solved(&sea(water).but(keys).unwrap())
        };
        let step = 1e-4;
        for (key, name) in [("DIC", "DIC"), ("alkalinity", "TA")] {
            let (more, less) = (with(key, 1.0 + step), with(key, 1.0 - step));
            let given = 2.0 * step * get(&first, key);
            for (factor, species) in [("gamma", "CO2(aq)"), ("beta", "H^+"), ("omega", "CO3^2-")] {
                let ln = |state: &State| get(state, &format!("m({species})")).ln();
                let difference = given / (ln(&more) - ln(&less));
                assert_relative_eq!(
                    get(&first, &format!("{factor}_{name}")),
                    difference,
                    max_relative = 1e-5
                );
            }
        }
        let revelle = get(&first, "DIC") / get(&first, "gamma_DIC");
        assert_relative_eq!(get(&first, "Revelle"), revelle, max_relative = 1e-12);
    }
}

/// Budgets: derivatives by constants, against the same with the constant moved; those of HSO4^- and HF act through the
/// scales of pH too.
#[test]
fn a_budget_holds_what_moving_a_constant_does() {
    let (water, own, step) = (WATERS[1], book(), 1e-5);
    let first = state(water);
    let budget = first.get("fCO2 [uatm]").unwrap();
    let names: Vec<&str> = budget.parts().iter().map(|part| part.input.label()).collect();
    for name in ["K1", "K2", "CO2(g)", "total boron"] {
        assert!(names.contains(&name), "{name} in {names:?}");
    }
    for asked in ["fCO2 [uatm]", "pH(seawater)"] {
        let influence = first.influence(&Asked::parse(asked).unwrap()).unwrap();
        for name in ["K1", "KB", "KS", "KF"] {
            let constant = own.reaction(name).unwrap();
            let with = |shift: f64| {
                let mut moved = constant.constant().unwrap().clone();
                moved.log_k = moved.log_k.shifted(shift);
                let moved = lysocline_engine::chem::Reaction::of(constant.equation().clone(), moved);
                get(&solved(&sea(water).with_ledger(&own.replace(name, &moved).unwrap())), asked)
            };
            let difference = (with(step) - with(-step)) / (2.0 * step);
            let position = own.names().position(|known| known == name).unwrap();
            let sensitivity = influence.constants.get(&position).copied().unwrap_or(0.0);
            // What a solve leaves open, over the step.
            let epsilon = 1e-11 * get(&first, asked) / step;
            assert_relative_eq!(sensitivity, difference, max_relative = 1e-5, epsilon = epsilon);
        }
    }
}

/// Of pH on every scale and of a fugacity from a measured pH, by the temperature of the water.
#[test]
fn a_budget_holds_what_warmth_does() {
    let at = |t: f64, pair: [(&str, &str); 2]| {
        let temperature = format!("{t} +/- 0.1 degC");
        let pairs = [("salinity", "33"), ("temperature", temperature.as_str()), pair[0], pair[1]];
        state(&pairs)
    };
    let pairs = [
        [("DIC", "2010 umol/kg"), ("alkalinity", "2250 umol/kg")],
        [("DIC", "2010 umol/kg"), ("pH", "8.0")],
        [("alkalinity", "2250 umol/kg"), ("pH", "8.0")],
    ];
    for pair in pairs {
        let (here, warmer, colder) = (at(17.0, pair), at(17.01, pair), at(16.99, pair));
        for asked in ["pH(free)", "pH(total)", "pH(seawater)", "pH(nbs)", "fCO2 [uatm]", "Omega(aragonite)"] {
            let difference = (get(&warmer, asked) - get(&colder, asked)) / 0.02;
            assert_relative_eq!(
                sensitivity(&here, asked, "temperature"),
                difference,
                max_relative = 1e-4,
                epsilon = 1e-9
            );
        }
    }
}

/// Of what salinity moves: the conservative ions, every constant, the scales of pH, the density.
#[test]
fn a_budget_holds_what_salinity_does() {
    let pairs = [
        [("DIC", "2010 umol/kg"), ("alkalinity", "2250 umol/kg")],
        [("DIC", "2010 umol/kg"), ("pH", "8.0")],
        [("alkalinity", "2250 umol/kg"), ("fCO2", "500 uatm")],
    ];
    for pair in pairs {
        let at = |salinity: &str| {
            let common = [("salinity", salinity), ("temperature", "12 degC"), ("pressure", "800 dbar")];
            state(&[&common[..], &pair[..]].concat())
        };
        let (here, saltier, fresher) = (at("33 +/- 0.02"), at("33.01"), at("32.99"));
        for asked in
            ["salinity", "pH(free)", "pH(total)", "fCO2 [uatm]", "Omega(aragonite)", "total(B)", "density"]
        {
            let difference = (get(&saltier, asked) - get(&fresher, asked)) / 0.02;
            assert_relative_eq!(
                sensitivity(&here, asked, "salinity"),
                difference,
                max_relative = 1e-4,
                epsilon = 1e-9
            );
        }
    }
}

/// Of buffer factors, by what was measured: one more derivative than anywhere else.
#[test]
fn a_budget_of_a_buffer_factor_holds_what_its_inputs_do() {
    let at = |dic: &str, alkalinity: &str| {
        state(&[("salinity", "35"), ("temperature", "20 degC"), ("DIC", dic), ("alkalinity", alkalinity)])
    };
    let here = at("2010 +/- 2 umol/kg", "2250 +/- 3 umol/kg");
    let moved = [
        ("DIC", at("2010.5 umol/kg", "2250 umol/kg"), at("2009.5 umol/kg", "2250 umol/kg")),
        ("alkalinity", at("2010 umol/kg", "2250.5 umol/kg"), at("2010 umol/kg", "2249.5 umol/kg")),
    ];
    for asked in ["Revelle", "gamma_DIC", "gamma_TA", "beta_DIC", "beta_TA", "omega_DIC", "omega_TA"] {
        let answer = here.get(asked).unwrap();
        assert!(answer.sigma().is_some_and(|sigma| sigma > 0.0), "{asked}: {answer}");
        for (key, more, less) in &moved {
            let difference = get(more, asked) - get(less, asked);
            // The measured value is in umol/kg.
            assert_relative_eq!(sensitivity(&here, asked, key), difference, max_relative = 1e-4);
        }
    }
}

/// The fugacity in place is larger than that of the surface by the partial molal volume: exp(32.3 P/(R T)).
#[test]
fn a_chosen_volume_brings_fugacities_to_the_depth() {
    let surface = state(WATERS[2]);
    let chosen = book().choose("CO2(g)", "Weiss pressure 1974").unwrap();
    let deep = solved(&sea(WATERS[2]).with_ledger(&chosen));
    let factor = (32.3 * 400.0 / (83.144_72 * 274.65_f64)).exp();
    assert_relative_eq!(get(&deep, "fCO2") / get(&surface, "fCO2"), factor, max_relative = 1e-5);
    assert_relative_eq!(get(&deep, "pH"), get(&surface, "pH"), max_relative = 1e-12);
    assert!(deep.choices().unwrap().contains("CO2(g) Weiss pressure 1974"));
    assert!(deep.warnings().join("\n").contains("by the partial molal volume of CO2"));
}

#[test]
fn the_substrate_inhibitor_ratio_is_that_of_the_total_scale() {
    let state = state(WATERS[2]);
    let ratio = get(&state, "m(HCO3^-)") * 10_f64.powf(get(&state, "pH(total)"));
    assert_relative_eq!(get(&state, "substrate_inhibitor_ratio"), ratio, max_relative = 1e-12);
}

#[test]
fn a_fugacity_measured_in_the_laboratory_is_brought_to_the_place() {
    let deep = state(WATERS[2]);
    let lab = deep
        .sample(&[])
        .unwrap()
        .treated(Treatment::WarmTo(Temperature::REFERENCE))
        .unwrap()
        .treated(Treatment::CompressTo(Pressure::ATMOSPHERE))
        .unwrap();
    let lab = solved(&lab);
    let (ph, pco2) = (format!("{}", get(&lab, "pH")), format!("{} uatm", get(&lab, "pCO2 [uatm]")));
    let with = |given: &[(&'static str, &'static str)], pairs: &[(&str, &str)]| {
        let kept: Vec<(&str, &str)> =
            WATERS[2].iter().copied().filter(|(key, _)| !given.iter().any(|(own, _)| own == key)).collect();
        state(&[&kept[..], pairs].concat())
    };
    let fugacity = [("pCO2", pco2.as_str()), ("fCO2_temperature", "25 degC")];
    let one = with(&[("alkalinity", "")], &fugacity);
    assert_relative_eq!(get(&one, "alkalinity"), get(&deep, "alkalinity"), max_relative = 1e-9);
    let both = [&fugacity[..], &[("pH", ph.as_str()), ("pH_temperature", "25 degC")]].concat();
    let both = with(&[("alkalinity", ""), ("DIC", "")], &both);
    assert_relative_eq!(get(&both, "DIC"), get(&deep, "DIC"), max_relative = 1e-9);
    assert_relative_eq!(get(&both, "pH"), get(&deep, "pH"), max_relative = 1e-9);
}

#[test]
fn constants_of_two_publications_are_said_not_to_belong_together() {
    let mixed = book().choose("K2", "Martin-Mayor 2025").unwrap();
    let warnings = solved(&sea(WATERS[1]).with_ledger(&mixed)).warnings().join("\n");
    assert!(warnings.contains("`K1` is Lueker 2000 and `K2` is Martin Mayor 2025"), "{warnings}");
    assert!(!state(WATERS[1]).warnings().join("\n").contains("belong together"));
}

#[test]
fn scales_of_ph_differ_by_what_they_count() {
    let state = state(WATERS[1]);
    let h = |scale: &str| 10_f64.powf(-get(&state, &format!("pH({scale})")));
    let bisulfate = get(&state, "m(HSO4^-)");
    let fluoride = get(&state, "m(HF(aq))");
    assert_relative_eq!(h("free"), get(&state, "m(H^+)"), max_relative = 1e-12);
    // T_S/K_S counts HSO4^- as if sulfate were undissociated throughout: one part in 10^8 of it here.
    assert_relative_eq!(h("total"), h("free") + bisulfate, max_relative = 1e-6);
    assert_relative_eq!(h("seawater"), h("total") + fluoride, max_relative = 1e-5);
    assert_eq!(get(&state, "pH"), get(&state, "pH(total)"));
    assert!((get(&state, "pH(nbs)") - get(&state, "pH(seawater)") - 0.1467).abs() < 0.02);
}

/// Without salinity the marine constants become those of pure water, at 25 degC within 0.03 in log K where they were
/// fitted to it, and within 0.25 elsewhere: Lueker and the salts of phosphate reach to salinity 19 and 5 only.
#[test]
fn the_fresh_end_is_the_freshwater_ledger() {
    let marine = book().choose("K1 K2", "Millero 2006").unwrap().choose("KF", "Dickson Riley 1979").unwrap();
    let fresh = shipped::ledger("freshwater", None).unwrap();
    let t = Temperature::REFERENCE;
    let (pressure, ph_scale) = (Pressure::ATMOSPHERE, PhScale::Total);
    let sea = Sea { salinity: 0.0, stated_salinity: None, pressure, ph_scale };
    let log_k = log_k_free(&marine, &sea, t);
    for ((name, reaction), value) in marine.reactions().zip(log_k) {
        let other = fresh.derive(&reaction.equation().to_string()).unwrap();
        let other = other.log_k_at(t).unwrap().value();
        let spread = match name {
            // Mucci fitted his own solubility of aragonite; H2S is a fit from salinity 5 up.
            "aragonite" | "KS" | "KNH4" | "KH2S" => 0.06,
            "K3P" | "KSi" => 0.04,
            _ => 0.03,
        };
        assert!((value - other).abs() < spread, "{name}: {value:.4} and {other:.4}");
    }
    let place = Place { temperature: t, salinity: 0.0, hydrostatic_bar: 0.0 };
    assert_eq!(
        place.published(marine.reaction("K1").unwrap()),
        marine.reaction("K1").unwrap().constant().unwrap().log_k.at(t).unwrap()
    );
}

#[test]
fn ph_measured_in_the_laboratory_is_brought_to_the_place() {
    let deep = state(WATERS[2]);
    // The same water in a laboratory at 25 degC and the surface.
    let lab = deep
        .sample(&[])
        .unwrap()
        .treated(Treatment::WarmTo(Temperature::REFERENCE))
        .unwrap()
        .treated(Treatment::CompressTo(Pressure::ATMOSPHERE))
        .unwrap();
    let ph = format!("{}", get(&solved(&lab), "pH"));
    let pairs: Vec<(&str, &str)> = WATERS[2]
        .iter()
        .copied()
        .filter(|(key, _)| *key != "alkalinity")
        .chain([("pH", ph.as_str()), ("pH_temperature", "25 degC")])
        .collect();
    let back = state(&pairs);
    assert_relative_eq!(get(&back, "alkalinity"), get(&deep, "alkalinity"), max_relative = 1e-10);
    assert_relative_eq!(get(&back, "pH"), get(&deep, "pH"), max_relative = 1e-10);
    assert_relative_eq!(get(&back, "temperature"), 1.5, max_relative = 1e-12);
    // Warmth takes some 0.016 a degree from its pH, 400 bar less give half of that back.
    assert!(get(&solved(&lab), "pH") < get(&deep, "pH") - 0.1);
}

/// K0, vapour pressure and fugacity against the one function of Weiss and Price (1980) for all three: 6e-4 apart.
#[test]
fn water_under_moist_air_holds_what_weiss_and_price_say() {
    use lysocline_engine::physics::gas_exchange::moist_air_solubility;
    for t in [2.0, 15.0, 30.0] {
        let text = format!("{t} degC");
        let water = [
            ("salinity", "35"),
            ("temperature", text.as_str()),
            ("xCO2", "400e-6"),
            ("alkalinity", "2300 umol/kg"),
        ];
        let co2 = get(&state(&water), "m(CO2(aq))");
        assert_relative_eq!(co2, 400e-6 * moist_air_solubility(t + 273.15, 35.0), max_relative = 7e-4);
    }
}

#[test]
fn a_mixture_conserves_what_both_ends_hold() {
    let river = Sample::read(entries(&[
        ("pH", "7.6"),
        ("alkalinity", "1.1 meq/L"),
        ("Ca", "18 mg/L"),
        ("Si", "5 mg/L"),
    ]));
    let river = solved(&river.unwrap());
    let sea = state(&[
        ("salinity", "34"),
        ("DIC", "2040 umol/kg"),
        ("alkalinity", "2280 umol/kg"),
        ("silicate", "4 umol/kg"),
    ]);
    for fraction in [0.0, 0.25, 0.8, 1.0] {
        let mixed = solved(&estuary::mixture(&river, &sea, fraction).unwrap());
        for total in [
            "alkalinity [umol/kg(solution)]",
            "DIC [umol/kg(solution)]",
            "total(Ca) [umol/kg(solution)]",
            "total(Si) [umol/kg(solution)]",
        ] {
            let expected = (1.0 - fraction) * get(&river, total) + fraction * get(&sea, total);
            assert_relative_eq!(get(&mixed, total), expected, max_relative = 1e-10);
        }
        assert_relative_eq!(get(&mixed, "salinity"), 34.0 * fraction, epsilon = 1e-12);
    }
    // At the fresh end the two ledgers give one pH: the marine constants at salinity 0 lack the activities of 2 mmol/kg.
    let fresh = solved(&estuary::mixture(&river, &sea, 0.0).unwrap());
    assert!((get(&fresh, "pH(free)") - get(&river, "pH")).abs() < 0.06);
}

#[test]
fn an_opened_sea_keeps_its_alkalinity() {
    let open = sea(WATERS[1])
        .treated(Treatment::OpenTo { gas: "CO2(g)".into(), fugacity: 560e-6 * 1.01325 })
        .unwrap();
    let open = solved(&open);
    assert_relative_eq!(get(&open, "alkalinity [umol/kg]"), 2330.0, max_relative = 1e-10);
    assert_relative_eq!(get(&open, "fCO2 [uatm]"), 560.0, max_relative = 1e-10);
    assert!(get(&open, "pH") < get(&state(WATERS[1]), "pH"));
}

#[test]
fn a_saved_ledger_computes_the_same() {
    let again = file::load("seawater", &save::to_text(&book())).unwrap_or_else(|faults| panic!("{faults:?}"));
    assert_eq!(again.digest(), book().digest());
    let there = solved(&sea(WATERS[3]).with_ledger(&again));
    assert_eq!(get(&there, "pH"), get(&state(WATERS[3]), "pH"));
}

#[track_caller]
fn refused(pairs: &[(&str, &str)], message: &str) {
    let solved =
        Sample::read_seawater(entries(pairs)).map_err(|error| error.to_string()).and_then(|sample| {
            equilibrate(&sample, None, &Settings::default()).map_err(|error| error.to_string())
        });
    let Err(error) = solved else { panic!("not refused: {pairs:?}") };
    assert!(error.contains(message), "{error}");
}

#[test]
fn what_cannot_be_is_refused_with_what_would() {
    let with = |more: &[(&'static str, &'static str)]| [&[("salinity", "35")], more].concat();
    refused(&[("DIC", "2 mmol/kg"), ("alkalinity", "2.3 mmol/kg")], "a seawater needs its `salinity`");
    refused(
        &with(&[("alkalinity", "2300 umol/kg"), ("silicate", "20 umol/kg")]),
        "`alkalinity` alone does not fix",
    );
    refused(
        &with(&[("pH", "8.1"), ("pCO2", "400 uatm"), ("pH_temperature", "25 degC")]),
        "a pH and a fugacity measured at different temperatures",
    );
    refused(&with(&[("pH", "8.1"), ("ph_scale", "sea"), ("DIC", "2 mmol/kg")]), "no scale of pH in seawater");
    refused(&with(&[("DIC", "2050"), ("pH", "8")]), "2050 mol/kg? write \"2050 umol/kg\"");
    refused(&with(&[("DIC", "10 umol/kg"), ("fCO2", "400 uatm")]), "contradict each other");
    refused(
        &with(&[("DIC", "2 mmol/kg"), ("pH", "8"), ("silicat", "2 umol/kg")]),
        "did you mean `silicate`?",
    );
    refused(&[("salinity", "400"), ("pH", "8"), ("DIC", "2 mmol/kg")], "is no seawater's");
    let plain = Sample::read(entries(&[("pH", "8"), ("alkalinity", "2 meq/L")])).unwrap();
    let error = equilibrate(&plain, Some(&book()), &Settings::default()).unwrap_err().to_string();
    assert!(error.contains("functions of salinity: write the water as `seawater"), "{error}");
    let fresh = shipped::ledger("freshwater", None).unwrap();
    let error = equilibrate(&sea(WATERS[0]), Some(&fresh), &Settings::default()).unwrap_err().to_string();
    assert!(error.contains("hold for zero ionic strength, not for seawater"), "{error}");
    let error = book().merge(&fresh, Some(true)).unwrap_err().to_string();
    assert!(error.contains("one ledger holds for seawater"), "{error}");
    let error = book().choose("K1 K2", "Millero 2005").unwrap_err().to_string();
    assert!(error.contains("Millero 2006"), "{error}");
}

#[test]
fn what_is_doubtful_is_said() {
    let warnings = state(WATERS[0]).warnings().join("\n");
    assert!(
        warnings.contains(
            "`K1 K2` hold for salinity 19 to 43 and 2 to 35 degC, and were used at salinity 8 and 14 degC"
        ) && warnings.contains("`.choose(\"K1 K2\", \"Millero 2006\")`")
            && !warnings.contains("`K1` holds"),
        "{warnings}"
    );
    assert!(state(WATERS[2]).warnings().join("\n").contains("no pressure term"));
    let with_ph = state(&[("salinity", "35"), ("pH", "8.1"), ("DIC", "2000 umol/L")]).warnings().join("\n");
    assert!(with_ph.contains("pH is on the total scale"), "{with_ph}");
    assert!(with_ph.contains("DIC` per litre by a density of 1.02476 kg/L"), "{with_ph}");
    let choices = state(WATERS[1]).choices().unwrap();
    for choice in ["K1 K2 Lueker 2000", "KF Perez Fraga 1987", "total boron Lee 2010", "total scale"] {
        assert!(choices.contains(choice), "{choices}");
    }
}
