//! Ledgers against themselves and against formation data: cycles, their least-squares adjustment, files.

use std::collections::BTreeMap;

use approx::assert_abs_diff_eq;
use lysocline_engine::chem::Reaction;
use lysocline_engine::equilibrium::equilibrate;
use lysocline_engine::ledger::{Ledger, combine, file, save, shipped};
use lysocline_engine::named::{Named, Value};
use lysocline_engine::solve::Settings;
use lysocline_engine::units::Temperature;

use crate::waters::{freshwater, sample};

const ROOM: Temperature = Temperature::REFERENCE;

fn stated(equation: &str, log_k: &str) -> Reaction {
    let options = BTreeMap::from([("log_k".to_string(), Value::Text(log_k.into()))]);
    Reaction::read(equation, None, Named::new(options), None).unwrap()
}

fn book(entries: &[(&str, &str, &str)]) -> Ledger {
    entries.iter().fold(Ledger::default(), |book, (name, equation, log_k)| {
        book.with_reaction(name, &stated(equation, log_k)).unwrap()
    })
}

fn with_formation_data() -> Ledger {
    freshwater().merge(&shipped::ledger("formation", None).unwrap(), None).unwrap()
}

/// Three steps and their sum, a cycle of four; `direct` misses it by 0.10.
fn cycle() -> Ledger {
    book(&[
        ("KH", "CO2(g) <=> CO2(aq)", "-1.47 +/- 0.02"),
        ("K1", "CO2(aq) + H2O <=> HCO3^- + H^+", "-6.35 +/- 0.02"),
        ("K2", "HCO3^- <=> CO3^2- + H^+", "-10.33 +/- 0.04"),
        ("direct", "CO2(g) + H2O <=> CO3^2- + 2 H^+", "-18.05 +/- 0.06"),
    ])
}

#[test]
fn the_audit_of_the_shipped_ledgers() {
    let audit = with_formation_data().audit(ROOM).unwrap();
    println!("misclosure  sigma (of what is stated)  in sigmas  cycle, log K at 25 degC");
    for cycle in &audit.cycles {
        let sigma = match cycle.sigma {
            Some(sigma) => format!("{sigma:.3}"),
            None => format!("({:.3})", cycle.stated_sigma),
        };
        let sigmas = cycle.sigmas().map_or("-".into(), |sigmas| format!("{sigmas:.2}"));
        println!("{:10.3}  {sigma:>24}  {sigmas:>9}  {cycle}", cycle.misclosure);
    }
    // Every constant whose species all have formation data closes one cycle.
    assert_eq!(audit.cycles.len(), 20);
    let of = |name: &str| audit.cycles.iter().find(|cycle| cycle.reactions[0].0 == name).unwrap();
    for name in ["CO2(g)", "K1", "K2", "calcite", "aragonite"] {
        assert!(of(name).sigmas().unwrap() < 1.0, "{}", of(name).account());
    }
    // Plummer & Busenberg (1982) -10.329 +/- 0.02 against CODATA -10.327 +/- 0.0405.
    assert_abs_diff_eq!(of("K2").misclosure, -0.002, epsilon = 6e-4);
    assert_abs_diff_eq!(of("K2").sigma.unwrap(), f64::hypot(0.02, 0.0405), epsilon = 6e-4);
    // Uncertainties of formation data alone leave room for each: fluorite misses by 0.12, with 0.23 stated.
    assert!(audit.cycles.iter().all(|cycle| !cycle.contradicts()));
    assert!(freshwater().audit(ROOM).unwrap().cycles.is_empty());
}

#[test]
fn formation_data_solve_no_water() {
    let (alone, both) = (freshwater(), with_formation_data());
    let water = sample(&[("pH", "8"), ("alkalinity", "2 mmol/kg"), ("Ca", "1 mmol/kg")]);
    let ph = |book| {
        equilibrate(&water, Some(book), &Settings::default()).unwrap().get("SI(calcite)").unwrap().value()
    };
    assert_eq!(ph(&alone), ph(&both));
    assert_eq!(alone.formations().components, both.formations().components);
    assert_ne!(alone.digest(), both.digest());
}

