//! Species and the notation they are written in.
//!
//! ```text
//! species  := "e^-" | part ( "*" [number] part )* [ charge ] [ state ]
//! part     := ( Element [number] | "(" part ")" [number] )+
//! charge   := "^" [digits] ( "+" | "-" )
//! state    := "(" name ")"          the name starts with a small letter: (aq), (g), (calcite)
//! ```
//!
//! Subscript and superscript characters and the middle dot are read as the ASCII they stand for, so that `HCO₃⁻` and
//! `HCO3^-` are one species. The element X is a site of the solid in the brackets: `CaX2(clay)` is calcium on two exchange
//! sites of a clay, `XOH2^+(ferric oxide)` a surface group that took up a proton. A neutral species without a state is a solute; `H2O` is liquid water.

use std::collections::BTreeMap;
use std::fmt;
use std::sync::Arc;

use super::element::Element;
use super::rational::{self, Rational};
use crate::nearest::nearest;

/// A chemical species: what it is made of, its charge, and the state it is in.
///
/// Two species are the same when they are written the same way once characters are normalised; cheap to clone.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Species(Arc<Inner>);

/// Compared by `key` first, which already decides: the rest follows from it.
#[derive(PartialEq, Eq, PartialOrd, Ord, Hash)]
struct Inner {
    key: String,
    composition: Vec<(Element, Rational)>,
    charge: i32,
    state: State,
}

/// The state of aggregation, by IUPAC symbol, or the name of a mineral.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum State {
    /// Dissolved in water: `(aq)`, and every ion.
    Aqueous,
    /// `(g)`.
    Gas,
    /// `(l)`.
    Liquid,
    /// `(s)`.
    Solid,
    /// `(cr)`.
    Crystalline,
    /// `(am)`.
    Amorphous,
    /// A solid by name: `(calcite)`.
    Mineral(String),
}

/// Why a text is no species.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum FormulaError {
    /// Nothing was written.
    #[error("a formula is missing: write one such as `Ca^2+`, `CO2(g)` or `CaCO3(calcite)`")]
    Empty,
    /// A symbol that is no element.
    #[error("`{symbol}` in `{formula}` is no element{}", suggestion(.nearest.as_deref()))]
    UnknownElement {
        /// The formula as written.
        formula: String,
        /// The symbol at fault.
        symbol: String,
        /// An element whose symbol is close to it.
        nearest: Option<String>,
    },
    /// A charge written without the caret, or with sign and digits the wrong way round.
    #[error("`{formula}`: write the charge as `{suggested}`")]
    Charge {
        /// The formula as written.
        formula: String,
        /// The spelling that would be read.
        suggested: String,
    },
    /// A site of nothing.
    #[error("`{0}`: X is a site of a solid, which goes into brackets: `NaX(clay)`, `XOH(ferric oxide)`")]
    HomelessSite(String),
    /// Anything else that cannot be read on from `at`.
    #[error("`{formula}` cannot be read on from `{rest}`: {expected}")]
    Unreadable {
        /// The formula as written.
        formula: String,
        /// What was left.
        rest: String,
        /// What could have stood there.
        expected: &'static str,
    },
}

fn suggestion(nearest: Option<&str>) -> String {
    nearest.map(|name| format!("; did you mean `{name}`?")).unwrap_or_default()
}

impl Species {
    /// Reads a species.
    ///
    /// # Errors
    ///
    /// Returns what could not be read, and how it would be written.
    ///
    /// # Examples
    ///
    /// ```
    /// use lysocline_engine::chem::Species;
    ///
    /// let gypsum = Species::parse("CaSO4·2H2O(gypsum)")?;
    /// assert_eq!(gypsum.to_string(), "CaSO4*2H2O(gypsum)");
    /// assert_eq!(Species::parse("HCO₃⁻")?, Species::parse("HCO3^-")?);
    /// # Ok::<(), lysocline_engine::chem::FormulaError>(())
    /// ```
    pub fn parse(text: &str) -> Result<Self, FormulaError> {
        Reader::new(text).species()
    }

