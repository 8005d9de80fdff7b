//! What can be found wrong with a script without running it: all of it at once.
//!
//! Beside what cannot be read and what is refused before running: variables and functions that are nowhere defined,
//! observables asked for that cannot be read, and calls whose arguments are all written out, such as `sample(#{ ph: 7 })` or `reaction("H2O <=> H^+")`. These are tried,
//! each on its own: a function whose only effect is its result tells its faults with their places.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use rhai::{AST, ASTNode, Dynamic, Expr, FnCallExpr, Position, Scope, Stmt};

use super::diagnostic::{Diagnostic, Fail, fail};
use super::engine::{clean, on_deep_stack, quietly};
use super::modules::Source;
use super::{ScriptEngine, words};
use crate::equilibrium::{Asked, Observable, ObservableError};
use crate::ledger::shipped;

/// Names the interpreter knows though nobody registers them.
const BUILT_IN: [&str; 12] = [
    "curry",
    "call",
    "Fn",
    "type_of",
    "is_def_var",
    "is_def_fn",
    "is_shared",
    "this",
    "args",
    "global",
    "print",
    "debug",
];

impl ScriptEngine {
    /// Everything that can be found wrong with a script without running it, in order of place.
    #[must_use]
    pub fn findings(&self, name: &str, text: &str) -> Vec<Diagnostic> {
        let text = clean(text);
        on_deep_stack(|| match self.compile(name, &text, &Scope::new(), None) {
            Err(diagnostic) => vec![*diagnostic],
            Ok(source) => self.within(name, &source),
        })
    }

    fn within(&self, name: &str, source: &Arc<Source>) -> Vec<Diagnostic> {
        let scope = Scope::new();
        let translator = || self.translator(name, Arc::clone(source), &scope);
        let unknown = unknown_names(&source.ast, &self.function_names());
        let unreadable = observables(&source.ast);
        let early = unknown.into_iter().chain(unreadable);
        let mut found: Vec<Diagnostic> =
            early.map(|(fail, place)| *translator().refused(fail, place)).collect();
        self.arm();
        for (call, position) in self.tryable(&source.ast) {
            let statement = Stmt::FnCall(Box::new(call), position);
            let mut alone = AST::new([statement], rhai::Module::new());
            alone.set_source(name);
            let tried = quietly(|| self.engine.eval_ast::<Dynamic>(&alone));
            if let Ok(Err(error)) = tried {
                found.push(*translator().diagnose(error));
            }
        }
        let place = |found: &Diagnostic| found.place.as_ref().map(|place| (place.line, place.column));
        found.sort_by_key(place);
        found.dedup();
        found
    }

    fn function_names(&self) -> BTreeSet<String> {
        self.entries().into_iter().map(|entry| entry.name).collect()
    }

    /// Calls that can be tried alone: of a function whose only effect is its result, with arguments written out.
    fn tryable(&self, ast: &AST) -> Vec<(FnCallExpr, Position)> {
        let own = super::check::own_functions(ast);
        let mut calls = Vec::new();
        ast.walk(&mut |path| {
            if let Some(
                ASTNode::Expr(Expr::FnCall(call, position)) | ASTNode::Stmt(Stmt::FnCall(call, position)),
            ) = path.last()
                && self.vocabulary.pure.contains(&call.name)
                && !own.contains(call.name.as_str())
                && call.args.iter().all(is_written_out)
            {
                calls.push(((**call).clone(), *position));
            }
            true
        });
        calls
    }
}

/// Whether an argument needs no variable: numbers, texts, and lists and maps of these.
fn is_written_out(expression: &Expr) -> bool {
    match expression {
        Expr::Array(items, _) => items.iter().all(is_written_out),
        Expr::Map(map, _) => map.0.iter().all(|(_, value)| is_written_out(value)),
        // `-8.48 ± 0.02`: signs between numbers.
        Expr::FnCall(call, _) => {
            let is_sign = call.op_token.is_some() || words::deed(&call.name).is_some();
            is_sign && call.args.iter().all(is_written_out)
        }
        Expr::InterpolatedString(..) | Expr::DynamicConstant(..) => false,
        _ => expression.is_constant(),
    }
}

/// Variables and functions that are defined nowhere in the script. A name defined anywhere passes: where it may be used is
/// found by running.
fn unknown_names(ast: &AST, functions: &BTreeSet<String>) -> Vec<(Fail, Position)> {
    let mut defined: BTreeSet<String> = BUILT_IN.iter().map(ToString::to_string).collect();
    for function in ast.iter_functions() {
        defined.insert(function.name.to_owned());
        defined.extend(function.params.iter().map(ToString::to_string));
    }
    ast.walk(&mut |path| {
        match path.last() {
            Some(ASTNode::Stmt(Stmt::Var(parts, ..))) => drop(defined.insert(parts.0.name.to_string())),
            Some(ASTNode::Stmt(Stmt::For(parts, _))) => {
                defined.insert(parts.0.name.to_string());
                defined.extend(parts.1.iter().map(|counter| counter.name.to_string()));
            }
            Some(ASTNode::Stmt(Stmt::TryCatch(flow, _))) => {
                if let Expr::Variable(caught, ..) = &flow.expr {
                    defined.insert(caught.1.to_string());
                }
            }
            Some(ASTNode::Stmt(Stmt::Import(parts, _))) => drop(defined.insert(parts.1.name.to_string())),
            _ => {}
        }
        true
    });
    let candidates = || defined.iter().map(String::as_str).chain(functions.iter().map(String::as_str));
    let unknown = |what: &str, name: &str| {
        fail(format!("there is no {what} `{name}`")).maybe_help(words::did_you_mean(name, candidates()))
    };
    let known = |name: &str| defined.contains(name) || functions.contains(name);
    let mut found: Vec<(Fail, Position)> = Vec::new();
    ast.walk(&mut |path| {
        match path.last() {
            Some(ASTNode::Expr(Expr::Variable(variable, _, position)))
                if variable.2.is_empty() && !known(&variable.1) =>
            {
                found.push((unknown("variable", &variable.1), *position));
            }
            Some(
                ASTNode::Expr(Expr::FnCall(call, position) | Expr::MethodCall(call, position))
                | ASTNode::Stmt(Stmt::FnCall(call, position)),
            ) if call.namespace.is_empty()
                && call.op_token.is_none()
                && is_a_name(&call.name)
                && !known(&call.name) =>
            {
                let what = if matches!(path.last(), Some(ASTNode::Expr(Expr::MethodCall(..)))) {
                    "method"
                } else {
                    "function"
                };
                found.push((unknown(what, &call.name), *position));
            }
            // A member of a map is named by the script.
            Some(ASTNode::Expr(Expr::Property(names, position)))
                if !functions.contains(names.2.as_str()) && !names_a_key(ast, &names.2) =>
            {
                found.push((unknown("property", &names.2), *position));
            }
            _ => {}
        }
        true
    });
    found
}

