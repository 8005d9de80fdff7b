//! Reading a unit from text.
//!
//! ```text
//! unit    = product { "/" factor } [ "as" formula ]
//! product = factor { ( " " | "*" | "·" ) factor }
//! factor  = ( atom | "(" unit ")" ) [ power ]
//! power   = [ "^" ] [ "-" ] digits | "^(" [ "-" ] digits "/" digits ")"
//! ```
//!
//! A product straight after a `/` is refused: in `J/mol K` nobody can tell where the K belongs.

use super::atom;
use super::dimension::Exponent;
use super::unit::Factor;
use super::{Kind, Unit, UnitError};
use crate::nearest::nearest;

pub(super) fn unit(text: &str) -> Result<Unit, UnitError> {
    let (unit, formula) = split_formula(text.trim());
    if formula == Some("") {
        return Err(malformed(text, "name the substance after `as`, such as `mg/L as N`"));
    }
    if unit.len() > MAX_LENGTH {
        return Err(malformed(&text.chars().take(20).collect::<String>(), "no unit is that long"));
    }
    let mut reader = Reader { text, rest: unit, depth: 0 };
    let factors = reader.unit()?;
    if !reader.rest.is_empty() {
        return Err(malformed(text, &format!("`{}` is left over", reader.rest)));
    }
    Unit::of(factors, formula)
}

/// Bounds the work and the nesting that one text can ask for.
const MAX_LENGTH: usize = 100;
const MAX_DEPTH: usize = 4;

/// Splits `mg/L as NO3^-` at the word `as`.
fn split_formula(text: &str) -> (&str, Option<&str>) {
    if let Some(unit) = text.strip_suffix(" as") {
        return (unit.trim_end(), Some(""));
    }
    match text.split_once(" as ") {
        Some((unit, formula)) => (unit.trim_end(), Some(formula.trim())),
        None => (text, None),
    }
}

struct Reader<'a> {
    text: &'a str,
    rest: &'a str,
    depth: usize,
}

