//! Redox equilibria against the Nernst equation by hand, and against what has to be conserved.

use lysocline_engine::chem::{Element, Species};
use lysocline_engine::equilibrium::{State, equilibrate, predominance};
use lysocline_engine::ledger::{ActivityChoice, shipped};
use lysocline_engine::physics::electrode::volts_per_pe;
use lysocline_engine::process::sweep::{Axis, sweep};
use lysocline_engine::quantity::Quantity;
use lysocline_engine::solve::Settings;
use lysocline_engine::water::{Sample, Treatment};

use crate::waters::{get, sample, state};

/// Constants of the freshwater ledger, log10 K at 25 degC of reductions.
const OXYGEN: f64 = 83.090;
const IRON: f64 = 13.02;
const SULFATE: f64 = 33.69;
const NITRATE: f64 = 119.14;
const METHANE: f64 = 38.176;

const POND: [(&str, &str); 4] =
    [("pH", "7.2"), ("Na", "3 mmol/kg"), ("Cl", "1 mmol/kg"), ("DIC", "2 mmol/kg")];

fn pond(more: &[(&str, &str)]) -> Sample {
    sample(&[&POND, more].concat())
}

fn treated(water: &Sample, treatment: Treatment) -> Sample {
    water.treated(treatment).unwrap_or_else(|error| panic!("{error}"))
}

fn open_to(water: &Sample, gas: &str, fugacity: f64) -> Sample {
    treated(water, Treatment::OpenTo { gas: gas.into(), fugacity })
}

fn held(water: &Sample, pe: f64) -> Sample {
    treated(water, Treatment::HoldPe { pe, reagent: None })
}

#[track_caller]
fn near(found: f64, expected: f64, within: f64) {
    assert!((found - expected).abs() <= within, "{found} against {expected}");
}

fn refusal(pairs: &[(&str, &str)]) -> String {
    match equilibrate(&sample(pairs), None, &Settings::default()) {
        Err(error) => error.to_string(),
        Ok(state) => panic!("pe {:?}", state.get("pe")),
    }
}

fn log_a(state: &State, species: &str) -> f64 {
    get(state, &format!("log_a({species})"))
}

#[test]
fn water_under_oxygen_has_the_pe_of_the_textbook() {
    // pe = 83.09/4 + log10(0.21)/4 - pH: 13.60 at pH 7.
    let water = open_to(&pond(&[("couples", "all")]), "O2(g)", 0.21);
    let state = state(&water);
    let expected = OXYGEN / 4.0 + 0.21_f64.log10() / 4.0 - get(&state, "pH");
    near(get(&state, "pe"), expected - 0.5 * log_a(&state, "H2O"), 1e-11);
    near(get(&state, "pe") + get(&state, "pH"), 20.603, 1e-3);
    near(get(&state, "Eh"), get(&state, "pe") * volts_per_pe(298.15), 1e-12);
    assert!(state.warnings().iter().all(|note| !note.contains("stable")), "{:?}", state.warnings());
}

#[test]
fn water_under_hydrogen_stands_at_its_other_limit() {
    let state = state(&open_to(&pond(&[("couples", "all")]), "H2(g)", 1.0));
    near(get(&state, "pe"), -get(&state, "pH"), 1e-11);
    // Everything is reduced that can be.
    assert!(get(&state, "total(C(IV))") < 1e-6 * get(&state, "total(C)"), "{}", get(&state, "total(C(IV))"));
    assert!(get(&state, "f(O2(g))") < 1e-80);
}

