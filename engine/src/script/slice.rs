//! The smallest part of a session that gives one variable: which entries its value depends on.
//!
//! The unit is a statement outside of brackets. Each is read once and its syntax tree asked what it reads, what it may change
//! and what it defines; then the session is walked backwards from the variable. Where the tree does not tell, the statement
//! is taken to change what it touches, and is kept. What comes out is run before anyone is given it.
//!
//! What makes this sound, beside reads and writes of variables:
//!
//! - a new `let` of the same name is another variable (`x`, version 2), so nothing before it matters to the new one;
//! - a closure holds its captured variables by reference: who needs the closure needs what is written to them until then;
//! - a closure that changes what it captured changes it wherever the closure is at hand;
//! - a function is called by name, so its newest definition before the call counts, and those of what it calls;
//! - files tie what writes them to what reads them.

use std::collections::{BTreeMap, BTreeSet};
use std::time::Duration;

use rhai::{AST, ASTNode, Dynamic, Expr, FnCallExpr, Module, Stmt};

use super::check::Pure;
use super::input::pieces;
use super::{Fail, Halt, Options, ScriptEngine, Session, fail, same, words};

/// How long a script that is to be saved may take to show that it gives the value, where no other limit is set.
const REHEARSAL: Duration = Duration::from_secs(120);
/// Functions whose only effect is on the output.
const ONLY_SHOW: [&str; 7] = ["print", "debug", "help", "show", "expect", "record", "curry"];
/// Functions that write files, and beginnings of those that read them.
const WRITE_FILES: [&str; 1] = ["save"];
const READ_FILES: [&str; 2] = ["read_", "load_"];
/// Members of texts, arrays, maps and numbers that leave them as they are.
const ONLY_READ: [&str; 44] = [
    "len",
    "is_empty",
    "contains",
    "index_of",
    "keys",
    "values",
    "map",
    "filter",
    "reduce",
    "reduce_rev",
    "some",
    "all",
    "find",
    "find_map",
    "to_string",
    "to_debug",
    "to_float",
    "to_int",
    "to_upper",
    "to_lower",
    "sub_string",
    "split",
    "starts_with",
    "ends_with",
    "chars",
    "floor",
    "ceiling",
    "round",
    "int",
    "fraction",
    "is_nan",
    "is_finite",
    "sin",
    "cos",
    "tan",
    "type_of",
    "is_def_var",
    "is_def_fn",
    "parse_float",
    "parse_int",
    "range",
    "is_shared",
    "extract",
    "zip",
];

/// The smallest script for one variable.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Slice {
    /// The script, each statement as it was accepted.
    pub text: String,
    /// How many statements it has.
    pub kept: usize,
    /// How many the session has.
    pub of: usize,
    /// Whether the dependencies seen were not enough, and all statements are kept instead.
    pub is_whole: bool,
}

impl Session {
    /// The smallest script that gives the variable `name` the value it has now. It was run, and gave the same value to the
    /// last bit.
    ///
    /// # Errors
    ///
    /// Fails when there is no such variable, or when not even the whole session gives the value again.
    pub fn slice(&self, name: &str) -> Result<Slice, Fail> {
        let variables = self.variables();
        let Some((_, value)) = variables.iter().rev().find(|(own, _)| own == name) else {
            let names = variables.iter().map(|(own, _)| own.as_str());
            return Err(
                fail(format!("there is no variable `{name}`")).maybe_help(words::did_you_mean(name, names))
            );
        };
        let units = self.units();
        let plain =
            variables.iter().filter(|(_, value)| !holds_a_closure(value)).map(|(own, _)| own.as_str());
        let needed = needed(&units, name, &plain.collect());
        let chosen = |keep: &dyn Fn(usize) -> bool| Slice {
            text: (0..units.len()).filter(|i| keep(*i)).map(|i| ended(&units[i].text)).collect(),
            kept: (0..units.len()).filter(|i| keep(*i)).count(),
            of: units.len(),
            is_whole: false,
        };
        let smallest = chosen(&|i| needed.contains(&i));
        if self.gives(&smallest.text, name, value)? {
            return Ok(smallest);
        }
        let whole = chosen(&|_| true);
        if self.gives(&whole.text, name, value)? {
            return Ok(Slice { is_whole: true, ..whole });
        }
        Err(match twice_defined(&units) {
            Some(function) => fail(format!(
                "`{name}` cannot be rebuilt by one script: it rests on two versions of the function `{function}`"
            ))
            .help("give the second version another name, or save the whole session with `:save file.rhai`"),
            None => fail(format!("the session does not give `{name}` the same value when it is run again"))
                .help("a file it read may have changed; `:save file.rhai` writes every entry"),
        })
    }

