//! Script modules: `import "helpers" as h;` reads `helpers.rhai` beside the script, `import "stdlib/water-works" as w;` a
//! module that is shipped.
//!
//! Imports stay inside the script's folder. Two things the interpreter lets pass are refused: modules that import each
//! other (endless), and a function of the same name in two files (a function passed by name would silently be the
//! wrong one).

use std::collections::{BTreeMap, HashMap};
use std::path::{Component, Path, PathBuf};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};
use std::time::SystemTime;

use rhai::{AST, Engine, EvalAltResult, Module, ModuleResolver, Position, Scope, Shared};

use super::check::{Pure, check, own_functions};
use super::{Fail, ScriptResult, engine::clean, fail, words};

/// A text that was read, with its syntax tree: what messages point into.
pub(super) struct Source {
    pub text: String,
    pub ast: AST,
}

/// What the names of shipped modules begin with.
const SHIPPED: &str = "stdlib/";

/// A module that was found.
struct Found {
    /// Where; a shipped one has its name instead.
    path: PathBuf,
    /// As messages name it.
    shown: String,
    /// The text of a shipped one.
    text: Option<&'static str>,
}

/// The resolver; a clone is the same one.
#[derive(Clone)]
pub(super) struct Modules(Arc<Mutex<State>>);

struct State {
    folder: PathBuf,
    pure: Pure,
    loading: Vec<PathBuf>,
    loaded: HashMap<PathBuf, (Option<SystemTime>, Shared<Module>)>,
    sources: HashMap<String, Arc<Source>>,
    /// Who defines the function of this name and number of parameters.
    defined: BTreeMap<(String, usize), String>,
}

impl Modules {
    pub(super) fn new(folder: PathBuf, pure: Pure) -> Self {
        Self(Arc::new(Mutex::new(State {
            folder,
            pure,
            loading: Vec::new(),
            loaded: HashMap::new(),
            sources: HashMap::new(),
            defined: BTreeMap::new(),
        })))
    }

    fn state(&self) -> MutexGuard<'_, State> {
        self.0.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Forgets the functions of a main script that ran before.
    pub(super) fn forget_main(&self) {
        let mut state = self.state();
        let State { defined, sources, .. } = &mut *state;
        defined.retain(|_, owner| sources.contains_key(owner));
    }

    /// The files of the modules imported so far, as named from the script's folder.
    pub(super) fn paths(&self) -> Vec<PathBuf> {
        let state = self.state();
        let files = state.sources.keys().filter(|shown| shipped(shown).is_none());
        files.map(|shown| state.folder.join(shown)).collect()
    }

    /// Forgets imports that a fault broke off.
    pub(super) fn begin(&self) {
        self.state().loading.clear();
    }

    /// The text a source name stands for, if it is a module.
    pub(super) fn source(&self, name: &str) -> Option<Arc<Source>> {
        self.state().sources.get(name).cloned()
    }

    /// Claims the functions of `ast` for `source`; the position is that of no function, the tree does not keep it.
    pub(super) fn claim(&self, source: &str, ast: &AST) -> Result<(), Fail> {
        let mut state = self.state();
        let own = || ast.iter_functions().filter(|function| !function.name.starts_with("anon$"));
        for function in own() {
            let key = (function.name.to_owned(), function.params.len());
            if let Some(other) = state.defined.get(&key).filter(|other| *other != source) {
                return Err(fail(format!(
                    "the function `{}` is defined in `{source}` and in `{other}`",
                    key.0
                ))
                .help("rename one: a function passed by name could be the wrong one"));
            }
        }
        state.defined.retain(|_, owner| owner != source);
        for function in own() {
            state.defined.insert((function.name.to_owned(), function.params.len()), source.to_owned());
        }
        Ok(())
    }

    fn find(&self, importer: Option<&str>, name: &str) -> Result<Found, Fail> {
        if name.starts_with(SHIPPED) {
            return self.find_shipped(name);
        }
        let state = self.state();
        let beside = importer.filter(|source| state.sources.contains_key(*source));
        let from = beside.and_then(|source| Path::new(source).parent()).unwrap_or(Path::new(""));
        let mut relative = from.join(name);
        if relative.extension().is_none() {
            relative.set_extension("rhai");
        }
        let outside = || {
            fail(format!("`{name}` is outside the script's folder")).help("copy the module beside the script")
        };
        if !relative
            .components()
            .all(|part| matches!(part, Component::Normal(_) | Component::CurDir | Component::ParentDir))
        {
            return Err(outside());
        }
        let folder = state.folder.canonicalize().map_err(|error| fail(error.to_string()))?;
        let path = folder.join(&relative).canonicalize().map_err(|_| absent(name, &state.folder))?;
        let shown = path.strip_prefix(&folder).map_err(|_| outside())?.to_string_lossy().into_owned();
        Ok(Found { path, shown, text: None })
    }

