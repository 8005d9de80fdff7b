//! What can be called, read off the functions themselves: signatures, doc comments, examples.
//!
//! `help`, completion and the checks that run every example share these entries.

use std::any::TypeId;

use rhai::{Dynamic, Engine, FuncInfo, NativeCallContext};

use crate::equilibrium::observable::NAMES;

use super::{Fail, fail, words};

/// One function, method, property or operator as a script sees it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Entry {
    /// The name to type.
    pub name: String,
    /// `pow(x: number, y: number) -> number`.
    pub signature: String,
    /// Number of parameters, the receiver of a method included.
    pub parameters: usize,
    /// The doc comment without its marks; empty when there is none.
    pub text: String,
    /// Read without brackets, after a dot.
    pub is_property: bool,
    /// The type of the first parameter: what may stand before the dot.
    pub receiver: Option<TypeId>,
    /// Part of the language base rather than of lysocline.
    pub is_standard: bool,
}

/// Everything that can be called, by name. `context` adds the functions of the running script.
#[must_use]
pub fn entries(engine: &Engine, context: Option<&NativeCallContext>) -> Vec<Entry> {
    #[allow(deprecated, reason = "marked volatile, not deprecated; the version is pinned")]
    let collect = |standard| engine.collect_fn_metadata(context, |info| entry(&info), standard);
    let mut own: Vec<Entry> = collect(false);
    let known = |own: &[Entry], entry: &Entry| own.iter().any(|other| other.signature == entry.signature);
    for mut entry in collect(true) {
        if !known(&own, &entry) {
            entry.is_standard = true;
            own.push(entry);
        }
    }
    own.sort_by(|a, b| {
        (&a.name, a.is_standard, a.text.is_empty()).cmp(&(&b.name, b.is_standard, b.text.is_empty()))
    });
    own.dedup_by(|a, b| a.signature == b.signature);
    own
}

/// The example programs in the doc comments: name of the function, and the text.
#[must_use]
pub fn examples(entries: &[Entry]) -> Vec<(String, String)> {
    let own = entries.iter().filter(|entry| !entry.is_standard);
    own.flat_map(|entry| fenced(&entry.text).into_iter().map(|example| (entry.name.clone(), example)))
        .collect()
}

/// What `help(topic)` prints, in lines of at most `width` characters where words allow.
///
/// # Errors
///
/// Fails when nothing is called `topic`, offering the nearest name.
pub fn help(entries: &[Entry], topic: &str, width: usize) -> Result<String, Fail> {
    let topic = topic.trim().trim_start_matches('.').trim_end_matches("()");
    let found: Vec<&Entry> =
        entries.iter().filter(|entry| entry.name == topic && !is_operator(&entry.name)).collect();
    if found.is_empty() {
        if let Some((_, form, meaning)) = NAMES.iter().find(|(name, ..)| *name == topic) {
            return Ok(format!("state.get(\"{form}\")\n    {meaning}"));
        }
        let names = entries.iter().map(|entry| entry.name.as_str());
        return Err(fail(format!("there is no help on `{topic}`"))
            .maybe_help(words::did_you_mean(topic, names))
            .argument(0));
    }
    // Overloads share the one comment; only a name without any comment shows bare signatures.
    let documented: Vec<&&Entry> = found.iter().filter(|entry| !entry.text.is_empty()).collect();
    if documented.is_empty() {
        return Ok(found.iter().map(|entry| entry.signature.as_str()).collect::<Vec<_>>().join("\n"));
    }
    let own: Vec<&&Entry> = documented.iter().copied().filter(|entry| !entry.is_standard).collect();
    let shown = if own.is_empty() { documented } else { own };
    // A method that is also a property has one text for both.
    let mut texts: Vec<(&str, Vec<&str>)> = Vec::new();
    for entry in shown {
        match texts.iter_mut().find(|(text, _)| *text == entry.text) {
            Some((_, signatures)) => signatures.push(&entry.signature),
            None => texts.push((&entry.text, vec![&entry.signature])),
        }
    }
    let explained = texts
        .iter()
        .map(|(text, signatures)| format!("{}\n{}", signatures.join("\n"), indented(text, width)));
    Ok(explained.collect::<Vec<_>>().join("\n\n"))
}

/// The names that have documentation, for `help()`.
#[must_use]
pub fn topics(entries: &[Entry]) -> Vec<&str> {
    let documented = entries
        .iter()
        .filter(|entry| !entry.is_standard && !entry.text.is_empty() && !is_operator(&entry.name));
    let mut names: Vec<&str> = documented.map(|entry| entry.name.as_str()).collect();
    names.dedup();
    names
}