#[test]
fn couples_at_a_pe_obey_nernst() {
    let water =
        [("pe", "-3.5"), ("Fe", "20 umol/kg"), ("S", "1 mmol/kg"), ("N", "0.2 mmol/kg"), ("C", "2 mmol/kg")];
    let state = state(&sample(&[&[("pH", "7.1"), ("Na", "3 mmol/kg")], &water[..]].concat()));
    let (pe, ph) = (-3.5, 7.1);
    let water = log_a(&state, "H2O");
    near(get(&state, "pe"), pe, 1e-13);
    near(log_a(&state, "Fe^2+") - log_a(&state, "Fe^3+"), IRON - pe, 1e-10);
    near(log_a(&state, "HS^-") - log_a(&state, "SO4^2-"), SULFATE - 9.0 * ph - 8.0 * pe - 4.0 * water, 1e-9);
    near(log_a(&state, "NH4^+") - log_a(&state, "NO3^-"), NITRATE - 10.0 * ph - 8.0 * pe - 3.0 * water, 1e-9);
    near(
        log_a(&state, "CH4(aq)") - log_a(&state, "CO3^2-"),
        METHANE - 10.0 * ph - 8.0 * pe - 3.0 * water,
        1e-9,
    );
    // Every couple has the pe of all.
    for couple in
        ["Fe(III)/Fe(II)", "S(VI)/S(-II)", "N(V)/N(-III)", "C(IV)/C(-IV)", "O(0)/O(-II)", "H(I)/H(0)"]
    {
        near(get(&state, &format!("Eh({couple})")), get(&state, "Eh"), 1e-12);
    }
    for (element, total) in [("Fe", 20e-6), ("S", 1e-3), ("N", 0.2e-3), ("C", 2e-3)] {
        near(get(&state, &format!("total({element})")), total, 1e-13);
    }
}

#[test]
fn minerals_with_electrons_have_a_saturation_index() {
    let water = pond(&[("pe", "-3.5"), ("Fe", "20 umol/kg"), ("S", "1 mmol/kg"), ("Mn", "2 umol/kg")]);
    let state = state(&water);
    // FeS2 + 2 H+ + 2 e- = Fe2+ + 2 HS-, log K -18.479; MnO2 + 4 H+ + 2 e- = Mn2+ + 2 H2O, log K 41.58.
    let (pe, ph) = (-3.5, 7.2);
    let pyrite = log_a(&state, "Fe^2+") + 2.0 * log_a(&state, "HS^-") + 2.0 * ph + 2.0 * pe;
    near(get(&state, "SI(pyrite)"), pyrite + 18.479, 1e-10);
    let pyrolusite = log_a(&state, "Mn^2+") + 4.0 * ph + 2.0 * pe + 2.0 * log_a(&state, "H2O");
    near(get(&state, "SI(pyrolusite)"), pyrolusite - 41.58, 1e-10);
    // Without pe there is none.
    let silent = crate::waters::state(&pond(&[("Fe(II)", "20 umol/kg"), ("S(-II)", "1 mmol/kg")]));
    assert!(silent.get("SI(pyrite)").unwrap_err().to_string().contains("absent"));
    assert!(silent.get("pe").unwrap_err().to_string().contains("name some with `couples`"));
}

#[test]
fn states_given_separately_stay_separate() {
    let states = [
        ("Fe(II)", "3 umol/kg"),
        ("Fe(III)", "2 umol/kg"),
        ("S(-II)", "0.1 mmol/kg"),
        ("S(VI)", "1 mmol/kg"),
    ];
    let with_pe = state(&pond(&[&states[..], &[("pe", "2")]].concat()));
    let silent = state(&pond(&states));
    for (observable, expected) in
        [("total(Fe(II))", 3e-6), ("total(Fe(III))", 2e-6), ("total(S(-II))", 1e-4), ("total(S(VI))", 1e-3)]
    {
        near(get(&with_pe, observable), expected, 5e-14 * expected);
        near(get(&with_pe, observable), get(&silent, observable), 5e-14 * expected);
    }
    // Each couple has a potential of its own, and none of them is that of the electrode.
    let of_iron = get(&with_pe, "Eh(Fe(III)/Fe(II))");
    near(of_iron / volts_per_pe(298.15), IRON + log_a(&with_pe, "Fe^3+") - log_a(&with_pe, "Fe^2+"), 1e-10);
    near(of_iron, get(&silent, "Eh(Fe(III)/Fe(II))"), 1e-10);
    assert!((of_iron - get(&with_pe, "Eh")).abs() > 0.01);
    assert!((get(&with_pe, "Eh(S(VI)/S(-II))") - of_iron).abs() > 0.1);
}

