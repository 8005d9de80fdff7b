//! The words of the language: what is registered with the interpreter, and how each native type joins.

use std::cmp::Ordering;

use rhai::plugin::*;
use rhai::{Dynamic, Engine, EvalAltResult, Module, Shared, Variant};

use super::check::Pure;
use super::show::{Shows, Style};
use super::{
    Fail, Host, ScriptResult, column, compare, gases, general, ledger, neighbours, numbers, plot, processes,
    quantity, reaction, record, sample, seawater, state, table, tableau, treatments,
};

/// Gathers everything a script can name.
pub struct Vocabulary {
    engine: Option<Engine>,
    pub(super) pure: Pure,
    pub(super) shows: Shows,
    quoted: Vec<fn() -> Vec<String>>,
}

/// Every native type of the language, in the order a newcomer meets them: one line each.
pub(super) fn everything(vocabulary: &mut Vocabulary) {
    quantity::register(vocabulary);
    column::register(vocabulary);
    table::register(vocabulary);
    reaction::register(vocabulary);
    ledger::register(vocabulary);
    sample::register(vocabulary);
    seawater::register(vocabulary);
    treatments::register(vocabulary);
    neighbours::register(vocabulary);
    gases::register(vocabulary);
    state::register(vocabulary);
    tableau::register(vocabulary);
    processes::register(vocabulary);
    plot::register(vocabulary);
    record::register(vocabulary);
}

/// The language without chemistry.
pub(super) fn base(vocabulary: &mut Vocabulary) {
    vocabulary
        .module(rhai::exported_module!(numbers::number_functions))
        .module(rhai::exported_module!(compare::comparisons))
        .module(rhai::exported_module!(general::general_functions))
        .pure(&["pow", "exp10", "exp", "ln", "log10", "sqrt", "abs", "min", "max", "idiv", "fmt"])
        .pure(&["linspace", "logspace", "steps", "args"])
        .native::<general::Arguments>("Arguments", |arguments, _| arguments.to_string())
        .native::<Fail>("Failure", |fail, _| fail.message.clone())
        .module(rhai::exported_module!(failure));
}

/// What a script that catches a failure may read.
#[export_module]
mod failure {
    /// What went wrong.
    #[rhai_fn(get = "message", pure)]
    pub fn message(failure: &mut Fail) -> String {
        failure.message.clone()
    }

    /// What to write instead, one entry a line; empty when there is no advice.
    #[rhai_fn(get = "help", pure)]
    pub fn advice(failure: &mut Fail) -> String {
        failure.help.join("\n")
    }
}

impl Vocabulary {
    pub(super) fn new(engine: Engine) -> Self {
        Self { engine: Some(engine), pure: Pure::default(), shows: Shows::default(), quoted: Vec::new() }
    }

    /// Adds documented functions: a plugin module made by `#[export_module]`.
    pub fn module(&mut self, module: Module) -> &mut Self {
        self.engine().register_global_module(Shared::new(module));
        self
    }

    /// Adds a native type: its name in messages, and how it looks when echoed, printed or put into text.
    pub fn native<T: Variant + Clone>(
        &mut self,
        name: &str,
        show: impl Fn(&T, &Style) -> String + Send + Sync + 'static,
    ) -> &mut Self {
        self.shows.set(show);
        let shown = |context: NativeCallContext, value: &mut T| {
            Host::of(&context).show(&Dynamic::from(value.clone()))
        };
        self.engine()
            .register_type_with_name::<T>(name)
            .register_fn(rhai::FUNC_TO_STRING, shown)
            .register_fn(rhai::FUNC_TO_DEBUG, shown);
        self
    }

    /// Adds an operator with `T` on the left, on the right, or on both sides: whatever stands beside it arrives as it is,
    /// so that `f` can take numbers too and refuse the rest. (Rhai converts no whole number by itself.)
    pub fn operator<T: Variant + Clone, R: Variant + Clone>(
        &mut self,
        sign: &str,
        f: fn(&Dynamic, &Dynamic) -> ScriptResult<R>,
    ) -> &mut Self {
        let name = if sign == "/" { numbers::DIVIDE } else { sign };
        self.engine()
            .register_fn(name, move |a: T, b: Dynamic| f(&Dynamic::from(a), &b))
            .register_fn(name, move |a: Dynamic, b: T| f(&a, &Dynamic::from(b)));
        self
    }

    /// Adds `==` and `!=`. `equal` must refuse what cannot be compared: the interpreter would answer `false`.
    pub fn equality<T: Variant + Clone>(
        &mut self,
        equal: fn(&Dynamic, &Dynamic) -> ScriptResult<bool>,
    ) -> &mut Self {
        let signs: [(&str, bool); 2] = [("==", true), ("!=", false)];
        for (sign, wanted) in signs {
            self.engine()
                .register_fn(sign, move |a: T, b: Dynamic| {
                    Ok::<_, Box<EvalAltResult>>(equal(&Dynamic::from(a), &b)? == wanted)
                })
                .register_fn(sign, move |a: Dynamic, b: T| {
                    Ok::<_, Box<EvalAltResult>>(equal(&a, &Dynamic::from(b))? == wanted)
                });
        }
        self
    }

    /// Adds `<`, `<=`, `>`, `>=`. `order` gives `None` where neither is above the other, and refuses what has no order.
    pub fn ordered<T: Variant + Clone>(
        &mut self,
        order: fn(&Dynamic, &Dynamic) -> ScriptResult<Option<Ordering>>,
    ) -> &mut Self {
        for ((name, _), holds) in compare::ORDERINGS.into_iter().zip(compare::HOLDS) {
            let holds = move |order: Option<Ordering>| order.is_some_and(holds);
            self.engine()
                .register_fn(name, move |a: T, b: Dynamic| order(&Dynamic::from(a), &b).map(holds))
                .register_fn(name, move |a: Dynamic, b: T| order(&a, &Dynamic::from(b)).map(holds));
        }
        self
    }

    /// Names of functions and methods whose only effect is their result: dropping it is refused.
    pub fn pure(&mut self, names: &[&'static str]) -> &mut Self {
        self.pure.extend(names);
        self
    }

    /// Adds words offered for completion inside quotes; asked when needed.
    pub fn quoted(&mut self, words: fn() -> Vec<String>) -> &mut Self {
        self.quoted.push(words);
        self
    }

    /// The interpreter, for what the methods above do not cover.
    pub fn engine(&mut self) -> &mut Engine {
        self.engine.as_mut().expect("the engine is taken when all is registered")
    }

    pub(super) fn take_engine(&mut self) -> Engine {
        self.engine.take().expect("the engine is taken once")
    }

    pub(super) fn quoted_words(&self) -> Vec<String> {
        self.quoted.iter().flat_map(|words| words()).collect()
    }
}