    /// Liquid water.
    #[must_use]
    pub fn water() -> Self {
        Self::parse("H2O").expect("water is a species")
    }

    /// The hydrogen ion, H⁺.
    #[must_use]
    pub fn proton() -> Self {
        Self::parse("H^+").expect("the hydrogen ion is a species")
    }

    /// The electron, e⁻: charge -1 and no elements.
    #[must_use]
    pub fn electron() -> Self {
        Self(Arc::new(Inner { key: "e^-".into(), composition: vec![], charge: -1, state: State::Aqueous }))
    }

    /// The ASCII spelling that identifies the species: `HCO3^-`, `CaCO3(calcite)`.
    #[must_use]
    pub fn key(&self) -> &str {
        &self.0.key
    }

    /// Moles of each element in a mole of the species, by atomic number; empty for the electron.
    #[must_use]
    pub fn composition(&self) -> &[(Element, Rational)] {
        &self.0.composition
    }

    /// Moles of one element in a mole of the species.
    #[must_use]
    pub fn count(&self, element: Element) -> Rational {
        let found = self.0.composition.iter().find(|(present, _)| *present == element);
        found.map_or_else(|| Rational::from_integer(0), |(_, count)| *count)
    }

    /// Charge number z.
    #[must_use]
    pub fn charge(&self) -> i32 {
        self.0.charge
    }

    /// The state of aggregation.
    #[must_use]
    pub fn state(&self) -> &State {
        &self.0.state
    }

    /// Molar mass in g/mol; `None` if an element has no standard atomic weight.
    #[must_use]
    pub fn molar_mass(&self) -> Option<f64> {
        self.0
            .composition
            .iter()
            .map(|(element, count)| Some(element.mass()? * rational::to_f64(*count)))
            .sum()
    }

    /// Whether it is dissolved: an ion or a neutral solute, not water and not the electron.
    #[must_use]
    pub fn is_solute(&self) -> bool {
        self.0.state == State::Aqueous && !self.0.composition.is_empty()
    }

    /// Whether it is a gas.
    #[must_use]
    pub fn is_gas(&self) -> bool {
        self.0.state == State::Gas
    }

    /// Whether it is a solid.
    #[must_use]
    pub fn is_solid(&self) -> bool {
        !matches!(self.0.state, State::Aqueous | State::Gas | State::Liquid) && self.sites() == 0.into()
    }

    /// Whether it is held by sites of a solid: `NaX(clay)`, `XOH(ferric oxide)`.
    #[must_use]
    pub fn is_on_sites(&self) -> bool {
        self.mineral_name().is_some() && self.sites() != 0.into()
    }

    /// Moles of sites in a mole of the species.
    #[must_use]
    pub fn sites(&self) -> Rational {
        self.count(Element::SITE)
    }

    /// The name in the last bracket of a mineral: `calcite`.
    #[must_use]
    pub fn mineral_name(&self) -> Option<&str> {
        match &self.0.state {
            State::Mineral(name) => Some(name),
            _ => None,
        }
    }

    /// The elements other than hydrogen and oxygen.
    pub fn elements_beside_water(&self) -> impl Iterator<Item = Element> + '_ {
        self.0.composition.iter().map(|(e, _)| *e).filter(|e| *e != Element::H && *e != Element::O)
    }

    /// With subscripts, superscripts and the middle dot: `HCO₃⁻`.
    #[must_use]
    pub fn pretty(&self) -> String {
        pretty(&self.0.key)
    }
}

impl fmt::Display for Species {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0.key)
    }
}

impl fmt::Debug for Species {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0.key)
    }
}

impl State {
    fn from_name(name: &str) -> Self {
        match name {
            "aq" => Self::Aqueous,
            "g" => Self::Gas,
            "l" => Self::Liquid,
            "s" => Self::Solid,
            "cr" => Self::Crystalline,
            "am" => Self::Amorphous,
            mineral => Self::Mineral(mineral.into()),
        }
    }
}

