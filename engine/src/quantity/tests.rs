//! Reading, arithmetic, display and budgets of quantities.

use super::*;
use crate::units::Kind;

fn unit(text: &str) -> Unit {
    Unit::parse(text).unwrap()
}

fn amount(text: &str) -> Quantity {
    Quantity::parse(text, Kind::Amount, "Ca").unwrap()
}

#[test]
fn reads() {
    #[track_caller]
    fn case(text: &str, kind: Kind, ascii: &str, value: f64, sigma: Option<f64>) {
        let quantity = Quantity::parse(text, kind, "x").unwrap();
        assert_eq!(quantity.display(Style::Ascii), ascii);
        assert_eq!(quantity.value(), value);
        match (quantity.sigma(), sigma) {
            (Some(sigma), Some(expected)) => assert!((sigma - expected).abs() <= 1e-15 * expected),
            (sigma, expected) => assert_eq!(sigma, expected),
        }
    }
    case("41.2 mg/L", Kind::Amount, "41.2 mg/L", 41.2, None);
    case("41.2 +/- 0.8 mg/L", Kind::Amount, "41.2 +/- 0.8 mg/L", 41.2, Some(0.8));
    case("41.2(8) mg/L", Kind::Amount, "41.2 +/- 0.8 mg/L", 41.2, Some(0.8));
    case("-3.30(12)", Kind::Fraction, "-3.30 +/- 0.12", -3.3, Some(0.12));
    case("41.2±0.8 mg/L", Kind::Amount, "41.2 +/- 0.8 mg/L", 41.2, Some(0.8));
    case("(41.2 +/- 0.8) mg/L", Kind::Amount, "41.2 +/- 0.8 mg/L", 41.2, Some(0.8));
    case("41.2 mg/L +/- 0.8", Kind::Amount, "41.2 +/- 0.8 mg/L", 41.2, Some(0.8));
    case("41.2 mg/L +/- 800 ug/L", Kind::Amount, "41.2 +/- 0.8 mg/L", 41.2, Some(0.8));
    case("41.2 mg/L +/- 2 %", Kind::Amount, "41.20 +/- 0.82 mg/L", 41.2, Some(0.824));
    case("41.2 +/- 0.8 mg/L as NO3^-", Kind::Amount, "41.2 +/- 0.8 mg/L as NO3^-", 41.2, Some(0.8));
    case("-6.352 +/- 0.01", Kind::Fraction, "-6.352 +/- 0.010", -6.352, Some(0.01));
    case("−6.352", Kind::Fraction, "-6.352", -6.352, None);
    case("1e-3 mol/L", Kind::Amount, "0.001 mol/L", 1e-3, None);
    case("2eq/L", Kind::Alkalinity, "2 eq/L", 2.0, None);
    case("2.35", Kind::Alkalinity, "2.35 eq/kg", 2.35, None);
    case("(5 +/- 0.2) %", Kind::Fraction, "5.0 +/- 0.2 %", 5.0, Some(0.2));
    case("8.5 degC +/- 0.1 K", Kind::Temperature, "8.5 +/- 0.1 degC", 8.5, Some(0.1));
    case("2 mg/L as NH4^+-N ± 0.5 mg/L", Kind::Amount, "2.0 +/- 0.5 mg/L as NH4^+-N", 2.0, Some(0.5));
    case("7", Kind::Temperature, "7 degC", 7.0, None);
}

#[test]
fn refuses() {
    #[track_caller]
    fn case(text: &str, kind: Kind, expected: &str) {
        let message = Quantity::parse(text, kind, "x").unwrap_err().to_string();
        assert!(message.contains(expected), "{message}");
    }
    case("41,2 mg/L", Kind::Amount, "write `41.2` with a decimal point");
    case("1,000 mg/L", Kind::Amount, "`1000` for thousands");
    case("41.2 +/- -0.8 mg/L", Kind::Amount, "standard uncertainty of `x` is -0.8");
    case("8.15 +/- 2 %", Kind::Fraction, "the `%` may belong to the value or not");
    case("5 % +/- 2 %", Kind::Fraction, "the `%` may belong to the value or not");
    case(
        "25 degC +/- 1 %",
        Kind::Temperature,
        "a percentage of `degC` is unclear; write, say, `+/- 0.2 degC`",
    );
    case("41.2 mg/L +/- 0.8 degC", Kind::Amount, "cannot be turned into `mg/L`");
    case("(41.2 mg/L +/- 0.8) mg/L", Kind::Amount, "two units");
    case("(41.2 +/- 0.8 mg/L", Kind::Amount, "a `)` is missing");
    case("", Kind::Amount, "a number is missing");
    case("mg/L", Kind::Amount, "a number was expected where `mg/L` stands");
    case("41.2 +/- mg/L", Kind::Amount, "a number was expected where `mg/L` stands");
    case("1e999 mg/L", Kind::Amount, "too large");
    case("1.2 × 10^-3 mol/L", Kind::Amount, "write a power of ten as `1.2e-3`");
    case(
        "8 mg/L",
        Kind::Temperature,
        "`mg/L` is no unit of temperature; units of temperature: degC, K, degF",
    );
    case("8 mg/Lk", Kind::Amount, "unknown unit `Lk` (did you mean `mg/L`?); units of amount: mol/kg, ");
}