impl Reader<'_> {
    fn unit(&mut self) -> Result<Vec<Factor>, UnitError> {
        let mut factors = self.factor()?;
        while self.at_product() {
            factors.extend(self.factor()?);
        }
        let mut divided = false;
        while self.take("/") {
            factors.extend(self.factor()?.into_iter().map(inverted));
            divided = true;
        }
        if divided && self.at_product() {
            let reason = "after `/` a product takes brackets, such as `J/(mol K)`, and a substance takes `as`, such as `mg/L as N`";
            return Err(malformed(self.text, reason));
        }
        Ok(factors)
    }

    fn factor(&mut self) -> Result<Vec<Factor>, UnitError> {
        self.rest = self.rest.trim_start();
        let factors = if self.take("(") { self.bracket()? } else { vec![self.atom()?] };
        let power = self.power()?;
        let raised = |factor: Factor| Factor { exponent: factor.exponent * power, ..factor };
        let factors: Vec<Factor> = factors.into_iter().map(raised).collect();
        if factors.iter().all(Factor::is_plausible) {
            Ok(factors)
        } else {
            Err(malformed(self.text, "no quantity has such a power"))
        }
    }

    fn bracket(&mut self) -> Result<Vec<Factor>, UnitError> {
        self.depth += 1;
        if self.depth > MAX_DEPTH {
            return Err(malformed(self.text, "the brackets are nested too deeply"));
        }
        let inside = self.unit()?;
        self.depth -= 1;
        if self.take(")") { Ok(inside) } else { Err(malformed(self.text, "a `)` is missing")) }
    }

    fn atom(&mut self) -> Result<Factor, UnitError> {
        let end = self.atom_end();
        let (spelling, rest) = self.rest.split_at(end);
        if spelling.is_empty() {
            return Err(malformed(self.text, &self.expected_unit()));
        }
        let spelling = spelling.replace(['µ', 'μ'], "u");
        let atom = atom::find(&spelling).ok_or_else(|| unknown(&spelling, self.text))?;
        self.rest = rest;
        Ok(Factor { atom, exponent: Exponent::ONE })
    }

    /// Where the atom at the front ends: after letters, a sign such as `%`, the `1`, or `kg(water)`.
    fn atom_end(&self) -> usize {
        if self.rest.starts_with("kg(") {
            return self.rest.find(')').map_or(self.rest.len(), |bracket| bracket + 1);
        }
        if self.rest.starts_with('%') || self.at_one() {
            return 1;
        }
        let is_letter = |c: char| c.is_alphabetic() || c == '°' || c == '_' || c == '℃' || c == '℉';
        self.rest.find(|c| !is_letter(c)).unwrap_or(self.rest.len())
    }

    /// Whether a `1` stands at the front, not the beginning of a number such as 100.
    fn at_one(&self) -> bool {
        let behind = self.rest.strip_prefix('1');
        behind.is_some_and(|rest| !rest.starts_with(|c: char| c.is_ascii_digit() || c == '.'))
    }

    fn expected_unit(&self) -> String {
        match self.rest.chars().next() {
            Some(found) => format!("a unit was expected where `{found}` stands"),
            None if self.text.trim().is_empty() => "it is empty; write `1` for a pure number".to_owned(),
            None => "a unit is missing at the end".to_owned(),
        }
    }

    fn power(&mut self) -> Result<Exponent, UnitError> {
        if self.rest.starts_with("^(") {
            self.rest = &self.rest[2..];
            let fraction =
                self.whole_number()?.zip(if self.take("/") { self.whole_number()? } else { Some(1) });
            return match fraction {
                Some((numerator, denominator)) if denominator > 0 && self.take(")") => {
                    Ok(Exponent::new(numerator, denominator))
                }
                _ => Err(malformed(self.text, "a power in brackets is a fraction, such as `kg^(1/2)`")),
            };
        }
        let caret = self.take("^");
        match self.whole_number()? {
            Some(power) => Ok(Exponent::from_integer(power)),
            None if caret => {
                Err(malformed(self.text, "after `^` a whole number is expected, such as `cm^3`"))
            }
            None => Ok(Exponent::ONE),
        }
    }

    /// A signed whole number at the front, if there is one.
    fn whole_number(&mut self) -> Result<Option<i32>, UnitError> {
        let unsigned = self.rest.strip_prefix(['-', '−']).unwrap_or(self.rest);
        let n_digits = unsigned.find(|c: char| !c.is_ascii_digit()).unwrap_or(unsigned.len());
        if n_digits == 0 {
            return Ok(None);
        }
        if n_digits > 2 {
            return Err(malformed(self.text, "powers have one or two digits"));
        }
        let (digits, rest) = unsigned.split_at(n_digits);
        let sign = if unsigned.len() < self.rest.len() { -1 } else { 1 };
        self.rest = rest;
        Ok(digits.parse::<i32>().ok().map(|number| sign * number))
    }

    /// Whether another factor of a product follows; a `*` or `·` before it is taken.
    fn at_product(&mut self) -> bool {
        let rest = self.rest.trim_start();
        if let Some(rest) = rest.strip_prefix(['*', '·']) {
            self.rest = rest;
            return true;
        }
        let after_space = rest.len() < self.rest.len();
        after_space && !rest.is_empty() && !rest.starts_with(['/', ')'])
    }

    fn take(&mut self, sign: &str) -> bool {
        match self.rest.trim_start().strip_prefix(sign) {
            Some(rest) => {
                self.rest = rest;
                true
            }
            None => false,
        }
    }
}

fn inverted(factor: Factor) -> Factor {
    Factor { exponent: -factor.exponent, ..factor }
}

fn malformed(unit: &str, reason: &str) -> UnitError {
    UnitError::Malformed { unit: unit.trim().to_owned(), reason: reason.to_owned() }
}

/// Suggests from the whole units first (`umol/kgg`), then from the atoms (`umoll`).
fn unknown(spelling: &str, whole: &str) -> UnitError {
    let unit = whole.trim();
    let near = match spelling {
        "M" | "mM" | "uM" | "nM" => Some(format!("{}mol/L", &spelling[..spelling.len() - 1])),
        _ if spelling == unit => nearest(spelling, atom::symbols()).map(str::to_owned),
        _ => nearest(unit, Kind::every_unit())
            .filter(|near| Unit::parse(near).is_ok())
            .or_else(|| nearest(spelling, atom::symbols()))
            .map(str::to_owned),
    };
    UnitError::Unknown { unit: spelling.to_owned(), nearest: near, kind: None }
}
