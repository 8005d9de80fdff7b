//! Quantities in scripts: values with a unit and a standard uncertainty.

use std::cmp::Ordering;

use rhai::plugin::*;
use rhai::{Array, Dynamic, Engine, FLOAT, INT, Map};

use super::numbers::{DIVIDE, format_number, general, real};
use super::{Fail, Host, ScriptResult, Style, Vocabulary, docs, fail, named};
use crate::present::{Cell, Column, Table, TableError};
use crate::quantity::{self, Budget, Quantity};
use crate::units::{self, Kind, Unit};

/// The type, its operators and its functions.
pub(super) fn register(vocabulary: &mut Vocabulary) {
    vocabulary
        .native::<Quantity>("Quantity", |quantity, style| quantity.display(in_units(style)))
        .module(rhai::exported_module!(quantity_functions))
        .pure(&["uncertain", "quantity", "value", "sigma", "relative", "unit", "to", "budget"])
        .pure(&["correlate", "correlation", "units"]);
    register_arithmetic(vocabulary.engine());
    vocabulary
        .equality::<Quantity>(|a, b| compare(a, b).map(Ordering::is_eq))
        .ordered::<Quantity>(|a, b| compare(a, b).map(Some));
}

/// A script value as a quantity; a plain number is exact and has no unit.
#[must_use]
pub fn of(value: &Dynamic) -> Option<Quantity> {
    match value.read_lock::<Quantity>() {
        Some(quantity) => Some(quantity.clone()),
        None => named::number(value).map(Quantity::from),
    }
}

/// A quantity with an unstated uncertainty is not known to be exact: `()`, not 0.
pub fn or_nothing(value: Option<f64>) -> Dynamic {
    value.map_or(Dynamic::UNIT, Dynamic::from)
}

/// How units are written in this style.
#[must_use]
pub fn in_units(style: &Style) -> units::Style {
    if style.ascii { units::Style::Ascii } else { units::Style::Unicode }
}

/// A budget as a table: `input`, `sensitivity` (unit of the result per unit of the input), `sigma` (unit of the
/// input), `share` (of the variance, 0 to 1). Inputs that do not state their uncertainty come last, under a count.
///
/// # Errors
///
/// None in practice: the titles differ and the columns are of one length.
pub fn budget_table(budget: &Budget) -> Result<Table, TableError> {
    let not_stated = || Cell::missing_because("not stated");
    let mut rows: Vec<[Cell; 4]> = budget
        .rows
        .iter()
        .map(|row| [Cell::text(&row.label), row.sensitivity.into(), row.sigma.into(), row.share.into()])
        .collect();
    if budget.n_unstated > 0 {
        let count = format!("not stated: {}", crate::text::count(budget.n_unstated, "input"));
        rows.push([Cell::text(&count), Cell::missing(), Cell::missing(), Cell::missing()]);
    }
    rows.extend(
        budget
            .most_sensitive_unstated
            .iter()
            .map(|input| [Cell::text(&input.label), input.sensitivity.into(), not_stated(), Cell::missing()]),
    );
    let column = |title: &str, at: usize| Column::new(title, rows.iter().map(|row| row[at].clone()));
    Table::new([column("input", 0), column("sensitivity", 1), column("sigma", 2), column("share", 3)])
}

/// The four operators between quantities, and with whole numbers and decimals on either side.
fn register_arithmetic(engine: &mut Engine) {
    macro_rules! operators {
        ($($name:expr => $operator:tt),*) => {$(
            engine.register_fn($name, |a: Quantity, b: Quantity| raised(&a $operator &b));
            engine.register_fn($name, |a: Quantity, b: FLOAT| raised(&a $operator b));
            engine.register_fn($name, |a: FLOAT, b: Quantity| raised(a $operator &b));
            engine.register_fn($name, |a: Quantity, b: INT| raised(&a $operator b as FLOAT));
            engine.register_fn($name, |a: INT, b: Quantity| raised(a as FLOAT $operator &b));
        )*};
    }
    operators!("+" => +, "-" => -, "*" => *, DIVIDE => /);
    engine.register_fn("-", |quantity: Quantity| -quantity).register_fn("+", |quantity: Quantity| quantity);
}

