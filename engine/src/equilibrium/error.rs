//! Why there is no state.

use super::assemble::System;
use crate::ledger::Cycle;
use crate::ledger::{LedgerError, shipped::ShippedError};
use crate::solve::SolveError;
use crate::text::list;

/// Why no equilibrium could be given.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum EquilibriumError {
    /// The ledger does not know something the sample names.
    #[error(transparent)]
    Ledger(#[from] LedgerError),
    /// The ledger itself cannot be had.
    #[error(transparent)]
    Shipped(#[from] ShippedError),
    /// A row of a survey that could not be read.
    #[error("{0}")]
    Spoilt(String),
    /// An analyte the ledger has no species for.
    #[error("`{key}`: {why}")]
    Analyte {
        /// The key of the sample.
        key: String,
        /// What the ledger lacks, and what would help.
        why: String,
    },
    /// What was measured leaves the proton total open.
    #[error("{0}")]
    ProtonTotal(String),
    /// Two routes to one constant disagree.
    #[error(
        "the ledger contradicts itself: {} in log K, and should be zero; adjust its constants with `.reconcile()`, or \
         take `{}` out with `.without(\"{}\")`", .0.account(), .0.reactions[0].0, .0.reactions[0].0
    )]
    Misclosure(Box<Cycle>),
    /// No composition has these totals.
    #[error(
        "no composition has these totals: {combination} is {value:.3e} mol/kg(water), which no species and no solid can give it"
    )]
    Infeasible {
        /// The combination of totals.
        combination: String,
        /// Its value.
        value: f64,
    },
    /// A solid would form without end.
    #[error(
        "`{solid}` would form without end: its surroundings supply all it is made of and keep it supersaturated"
    )]
    Unbounded {
        /// The solid.
        solid: String,
    },
    /// Two fixed values contradict or repeat each other.
    #[error(
        "`{held}` cannot be fixed beside {}: together they fix all it depends on already; leave one of them out", list(.before)
    )]
    Overdetermined {
        /// What is fixed last: a gas, a solid, a couple.
        held: String,
        /// What was fixed before it.
        before: Vec<String>,
    },
    /// A target no amount of reagent reaches.
    #[error("{0}")]
    Unreachable(String),
    /// Interrupted.
    #[error("interrupted")]
    Stopped,
    /// The water is none that an activity model of water as the solvent describes.
    #[error(
        "the water is beyond what an aqueous model describes: {0}; its constants hold for water as the solvent"
    )]
    BeyondModel(String),
    /// The solver did not reach its tolerances: a defect worth reporting.
    #[error(
        "{0}; this is a fault of the program, not of the water: please report it with the script and the output of `--version`"
    )]
    Solver(String),
}

impl EquilibriumError {
    /// The solver's failure, with names in place of indices. `held` names the reservoirs, `solids` the minerals.
    #[must_use]
    pub fn named(error: SolveError, system: &System, held: &[String], solids: &[String]) -> Self {
        let name = |names: &[String], index: usize| names.get(index).cloned().unwrap_or_else(|| "?".into());
        match error {
            SolveError::Infeasible { combination, value } => {
                let term = |(component, factor): &(usize, f64)| {
                    let total = match *component < system.n_components() {
                        true => format!("total({})", system.component_species(*component)),
                        false => "charge of the surface".into(),
                    };
                    match factor {
                        1.0 => total,
                        -1.0 => format!("-{total}"),
                        factor => format!("{factor} {total}"),
                    }
                };
                let combination =
                    combination.iter().map(term).collect::<Vec<_>>().join(" + ").replace("+ -", "- ");
                Self::Infeasible { combination, value }
            }
            SolveError::Unbounded { mineral_idx } => Self::Unbounded { solid: name(solids, mineral_idx) },
            SolveError::Overdetermined { reservoir_idx } => Self::Overdetermined {
                held: name(held, reservoir_idx),
                before: held.iter().take(reservoir_idx).cloned().collect(),
            },
            SolveError::Stopped => Self::Stopped,
            SolveError::NoIonicStrength { searched_to } => Self::BeyondModel(format!(
                "no ionic strength up to {searched_to} mol/kg(water) agrees with the composition that it implies"
            )),
            other => Self::Solver(other.to_string()),
        }
    }
}

/// The words for a water whose acid-base state is not fixed.
pub(super) fn proton_total_open(name: &str, given: &[&str]) -> EquilibriumError {
    let fixed = match given {
        [] => "nothing fixes".to_string(),
        given => format!("{} alone does not fix", list(given)),
    };
    EquilibriumError::ProtonTotal(format!(
        "{fixed} the acid-base state of {name}: give pH, or two of `pH`, `alkalinity`, `DIC` and `fCO2`, \
         or `pH: \"electroneutral\"`"
    ))
}
