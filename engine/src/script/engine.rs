//! The interpreter with our rules, limits and vocabulary.

use std::any::Any;
use std::cell::Cell;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::{Arc, Once};
use std::time::Duration;

use rhai::{AST, Dynamic, Engine, ParseErrorType, Position, Scope};

use super::check::{check, own_functions};
use super::diagnostic::{Diagnostic, Kind};
use super::docs::{self, Entry};
use super::host::{Host, OnProgress, OnShown, Out};
use super::input::ends_with_semicolon;
use super::modules::{Modules, Source};
use super::sandbox::Sandbox;
use super::show::{Shows, Style};
use super::stop::Stop;
use super::translate::Translator;
use super::vocabulary::Vocabulary;

/// Calls within calls. With the stack below this runs clean even in an unoptimised build.
const CALL_LEVELS: usize = 64;
/// Nesting of expressions: a sum of some 240 terms is that deep.
const EXPRESSION_DEPTH: usize = 256;
/// Bytes of stack for reading and running a script.
const STACK: usize = 64 << 20;

/// What a script engine is made with.
pub struct Options {
    /// What the output can show.
    pub style: Style,
    /// The words after the script's name.
    pub arguments: Vec<String>,
    /// The files a script may use.
    pub files: Sandbox,
    /// Results.
    pub output: Out,
    /// Warnings and notes.
    pub messages: Out,
    /// Where long native loops report.
    pub progress: Option<OnProgress>,
    /// Who gathers what is shown, for a report.
    pub shown: Option<OnShown>,
    /// How long one evaluation may take.
    pub time_limit: Option<Duration>,
    /// The signal to stop; that of another engine where one runs on behalf of the other.
    pub stop: Stop,
}

impl Default for Options {
    fn default() -> Self {
        Self {
            style: Style::default(),
            arguments: Vec::new(),
            files: Sandbox::default(),
            output: Box::new(std::io::stdout()),
            messages: Box::new(std::io::stderr()),
            progress: None,
            shown: None,
            time_limit: None,
            stop: Stop::default(),
        }
    }
}

/// Reads and runs scripts.
pub struct ScriptEngine {
    pub(super) engine: Engine,
    pub(super) host: Host,
    modules: Modules,
    pub(super) vocabulary: Vocabulary,
    time_limit: Option<Duration>,
}

impl Default for ScriptEngine {
    fn default() -> Self {
        Self::new(Options::default())
    }
}

impl ScriptEngine {
    /// An engine that knows the whole vocabulary.
    #[must_use]
    pub fn new(options: Options) -> Self {
        Self::with_vocabulary(options, super::vocabulary::everything)
    }

    /// An engine with the language base and what `extend` adds to it.
    pub fn with_vocabulary(options: Options, extend: impl FnOnce(&mut Vocabulary)) -> Self {
        let mut engine = Engine::new();
        set_limits(&mut engine);
        super::syntax::install(&mut engine);
        let mut vocabulary = Vocabulary::new(engine);
        super::vocabulary::base(&mut vocabulary);
        extend(&mut vocabulary);
        let mut engine = vocabulary.take_engine();

        let time_limit = options.time_limit;
        let modules = Modules::new(options.files.read_folder().to_owned(), vocabulary.pure.clone());
        let host = Host::new(options);
        host.shows(|shows| shows.clone_from(&vocabulary.shows));
        connect(&mut engine, &host);
        engine.set_module_resolver(modules.clone());
        Self { engine, host, modules, vocabulary, time_limit }
    }

    /// Lets the program replace how values look, for forms that know the terminal.
    pub fn show_with(&self, change: impl FnOnce(&mut Shows)) {
        self.host.shows(change);
    }

    /// The value as it is echoed.
    #[must_use]
    pub fn show(&self, value: &Dynamic) -> String {
        self.host.show(value)
    }

    /// The script's outside.
    #[must_use]
    pub fn host(&self) -> &Host {
        &self.host
    }

    /// The signal that stops an evaluation.
    #[must_use]
    pub fn stop(&self) -> &Stop {
        self.host.stop()
    }

    /// Everything that can be called, with its documentation.
    #[must_use]
    pub fn entries(&self) -> Vec<Entry> {
        docs::entries(&self.engine, None)
    }

    /// Words offered inside quotes: species, minerals, observables.
    #[must_use]
    pub fn quoted_words(&self) -> Vec<String> {
        self.vocabulary.quoted_words()
    }

