//! What the engine says to input that is wrong: the place, what is wrong, and what would have been right.

use std::collections::BTreeMap;

use lysocline_engine::chem::Reaction;
use lysocline_engine::equilibrium::equilibrate;
use lysocline_engine::ledger::shipped;
use lysocline_engine::named::{Named, Value};
use lysocline_engine::solve::Settings;
use lysocline_engine::units::{Pressure, Temperature};
use lysocline_engine::water::{Sample, Treatment};

use crate::waters::{entries, freshwater, get, sample, state};

#[track_caller]
fn reaction(equation: &str, options: &[(&str, &str)], message: &str) {
    let error = Reaction::read(equation, None, Named::new(entries(options)), None).unwrap_err();
    assert_eq!(error.to_string(), message);
}

/// A reaction that is right but for one option.
#[track_caller]
fn option(key: &str, value: &str, message: &str) {
    reaction("H2O <=> H^+ + OH^-", &[("log_k", "-14"), (key, value)], message);
}

#[track_caller]
fn analysis(pairs: &[(&str, &str)], message: &str) {
    assert_eq!(Sample::read(entries(pairs)).unwrap_err().to_string(), message);
}

/// A water that is right but for one key.
#[track_caller]
fn key(key: &str, value: &str, message: &str) {
    analysis(&[("pH", "7"), (key, value)], message);
}

#[track_caller]
fn water(pairs: &[(&str, &str)], treatments: &[Treatment], message: &str) {
    let treated =
        treatments.iter().try_fold(sample(pairs), |sample, treatment| sample.treated(treatment.clone()));
    let refused = match treated {
        Ok(sample) => equilibrate(&sample, None, &Settings::default()).unwrap_err().to_string(),
        Err(error) => error.to_string(),
    };
    assert_eq!(refused, message);
}

const DILUTE: &[(&str, &str)] = &[("pH", "7"), ("DIC", "1 mmol/kg"), ("Ca", "1 mmol/kg")];

#[track_caller]
fn asked(observable: &str, message: &str) {
    assert_eq!(state(&sample(DILUTE)).get(observable).unwrap_err().to_string(), message);
}

#[track_caller]
fn warns(pairs: &[(&str, &str)], treatments: &[Treatment], warnings: &[&str]) {
    let treated =
        treatments.iter().try_fold(sample(pairs), |sample, treatment| sample.treated(treatment.clone()));
    assert_eq!(state(&treated.unwrap()).warnings(), warnings);
}

fn open_to(gas: &str, fugacity: f64) -> Treatment {
    Treatment::OpenTo { gas: gas.into(), fugacity }
}

fn saturate(solid: &str, index: f64) -> Treatment {
    Treatment::Saturate { solid: solid.into(), index }
}

fn hold_ph(ph: f64, reagent: Option<&str>) -> Treatment {
    Treatment::HoldPh { ph, reagent: reagent.map(str::to_string) }
}

#[test]
fn equations() {
    reaction(
        "CO2(aq) <=> HCO3^- + H^+",
        &[("log_k", "-6.35")],
        "`CO2(aq) <=> HCO3^- + H^+` is not balanced: the left side is short of 2 H, the left side is short of 1 O; \
         add `H2O` to the left side",
    );
    reaction("Xx^2+ + H2O <=> XxOH^+ + H^+", &[], "`Xx` in `Xx^2+` is no element; did you mean `Xe`?");
    reaction("H2O <=> H+ + OH-", &[], "`H+`: write the charge as `H^+`");
    reaction("H2O <=> H2O", &[], "nothing is left of the equation: its species cancel");
    reaction(
        "0 H2O <=> H^+ + OH^-",
        &[],
        "`0` is no coefficient: write `2`, `0.5` or `1/2` before the formula",
    );
}

#[test]
fn coefficients_beyond_counting() {
    let message = "its coefficients are too large, or have too many digits, to be counted exactly";
    let most = i64::MAX;
    reaction(&format!("{most} H2O <=> {most} H^+ + {most} OH^-"), &[], message);
    reaction("1/999999937 H2O + 1/999999893 H2O <=> 1/999999929 H^+ + OH^-", &[], message);
    let doubled = Reaction::stoichiometry("H2O <=> H^+ + OH^-").unwrap();
    let mut error = Ok(doubled);
    for _ in 0..10 {
        error = error.and_then(|reaction: Reaction| reaction.times(1_000_000.into()));
    }
    assert_eq!(error.unwrap_err().to_string(), message);
}

