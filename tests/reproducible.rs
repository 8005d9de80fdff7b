//! The same numbers to the last bit, however many threads work and in whatever order things were given.

use std::collections::BTreeMap;

use lysocline_engine::chem::{Reaction, Species};
use lysocline_engine::equilibrium::{State, equilibrate};
use lysocline_engine::ledger::{ActivityChoice, Ledger};
use lysocline_engine::named::{Named, Value};
use lysocline_engine::process::run::Run;
use lysocline_engine::solve::Settings;
use lysocline_engine::water::{Sample, Treatment};

use crate::waters::{freshwater, sample, survey};

/// Every bit of what the solver found, row by row.
fn bits(samples: &[Sample], ledger: &Ledger, threads: usize) -> Vec<Vec<u64>> {
    let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().expect("a pool of threads");
    let run = pool
        .install(|| Run::equilibrate(samples, Some(ledger), &Settings::default(), &|_| {}))
        .expect("not interrupted");
    let row = |outcome: &Result<_, String>| {
        let state: &lysocline_engine::equilibrium::State =
            outcome.as_ref().unwrap_or_else(|reason| panic!("{reason}"));
        let found = state.converged();
        let numbers = found
            .ln_c
            .iter()
            .chain(&found.ln_gamma)
            .chain(&found.ln_a)
            .chain([&found.ionic_strength, &found.ln_water_activity]);
        numbers.map(|number| number.to_bits()).collect()
    };
    run.outcomes().iter().map(row).collect()
}

#[test]
fn the_number_of_threads_changes_no_bit() {
    let (samples, ledger) = (survey(), freshwater());
    assert_eq!(bits(&samples, &ledger, 1), bits(&samples, &ledger, 2));
}

#[test]
fn the_order_of_samples_and_of_their_keys_changes_no_bit() {
    let (samples, ledger) = (survey(), freshwater());
    let backwards: Vec<Sample> = samples
        .iter()
        .rev()
        .map(|sample| {
            let mut keys: Vec<(&String, &Value)> = sample.entries().iter().collect();
            keys.reverse();
            let entries: BTreeMap<String, Value> =
                keys.into_iter().map(|(key, value)| (key.clone(), value.clone())).collect();
            Sample::read(entries).expect("read before")
        })
        .collect();
    let mut turned = bits(&backwards, &ledger, 2);
    turned.reverse();
    assert_eq!(bits(&samples, &ledger, 2), turned);
}

#[test]
fn the_order_in_which_a_ledger_was_put_together_changes_no_bit() {
    let (samples, ledger) = (survey(), freshwater());
    let names: Vec<&str> = ledger.names().collect();
    let built = |order: &mut dyn Iterator<Item = &&str>| {
        let empty = ["NO3^-", "Br^-", "Li^+", "Rb^+", "Cs^+"]
            .iter()
            .fold(Ledger::empty("rebuilt", None), |ledger, ion| {
                ledger.with_solute(lysocline_engine::chem::Species::parse(ion).unwrap())
            });
        order.fold(empty, |built, name| built.with_reaction(name, ledger.reaction(name).unwrap()).unwrap())
    };
    let expected = bits(&samples, &ledger, 2);
    let (forwards, backwards) = (built(&mut names.iter()), built(&mut names.iter().rev()));
    // Every other reaction first, and the rest by a merger.
    let (even, odd) = (built(&mut names.iter().step_by(2)), built(&mut names.iter().skip(1).step_by(2)));
    for (ledger, how) in
        [(forwards, "forwards"), (backwards, "backwards"), (odd.merge(&even, None).unwrap(), "merged")]
    {
        assert_eq!(ledger.digest(), freshwater().digest(), "{how}");
        assert!(bits(&samples, &ledger, 2) == expected, "{how}");
    }
}

#[test]
fn a_reaction_taken_out_and_put_back_changes_no_bit() {
    let (samples, ledger) = (survey(), freshwater());
    let halite = ledger.reaction("halite").unwrap();
    let without = ledger.without("halite").unwrap();
    // Halite is the only reaction of chloride: the ion has to stay.
    assert!(without.find_species("Cl^-").is_ok());
    let restored = without.with_reaction("halite", halite).unwrap();
    assert_eq!(restored.digest(), ledger.digest());
    assert!(bits(&samples, &restored, 2) == bits(&samples, &ledger, 2));
}

/// The same constants written otherwise: every reaction passes through `write`, given its rank, and the names are such that
/// the order is `order`'s.
fn rewritten(ledger: &Ledger, write: impl Fn(usize, &Reaction) -> Reaction, backwards: bool) -> Ledger {
    let empty = ["NO3^-", "Br^-", "Li^+", "Rb^+", "Cs^+"]
        .iter()
        .fold(Ledger::empty("rewritten", None), |ledger, ion| {
            ledger.with_solute(Species::parse(ion).unwrap())
        });
    let names: Vec<&str> = ledger.names().collect();
    names.iter().enumerate().fold(empty, |built, (k, name)| {
        let rank = if backwards { names.len() - k } else { k };
        built.with_reaction(&format!("{rank:03} {name}"), &write(k, ledger.reaction(name).unwrap())).unwrap()
    })
}

