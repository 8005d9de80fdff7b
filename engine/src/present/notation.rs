//! Chemical notation as typed (`Ca^2+`, `CO2`) and as shown (`Ca²⁺`, `CO₂`).

use super::{Style, Title};

const SUPERSCRIPTS: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
const SUBSCRIPTS: [char; 10] = ['₀', '₁', '₂', '₃', '₄', '₅', '₆', '₇', '₈', '₉'];

/// A formula or equation as shown: charges raised, subscripts lowered, `<=>` as `⇌`; in plain style as typed.
///
/// Decimal subscripts, `(OH)4.5`, stay on the line: there is no lowered decimal point.
///
/// # Examples
///
/// ```
/// use lysocline_engine::present::{Style, notation};
///
/// assert_eq!(notation::shown("CO2(aq) + H2O <=> HCO3^- + H^+", Style::default()), "CO₂(aq) + H₂O ⇌ HCO₃⁻ + H⁺");
/// ```
#[must_use]
pub fn shown(text: &str, style: Style) -> String {
    if style.plain {
        return text.to_owned();
    }
    let chars: Vec<char> = text.chars().collect();
    let mut out = String::with_capacity(text.len());
    let mut at = 0;
    while at < chars.len() {
        let rest = &chars[at..];
        let (piece, used) = charge(rest)
            .or_else(|| subscript(&chars[..at], rest))
            .or_else(|| rest.starts_with(&['<', '=', '>']).then(|| ("⇌".to_owned(), 3)))
            .or_else(|| hydrate_dot(&chars[..at], rest))
            .unwrap_or_else(|| (rest[0].to_string(), 1));
        out.push_str(&piece);
        at += used;
    }
    out
}

/// A title as shown, on one line: `m(Ca²⁺) [µmol/kg]`.
#[must_use]
pub fn shown_title(title: &Title, style: Style) -> String {
    let unit = title.unit().map(|unit| format!(" [{}]", shown_unit(unit, style)));
    shown_name(title, style) + unit.unwrap_or_default().as_str()
}

/// The name of a column as shown. Only what is written as chemistry is set as chemistry: `m(CO2)` and `SO4^2-`
/// are, `site A1` is not.
#[must_use]
pub fn shown_name(title: &Title, style: Style) -> String {
    let name = title.name();
    if is_observable_of_formula(name) || has_charge(name) { shown(name, style) } else { name.to_owned() }
}

/// A unit as shown: `µmol/kg`, `mg/L as NO₃⁻`.
#[must_use]
pub fn shown_unit(unit: &str, style: Style) -> String {
    if style.plain {
        return unit.to_owned();
    }
    let (measure, formula) = unit.split_once(" as ").map_or((unit, None), |(m, f)| (m, Some(f)));
    let measure = match measure.strip_prefix('u') {
        Some(rest) if ["mol", "eq", "g", "atm", "M"].iter().any(|unit| rest.starts_with(unit)) => {
            format!("µ{rest}")
        }
        _ => measure.to_owned(),
    };
    formula.map_or(measure.clone(), |formula| format!("{measure} as {}", shown(formula, style)))
}

/// The typed form of a text that may hold shown characters.
///
/// # Examples
///
/// ```
/// use lysocline_engine::present::notation;
///
/// assert_eq!(notation::typed("m(SO₄²⁻)"), "m(SO4^2-)");
/// ```
#[must_use]
pub fn typed(text: &str) -> String {
    if text.is_ascii() {
        return text.to_owned();
    }
    let chars: Vec<char> = text.chars().collect();
    let mut out = String::with_capacity(text.len());
    let mut at = 0;
    while at < chars.len() {
        let (piece, used) =
            raised_charge(&chars[at..]).unwrap_or_else(|| (lowered_digit(chars[at]).to_string(), 1));
        out.push_str(&piece);
        at += used;
    }
    out
}

/// `^2+` at the beginning of `rest`, raised.
fn charge(rest: &[char]) -> Option<(String, usize)> {
    if rest.first() != Some(&'^') {
        return None;
    }
    let digits = rest[1..].iter().take_while(|c| c.is_ascii_digit()).count();
    let sign = match rest.get(1 + digits)? {
        '+' => '⁺',
        '-' => '⁻',
        _ => return None,
    };
    let raised = rest[1..=digits].iter().map(|c| in_script(*c, &SUPERSCRIPTS));
    Some((raised.chain([sign]).collect(), digits + 2))
}