    /// The session as a script that gives what was shown at the prompt. Of a function defined again only the newest
    /// definition is written, where nothing used an earlier one.
    #[must_use]
    pub fn script(&self) -> String {
        let units = self.units();
        let replaced: BTreeSet<usize> = (0..units.len()).filter(|i| is_replaced(&units, *i)).collect();
        if replaced.is_empty() {
            return self.entries_written().map(|entry| format!("{entry}\n")).collect();
        }
        let kept = units.iter().enumerate().filter(|(i, _)| !replaced.contains(i));
        kept.map(|(_, unit)| ended(&unit.text)).collect()
    }

    /// Whether running `text` from the start gives `name` this value. It listens to Ctrl-C like every calculation.
    fn gives(&self, text: &str, name: &str, value: &Dynamic) -> Result<bool, Fail> {
        let sink = || Box::new(std::io::sink());
        let stop = self.engine().stop();
        let engine = ScriptEngine::new(Options {
            files: self.engine().host().files().rehearsal(),
            output: sink(),
            messages: sink(),
            stop: stop.clone(),
            time_limit: Some(self.engine().time_limit().unwrap_or(REHEARSAL)),
            ..Options::default()
        });
        let mut scope = rhai::Scope::new();
        let failed = engine.run_keeping("saved", text, &mut scope).is_err();
        if let Some(halt) = stop.requested().filter(|_| failed) {
            let why = if halt == Halt::TimeUp { "took too long" } else { "was stopped" };
            return Err(fail(format!("nothing is saved: running what `{name}` needs once more {why}"))
                .help("`:save file.rhai` writes every entry without running it"));
        }
        let found = scope.iter_raw().filter(|(own, ..)| *own == name).last();
        Ok(!failed && found.is_some_and(|(.., found)| same(&engine, found, value)))
    }

    /// The session's statements, read.
    fn units(&self) -> Vec<Unit> {
        let own: BTreeSet<String> = self
            .function_names()
            .into_iter()
            .map(|name| name.split('(').next().unwrap_or("").to_owned())
            .collect();
        let read = |text: &str| -> Option<Unit> {
            let ast = self.engine().engine.compile(text).ok()?;
            Some(Reader { own: &own, pure: &self.engine().vocabulary.pure, unit: Unit::of(text) }.read(&ast))
        };
        let mut units = Vec::new();
        for entry in self.entries_written() {
            let parts: Option<Vec<Unit>> = pieces(entry).into_iter().map(read).collect();
            match parts {
                Some(parts) => units.extend(parts),
                // Cut wrongly: the entry as a whole.
                None => {
                    units.push(read(entry).unwrap_or_else(|| Unit { is_opaque: true, ..Unit::of(entry) }))
                }
            }
        }
        units
    }
}