/// NBS (1982): the sums of tabulated Gibbs energies, -60.0 and -29.5 kJ/mol.
#[test]
fn gibbs_energies_of_formation_add_up() {
    let files = shipped::constant_files().unwrap();
    let nbs: Vec<&Reaction> = files["wagman1982"].formations.iter().map(|(_, reaction)| reaction).collect();
    let kilojoule = -1.0 / (8.314462618e-3 * 298.15 * std::f64::consts::LN_10);
    for (target, gibbs) in [
        ("FeCO3(siderite) <=> Fe^2+ + CO3^2-", -78.9 - 527.8 + 666.7),
        ("MgCO3(magnesite) <=> Mg^2+ + CO3^2-", -454.8 - 527.8 + 1012.1),
        ("Fe(CN)6^4- + Fe^3+ <=> Fe(CN)6^3- + Fe^2+", 729.4 - 78.9 - 695.1 + 4.7),
    ] {
        let derived = combine(target, &nbs).unwrap();
        assert_abs_diff_eq!(derived.log_k().unwrap().value(), gibbs * kilojoule, epsilon = 1e-9);
        assert_eq!(derived.log_k().unwrap().sigma(), None);
    }
}

#[test]
fn elements_cancel_with_their_uncertainty() {
    let formation = shipped::ledger("formation", None).unwrap();
    let derived = formation.derive("HCO3^- <=> CO3^2- + H^+").unwrap();
    let of_elements: Vec<&str> = ["H2(g)", "O2(g)", "C(graphite)"].into();
    let parts = derived.log_k().unwrap().parts().to_vec();
    assert_eq!(parts.len(), 4, "enthalpy and entropy of two ions: {parts:?}");
    assert!(parts.iter().all(|part| !of_elements.iter().any(|element| part.input.label().contains(element))));
}

/// Each of four constants of one cycle takes its share of the variance: 0.10 x u²/Σu².
#[test]
fn reconciliation_moves_constants_by_their_variance() {
    let closed = cycle().reconcile(ROOM).unwrap();
    let total = 0.02_f64.powi(2) * 2.0 + 0.04_f64.powi(2) + 0.06_f64.powi(2);
    let log_k = |name: &str| closed.reaction(name).unwrap().log_k().unwrap();
    assert_abs_diff_eq!(log_k("K2").value(), -10.33 + 0.10 * 0.04_f64.powi(2) / total, epsilon = 1e-9);
    assert_abs_diff_eq!(log_k("direct").value(), -18.05 - 0.10 * 0.06_f64.powi(2) / total, epsilon = 1e-9);
    // The variance of an adjusted constant: u² - u⁴/Σu².
    let expected = (0.04_f64.powi(2) - 0.04_f64.powi(4) / total).sqrt();
    assert_abs_diff_eq!(log_k("K2").sigma().unwrap(), expected, epsilon = 1e-9);
    let done = closed.reconciliation().unwrap();
    assert_abs_diff_eq!(done.chi_square, 0.01 / total, epsilon = 1e-9);
    assert_eq!((done.degrees_of_freedom, done.moves.len()), (1, 4));
    // One cycle cannot tell its constants apart.
    assert!(done.moves.iter().all(|moved| (moved.residual.abs() - (0.01 / total).sqrt()).abs() < 1e-9));
}

#[test]
fn a_reconciled_ledger_closes_and_keeps_its_functions() {
    let before = with_formation_data().assume_sigma(0.05).unwrap();
    let closed = before.reconcile(ROOM).unwrap();
    for cycle in closed.audit(ROOM).unwrap().cycles {
        assert!(cycle.misclosure.abs() < 1e-9 && !cycle.contradicts(), "{}", cycle.account());
        assert!(cycle.sigma.unwrap() < 1e-6, "{}", cycle.account());
    }
    let enthalpy = |book: &Ledger| book.reaction("calcite").unwrap().enthalpy().unwrap().unwrap();
    assert_abs_diff_eq!(enthalpy(&before), enthalpy(&closed), epsilon = 1e-12);
    let again = closed.reconcile(ROOM).unwrap();
    assert!(
        again.reconciliation().unwrap().moves.iter().all(|moved| (moved.after - moved.before).abs() < 1e-9)
    );
}

/// A constant in error by many sigma, in several cycles, is the first suspect.
#[test]
fn the_constant_in_error_is_the_first_suspect() {
    let before = with_formation_data().assume_sigma(0.05).unwrap();
    let wrong = before.reaction("K2").unwrap();
    let wrong = stated(&wrong.equation().to_string(), "-9.9 +/- 0.02");
    let closed = before.replace("K2", &wrong).unwrap().reconcile(ROOM).unwrap();
    let first = &closed.reconciliation().unwrap().moves[0];
    assert_eq!(first.name, "K2");
    assert!(first.residual > 3.0 && closed.reconciliation().unwrap().probability < 0.01);
}

