//! Constants in conditions, as scripts meet them.

use super::*;

#[test]
fn four_papers_make_one_constant() {
    let script = include_str!("../../../../example-scripts/four-papers.rhai");
    if let Err(diagnostic) = engine().run("four-papers.rhai", script) {
        panic!("{diagnostic}\n{}", diagnostic.help.join("\n"));
    }
}

#[test]
fn unlike_conditions_refuse_to_add() {
    fails(
        r#"reaction("CO2(aq) + H2O <=> HCO3^- + H^+", -6.352)
            + reaction("HCO3^- <=> CO3^2- + H^+", #{ log_k: -9.9, ionic_strength: 0.1 })"#,
        "`CO2(aq) + H2O <=> HCO3^- + H^+` holds for zero ionic strength, `HCO3^- <=> CO3^2- + H^+` for I = 0.1 mol/kg(water): \
         convert one with `.to_ionic_strength(0.0, \"davies\")`",
        &[],
        "+",
    );
}

#[test]
fn a_trail_is_told_in_sentences() {
    let trail = r#"
        let k1 = reaction("CO2(aq) + H2O <=> HCO3^- + H^+", #{ log_k: "-6.35 +/- 0.01", source: "One (2001)" });
        let k2 = reaction("HCO3^- <=> CO3^2- + H^+", #{ log_k: "-10.33 +/- 0.02", source: "Two (2002)" });
        (k1 - k2).trail().text()"#;
    // 0.01 and 0.02 in squares: a fifth and four fifths.
    shows(
        trail,
        "\"The constant of CO2(aq) + H2O + CO3^2- <=> 2 HCO3^- is log K = 3.980 +/- 0.022 at 25 degC (molal activities). \
         It was derived from 2 stated constants. CO2(aq) + H2O <=> HCO3^- + H^+, taken once: log k = -6.35 at 25 degC, \
         standard uncertainty 0.01 [One (2001)]. HCO3^- <=> CO3^2- + H^+, reversed: log k = -10.33 at 25 degC, standard \
         uncertainty 0.02 [Two (2002)]. Of the variance of log K come 80 % from HCO3^- <=> CO3^2- + H^+, 20 % from \
         CO2(aq) + H2O <=> HCO3^- + H^+.\"",
    );
}

#[test]
fn combine_tells_how_far_routes_lie_apart() {
    let told = Captured::default();
    let options = Options { messages: Box::new(told.clone()), ..Options::default() };
    let script = r#"
        let k1 = reaction("CO2(aq) + H2O <=> HCO3^- + H^+", "-6.35 +/- 0.06");
        let k2 = reaction("HCO3^- <=> CO3^2- + H^+", "-10.33 +/- 0.08");
        let both = reaction("CO2(aq) + H2O <=> CO3^2- + 2 H^+", "-16.60 +/- 0.2");
        let k = combine("CO2(aq) + H2O <=> CO3^2- + 2 H^+", [k1, k2, both]);"#;
    ScriptEngine::new(options).run("test", script).expect("it runs");
    let text = told.text();
    assert!(
        text.ends_with(
            "2 independent routes, weighted by least variance; singly they give log K -16.680 to -16.600 at 25 degC, \
             at most 0.4 standard deviations apart\n"
        ),
        "{text}"
    );
}

#[test]
fn coefficients_that_cannot_be_counted_are_refused() {
    fails(
        r#"let a = reaction("999999937 HCO3^- <=> 999999937 CO3^2- + 999999937 H^+", -10);
           a * 999999937.0 + a"#,
        "its coefficients are too large, or have too many digits, to be counted exactly",
        &[],
        "a",
    );
}

#[test]
fn log_k_follows_pressure_by_the_volume_of_reaction() {
    let water = r#"let kw = reaction("H2O <=> H^+ + OH^-", #{ log_k: -14, volume: "-22.3 cm3/mol" });"#;
    shows(&format!(r#"{water} fmt(kw.log_k_at(#{{ pressure: "1000 bar" }}).value, ".4f")"#), "\"-13.6097\"");
    fails(
        r#"reaction("H2O <=> H^+ + OH^-", -14).log_k_at(#{ pressure: "1000 bar" })"#,
        "log K of `H2O <=> H^+ + OH^-` is known at 1 bar only",
        &["give the reaction its `volume`, in cm3/mol"],
        "log_k_at",
    );
}

#[test]
fn an_uncertain_enthalpy_counts_away_from_its_temperature() {
    let k = r#"let k = reaction("HCO3^- <=> CO3^2- + H^+", #{ log_k: "-10.33 +/- 0.02", enthalpy: "14.9 +/- 1.0 kJ/mol" });"#;
    shows(&format!("{k} k.log_k.sigma"), "0.02");
    // By hand: 1.0 (1/283.15 - 1/298.15)/(0.008314463 ln 10) = 0.009281, and 0.02 beside it.
    shows(&format!(r#"{k} fmt(k.log_k_at("10 degC").sigma, ".5f")"#), "\"0.02205\"");
    shows(&format!("{k} k.enthalpy.sigma"), "1");
}