    /// Reads a script without running it.
    ///
    /// # Errors
    ///
    /// Returns the first fault that can be seen without running.
    pub fn check(&self, name: &str, text: &str) -> Result<(), Box<Diagnostic>> {
        let text = clean(text);
        self.modules.forget_main();
        let checked = on_deep_stack(|| self.compile(name, &text, &Scope::new(), None).map(drop));
        // What was only looked at claims no names from the session that goes on.
        self.modules.forget_main();
        checked
    }

    /// Every file read so far, modules among them, in alphabetical order.
    #[must_use]
    pub fn files_read(&self) -> Vec<std::path::PathBuf> {
        let read: std::collections::BTreeSet<_> = self
            .host
            .files()
            .files_read()
            .map(std::path::Path::to_owned)
            .chain(self.modules.paths())
            .collect();
        read.into_iter().collect()
    }

    /// The numbers written as `seed: 7` in a script: what its random draws start from.
    #[must_use]
    pub fn seeds(&self, text: &str) -> Vec<i64> {
        let mut seeds = Vec::new();
        let Ok(ast) = self.engine.compile(clean(text)) else { return seeds };
        ast.walk(&mut |path| {
            if let Some(rhai::ASTNode::Expr(rhai::Expr::Map(map, _))) = path.last() {
                seeds.extend(map.0.iter().filter(|(key, _)| key.name == "seed").filter_map(|(_, value)| {
                    match value {
                        rhai::Expr::IntegerConstant(seed, _) => Some(*seed),
                        _ => None,
                    }
                }));
            }
            true
        });
        seeds
    }

    /// Declarations of everything a script can call, for editors that read Rhai's definition files.
    #[must_use]
    pub fn definitions(&self) -> String {
        self.engine.definitions().with_headers(true).include_standard_packages(false).single_file()
    }

    /// Runs a script. The value of its last expression is returned unless a semicolon drops it.
    ///
    /// # Errors
    ///
    /// Returns what went wrong, with its place.
    pub fn run(&self, name: &str, text: &str) -> Result<Option<Dynamic>, Box<Diagnostic>> {
        let text = clean(text);
        let mut scope = Scope::new();
        scope.push_constant("args", super::general::Arguments::of(&self.host));
        self.run_keeping(name, &text, &mut scope)
    }

    /// The same, leaving the script's variables in `scope`.
    pub(super) fn run_keeping(
        &self,
        name: &str,
        text: &str,
        scope: &mut Scope<'static>,
    ) -> Result<Option<Dynamic>, Box<Diagnostic>> {
        self.modules.forget_main();
        self.host.records().begin();
        let result = on_deep_stack(|| {
            let source = self.compile(name, text, scope, None)?;
            if self.host.is_gathering() {
                return self.evaluate_by_statement(name, &source, scope);
            }
            self.evaluate(name, &source, scope)
        });
        scope.iter_raw().for_each(|(.., value)| self.host.rests_on(&value.flatten_clone()));
        result
    }

    /// The reader's error for `text`, if any.
    pub(super) fn parse_error(&self, text: &str) -> Option<(ParseErrorType, Position)> {
        on_deep_stack(|| self.engine.compile(text).err().map(|error| (*error.0, error.1)))
    }

    /// Reads `text`; `earlier` holds the functions of a session so far.
    pub(super) fn compile(
        &self,
        name: &str,
        text: &str,
        scope: &Scope,
        earlier: Option<&AST>,
    ) -> Result<Arc<Source>, Box<Diagnostic>> {
        let source = |ast| Arc::new(Source { text: text.to_owned(), ast });
        let parsed = self.engine.compile_with_scope(scope, text);
        let ast = parsed
            .map_err(|error| self.translator(name, source(AST::empty()), scope).diagnose(error.into()))?;
        let refused =
            |fail, position| self.translator(name, source(ast.clone()), scope).refused(fail, position);
        let mut whole = earlier.cloned().unwrap_or_else(AST::empty);
        whole.combine(ast.clone());
        whole.set_source(name);
        check(&ast, &own_functions(&whole), &self.vocabulary.pure, ends_with_semicolon(text))
            .map_err(|(fail, position)| refused(fail, position))?;
        self.modules.claim(name, &whole).map_err(|fail| refused(fail, Position::NONE))?;
        Ok(source(whole))
    }