#[test]
fn pe_from_a_couple_is_that_of_nernst() {
    let water = pond(&[
        ("pe", "Fe(III)/Fe(II)"),
        ("Fe(II)", "3 umol/kg"),
        ("Fe(III)", "2 umol/kg"),
        ("S", "1 mmol/kg"),
        ("N", "0.1 mmol/kg"),
    ]);
    let state = state(&water);
    let pe = IRON + log_a(&state, "Fe^3+") - log_a(&state, "Fe^2+");
    near(get(&state, "pe"), pe, 1e-11);
    near(get(&state, "Eh(N(V)/N(-III))"), get(&state, "Eh"), 1e-12);
    near(get(&state, "total(Fe(II))"), 3e-6, 1e-19);
    near(get(&state, "total(Fe(III))"), 2e-6, 1e-19);
    near(get(&state, "total(N)"), 1e-4, 1e-17);
}

#[test]
fn couples_in_equilibrium_take_their_pe_from_the_totals() {
    let iron = [("Fe(II)", "3 umol/kg"), ("Fe(III)", "2 umol/kg")];
    let alone = state(&pond(&iron));
    let coupled = state(&pond(&[&iron[..], &[("couples", "Fe(III)/Fe(II)")]].concat()));
    // One couple alone has nothing to exchange electrons with.
    near(get(&coupled, "Eh"), get(&alone, "Eh(Fe(III)/Fe(II))"), 1e-12);
    near(get(&coupled, "total(Fe(II))"), 3e-6, 1e-19);
    // Sulfide reduces all iron(III): 8 electrons each.
    let more = [("S(-II)", "1 umol/kg"), ("S(VI)", "1 mmol/kg"), ("couples", "all")];
    let all = state(&pond(&[&iron[..], &more].concat()));
    let electrons = |state: &State| {
        get(state, "total(Fe(II))")
            + 8.0 * (get(state, "total(S(-II))") + get(state, "total(C(-IV))"))
            + 2.0 * get(state, "m(H2(aq))")
            - 4.0 * get(state, "m(O2(aq))")
    };
    near(electrons(&all), 3e-6 + 8e-6, 1e-18);
    for couple in ["Fe(III)/Fe(II)", "S(VI)/S(-II)", "C(IV)/C(-IV)"] {
        near(get(&all, &format!("Eh({couple})")), get(&all, "Eh"), 1e-12);
    }
}

#[test]
fn at_a_given_pe_it_does_not_matter_how_the_states_were_given() {
    let given = |iron: &[(&str, &str)]| {
        let rest = [("pe", "3.0"), ("couples", "all"), ("NO3^-", "0.1 mmol/kg")];
        state(&pond(&[&rest[..], iron].concat()))
    };
    let waters = [
        given(&[("Fe(II)", "50 umol/kg")]),
        given(&[("Fe(III)", "50 umol/kg")]),
        given(&[("Fe(II)", "20 umol/kg"), ("Fe(III)", "30 umol/kg")]),
        given(&[("Fe", "50 umol/kg")]),
    ];
    for observable in ["total(Fe(II))", "total(Fe(III))", "total(N(-III))", "ionic_strength", "m(FeOH^2+)"] {
        let values = waters.each_ref().map(|water| get(water, observable));
        for value in values {
            near(value, values[0], 1e-12 * values[0].abs());
        }
    }
}

#[test]
fn a_redox_titration_runs_through() {
    let water = sample(&[
        ("pH", "3"),
        ("Na", "10 mmol/kg"),
        ("Fe", "1 mmol/kg"),
        ("S", "5 mmol/kg"),
        ("N", "1 mmol/kg"),
        ("Mn", "0.1 mmol/kg"),
        ("C", "1 mmol/kg"),
    ]);
    let water = treated(&water, Treatment::HoldPh { ph: 3.0, reagent: None });
    let axes = [Axis::new("pe", (0..=108).map(|k| -9.0 + 0.25 * f64::from(k)).collect()).unwrap()];
    let run = sweep(&water, &axes, None, &Settings::default(), &|_| {}).unwrap();
    let mut last = 0.0;
    for (k, outcome) in run.outcomes().iter().enumerate() {
        let state = outcome.as_ref().unwrap_or_else(|error| panic!("pe {}: {error}", -9.0 + 0.25 * k as f64));
        let oxidised = get(state, "total(Fe(III))");
        assert!(oxidised >= last * (1.0 - 1e-12), "{oxidised} after {last}");
        last = oxidised;
        near(get(state, "total(Fe)"), 1e-3, 1e-16);
        near(get(state, "total(S)"), 5e-3, 1e-15);
    }
    near(last, 1e-3, 1e-6);
}

