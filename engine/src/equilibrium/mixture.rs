//! Waters mixed: every part is brought to its own equilibrium, and what it holds dissolved goes into the mixture.

use super::analysis::{self, Analysed};
use super::error::EquilibriumError;
use crate::chem::Species;
use crate::ledger::Ledger;
use crate::quantity::{Quantity, QuantityError};
use crate::solve::Settings;
use crate::units::Unit;
use crate::water::{Dissolved, Sample};

/// The totals of a mixture, parts by their share in the mass of water.
///
/// # Errors
///
/// Returns which part has no equilibrium, and why.
pub fn mix(
    sample: &Sample,
    parts: &[(Sample, f64)],
    ledger: &Ledger,
    settings: &Settings,
) -> Result<Analysed, EquilibriumError> {
    let mut dissolved = Dissolved::default();
    let (mut kelvin, mut notes) = (Vec::new(), Vec::new());
    for (position, (part, share)) in parts.iter().enumerate().filter(|(_, (_, share))| *share > 0.0) {
        let state = super::equilibrate(part, Some(ledger), settings)
            .map_err(|error| of_part(position, part, error))?;
        // No electron is dissolved: they are counted by the oxidation states.
        let totals = state.dissolved_quantities().into_iter();
        for (species, total) in totals.filter(|(species, _)| *species != Species::electron()) {
            dissolved.totals.push((species, shared(&total, *share).map_err(undefined)?));
        }
        for (couple, _) in state.system().couples() {
            let couple = couple.to_string();
            if !dissolved.couples.contains(&couple) {
                dissolved.couples.push(couple);
            }
        }
        kelvin.extend(state.temperature_quantity().map(|temperature| (temperature, *share)));
        for note in part.notes() {
            if !notes.contains(note) {
                notes.push(note.clone());
            }
        }
    }
    if !kelvin.is_empty() {
        let partials: Vec<(&Quantity, f64)> = kelvin.iter().map(|(part, share)| (part, *share)).collect();
        let value = sample.setting().temperature.kelvin();
        let unit = Unit::parse("K").expect("a known unit");
        dissolved.temperature = Some(Quantity::from_partials(value, unit, &partials).map_err(undefined)?);
    }
    let mut analysed = analysis::restore(sample, &dissolved, ledger)?;
    analysed.notes.extend(notes);
    Ok(analysed)
}

fn of_part(position: usize, part: &Sample, error: EquilibriumError) -> EquilibriumError {
    if error == EquilibriumError::Stopped {
        return error;
    }
    let name = part.name().map_or_else(|| format!("water {}", position + 1), |name| format!("`{name}`"));
    EquilibriumError::Unreachable(format!("{name} of the mixture: {error}"))
}

fn shared(total: &Quantity, share: f64) -> Result<Quantity, QuantityError> {
    Quantity::from_partials(total.value() * share, total.unit().clone(), &[(total, share)])
}

fn undefined(error: QuantityError) -> EquilibriumError {
    EquilibriumError::Unreachable(error.to_string())
}