fn raised(result: Result<Quantity, quantity::QuantityError>) -> ScriptResult<Quantity> {
    Ok(result?)
}

/// Comparison by value. Without these the interpreter would answer `false` to a comparison it does not know.
fn compare(a: &Dynamic, b: &Dynamic) -> ScriptResult<Ordering> {
    let (Some(left), Some(right)) = (of(a), of(b)) else {
        let failure = fail(format!("cannot compare {} with {}", docs::described(a), docs::described(b)));
        let text = [a, b].into_iter().find(|value| value.is_string());
        return failure
            .maybe_help(text.map(|text| format!("for a value in a unit write `quantity(\"{text}\")`")))
            .raise();
    };
    Ok(left.compare(&right)?)
}

/// How an input written as numbers is called in budgets.
fn as_written(value: FLOAT, sigma: FLOAT, unit: &Unit) -> String {
    format!("{} +/- {} {}", general(value, 12), general(sigma, 12), symbol(unit)).trim_end().to_owned()
}

/// The unit as text; nothing for a pure number.
fn symbol(unit: &Unit) -> String {
    if *unit == Unit::one() { String::new() } else { unit.symbol() }
}

fn read_unit(unit: &str, argument: usize) -> Result<Unit, Fail> {
    Unit::parse(unit).map_err(|error| Fail::from(error).argument(argument))
}

fn measured(function: &str, value: &Dynamic, sigma: &Dynamic, unit: Unit) -> ScriptResult<Quantity> {
    let (value, sigma) = (real(function, value)?, real(function, sigma)?);
    let label = as_written(value, sigma, &unit);
    Ok(Quantity::measured(value, unit, Some(sigma), &label)?)
}

fn power(base: &Quantity, exponent: &Quantity) -> ScriptResult<Quantity> {
    if exponent.parts().is_empty() && exponent.unit().is_dimensionless() {
        return Ok(base.powf(exponent.to(&Unit::one())?.value())?);
    }
    if base.parts().is_empty() && base.value() == 10.0 {
        return Ok(exponent.exp10()?);
    }
    Ok((exponent * base.ln()?)?.exp()?)
}

fn all_quantities(items: &[Dynamic]) -> Result<Vec<Quantity>, Fail> {
    let quantity = |item: &Dynamic| {
        let unfit = || {
            fail(format!("`correlate` takes a list of quantities, but found {}", docs::described(item)))
                .argument(0)
        };
        item.read_lock::<Quantity>().map(|quantity| quantity.clone()).ok_or_else(unfit)
    };
    items.iter().map(quantity).collect()
}

/// Rows of a matrix of numbers.
fn matrix(function: &str, rows: &[Dynamic]) -> Result<Vec<Vec<FLOAT>>, Fail> {
    let row = |row: &Dynamic| match row.read_lock::<Array>() {
        Some(items) => items.iter().map(|item| real(function, item)).collect(),
        None => Err(fail(format!(
            "`{function}` takes a number, or a matrix written as a list of lists of numbers"
        ))
        .argument(1)),
    };
    rows.iter().map(row).collect()
}

/// Quantities: making them, their parts, their mathematics.
#[export_module]
mod quantity_functions {
    /// A value with its standard uncertainty (one sigma), as one new measurement, without a unit; the same as
    /// `value ± sigma`.
    ///
    /// ```rhai
    /// uncertain(8.15, 0.02)   // 8.15 ± 0.02
    /// ```
    #[rhai_fn(return_raw)]
    pub fn uncertain(value: Dynamic, sigma: Dynamic) -> ScriptResult<Quantity> {
        measured("uncertain", &value, &sigma, Unit::one())
    }

    /// A value with its standard uncertainty (one sigma), both in `unit`, as one new measurement.
    ///
    /// ```rhai
    /// uncertain(41.2, 0.8, "mg/L")   // 41.2 ± 0.8 mg/L
    /// ```
    #[rhai_fn(name = "uncertain", return_raw)]
    pub fn uncertain_in(value: Dynamic, sigma: Dynamic, unit: &str) -> ScriptResult<Quantity> {
        measured("uncertain", &value, &sigma, read_unit(unit, 2)?)
    }