#[test]
fn pe_beyond_the_stability_of_water_says_what_it_implies() {
    let high = state(&pond(&[("pe", "18"), ("Fe", "1 umol/kg")]));
    let note = high.warnings().into_iter().find(|note| note.contains("stable")).expect("a warning");
    // log f(O2) = 4 (18 + 7.2) - 83.09 = 17.71.
    assert!(
        note.starts_with("pe 18.00 lies above what water is stable at: it implies O2(g) at 5.1e17 bar"),
        "{note}"
    );
    near(get(&high, "f(O2(g))").log10(), 4.0 * (18.0 + 7.2) - OXYGEN + 2.0 * log_a(&high, "H2O"), 1e-9);
    let low = state(&pond(&[("pe", "-9.2"), ("Fe", "1 umol/kg")]));
    let note = low.warnings().into_iter().find(|note| note.contains("stable")).expect("a warning");
    // log f(H2) = 2 (9.2 - 7.2) = 4.
    assert!(note.contains("below") && note.contains("H2(g) at 1.0e4 bar"), "{note}");
    assert!(low.warnings().iter().all(|note| !note.contains("O2(g)")));
}

#[test]
fn oxygen_oxidises_what_is_in_equilibrium_with_it_and_nothing_else() {
    let iron = [("Fe(II)", "100 umol/kg"), ("O2(aq)", "10 umol/kg")];
    let apart = state(&pond(&iron));
    near(get(&apart, "total(Fe(II))"), 1e-4, 1e-18);
    near(get(&apart, "m(O2(aq))"), 1e-5, 1e-18);
    // 4 Fe(II) an O2.
    let coupled = state(&pond(&[&iron[..], &[("couples", "all")]].concat()));
    near(get(&coupled, "total(Fe(III))"), 4e-5 - 8.0 * get(&coupled, "total(C(-IV))"), 1e-15);
    assert!(get(&coupled, "m(O2(aq))") < 1e-20);
}

#[test]
fn electrons_are_conserved_by_treatments() {
    let water = pond(&[
        ("couples", "all"),
        ("Fe(II)", "100 umol/kg"),
        ("S(-II)", "1 umol/kg"),
        ("S(VI)", "1 mmol/kg"),
        ("NO3^-", "3 umol/kg"),
    ]);
    let electrons = |state: &State| {
        let total = |what: &str| get(state, &format!("all({what})"));
        total("Fe(II)") + 8.0 * (total("S(-II)") + total("N(-III)") + total("C(-IV)")) + 2.0 * total("H2(aq)")
            - 4.0 * total("O2(aq)")
    };
    let before = state(&water);
    near(electrons(&before), 1e-4 + 8e-6, 1e-17);
    let warmed =
        treated(&water, Treatment::WarmTo(lysocline_engine::units::Temperature::from_celsius(5.0).unwrap()));
    near(electrons(&state(&warmed)), 1e-4 + 8e-6, 1e-17);
    let rusting = treated(&warmed, Treatment::Allow { solid: "ferrihydrite".into(), above: 0.0 });
    near(electrons(&state(&rusting)), 1e-4 + 8e-6, 1e-17);
    // Air gives electrons up: four a mole of oxygen.
    let aired = state(&open_to(&rusting, "O2(g)", 0.2));
    near(electrons(&aired) + 4.0 * get(&aired, "added(O2(g))"), 1e-4 + 8e-6, 1e-16);
    assert!(get(&aired, "n(ferrihydrite)") > 9e-5);
    assert!(get(&aired, "pH") < get(&before, "pH") - 0.05);
    // What an equilibrium left goes on with its couples.
    let again = state(&before.sample(&[]).unwrap());
    near(get(&again, "pe"), get(&before, "pe"), 1e-8);
    near(electrons(&again), 1e-4 + 8e-6, 1e-17);
}