/// Typographic form of an ASCII formula: digits after a letter or bracket become subscripts, charges superscripts.
#[must_use]
pub fn pretty(ascii: &str) -> String {
    let mut written = String::with_capacity(ascii.len() * 2);
    let mut previous = ' ';
    let mut charge = false;
    let mut depth_of_name = 0;
    let mut characters = ascii.chars().peekable();
    while let Some(c) = characters.next() {
        let names_state = c == '(' && characters.peek().is_some_and(char::is_ascii_lowercase);
        if names_state || (depth_of_name > 0 && c == '(') {
            depth_of_name += 1;
        }
        let shown = match c {
            _ if depth_of_name > 0 => c,
            '^' => {
                charge = true;
                previous = c;
                continue;
            }
            '*' => '·',
            '+' | '-' | '0'..='9' if charge => superscript(c),
            '0'..='9'
                if previous.is_ascii_alphabetic()
                    || previous == ')'
                    || is_subscript(written.chars().last()) =>
            {
                subscript(c)
            }
            _ => c,
        };
        if depth_of_name > 0 && c == ')' {
            depth_of_name -= 1;
        }
        charge = charge && (c.is_ascii_digit() || c == '+' || c == '-');
        written.push(shown);
        previous = c;
    }
    written
}

fn superscript(c: char) -> char {
    match c {
        '+' => '⁺',
        '-' => '⁻',
        digit => SUPERSCRIPTS[digit as usize - '0' as usize],
    }
}

fn subscript(digit: char) -> char {
    char::from_u32('₀' as u32 + digit as u32 - '0' as u32).unwrap_or(digit)
}

fn is_subscript(c: Option<char>) -> bool {
    c.is_some_and(|c| ('₀'..='₉').contains(&c))
}

const SUPERSCRIPTS: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];

/// The ASCII spelling of a formula written with sub- and superscripts.
fn to_ascii(text: &str) -> String {
    let mut ascii = String::with_capacity(text.len());
    let mut raised = false;
    for c in text.trim().chars() {
        let superscript = SUPERSCRIPTS.iter().position(|s| *s == c).map(|d| (b'0' + d as u8) as char);
        let raised_now = match c {
            '⁺' => Some('+'),
            '⁻' => Some('-'),
            _ => superscript,
        };
        if let Some(plain) = raised_now {
            if !raised && !ascii.ends_with('^') {
                ascii.push('^');
            }
            ascii.push(plain);
        } else if ('₀'..='₉').contains(&c) {
            ascii.push((b'0' + (c as u32 - '₀' as u32) as u8) as char);
        } else {
            ascii.push(match c {
                '·' | '•' | '∙' | '⋅' => '*',
                '−' | '–' => '-',
                other => other,
            });
        }
        raised = raised_now.is_some();
    }
    ascii
}

/// Recursive-descent reader of the grammar above.
struct Reader<'a> {
    written: &'a str,
    text: String,
    position: usize,
}

type Composition = BTreeMap<Element, Rational>;

impl<'a> Reader<'a> {
    fn new(written: &'a str) -> Self {
        Self { written: written.trim(), text: to_ascii(written), position: 0 }
    }

    fn species(mut self) -> Result<Species, FormulaError> {
        if self.text.is_empty() {
            return Err(FormulaError::Empty);
        }
        if matches!(self.text.as_str(), "e^-" | "e-") {
            return if self.text == "e^-" { Ok(Species::electron()) } else { Err(self.charge_error("e^-")) };
        }
        let mut composition = Composition::new();
        self.part(1.into(), &mut composition, 0)?;
        while self.accept('*') {
            let coefficient = self.number()?.unwrap_or_else(|| 1.into());
            self.part(coefficient, &mut composition, 0)?;
        }
        let formula_end = self.position;
        let charge = self.charge(formula_end)?;
        let state = self.state()?;
        if composition.contains_key(&Element::SITE) && !matches!(state, Some(State::Mineral(_))) {
            return Err(FormulaError::HomelessSite(self.written.into()));
        }
        if !self.rest().is_empty() {
            return Err(self.unreadable(
                "an element, a charge such as `^2+`, or a state such as `(aq)` could stand here",
            ));
        }
        Ok(self.finish(composition, formula_end, charge, state))
    }

