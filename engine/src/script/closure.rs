//! Calling a script's closure from native code, also from several threads at once.

use rhai::{Dynamic, Engine, FnPtr, FuncArgs, NativeCallContext};

use super::ScriptResult;

/// A closure of the calling script, ready to be called by workers.
///
/// ```text
/// let closure = Closure::new(&context, &f);
/// points.par_iter().map_init(|| closure.worker(), |worker, &x| worker.call((x,)))
/// ```
#[allow(deprecated, reason = "the stored state is marked volatile, not deprecated; the version is pinned")]
pub struct Closure<'a> {
    engine: &'a Engine,
    state: rhai::NativeCallContextStore,
    function: FnPtr,
}

/// One thread's own copy.
pub struct Worker<'a> {
    closure: &'a Closure<'a>,
    function: FnPtr,
}

impl<'a> Closure<'a> {
    /// The closure `function`, which a script handed to the native function called in `context`.
    #[must_use]
    pub fn new(context: &'a NativeCallContext, function: &FnPtr) -> Self {
        #[allow(deprecated, reason = "marked volatile, not deprecated; the version is pinned")]
        let state = context.store_data();
        Self { engine: context.engine(), state, function: function.clone() }
    }

    /// A copy for one thread. Captured variables are copied with it: what the closure writes to them stays there, so
    /// results do not depend on the number of threads, and no thread waits for another.
    #[must_use]
    pub fn worker(&self) -> Worker<'_> {
        let mut function = self.function.clone();
        for captured in function.iter_curry_mut() {
            *captured = captured.flatten_clone();
        }
        Worker { closure: self, function }
    }
}

impl Worker<'_> {
    /// Calls the closure.
    ///
    /// # Errors
    ///
    /// Returns what failed inside, with its place.
    pub fn call(&self, arguments: impl FuncArgs) -> ScriptResult<Dynamic> {
        #[allow(deprecated, reason = "marked volatile, not deprecated; the version is pinned")]
        let context = self.closure.state.create_context(self.closure.engine);
        self.function.call_within_context(&context, arguments)
    }
}