#[test]
fn alkalinity_is_met_though_couples_move_protons() {
    let water = |ph: (&str, &str)| {
        sample(&[
            ph,
            ("alkalinity", "3 meq/kg"),
            ("pe", "-4.5"),
            ("S", "1 mmol/kg"),
            ("N", "0.3 mmol/kg"),
            ("Na", "2 mmol/kg"),
        ])
    };
    for other in [("pH", "7.0"), ("DIC", "2.9 mmol/kg"), ("fCO2", "0.02 bar")] {
        let state = state(&water(other));
        near(get(&state, "alkalinity"), 3e-3, 1e-15);
        near(get(&state, "total(S)"), 1e-3, 1e-16);
        near(get(&state, "pe"), -4.5, 1e-12);
        let share = get(&state, "total(S(-II))") / 1e-3;
        assert!(share > 1e-4 && share <= 1.0, "{other:?}: {share}");
    }
    let neutral = state(&sample(&[
        ("pH", "electroneutral"),
        ("pe", "-4.5"),
        ("S", "1 mmol/kg"),
        ("Na", "2.5 mmol/kg"),
        ("Fe", "1 mmol/kg"),
        ("Cl", "2 mmol/kg"),
    ]));
    near(get(&neutral, "charge_misfit"), 0.0, 1e-15);
}

/// Each stated uncertainty moves the answer as the sensitivity says.
#[test]
fn uncertainties_come_through() {
    let water = |pe: f64, ph: f64| {
        let (pe, ph) = (format!("{pe} +/- 0.1"), format!("{ph} +/- 0.05"));
        pond(&[("pe", &pe), ("pH", &ph), ("Fe", "50 umol/kg"), ("S", "1 mmol/kg")])
            .but([("pH".to_string(), Some(lysocline_engine::named::Value::Text(ph.clone())))].into())
            .unwrap()
    };
    for observable in ["total(Fe(III))", "log_a(HS^-)", "Eh", "SI(pyrite)", "Eh(S(VI)/S(-II))", "f(H2(g))"] {
        let of = |pe: f64, ph: f64| get(&state(&water(pe, ph)), observable);
        let step = 1e-4;
        let by_pe = (of(3.0 + step, 7.0) - of(3.0 - step, 7.0)) / (2.0 * step);
        let by_ph = (of(3.0, 7.0 + step) - of(3.0, 7.0 - step)) / (2.0 * step);
        let answer = state(&water(3.0, 7.0)).get(observable).unwrap();
        let of_input = |label: &str| -> f64 {
            let parts = answer.parts().iter().filter(|part| part.input.label() == label);
            parts.map(|part| part.sensitivity).sum()
        };
        let size = by_pe.abs().max(by_ph.abs());
        near(of_input("pe"), by_pe, 1e-5 * size);
        near(of_input("pH"), by_ph, 1e-5 * size);
    }
}

#[test]
fn uncertainty_of_potential_temperature_and_couple_comes_through() {
    let parts = |answer: &Quantity, label: &str| -> f64 {
        answer.parts().iter().filter(|part| part.input.label() == label).map(|part| part.sensitivity).sum()
    };
    let at = |eh: f64, t: f64, observable: &str| {
        let (eh, t) = (format!("{eh} +/- 0.01 V"), format!("{t} +/- 0.5 degC"));
        state(&pond(&[("Eh", &eh), ("temperature", &t), ("Fe", "50 umol/kg"), ("NO3^-", "1 mmol/kg")]))
            .get(observable)
            .unwrap()
    };
    for observable in ["pe", "log_a(Fe^3+)", "Eh(Fe(III)/Fe(II))"] {
        let answer = at(0.2, 25.0, observable);
        let by_eh = (at(0.2001, 25.0, observable).value() - at(0.1999, 25.0, observable).value()) / 2e-4;
        near(parts(&answer, "Eh"), by_eh, 1e-5 * by_eh.abs().max(1.0));
        let by_t = (at(0.2, 25.01, observable).value() - at(0.2, 24.99, observable).value()) / 0.02;
        near(parts(&answer, "temperature"), by_t, 2e-4 * by_t.abs().max(0.01));
    }
    let of_couple = |iron: f64| {
        let iron = format!("{iron} +/- 0.1 umol/kg");
        let water = [
            ("pe", "Fe(III)/Fe(II)"),
            ("Fe(II)", "3 umol/kg"),
            ("Fe(III)", &iron),
            ("N", "0.1 mmol/kg"),
            ("SO4^2-", "2 mmol/kg"),
        ];
        state(&pond(&water)).get("log_a(NH4^+)").unwrap()
    };
    let by_iron = (of_couple(2.001).value() - of_couple(1.999).value()) / 0.002;
    near(parts(&of_couple(2.0), "Fe(III)"), by_iron, 1e-5 * by_iron.abs());
}

