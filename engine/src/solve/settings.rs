//! Tolerances, and the ways a solve can fail.

use super::certificate::Certificate;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

/// Tolerances of a solve. An answer is given only when every one of them is met.
#[derive(Debug, Clone)]
pub struct Settings {
    /// Largest `|ln P - ln N|` of a balance in the dominant basis; the iteration goes on until it is reached.
    pub residual: f64,
    /// The same, accepted when rounding stops all further progress.
    pub stalled_residual: f64,
    /// Largest error of a balance of the components, relative to the sum of its absolute terms.
    pub balance: f64,
    /// Largest ln saturation of an absent phase.
    pub saturation: f64,
    /// Largest error of the ionic strength, relative.
    pub ionic_strength: f64,
    /// Largest error of ln of the activity of water, absolute.
    pub ln_water_activity: f64,
    /// Largest error of the specific part of an ln γ, absolute.
    pub ln_gamma: f64,
    /// Newton iterations allowed for one set of phases at one ionic strength.
    pub max_iterations: usize,
    /// Set from outside to interrupt the solve; looked at once an iteration.
    pub stop: Option<Arc<AtomicBool>>,
}

impl Default for Settings {
    fn default() -> Self {
        Self {
            residual: 3e-14,
            stalled_residual: 1e-12,
            balance: 1e-12,
            saturation: 1e-10,
            ionic_strength: 1e-12,
            ln_water_activity: 1e-14,
            ln_gamma: 1e-11,
            max_iterations: 500,
            stop: None,
        }
    }
}

impl Settings {
    /// Fails once the solve has been asked to stop.
    pub(super) fn check_stop(&self) -> Result<(), SolveError> {
        match &self.stop {
            Some(stop) if stop.load(Ordering::Relaxed) => Err(SolveError::Stopped),
            _ => Ok(()),
        }
    }
}

/// Part of a [`Problem`](super::Problem).
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Input {
    /// `Problem::species`.
    Species,
    /// `Problem::others`.
    Other,
    /// `Problem::reservoirs`.
    Reservoir,
    /// `Problem::minerals`.
    Mineral,
    /// `Problem::mixtures`.
    Mixture,
    /// `Problem::totals`.
    Totals,
}

/// Why there is no answer. Indices refer to the [`Problem`](super::Problem).
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SolveError {
    /// A number is not finite, an index out of range or repeated, a row empty, or the number of totals wrong.
    #[error(
        "entry {idx} of the {input:?} input is malformed: a finite number, a component index in range, or a total for every component is missing"
    )]
    BadInput {
        /// Where.
        input: Input,
        /// Which entry.
        idx: usize,
    },
    /// The stoichiometric coefficients, brought to integers, do not fit the exact arithmetic of the tableau.
    #[error(
        "the stoichiometric coefficients of a component need a common denominator below 2^20 and integers below 2^30"
    )]
    CoefficientsTooLarge,
    /// A linear combination of the totals has a sign that no species and no phase can give it.
    #[error(
        "no composition has these totals: the combination {combination:?} of them is {value:e}, and every species and phase contributes to it with the other sign or not at all"
    )]
    Infeasible {
        /// (component index, factor) of the combination.
        combination: Vec<(usize, f64)>,
        /// Its value, mol/kg(water).
        value: f64,
    },
    /// A phase stays supersaturated however much of it forms, since reservoirs supply all it is made of.
    #[error(
        "mineral {mineral_idx} would precipitate without end: reservoirs and phases that it does not consume hold all of its components"
    )]
    Unbounded {
        /// The phase.
        mineral_idx: usize,
    },
    /// A mixture stays supersaturated however much of it forms.
    #[error(
        "mixture {mixture_idx} would form without end: reservoirs and phases that it does not consume hold all of its components"
    )]
    UnboundedMixture {
        /// The phase.
        mixture_idx: usize,
    },
    /// A reservoir holds what others already hold.
    #[error("reservoir {reservoir_idx} holds a combination that the reservoirs before it already fix")]
    Overdetermined {
        /// The later of the dependent reservoirs.
        reservoir_idx: usize,
    },
    /// The iteration limit was reached; a defect of the solver unless the problem has no interior solution.
    #[error(
        "no equilibrium after {iterations} iterations: the largest logarithmic residual is still {residual:.3e}"
    )]
    NotConverged {
        /// Newton iterations done.
        iterations: usize,
        /// Largest logarithmic residual.
        residual: f64,
    },
    /// The set of phases was still changing after as many exchanges as allowed.
    #[error("the set of phases was still changing after {changes} changes")]
    PhasesNotSettled {
        /// Entries and exits of phases.
        changes: usize,
    },
    /// No ionic strength agrees with the composition it implies.
    #[error(
        "no ionic strength up to {searched_to} mol/kg(water) agrees with the composition that it implies"
    )]
    NoIonicStrength {
        /// Upper end of the search, mol/kg(water).
        searched_to: f64,
    },
    /// The activity of water did not settle.
    #[error("ln of the activity of water is still changing by {change:e}")]
    WaterActivityNotConverged {
        /// Last change of ln a_w.
        change: f64,
    },
    /// The activity coefficients that depend on the composition did not settle, nor in steps from those that do not.
    #[error("activity coefficients did not settle: a ln gamma is still changing by {change:e}")]
    ActivityNotConverged {
        /// Last change of an ln γ.
        change: f64,
    },
    /// The answer misses a tolerance.
    #[error("an answer was found but misses a tolerance: {certificate:?}")]
    Uncertified {
        /// What was reached.
        certificate: Box<Certificate>,
    },
    /// Interrupted through [`Settings::stop`].
    #[error("interrupted")]
    Stopped,
}

impl SolveError {
    /// Whether it leaves open if there is a solution.
    pub(super) fn is_open(&self) -> bool {
        matches!(
            self,
            Self::NotConverged { .. }
                | Self::PhasesNotSettled { .. }
                | Self::NoIonicStrength { .. }
                | Self::WaterActivityNotConverged { .. }
                | Self::Uncertified { .. }
        )
    }
}