#[test]
fn relative_uncertainty_before_the_unit() {
    for text in ["41.2 +/- 2 % mg/L", "(41.2 +/- 2 %) mg/L", "41.2 mg/L ± 2%"] {
        assert_eq!(amount(text).display(Style::Ascii), "41.20 +/- 0.82 mg/L");
    }
}

#[test]
fn converts_value_and_uncertainty() {
    let calcium = amount("41.2 +/- 0.8 mg/L").to(&unit("ug/mL")).unwrap();
    assert_eq!((calcium.value(), calcium.sigma()), (41.2, Some(0.8)));
    let cold = Quantity::parse("8.5 +/- 0.2 degC", Kind::Temperature, "t").unwrap();
    assert_eq!(cold.to(&unit("K")).unwrap().display(Style::Ascii), "281.65 +/- 0.20 K");
    assert_eq!(cold.to(&unit("degF")).unwrap().display(Style::Unicode), "47.30 ± 0.36 °F");
    assert!((cold.relative().unwrap() - 0.2 / 281.65).abs() < 1e-15);
    assert_eq!(
        amount("2 mol/kg").to(&unit("mol/kg(water)")).unwrap_err().to_string(),
        concat!(
            "`mol/kg` cannot be turned into `mol/kg(water)`: water and solution weigh differently; ",
            "say `kg(water)` or `kg(solution)` on both sides"
        )
    );
    assert_eq!(amount("2 mol/kg").per_kg_of(KgOf::Water).unit(), &unit("mol/kg(water)"));
}

#[test]
fn unknown_is_not_zero() {
    let stated = amount("2 +/- 0.1 mmol/L");
    let unstated = amount("3 mmol/L");
    assert_eq!(unstated.sigma(), None);
    assert_eq!((&unstated * 2.0).unwrap().sigma(), None);
    assert_eq!((&unstated - &unstated).unwrap().sigma(), Some(0.0));
    assert_eq!((&unstated * 0.0).unwrap().sigma(), Some(0.0));
    let sum = (&stated + &unstated).unwrap();
    assert_eq!(sum.sigma(), Some(0.1));
    assert_eq!(sum.budget().n_unstated, 1);
    assert_eq!(Quantity::exact(2.0, unit("mmol/L")).sigma(), Some(0.0));
}

#[test]
fn shared_inputs_cancel() -> Result<(), QuantityError> {
    let k = amount("2 +/- 0.1 mmol/L");
    let copy = k.clone();
    assert_eq!((&k - &copy)?.sigma(), Some(0.0));
    assert_eq!((&k / &copy)?.sigma(), Some(0.0));
    assert_eq!((((&k / 3.0)? + (&k * (2.0 / 3.0))?)? - &k)?.sigma(), Some(0.0));
    assert_eq!(correlation(&k, &(-&copy))?, Some(-1.0));
    // Written anew, it is another input.
    let again = amount("2 +/- 0.1 mmol/L");
    assert!(((&k - &again)?.sigma().unwrap() - 0.1 * 2f64.sqrt()).abs() < 1e-15);
    // A published constant is one input however often it is loaded.
    let loaded = || Quantity::of_input(-6.352, Unit::one(), Input::named("K1", "K1", Some(0.01)).unwrap());
    assert_eq!((loaded() - loaded())?.sigma(), Some(0.0));
    Ok(())
}