    /// Completes what the notation leaves unsaid: solutes are aqueous, water is liquid.
    fn finish(
        &self,
        composition: Composition,
        formula_end: usize,
        charge: i32,
        state: Option<State>,
    ) -> Species {
        let formula = &self.text[..formula_end];
        let is_water = formula == "H2O" && charge == 0;
        let state = match state {
            None if is_water => State::Liquid,
            None => State::Aqueous,
            Some(State::Aqueous) if is_water => State::Liquid,
            Some(state) => state,
        };
        let charge_text = match charge {
            0 => String::new(),
            1 => "^+".into(),
            -1 => "^-".into(),
            z => format!("^{}{}", z.abs(), if z > 0 { '+' } else { '-' }),
        };
        let state_text = match &state {
            State::Liquid if is_water => String::new(),
            State::Aqueous if charge != 0 => String::new(),
            State::Aqueous => "(aq)".into(),
            _ => self.text[self.text.rfind('(').unwrap_or(self.text.len())..].to_string(),
        };
        let key = format!("{formula}{charge_text}{state_text}");
        Species(Arc::new(Inner { key, composition: composition.into_iter().collect(), charge, state }))
    }

    fn part(&mut self, multiple: Rational, into: &mut Composition, depth: usize) -> Result<(), FormulaError> {
        let start = self.position;
        loop {
            if self.starts_group() {
                if depth > 16 {
                    return Err(self.unreadable("brackets nest no deeper than this"));
                }
                self.position += 1;
                let mut group = Composition::new();
                self.part(1.into(), &mut group, depth + 1)?;
                if !self.accept(')') {
                    return Err(self.unreadable("a closing bracket is missing"));
                }
                let count = self.number()?.unwrap_or_else(|| 1.into());
                for (element, inner) in group {
                    *into.entry(element).or_insert_with(|| 0.into()) += inner * count * multiple;
                }
            } else if self.rest().starts_with(|c: char| c.is_ascii_uppercase()) {
                let element = self.element()?;
                let count = self.number()?.unwrap_or_else(|| 1.into());
                *into.entry(element).or_insert_with(|| 0.into()) += count * multiple;
            } else if self.position == start {
                return Err(self.unreadable("an element symbol such as `Ca` could stand here"));
            } else {
                return Ok(());
            }
        }
    }

    /// A bracket opens a group of elements unless it names a state.
    fn starts_group(&self) -> bool {
        let mut rest = self.rest().chars();
        rest.next() == Some('(') && !rest.next().is_some_and(|c| c.is_ascii_lowercase())
    }

    fn element(&mut self) -> Result<Element, FormulaError> {
        let rest = self.rest();
        let second = rest[1..].starts_with(|c: char| c.is_ascii_lowercase());
        let two = if second { &rest[..2] } else { &rest[..1] };
        if let Some(element) = Element::from_symbol(two) {
            self.position += two.len();
            return Ok(element);
        }
        let symbol = two.to_string();
        let close = nearest(&symbol, Element::symbols().iter().copied()).map(str::to_string);
        Err(FormulaError::UnknownElement { formula: self.written.into(), symbol, nearest: close })
    }

    fn number(&mut self) -> Result<Option<Rational>, FormulaError> {
        let length = self.rest().find(|c: char| !c.is_ascii_digit() && c != '.').unwrap_or(self.rest().len());
        if length == 0 {
            return Ok(None);
        }
        let number = rational::parse(&self.rest()[..length]);
        let number = number.filter(|n| *n > 0.into() && n.ceil() < 1_000_000.into());
        let Some(number) = number else {
            return Err(self.unreadable("a subscript is a number such as 2 or 4.5"));
        };
        self.position += length;
        Ok(Some(number))
    }

