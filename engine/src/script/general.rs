//! Functions every script needs that are not about numbers: output, help, arguments.

use rhai::plugin::*;
use rhai::{Array, Dynamic};

use super::{Host, ScriptResult, docs};

/// Output, help, arguments.
#[export_module]
pub(super) mod general_functions {
    /// Writes a value and a line end to the output; text without its quotes.
    ///
    /// ```rhai
    /// print(1/2)
    /// ```
    // The interpreter hands the text of this function to its print callback.
    pub fn print(context: NativeCallContext, value: Dynamic) -> String {
        Host::of(&context).printed(&value)
    }

    /// Prints what a function, method or property does, with an example.
    ///
    /// ```rhai
    /// help("pow")
    /// ```
    #[rhai_fn(return_raw)]
    pub fn help(context: NativeCallContext, name: &str) -> ScriptResult<()> {
        let entries = docs::entries(context.engine(), Some(&context));
        let host = Host::of(&context);
        host.print(&docs::help(&entries, name, host.style().width)?);
        Ok(())
    }

    /// Prints the names that `help(name)` explains.
    ///
    /// ```rhai
    /// help()
    /// ```
    #[rhai_fn(name = "help")]
    pub fn help_topics(context: NativeCallContext) {
        let entries = docs::entries(context.engine(), Some(&context));
        let host = Host::of(&context);
        host.print("help(\"name\") explains one of:");
        for line in super::columns(&docs::topics(&entries), host.style().width) {
            host.print(&line);
        }
    }

    /// The words after the script's name on the command line, as text.
    ///
    /// ```rhai
    /// args().len()   // 0
    /// ```
    #[rhai_fn(name = "args")]
    pub fn arguments(context: NativeCallContext) -> Array {
        Host::of(&context).arguments().iter().map(|word| word.clone().into()).collect()
    }
}

/// Names in columns, read downwards line by line.
fn columns(names: &[&str], width: usize) -> Vec<String> {
    let cell = names.iter().map(|name| name.chars().count()).max().unwrap_or(0) + 2;
    let row = |names: &[&str]| names.iter().map(|name| format!("{name:cell$}")).collect::<String>();
    names.chunks((width / cell).max(1)).map(|names| format!("  {}", row(names).trim_end())).collect()
}
