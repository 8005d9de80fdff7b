//! What is to be solved: rows of stoichiometric coefficients with their constants, and totals. Numbers and indices only.

use super::exact::Total;
use super::settings::{Input, SolveError};
use num_rational::Ratio;

/// A stoichiometric coefficient: an integer or a small fraction, exact.
pub type Coefficient = Ratio<i64>;

/// Formation of one species or phase from the components: `Σ ν_j component_j + w H2O = species`.
///
/// ```text
/// ln a = ln K + Σ ν_j λ_j + w ln a_w,    λ_j = ln of the activity of component j
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Row {
    /// (component index, coefficient ν); an index may occur once.
    pub stoichiometry: Vec<(usize, Coefficient)>,
    /// ln of the formation constant.
    pub ln_k: f64,
    /// Charge number; used for the ionic strength and for γ of a species.
    pub charge: f64,
    /// Coefficient w of the solvent.
    pub water: f64,
}

impl Row {
    /// An uncharged row with integer coefficients that does not involve the solvent.
    #[must_use]
    pub fn new(stoichiometry: &[(usize, i64)], ln_k: f64) -> Self {
        let stoichiometry = stoichiometry.iter().map(|&(j, nu)| (j, Coefficient::from_integer(nu))).collect();
        Self { stoichiometry, ln_k, charge: 0.0, water: 0.0 }
    }

    /// The same row with another charge number.
    #[must_use]
    pub fn with_charge(self, charge: f64) -> Self {
        Self { charge, ..self }
    }

    /// The same row with another coefficient of the solvent.
    #[must_use]
    pub fn with_water(self, water: f64) -> Self {
        Self { water, ..self }
    }
}

/// An unlimited source or sink that holds `ln K + Σ ν_j λ_j + w ln a_w` at a value: a fixed pH, a gas at fixed fugacity,
/// an unlimited solid held at a saturation.
#[derive(Debug, Clone, PartialEq)]
pub struct Reservoir {
    /// What is exchanged, formed from the components.
    pub row: Row,
    /// The value held, natural logarithm.
    pub ln_value: f64,
}

/// A pure phase that may form: it is present at `G = 0` or absent at `G < 0`, with
/// `G = ln K + Σ ν_j λ_j + w ln a_w - ln_target`.
///
/// What is present at the start is already contained in the totals.
#[derive(Debug, Clone, PartialEq)]
pub struct Mineral {
    /// Formation from the components; `ln_k` is minus ln of the solubility product.
    pub row: Row,
    /// ln of the saturation ratio at which the phase is held; 0 for equilibrium.
    pub ln_target: f64,
}

/// An ideal mixture that may form, a solid solution or a gas at fixed pressure: present at `G = 0` or absent at `G < 0`,
/// with `G = ln Σ_k exp(ln K_k + Σ ν_kj λ_j + w_k ln a_w) - ln_target`, so that the mole fractions add up to one.
#[derive(Debug, Clone, PartialEq)]
pub struct Mixture {
    /// Formation of each member from the components, as for a pure phase of it.
    pub members: Vec<Row>,
    /// ln of the saturation ratio at which the phase is held; ln of the total pressure of a gas.
    pub ln_target: f64,
}

/// An equilibrium problem of `n_components` components.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Problem {
    /// Number of components; a component is a species only if a row says so.
    pub n_components: usize,
    /// Dissolved species; their `ln a` is `ln γ + ln c`.
    pub species: Vec<Row>,
    /// What has an amount beside the solution, mol/kg(water), `ln n = ln K + Σ ν_j λ_j + w ln a_w`: the gases of a given
    /// volume, ions on an exchanger. It counts in the balances and in nothing else.
    pub others: Vec<Row>,
    /// Equalities.
    pub reservoirs: Vec<Reservoir>,
    /// Phases that may form.
    pub minerals: Vec<Mineral>,
    /// Mixtures that may form.
    pub mixtures: Vec<Mixture>,
    /// Total of each component over species, others and phases, mol/kg(water); zero and negative totals are legal. Shape
    /// `(n_components,)`.
    pub totals: Vec<Total>,
}

/// What stands for the amount of a mixture as a whole: nothing but its own column.
static WHOLE: Row = Row { stoichiometry: Vec::new(), ln_k: 0.0, charge: 0.0, water: 0.0 };

impl Problem {
    /// All rows of the tableau, each with the mixture that it belongs to: what has an amount of its own (species, others,
    /// members of mixtures, mixtures as a whole), then reservoirs, then minerals.
    pub(super) fn rows(&self) -> impl Iterator<Item = (&Row, Option<usize>)> {
        let members = self.mixtures.iter().enumerate();
        let members =
            members.flat_map(|(p, mixture)| mixture.members.iter().map(move |member| (member, Some(p))));
        let wholes = (0..self.mixtures.len()).map(|p| (&WHOLE, Some(p)));
        let reservoirs = self.reservoirs.iter().map(|reservoir| &reservoir.row);
        let minerals = self.minerals.iter().map(|mineral| &mineral.row);
        let species = self.species.iter().chain(&self.others).map(|row| (row, None));
        species.chain(members).chain(wholes).chain(reservoirs.chain(minerals).map(|row| (row, None)))
    }

    /// Number of rows with an amount that is an exponential: species, others, members, mixtures as a whole.
    pub(super) fn n_amounts(&self) -> usize {
        self.whole_row(self.mixtures.len())
    }

