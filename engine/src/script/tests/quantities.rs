//! Quantities as scripts use them.

use super::*;

#[test]
fn ways_to_write_one() {
    shows("uncertain(41.2, 0.8)", "41.2 ± 0.8");
    shows("8.15 ± 0.02", "8.15 ± 0.02");
    shows("10 ± 2", "10 ± 2");
    shows("-8.48 ± 0.02", "-8.48 ± 0.02");
    shows("quantity(41.2 ± 0.8, \"mg/L\")", "41.2 ± 0.8 mg/L");
    shows("uncertain(41.2, 1.6, #{ coverage: 2 })", "41.2 ± 0.8");
    shows("quantity(\"41.2 mg/L ± 2 %\").sigma", "0.824");
    shows("quantity(5, \"mg/L\").sigma", "0");
    shows("[quantity(\"5 mg/L\").sigma]", "[()]");
}

#[test]
fn ascii_where_the_terminal_wants_it() {
    let options = Options { style: Style { ascii: true, ..Style::default() }, ..Options::default() };
    let engine = ScriptEngine::new(options);
    assert_eq!(echo(&engine, "quantity(\"25 ± 0.1 degC\")"), "25.0 +/- 0.1 degC");
    assert_eq!(echo(&engine, "fmt(2.5 ± 0.1, \".2f\")"), "\"2.50 +/- 0.10\"");
    assert_eq!(echo(&engine, "`${quantity(\"2 +/- 0.1 umol/L\")}`"), "\"2.0 +/- 0.1 umol/L\"");
}

#[test]
fn plain_numbers_join_on_either_side() {
    shows("2 * (3 ± 0.1) + 1.5", "7.5 ± 0.2");
    shows("1 - (3 ± 0.1)", "-2.0 ± 0.1");
    shows("(3 ± 0.1) / 2", "1.50 ± 0.05");
    shows("1.0 / (2 ± 0.1)", "0.500 ± 0.025");
    shows("-(3 ± 0.1)", "-3.0 ± 0.1");
    shows("let q = 3 ± 0.1; q += 1; q *= 2; q", "8.0 ± 0.2");
    shows("\"Ca: \" + quantity(\"41.2 mg/L\")", "\"Ca: 41.2 mg/L\"");
}

#[test]
fn copies_are_correlated() {
    shows("let k = 3 ± 0.1; (k - k).sigma", "0");
    shows("let k = 3 ± 0.1; (k / k).sigma", "0");
    // Independent: sqrt(3² + 4²) = 5.
    shows("((10 ± 3) + (20 ± 4)).sigma", "5");
    // Fully correlated uncertainties add, opposed ones subtract (JCGM 100:2008, 5.2.2, note 1).
    shows("let p = correlate([10 ± 3, 20 ± 4], 1); (p[0] + p[1]).sigma", "7");
    shows("let p = correlate([10 ± 3, 20 ± 4], [[1, -1], [-1, 1]]); (p[0] + p[1]).sigma", "1");
    shows("let p = correlate([10 ± 3, 20 ± 4], 0.25); correlation(p[0], p[1])", "0.25");
    shows("let x = 4 ± 1; quantity(x / 2, \"mg/L\") - quantity(x / 2, \"mg/L\")", "0 mg/L");
}

#[test]
fn functions_carry_the_uncertainty() {
    // d(10^x)/dx = ln(10) 10^x, and ln 10 = 2.302585...
    shows("fmt(pow(10, -2 ± 0.1).sigma, \".6f\")", "\"0.002303\"");
    shows("exp10(2 ± 0.0).value", "100");
    shows("pow(3 ± 0.1, 2)", "9.0 ± 0.6");
    shows("pow(2, 3 ± 0.0).value", "8");
    shows("sqrt(quantity(\"4 +/- 0.4 mol/L\")).sigma", "0.1");
    shows("ln(2 ± 0.1).sigma", "0.05");
    shows("fmt(log10(exp10(1.5 ± 0.25)), \".2f\")", "\"1.50 ± 0.25\"");
    shows("exp(0 ± 0.1)", "1.0 ± 0.1");
    shows("abs(-2 ± 0.1)", "2.0 ± 0.1");
    shows("min(2 ± 0.1, 3)", "2.0 ± 0.1");
    shows("max(3, 2 ± 0.1)", "3");
}

