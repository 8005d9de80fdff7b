//! Functions every script needs that are not about numbers: output, help, arguments.

use rhai::plugin::*;
use rhai::{Array, Dynamic};

use super::{Fail, Host, ScriptResult, docs, fail, words};

/// What stands behind the script's name on the command line: `lysocline run a.rhai file=survey.csv`.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Arguments(Vec<String>);

impl Arguments {
    pub(super) fn of(host: &Host) -> Self {
        Self(host.arguments().to_vec())
    }

    /// Words written `name=value`.
    fn named(&self) -> impl Iterator<Item = (&str, &str)> {
        self.0.iter().filter_map(|word| word.split_once('='))
    }

    fn get(&self, name: &str) -> Result<&str, Fail> {
        let found = self.named().filter(|(own, _)| *own == name).last();
        let names = || self.named().map(|(name, _)| name);
        found.map(|(_, value)| value).ok_or_else(|| {
            fail(format!("no argument `{name}` was given"))
                .maybe_help(words::did_you_mean(name, names()))
                .help(format!("write `{name}=…` behind the script's name"))
                .argument(0)
        })
    }
}

impl std::fmt::Display for Arguments {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(if self.0.is_empty() { "no arguments" } else { "" })?;
        f.write_str(&self.0.join(" "))
    }
}

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
        let host = Host::of(&context);
        host.gather(&value);
        host.printed(&value)
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

    /// The argument `name=value` from the command line, as text: `lysocline run a.rhai file=survey.csv` gives
    /// `args["file"]`.
    #[rhai_fn(index_get, return_raw, pure)]
    pub fn argument(arguments: &mut Arguments, name: &str) -> ScriptResult<String> {
        Ok(arguments.get(name)?.to_owned())
    }
    /// The argument `name=value`, or another value where it was not given.
    #[rhai_fn(name = "get", pure)]
    pub fn argument_or(arguments: &mut Arguments, name: &str, otherwise: Dynamic) -> Dynamic {
        arguments.get(name).map_or(otherwise, |value| value.to_owned().into())
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