#[test]
fn units_compose() -> Result<(), QuantityError> {
    let volume = Quantity::exact(250.0, unit("mL"));
    let mass = (amount("41.2 +/- 0.8 mg/L") * &volume)?;
    assert_eq!(mass.to(&unit("mg"))?.display(Style::Ascii), "10.3 +/- 0.2 mg");
    // p V / (R T), with R in any unit and T in degC.
    let gas = Quantity::exact(8.314462618, unit("J/(mol K)"));
    let warm = Quantity::exact(25.0, unit("degC"));
    let n = (Quantity::exact(1.0, unit("atm")) * Quantity::exact(1.0, unit("L")))?;
    let n = (n / (gas * warm)?)?.to(&unit("mmol"))?;
    assert!((n.value() - 101325.0 * 1e-3 / (8.314462618 * 298.15) * 1e3).abs() < 1e-10);
    // mol/L over kg/L is mol/kg, and half of something takes 50 %.
    assert_eq!((amount("2 mol/L") / Quantity::exact(1.0, unit("kg/L")))?.unit(), &unit("mol/kg"));
    assert_eq!((amount("2 mol/L") * Quantity::exact(50.0, unit("%")))?.display(Style::Ascii), "1 mol/L");
    assert_eq!(Quantity::exact(0.25, unit("mol/kg")).sqrt()?.display(Style::Ascii), "0.5 mol^(1/2)/kg^(1/2)");
    Ok(())
}

#[test]
fn temperatures_count_from_their_own_zero() -> Result<(), QuantityError> {
    let degrees = |value| Quantity::exact(value, unit("degC"));
    let shown = |quantity: Quantity| quantity.display(Style::Ascii);
    assert_eq!(shown((degrees(25.0) + Quantity::exact(5.0, unit("K")))?), "30 degC");
    assert_eq!(shown((Quantity::exact(5.0, unit("K")) + degrees(25.0))?), "30 degC");
    assert_eq!(shown((degrees(30.0) - degrees(25.0))?), "5 K");
    assert_eq!(shown((degrees(30.0) - Quantity::exact(5.0, unit("K")))?), "25 degC");
    assert_eq!(shown((degrees(25.0) * 2.0)?), "596.3 K");
    let error = (degrees(25.0) + degrees(5.0)).unwrap_err().to_string();
    assert_eq!(
        error,
        "cannot add `degC` and `degC`: both count from a zero of their own; give the difference in `K`"
    );
    Ok(())
}

#[test]
fn unlike_units_are_named() {
    #[track_caller]
    fn case(outcome: Result<Quantity, QuantityError>, expected: &str) {
        assert_eq!(outcome.unwrap_err().to_string(), expected);
    }
    let calcium = amount("41.2 mg/L");
    case(&calcium + amount("1 mmol/L"), "cannot add `mg/L` and `mmol/L`: the molar mass is needed");
    case(
        &calcium + 1.0,
        "cannot add `mg/L` and `1`: a plain number has no unit; give it one, such as `quantity(2, \"mg/L\")`",
    );
    case(
        amount("2 meq/L") - amount("1 mmol/L"),
        "cannot subtract `mmol/L` from `meq/L`: say that they are the same by converting one, such as `.to(\"mmol/L\")`",
    );
    case(
        amount("2 mg/L as N") + amount("1 mg/L"),
        "cannot add `mg/L as N` and `mg/L`: they are expressed as different substances",
    );
    case(calcium.ln(), "`ln` takes a pure number, not a value in `mg/L`: divide by 1 mg/L first");
    case(&calcium / 0.0, "a division has no finite result, or no finite slope, at 0");
    case(Quantity::from(-1.0).ln(), "ln has no finite result, or no finite slope, at -1");
    case(
        calcium.powf(0.123),
        concat!(
            "`mg/L` to the power 0.123 has no meaning: a unit takes powers that are fractions with a denominator of at ",
            "most 12, up to 99"
        ),
    );
    assert!(calcium.compare(&Quantity::from(8.0)).is_err());
}

#[test]
fn compares_across_units() {
    let smaller = amount("900 ug/L");
    let larger = amount("1 mg/L");
    assert_eq!(smaller.compare(&larger).unwrap(), Ordering::Less);
    assert_eq!(smaller.max(&larger).unwrap().display(Style::Ascii), "1 mg/L");
    assert_eq!(smaller.min(&larger).unwrap().display(Style::Ascii), "900 ug/L");
    assert_eq!(Quantity::from(-2.0).abs().value(), 2.0);
}