    pub(super) fn whole_row(&self, mixture_idx: usize) -> usize {
        let members: usize = self.mixtures.iter().map(|mixture| mixture.members.len()).sum();
        self.first_member() + members + mixture_idx
    }

    /// Row of the first member of the first mixture: species and others come before it.
    pub(super) fn first_member(&self) -> usize {
        self.species.len() + self.others.len()
    }

    /// Rows of the members of a mixture.
    pub(super) fn member_rows(&self, mixture_idx: usize) -> std::ops::Range<usize> {
        let before: usize = self.mixtures[..mixture_idx].iter().map(|mixture| mixture.members.len()).sum();
        let first = self.first_member() + before;
        first..first + self.mixtures[mixture_idx].members.len()
    }

    pub(super) fn reservoir_row(&self, reservoir_idx: usize) -> usize {
        self.n_amounts() + reservoir_idx
    }

    pub(super) fn mineral_row(&self, mineral_idx: usize) -> usize {
        self.reservoir_row(self.reservoirs.len()) + mineral_idx
    }

    /// Checks that every index is in range and every number finite.
    pub(super) fn validate(&self) -> Result<(), SolveError> {
        if self.totals.len() != self.n_components {
            return Err(SolveError::BadInput { input: Input::Totals, idx: self.totals.len() });
        }
        if let Some(idx) = self.totals.iter().position(|total| !total.to_f64().is_finite()) {
            return Err(SolveError::BadInput { input: Input::Totals, idx });
        }
        let is_sound = |row: &Row, value: f64| value.is_finite() && self.is_sound(row);
        let species = self.species.iter().position(|row| !is_sound(row, 0.0));
        let other = self.others.iter().position(|row| !is_sound(row, 0.0));
        let reservoir = self.reservoirs.iter().position(|held| !is_sound(&held.row, held.ln_value));
        let mineral = self.minerals.iter().position(|mineral| !is_sound(&mineral.row, mineral.ln_target));
        let mixture = self.mixtures.iter().position(|mixture| {
            mixture.members.is_empty() || mixture.members.iter().any(|row| !is_sound(row, mixture.ln_target))
        });
        for (input, idx) in [
            (Input::Species, species),
            (Input::Other, other),
            (Input::Reservoir, reservoir),
            (Input::Mineral, mineral),
            (Input::Mixture, mixture),
        ] {
            if let Some(idx) = idx {
                return Err(SolveError::BadInput { input, idx });
            }
        }
        Ok(())
    }

    fn is_sound(&self, row: &Row) -> bool {
        let numbers_finite = [row.ln_k, row.charge, row.water].into_iter().all(f64::is_finite);
        let repeated = |at: usize, j: usize| row.stoichiometry[..at].iter().any(|(earlier, _)| *earlier == j);
        let mut entries = row.stoichiometry.iter().enumerate();
        let indices_sound =
            entries.all(|(at, &(j, nu))| j < self.n_components && *nu.denom() != 0 && !repeated(at, j));
        numbers_finite && indices_sound && row.stoichiometry.iter().any(|(_, nu)| *nu.numer() != 0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::activity::Model;
    use crate::solve::sensitivity::{Found, Given, Sensitivities};
    use crate::solve::{Settings, solve};

    /// A dissolved, 3 of it beside per dissolved one, and 2 A = B beside; total 1, of which c, 3 c, 2 (0.5 c²).
    fn problem(total: f64) -> Problem {
        Problem {
            n_components: 1,
            species: vec![Row::new(&[(0, 1)], 0.0).with_charge(1.0)],
            others: vec![Row::new(&[(0, 1)], 3_f64.ln()), Row::new(&[(0, 2)], 0.5_f64.ln())],
            totals: vec![Total::from(total)],
            ..Problem::default()
        }
    }

    #[test]
    fn what_is_beside_the_solution_counts_in_its_balances_and_not_in_its_ionic_strength() {
        let found = solve(&problem(1.0), &Model::IDEAL, &Settings::default(), None).unwrap();
        let c = (20_f64.sqrt() - 4.0) / 2.0;
        assert!((found.ln_c[0].exp() - c).abs() < 1e-13);
        assert!((found.ln_others[0].exp() - 3.0 * c).abs() < 1e-13);
        assert!((found.ln_others[1].exp() - 0.5 * c * c).abs() < 1e-13);
        assert!((found.ionic_strength - 0.5 * c).abs() < 1e-13);
    }

    #[test]
    fn its_derivatives_are_those_of_the_equations() {
        let problem = problem(1.0);
        let found = solve(&problem, &Model::IDEAL, &Settings::default(), None).unwrap();
        let linear = Sensitivities::new(&problem, &Model::IDEAL, &found, &[]).unwrap();
        // c + 3 c + c² = T, with d ln K of the second other as a parameter k: (4 + 2 c) dc = dT - c² dk.
        let c = found.ln_c[0].exp();
        let by_total = linear.push(&Given { totals: vec![1.0], ..Given::zero(&problem) });
        assert!((by_total.others[1] - 2.0 / (c * (4.0 + 2.0 * c))).abs() < 1e-12);
        let weight = Found { others: vec![0.0, 1.0], ..Found::zero(&problem) };
        let by = linear.pull(&weight);
        assert!((by.totals[0] - by_total.others[1]).abs() < 1e-12);
        assert!((by.others[1] - (1.0 - 2.0 * c / (4.0 + 2.0 * c))).abs() < 1e-12);
    }
}