/// The direction and the multiple a constant is written in make no difference.
#[test]
fn reconciliation_does_not_depend_on_how_reactions_are_written() {
    let plain = cycle();
    let turned = plain.reaction("K2").unwrap().times((-2).into()).unwrap();
    let turned = plain.replace("K2", &turned).unwrap();
    let log_k =
        |book: &Ledger, name| book.reconcile(ROOM).unwrap().reaction(name).unwrap().log_k().unwrap().value();
    assert_abs_diff_eq!(log_k(&plain, "K1"), log_k(&turned, "K1"), epsilon = 1e-12);
    assert_abs_diff_eq!(-2.0 * log_k(&plain, "K2"), log_k(&turned, "K2"), epsilon = 1e-12);
}

/// A derived constant of a closed ledger is the same by any route, and the weighted one of the open ledger.
#[test]
fn the_weighted_route_is_that_of_the_closed_ledger() {
    let target = "CO2(g) + H2O <=> CO3^2- + 2 H^+";
    let open = cycle().derive(target).unwrap().log_k().unwrap();
    let closed = cycle().reconcile(ROOM).unwrap();
    let adjusted = closed.reaction("direct").unwrap().log_k().unwrap();
    assert_abs_diff_eq!(open.value(), adjusted.value(), epsilon = 1e-6);
    assert_abs_diff_eq!(open.sigma().unwrap(), adjusted.sigma().unwrap(), epsilon = 1e-6);
}

#[test]
fn a_saved_ledger_is_read_back_as_it_was() {
    for book in [
        freshwater(),
        with_formation_data(),
        with_formation_data()
            .assume_sigma(0.05)
            .unwrap()
            .reconcile(Temperature::from_celsius(10.0).unwrap())
            .unwrap(),
        cycle(),
    ] {
        let text = save::to_text(&book);
        let read = file::load("mine", &text).unwrap_or_else(|faults| panic!("{faults:?}\n{text}"));
        assert_eq!(read.digest(), book.digest());
        // A constant of several inputs is one input of its own from here on.
        let text = save::to_text(&read);
        assert!(save::to_text(&file::load("mine", &text).unwrap()) == text);
        for (name, reaction) in book.reactions() {
            let sigma = |reaction: &Reaction| reaction.log_k().unwrap().sigma();
            assert_eq!(sigma(read.reaction(name).unwrap()), sigma(reaction), "{name}");
        }
    }
}

/// An enthalpy, a heat capacity and a volume with their uncertainties, and an enthalpy that states none.
fn functions() -> Ledger {
    let options = |entries: &[(&str, &str)]| {
        let entries = entries.iter().map(|(key, text)| ((*key).to_string(), Value::Text((*text).into())));
        Named::new(entries.collect())
    };
    let own = options(&[
        ("log_k", "-10.33 +/- 0.02"),
        ("enthalpy", "14.7 +/- 0.4 kJ/mol"),
        ("heat_capacity", "-290 +/- 30 J/(mol K)"),
        ("volume", "-27.9 +/- 0.5 cm3/mol"),
    ]);
    let unstated = options(&[("log_k", "-6.35"), ("enthalpy", "9.1 kJ/mol"), ("volume", "-26 cm3/mol")]);
    let read = |equation: &str, options| Reaction::read(equation, None, options, None).unwrap();
    Ledger::default()
        .with_reaction("K2", &read("HCO3^- <=> CO3^2- + H^+", own))
        .and_then(|book| book.with_reaction("K1", &read("CO2(aq) + H2O <=> HCO3^- + H^+", unstated)))
        .unwrap()
}

#[test]
fn uncertainties_of_enthalpies_and_volumes_are_saved() {
    let book = functions();
    let read = file::load("mine", &save::to_text(&book)).unwrap();
    let warm = Temperature::from_celsius(60.0).unwrap();
    for (name, reaction) in book.reactions() {
        let again = read.reaction(name).unwrap();
        let volume = |reaction: &Reaction| {
            reaction
                .constant()
                .unwrap()
                .volume
                .as_ref()
                .map(|v| v.quantity(reaction.constant().unwrap().temperature))
        };
        assert_eq!(
            volume(again).map(|v| (v.value(), v.sigma())),
            volume(reaction).map(|v| (v.value(), v.sigma()))
        );
        let (at, at_first) = (again.log_k_at(warm).unwrap(), reaction.log_k_at(warm).unwrap());
        assert_eq!(at.parts().len(), at_first.parts().len(), "{name}");
        assert_eq!(at.budget().n_unstated, at_first.budget().n_unstated, "{name}");
        match (at.sigma(), at_first.sigma()) {
            (Some(sigma), Some(first)) => assert_abs_diff_eq!(sigma, first, epsilon = 1e-12),
            (sigma, first) => assert_eq!(sigma, first, "{name}"),
        }
    }
    // 0.4 kJ/mol over 35 K: more than the 0.02 at 25 degC.
    let sigma = read.reaction("K2").unwrap().log_k_at(warm).unwrap().sigma().unwrap();
    assert!(sigma > 0.02 + 1e-3, "{sigma}");
}

