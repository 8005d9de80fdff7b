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
    case("25 degC +/- 1 %", Kind::Temperature, "25 +/- 3 degC", 25.0, Some(2.9815));
    case("7", Kind::Temperature, "7 degC", 7.0, None);
}