/// The type name a value is registered under, with its article.
#[must_use]
pub fn described(value: &Dynamic) -> String {
    words::a_type(value.type_name())
}

/// The keys of a map; none of anything else.
#[must_use]
pub fn map_keys(value: &Dynamic) -> Vec<String> {
    value.read_lock::<rhai::Map>().map_or_else(Vec::new, |map| map.keys().map(ToString::to_string).collect())
}

fn is_operator(name: &str) -> bool {
    !name.starts_with(|c: char| c.is_alphabetic() || c == '_')
}

fn entry(info: &FuncInfo) -> Option<Entry> {
    let data = info.metadata;
    if data.name.starts_with("anon$") || data.name.starts_with("set$") || data.name.starts_with("index$") {
        return None;
    }
    let property = data.name.strip_prefix("get$");
    let name = property.unwrap_or(&data.name).to_owned();
    Some(Entry {
        signature: signature(&name, info, property.is_some()),
        parameters: data.num_params,
        name,
        text: comment(&data.comments),
        is_property: property.is_some(),
        receiver: data.param_types.first().copied(),
        is_standard: false,
    })
}

fn signature(name: &str, info: &FuncInfo, is_property: bool) -> String {
    let data = info.metadata;
    let parameters: Vec<String> =
        data.params_info.iter().map(|parameter| parameter_text(parameter)).collect();
    let result = match result_type(&data.return_type) {
        "" | "()" | "nothing `()`" => String::new(),
        result => format!(" -> {result}"),
    };
    if is_property {
        return format!(".{name}{result}");
    }
    format!("{name}({}){result}", parameters.join(", "))
}

fn parameter_text(parameter: &str) -> String {
    match parameter.split_once(':') {
        Some((name, rust)) => format!("{}: {}", name.trim(), words::type_name(plain_type(rust))),
        None => parameter.to_owned(),
    }
}

fn plain_type(rust: &str) -> &str {
    let rust = rust.trim().trim_start_matches('&').trim();
    rust.strip_prefix("mut ").unwrap_or(rust).trim()
}

/// `Result<Quantity, …>` is a quantity for a script.
fn result_type(rust: &str) -> &str {
    let inner = ["Result<", "ScriptResult<", "RhaiResultOf<"]
        .iter()
        .find_map(|start| rust.trim().strip_prefix(start));
    let inner =
        inner.map_or(rust, |inner| inner.trim_end_matches('>').split(", Box").next().unwrap_or(inner));
    match plain_type(inner) {
        "RhaiResult" => "value",
        other => words::type_name(other),
    }
}

fn comment(lines: &[impl AsRef<str>]) -> String {
    let text: Vec<&str> = lines.iter().flat_map(|block| block.as_ref().lines()).map(uncommented).collect();
    text.join("\n").trim().to_owned()
}

fn uncommented(line: &str) -> &str {
    let line = line.trim_start();
    let line = line.strip_prefix("///").or_else(|| line.strip_prefix("/**")).unwrap_or(line);
    let line = line.strip_suffix("*/").unwrap_or(line);
    line.strip_prefix(' ').unwrap_or(line)
}

/// The text for a terminal: paragraphs are filled, examples lose their fences and keep their lines.
fn indented(text: &str, width: usize) -> String {
    const INDENT: usize = 4;
    let mut lines = Vec::new();
    for (index, part) in text.split("```").enumerate() {
        let is_example = index % 2 == 1;
        for block in part.trim_matches('\n').split("\n\n").filter(|block| !block.trim().is_empty()) {
            if is_example {
                lines.extend(block.lines().skip_while(|line| *line == "rhai").map(str::to_owned));
            } else {
                let paragraph = block.split_whitespace().collect::<Vec<_>>().join(" ");
                lines.extend(wrapped(&paragraph, width.saturating_sub(INDENT)));
            }
            lines.push(String::new());
        }
    }
    let indented = lines.iter().map(|line| format!("{:INDENT$}{line}", "").trim_end().to_owned());
    indented.collect::<Vec<_>>().join("\n").trim_end().to_owned()
}

fn wrapped(line: &str, width: usize) -> Vec<String> {
    let mut lines = vec![String::new()];
    for word in line.split(' ') {
        let last = lines.last_mut().expect("there is always a last line");
        if !last.is_empty() && last.chars().count() + 1 + word.chars().count() > width {
            lines.push(word.to_owned());
        } else {
            last.push_str(if last.is_empty() { "" } else { " " });
            last.push_str(word);
        }
    }
    lines
}

fn fenced(text: &str) -> Vec<String> {
    let parts = text.split("```").skip(1).step_by(2);
    parts.filter_map(|part| part.strip_prefix("rhai\n")).map(str::to_owned).collect()
}
