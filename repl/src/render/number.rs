//! A number with its unit, on a line of its own or within a sentence.

use lysocline_engine::present::{Style, notation, number};

/// `41.20 ± 0.80 mg/L`, `8.153`, `(1.235 ± 0.020)e-5 mol/kg`: a number as it would be typed, rounded to what is known.
pub fn quantity(value: f64, sigma: Option<f64>, unit: Option<&str>, style: Style) -> String {
    let number = sigma.map_or_else(|| number::shown(value), |s| number::shown_with_sigma(value, s, style));
    unit.map_or(number.clone(), |unit| format!("{number} {}", notation::shown_unit(unit, style)))
}

#[cfg(test)]
mod tests {
    use super::{Style, quantity};

    #[test]
    fn quantities() {
        let (shown, plain) = (Style::default(), Style { plain: true, width: None });
        assert_eq!(quantity(41.2, Some(0.8), Some("mg/L"), shown), "41.20 ± 0.80 mg/L");
        assert_eq!(quantity(41.2, Some(0.8), Some("mg/L"), plain), "41.20 +/- 0.80 mg/L");
        assert_eq!(quantity(8.153_42, None, None, shown), "8.153");
        assert_eq!(quantity(420.0, None, Some("uatm"), shown), "420 µatm");
    }
}