#[test]
fn constants() {
    option("log_q", "1", "unknown key `log_q`; did you mean `log_k`?");
    option("pk", "14", "`log_k` and `pk` state the constant more than once: keep one");
    option(
        "enthalpy",
        "13.3 kcal/mool",
        "`enthalpy`: unknown unit `mool` (did you mean `kcal/mol`?); units of energy: kJ/mol, J/mol, kcal/mol, cal/mol",
    );
    option(
        "enthalpy",
        "13.3 mg/L",
        "`enthalpy`: `mg/L` is no unit of energy; units of energy: kJ/mol, J/mol, kcal/mol, cal/mol",
    );
    option("sigma", "-0.1", "`sigma` is a standard uncertainty and cannot be negative: -0.1");
    option(
        "temperature",
        "-300 degC",
        "`temperature`: a temperature of -300 degC is below absolute zero, -273.15 degC",
    );
    option("gas_standard", "1 psi", "`1 psi` is no gas standard: it is `1 bar` or `1 atm`");
    option(
        "provenance",
        "guessed",
        "`guessed` is no provenance: it is `read`, `computed`, `memory` or `stated`",
    );
    reaction("H2O <=> H^+ + OH^-", &[("k", "0")], "`k` must be above zero");
    reaction("H2O <=> H^+ + OH^-", &[("log_k", "1e400")], "`log_k`: is no finite number");
}

#[test]
fn conditions_of_constants() {
    option("pH_scale", "total", "unknown key `pH_scale`; did you mean `ph_scale`?");
    option(
        "ph_scale",
        "totl",
        "`totl` is no scale of pH: the scales are `free`, `total`, `seawater`, `nbs` and `activity`; did you mean `total`?",
    );
    option(
        "ph_scale",
        "total",
        "the total scale needs the solution the constant was measured in: give `ionic_strength` or `medium`",
    );
    option("medium", "seawater", "`medium: \"seawater\"` needs its `salinity`, such as 35");
    option("salinity", "35 PSU", "`salinity` belongs to `medium: \"seawater\"`: give that too");
    option("salinity", "35 g/kg", "`salinity` is practical salinity; write `35` or `\"35 PSU\"`");
    option(
        "medium",
        "0.7 mol/kg brine",
        "`0.7 mol/kg brine` is no medium: write \"0.7 mol/kg NaCl\" (a salt of common ions), or \"seawater\" with its \
         `salinity`",
    );
    option("ionic_strength", "-0.1 mol/kg", "an ionic strength of -0.1 is negative");
    option(
        "ionic_strength",
        "4 g/kg",
        "an ionic strength or salt is given in `mol/kg` (of water) or `mol/L`, not in `g/kg`",
    );
    option(
        "ionic_strength",
        "0.1 mol/L",
        "the medium is stated per litre: say whether the constant is, too, with `basis: \"molar\"` or `basis: \"molal\"`",
    );
    option(
        "basis",
        "molall",
        "`molall` is no basis: the bases are `molal`, `molar`, `pressure` and `concentration`; did you mean `molal`?",
    );
    option("basis", "pressure", "`basis: \"pressure\"` is for gases, and `H2O <=> H^+ + OH^-` has none");
    option(
        "sigma_of",
        "95 %",
        "`sigma_of` says how wide the stated uncertainty is: give `sigma`, or `+/-` with the value",
    );
    option(
        "sigma_of",
        "95.6 %",
        "`95.6 %` is no coverage of an uncertainty: known are `68 %`, `68.27 %`, `90 %`, `95 %`, `95.45 %`, `99 %`, \
         `99.73 %` and `50 %`",
    );
    reaction(
        "HCO3^- <=> CO3^2- + H^+",
        &[("k", "1e-9 bar")],
        "`k` in `bar` does not fit `HCO3^- <=> CO3^2- + H^+`, whose exponents demand `mol/kg`, `mol/L`, `mol/kg(water)` and \
         `mol/kg(solution)`",
    );
}

