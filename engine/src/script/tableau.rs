//! `Tableau` in scripts: the bare problem of components, a stoichiometric tableau and totals.

use rhai::plugin::*;
use rhai::{Array, Dynamic, FLOAT, INT, ImmutableString, Map};
use serde_json::Value;

use super::faults::advised;
use super::show::Style;
use super::state::certificate_table;
use super::{Fail, Host, ScriptResult, Vocabulary, docs, fail, numbers};
use crate::present::{Column, Table};
use crate::solve::{Settings, SolveError};
use crate::tableau::{Answer, Fault, Solution, Tableau};
use crate::text::count;

/// An answer with the tableau that it belongs to.
#[derive(Debug, Clone)]
struct Solved {
    tableau: Tableau,
    answer: Answer,
}

/// Registers the types.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(tableau_functions))
        .module(rhai::exported_module!(answer_functions))
        .pure(&["tableau", "load_tableau", "solve", "sensitivities"])
        .native::<Tableau>("Tableau", show_tableau)
        .native::<Solved>("Solution", show_solved);
}

fn show_tableau(tableau: &Tableau, _: &Style) -> String {
    let phases = tableau.phases().count();
    format!(
        "tableau of {}, {} and {phases} phases; `.solve()` solves it",
        count(tableau.components().len(), "component"),
        count(tableau.species().len(), "species").trim_end_matches('s'),
    )
}

fn show_solved(solved: &Solved, _: &Style) -> String {
    let Some(solution) = solved.answer.solution() else {
        return format!("{}: {}", solved.answer.status(), solved.answer.reason());
    };
    let line = |names: &[String], values: &[f64]| {
        let values = names.iter().zip(values).map(|(name, x)| format!("{name} {}", numbers::general(*x, 6)));
        values.collect::<Vec<_>>().join("   ")
    };
    let phases: Vec<String> = solved.tableau.phases().map(str::to_owned).collect();
    let mut lines = vec![
        format!("{} in {}", solved.answer.status(), count(solution.converged.effort.iterations, "iteration")),
        format!("  log_c    {}", line(solved.tableau.species(), &solution.log_c)),
    ];
    if !phases.is_empty() {
        lines.push(format!("  amounts  {}", line(&phases, &solution.amounts)));
    }
    lines.join("\n")
}

/// A script value as JSON. Numbers that JSON does not know become texts, which the reader refuses with their place.
fn json(value: &Dynamic) -> Result<Value, Fail> {
    if let Some(map) = value.read_lock::<Map>() {
        let entry = |(key, item): (&rhai::Identifier, &Dynamic)| Ok((key.to_string(), json(item)?));
        return Ok(Value::Object(map.iter().map(entry).collect::<Result<_, Fail>>()?));
    }
    if let Some(items) = value.read_lock::<Array>() {
        return Ok(Value::Array(items.iter().map(json).collect::<Result<_, _>>()?));
    }
    if let Some(text) = value.read_lock::<ImmutableString>() {
        return Ok(text.as_str().into());
    }
    if let Ok(number) = value.as_int() {
        return Ok(number.into());
    }
    if let Ok(number) = value.as_float() {
        return Ok(
            serde_json::Number::from_f64(number).map_or_else(|| number.to_string().into(), Value::Number)
        );
    }
    if let Ok(flag) = value.as_bool() {
        return Ok(flag.into());
    }
    if value.is_unit() {
        return Ok(Value::Null);
    }
    Err(fail(format!("{} cannot stand in a tableau", docs::described(value)))
        .help("numbers, texts, lists and maps can")
        .argument(0))
}

/// All faults: one as the message, several as help lines under their count.
fn refused(faults: &[Fault]) -> Fail {
    match faults {
        [fault] => advised(&fault.to_string()),
        faults => faults
            .iter()
            .fold(fail(format!("the tableau has {}", count(faults.len(), "fault"))), |fail, fault| {
                fail.help(fault.to_string())
            }),
    }
}

