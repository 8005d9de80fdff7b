//! Cycles of reactions that add up to nothing, and how far their constants fail to.
//!
//! A ledger with more constants than it needs contradicts itself unless they agree: round a cycle, the sum of log10 K
//! should be zero. Its misclosure is judged by the standard uncertainty of that sum, correlations counted.

use super::elimination::Sparse;
use super::least_squares::Scatter;
use super::ledger::{Ledger, LedgerError};
use super::network::Network;
use crate::chem::{Rational, Reaction, rational};
use crate::units::Temperature;

/// A misclosure above this many standard deviations is a contradiction.
const CONTRADICTION_SIGMAS: f64 = 3.0;
/// Above this it is one where uncertainties are not stated, log10 units.
const CONTRADICTION_UNSTATED: f64 = 0.1;
/// Rounding errors of sums of constants, log10 units.
pub(super) const ROUNDING: f64 = 1e-9;

/// Every independent cycle of a ledger at one temperature.
#[derive(Debug, Clone)]
pub struct Audit {
    /// The temperature.
    pub temperature: Temperature,
    /// The cycles, worst first.
    pub cycles: Vec<Cycle>,
    /// Names of reactions whose constants are not known at the temperature; they are in no cycle.
    pub unknown: Vec<String>,
}

/// Reactions whose sum leaves nothing.
#[derive(Debug, Clone, PartialEq)]
pub struct Cycle {
    /// Names of the reactions with their multiples.
    pub reactions: Vec<(String, Rational)>,
    /// The sum of multiples of log10 K, which should be zero.
    pub misclosure: f64,
    /// Its standard uncertainty; `None` unless every reaction states one.
    pub sigma: Option<f64>,
    /// The standard uncertainty from those that do state one.
    pub stated_sigma: f64,
}

impl Cycle {
    /// The misclosure in standard deviations.
    #[must_use]
    pub fn sigmas(&self) -> Option<f64> {
        let sigma = self.sigma?;
        Some(if self.misclosure.abs() <= ROUNDING { 0.0 } else { self.misclosure.abs() / sigma })
    }

    /// Whether it is beyond what its constants allow: above 3 standard deviations, and above 0.1 where not all state one.
    #[must_use]
    pub fn contradicts(&self) -> bool {
        self.severity() > 1.0
    }

    /// `calcite - K2 + K1 sums to 0.32 +/- 0.05`.
    #[must_use]
    pub fn account(&self) -> String {
        let sigma = self.sigma.map_or_else(String::new, |sigma| format!(" +/- {sigma:.3}"));
        format!("`{self}` sums to {:.3}{sigma}", self.misclosure)
    }

    /// The misclosure as a share of what is allowed.
    fn severity(&self) -> f64 {
        match self.sigmas() {
            Some(sigmas) => sigmas / CONTRADICTION_SIGMAS,
            None => {
                self.misclosure.abs() / CONTRADICTION_UNSTATED.max(CONTRADICTION_SIGMAS * self.stated_sigma)
            }
        }
    }
}

/// `calcite - 2 K2 + K1`.
impl std::fmt::Display for Cycle {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        for (position, (name, multiple)) in self.reactions.iter().enumerate() {
            let negative = *multiple < 0.into();
            f.write_str(match (position, negative) {
                (0, false) => "",
                (0, true) => "-",
                (_, false) => " + ",
                (_, true) => " - ",
            })?;
            match rational::text(if negative { -*multiple } else { *multiple }).as_str() {
                "1" => f.write_str(name)?,
                number => write!(f, "{number} {name}")?,
            }
        }
        Ok(())
    }
}

/// Every independent cycle among the reactions and formation data of a ledger.
pub(super) fn audit(ledger: &Ledger, temperature: Temperature) -> Result<Audit, LedgerError> {
    let survey = Survey::of(ledger, temperature)?;
    let described =
        survey.closing.iter().zip(&survey.cycles).map(|(closing, cycle)| survey.describe(*closing, cycle));
    let mut cycles: Vec<Cycle> = described.collect();
    cycles.sort_by(|a, b| b.severity().total_cmp(&a.severity()).then_with(|| a.reactions.cmp(&b.reactions)));
    Ok(Audit { temperature, cycles, unknown: survey.unknown })
}

