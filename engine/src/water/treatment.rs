//! What is done to a water after its analysis: surroundings, solids, temperature.

use crate::units::{Pressure, Temperature};

/// One treatment; minerals and gases go by the name the user gave, resolved when a ledger is at hand.
#[derive(Debug, Clone, PartialEq)]
pub enum Treatment {
    /// Contact with so much of a gas that its fugacity, bar, stays fixed.
    OpenTo {
        /// The gas, `CO2(g)`.
        gas: String,
        /// Fugacity in bar.
        fugacity: f64,
    },
    /// Contact with an unlimited solid, which keeps its saturation index.
    Saturate {
        /// The solid.
        solid: String,
        /// Saturation index kept.
        index: f64,
    },
    /// A solid may form where its saturation index would exceed a threshold.
    Allow {
        /// The solid.
        solid: String,
        /// Saturation index above which it forms.
        above: f64,
    },
    /// pH is kept.
    HoldPh {
        /// The pH kept.
        ph: f64,
        /// A neutral substance that brings it there, `NaOH`; `None`: H⁺ against inert charge.
        reagent: Option<String>,
    },
    /// pe is kept.
    HoldPe {
        /// The pe kept.
        pe: f64,
        /// A neutral substance that brings it there, `O2`; `None`: electrons against inert charge.
        reagent: Option<String>,
    },
    /// Another temperature.
    WarmTo(Temperature),
    /// Another pressure.
    CompressTo(Pressure),
}