/// A statement and what it does, by name.
#[derive(Debug, Default)]
struct Unit {
    text: String,
    reads: BTreeSet<String>,
    /// Variables it may change without defining them.
    writes: BTreeSet<String>,
    /// Variables it defines anew.
    defines: BTreeSet<String>,
    /// Functions it defines, with the functions and modules their bodies use.
    functions: BTreeMap<String, BTreeSet<String>>,
    /// Functions it calls or names.
    calls: BTreeSet<String>,
    /// Variables that closures in it hold by reference, and the functions these call.
    captures: BTreeSet<String>,
    called_by_closures: BTreeSet<String>,
    /// Those of the captured that a closure changes.
    changed_by_closures: BTreeSet<String>,
    /// The same functions, each with its number of parameters.
    signatures: BTreeSet<(String, usize)>,
    /// Whether it does nothing but define functions.
    only_defines: bool,
    /// It cannot be seen through: kept, with everything before it.
    is_opaque: bool,
}

impl Unit {
    fn of(text: &str) -> Self {
        Self { text: text.trim().to_owned(), ..Self::default() }
    }
}

/// The name under which a function or a module stands among variables; no variable is called so.
fn function(name: &str) -> String {
    format!("fn {name}")
}
fn module(name: &str) -> String {
    format!("import {name}")
}
const FILES: &str = "files on disk";

struct Reader<'a> {
    own: &'a BTreeSet<String>,
    pure: &'a Pure,
    unit: Unit,
}

