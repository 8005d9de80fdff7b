//! What was measured in a water, and what is done to it.
//!
//! A [`Sample`] has two parts. Its *analysis* fixes the conserved totals at the sample's own temperature: pH,
//! alkalinity and dissolved inorganic carbon are evidence there. Its *treatments* act on those totals: pH and the rest
//! become results. Nothing is computed in this room; the equilibrium room does both with one ledger.

pub mod analysis;
pub mod analyte;
pub mod concentration;
pub mod csv_text;
pub mod gas_mixture;
pub mod marine;
pub mod neighbour;
pub mod redox;
pub mod sample;
pub mod survey;
pub mod treatment;

pub use analysis::{Analysis, Dissolved, Evidence, Measured, Ph};
pub use analyte::Analyte;
pub use gas_mixture::GasMixture;
pub use neighbour::Neighbour;
pub use sample::{Sample, SampleError};
pub use survey::{Survey, SurveyError};
pub use treatment::{Adjust, Dose, Titrant, Treatment};