    /// A value with a published uncertainty. `coverage` says how many sigma that uncertainty is (1 when left out),
    /// `unit` the unit of both (none when left out), `name` what budgets call the value.
    ///
    /// ```rhai
    /// uncertain(41.2, 1.6, #{ coverage: 2, unit: "mg/L", name: "Ca" })   // 41.2 ± 0.8 mg/L
    /// ```
    #[rhai_fn(name = "uncertain", return_raw)]
    pub fn uncertain_published(value: Dynamic, uncertainty: Dynamic, options: Map) -> ScriptResult<Quantity> {
        let (value, uncertainty) = (real("uncertain", &value)?, real("uncertain", &uncertainty)?);
        let mut options = named::named(&options)?;
        let coverage = options.number("coverage")?.unwrap_or(1.0);
        let unit = options.text("unit")?.map_or(Ok(Unit::one()), |unit| {
            Unit::parse(&unit).map_err(|error| Fail::from(error).key("unit"))
        })?;
        let name = options.text("name")?.unwrap_or_else(|| as_written(value, uncertainty / coverage, &unit));
        options.finish()?;
        let made = Quantity::uncertain(value, uncertainty, unit, coverage, &name);
        Ok(made.map_err(|error| match error {
            quantity::QuantityError::Coverage { .. } => Fail::from(error).key("coverage"),
            _ => Fail::from(error).argument(1),
        })?)
    }

    #[rhai_fn(name = "±", return_raw)]
    pub fn plus_minus(value: Dynamic, sigma: Dynamic) -> ScriptResult<Quantity> {
        measured("±", &value, &sigma, Unit::one())
    }

    /// A written value with its unit, and its standard uncertainty (one sigma) where one is stated: one new
    /// measurement. Without one its uncertainty is unknown, not zero.
    ///
    /// ```rhai
    /// quantity("41.2 +/- 0.8 mg/L")   // 41.2 ± 0.8 mg/L
    /// ```
    #[rhai_fn(return_raw)]
    pub fn quantity(text: &str) -> ScriptResult<Quantity> {
        let read = Quantity::parse_any(text, &Unit::one(), text.trim());
        Ok(read.map_err(|error| Fail::from(error).argument(0))?)
    }

    /// A computed number given a unit. A plain number is exact; a quantity without a unit keeps its uncertainty and
    /// its correlations; one with a unit is converted.
    ///
    /// ```rhai
    /// quantity((40 ± 1) / 2, "mg/L")   // 20.0 ± 0.5 mg/L
    /// ```
    #[rhai_fn(name = "quantity", return_raw)]
    pub fn quantity_in(value: Dynamic, unit: &str) -> ScriptResult<Quantity> {
        let unit = read_unit(unit, 1)?;
        match of(&value) {
            Some(quantity) => Ok(quantity.given_in(&unit)?),
            None if value.is_string() => fail("`quantity` takes a number and a unit, or both in one text")
                .help(format!("write `quantity(\"{value} {unit}\")`"))
                .argument(0)
                .raise(),
            None => fail(format!("`quantity` takes a number and a unit, not {}", docs::described(&value)))
                .argument(0)
                .raise(),
        }
    }

    /// The value, a plain number in `.unit`, without its uncertainty.
    ///
    /// ```rhai
    /// quantity("41.2 +/- 0.8 mg/L").value   // 41.2
    /// ```
    #[rhai_fn(name = "value", get = "value", pure)]
    pub fn value(quantity: &mut Quantity) -> FLOAT {
        quantity.value()
    }

    /// The standard uncertainty (one sigma), a plain number in `.unit` (in K for a value in degC); `()` when none was
    /// stated.
    ///
    /// ```rhai
    /// quantity("41.2 +/- 0.8 mg/L").sigma   // 0.8
    /// ```
    #[rhai_fn(name = "sigma", get = "sigma", pure)]
    pub fn sigma(quantity: &mut Quantity) -> Dynamic {
        or_nothing(quantity.sigma())
    }

    /// The standard uncertainty as a fraction of the value; `()` when none was stated or the value is zero.
    ///
    /// ```rhai
    /// quantity("40 +/- 0.8 mg/L").relative   // 0.02
    /// ```
    #[rhai_fn(name = "relative", get = "relative", pure)]
    pub fn relative(quantity: &mut Quantity) -> Dynamic {
        or_nothing(quantity.relative())
    }