    /// Runs what was read. Must be called on a deep stack.
    pub(super) fn evaluate(
        &self,
        name: &str,
        source: &Arc<Source>,
        scope: &mut Scope,
    ) -> Result<Option<Dynamic>, Box<Diagnostic>> {
        self.arm();
        let shown = !ends_with_semicolon(&source.text);
        let result = quietly(|| self.engine.eval_ast_with_scope::<Dynamic>(scope, &source.ast));
        // A calculation that broke off has not reported its end.
        self.host.progress("", 0, 0);
        match result {
            Ok(Ok(value)) => Ok((shown && !value.is_unit()).then(|| value.flatten())),
            Ok(Err(error)) => Err(self.translator(name, Arc::clone(source), scope).diagnose(error)),
            Err(panic) => Err(bug(&*panic)),
        }
    }

    /// How long one evaluation may take.
    pub(super) fn time_limit(&self) -> Option<Duration> {
        self.time_limit
    }

    /// A fresh evaluation begins.
    pub(super) fn arm(&self) {
        self.stop().arm(self.time_limit);
        self.modules.begin();
    }

    pub(super) fn translator<'a>(
        &'a self,
        main: &'a str,
        source: Arc<Source>,
        scope: &Scope,
    ) -> Translator<'a> {
        let mut entries = self.entries();
        let own = source.ast.iter_functions().filter(|function| !function.name.starts_with("anon$"));
        entries.extend(own.map(|function| Entry {
            name: function.name.to_owned(),
            signature: format!("{}({})", function.name, function.params.join(", ")),
            parameters: function.params.len(),
            text: String::new(),
            is_property: false,
            receiver: None,
            is_standard: false,
        }));
        let variables = scope.iter_raw().map(|(name, ..)| name.to_owned()).collect();
        Translator { main, source, modules: &self.modules, entries, variables }
    }
}

/// The text without a byte-order mark, and with a `#!` line made blank so that lines keep their numbers.
pub(super) fn clean(text: &str) -> String {
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);
    text.strip_prefix("#!").map_or_else(|| text.to_owned(), |rest| format!("// {rest}"))
}

fn set_limits(engine: &mut Engine) {
    engine.set_max_call_levels(CALL_LEVELS);
    engine.set_max_expr_depths(EXPRESSION_DEPTH, EXPRESSION_DEPTH);
    // Folding constants would remove the map literals that messages point into.
    engine.set_optimization_level(rhai::OptimizationLevel::None);
}

fn connect(engine: &mut Engine, host: &Host) {
    let stop = host.stop().clone();
    engine.on_progress(move |operations| match operations % 64 {
        0 => stop.requested().map(Dynamic::from),
        _ => None,
    });
    let printer = host.clone();
    engine.on_print(move |text| printer.print(text));
    let debugger = host.clone();
    engine.on_debug(move |text, _, position| debugger.message(&format!("{position:?}: {text}")));
    engine.set_default_tag(Dynamic::from(host.clone()));
}

/// Runs `work` where deep nesting does not end the process.
pub(super) fn on_deep_stack<T: Send>(work: impl FnOnce() -> T + Send) -> T {
    std::thread::scope(|threads| {
        let builder = std::thread::Builder::new().name("script".to_owned()).stack_size(STACK);
        let handle = builder.spawn_scoped(threads, work).expect("the system gives a thread");
        handle.join().unwrap_or_else(|panic| std::panic::resume_unwind(panic))
    })
}

thread_local! {
    static QUIET: Cell<bool> = const { Cell::new(false) };
}

/// Catches a panic of native code, without its text on the terminal.
pub(super) fn quietly<T>(work: impl FnOnce() -> T) -> Result<T, Box<dyn Any + Send>> {
    static HOOK: Once = Once::new();
    HOOK.call_once(|| {
        let usual = std::panic::take_hook();
        std::panic::set_hook(Box::new(move |info| {
            if !QUIET.get() {
                usual(info);
            }
        }));
    });
    QUIET.set(true);
    let result = catch_unwind(AssertUnwindSafe(work));
    QUIET.set(false);
    result
}

pub(super) fn bug(panic: &(dyn Any + Send)) -> Box<Diagnostic> {
    let text =
        panic.downcast_ref::<String>().map(String::as_str).or_else(|| panic.downcast_ref::<&str>().copied());
    let message = format!("a fault of lysocline, not of the script: {}", text.unwrap_or("no details"));
    Box::new(Diagnostic::new(Kind::Bug, message).help("please report it together with the script"))
}