#[test]
fn comparison_is_by_value_and_never_silent() {
    shows("(2 ± 0.1) > 1", "true");
    shows("1.5 >= (2 ± 0.1)", "false");
    shows("(2 ± 0.1) == 2", "true");
    shows("2.0 != (2 ± 0.1)", "false");
    shows("quantity(\"1 mmol/L\") < quantity(\"2000 umol/L\")", "true");
    shows("(2 ± 0.1) in [1, 2, 3]", "true");
    fails("(2 ± 0.1) > ()", "cannot compare a Quantity with nothing `()`", &[], ">");
    fails("true == (2 ± 0.1)", "cannot compare a truth value with a Quantity", &[], "==");
    fails(
        "quantity(\"41 mg/L\") < \"50 mg/L\"",
        "cannot compare a Quantity with text",
        &["for a value in a unit write `quantity(\"50 mg/L\")`"],
        "<",
    );
    fails(
        "quantity(\"41 mg/L\") < 50",
        "cannot compare `mg/L` with `1`: a plain number has no unit",
        &["give it one, such as `quantity(2, \"mg/L\")`"],
        "<",
    );
}

#[test]
fn the_budget_ends_with_what_was_not_stated() {
    let script =
        "let k = uncertain(2, 0.1, #{ name: \"k\" }); let m = quantity(\"3 mmol/L\"); (k * m).budget()";
    shows(&format!("{script}.column(\"input\").values"), "[\"k\", \"not stated: 1 input\", \"3 mmol/L\"]");
    shows(&format!("{script}.column(\"sensitivity\").values"), "[3, (), 2]");
    shows(&format!("{script}.column(\"sigma\").values"), "[0.1, (), ()]");
    shows(&format!("{script}.column(\"share\").values"), "[1, (), ()]");
}

#[test]
fn messages() {
    let unit = "unknown unit `kq` (did you mean `mmol/kg`?)";
    fails("quantity(\"1.5 mmol/kq\")", unit, &[], "\"1.5 mmol/kq\"");
    fails("quantity(1.5, \"mmol/kq\")", unit, &[], "\"mmol/kq\"");
    fails("quantity(\"1 mg/L\").to(\"mmol/kq\")", unit, &[], "\"mmol/kq\"");
    fails(
        "quantity(\"3\", \"mg/L\")",
        "`quantity` takes a number and a unit, or both in one text",
        &["write `quantity(\"3 mg/L\")`"],
        "\"3\"",
    );
    fails("\"3\" ± 0.1", "`±` takes numbers, not text", &[], "±");
    fails(
        "uncertain(3, -0.1)",
        "the standard uncertainty of `3 +/- -0.1` is -0.1: it must be a number, 0 or more",
        &["leave it out when it is not known"],
        "uncertain",
    );
    fails(
        "uncertain(3, 0.1, #{ covrage: 2 })",
        "unknown key `covrage`",
        &["did you mean `coverage`?"],
        "covrage",
    );
    fails(
        "uncertain(3, 0.1, #{ coverage: 0 })",
        "the coverage factor is 0: it must be above 0, such as 2 for a 2-sigma interval",
        &[],
        "coverage",
    );
    fails(
        "quantity(\"1 mg/L\") + quantity(\"1 mmol/L\")",
        "cannot add `mg/L` and `mmol/L`: the molar mass is needed",
        &[],
        "+",
    );
    let spelling = "a map gives `()` for a key it does not have: check the spelling";
    fails("(3 ± 0.1) + ()", "cannot add a Quantity and nothing `()`", &[spelling], "+");
    fails(
        "correlate([3 ± 0.1, 2], 0.5)",
        "`correlate` takes a list of quantities, but found a whole number",
        &[],
        "[",
    );
    fails(
        "correlate([3 ± 0.1, 2 ± 0.1], 2)",
        "a correlation coefficient is 2: it must lie between -1 and 1",
        &[],
        "correlate",
    );
    fails("(3 ± 0.1).valeu", "a Quantity has no `.valeu`", &["did you mean `value`?"], "valeu");
    fails(
        "let q = 3 ± 0.1;\nq.to(\"mg/L\");\n1",
        "the result of `to` is not used",
        &["write `let name = …` to keep it"],
        "to",
    );
    fails(
        "ln(quantity(\"2 mg/L\"))",
        "`ln` takes a pure number, not a value in `mg/L`: divide by 1 mg/L first",
        &[],
        "ln",
    );
}
