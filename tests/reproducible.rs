//! The same numbers to the last bit, however many threads work and in whatever order things were given.

use std::collections::BTreeMap;

use lysocline_engine::ledger::Ledger;
use lysocline_engine::named::Value;
use lysocline_engine::process::run::Run;
use lysocline_engine::solve::Settings;
use lysocline_engine::water::Sample;

use crate::waters::{freshwater, survey};

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
