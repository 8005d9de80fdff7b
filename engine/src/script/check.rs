//! What can be refused before a script runs, and the place of an argument, both read off the syntax tree.

use std::collections::BTreeSet;

use rhai::{AST, ASTNode, Expr, FnCallExpr, Position, Stmt, StmtBlock};

use super::diagnostic::At;
use super::{Fail, fail, words};

/// Names of functions and methods whose only effect is their result. A statement that drops such a result is a
/// mistake: values here never change in place.
#[derive(Debug, Clone, Default)]
pub(super) struct Pure(BTreeSet<&'static str>);

impl Pure {
    pub(super) fn extend(&mut self, names: &[&'static str]) {
        self.0.extend(names);
    }

    pub(super) fn contains(&self, name: &str) -> bool {
        self.0.contains(name)
    }
}

/// The first fault that needs no run to be seen. `ends_with_semicolon` says that the value of the last statement is
/// dropped too.
/// `own` are the functions the script defines, which may reuse any name.
pub(super) fn check(
    ast: &AST,
    own: &BTreeSet<String>,
    pure: &Pure,
    ends_with_semicolon: bool,
) -> Result<(), (Fail, Position)> {
    let mut checker = Checker { pure, own, faults: Vec::new() };
    checker.block(ast.statements(), !ends_with_semicolon);
    for function in ast.iter_functions() {
        let (name, arity) = (function.name, function.params.len());
        let mut alone = ast.clone_functions_only();
        alone.retain_functions(|_, _, n, a| n == name && a == arity);
        checker.function_body(&alone);
    }
    ast.walk(&mut |path| {
        if let Some(node) = path.last() {
            checker.node(node);
        }
        true
    });
    checker
        .faults
        .into_iter()
        .min_by_key(|(_, position)| (position.line(), position.position()))
        .map_or(Ok(()), Err)
}

/// Names of the functions that `ast` defines.
pub(super) fn own_functions(ast: &AST) -> BTreeSet<String> {
    ast.iter_functions().map(|function| function.name.to_owned()).collect()
}

struct Checker<'a> {
    pure: &'a Pure,
    own: &'a BTreeSet<String>,
    faults: Vec<(Fail, Position)>,
}

impl Checker<'_> {
    fn node(&mut self, node: &ASTNode) {
        match node {
            ASTNode::Stmt(Stmt::If(flow, _)) => {
                self.block(flow.body.statements(), true);
                self.block(flow.branch.statements(), true);
            }
            // The last of a `try` may be there only to see whether it fails.
            ASTNode::Stmt(Stmt::TryCatch(flow, _)) => {
                self.block(flow.body.statements(), true);
                self.block(flow.branch.statements(), false);
            }
            ASTNode::Stmt(Stmt::While(flow, _) | Stmt::Do(flow, ..)) => {
                self.block(flow.body.statements(), false)
            }
            ASTNode::Stmt(Stmt::For(parts, _)) => self.block(parts.2.body.statements(), false),
            ASTNode::Stmt(Stmt::Block(block)) | ASTNode::Expr(Expr::Stmt(block)) => {
                self.block(block.statements(), true);
            }
            ASTNode::Stmt(Stmt::FnCall(call, position)) | ASTNode::Expr(Expr::FnCall(call, position)) => {
                self.refused(call, *position);
            }
            _ => {}
        }
    }

    /// Every statement drops its value except the last of a block that has one.
    fn block(&mut self, statements: &[Stmt], last_is_value: bool) {
        let dropped = statements.len().saturating_sub(usize::from(last_is_value));
        for statement in &statements[..dropped] {
            let faults = self.dropped(statement);
            self.faults.extend(faults);
        }
    }

    /// The faults of a statement whose value goes nowhere: then that of its blocks goes nowhere either.
    fn dropped(&self, statement: &Stmt) -> Vec<(Fail, Position)> {
        let last =
            |block: &StmtBlock| block.statements().last().map(|last| self.dropped(last)).unwrap_or_default();
        match statement {
            Stmt::If(flow, _) => [last(&flow.body), last(&flow.branch)].concat(),
            Stmt::Block(block) => last(block),
            _ => self.unused(statement).into_iter().collect(),
        }
    }

    /// A function's statements can only be visited, so each is judged when the next one shows that it is not the last.
    fn function_body(&mut self, function: &AST) {
        let mut previous = Vec::new();
        function.walk(&mut |path| {
            if let [ASTNode::Stmt(statement)] = path {
                self.faults.append(&mut previous);
                previous = self.dropped(statement);
            }
            true
        });
    }

    fn unused(&self, statement: &Stmt) -> Option<(Fail, Position)> {
        let (what, position) = match statement {
            Stmt::FnCall(call, position) => self.result_of(call, *position)?,
            Stmt::Expr(expression) => self.result(expression)?,
            _ => return None,
        };
        let advice = if what.contains("==") {
            "to set a variable write one `=`"
        } else {
            "write `let name = …` to keep it"
        };
        Some((fail(format!("the result of {what} is not used")).help(advice), position))
    }

    fn result(&self, expression: &Expr) -> Option<(String, Position)> {
        match expression {
            Expr::FnCall(call, position) | Expr::MethodCall(call, position) => {
                self.result_of(call, *position)
            }
            Expr::Dot(parts, ..) => self.result(&parts.rhs),
            Expr::Property(names, position) => Some((format!("`.{}`", names.2), *position)),
            _ => None,
        }
    }

    fn result_of(&self, call: &FnCallExpr, position: Position) -> Option<(String, Position)> {
        let name = call.name.as_str();
        if call.op_token.is_some() || words::deed(name).is_some() {
            return Some((format!("`{}`", words::sign(name)), position));
        }
        (self.pure.0.contains(name) && !self.own.contains(name)).then(|| (format!("`{name}`"), position))
    }

    fn refused(&mut self, call: &FnCallExpr, position: Position) {
        let name = call.name.as_str();
        if self.own.contains(name) || !call.namespace.is_empty() {
            return;
        }
        let fault = match (name, call.args.len()) {
            ("log", 1) => fail("`log` does not say which logarithm: write `log10(x)` or `ln(x)`"),
            ("log", 2) => fail("`log` is not used here: write `ln(x)/ln(base)`"),
            ("eval", _) => fail("`eval` is not available: a script must show what it does"),
            ("sleep", _) => fail("`sleep` is not available: nothing here waits"),
            _ => return,
        };
        self.faults.push((fault, position));
    }
}