/// The cycle that a reaction closes which the ledger's others already imply; reactions by their position in the order of
/// names.
pub(super) fn cycle(
    ledger: &Ledger,
    closing: usize,
    multiples: &[(usize, Rational)],
    temperature: Temperature,
) -> Cycle {
    let (names, reactions): (Vec<&str>, Vec<&Reaction>) = ledger.reactions().unzip();
    let network = Network::new(reactions.clone());
    let survey = Survey {
        log_k: (0..reactions.len()).map(|index| network.log_k(index, temperature)).collect(),
        scatter: Scatter::of(&reactions, temperature),
        names: names.into_iter().map(str::to_string).collect(),
        reactions,
        cycles: vec![],
        closing: vec![],
        unknown: vec![],
    };
    survey.describe(closing, &multiples.iter().copied().collect())
}

/// Everything a ledger knows at a temperature, with its cycles.
pub(super) struct Survey<'a> {
    pub names: Vec<String>,
    pub reactions: Vec<&'a Reaction>,
    pub log_k: Vec<f64>,
    pub scatter: Scatter,
    pub cycles: Vec<Sparse>,
    /// The reaction that closes each cycle, all others being needed.
    pub closing: Vec<usize>,
    pub unknown: Vec<String>,
}

impl<'a> Survey<'a> {
    pub fn of(ledger: &'a Ledger, temperature: Temperature) -> Result<Self, LedgerError> {
        let mut survey = Survey {
            names: vec![],
            reactions: vec![],
            log_k: vec![],
            scatter: Scatter::of(&[], temperature),
            cycles: vec![],
            closing: vec![],
            unknown: vec![],
        };
        // Formation data come first: each reaction among compounds then closes a cycle of its own with them.
        for (name, reaction) in ledger.formation_data().chain(ledger.reactions()) {
            match reaction.log_k_at(temperature) {
                Ok(log_k) => {
                    survey.names.push(name.to_string());
                    survey.reactions.push(reaction);
                    survey.log_k.push(log_k.value());
                }
                Err(_) => survey.unknown.push(name.to_string()),
            }
        }
        let network = Network::new(survey.reactions.clone());
        let mut order: Vec<usize> = (0..survey.reactions.len()).collect();
        let n_formation_data = ledger
            .formation_data()
            .filter(|(name, _)| !survey.unknown.iter().any(|other| other == name))
            .count();
        order.sort_by_key(|index| {
            (*index >= n_formation_data, survey.reactions[*index].equation().terms().len(), *index)
        });
        (survey.closing, survey.cycles) = network.eliminate(order)?.cycles.into_iter().unzip();
        survey.scatter = Scatter::of(&survey.reactions, temperature);
        Ok(survey)
    }

    /// Σ n log10 K round a cycle.
    pub fn misclosure(&self, cycle: &Sparse) -> f64 {
        cycle.iter().map(|(index, multiple)| rational::to_f64(*multiple) * self.log_k[*index]).sum()
    }

    pub fn states_sigma(&self, index: usize) -> bool {
        self.reactions[index].log_k().is_ok_and(|log_k| log_k.sigma().is_some())
    }

    /// The closing reaction stands first.
    fn describe(&self, closing: usize, cycle: &Sparse) -> Cycle {
        let stated = cycle.keys().all(|index| self.states_sigma(*index));
        let mut reactions: Vec<_> = cycle.iter().collect();
        reactions.sort_by_key(|(index, _)| (**index != closing, **index));
        let named = |(index, multiple): (&usize, &Rational)| (self.names[*index].clone(), *multiple);
        let stated_sigma = self.scatter.sigma(cycle);
        Cycle {
            reactions: reactions.into_iter().map(named).collect(),
            misclosure: self.misclosure(cycle),
            sigma: stated.then_some(stated_sigma),
            stated_sigma,
        }
    }
}