    /// The unit, as text; "" for a pure number.
    ///
    /// ```rhai
    /// quantity("41.2 mg/L").unit   // "mg/L"
    /// ```
    #[rhai_fn(name = "unit", get = "unit", pure)]
    pub fn unit(quantity: &mut Quantity) -> String {
        symbol(quantity.unit())
    }

    /// The same quantity in another unit, with the same inputs.
    ///
    /// ```rhai
    /// quantity("2500 +/- 100 umol/L").to("mmol/L")   // 2.5 ± 0.1 mmol/L
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn to(quantity: &mut Quantity, unit: &str) -> ScriptResult<Quantity> {
        Ok(quantity.to(&read_unit(unit, 0)?).map_err(|error| Fail::from(error).argument(0))?)
    }

    /// Where the uncertainty comes from: a table of `input`, `sensitivity` (unit of the result per unit of the
    /// input), `sigma` (unit of the input) and `share` of the variance (the shares sum to 1). Inputs whose
    /// uncertainty was not stated come last.
    ///
    /// ```rhai
    /// let k = uncertain(3, 0.3) * uncertain(2, 0.1);
    /// k.budget().column("share").values   // [0.8, 0.2]
    /// ```
    #[rhai_fn(return_raw, pure)]
    pub fn budget(quantity: &mut Quantity) -> ScriptResult<Table> {
        Ok(budget_table(&quantity.budget())?)
    }

    /// The same quantities with a correlation between them: one coefficient for every pair, or a whole matrix of
    /// them. Each must be one written value. Dimensionless, -1 to 1.
    ///
    /// ```rhai
    /// let pair = correlate([10 ± 1, 20 ± 1], 0.5);
    /// (pair[1] - pair[0]).sigma   // 1
    /// ```
    #[rhai_fn(return_raw)]
    pub fn correlate(quantities: Array, coefficient: Dynamic) -> ScriptResult<Array> {
        let quantities = all_quantities(&quantities)?;
        let correlated = match coefficient.read_lock::<Array>() {
            Some(rows) => quantity::correlate_all(&quantities, &matrix("correlate", &rows)?)?,
            None => quantity::correlate(&quantities, real("correlate", &coefficient)?)?,
        };
        Ok(correlated.into_iter().map(Dynamic::from).collect())
    }

    /// The correlation coefficient of two quantities, from the inputs they share and from declared correlation;
    /// dimensionless, -1 to 1; `()` when either has no uncertainty.
    ///
    /// ```rhai
    /// let k = 3 ± 0.1;
    /// correlation(k, 2 * k)   // 1
    /// ```
    #[rhai_fn(return_raw)]
    pub fn correlation(a: Quantity, b: Quantity) -> ScriptResult<Dynamic> {
        Ok(or_nothing(quantity::correlation(&a, &b)?))
    }

    /// The units a value of this kind can be given in, the default first.
    ///
    /// ```rhai
    /// units("temperature")   // ["degC", "K", "degF"]
    /// ```
    #[rhai_fn(return_raw)]
    pub fn units(kind: &str) -> ScriptResult<Array> {
        let units = units::units_of(kind).map_err(|error| Fail::from(error).argument(0))?;
        Ok(units.iter().map(|&unit| unit.into()).collect())
    }

    /// The kinds of value that have units, as `units(kind)` takes them.
    ///
    /// ```rhai
    /// units().contains("amount")   // true
    /// ```
    #[rhai_fn(name = "units")]
    pub fn kinds() -> Array {
        Kind::ALL.iter().map(|kind| kind.name().into()).collect()
    }

    /// The quantity as text, its value and its standard uncertainty in this format.
    ///
    /// ```rhai
    /// fmt(quantity("41.2 +/- 0.8 mg/L"), ".2f")   // "41.20 ± 0.80 mg/L"
    /// ```
    #[rhai_fn(name = "fmt", return_raw)]
    pub fn fmt_quantity(
        context: NativeCallContext,
        quantity: Quantity,
        format: &str,
    ) -> ScriptResult<String> {
        let style = in_units(Host::of(&context).style());
        let mut text = format_number(quantity.value(), format)?;
        if let Some(sigma) = quantity.sigma().filter(|sigma| *sigma > 0.0) {
            let sign = if style == units::Style::Ascii { "+/-" } else { "±" };
            text = format!("{text} {sign} {}", format_number(sigma, format)?);
        }
        if *quantity.unit() != Unit::one() {
            text = format!("{text} {}", quantity.unit().display(style));
        }
        Ok(text)
    }