#[test]
fn analyses() {
    key("Ca", "-1 mg/L", "`Ca` is negative: an amount is zero or more");
    key("DIC", "-2 mmol/L", "`DIC` is negative: an amount is zero or more");
    key("Ca", "40", "`Ca`: 40 mol/kg? write \"40 mg/L\"");
    key("Ca", "40 mg/L as Mg", "`Ca`: `as Mg` has no Ca: write it as something that holds it");
    key(
        "Ca",
        "2 meq/L",
        "`Ca`: equivalents of Ca need its charge: write the ion as the key, such as `Ca^2+`, or give moles",
    );
    key("Xx", "40 mg/L", "`Xx` is no element, oxidation state or species; did you mean `Xe`?");
    key("NaCl", "40 mg/L", "`NaCl(aq)` holds Na and Cl: give each of them as an amount of its own");
    key(
        "HCO3^-",
        "100 mg/L",
        "`HCO3^-` is not measured as such: give `alkalinity` or `DIC`, and `pH` or `fCO2`",
    );
    key("alkalinty", "2 meq/L", "unknown key `alkalinty`; did you mean `alkalinity`?");
    key(
        "alkalinity",
        "100 mg/L",
        "`alkalinity`: a mass of alkalinity says not of what: write `mg/L as CaCO3` or `mg/L as HCO3^-`",
    );
    key(
        "temperature",
        "20 bar",
        "`temperature`: `bar` is no unit of temperature; units of temperature: degC, K, degF",
    );
    key(
        "pressure",
        "-1 bar",
        "`pressure`: a pressure of -1 bar is not possible: pressures are absolute, 0 bar or more",
    );
    key("density", "10 kg/L", "`density` is 10 kg/L, which no water has");
    key(
        "pe",
        "40",
        "`pe` amounts to pe 40.0000, which lies outside -20 to 30: water is stable from about -10 to 21",
    );
    key(
        "ORP",
        "0.2",
        "`ORP` needs the reference electrode it was read against: give `electrode`, one of `Ag/AgCl saturated KCl`, \
         `Ag/AgCl 3.5 mol/L KCl`, `Ag/AgCl 3 mol/L KCl` and `calomel saturated KCl`, or its potential against the hydrogen \
         electrode, \"0.21 V\"; a value against that electrode itself is `Eh`",
    );
    key(
        "pH_temperature",
        "20 degC",
        "`pH_temperature` is not read here: give pH as it is at the sample's temperature; `seawater(#{ … })` takes both",
    );
    key("make_up", "Na", "`make_up` names `Na`, which was not given: none were");
    analysis(
        &[("pH", "electroneutral"), ("Na", "1 mmol/L"), ("make_up", "Na")],
        "`pH: \"electroneutral\"` and `make_up: \"Na\"` both make the charges add up: keep one",
    );
    analysis(&[("pH", "27")], "pH 27 lies outside -2 to 17");
    analysis(
        &[("pH", "electroneutral"), ("alkalinity", "2 meq/L"), ("Na", "2 mmol/L")],
        "`pH: \"electroneutral\"` fixes `alkalinity` as well, as the charge of the other ions, and leaves the carbon \
         open: give `DIC` or `fCO2` in its place",
    );
    key(
        "temperature",
        "2000",
        "`temperature`: no water is liquid at 2000 degC: give one from -50 degC to 373.946 degC, its critical point",
    );
    key(
        "pressure",
        "1e6 bar",
        "`pressure`: no water is liquid at 1000000 bar: give one up to 10000 bar, absolute",
    );
    analysis(&[("pCO2", "0 uatm")], "`pCO2` must be above zero");
    analysis(
        &[("pH", "7"), ("alkalinity", "2 meq/L"), ("DIC", "2 mmol/L")],
        "`pH`, `alkalinity` and `DIC` are more than fix the water: name two, as in `from: [\"pH\", \"alkalinity\"]`; \
         the others become misfits",
    );
}

#[test]
fn units_of_another_kind_name_the_right_ones() {
    for (value, start) in [
        ("40 mg/LL", "`Ca`: unknown unit `LL` (did you mean `mg/L`?); units of amount: mol/kg, mmol/kg, "),
        ("40 bar", "`Ca`: `bar` is no unit of amount; units of amount: mol/kg, mmol/kg, "),
    ] {
        let message = Sample::read(entries(&[("Ca", value)])).unwrap_err().to_string();
        assert!(message.starts_with(start), "{message}");
    }
}

#[test]
fn values_that_are_no_numbers() {
    for (value, message) in [
        (Value::Number(f64::NAN), "`Ca`: is no finite number"),
        (Value::Number(f64::INFINITY), "`Ca`: is no finite number"),
        (Value::Flag(true), "`Ca`: takes amount, not true or false"),
    ] {
        let refused = Sample::read(BTreeMap::from([("Ca".to_string(), value)])).unwrap_err();
        assert!(refused.to_string() == message || refused.to_string().contains("mol/kg?"), "{refused}");
    }
}