#[test]
fn displays() {
    #[track_caller]
    fn case(value: f64, sigma: Option<f64>, expected: &str) {
        let quantity = Quantity::measured(value, Unit::one(), sigma, "x").unwrap();
        assert_eq!(quantity.display(Style::Unicode), expected);
        let reread = Quantity::parse(expected, Kind::Fraction, "x").unwrap();
        assert_eq!(reread.display(Style::Unicode), expected);
    }
    case(41.2, None, "41.2");
    case(0.1 + 0.2, None, "0.3");
    case(1.0 / 3.0, None, "0.333333");
    case(-999999.7, None, "-1000000");
    case(123456.0, None, "123456");
    case(1.5e-9, None, "1.5e-9");
    case(0.0, None, "0");
    case(41.23, Some(0.8), "41.23 ± 0.80");
    case(41.2, Some(0.0996), "41.2 ± 0.1");
    case(-0.001, Some(5.0), "0 ± 5");
    case(0.0, Some(0.012), "0.000 ± 0.012");
    case(52345.0, Some(1234.0), "52300 ± 1200");
    case(1.2345e-7, Some(1.2e-9), "1.234e-7 ± 0.012e-7");
    case(6.02e23, Some(1e20), "6.020e23 ± 0.001e23");
    case(3.0, Some(1e-12), "3 ± 1e-12");
    // below what a double resolves
    let unresolved = Quantity::measured(3.0, Unit::one(), Some(1e-17), "x").unwrap();
    assert_eq!(unresolved.display(Style::Unicode), "3");
}

#[test]
fn published_intervals() {
    let constant = Quantity::uncertain(-8.48, 0.02, Unit::one(), 2.0, "calcite").unwrap();
    assert_eq!(constant.sigma(), Some(0.01));
    assert!(Quantity::uncertain(-8.48, 0.02, Unit::one(), 0.0, "calcite").is_err());
    assert!(Quantity::measured(1.0, Unit::one(), Some(f64::NAN), "x").is_err());
}

#[test]
fn budget_of_independent_inputs() -> Result<(), QuantityError> {
    let input = |label: &str, sigma| Quantity::measured(1.0, Unit::one(), sigma, label).unwrap();
    let mut sum = (input("a", Some(0.3)) + (input("b", Some(0.2)) * 2.0)?)?;
    for (n, label) in ["c", "d", "e", "f", "g", "h"].iter().enumerate() {
        sum = (sum + (input(label, None) * n as f64)?)?;
    }
    let budget = sum.budget();
    let rows: Vec<_> = budget.rows.iter().map(|row| (row.label.as_str(), row.share)).collect();
    assert_eq!(rows.len(), 2);
    assert_eq!((rows[0].0, rows[1].0), ("b", "a"));
    assert!((rows[0].1 - 0.64).abs() < 1e-12 && (rows[1].1 - 0.36).abs() < 1e-12);
    assert!((sum.sigma().unwrap() - 0.5).abs() < 1e-15);
    assert_eq!(budget.n_unstated, 5); // c has the factor 0
    assert_eq!(budget.most_sensitive_unstated[0], UnstatedInput { label: "h".into(), sensitivity: 5.0 });
    Ok(())
}