#[test]
fn alkalinity_with_couples_keeps_its_sensitivities() {
    let of = |alkalinity: f64| {
        let alkalinity = format!("{alkalinity} +/- 0.1 meq/kg");
        let water = [
            ("alkalinity", alkalinity.as_str()),
            ("DIC", "2.9 mmol/kg"),
            ("pe", "-4.5"),
            ("S", "1 mmol/kg"),
            ("Na", "2 mmol/kg"),
        ];
        state(&sample(&water)).get("log_a(HS^-)").unwrap()
    };
    let numeric = (of(3.001).value() - of(2.999).value()) / 0.002;
    let answer = of(3.0);
    let part = answer.parts().iter().find(|part| part.input.label() == "alkalinity").unwrap();
    near(part.sensitivity, numeric, 1e-4 * numeric.abs());
}

#[test]
fn a_reagent_brings_a_pe() {
    let water = pond(&[("couples", "all"), ("Fe(II)", "100 umol/kg")]);
    let held = state(&treated(&water, Treatment::HoldPe { pe: 1.0, reagent: Some("O2".into()) }));
    near(get(&held, "pe"), 1.0, 1e-10);
    let used = get(&held, "added(O2)");
    let left = get(&held, "total(Fe(II))");
    near(4.0 * used, 1e-4 - left - 8.0 * get(&held, "total(C(-IV))"), 1e-12);
}

#[test]
fn what_cannot_be_done_says_so() {
    let with = |more: &[(&str, &str)]| refusal(&[&POND, more].concat());
    let message = with(&[("couples", "Fe(III)/Fe(I)"), ("Fe", "1 umol/kg")]);
    assert_eq!(
        message,
        "`couples`: the ledger has no reaction for the couple `Fe(III)/Fe(I)`; did you mean `Fe(III)/Fe(II)`?"
    );
    let message = with(&[("couples", "Cr(VI)/Cr(III)")]);
    assert!(message.contains("there are `C(IV)/C(-IV)`") || message.contains("did you mean"), "{message}");
    let message = with(&[("pe", "Fe(III)/Fe(II)"), ("Fe(II)", "1 umol/kg")]);
    assert!(message.starts_with("`pe`: to take it from Fe(III)/Fe(II) both have to be given"), "{message}");
    let message = with(&[("pe", "Fe(III)/Fe(II)"), ("Fe(II)", "1 umol/kg"), ("Fe(III)", "0 umol/kg")]);
    assert!(message.starts_with("`pe`: Fe(III)/Fe(II) gives no pe"), "{message}");
    // An element whose states no reaction relates.
    let ledger = shipped::ledger("freshwater", None).unwrap().without("NO3^-/NH4^+").unwrap();
    let water = pond(&[("pe", "3"), ("N", "1 mmol/kg")]);
    let error = equilibrate(&water, Some(&ledger), &Settings::default()).unwrap_err().to_string();
    assert!(error.starts_with("`N`: the ledger knows 2 oxidation states of N and no reaction"), "{error}");
}

#[test]
fn pe_is_held_in_a_water_that_said_nothing_of_it() {
    let water = pond(&[("Fe", "50 umol/kg")]);
    near(get(&state(&water), "total(Fe(III))"), 5e-5, 1e-18);
    for pe in [-4.0, 2.0, 6.0, 12.0] {
        let found = state(&held(&water, pe));
        near(get(&found, "pe"), pe, 1e-12);
        near(log_a(&found, "Fe^2+") - log_a(&found, "Fe^3+"), IRON - pe, 1e-10);
        near(get(&found, "total(Fe)"), 5e-5, 1e-17);
    }
}