fn solve(host: &Host, tableau: &Tableau) -> ScriptResult<Solved> {
    let settings = Settings { stop: Some(host.stop().flag()), ..Settings::default() };
    match tableau.solve(&settings) {
        Ok(answer) => Ok(Solved { tableau: tableau.clone(), answer }),
        Err(error) => {
            host.stop().check()?;
            Err(Fail::from(error).into())
        }
    }
}

impl From<SolveError> for Fail {
    fn from(error: SolveError) -> Self {
        fail(error.to_string())
    }
}

fn solution(solved: &Solved) -> Result<&Solution, Fail> {
    solved.answer.solution().ok_or_else(|| {
        fail(format!("the problem is {}: {}", solved.answer.status(), solved.answer.reason()))
            .help("look at `.status` first")
    })
}

fn floats(values: &[f64]) -> Array {
    values.iter().map(|value| Dynamic::from_float(*value)).collect()
}

fn texts(values: &[String]) -> Array {
    values.iter().map(|value| Dynamic::from(value.clone())).collect()
}

/// Problems of components, a tableau and totals.
#[export_module]
mod tableau_functions {
    use super::*;

    /// A bare equilibrium problem: `components`, their `totals` (zero and negative ones are legal), and `species` with
    /// their coefficients `nu` in the components, `log_k` of formation and `charge`. Components are species of their own
    /// unless listed in `bare`, with `charges` where these matter. `fixed` holds `log_a` of components; `phases` have
    /// `members`, one for a pure phase, several for an ideal mixture or a gas at fixed pressure. `activity` is "ideal" or
    /// "davies", the latter with `davies: #{ A: 0.509, b: 0.3 }` unless stated. Numbers may be decimal texts.
    ///
    /// ```rhai
    /// let water = tableau(#{ components: ["H"], totals: [0.0], species: [ #{ name: "OH", nu: [-1], log_k: -14.0 } ] });
    /// fmt(water.solve().log_a[0], ".6f")   // "-7.000000"
    /// ```
    #[rhai_fn(name = "tableau", return_raw)]
    pub fn new_tableau(definition: Map) -> ScriptResult<Tableau> {
        let value = json(&Dynamic::from_map(definition))?;
        Ok(Tableau::read(&value).map_err(|faults| refused(&faults))?)
    }

    /// A tableau from a JSON file beside the script, with the same keys; all faults of a file are reported at once.
    #[rhai_fn(return_raw)]
    pub fn load_tableau(context: NativeCallContext, file: &str) -> ScriptResult<Tableau> {
        let text =
            Host::of(&context).files().read_text(file).map_err(|error| Fail::from(error).argument(0))?;
        Ok(Tableau::parse(&text).map_err(|faults| refused(&faults).argument(0))?)
    }

    /// The equilibrium, certified, or why there is none: see `.status`.
    ///
    /// ```rhai
    /// let lack = tableau(#{ components: ["A", "B"], bare: ["B"], totals: [1, 2],
    ///     species: [ #{ name: "AB", nu: [1, 1], log_k: 5 } ] });
    /// lack.solve().status   // "infeasible"
    /// ```
    #[rhai_fn(name = "solve", pure, return_raw)]
    pub fn solve_tableau(context: NativeCallContext, tableau: &mut Tableau) -> ScriptResult<Solved> {
        solve(&Host::of(&context), tableau)
    }

    /// d ln c of each species (rows) by ln K of each species and member of a phase, by each total and by each fixed
    /// ln a (columns), at the equilibrium.
    ///
    /// ```rhai
    /// let water = tableau(#{ components: ["H"], totals: [0.0], species: [ #{ name: "OH", nu: [-1], log_k: -14.0 } ] });
    /// fmt(water.sensitivities().column("ln K(OH)").values[0], ".6f")   // "0.500000"
    /// ```
    #[rhai_fn(name = "sensitivities", pure, return_raw)]
    pub fn tableau_sensitivities(context: NativeCallContext, tableau: &mut Tableau) -> ScriptResult<Table> {
        let solved = solve(&Host::of(&context), tableau)?;
        let derivatives = tableau.sensitivities(solution(&solved)?).ok_or_else(|| {
            fail("the composition does not change smoothly here")
                .help("a phase is just about to form or to vanish")
        })?;
        let species = Column::texts("species", tableau.species().iter().map(String::as_str));
        let columns = derivatives.into_iter().map(|column| Column::numbers(column.by.as_str(), column.ln_c));
        Ok(Table::new(std::iter::once(species).chain(columns)).map_err(Fail::from)?)
    }
}