/// Full waters, with redox, minerals and gases.
fn full_waters() -> Vec<(&'static str, Sample)> {
    let lake = sample(&[
        ("pH", "7.9"),
        ("temperature", "25"),
        ("alkalinity", "3.1 meq/kg"),
        ("Ca", "1.6 mmol/kg"),
        ("Mg", "0.7 mmol/kg"),
        ("Na", "1 mmol/kg"),
        ("K", "0.1 mmol/kg"),
        ("Cl", "1.2 mmol/kg"),
        ("SO4^2-", "0.6 mmol/kg"),
        ("F", "20 umol/kg"),
        ("Si", "0.2 mmol/kg"),
        ("Ba", "1 umol/kg"),
    ]);
    let mud = sample(&[
        ("pH", "7.1"),
        ("temperature", "25"),
        ("pe", "-3.4"),
        ("DIC", "4 mmol/kg"),
        ("Ca", "2 mmol/kg"),
        ("Na", "5 mmol/kg"),
        ("Cl", "6 mmol/kg"),
        ("Fe", "0.1 mmol/kg"),
        ("Mn", "10 umol/kg"),
        ("S", "1 mmol/kg"),
    ]);
    let treated = |water: &Sample, treatments: Vec<Treatment>| {
        treatments.into_iter().fold(water.clone(), |water, treatment| water.treated(treatment).unwrap())
    };
    let open = || Treatment::OpenTo { gas: "CO2(g)".into(), fugacity: 4.2e-4 };
    let saturate = |solid: &str| Treatment::Saturate { solid: solid.into(), index: 0.0 };
    let allow = |solid: &str| Treatment::Allow { solid: solid.into(), above: 0.0 };
    vec![
        ("a lake", lake.clone()),
        ("a lake open to the air over calcite", treated(&lake, vec![open(), saturate("calcite")])),
        (
            "a lake with minerals allowed",
            treated(&lake, vec![allow("barite"), allow("calcite"), allow("quartz")]),
        ),
        ("a mud at a pe", mud.clone()),
        (
            "a mud with minerals allowed",
            treated(&mud, vec![allow("ferrihydrite"), allow("siderite"), allow("calcite")]),
        ),
        (
            "a mud at another pe",
            treated(&mud, vec![Treatment::HoldPe { pe: 6.0, reagent: None }, allow("ferrihydrite")]),
        ),
    ]
}

/// By species, what a state holds: ln c, and the amounts of solids.
fn composition(state: &State) -> BTreeMap<String, f64> {
    let solutes = state.system().solutes().zip(&state.converged().ln_c);
    let solutes = solutes.map(|(formed, ln_c)| (formed.species.to_string(), *ln_c));
    let solids = state.solids().iter().map(|solid| (solid.species.to_string(), solid.amount));
    solutes.chain(solids).collect()
}

/// A sum of constants is rounded otherwise when its terms come otherwise: a few units in the last place of ln K.
const ROUNDED: f64 = 2e-12;

#[test]
fn the_direction_the_order_and_the_basis_of_a_ledger_change_no_answer() {
    let ledger = freshwater();
    let water = ledger.reaction("Kw").unwrap();
    let backwards = |_: usize, reaction: &Reaction| reaction.times((-1).into()).unwrap();
    let alternating = |k: usize, reaction: &Reaction| {
        let multiple = [(-1).into(), 2.into(), 1.into(), (-3).into()][k % 4];
        reaction.times(multiple).unwrap()
    };
    // Other products and reactants: everything but water's own reaction with water's added, where both can be added.
    let mixed = |k: usize, reaction: &Reaction| {
        let is_water = reaction.equation() == water.equation();
        let added = if is_water || k.is_multiple_of(2) { None } else { reaction.plus(water).ok() };
        added.unwrap_or_else(|| reaction.clone())
    };
    let rewritten = [
        ("backwards", rewritten(&ledger, backwards, false)),
        ("in the other order", rewritten(&ledger, |_, reaction| reaction.clone(), true)),
        ("by multiples", rewritten(&ledger, alternating, true)),
        ("with water added", rewritten(&ledger, mixed, false)),
    ];
    let models = ["ideal", "davies", "debye-hueckel", "truesdell-jones", "sit"];
    for (name, sample) in full_waters() {
        for model in models {
            let choice = ActivityChoice::read(model, Named::default()).unwrap();
            let state = |ledger: &Ledger| {
                let ledger = ledger.with_activity(choice.clone());
                equilibrate(&sample, Some(&ledger), &Settings::default())
                    .unwrap_or_else(|error| panic!("{name}, {model}: {error}"))
            };
            let expected = composition(&state(&ledger));
            for (how, other) in &rewritten {
                let found = composition(&state(other));
                assert!(found.keys().eq(expected.keys()), "{name}, {model}, {how}: {found:?}");
                for (species, value) in &expected {
                    let off = (found[species] - value).abs();
                    assert!(off <= ROUNDED, "{name}, {model}, {how}: {species} by {off:e}");
                }
            }
        }
    }
}
