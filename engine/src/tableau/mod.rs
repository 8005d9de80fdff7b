//! The bare problem: components, a stoichiometric tableau (Morel & Hering 1993) and totals, for benchmark problems and
//! method papers, which have no real species. Names become indices here, and indices names again.
//!
//! A tableau is read from JSON ([`Tableau::parse`], [`Tableau::read`]; a script's map is turned into JSON first), and
//! every fault of it is reported at once. Constants are formation constants from the components, logarithms are
//! decadic, amounts are mol/kg(water) or whatever one unit the totals are in.

mod answer;
mod read;
mod sensitivities;

pub use answer::{Answer, Solution};
pub use read::Fault;
pub use sensitivities::Derivatives;

use crate::activity::Model;
use crate::physics::constants::LN_10;
use crate::solve::{Problem, Settings, SolveError, solve};

/// A problem with its names.
#[derive(Debug, Clone, PartialEq)]
pub struct Tableau {
    components: Vec<String>,
    /// The components that are species, then the species proper.
    species: Vec<String>,
    phases: Vec<Phase>,
    /// Component of each reservoir of the problem.
    fixed: Vec<usize>,
    problem: Problem,
    model: Model,
}

/// A phase of the tableau, as it was listed.
#[derive(Debug, Clone, PartialEq)]
struct Phase {
    name: String,
    part: Part,
}

/// What a phase is in the problem.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Part {
    Mineral(usize),
    Mixture(usize),
}

impl Tableau {
    /// Names of the components.
    #[must_use]
    pub fn components(&self) -> &[String] {
        &self.components
    }

    /// Names of the species, components first, those listed as `bare` left out.
    #[must_use]
    pub fn species(&self) -> &[String] {
        &self.species
    }

    /// Names of the phases.
    pub fn phases(&self) -> impl Iterator<Item = &str> {
        self.phases.iter().map(|phase| phase.name.as_str())
    }

    /// Names of the components whose activity is fixed.
    pub fn fixed(&self) -> impl Iterator<Item = &str> {
        self.fixed.iter().map(|component| self.components[*component].as_str())
    }

    /// The same in numbers.
    #[must_use]
    pub fn problem(&self) -> &Problem {
        &self.problem
    }

    /// Solves it. That there is no solution is an answer too, with its reason.
    ///
    /// # Errors
    ///
    /// Returns the error of the solver when it can neither find the solution nor prove that there is none.
    ///
    /// # Examples
    ///
    /// ```
    /// use lysocline_engine::{solve::Settings, tableau::Tableau};
    ///
    /// let water = r#"{ "components": ["H"], "totals": [0], "species": [{ "name": "OH", "nu": [-1], "log_k": -14 }] }"#;
    /// let answer = Tableau::parse(water).unwrap().solve(&Settings::default())?;
    /// assert!((answer.solution().unwrap().log_a[0] + 7.0).abs() < 1e-13);
    /// # Ok::<(), lysocline_engine::solve::SolveError>(())
    /// ```
    pub fn solve(&self, settings: &Settings) -> Result<Answer, SolveError> {
        match solve(&self.problem, &self.model, settings, None) {
            Ok(converged) => Ok(Answer::Solved(Box::new(Solution::new(self, converged)))),
            Err(SolveError::Infeasible { combination, value }) => {
                Ok(Answer::Infeasible(self.impossible_total(&combination, value)))
            }
            Err(SolveError::Unbounded { mineral_idx }) => {
                Ok(Answer::Unbounded(self.endless(Part::Mineral(mineral_idx))))
            }
            Err(error) => Err(error),
        }
    }

    /// "`T(A) - 2 T(B)` is -1, and …".
    fn impossible_total(&self, combination: &[(usize, f64)], value: f64) -> String {
        let mut sum = String::new();
        for (k, factor) in combination {
            let sign = match (sum.is_empty(), *factor < 0.0) {
                (true, false) => "",
                (true, true) => "-",
                (false, false) => " + ",
                (false, true) => " - ",
            };
            let size = if factor.abs() == 1.0 { String::new() } else { format!("{} ", factor.abs()) };
            sum += &format!("{sign}{size}T({})", self.components[*k]);
        }
        let can = if value < 0.0 { "negative" } else { "positive" };
        format!("`{sum}` is {value}, and no amounts of species and phases can make it {can}")
    }

    fn endless(&self, part: Part) -> String {
        let phase = self.phases.iter().find(|phase| phase.part == part).map_or("", |phase| &phase.name);
        let fixed: Vec<String> = self.fixed().map(|name| format!("`{name}`")).collect();
        format!(
            "the phase `{phase}` stays supersaturated however much of it forms: the fixed activities of {} supply all \
             that it is made of",
            fixed.join(", ")
        )
    }
}

fn log10(ln: f64) -> f64 {
    ln / LN_10
}

#[cfg(test)]
mod tests;
