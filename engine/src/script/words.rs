//! The words messages are made of: names of types, of operators, and the nearest name to a misspelt one.

/// Advice where `()` turns up, which is what a map gives for a key it does not have.
pub const MISSING_KEY: &str = "a map gives `()` for a key it does not have: check the spelling";

/// The registered name a script user knows a type by; the rest keep the name they were registered with.
#[must_use]
pub fn type_name(rust: &str) -> &str {
    // The reader of the language names some with an article.
    let rust = rust.strip_prefix("an ").or_else(|| rust.strip_prefix("a ")).unwrap_or(rust);
    match rust {
        "i64" | "INT" => "whole number",
        "f64" | "FLOAT" => "number",
        "bool" | "boolean" | "boolean expression" => "truth value",
        "iterable value" => "array or a range",
        "char" => "character",
        "()" => "nothing `()`",
        "string" | "&str | ImmutableString | String" | "ImmutableString" | "String" | "&str" | "str" => {
            "text"
        }
        "map" | "Map" => "map",
        "array" | "Array" => "array",
        "Fn" | "FnPtr" => "closure",
        "range" | "range=" | "Range<i64>" | "RangeInclusive<i64>" => "range",
        "Dynamic" | "?" | "dynamic" => "value",
        _ => rust.rsplit("::").next().unwrap_or(rust),
    }
}

/// The type with its article: `a whole number`, `text`.
#[must_use]
pub fn a_type(rust: &str) -> String {
    let name = type_name(rust);
    match name {
        "text" | "nothing `()`" => name.to_owned(),
        _ if name.starts_with(['a', 'e', 'i', 'o', 'u', 'A', 'E', 'I', 'O', 'U']) => format!("an {name}"),
        _ => format!("a {name}"),
    }
}

/// The sign a person wrote for the operator of this name.
#[must_use]
pub fn sign(operator: &str) -> &str {
    if operator == super::numbers::DIVIDE {
        return "/";
    }
    super::compare::ORDERINGS.iter().find(|(name, _)| *name == operator).map_or(operator, |(_, sign)| sign)
}

/// What an operator does, to say what cannot be done.
#[must_use]
pub fn deed(operator: &str) -> Option<&'static str> {
    Some(match sign(operator) {
        "+" | "+=" => "add",
        "-" | "-=" => "subtract",
        "*" | "*=" => "multiply",
        "/" | "%" => "divide",
        "==" | "!=" | "<" | "<=" | ">" | ">=" => "compare",
        "±" => "put an uncertainty on",
        _ => return None,
    })
}

/// The candidate nearest to `wrong`, if near enough to be a slip of the keyboard.
#[must_use]
pub fn nearest<'a>(wrong: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let folded = wrong.to_lowercase();
    let distance = |name: &str| match name.to_lowercase() == folded {
        true => 0,
        false => strsim::damerau_levenshtein(wrong, name),
    };
    let allowed = (wrong.chars().count() / 3).min(3);
    let near = |name: &&str| *name != wrong && distance(name) <= allowed;
    candidates.into_iter().filter(near).min_by_key(|name| (distance(name), *name))
}

/// "did you mean `…`?", when something is near.
#[must_use]
pub fn did_you_mean<'a>(wrong: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<String> {
    nearest(wrong, candidates).map(|name| format!("did you mean `{name}`?"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_nearest_name() {
        let names = ["pH", "pe", "alkalinity", "sample", "sqrt"];
        assert_eq!(nearest("ph", names), Some("pH"));
        assert_eq!(nearest("sampel", names), Some("sample"));
        assert_eq!(nearest("alkalinty", names), Some("alkalinity"));
        assert_eq!(nearest("temperature", names), None);
        assert_eq!(nearest("pH", ["pH"]), None);
    }
}
