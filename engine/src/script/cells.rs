//! Running a script statement by statement, so that whoever gathers a report knows where each result belongs.

use std::sync::Arc;

use rhai::{AST, ASTNode, Dynamic, Scope, Stmt};

use super::ScriptEngine;
use super::diagnostic::Diagnostic;
use super::engine::{bug, quietly};
use super::host::Shown;
use super::input::ends_with_semicolon;
use super::modules::Source;

impl ScriptEngine {
    /// As [`ScriptEngine::evaluate`], announcing each statement before it runs. Must be called on a deep stack.
    pub(super) fn evaluate_by_statement(
        &self,
        name: &str,
        source: &Arc<Source>,
        scope: &mut Scope<'static>,
    ) -> Result<Option<Dynamic>, Box<Diagnostic>> {
        if must_run_whole(source) {
            self.host.report(Shown::Statement(1));
            return self.evaluate(name, source, scope);
        }
        self.arm();
        let functions = source.ast.shared_lib();
        let mut imports: Vec<Stmt> = Vec::new();
        let mut last = Dynamic::UNIT;
        for statement in source.ast.statements() {
            self.host.report(Shown::Statement(statement.position().line().unwrap_or(1)));
            // An import lasts as long as the evaluation it stands in.
            let statements = imports.iter().cloned().chain([statement.clone()]);
            let mut part = AST::new(statements, functions.clone());
            part.set_source(name);
            if matches!(statement, Stmt::Import(..)) {
                imports.push(statement.clone());
            }
            last = match quietly(|| self.engine.eval_ast_with_scope::<Dynamic>(scope, &part)) {
                Ok(Ok(value)) => value,
                Ok(Err(error)) => {
                    return Err(self.translator(name, Arc::clone(source), scope).diagnose(error));
                }
                Err(panic) => return Err(bug(&*panic)),
            };
        }
        let shown = !ends_with_semicolon(&source.text) && !last.is_unit();
        Ok(shown.then(|| last.flatten()))
    }
}

/// A script that leaves early, or whose functions read its constants, cannot be cut.
fn must_run_whole(source: &Source) -> bool {
    let mut leaves = false;
    let only_statements = AST::new(source.ast.statements().iter().cloned(), rhai::Module::new());
    only_statements.walk(&mut |path| {
        leaves |= matches!(path.last(), Some(ASTNode::Stmt(Stmt::Return(..))));
        !leaves
    });
    leaves || source.text.contains("global::")
}