    #[rhai_fn(name = "pow", return_raw)]
    pub fn pow_quantity(base: Quantity, exponent: Quantity) -> ScriptResult<Quantity> {
        power(&base, &exponent)
    }
    #[rhai_fn(name = "pow", return_raw)]
    pub fn pow_quantity_real(base: Quantity, exponent: FLOAT) -> ScriptResult<Quantity> {
        power(&base, &exponent.into())
    }
    #[rhai_fn(name = "pow", return_raw)]
    pub fn pow_quantity_int(base: Quantity, exponent: INT) -> ScriptResult<Quantity> {
        power(&base, &(exponent as FLOAT).into())
    }
    #[rhai_fn(name = "pow", return_raw)]
    pub fn pow_real_quantity(base: FLOAT, exponent: Quantity) -> ScriptResult<Quantity> {
        power(&base.into(), &exponent)
    }
    #[rhai_fn(name = "pow", return_raw)]
    pub fn pow_int_quantity(base: INT, exponent: Quantity) -> ScriptResult<Quantity> {
        power(&(base as FLOAT).into(), &exponent)
    }
    #[rhai_fn(name = "exp10", return_raw)]
    pub fn exp10_quantity(x: Quantity) -> ScriptResult<Quantity> {
        Ok(x.exp10()?)
    }
    #[rhai_fn(name = "exp", return_raw)]
    pub fn exp_quantity(x: Quantity) -> ScriptResult<Quantity> {
        Ok(x.exp()?)
    }
    #[rhai_fn(name = "ln", return_raw)]
    pub fn ln_quantity(x: Quantity) -> ScriptResult<Quantity> {
        Ok(x.ln()?)
    }
    #[rhai_fn(name = "log10", return_raw)]
    pub fn log10_quantity(x: Quantity) -> ScriptResult<Quantity> {
        Ok(x.log10()?)
    }
    #[rhai_fn(name = "sqrt", return_raw)]
    pub fn sqrt_quantity(x: Quantity) -> ScriptResult<Quantity> {
        Ok(x.sqrt()?)
    }
    #[rhai_fn(name = "abs")]
    pub fn abs_quantity(x: Quantity) -> Quantity {
        x.abs()
    }
    #[rhai_fn(name = "min", return_raw)]
    pub fn min_left(a: Quantity, b: Dynamic) -> ScriptResult<Quantity> {
        smaller(&Dynamic::from(a), &b)
    }
    #[rhai_fn(name = "min", return_raw)]
    pub fn min_right(a: Dynamic, b: Quantity) -> ScriptResult<Quantity> {
        smaller(&a, &Dynamic::from(b))
    }
    #[rhai_fn(name = "max", return_raw)]
    pub fn max_left(a: Quantity, b: Dynamic) -> ScriptResult<Quantity> {
        larger(&Dynamic::from(a), &b)
    }
    #[rhai_fn(name = "max", return_raw)]
    pub fn max_right(a: Dynamic, b: Quantity) -> ScriptResult<Quantity> {
        larger(&a, &Dynamic::from(b))
    }
}

fn smaller(a: &Dynamic, b: &Dynamic) -> ScriptResult<Quantity> {
    let (a, b) = both("min", a, b)?;
    Ok(a.min(&b)?)
}

fn larger(a: &Dynamic, b: &Dynamic) -> ScriptResult<Quantity> {
    let (a, b) = both("max", a, b)?;
    Ok(a.max(&b)?)
}

fn both(function: &str, a: &Dynamic, b: &Dynamic) -> Result<(Quantity, Quantity), Fail> {
    let one = |value: &Dynamic| {
        of(value).ok_or_else(|| fail(format!("`{function}` takes numbers, not {}", docs::described(value))))
    };
    Ok((one(a)?, one(b)?))
}
