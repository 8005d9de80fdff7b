//! How a value looks when it is echoed or printed: one registered function a type.
//!
//! The engine registers a plain form with each native type; the program may replace it by one that knows the terminal.

use std::any::TypeId;
use std::collections::HashMap;
use std::sync::Arc;

use rhai::{Dynamic, FLOAT, Variant};

/// What the medium can show.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Style {
    /// `Ca^2+` rather than `Ca²⁺`, `+/-` rather than `±`.
    pub ascii: bool,
    /// Whether colours may be used.
    pub color: bool,
    /// Characters in a line.
    pub width: usize,
    /// Rows of a table that are shown at most.
    pub rows: usize,
}

impl Default for Style {
    fn default() -> Self {
        Self { ascii: false, color: false, width: 100, rows: 40 }
    }
}

type Show = Arc<dyn Fn(&Dynamic, &Style) -> String + Send + Sync>;

/// The registered forms, by type.
#[derive(Clone, Default)]
pub struct Shows(HashMap<TypeId, Show>);

impl Shows {
    /// Sets how values of type `T` look, replacing what was set before.
    pub fn set<T: Variant + Clone>(&mut self, show: impl Fn(&T, &Style) -> String + Send + Sync + 'static) {
        let erased = move |value: &Dynamic, style: &Style| {
            value.read_lock::<T>().map_or_else(String::new, |value| show(&value, style))
        };
        self.0.insert(TypeId::of::<T>(), Arc::new(erased));
    }

    /// The value as it is echoed at the prompt: text is quoted, arrays and maps show their members.
    #[must_use]
    pub fn show(&self, value: &Dynamic, style: &Style) -> String {
        if let Some(show) = self.0.get(&value.type_id()) {
            return show(value, style);
        }
        if let Some(x) = value.read_lock::<FLOAT>() {
            return number(*x);
        }
        if let Some(text) = value.read_lock::<rhai::ImmutableString>() {
            return format!("{:?}", text.as_str());
        }
        if let Some(items) = value.read_lock::<rhai::Array>() {
            let items = items.iter().map(|item| self.show(item, style)).collect();
            return bracketed("[", items, "]", style);
        }
        if let Some(map) = value.read_lock::<rhai::Map>() {
            let members =
                map.iter().map(|(key, value)| format!("{}: {}", quoted_key(key), self.show(value, style)));
            return bracketed("#{ ", members.collect(), " }", style);
        }
        if let Some(function) = value.read_lock::<rhai::FnPtr>() {
            return match function.is_anonymous() {
                true => "a closure".to_owned(),
                false => format!("the function `{}`", function.fn_name()),
            };
        }
        if value.is_unit() {
            return "()".to_owned();
        }
        value.to_string()
    }

    /// The value as `print` writes it: text without its quotes.
    #[must_use]
    pub fn print(&self, value: &Dynamic, style: &Style) -> String {
        match value.read_lock::<rhai::ImmutableString>() {
            Some(text) => text.to_string(),
            None => self.show(value, style),
        }
    }
}

/// Twelve significant digits without trailing zeros: enough to hide `0.30000000000000004`, more than chemistry has.
fn number(x: FLOAT) -> String {
    if !x.is_finite() {
        return if x.is_nan() { "NaN".to_owned() } else { format!("{x}") };
    }
    super::numbers::general(x, 12)
}

fn quoted_key(key: &str) -> String {
    let bare = key.starts_with(|c: char| c.is_ascii_alphabetic() || c == '_')
        && key.chars().all(|c| c.is_ascii_alphanumeric() || c == '_');
    if bare { key.to_owned() } else { format!("{key:?}") }
}

/// One line if it fits, else wrapped with a hanging indent.
fn bracketed(open: &str, items: Vec<String>, close: &str, style: &Style) -> String {
    let length = items.iter().map(|item| item.chars().count() + 2).sum::<usize>();
    if items.is_empty() {
        return format!("{}{}", open.trim_end(), close.trim_start());
    }
    if open.len() + length + close.len() <= style.width && !items.iter().any(|item| item.contains('\n')) {
        return format!("{open}{}{close}", items.join(", "));
    }
    wrapped(open, &shortened(items), close, style)
}

/// Long arrays show their ends; the middle is counted.
fn shortened(mut items: Vec<String>) -> Vec<String> {
    const SHOWN: usize = 60;
    if items.len() > SHOWN {
        let left_out = items.len() - SHOWN;
        let tail = items.split_off(items.len() - SHOWN / 4);
        items.truncate(SHOWN - SHOWN / 4);
        items.push(format!("… {left_out} more …"));
        items.extend(tail);
    }
    items
}

fn wrapped(open: &str, items: &[String], close: &str, style: &Style) -> String {
    let indent = open.chars().count();
    let (mut text, mut column) = (open.to_owned(), indent);
    for (i, item) in items.iter().enumerate() {
        let item = if i + 1 < items.len() { format!("{item},") } else { item.clone() };
        let length = item.chars().count();
        if column > indent && column + 1 + length + close.len() > style.width {
            text.push_str(&format!("\n{}", " ".repeat(indent)));
            column = indent;
        } else if i > 0 {
            text.push(' ');
            column += 1;
        }
        text.push_str(&item);
        column += length;
    }
    text + close
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn case(value: impl Into<Dynamic>, expected: &str) {
        assert_eq!(Shows::default().show(&value.into(), &Style::default()), expected);
    }

    #[test]
    fn plain_values() {
        case(0.1 + 0.2, "0.3");
        case(1e-14, "1e-14");
        case(-6.352, "-6.352");
        case(100.0, "100");
        case(f64::INFINITY, "inf");
        case(7_i64, "7");
        case("HCO3^-", "\"HCO3^-\"");
        case(Dynamic::UNIT, "()");
        case(Dynamic::from_array(vec![]), "[]");
        case(Dynamic::from_array(vec![1_i64.into(), 0.5.into()]), "[1, 0.5]");
    }

    #[test]
    fn map_keys_are_quoted_where_a_script_must_quote_them() {
        let map = rhai::Map::from_iter([("pH".into(), 8.1.into()), ("Ca^2+".into(), 1_i64.into())]);
        case(Dynamic::from_map(map), "#{ \"Ca^2+\": 1, pH: 8.1 }");
    }

    #[test]
    fn a_long_array_wraps_and_is_shortened() {
        let array = Dynamic::from_array((0..1000_i64).map(Dynamic::from).collect());
        let text = Shows::default().show(&array, &Style { width: 40, ..Style::default() });
        assert!(text.lines().all(|line| line.chars().count() <= 40), "{text}");
        assert!(text.contains("… 940 more …") && text.ends_with("999]"), "{text}");
    }
}