impl Reader<'_> {
    fn read(mut self, ast: &AST) -> Unit {
        let statements = AST::new(ast.statements().iter().cloned(), Module::new());
        statements.walk(&mut |path| {
            self.node(path);
            true
        });
        self.unit.only_defines = ast.statements().is_empty();
        for definition in ast.iter_functions() {
            let (name, arity) = (definition.name.to_owned(), definition.params.len());
            let mut body = ast.clone_functions_only();
            body.retain_functions(|_, _, other, n| other == name && n == arity);
            // A body is read as if it were a unit of its own.
            let mut inner = Reader { own: self.own, pure: self.pure, unit: Unit::default() };
            body.walk(&mut |path| {
                inner.node(path);
                true
            });
            let uses: BTreeSet<String> = inner.used();
            if name.starts_with("anon$") {
                self.unit.called_by_closures.extend(uses);
                self.unit.captures.extend(inner.unit.captures);
                self.unit.changed_by_closures.extend(inner.unit.writes);
                self.unit.changed_by_closures.extend(inner.unit.changed_by_closures);
            } else {
                self.unit.signatures.insert((name.clone(), arity));
                self.unit.functions.entry(name).or_default().extend(uses);
            }
            self.unit.is_opaque |= inner.unit.is_opaque;
        }
        let captures = &self.unit.captures;
        self.unit.changed_by_closures.retain(|name| captures.contains(name));
        // A closure may be called where it stands.
        self.unit.writes.extend(self.unit.changed_by_closures.iter().cloned());
        self.unit.calls.extend(self.unit.called_by_closures.iter().cloned());
        self.unit
    }

    /// Functions, modules and session constants that a body uses.
    fn used(&self) -> BTreeSet<String> {
        let unit = &self.unit;
        let outer = unit.reads.iter().filter(|name| name.starts_with("import ") || *name == FILES);
        let named = unit.reads.iter().filter(|name| self.own.contains(*name)).map(|name| function(name));
        let mut used: BTreeSet<String> = unit.calls.iter().chain(outer).cloned().chain(named).collect();
        // `global::K` was read as `K`, marked.
        used.extend(unit.reads.iter().filter_map(|name| name.strip_prefix("global ")).map(str::to_owned));
        if unit.writes.contains(FILES) {
            used.insert(FILES.to_owned());
        }
        used
    }

    fn node(&mut self, path: &[ASTNode]) {
        let is_outermost = path.len() == 1;
        match path.last() {
            Some(ASTNode::Stmt(statement)) => self.statement(statement, is_outermost),
            Some(ASTNode::Expr(expression)) => self.expression(expression),
            _ => {}
        }
    }

    fn statement(&mut self, statement: &Stmt, is_outermost: bool) {
        match statement {
            Stmt::Var(parts, ..) if is_outermost => {
                self.unit.defines.insert(parts.0.name.to_string());
            }
            Stmt::Assignment(parts) => self.changed(&parts.1.lhs),
            Stmt::FnCall(call, _) => self.call(call),
            Stmt::Import(parts, _) => {
                self.unit.defines.insert(module(&parts.1.name));
                self.unit.reads.insert(FILES.to_owned());
                self.unit.is_opaque |= !matches!(parts.0, Expr::StringConstant(..));
            }
            Stmt::Export(parts, _) => {
                self.unit.reads.insert(parts.0.name.to_string());
            }
            _ => {}
        }
    }

    fn expression(&mut self, expression: &Expr) {
        match expression {
            Expr::Variable(variable, ..) if variable.2.is_empty() => {
                self.unit.reads.insert(variable.1.to_string());
            }
            Expr::Variable(variable, ..) if variable.2.root() == "global" => {
                self.unit.reads.insert(variable.1.to_string());
                self.unit.reads.insert(format!("global {}", variable.1));
            }
            Expr::Variable(variable, ..) => {
                self.unit.reads.insert(module(variable.2.root()));
            }
            Expr::FnCall(call, _) => self.call(call),
            Expr::MethodCall(call, _) => self.called(call),
            Expr::Dot(parts, ..) if self.changes(&parts.rhs) => self.changed(&parts.lhs),
            Expr::Index(parts, ..) if self.changes(&parts.rhs) => self.changed(&parts.lhs),
            Expr::Custom(..) => self.unit.is_opaque = true,
            _ => {}
        }
    }

    fn call(&mut self, call: &FnCallExpr) {
        self.called(call);
        let name = call.name.as_str();
        if name == "curry" {
            let captured = call.args.iter().skip(1).filter_map(root);
            self.unit.captures.extend(captured);
        }
        if name == "Fn" {
            match call.args.first() {
                Some(Expr::StringConstant(named, _)) => drop(self.unit.calls.insert(function(named))),
                _ => self.unit.is_opaque = true,
            }
        }
        let is_operator = call.op_token.is_some() || words::deed(name).is_some();
        if !is_operator
            && !self.leaves_alone(name)
            && let Some(first) = call.args.first()
        {
            self.changed(first);
        }
    }

    /// The name that is called, on a value or not.
    fn called(&mut self, call: &FnCallExpr) {
        let name = call.name.as_str();
        if !call.namespace.is_empty() {
            self.unit.reads.insert(module(call.namespace.root()));
            return;
        }
        if WRITE_FILES.contains(&name) {
            self.unit.writes.insert(FILES.to_owned());
        }
        if READ_FILES.iter().any(|start| name.starts_with(start)) {
            self.unit.reads.insert(FILES.to_owned());
        }
        self.unit.calls.insert(function(name));
    }

    /// Whether a call in this chain may change what the chain starts from.
    fn changes(&self, chain: &Expr) -> bool {
        match chain {
            // `x.call(f)` runs the closure `f` on `x`; `f.call(1)` only calls.
            Expr::MethodCall(call, _) if call.name == "call" => call.args.first().is_some_and(|first| {
                !matches!(first, Expr::Array(..) | Expr::Map(..)) && !first.is_constant()
            }),
            Expr::MethodCall(call, _) => !self.leaves_alone(&call.name),
            Expr::Dot(parts, ..) | Expr::Index(parts, ..) => {
                self.changes(&parts.lhs) || self.changes(&parts.rhs)
            }
            _ => false,
        }
    }

    fn leaves_alone(&self, name: &str) -> bool {
        let known = self.pure.contains(name)
            || ONLY_READ.contains(&name)
            || ONLY_SHOW.contains(&name)
            || WRITE_FILES.contains(&name)
            || READ_FILES.iter().any(|start| name.starts_with(start));
        known && !self.own.contains(name)
    }

    fn changed(&mut self, target: &Expr) {
        if let Some(root) = root(target) {
            self.unit.writes.insert(root);
        }
    }
}

