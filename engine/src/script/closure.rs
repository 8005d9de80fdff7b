//! Closures of a script, called by native functions.

use rhai::{Dynamic, FnPtr, FuncArgs, NativeCallContext};

use super::ScriptResult;

/// A closure with its own copy of every variable it captured.
///
/// What it writes to them is forgotten after each call, so that calls cannot influence one another and may run in any
/// order or at once.
pub struct Closure(FnPtr);

impl Closure {
    /// The closure, cut off from the variables around it.
    #[must_use]
    pub fn new(function: &FnPtr) -> Self {
        let mut function = function.clone();
        for captured in function.iter_curry_mut() {
            *captured = captured.flatten_clone();
        }
        Self(function)
    }

    /// What it returns for `arguments`.
    ///
    /// # Errors
    ///
    /// What the closure raises.
    pub fn call(&self, context: &NativeCallContext, arguments: impl FuncArgs) -> ScriptResult<Dynamic> {
        self.0.call_within_context(context, arguments)
    }
}
