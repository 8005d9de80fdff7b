//! Propagation with correlation against a general-purpose package: see `uncertainty/README.md`.

use std::sync::Arc;

use lysocline_engine::quantity::{Quantity, QuantityError, correlate_all};
use lysocline_engine::script::{Options, ScriptEngine, Session};
use lysocline_engine::units::Unit;
use serde::Deserialize;

/// What two orders of evaluation may differ by, relative.
const ROUNDING: f64 = 1e-12;

#[derive(Deserialize)]
struct File {
    group: Vec<Group>,
}

/// Expressions of the same inputs.
#[derive(Deserialize)]
struct Group {
    values: Vec<f64>,
    sigmas: Vec<f64>,
    correlation: Option<Vec<Vec<f64>>>,
    expression: Vec<Expression>,
}

#[derive(Deserialize)]
struct Expression {
    script: String,
    postfix: String,
    value: f64,
    sigma: f64,
}

impl Group {
    fn inputs(&self) -> Vec<Quantity> {
        let input = |(k, (value, sigma)): (usize, (&f64, &f64))| {
            Quantity::measured(*value, Unit::one(), Some(*sigma), &format!("x{k}")).unwrap()
        };
        let inputs: Vec<Quantity> = self.values.iter().zip(&self.sigmas).enumerate().map(input).collect();
        match &self.correlation {
            Some(matrix) => correlate_all(&inputs, matrix).unwrap(),
            None => inputs,
        }
    }

    /// The same inputs as variables of a script.
    fn session(&self) -> Session {
        let mut session = Session::new(Arc::new(ScriptEngine::new(Options::default())));
        let inputs: Vec<String> = self
            .values
            .iter()
            .zip(&self.sigmas)
            .map(|(value, sigma)| format!("{value:?} ± {sigma:?}"))
            .collect();
        let mut enter =
            |entry: String| session.enter(&entry).map(|_| ()).unwrap_or_else(|error| panic!("{error:?}"));
        enter(format!("let x = [{}];", inputs.join(", ")));
        if let Some(matrix) = &self.correlation {
            enter(format!("let x = correlate(x, {matrix:?});"));
        }
        (0..self.values.len()).for_each(|k| enter(format!("let x{k} = x[{k}];")));
        session
    }
}

/// Reverse Polish notation over the inputs `x0`, `x1`, …
fn evaluated(postfix: &str, inputs: &[Quantity]) -> Result<Quantity, QuantityError> {
    let mut stack: Vec<Quantity> = Vec::new();
    for word in postfix.split(' ') {
        let mut pop = || stack.pop().expect("an operand");
        let result = match word {
            "+" | "-" | "*" | "/" | "pow" => {
                let (b, a) = (pop(), pop());
                match word {
                    "+" => &a + &b,
                    "-" => &a - &b,
                    "*" => &a * &b,
                    "/" => &a / &b,
                    _ => a.powf(b.value()),
                }?
            }
            "sqrt" => pop().sqrt()?,
            "ln" => pop().ln()?,
            "log10" => pop().log10()?,
            "exp" => pop().exp()?,
            "exp10" => pop().exp10()?,
            _ => match word.strip_prefix('x') {
                Some(k) => inputs[k.parse::<usize>().expect("the number of an input")].clone(),
                None => Quantity::from(word.parse::<f64>().expect("a number")),
            },
        };
        stack.push(result);
    }
    Ok(stack.pop().expect("a result"))
}

#[track_caller]
fn agrees(expression: &Expression, found: &Quantity) {
    let apart = |a: f64, b: f64| (a - b).abs() / b.abs();
    let (value, sigma) = (found.value(), found.sigma().expect("stated"));
    assert!(
        apart(value, expression.value) < ROUNDING,
        "{}: {value:e} {:e}",
        expression.script,
        expression.value
    );
    assert!(
        apart(sigma, expression.sigma) < ROUNDING,
        "{}: {sigma:e} {:e}",
        expression.script,
        expression.sigma
    );
}

fn groups() -> Vec<Group> {
    let file: File = toml::from_str(include_str!("uncertainty/expressions.toml")).unwrap();
    let is_correlated = |group: &&Group| group.correlation.is_some();
    assert!(file.group.iter().filter(is_correlated).count() * 2 >= file.group.len());
    assert!(file.group.iter().map(|group| group.expression.len()).sum::<usize>() >= 200);
    file.group
}

#[test]
fn quantities_propagate_as_the_package_does() {
    for group in groups() {
        let inputs = group.inputs();
        for expression in &group.expression {
            agrees(expression, &evaluated(&expression.postfix, &inputs).unwrap());
        }
    }
}

#[test]
fn scripts_propagate_as_the_package_does() {
    for group in groups() {
        let mut session = group.session();
        for expression in &group.expression {
            let result = session.enter(&expression.script).unwrap_or_else(|error| panic!("{error:?}"));
            agrees(expression, &result.expect("a value").cast::<Quantity>());
        }
    }
}