    /// A shipped module. A file of the same name would be read by one person and not by the next, so it is refused.
    fn find_shipped(&self, name: &str) -> Result<Found, Fail> {
        let file = self.state().folder.join(name).with_extension("rhai");
        match (shipped(name), file.exists()) {
            (Some(_), true) => Err(fail(format!(
                "`{name}` is a shipped module and a file beside the script"
            ))
            .help("rename the folder `stdlib` beside the script; the name belongs to shipped modules")),
            (Some(text), false) => {
                Ok(Found { path: PathBuf::from(name), shown: name.to_owned(), text: Some(text) })
            }
            (None, _) => {
                let names: Vec<String> =
                    lysocline_stdlib::MODULES.iter().map(|(own, _)| format!("{SHIPPED}{own}")).collect();
                let near = words::did_you_mean(name, names.iter().map(String::as_str));
                Err(fail(format!("there is no shipped module `{name}`"))
                    .help(near.unwrap_or_else(|| format!("there are {}", crate::text::list(&names)))))
            }
        }
    }

    /// The cached module, unless its file has changed since.
    fn cached(&self, path: &Path) -> Option<Shared<Module>> {
        let state = self.state();
        let (when, module) = state.loaded.get(path)?;
        (*when == modified(path)).then(|| Shared::clone(module))
    }

    fn enter(&self, path: &Path) -> Result<(), Fail> {
        let mut state = self.state();
        let chain =
            || state.loading.iter().map(|path| file_name(path)).chain([file_name(path)]).collect::<Vec<_>>();
        if state.loading.iter().any(|other| other == path) {
            return Err(fail(format!("modules import each other: {}", chain().join(" -> ")))
                .help("move what they share into a third module"));
        }
        state.loading.push(path.to_owned());
        Ok(())
    }

    fn load(&self, engine: &Engine, found: &Found) -> ScriptResult<Shared<Module>> {
        let Found { path, shown, text } = found;
        let text = match text {
            Some(text) => (*text).to_owned(),
            None => std::fs::read_to_string(path)
                .map_err(|error| fail(format!("cannot read `{shown}`: {error}")))?,
        };
        let text = clean(&text);
        let within = |error| Box::new(EvalAltResult::ErrorInModule(shown.to_owned(), error, Position::NONE));
        let parsed = engine.compile(&text);
        let mut ast = match parsed {
            Ok(ast) => ast,
            Err(error) => {
                self.state().sources.insert(shown.to_owned(), Arc::new(Source { text, ast: AST::empty() }));
                return Err(within(error.into()));
            }
        };
        ast.set_source(shown);
        self.state().sources.insert(shown.to_owned(), Arc::new(Source { text, ast: ast.clone() }));
        self.claim(shown, &ast)?;
        let pure = self.state().pure.clone();
        check(&ast, &own_functions(&ast), &pure, true).map_err(|(fail, position)| {
            let mut error: Box<EvalAltResult> = fail.into();
            error.set_position(position);
            within(error)
        })?;
        Module::eval_ast_as_new(Scope::new(), &ast, engine).map(Shared::new).map_err(within)
    }
}

impl ModuleResolver for Modules {
    fn resolve(
        &self,
        engine: &Engine,
        source: Option<&str>,
        name: &str,
        position: Position,
    ) -> ScriptResult<Shared<Module>> {
        let placed = |mut error: Box<EvalAltResult>| match *error {
            EvalAltResult::ErrorInModule(name, inner, _) => {
                Box::new(EvalAltResult::ErrorInModule(name, inner, position))
            }
            _ => {
                error.set_position(position);
                error
            }
        };
        let found = self.find(source, name).map_err(|fail| placed(fail.into()))?;
        let path = &found.path;
        self.enter(path).map_err(|fail| placed(fail.into()))?;
        let module = match self.cached(path) {
            Some(module) => Ok(module),
            None => self.load(engine, &found).map_err(placed),
        };
        let mut state = self.state();
        state.loading.pop();
        let module = module?;
        state.loaded.insert(path.clone(), (modified(path), Shared::clone(&module)));
        Ok(module)
    }
}

/// The text of a shipped module.
fn shipped(name: &str) -> Option<&'static str> {
    let name = name.strip_prefix(SHIPPED)?;
    let name = name.strip_suffix(".rhai").unwrap_or(name);
    lysocline_stdlib::MODULES.iter().find_map(|(own, text)| (*own == name).then_some(*text))
}

fn absent(name: &str, folder: &Path) -> Fail {
    let entries = std::fs::read_dir(folder).into_iter().flatten().flatten().map(|entry| entry.path());
    let scripts = entries.filter(|path| path.extension().is_some_and(|extension| extension == "rhai"));
    let names: Vec<String> =
        scripts.filter_map(|path| Some(path.file_stem()?.to_string_lossy().into_owned())).collect();
    fail(format!("there is no module `{name}`: no file `{name}.rhai` beside the script"))
        .maybe_help(words::did_you_mean(name, names.iter().map(String::as_str)))
}

fn modified(path: &Path) -> Option<SystemTime> {
    std::fs::metadata(path).and_then(|metadata| metadata.modified()).ok()
}

fn file_name(path: &Path) -> String {
    path.file_name().map(|name| name.to_string_lossy().into_owned()).unwrap_or_default()
}