/// The variable a chain of members starts from.
fn root(expression: &Expr) -> Option<String> {
    match expression {
        Expr::Variable(variable, ..) => Some(variable.1.to_string()),
        Expr::Dot(parts, ..) | Expr::Index(parts, ..) => root(&parts.lhs),
        _ => None,
    }
}

fn holds_a_closure(value: &Dynamic) -> bool {
    if let Some(items) = value.read_lock::<rhai::Array>() {
        return items.iter().any(holds_a_closure);
    }
    if let Some(map) = value.read_lock::<rhai::Map>() {
        return map.values().any(holds_a_closure);
    }
    value.is_fnptr()
}

/// The units that the newest variable `target` depends on. The variables in `plain` hold no closure now.
fn needed(units: &[Unit], target: &str, plain: &BTreeSet<&str>) -> BTreeSet<usize> {
    let mut resolved = resolve(units);
    for name in plain {
        let Some(version) = resolved.newest.get(*name) else { continue };
        let own = versioned(name, *version);
        // Its value is the one it was given, so it never held any.
        if !resolved.units.iter().any(|unit| unit.writes.contains(&own)) {
            resolved.holds.remove(&own);
        }
    }
    let mut wanted = Wanted { holds: &resolved.holds, names: BTreeSet::new() };
    if let Some(version) = resolved.newest.get(target) {
        wanted.add(&versioned(target, *version));
    }
    let mut kept = BTreeSet::new();
    for (i, unit) in resolved.units.iter().enumerate().rev() {
        let touches = unit.defines.iter().chain(&unit.writes).any(|name| wanted.names.contains(name));
        if !(touches || units[i].is_opaque) {
            continue;
        }
        kept.insert(i);
        for name in &unit.defines {
            wanted.names.remove(name);
        }
        for name in &unit.reads {
            wanted.add(name);
        }
        if units[i].is_opaque {
            // Nothing is known of it: everything that is there before it.
            wanted.names.extend(resolved.units[..i].iter().flat_map(|before| before.defines.iter().cloned()));
        }
    }
    kept
}

/// The names still to be accounted for, with what their values hold on to.
struct Wanted<'a> {
    holds: &'a BTreeMap<String, BTreeSet<String>>,
    names: BTreeSet<String>,
}

impl Wanted<'_> {
    fn add(&mut self, name: &str) {
        let mut open = vec![name.to_owned()];
        let mut seen = BTreeSet::new();
        while let Some(name) = open.pop() {
            if seen.insert(name.clone()) {
                open.extend(self.holds.get(&name).into_iter().flatten().cloned());
                self.names.insert(name);
            }
        }
    }
}

/// Units with every variable told apart by its version.
struct Resolved {
    units: Vec<Touches>,
    /// What a value goes on holding by reference: captured variables, and functions it calls by name.
    holds: BTreeMap<String, BTreeSet<String>>,
    newest: BTreeMap<String, usize>,
}

struct Touches {
    reads: BTreeSet<String>,
    writes: BTreeSet<String>,
    defines: BTreeSet<String>,
}

fn versioned(name: &str, version: usize) -> String {
    if name.starts_with("fn ") || name == FILES { name.to_owned() } else { format!("{name}#{version}") }
}

/// What stands for a variable being shared with a closure.
fn shared(name: &str) -> String {
    format!("shared {name}")
}