/// Boundaries of the iron diagram at 10 umol/kg, by hand from log K: Fe(III)/Fe(II) at pe 13.02 in acid, ferrihydrite
/// (log K as the ledger has it, all ideal) against Fe^2+ at pe = 13.02 + log K - 3 pH - log a(Fe^2+).
#[test]
fn fields_of_the_iron_diagram_meet_where_they_should() {
    let iron = Element::from_symbol("Fe").unwrap();
    let water = sample(&[("pH", "7"), ("Fe", "10 umol/kg")]);
    let ledger = shipped::ledger("freshwater", None).unwrap().with_activity(ActivityChoice::Ideal);
    let field = |pe: f64, ph: f64| {
        let found =
            predominance::at(&water, iron, (pe, ph), &["ferrihydrite"], Some(&ledger), &Settings::default());
        found.unwrap_or_else(|error| panic!("pe {pe}, pH {ph}: {error}"))
    };
    assert_eq!(field(12.95, 0.5).species.key(), "Fe^2+");
    assert_eq!(field(13.09, 0.5).species.key(), "Fe^3+");
    let solubility = ledger.reaction("ferrihydrite").unwrap();
    assert_eq!(
        solubility.equation().coefficient(&Species::parse("Fe(OH)3(ferrihydrite)").unwrap()),
        (-1).into()
    );
    let constant = solubility.log_k().unwrap().value();
    // Half of the iron dissolved as Fe^2+ at pH 6.
    let boundary = IRON + constant - 3.0 * 6.0 - 5e-6_f64.log10();
    assert_eq!(field(boundary - 0.1, 6.0).species.key(), "Fe^2+");
    let above = field(boundary + 0.1, 6.0);
    assert_eq!(above.species.mineral_name(), Some("ferrihydrite"));
    assert!(above.share > 0.5 && above.share < 0.7, "{}", above.share);
    // All over the diagram there is an answer.
    for k in 0..28 {
        for ph in 0..14 {
            field(-9.0 + f64::from(k), 0.5 + f64::from(ph));
        }
    }
}

/// A dose brings its electrons along: hydrogen sulfide eight, as much as two oxygen take up.
#[test]
fn doses_and_mixtures_carry_their_electrons() {
    let dose = |water: &Sample, reagent: &str, moles: &str| {
        let value = lysocline_engine::named::quantity(
            "amount",
            lysocline_engine::named::Value::Text(moles.into()),
            lysocline_engine::units::Kind::Amount,
        )
        .unwrap();
        let amount = lysocline_engine::water::concentration::amount(
            &lysocline_engine::water::Analyte::parse("S(-II)").unwrap(),
            &value,
        )
        .unwrap();
        treated(water, Treatment::Dose(lysocline_engine::water::Dose { reagent: reagent.into(), amount }))
    };
    let water = pond(&[
        ("couples", "all"),
        ("SO4^2-", "1 mmol/kg"),
        ("O2(aq)", "0.2 mmol/kg"),
        ("Fe(III)", "1 umol/kg"),
    ]);
    let electrons = |state: &State| {
        let total = |what: &str| get(state, &format!("total({what})"));
        total("Fe(II)") + 8.0 * (total("S(-II)") + total("C(-IV)")) + 2.0 * total("H2(aq)")
            - 4.0 * total("O2(aq)")
    };
    near(electrons(&state(&water)), -8e-4, 1e-16);
    let sulfide = dose(&water, "H2S", "0.15 mmol/kg");
    near(electrons(&state(&sulfide)), -8e-4 + 12e-4, 1e-16);
    assert!(get(&state(&water), "pe") > 13.0 && get(&state(&sulfide), "pe") < 0.0);
    // Half of the oxic water with half of the reduced one.
    let mixed = Sample::mixed(&[(water.clone(), 0.5), (sulfide.clone(), 0.5)]).unwrap();
    near(electrons(&state(&mixed)), -8e-4 + 6e-4, 1e-15);
    assert!(get(&state(&mixed), "pe") > 12.0);
}