/// What a solved tableau answers.
#[export_module]
mod answer_functions {
    use super::*;

    /// "solved", "solved with zeros", "infeasible" or "unbounded".
    #[rhai_fn(name = "status", get = "status", pure)]
    pub fn status(solved: &mut Solved) -> String {
        solved.answer.status().into()
    }
    /// Why there is no solution, as a combination of totals or the phase without end; empty where there is one.
    #[rhai_fn(name = "reason", get = "reason", pure)]
    pub fn reason(solved: &mut Solved) -> String {
        solved.answer.reason().into()
    }
    /// Names of the species that are exactly zero.
    #[rhai_fn(name = "zeros", get = "zeros", pure, return_raw)]
    pub fn zeros(solved: &mut Solved) -> ScriptResult<Array> {
        Ok(texts(&solution(solved)?.zeros))
    }
    /// log10 of the activity of each component.
    #[rhai_fn(name = "log_a", get = "log_a", pure, return_raw)]
    pub fn log_a(solved: &mut Solved) -> ScriptResult<Array> {
        Ok(floats(&solution(solved)?.log_a))
    }
    /// log10 of the concentration of each species, components first, `bare` ones left out.
    #[rhai_fn(name = "log_c", get = "log_c", pure, return_raw)]
    pub fn log_c(solved: &mut Solved) -> ScriptResult<Array> {
        Ok(floats(&solution(solved)?.log_c))
    }
    /// Amount of each phase; of a mixture the sum over its members.
    #[rhai_fn(name = "amounts", get = "amounts", pure, return_raw)]
    pub fn amounts(solved: &mut Solved) -> ScriptResult<Array> {
        Ok(floats(&solution(solved)?.amounts))
    }
    /// log10 of the saturation of each phase: 0 where it is present.
    #[rhai_fn(name = "saturation", get = "saturation", pure, return_raw)]
    pub fn saturation(solved: &mut Solved) -> ScriptResult<Array> {
        Ok(floats(&solution(solved)?.saturation))
    }
    /// Mole fractions of the members of each phase.
    #[rhai_fn(name = "mole_fractions", get = "mole_fractions", pure, return_raw)]
    pub fn mole_fractions(solved: &mut Solved) -> ScriptResult<Array> {
        Ok(solution(solved)?.mole_fractions.iter().map(|x| Dynamic::from_array(floats(x))).collect())
    }
    /// Amount of each fixed component that is left over; negative: supplied from outside to hold its activity.
    #[rhai_fn(name = "exchange", get = "exchange", pure, return_raw)]
    pub fn exchange(solved: &mut Solved) -> ScriptResult<Array> {
        Ok(floats(&solution(solved)?.exchange))
    }
    /// Ionic strength, in the unit of the totals.
    #[rhai_fn(name = "ionic_strength", get = "ionic_strength", pure, return_raw)]
    pub fn solved_ionic_strength(solved: &mut Solved) -> ScriptResult<FLOAT> {
        Ok(solution(solved)?.converged.ionic_strength)
    }
    /// Steps that the solver took.
    #[rhai_fn(name = "iterations", get = "iterations", pure, return_raw)]
    pub fn iterations(solved: &mut Solved) -> ScriptResult<INT> {
        Ok(INT::try_from(solution(solved)?.converged.effort.iterations).unwrap_or(INT::MAX))
    }
    /// What was checked about the solution.
    #[rhai_fn(name = "certificate", pure, return_raw)]
    pub fn solved_certificate(solved: &mut Solved) -> ScriptResult<Table> {
        Ok(certificate_table(&solution(solved)?.converged.certificate)?)
    }
}