/// An assumed sigma stands in for that of log K alone; what enthalpies state is kept, through a reconciliation too.
#[test]
fn assumed_uncertainties_leave_those_of_enthalpies() {
    let assumed = functions().assume_sigma(0.05).unwrap();
    let direct = stated("CO2(aq) + H2O <=> CO3^2- + 2 H^+", "-16.6 +/- 0.1");
    let closed = assumed.with_reaction("both", &direct).unwrap().reconcile(ROOM).unwrap();
    for (name, n_influences) in [("K1", 1), ("K2", 2)] {
        for book in [&assumed, &closed] {
            let history = &book.reaction(name).unwrap().constant().unwrap().history;
            assert_eq!(history.influences().len(), n_influences, "{name}");
        }
    }
    assert_eq!(assumed.reaction("K1").unwrap().log_k().unwrap().sigma(), Some(0.05));
}

/// A shipped constant saved and read again is still one input with itself.
#[test]
fn a_saved_constant_stays_the_same_input() {
    let book = freshwater();
    let read = file::load("mine", &save::to_text(&book)).unwrap();
    let difference = |name: &str| {
        let back = read.reaction(name).unwrap().times((-1).into()).unwrap();
        back.log_k().unwrap().parts()[0].input
            == book.reaction(name).unwrap().log_k().unwrap().parts()[0].input
    };
    assert!(difference("calcite") && difference("CO2(g)"));
}

#[test]
fn alternatives_are_named_by_author_and_year() {
    let book = freshwater();
    let found: Vec<(String, String)> = book.alternatives().into_iter().map(|a| (a.name, a.author)).collect();
    for (name, author) in [("quartz", "Rimstidt 1980"), ("barite", "Felmy 1990"), ("SrSO4(aq)", "Felmy 1990")]
    {
        assert!(found.contains(&(name.to_string(), author.to_string())), "{name} in {found:?}");
    }
    let chosen = book.choose("quartz", "rimstidt 1980").unwrap();
    assert_abs_diff_eq!(chosen.reaction("quartz").unwrap().log_k().unwrap().value(), -3.956, epsilon = 5e-4);
    assert_ne!(chosen.digest(), book.digest());
}

#[track_caller]
fn refused<T: std::fmt::Debug>(result: Result<T, impl ToString>, message: &str) {
    assert_eq!(result.unwrap_err().to_string(), message);
}

#[test]
fn what_cannot_be_done_is_said() {
    let book = freshwater();
    refused(
        book.choose("quartz", "Bloggs 1999"),
        "no shipped alternative to `quartz` is by `Bloggs 1999`: the alternatives are `Grenthe 1992` and `Rimstidt 1980`",
    );
    refused(
        book.choose("halite", "Bloggs 1999"),
        "no shipped alternative to `halite` is by `Bloggs 1999`: there is none",
    );
    refused(
        book.choose("qartz", "Rimstidt 1980"),
        "the ledger has no reaction `qartz`; did you mean `quartz`?",
    );
    refused(
        book.assume_sigma(-0.05).map(|_| ()),
        "`sigma` is a standard uncertainty of log K and has to be above zero, not -0.05",
    );
    refused(
        book.derive("PbCO3(cerussite) <=> Pb^2+ + CO3^2-"),
        "`PbCO3(cerussite) <=> Pb^2+ + CO3^2-` cannot be reached: no combination of the constants accounts for \
         `PbCO3(cerussite)` and `Pb^2+`",
    );
    let kw = "H2O <=> H^+ + OH^-";
    refused(
        self::book(&[("a", kw, "-14.00 +/- 0.01"), ("b", kw, "-13.97")]).reconcile(ROOM),
        "no uncertainty is stated for `b`, and what is not stated cannot be weighed; fill it in with \
         `.assume_sigma(0.05)`, or reconcile with `#{ sigma: 0.05 }`",
    );
    refused(
        self::book(&[("a", kw, "-14.00 +/- 0"), ("b", kw, "-13.97 +/- 0")]).reconcile(ROOM),
        "the cycle of `a` and `b` cannot be closed: it misses by 0.0300 in log K, more than the uncertainties of its \
         constants leave room for; take one out with `.without()`",
    );
}