    fn charge(&mut self, formula_end: usize) -> Result<i32, FormulaError> {
        let formula = self.text[..formula_end].to_string();
        if !self.accept('^') {
            return match self.rest().chars().next() {
                Some(sign @ ('+' | '-')) => Err(self.charge_error(&meant(&formula, sign, &self.rest()[1..]))),
                _ => Ok(0),
            };
        }
        let digits = leading_digits(self.rest()).to_string();
        self.position += digits.len();
        let sign = match self.rest().chars().next() {
            Some(sign @ ('+' | '-')) => sign,
            _ => return Err(self.unreadable("a charge is written `^2+` or `^-`")),
        };
        self.position += 1;
        let behind = leading_digits(self.rest());
        if !behind.is_empty() {
            return Err(self.charge_error(&format!("{formula}^{behind}{sign}")));
        }
        let size = if digits.is_empty() { Ok(1) } else { digits.parse::<i32>() };
        match size {
            Ok(size @ 1..=99) => Ok(if sign == '+' { size } else { -size }),
            _ => Err(self.unreadable("a charge lies between 1 and 99")),
        }
    }

    fn state(&mut self) -> Result<Option<State>, FormulaError> {
        if !self.rest().starts_with('(') {
            return Ok(None);
        }
        let Some(length) = self.rest().find(')') else {
            return Err(self.unreadable("a closing bracket is missing"));
        };
        let name = self.rest()[1..length].to_string();
        if !name.chars().all(|c| c.is_ascii_alphanumeric() || c == '-' || c == ' ') {
            return Err(self.unreadable("a state or mineral name has letters, digits and hyphens"));
        }
        self.position += length + 1;
        Ok(Some(State::from_name(&name)))
    }

    fn rest(&self) -> &str {
        &self.text[self.position..]
    }

    fn accept(&mut self, wanted: char) -> bool {
        let found = self.rest().starts_with(wanted);
        self.position += if found { wanted.len_utf8() } else { 0 };
        found
    }

    fn charge_error(&self, suggested: &str) -> FormulaError {
        FormulaError::Charge { formula: self.written.into(), suggested: suggested.into() }
    }

    fn unreadable(&self, expected: &'static str) -> FormulaError {
        let rest = if self.rest().is_empty() { "its end" } else { self.rest() };
        FormulaError::Unreadable { formula: self.written.into(), rest: rest.into(), expected }
    }
}

fn leading_digits(text: &str) -> &str {
    &text[..text.find(|c: char| !c.is_ascii_digit()).unwrap_or(text.len())]
}