/// Digits that follow an element or a bracket, lowered.
fn subscript(before: &[char], rest: &[char]) -> Option<(String, usize)> {
    let digits = rest.iter().take_while(|c| c.is_ascii_digit()).count();
    let decimal = rest.get(digits) == Some(&'.') && rest.get(digits + 1).is_some_and(char::is_ascii_digit);
    let counts_something = match before.last()? {
        ')' | ']' => true,
        last if last.is_ascii_alphabetic() => {
            // A word that starts small is a name (`site2`), not an element.
            before.iter().rev().take_while(|c| c.is_ascii_alphabetic()).last()?.is_ascii_uppercase()
        }
        _ => false,
    };
    (digits > 0 && !decimal && counts_something)
        .then(|| (rest[..digits].iter().map(|c| in_script(*c, &SUBSCRIPTS)).collect(), digits))
}

/// The `*` between a salt and its water of crystallisation.
fn hydrate_dot(before: &[char], rest: &[char]) -> Option<(String, usize)> {
    let tight = before.last().is_some_and(|c| !c.is_whitespace())
        && rest.get(1).is_some_and(|c| c.is_ascii_alphanumeric());
    (rest[0] == '*' && tight).then(|| ("·".to_owned(), 1))
}

/// `²⁺` at the beginning of `rest`, as typed.
fn raised_charge(rest: &[char]) -> Option<(String, usize)> {
    let digits = rest.iter().take_while(|c| SUPERSCRIPTS.contains(c)).count();
    let sign = match rest.get(digits)? {
        '⁺' => '+',
        '⁻' => '-',
        _ => return None,
    };
    let plain = rest[..digits].iter().filter_map(|c| out_of_script(*c, &SUPERSCRIPTS));
    Some((['^'].into_iter().chain(plain).chain([sign]).collect(), digits + 1))
}

fn lowered_digit(c: char) -> char {
    out_of_script(c, &SUBSCRIPTS).unwrap_or(c)
}

fn in_script(digit: char, script: &[char; 10]) -> char {
    digit.to_digit(10).map_or(digit, |digit| script[digit as usize])
}

fn out_of_script(c: char, script: &[char; 10]) -> Option<char> {
    let digit = script.iter().position(|raised| *raised == c)?;
    char::from_digit(u32::try_from(digit).ok()?, 10)
}

/// A word directly followed by a bracket: `m(…`, `log_a(…`.
fn is_observable_of_formula(name: &str) -> bool {
    let word = name.trim_start_matches(|c: char| c.is_ascii_alphabetic() || c == '_');
    word.len() < name.len() && word.starts_with('(')
}

fn has_charge(name: &str) -> bool {
    let chars: Vec<char> = name.chars().collect();
    (0..chars.len()).any(|at| charge(&chars[at..]).is_some())
}

#[cfg(test)]
mod tests {
    use super::{Style, Title, shown, shown_name, shown_unit, typed};

    #[track_caller]
    fn case(text: &str, expected: &str) {
        assert_eq!(shown(text, Style::default()), expected);
        assert_eq!(shown(text, Style { plain: true, width: None }), text);
        assert_eq!(typed(expected).replace('·', "*").replace('⇌', "<=>"), text);
    }

    #[test]
    fn formulas() {
        case("Ca^2+", "Ca²⁺");
        case("e^-", "e⁻");
        case("HCO3^-", "HCO₃⁻");
        case("Al13O4(OH)24^7+", "Al₁₃O₄(OH)₂₄⁷⁺");
        case("CaSO4*2H2O(gypsum)", "CaSO₄·2H₂O(gypsum)");
        case("Fe8O8(OH)4.5(SO4)1.75(schwertmannite)", "Fe₈O₈(OH)4.5(SO₄)1.75(schwertmannite)");
        case("CO2(aq) + H2O <=> HCO3^- + H^+", "CO₂(aq) + H₂O ⇌ HCO₃⁻ + H⁺");
        case("0.5 O2(g) + 2 H^+", "0.5 O₂(g) + 2 H⁺");
    }

    #[track_caller]
    fn title(text: &str, name: &str, unit: Option<&str>) {
        let title = Title::parse(text);
        assert_eq!(shown_name(&title, Style::default()), name);
        assert_eq!(title.unit().map(|unit| shown_unit(unit, Style::default())).as_deref(), unit);
    }

    #[test]
    fn titles() {
        title("m(Ca^2+) [mmol/kg]", "m(Ca²⁺)", Some("mmol/kg"));
        title("f(CO2(g)) [uatm]", "f(CO₂(g))", Some("µatm"));
        title("SO4^2- [mg/L]", "SO₄²⁻", Some("mg/L"));
        title("nitrate [umol/L as NO3^-]", "nitrate", Some("µmol/L as NO₃⁻"));
        title("site A1", "site A1", None);
        title("SI(calcite)", "SI(calcite)", None);
    }
}