#[test]
fn a_ledger_that_contradicts_itself_solves_no_water() {
    let water = sample(&[("pH", "8"), ("DIC", "1 mmol/kg")]);
    let wrong = stated("HCO3^- <=> CO3^2- + H^+", "-10.0 +/- 0.01");
    let book = freshwater().with_reaction("K2 of mine", &wrong).unwrap();
    refused(
        equilibrate(&water, Some(&book), &Settings::default()).map(|_| ()),
        "the ledger contradicts itself: `K2 - K2 of mine` sums to -0.329 +/- 0.022 in log K, and should be zero; adjust its \
         constants with `.reconcile()`, or take `K2` out with `.without(\"K2\")`",
    );
    let closed = book.reconcile(ROOM).unwrap();
    let state = equilibrate(&water, Some(&closed), &Settings::default()).unwrap();
    let left_out = "` was left out: other constants of the ledger imply it";
    assert!(state.warnings().iter().any(|warning| warning.ends_with(left_out)), "{:?}", state.warnings());
}

#[track_caller]
fn faults(text: &str, expected: &[&str]) {
    let faults: Vec<String> = file::load("mine", text).unwrap_err().iter().map(ToString::to_string).collect();
    assert_eq!(faults, expected);
}

#[test]
fn all_faults_of_a_file_are_said_at_once() {
    faults(
        "name = \"mine\"\nactivity_model = \"davis\"\n\n\
         [[constant]]\nname = \"Kw\"\nreaction = \"H2O <=> H^+ + OH^-\"\nlog_k = -14\nsigma = -0.01\nsource = \"A (2020)\"\nprovenance = \"read\"\n\n\
         [[constant]]\nname = \"K2\"\nreaction = \"HCO3^- <=> CO3^2-\"\nlog_k = -10.33\nsource = \"A (2020)\"\nprovenance = \"read\"\n\n\
         [[constant]]\nname = \"K1\"\nreaction = \"CO2(aq) + H2O <=> HCO3^- + H^+\"\nlog_k = -6.35\nprovenance = \"read\"\n\n\
         [[constant]]\nname = \"KH\"\nreaction = \"CO2(g) <=> CO2(aq)\"\nlog_k = -1.47\nstandard = \"1 atm\"\nsource = \"A (2020)\"\nprovenance = \"read\"\n\n\
         [[constant]]\nname = \"F\"\nreaction = \"HF(aq) <=> H^+ + F^-\"\nlog_k = -3.18\nsource = \"A (2020)\"\nprovenance = \"read\"\n\n\
         [[constant]]\nname = \"F\"\nreaction = \"HF2^- <=> HF(aq) + F^-\"\nlog_k = -0.6\nsource = \"A (2020)\"\nprovenance = \"heard\"\n\n\
         [[constant]]\nname = \"F\"\nreaction = \"HF2^- <=> HF(aq) + F^-\"\nlog_k = -0.6\nsource = \"A (2020)\"\nprovenance = \"read\"\n\n\
         [[constant]]\nname = \"pH\"\nreaction = \"HS^- <=> S^2- + H^+\"\nlog_k = -17\nph_scale = \"totl\"\nsource = \"A (2020)\"\nprovenance = \"read\"\n\n\
         [[constant]]\nname = \"V\"\nreaction = \"HS^- <=> S^2- + H^+\"\nlog_k = -17\ninfluences = [{ of = \"enthalpy\", sigma = -1 }]\nsource = \"A (2020)\"\nprovenance = \"read\"\n\n\
         [[formation]]\nspecies = \"Ca^2+\"\nenthalpy = \"-543.0 +/- 1.0 kJ/mol\"\nsource = \"A (2020)\"\nprovenance = \"memory\"\n",
        &[
            "line 2: no activity model `davis`, did you mean `davies`? There are `ideal`, `davies`, `debye-hueckel`, `truesdell-jones` and `sit`",
            "line 8: `Kw`: `sigma` is a standard uncertainty and cannot be negative: -0.01",
            "line 14: `K2`: `HCO3^- <=> CO3^2-` is not balanced: the right side is short of 1 H, the charges differ: the \
             right side has -1 more; add `H^+` to the right side",
            "line 19: `K1`: a constant needs `source`: the publication, or who measured it",
            "line 29: `KH`: unknown key `standard`; did you mean `gas_standard`?",
            "line 45: `F`: `heard` is no provenance: it is `read`, `computed`, `memory` or `stated`",
            "line 48: there is a constant `F` already, in line 33: names are unique in a file",
            "line 58: `pH`: `totl` is no scale of pH: the scales are `free`, `total`, `seawater`, `nbs` and `activity`; did \
             you mean `total`?",
            "line 66: `V`: `influences`: each needs `log_k_terms`",
            "line 71: `formation of Ca^2+` needs `gibbs`, or `enthalpy` with `entropy`",
        ],
    );
}