/// Line, column and width in characters of the part `at` of the call that stands at `position`.
pub(super) fn locate(ast: &AST, position: Position, at: &At) -> Option<Spot> {
    let mut found = None;
    ast.walk(&mut |path| {
        let call = match path.last() {
            Some(ASTNode::Stmt(Stmt::FnCall(call, here))) if *here == position => call,
            Some(ASTNode::Expr(Expr::FnCall(call, here) | Expr::MethodCall(call, here)))
                if *here == position =>
            {
                call
            }
            _ => return true,
        };
        found = part(ast, call, at);
        false
    });
    found
}

/// A place found in the syntax tree.
pub(super) enum Spot {
    /// The token that begins here.
    Token(Position),
    /// Characters within the text literal that begins here.
    Within { literal: Position, content: String, start: usize, length: usize },
}

/// The place of the one call of `method`; none if there are several.
pub(super) fn only_call(ast: &AST, method: &str) -> Position {
    let mut places = BTreeSet::new();
    ast.walk(&mut |path| {
        if let Some(ASTNode::Expr(Expr::MethodCall(call, position))) = path.last()
            && call.name == method
        {
            places.insert((position.line(), position.position()));
        }
        true
    });
    match places.first() {
        Some((Some(line), column)) if places.len() == 1 => place_of(*line, column.unwrap_or(1)),
        _ => Position::NONE,
    }
}

/// Lines and columns come from the interpreter's own positions, which are two bytes wide.
fn place_of(line: usize, column: usize) -> Position {
    let small = |number: usize| u16::try_from(number).unwrap_or(u16::MAX);
    Position::new(small(line).max(1), small(column))
}

fn part(ast: &AST, call: &FnCallExpr, at: &At) -> Option<Spot> {
    match at {
        At::Call => None,
        At::Argument(index) => call.args.get(*index).map(|argument| Spot::Token(argument.start_position())),
        At::Key(key) => {
            call.args.iter().find_map(|argument| key_position(ast, argument, key)).map(Spot::Token)
        }
        At::Text { argument, start, length } => match call.args.get(*argument)? {
            Expr::StringConstant(content, literal) => Some(Spot::Within {
                literal: *literal,
                content: content.to_string(),
                start: *start,
                length: *length,
            }),
            other => Some(Spot::Token(other.start_position())),
        },
    }
}

/// The key in a map literal, in one nested in it, or in the literal a variable was given.
fn key_position(ast: &AST, expression: &Expr, key: &str) -> Option<Position> {
    match expression {
        Expr::Map(map, _) => {
            let own = map.0.iter().find(|(ident, _)| ident.name == key).map(|(ident, _)| ident.pos);
            own.or_else(|| map.0.iter().find_map(|(_, value)| key_position(ast, value, key)))
        }
        Expr::Array(items, _) => items.iter().find_map(|item| key_position(ast, item, key)),
        Expr::Variable(variable, ..) => key_of_variable(ast, &variable.1, key),
        _ => None,
    }
}

fn key_of_variable(ast: &AST, name: &str, key: &str) -> Option<Position> {
    let mut found = None;
    ast.walk(&mut |path| {
        if let Some(ASTNode::Stmt(Stmt::Var(parts, ..))) = path.last()
            && parts.0.name == name
            && matches!(parts.1, Expr::Map(..))
        {
            found = key_position(ast, &parts.1, key).or(found);
        }
        true
    });
    found
}