#[test]
fn waters_that_are_not_fixed_or_contradict_themselves() {
    let give = "give pH, or two of `pH`, `alkalinity`, `DIC` and `fCO2`, or `pH: \"electroneutral\"`";
    water(&[("Ca", "1 mmol/kg")], &[], &format!("nothing fixes the acid-base state of the sample: {give}"));
    water(
        &[("DIC", "1 mmol/kg")],
        &[],
        &format!("`DIC` alone does not fix the acid-base state of the sample: {give}"),
    );
    water(
        &[("DIC", "1 mmol/kg"), ("fCO2", "1 bar")],
        &[],
        "DIC and fCO2 of the sample contradict each other: at this fugacity CO2 alone holds more carbon than that",
    );
    water(
        &[("pH", "7"), ("Pb", "1 umol/kg")],
        &[],
        "`Pb`: the ledger has no species of Pb; give it one with `.with_reaction`",
    );
}

#[test]
fn treatments() {
    water(DILUTE, &[open_to("CO2(g)", 0.0)], "the fugacity of `CO2(g)` must be above zero, not 0 bar");
    water(
        DILUTE,
        &[open_to("N2(g)", 1.0)],
        "the ledger has no mineral or gas `N2(g)`; did you mean `H2(g)`?",
    );
    water(DILUTE, &[open_to("calcite", 1.0)], "`calcite`: CaCO3(calcite) is no gas");
    water(DILUTE, &[saturate("CO2(g)", 0.0)], "`CO2(g)`: CO2(g) is no solid");
    water(
        DILUTE,
        &[saturate("calcit", 0.0)],
        "the ledger has no mineral or gas `calcit`; did you mean `calcite`?",
    );
    water(
        DILUTE,
        &[saturate("calcite", f64::NAN)],
        "the saturation index of `calcite` must be a finite number",
    );
    water(
        DILUTE,
        &[saturate("calcite", 0.0), saturate("aragonite", 0.0)],
        "`aragonite` cannot be fixed beside `calcite`: together they fix all it depends on already; leave one of them out",
    );
    water(
        DILUTE,
        &[
            open_to("CO2(g)", 1.0),
            hold_ph(9.0, None),
            saturate("portlandite", 0.0),
            Treatment::Allow { solid: "calcite".into(), above: 0.0 },
        ],
        "`calcite` would form without end: its surroundings supply all it is made of and keep it supersaturated",
    );
    water(
        DILUTE,
        &[hold_ph(2.0, Some("NaOH"))],
        "no amount of `NaOH` up to 20 mol/kg(water) brings the water to pH 2: the nearest is pH 7.00",
    );
    water(
        DILUTE,
        &[hold_ph(9.0, Some("Na^+"))],
        "`Na^+`: a reagent is a neutral substance, and this has charge 1",
    );
    water(DILUTE, &[hold_ph(9.0, Some("PbO"))], "`PbO`: the ledger has no species of Pb");
}

#[test]
fn observables() {
    asked("ph", "no observable `ph`; did you mean `pH`?");
    asked("SI", "`SI` is asked as `SI(calcite)`");
    asked("SI(calcit)", "`SI(calcit)`: the ledger has no mineral or gas `calcit`; did you mean `calcite`?");
    asked("SI(gypsum)", "`SI(gypsum)`: absent, since what it is made of is not in the water");
    asked("m(calcite)", "`m(calcite)`: CaCO3(calcite) is no solute");
    asked("f(calcite)", "`f(calcite)`: CaCO3(calcite) is no gas");
    asked("m(Ca^2+) [mmol/kgg]", "`m(Ca^2+) [mmol/kgg]`: unknown unit `kgg` (did you mean `mmol/kg`?)");
    asked("alkalinity [mg/L]", "`alkalinity`: a mass of it says not of what: ask for `mg/L as CaCO3`");
    asked("pH [mV]", "`pH`: `1` cannot be turned into `mV`: they measure different things");
}

#[test]
fn nothing_is_nothing_and_not_less() {
    let total = get(&state(&sample(DILUTE)), "total(Mg)");
    assert!(total == 0.0 && total.is_sign_positive());
}

#[test]
fn ledgers() {
    let ledger = freshwater();
    let message = |changed: Result<_, lysocline_engine::ledger::LedgerError>| {
        changed.map(|_: lysocline_engine::ledger::Ledger| ()).unwrap_err().to_string()
    };
    let aragonite = ledger.reaction("aragonite").unwrap();
    assert_eq!(
        message(ledger.without("calcit")),
        "the ledger has no reaction `calcit`; did you mean `calcite`?"
    );
    assert_eq!(
        message(ledger.with_reaction("calcite", aragonite)),
        "the ledger has a reaction `calcite` already: use `.replace(\"calcite\", …)`, or another name"
    );
    assert_eq!(
        ledger.derive("PbS(galena) <=> Pb^2+ + S^2-").unwrap_err().to_string(),
        "`PbS(galena) <=> Pb^2+ + S^2-` cannot be reached: no combination of the constants accounts for \
         `PbS(galena)`, `Pb^2+` and `S^2-`"
    );
    assert_eq!(
        shipped::ledger("freshwatr", None).unwrap_err().to_string(),
        "no ledger `freshwatr` is shipped: there are `formation`, `freshwater`, `seawater` and `sorption`; did you mean `freshwater`?"
    );
}

