//! Derivatives of the composition by everything that a tableau states.

use super::{Part, Solution, Tableau};
use crate::solve::sensitivity::{Given, Sensitivities, own_supplies};

/// d ln c of every species by one number of the tableau.
#[derive(Debug, Clone, PartialEq)]
pub struct Derivatives {
    /// The number: "ln K(MOH)", "T(M)", "ln K(phase)", "ln K(phase, 2)" of the second member, "ln a(H)".
    pub by: String,
    /// In the order of [`Tableau::species`]; zero for what is exactly zero. Shape `(n_species,)`.
    pub ln_c: Vec<f64>,
}

impl Tableau {
    /// d ln c by ln K of the species and of the members of phases, by the totals and by ln of the fixed activities.
    ///
    /// Returns `None` where the composition does not change smoothly.
    #[must_use]
    pub fn sensitivities(&self, solution: &Solution) -> Option<Vec<Derivatives>> {
        let linear = Sensitivities::new(
            &self.problem,
            &self.model,
            &solution.converged,
            &own_supplies(&self.problem),
        )?;
        let column = |(by, given): (String, Given)| Derivatives { by, ln_c: linear.push(&given).ln_c };
        Some(self.changes().into_iter().map(column).collect())
    }

    /// A unit change of each number, with its name.
    fn changes(&self) -> Vec<(String, Given)> {
        let zero = Given::zero(&self.problem);
        let mut changes = Vec::new();
        let mut change = |by: String, set: &dyn Fn(&mut Given)| {
            let mut given = zero.clone();
            set(&mut given);
            changes.push((by, given));
        };
        for (i, name) in self.species.iter().enumerate() {
            change(format!("ln K({name})"), &|given| given.ln_k[i] = 1.0);
        }
        for phase in &self.phases {
            let name = &phase.name;
            match phase.part {
                Part::Mineral(p) => change(format!("ln K({name})"), &|given| given.minerals[p] = -1.0),
                Part::Mixture(p) => {
                    for k in 0..self.problem.mixtures[p].members.len() {
                        change(format!("ln K({name}, {})", k + 1), &|given| given.mixtures[p][k] = -1.0);
                    }
                }
            }
        }
        for (j, name) in self.components.iter().enumerate() {
            change(format!("T({name})"), &|given| given.totals[j] = 1.0);
        }
        for (f, name) in self.fixed().enumerate() {
            change(format!("ln a({name})"), &|given| given.reservoirs[f] = 1.0);
        }
        changes
    }
}