#[test]
fn declared_correlation() -> Result<(), QuantityError> {
    let input = |label: &str, sigma| Quantity::measured(1.0, Unit::one(), Some(sigma), label).unwrap();
    let (a, b, c) = (input("a", 0.3), input("b", 0.2), input("c", 0.1));
    let pair = correlate(&[a.clone(), -&b], 0.5)?;
    assert_eq!(correlation(&pair[0], &pair[1])?, Some(0.5));
    assert_eq!(correlation(&pair[0], &b)?, Some(-0.5)); // -b was declared to follow a
    // u² = 0.09 + 0.04 - 2 · 0.5 · 0.06 = 0.07 of the difference; the shares are (0.06, 0.01) / 0.07.
    let difference = (&pair[0] - &pair[1])?;
    assert!((difference.sigma().unwrap() - 0.07f64.sqrt()).abs() < 1e-15);
    assert!((difference.budget().rows[0].share - 6.0 / 7.0).abs() < 1e-12);
    // A negative share: b works against a larger a that it follows.
    let strong = correlate(&[a.clone(), b.clone()], 0.9)?;
    let rows = (&strong[0] - &strong[1])?.budget().rows;
    assert!(rows.iter().any(|row| row.share < 0.0));
    assert!((rows.iter().map(|row| row.share).sum::<f64>() - 1.0).abs() < 1e-12);

    assert_eq!(correlate(&[a.clone(), b.clone()], 1.5).unwrap_err(), QuantityError::Coefficient { r: 1.5 });
    assert!(matches!(correlate(&[a.clone(), a.clone()], 0.5), Err(QuantityError::NotOneInput { .. })));
    assert!(matches!(correlate(&[(&a + &b)?, c.clone()], 0.5), Err(QuantityError::NotOneInput { .. })));
    assert_eq!(correlate(&[a.clone(), b.clone(), c.clone()], -0.9).unwrap_err(), QuantityError::Impossible);
    // Declared apart, a and c count as uncorrelated, which is impossible once the three meet.
    let (ab, bc) = (correlate(&[a.clone(), b.clone()], 0.9)?, correlate(&[b, c.clone()], 0.9)?);
    assert_eq!((&ab[0] + &bc[1]).unwrap_err(), QuantityError::Impossible);
    // Said together, they are fine; and saying the same again changes nothing.
    let all = correlate(&[ab[0].clone(), ab[1].clone(), c], 0.9)?;
    assert_eq!(correlation(&all[0], &all[2])?, Some(0.9));
    assert!((&all[2] + &ab[0]).is_ok());
    assert!(matches!(&ab[0] + &pair[0], Err(QuantityError::AlreadyCorrelated { .. })));
    Ok(())
}

#[test]
fn published_values_and_draws() -> Result<(), QuantityError> {
    let read =
        || Quantity::parse("-6.352 +/- 0.01", Kind::Fraction, "line 3")?.published_as("K1, edition 2", "K1");
    let (one, again) = (read()?, read()?);
    assert_eq!((&one - &again)?.sigma(), Some(0.0));
    assert_eq!(one.budget().rows[0].label, "K1");
    let twice = (&one * 2.0)?;
    assert_eq!(twice.value_moved(|_| 1.5), -12.704 + 0.03);
    assert_eq!(amount("3 mmol/L").value_moved(|_| 1.5), 3.0);
    // Of two copies of one input, the one that states its uncertainty counts.
    let silent = Quantity::of_input(-6.352, Unit::one(), Input::named("K1, edition 2", "K1", None)?);
    assert_eq!((&silent + &one)?.sigma(), Some(0.02));
    Ok(())
}

#[test]
fn numbers_get_units() -> Result<(), QuantityError> {
    let ratio = (amount("2.0 +/- 0.1 mg/L") / amount("4 mg/L"))?;
    assert_eq!(
        ratio.given_in(&unit("mol/kg"))?.display(Style::Ascii),
        "0.500 +/- 0.025 mol/kg (1 input without uncertainty)"
    );
    assert_eq!(Quantity::exact(50.0, unit("%")).given_in(&unit("bar"))?.display(Style::Ascii), "0.5 bar");
    assert_eq!(amount("2 mg/L").given_in(&unit("g/L"))?.display(Style::Ascii), "0.002 g/L");
    Ok(())
}

#[test]
fn inputs_may_cross_threads() {
    fn crosses_threads<T: Send + Sync>() {}
    crosses_threads::<Quantity>();
}

#[test]
fn conditions_from_quantities() {
    let sea = Quantity::parse("100 dbar", Kind::Pressure, "p").unwrap();
    assert!((Pressure::try_from(&sea).unwrap().bar() - 11.01325).abs() < 1e-12);
    let impossible = Quantity::parse("-300", Kind::Temperature, "t").unwrap();
    let message = Temperature::try_from(&impossible).unwrap_err().to_string();
    assert!(message.contains("below absolute zero"), "{message}");
}

proptest::proptest! {
    #[test]
    fn no_text_panics(text in "\\PC{0,40}", number in "[-0-9.,e+]{1,8}", tail in "[ a-zA-Z0-9µ°%/()^±+-]{0,20}") {
        for text in [text, format!("{number}{tail}")] {
            let _ = Quantity::parse(&text, Kind::Amount, "x").map(|quantity| quantity.to_string());
            let _ = Quantity::parse_any(&text, &Unit::one(), "x").map(|quantity| (&quantity * &quantity).map(|q| q.to_string()));
        }
    }
}