/// What cannot be met, in the user's names: surroundings that contradict each other, solutes without end, slips.
#[test]
fn surroundings_that_no_water_meets() {
    let water_of = |treatments: &[Treatment], message: &str| {
        water(
            &[("pH", "7"), ("alkalinity", "2 meq/kg"), ("Ca", "1 mmol/kg"), ("Mg", "1 mmol/kg")],
            treatments,
            message,
        );
    };
    water_of(
        &[
            open_to("CO2(g)", 4e-4),
            saturate("calcite", 0.0),
            saturate("gypsum", 0.0),
            saturate("portlandite", 0.0),
        ],
        "`portlandite` cannot be fixed beside `CO2(g)`, `calcite` and `gypsum`: together they fix all it depends on \
         already; leave one of them out",
    );
    water_of(
        &[open_to("CO2(g)", 1e9)],
        "the water is beyond what an aqueous model describes: `CO2(aq)` would reach 3.4e7 mol/kg(water); its constants \
         hold for water as the solvent",
    );
    water_of(
        &[saturate("calcite", 1e5)],
        "a saturation index of 100000 for `calcite` lies outside -50 to 50: it is log10 of the saturation ratio, 0 at \
         equilibrium",
    );
    water_of(
        &[Treatment::WarmTo(Temperature::from_celsius(2000.0).unwrap())],
        "`temperature`: no water is liquid at 2000 degC: give one from -50 degC to 373.946 degC, its critical point",
    );
    water_of(
        &[Treatment::CompressTo(Pressure::from_bar(2e4).unwrap())],
        "`pressure`: no water is liquid at 20000 bar: give one up to 10000 bar, absolute",
    );
    water_of(
        &[Treatment::Concentrate(1e9)],
        "the water is beyond what an aqueous model describes: no ionic strength up to 1000 mol/kg(water) agrees with the \
         composition that it implies; its constants hold for water as the solvent",
    );
}

/// A total of zero takes the component out, and what is made of it is absent; the rest is as if it had not been given.
#[test]
fn a_total_of_zero_is_an_absent_component() {
    let (without, zero) = (sample(&[("pH", "7"), ("DIC", "1 mmol/kg")]), ("Ca", "0"));
    let with = state(&sample(&[("pH", "7"), ("DIC", "1 mmol/kg"), zero]));
    let present = with.converged().ln_c.iter().copied().filter(|ln_c| ln_c.is_finite());
    assert_eq!(present.collect::<Vec<_>>(), state(&without).converged().ln_c);
    assert_eq!(
        with.get("SI(calcite)").unwrap_err().to_string(),
        "`SI(calcite)`: absent, since what it is made of is not in the water"
    );
    assert_eq!(get(&with, "total(Ca)"), 0.0);
}

#[test]
fn what_is_stretched_is_said() {
    warns(
        &[("pH", "7"), ("temperature", "250 degC"), ("Na", "1 mmol/kg"), ("Cl", "1 mmol/kg")],
        &[],
        &["at 250 degC pure water boils below 39.762 bar, and the pressure is 1.013 bar"],
    );
    warns(
        &[("pH", "7"), ("temperature", "95 degC"), ("Ca", "5 mmol/kg"), ("DIC", "5 mmol/kg")],
        &[],
        &[
            "log K used 15.0 K outside its stated range: `CaCO3(aq)`",
            "log K used 5.0 K outside its stated range: `CaHCO3^+`",
        ],
    );
    warns(
        &[("pH", "7"), ("temperature", "25 degC"), ("Na", "2 mol/kg"), ("Cl", "2 mol/kg")],
        &[],
        &[
            "ionic strength 2.00 mol/kg(water) is beyond the range of the activity model: the Davies equation holds to 0.5 mol/kg(water)",
        ],
    );
    warns(
        &[("pH", "7"), ("Na", "1 mmol/kg"), ("Cl", "1 mmol/kg")],
        &[],
        &["not given, so taken: temperature 25 degC"],
    );
}