/// The spelling meant by a charge without its caret: `Ca2+` and `Ca+2` are `Ca^2+`, `HCO3-` is `HCO3^-`.
///
/// Digits before the sign are the charge of a monatomic ion and a subscript of any other.
fn meant(formula: &str, sign: char, behind: &str) -> String {
    let body = formula.trim_end_matches(|c: char| c.is_ascii_digit());
    let (formula, digits) = match leading_digits(behind) {
        "" if Element::from_symbol(body).is_some() => (body, &formula[body.len()..]),
        digits => (formula, digits),
    };
    format!("{formula}^{}{sign}", if digits == "1" { "" } else { digits })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn case(text: &str, key: &str, charge: i32, composition: &str) {
        let species = Species::parse(text).unwrap();
        let counts: Vec<String> =
            species.composition().iter().map(|(e, n)| format!("{e}{}", rational::text(*n))).collect();
        assert_eq!(
            (species.key(), species.charge(), counts.join(" ").as_str()),
            (key, charge, composition),
            "{text}"
        );
    }

    #[test]
    fn formulas_are_read() {
        case("Ca^2+", "Ca^2+", 2, "Ca1");
        case("Ca²⁺", "Ca^2+", 2, "Ca1");
        case("HCO₃⁻", "HCO3^-", -1, "H1 C1 O3");
        case("CO2", "CO2(aq)", 0, "C1 O2");
        case("CO2(g)", "CO2(g)", 0, "C1 O2");
        case("H2O", "H2O", 0, "H2 O1");
        case("H2O(l)", "H2O", 0, "H2 O1");
        case("H2O(g)", "H2O(g)", 0, "H2 O1");
        case("Na^+(aq)", "Na^+", 1, "Na1");
        case("e^-", "e^-", -1, "");
        case("CaCO3(calcite)", "CaCO3(calcite)", 0, "C1 O3 Ca1");
        case("CaSO4·2H2O(gypsum)", "CaSO4*2H2O(gypsum)", 0, "H4 O6 S1 Ca1");
        case("CaMg(CO3)2(dolomite)", "CaMg(CO3)2(dolomite)", 0, "C2 O6 Mg1 Ca1");
        case(
            "Fe8O8(OH)4.5(SO4)1.75(schwertmannite)",
            "Fe8O8(OH)4.5(SO4)1.75(schwertmannite)",
            0,
            "H4.5 O19.5 S1.75 Fe8",
        );
        case("Fe2(OH)2^4+", "Fe2(OH)2^4+", 4, "H2 O2 Fe2");
        case("Mg2Si3O7.5(OH)*3H2O(sepiolite)", "Mg2Si3O7.5(OH)*3H2O(sepiolite)", 0, "H7 O11.5 Mg2 Si3");
        case("Fe(CN)6^3-", "Fe(CN)6^3-", -3, "C6 N6 Fe1");
        case("SiO2(am)", "SiO2(am)", 0, "O2 Si1");
        case("((CH3)3N)2(aq)", "((CH3)3N)2(aq)", 0, "H18 C6 N2");
    }

    #[track_caller]
    fn fault(text: &str, message: &str) {
        assert_eq!(Species::parse(text).unwrap_err().to_string(), message, "{text}");
    }

    #[test]
    fn faults_say_what_would_have_been_right() {
        fault("Ca2+", "`Ca2+`: write the charge as `Ca^2+`");
        fault("Ca+2", "`Ca+2`: write the charge as `Ca^2+`");
        fault("Ca^+2", "`Ca^+2`: write the charge as `Ca^2+`");
        fault("Na+", "`Na+`: write the charge as `Na^+`");
        fault("HCO3-", "`HCO3-`: write the charge as `HCO3^-`");
        fault("SO4-2", "`SO4-2`: write the charge as `SO4^2-`");
        fault("Cq^2+", "`Cq` in `Cq^2+` is no element; did you mean `C`?");
        fault("Ca(OH", "`Ca(OH` cannot be read on from `its end`: a closing bracket is missing");
        fault("", "a formula is missing: write one such as `Ca^2+`, `CO2(g)` or `CaCO3(calcite)`");
        fault("Ca^2", "`Ca^2` cannot be read on from `its end`: a charge is written `^2+` or `^-`");
        assert!(Species::parse(&"(".repeat(5000)).is_err());
        assert!(Species::parse("Ca99999999999999999999").is_err());
        assert!(Species::parse("日本").is_err());
    }

    #[test]
    fn pretty_is_read_back_as_the_same_species() {
        for (key, shown) in [
            ("Ca^2+", "Ca²⁺"),
            ("CaSO4*2H2O(gypsum)", "CaSO₄·2H₂O(gypsum)"),
            ("Fe2(OH)2^4+", "Fe₂(OH)₂⁴⁺"),
            ("CaMg(CO3)2(dolomite)", "CaMg(CO₃)₂(dolomite)"),
        ] {
            let species = Species::parse(key).unwrap();
            assert_eq!(species.pretty(), shown);
            assert_eq!(Species::parse(&species.pretty()).unwrap(), species);
        }
    }

    #[test]
    fn molar_masses_add_up() {
        let mass = Species::parse("CaCO3(calcite)").unwrap().molar_mass().unwrap();
        assert!((mass - 100.086).abs() < 1e-9, "{mass}"); // 40.078 + 12.011 + 3 × 15.999
        assert_eq!(Species::parse("TcO4^-").unwrap().molar_mass(), None);
    }
}
