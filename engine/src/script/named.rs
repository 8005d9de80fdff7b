//! Maps of a script as named arguments.

use rhai::{Array, Dynamic, ImmutableString, Map};

use super::{Fail, docs, fail};
use crate::named::{Named, Value};
use crate::quantity::Quantity;

/// A script value as the value behind a key.
///
/// # Errors
///
/// Fails for anything but a number, a text, a quantity, a truth value, or a list or map of these.
pub fn value(value: &Dynamic) -> Result<Value, Fail> {
    let unfit = || {
        fail(format!("{} cannot stand here", docs::described(value)))
            .help("a number, a text, a quantity, true or false, or a list or map of these can")
    };
    if let Some(number) = number(value) {
        return Ok(Value::Number(number));
    }
    if let Some(text) = value.read_lock::<ImmutableString>() {
        return Ok(Value::Text(text.to_string()));
    }
    if let Some(quantity) = value.read_lock::<Quantity>() {
        return Ok(Value::Quantity(quantity.clone()));
    }
    if let Some(items) = value.read_lock::<Array>() {
        return items.iter().map(self::value).collect::<Result<_, _>>().map(Value::List);
    }
    if let Some(map) = value.read_lock::<Map>() {
        return entries(&map).map(Value::Map);
    }
    value.as_bool().map(Value::Flag).map_err(|_| unfit())
}

/// A map as named arguments. Keys whose values are no [`Value`], such as a ledger, are to be taken out before.
///
/// # Errors
///
/// As [`value`], pointing at the key.
pub fn named(map: &Map) -> Result<Named, Fail> {
    entries(map).map(Named::new)
}

/// One text, or an array of texts, as a list.
///
/// # Errors
///
/// Fails for anything else.
pub fn one_or_many(value: &Dynamic) -> Result<Vec<String>, Fail> {
    let text = |value: &Dynamic| value.read_lock::<ImmutableString>().map(|text| text.to_string());
    let unfit = |found: &Dynamic| {
        fail(format!("a text or a list of texts is needed here, not {}", docs::described(found)))
    };
    if let Some(items) = value.read_lock::<Array>() {
        return items.iter().map(|item| text(item).ok_or_else(|| unfit(item))).collect();
    }
    text(value).map(|text| vec![text]).ok_or_else(|| unfit(value))
}

/// A whole number or a decimal.
#[must_use]
#[allow(clippy::cast_precision_loss, reason = "a script's whole numbers are counts and charges")]
pub fn number(value: &Dynamic) -> Option<f64> {
    value.as_float().ok().or_else(|| value.as_int().ok().map(|whole| whole as f64))
}

fn entries(map: &Map) -> Result<std::collections::BTreeMap<String, Value>, Fail> {
    let entry = |(key, item): (&_, &Dynamic)| {
        let key: &rhai::Identifier = key;
        match value(item) {
            Ok(value) => Ok((key.to_string(), value)),
            Err(fail) if fail.at == super::diagnostic::At::Call => Err(fail.key(key.as_str())),
            // The innermost key is the one at fault.
            Err(fail) => Err(fail),
        }
    };
    map.iter().map(entry).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn map(entries: impl IntoIterator<Item = (&'static str, Dynamic)>) -> Map {
        entries.into_iter().map(|(key, value)| (key.into(), value)).collect()
    }

    #[test]
    fn each_kind_of_value_goes_through() {
        let inner = map([("coverage", 2_i64.into())]);
        let outer = map([
            ("pH", 8.15.into()),
            ("Ca", "41.2 mg/L".into()),
            ("Alk", Dynamic::from(Quantity::from(2.0))),
            ("open", true.into()),
            ("list", Dynamic::from_array(vec![1_i64.into(), "a".into()])),
            ("more", Dynamic::from_map(inner)),
        ]);
        let mut read = named(&outer).expect("all can stand in a map");
        assert_eq!(read.number("pH"), Ok(Some(8.15)));
        assert_eq!(read.text("Ca"), Ok(Some("41.2 mg/L".to_owned())));
        assert!(matches!(read.take("Alk"), Some(Value::Quantity(quantity)) if quantity.value() == 2.0));
        assert!(matches!(read.take("open"), Some(Value::Flag(true))));
        assert!(matches!(read.take("list"), Some(Value::List(items)) if items.len() == 2));
        assert!(
            matches!(read.take("more"), Some(Value::Map(map)) if matches!(map["coverage"], Value::Number(2.0)))
        );
        assert!(read.finish().is_ok());
    }

    #[test]
    fn the_innermost_key_is_at_fault() {
        let outer = map([("options", Dynamic::from_map(map([("unit", Dynamic::UNIT)])))]);
        let expected = fail("nothing `()` cannot stand here")
            .help("a number, a text, a quantity, true or false, or a list or map of these can")
            .key("unit");
        assert_eq!(named(&outer).expect_err("no value"), expected);
    }

    #[test]
    fn one_text_is_a_list_of_one() {
        assert_eq!(one_or_many(&"calcite".into()), Ok(vec!["calcite".to_owned()]));
        let two = Dynamic::from_array(vec!["calcite".into(), "gypsum".into()]);
        assert_eq!(one_or_many(&two), Ok(vec!["calcite".to_owned(), "gypsum".to_owned()]));
        let message = |value: Dynamic| one_or_many(&value).expect_err("no text").message;
        assert_eq!(message(1_i64.into()), "a text or a list of texts is needed here, not a whole number");
        assert_eq!(
            message(Dynamic::from_array(vec![true.into()])),
            "a text or a list of texts is needed here, not a truth value"
        );
    }
}
