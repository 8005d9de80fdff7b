//! Which constants and publications the values of a script rest on, read off the values themselves.

use std::collections::{BTreeMap, BTreeSet};

use rhai::{Array, Dynamic, Map};

use crate::chem::{Constant, Origin, Reaction};
use crate::equilibrium::State;
use crate::ledger::{Ledger, shipped};
use crate::process::Run;
use crate::quantity::Quantity;
use crate::water::Sample;

/// What was gathered.
#[derive(Debug, Clone, Default)]
pub struct Sources {
    /// Publications, each with the constants taken from it.
    pub publications: BTreeMap<String, BTreeSet<String>>,
    /// Ledgers waters were computed with: name and edition as shown, with the digest.
    pub ledgers: BTreeMap<String, String>,
    /// Constants that were recalled rather than read in their source.
    pub recalled: BTreeSet<String>,
    /// What the states warn of, each once.
    pub warnings: BTreeSet<String>,
    /// Names of published inputs that computed numbers depend on; [`Sources::complete`] looks them up.
    inputs: BTreeSet<String>,
}

impl Sources {
    /// Adds what `value` rests on.
    pub fn gather(&mut self, value: &Dynamic) {
        if let Some(state) = value.read_lock::<State>() {
            self.state(&state);
        } else if let Some(run) = value.read_lock::<Run>() {
            self.run(&run);
        } else if let Some(reaction) = value.read_lock::<Reaction>() {
            self.reaction(&reaction);
        } else if let Some(sample) = value.read_lock::<Sample>() {
            sample.ledger().into_iter().for_each(|ledger| self.ledger(ledger));
        } else if let Some(ledger) = value.read_lock::<Ledger>() {
            self.ledger(&ledger);
        } else if let Some(quantity) = value.read_lock::<Quantity>() {
            self.inputs
                .extend(quantity.parts().iter().filter_map(|part| part.input.name()).map(str::to_owned));
        } else if let Some(items) = value.read_lock::<Array>() {
            items.iter().for_each(|item| self.gather(item));
        } else if let Some(map) = value.read_lock::<Map>() {
            map.values().for_each(|item| self.gather(item));
        }
    }

    /// Looks up the constants behind the numbers gathered, where no state told them.
    pub fn complete(&mut self) {
        let ledgers = shipped::names().into_iter().filter_map(|name| shipped::as_shipped(name).ok());
        for ledger in ledgers {
            for (_, reaction) in ledger.reactions() {
                let Ok(constant) = reaction.constant() else { continue };
                let mut parts = constant.history.uses().iter().flat_map(|(origin, _)| &origin.parts);
                if parts.any(|part| part.input.name().is_some_and(|name| self.inputs.contains(name))) {
                    self.constant(constant);
                }
            }
        }
    }

    fn run(&mut self, run: &Run) {
        // The rows of a run differ in their waters, seldom in their constants: those of the first row with each ledger.
        let mut seen: Vec<String> = Vec::new();
        for state in run.states() {
            let key = format!("{:?}", state.system().solutes().len());
            if !seen.contains(&key) {
                seen.push(key);
                self.state(state);
            }
        }
        self.warnings.extend(run.warnings());
    }

    fn state(&mut self, state: &State) {
        let system = state.system();
        self.ledger(system.ledger());
        let present: Vec<&str> = system
            .solutes()
            .map(|formed| formed.species.key())
            .chain(system.phases().map(|(formed, _)| formed.species.key()))
            .collect();
        for (_, reaction) in system.ledger().reactions() {
            let known = |name: &str| name == "H2O" || name == "e^-" || present.contains(&name);
            if reaction.equation().terms().iter().all(|(species, _)| known(species.key())) {
                self.reaction(reaction);
            }
        }
        self.warnings.extend(state.warnings());
    }

    fn ledger(&mut self, ledger: &Ledger) {
        let edition = ledger.edition().map(|edition| format!(", edition {edition}")).unwrap_or_default();
        self.ledgers.insert(format!("{}{edition}", ledger.name()), ledger.digest());
    }

    fn reaction(&mut self, reaction: &Reaction) {
        if let Ok(constant) = reaction.constant() {
            self.constant(constant);
        }
    }

    fn constant(&mut self, constant: &Constant) {
        constant.history.uses().iter().for_each(|(origin, _)| self.origin(origin));
    }

    fn origin(&mut self, origin: &Origin) {
        let source =
            origin.source.clone().unwrap_or_else(|| "given in the script, without a source".to_owned());
        self.publications.entry(source).or_default().insert(origin.equation.clone());
        if origin.provenance == crate::chem::Provenance::Memory {
            self.recalled.insert(origin.equation.clone());
        }
    }
}