/// Methods that take observables of a state or a run, and of a table titles of columns.
const ASK: [&str; 3] = ["get", "table", "column"];

/// Observables written out that cannot be read, such as `SI calcite` or `Sl(calcite)`, or that ask for a mineral or gas next
/// to a known name. A table may have any title, so only what is nearly an observable counts, and only if the script writes
/// the same text nowhere else.
fn observables(ast: &AST) -> Vec<(Fail, Position)> {
    let mut asked: Vec<(String, Position)> = Vec::new();
    let mut written: BTreeMap<String, usize> = BTreeMap::new();
    ast.walk(&mut |path| {
        match path.last() {
            Some(ASTNode::Expr(Expr::StringConstant(text, _))) => {
                *written.entry(text.to_string()).or_default() += 1
            }
            Some(ASTNode::Expr(Expr::Map(map, _))) => {
                map.0.iter().for_each(|(key, _)| *written.entry(key.name.to_string()).or_default() += 1);
            }
            Some(ASTNode::Expr(Expr::MethodCall(call, _)))
                if ASK.contains(&call.name.as_str()) && call.args.len() == 1 =>
            {
                asked.extend(texts(&call.args[0]));
            }
            _ => {}
        }
        true
    });
    let only_asked = |text: &str| {
        let times = asked.iter().filter(|(own, _)| own == text).count();
        written.get(text).is_none_or(|written| *written <= times)
    };
    let found = asked.iter().filter(|(text, _)| only_asked(text));
    found.filter_map(|(text, position)| Some((misread(text)?, *position))).collect()
}

/// Texts that stand alone or in a list.
fn texts(argument: &Expr) -> Vec<(String, Position)> {
    match argument {
        Expr::StringConstant(text, position) => vec![(text.to_string(), *position)],
        Expr::Array(items, _) => items.iter().flat_map(texts).collect(),
        _ => Vec::new(),
    }
}

/// What is wrong with a text that is meant as an observable.
fn misread(text: &str) -> Option<Fail> {
    match Asked::parse(text) {
        Ok(asked) => unknown_phase(&asked.observable),
        Err(error @ ObservableError::Unknown { nearest: Some(_), .. }) if text.contains('(') => {
            Some(error.into())
        }
        Err(error @ ObservableError::Form(..)) => Some(error.into()),
        Err(error @ ObservableError::Unit { .. }) => {
            let name = text.split('[').next().unwrap_or("");
            Asked::parse(name).is_ok().then(|| error.into())
        }
        Err(_) => None,
    }
}

/// A mineral or gas that no shipped ledger knows, with a known one of nearly its name.
fn unknown_phase(asked: &Observable) -> Option<Fail> {
    let (Observable::SaturationIndex(name)
    | Observable::Omega(name)
    | Observable::Fugacity(name)
    | Observable::PartialPressure(name)) = asked
    else {
        return None;
    };
    let ledgers: Vec<_> =
        shipped::names().into_iter().filter_map(|name| shipped::as_shipped(name).ok()).collect();
    if ledgers.iter().any(|ledger| ledger.find_phase(name).is_ok()) {
        return None;
    }
    let known = ledgers.iter().flat_map(|ledger| ledger.phases_by_name()).map(|(name, _)| name);
    let near = words::did_you_mean(name, known)?;
    Some(fail(format!("no shipped ledger knows a mineral or gas `{name}`")).help(near))
}

fn is_a_name(name: &str) -> bool {
    name.starts_with(|c: char| c.is_ascii_alphabetic())
        && words::deed(name).is_none()
        && !name.starts_with("anon$")
        && !super::compare::ORDERINGS.iter().any(|(own, _)| *own == name)
}

/// Whether a map literal anywhere in the script has this key, or a member is set.
fn names_a_key(ast: &AST, key: &str) -> bool {
    let mut found = false;
    ast.walk(&mut |path| {
        match path.last() {
            Some(ASTNode::Expr(Expr::Map(map, _))) => {
                found |= map.0.iter().any(|(ident, _)| ident.name == key)
            }
            Some(ASTNode::Stmt(Stmt::Assignment(parts))) => found |= ends_in(&parts.1.lhs, key),
            _ => {}
        }
        !found
    });
    found
}

fn ends_in(target: &Expr, key: &str) -> bool {
    match target {
        Expr::Dot(parts, ..) | Expr::Index(parts, ..) => ends_in(&parts.rhs, key),
        Expr::Property(names, _) => names.2 == key,
        _ => false,
    }
}