fn resolve(units: &[Unit]) -> Resolved {
    let mut newest: BTreeMap<String, usize> = BTreeMap::new();
    let mut holds: BTreeMap<String, BTreeSet<String>> = BTreeMap::new();
    let mut changed_somewhere: BTreeSet<String> = BTreeSet::new();
    let mut resolved = Vec::new();
    for unit in units {
        let before = newest.clone();
        for name in &unit.defines {
            *newest.entry(name.clone()).or_insert(0) += 1;
        }
        // A name in a unit that also defines it may be the old variable or the new one.
        let versions = |name: &String| -> Vec<String> {
            if name.starts_with("fn ") || name == FILES {
                return vec![name.clone()];
            }
            let known = [before.get(name), newest.get(name)].into_iter().flatten();
            known.map(|version| versioned(name, *version)).collect()
        };
        let all =
            |names: &BTreeSet<String>| -> BTreeSet<String> { names.iter().flat_map(versions).collect() };
        let mut reads = all(&unit.reads);
        reads.extend(all(&unit.writes));
        reads.extend(unit.calls.iter().cloned());
        // A bare name may be that of a function.
        reads.extend(unit.reads.iter().map(|name| function(name)));
        let mut defines: BTreeSet<String> =
            unit.defines.iter().map(|name| versioned(name, newest[name])).collect();
        for (name, uses) in &unit.functions {
            defines.insert(function(name));
            holds.entry(function(name)).or_default().extend(all(uses));
        }
        let mut held = all(&unit.captures);
        held.extend(all(&unit.called_by_closures));
        for name in &reads {
            held.extend(holds.get(name).into_iter().flatten().cloned());
        }
        changed_somewhere.extend(all(&unit.changed_by_closures));
        let mut writes = all(&unit.writes);
        // A captured variable is shared from then on, and a call that changes its argument in place may leave a shared one
        // as it was.
        reads.extend(writes.iter().map(|name| shared(name)));
        writes.extend(all(&unit.captures).iter().map(|name| shared(name)));
        // Whoever has such a closure at hand may have called it.
        writes.extend(held.iter().filter(|name| changed_somewhere.contains(*name)).cloned());
        for name in defines.iter().chain(&writes).filter(|name| !name.starts_with("fn ")) {
            holds.entry(name.clone()).or_default().extend(held.iter().cloned());
        }
        resolved.push(Touches { reads, writes, defines });
    }
    Resolved { units: resolved, holds, newest }
}

/// Whether a unit only defines functions that are all defined again later, none of them used until then.
fn is_replaced(units: &[Unit], at: usize) -> bool {
    let unit = &units[at];
    let again = |signature: &(String, usize)| {
        let mut later = units.iter().skip(at + 1);
        let Some(next) = later.position(|other| other.signatures.contains(signature)) else { return false };
        let until = &units[..=at + next];
        !until.iter().any(|other| other.is_opaque) && !uses(until, &signature.0)
    };
    unit.only_defines && !unit.signatures.is_empty() && unit.signatures.iter().all(again)
}

/// Whether a statement of these units may call the function, itself or through other functions.
fn uses(units: &[Unit], name: &str) -> bool {
    let mut callers = BTreeSet::from([function(name)]);
    loop {
        let bodies = units.iter().flat_map(|unit| &unit.functions);
        let more: Vec<String> = bodies
            .filter(|(_, used)| !used.is_disjoint(&callers))
            .map(|(caller, _)| function(caller))
            .filter(|caller| !callers.contains(caller))
            .collect();
        if more.is_empty() {
            break;
        }
        callers.extend(more);
    }
    let named = |unit: &Unit| unit.reads.iter().any(|read| callers.contains(&function(read)));
    units.iter().any(|unit| !unit.only_defines && (!unit.calls.is_disjoint(&callers) || named(unit)))
}

/// A function that two units define.
fn twice_defined(units: &[Unit]) -> Option<&str> {
    let mut seen = BTreeSet::new();
    units.iter().flat_map(|unit| unit.functions.keys()).find(|name| !seen.insert(*name)).map(String::as_str)
}

/// A statement as a line of its own.
fn ended(text: &str) -> String {
    format!("{}\n", text.trim_end())
}
