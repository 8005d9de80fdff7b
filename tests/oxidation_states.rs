//! Elements a ledger knows in several oxidation states: what is given separately stays separate, what is given whole is
//! taken in its common state, and a water without them is not touched.

use lysocline_engine::equilibrium::{State, equilibrate};
use lysocline_engine::solve::Settings;

use crate::waters::{freshwater, get, sample, state, survey};

const MINE: [(&str, &str); 9] = [
    ("temperature", "12 degC"),
    ("pH", "3.1"),
    ("Ca", "2 mmol/kg"),
    ("Mg", "1 mmol/kg"),
    ("K", "0.1 mmol/kg"),
    ("SO4^2-", "9 mmol/kg"),
    ("F", "0.05 mmol/kg"),
    ("Al", "0.5 mmol/kg"),
    ("Si", "0.4 mmol/kg"),
];

fn mine(more: &[(&str, &str)]) -> State {
    state(&sample(&[&MINE, more].concat()))
}

#[test]
fn states_given_separately_stay_separate() {
    let state = mine(&[("Fe(II)", "2 mmol/kg"), ("Fe(III)", "1 mmol/kg"), ("Mn", "0.2 mmol/kg")]);
    let ferrous = ["Fe^2+", "FeOH^+", "FeSO4(aq)", "FeF^+"];
    let sum: f64 = ferrous.iter().map(|key| get(&state, &format!("m({key}) [mmol/kg]"))).sum();
    assert!((sum - 2.0).abs() < 1e-12, "{sum}");
    for (observable, expected) in
        [("total(Fe)", 3.0), ("total(Fe(II))", 2.0), ("total(Fe(III))", 1.0), ("total(S(VI))", 9.0)]
    {
        let total = get(&state, &format!("{observable} [mmol/kg]"));
        assert!((total - expected).abs() < 1e-9, "{observable}: {total}");
    }
    assert_eq!(
        state.warnings().iter().filter(|note| note.contains("taken as")).count(),
        0,
        "{:?}",
        state.warnings()
    );
}

#[test]
fn an_element_given_whole_is_taken_in_its_common_state() {
    let whole = mine(&[("Fe", "1 mmol/kg")]);
    let named = mine(&[("Fe(III)", "1 mmol/kg")]);
    assert_eq!(get(&whole, "m(Fe^3+)"), get(&named, "m(Fe^3+)"));
    assert!(get(&whole, "m(Fe^3+)").is_normal());
    assert!(whole.warnings().iter().any(|note| note == "Fe is taken as Fe(III)"), "{:?}", whole.warnings());

    let water = [("pH", "7"), ("Na", "5 mmol/kg")];
    let state = state(&sample(&[&water[..], &[("S", "1 mmol/kg"), ("N", "1 mmol/kg")]].concat()));
    assert!(get(&state, "m(SO4^2-) [mmol/kg]") > 0.9);
    assert!((get(&state, "m(NO3^-) [mmol/kg]") - 1.0).abs() < 1e-12);
    for note in ["S is taken as S(VI)", "N is taken as N(V)"] {
        assert!(state.warnings().iter().any(|own| own == note), "{note}: {:?}", state.warnings());
    }
}

#[test]
fn sulfide_and_ammonium_are_given_by_their_state() {
    let water = [("pH", "7.0"), ("Na", "5 mmol/kg"), ("S(-II)", "0.1 mmol/kg"), ("SO4^2-", "1 mmol/kg")];
    let state = state(&sample(&[&water[..], &[("NH4^+", "0.2 mmol/kg"), ("NO3^-", "1 mmol/kg")]].concat()));
    // At pH 7 and log K -6.99 sulfide is halved, up to the activity coefficient of HS^-.
    let ratio = get(&state, "m(HS^-)") * get(&state, "gamma(HS^-)") / get(&state, "m(H2S(aq))");
    assert!((ratio.log10() - 0.01).abs() < 1e-9, "{ratio}");
    let ammonium = get(&state, "m(NH4^+) [mmol/kg]") + get(&state, "m(NH3(aq)) [mmol/kg]");
    assert!((ammonium - 0.2).abs() < 1e-12, "{ammonium}");
}

#[test]
fn every_mineral_of_iron_manganese_and_aluminium_has_a_saturation_index() {
    let state = mine(&[
        ("Fe(II)", "2 mmol/kg"),
        ("Fe(III)", "1 mmol/kg"),
        ("Mn", "0.2 mmol/kg"),
        ("DIC", "1 mmol/kg"),
    ]);
    for mineral in [
        "rhodochrosite",
        "synthetic rhodochrosite",
        "siderite",
        "precipitated siderite",
        "melanterite",
        "ferrihydrite",
        "goethite",
        "jarosite",
        "gibbsite",
        "microcrystalline gibbsite",
        "amorphous aluminium hydroxide",
        "kaolinite",
        "alunite",
    ] {
        assert!(get(&state, &format!("SI({mineral})")).is_finite(), "{mineral}");
    }
    // Two minerals of one formula differ by their constants: 9.35 - 8.11 at 25 degC, less at 12 degC for the enthalpies.
    let apart = get(&state, "SI(gibbsite)") - get(&state, "SI(microcrystalline gibbsite)");
    assert!(
        (apart
            - (9.35 - 8.11
                + (24.5 - 22.8) * 4.184e3 / (8.314_462_618 * std::f64::consts::LN_10)
                    * (1.0 / 285.15 - 1.0 / 298.15)))
            .abs()
            < 1e-9,
        "{apart}"
    );
}

#[test]
fn water_without_them_is_computed_as_if_the_ledger_had_never_heard_of_them() {
    let foreign = ["Fe", "Mn", "Al", "P", "B", "HS^-", "NH4^+"];
    let reactions = freshwater();
    let names: Vec<String> = reactions
        .reactions()
        .filter(|(name, reaction)| {
            let touches = |symbol: &&str| {
                reaction.equation().terms().iter().any(|(species, _)| {
                    species.key() == *symbol
                        || species.composition().iter().any(|(element, _)| element.symbol() == *symbol)
                })
            };
            foreign.iter().any(touches) || name.ends_with("2(g)") && !name.starts_with('C')
        })
        .map(|(name, _)| name.to_string())
        .collect();
    assert!(names.len() > 60, "{names:?}");
    let without = names.iter().fold(freshwater(), |ledger, name| ledger.without(name).expect("listed above"));
    for water in survey().iter().take(20) {
        let whole = state(water);
        let small = equilibrate(water, Some(&without), &Settings::default()).expect("as before");
        for observable in
            ["pH", "ionic_strength", "alkalinity", "m(Ca^2+)", "m(CO3^2-)", "SI(calcite)", "SI(barite)"]
        {
            let (a, b) = (get(&whole, observable), get(&small, observable));
            assert!((a - b).abs() <= 1e-13 * a.abs(), "{observable}: {a} against {b}");
        }
    }
}
