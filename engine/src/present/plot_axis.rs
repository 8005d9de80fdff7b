//! Axes of plots: how a number becomes a place, and which numbers are written beside it.

/// How numbers are spread along an axis.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Scale {
    /// Equal steps for equal differences.
    #[default]
    Linear,
    /// Equal steps for equal ratios; only for numbers above zero.
    Log,
}

/// One axis: what it measures and from where to where.
#[derive(Debug, Clone, PartialEq)]
pub struct Axis {
    /// Name and unit as typed, `f(CO2(g)) [uatm]`.
    pub label: String,
    /// How numbers are spread.
    pub scale: Scale,
    /// The number at its beginning.
    pub from: f64,
    /// The number at its end, above `from`.
    pub to: f64,
}

/// A number written at an axis.
#[derive(Debug, Clone, PartialEq)]
pub struct Tick {
    /// The number.
    pub value: f64,
    /// As written; empty for a mark between labelled ones.
    pub text: String,
}

/// More decades than this are labelled with gaps.
const MOST_DECADES: i32 = 8;

impl Scale {
    /// The word in scripts.
    #[must_use]
    pub fn parse(word: &str) -> Option<Self> {
        match word {
            "linear" => Some(Self::Linear),
            "log" => Some(Self::Log),
            _ => None,
        }
    }

    /// The scale on which `values` are spread evenly enough to be read: logarithmic for positive numbers that span three
    /// powers of ten, or that grow by one ratio over more than one power of ten.
    #[must_use]
    pub fn fitting(values: &[f64]) -> Self {
        let (lowest, highest) = extremes(values);
        if !(lowest > 0.0 && highest.is_finite()) {
            return Self::Linear;
        }
        let ratio = highest / lowest;
        if ratio >= 1000.0 || (ratio > 10.0 && grows_by_one_ratio(values)) { Self::Log } else { Self::Linear }
    }

    fn position(self, value: f64) -> f64 {
        match self {
            Self::Linear => value,
            Self::Log => value.log10(),
        }
    }

    fn value(self, position: f64) -> f64 {
        match self {
            Self::Linear => position,
            Self::Log => 10f64.powf(position),
        }
    }
}

impl Axis {
    /// An axis that holds all `values` with a little room; numbers that the scale cannot show are passed over.
    #[must_use]
    pub fn holding(label: &str, scale: Scale, values: &[f64], room: f64) -> Self {
        let positions: Vec<f64> =
            values.iter().map(|value| scale.position(*value)).filter(|place| place.is_finite()).collect();
        let (lowest, highest) = extremes(&positions);
        let (lowest, highest) = if positions.is_empty() { (0.0, 1.0) } else { (lowest, highest) };
        // A constant is drawn in the middle of an axis about as long as the number is large.
        let span = highest - lowest;
        let negligible = 1e-9 * highest.abs().max(lowest.abs());
        let room = match span > negligible {
            true => span * room,
            false if scale == Scale::Log => 0.5,
            false => (0.05 * highest.abs()).max(0.5),
        };
        Self {
            label: label.to_owned(),
            scale,
            from: scale.value(lowest - room),
            to: scale.value(highest + room),
        }
    }

    /// Where `value` stands: 0 at the beginning, 1 at the end; not a number where the scale cannot show it.
    #[must_use]
    pub fn place(&self, value: f64) -> f64 {
        let [from, to, at] = [self.from, self.to, value].map(|value| self.scale.position(value));
        (at - from) / (to - from)
    }

    /// The number at a place between 0 and 1.
    #[must_use]
    pub fn at(&self, place: f64) -> f64 {
        let [from, to] = [self.from, self.to].map(|value| self.scale.position(value));
        self.scale.value(from + place * (to - from))
    }

    /// About `n` numbers to write along the axis, in rising order.
    #[must_use]
    pub fn ticks(&self, n: usize) -> Vec<Tick> {
        let [from, to] = [self.from, self.to].map(|value| self.scale.position(value));
        match self.scale {
            Scale::Log if to - from >= 1.0 => decades(from, to),
            _ => steps(self.from, self.to, n),
        }
    }
}

/// Multiples of 1, 2 or 5 times a power of ten.
fn steps(from: f64, to: f64, n: usize) -> Vec<Tick> {
    let rough = (to - from) / n.max(1) as f64;
    if !(rough.is_finite() && rough > 0.0) {
        return Vec::new();
    }
    let power = 10f64.powf(rough.log10().floor());
    let step = [1.0, 2.0, 5.0, 10.0].map(|m| m * power).into_iter().find(|step| *step >= rough * 0.999);
    let step = step.unwrap_or(10.0 * power);
    let first = (from / step - 1e-9).ceil();
    let count = ((to / step + 1e-9).floor() - first).max(-1.0) as usize;
    let decimals = (-step.log10().floor()).max(0.0) as usize;
    (0..=count)
        .map(|i| (first + i as f64) * step)
        .take_while(|value| *value <= to + step * 1e-9)
        .map(|value| {
            let text = match decimals {
                0..=6 if value.abs() < 1e6 => format!("{:.decimals$}", value + 0.0),
                _ => in_powers(value, step),
            };
            Tick { value, text: minus(&text) }
        })
        .collect()
}

/// `2.05e-5`, with as many digits as tell it from its neighbours.
fn in_powers(value: f64, step: f64) -> String {
    let exponent = |number: f64| (number.abs().log10() + 1e-9).floor();
    if value.abs() < step / 2.0 {
        return "0".to_owned();
    }
    let digits = (exponent(value) - exponent(step)).max(0.0) as usize;
    format!("{value:.digits$e}")
}

/// Powers of ten with text, and the numbers between them without.
fn decades(from: f64, to: f64) -> Vec<Tick> {
    let (first, last) = ((from - 1e-9).floor() as i32, (to + 1e-9).floor() as i32);
    let every = (last - first) / MOST_DECADES + 1;
    let between = if last - first <= MOST_DECADES { 9 } else { 1 };
    let mut ticks = Vec::new();
    for exponent in first..=last {
        for digit in 1..=between {
            let value = f64::from(digit) * 10f64.powi(exponent);
            let place = value.log10();
            if place < from - 1e-9 || place > to + 1e-9 {
                continue;
            }
            let named = digit == 1 && exponent % every == 0;
            ticks.push(Tick { value, text: if named { power_of_ten(exponent) } else { String::new() } });
        }
    }
    ticks
}

fn power_of_ten(exponent: i32) -> String {
    const RAISED: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    match exponent {
        0..=4 => 10i64.pow(exponent.unsigned_abs()).to_string(),
        -3..0 => format!("{:.*}", exponent.unsigned_abs() as usize, 10f64.powi(exponent)),
        _ => {
            let digits = exponent.unsigned_abs().to_string();
            let raised: String =
                digits.bytes().map(|digit| RAISED[usize::from(digit.wrapping_sub(b'0'))]).collect();
            format!("10{}{raised}", if exponent < 0 { "⁻" } else { "" })
        }
    }
}

/// A true minus sign: a hyphen is hard to see beside an axis.
fn minus(text: &str) -> String {
    text.replace('-', "−")
}

fn extremes(values: &[f64]) -> (f64, f64) {
    let finite = values.iter().copied().filter(|value| value.is_finite());
    finite.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| (low.min(value), high.max(value)))
}

fn grows_by_one_ratio(values: &[f64]) -> bool {
    let mut sorted: Vec<f64> = values.iter().copied().filter(|value| value.is_finite()).collect();
    sorted.sort_by(f64::total_cmp);
    sorted.dedup();
    let ratios: Vec<f64> = sorted.windows(2).map(|pair| pair[1] / pair[0]).collect();
    ratios.len() >= 3 && ratios.iter().all(|ratio| (ratio / ratios[0] - 1.0).abs() < 1e-6)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn case(from: f64, to: f64, scale: Scale, expected: &[&str]) {
        let axis = Axis { label: "x".into(), scale, from, to };
        let texts: Vec<String> =
            axis.ticks(6).into_iter().map(|tick| tick.text).filter(|text| !text.is_empty()).collect();
        assert_eq!(texts, expected);
    }

    #[test]
    fn ticks_are_round_numbers() {
        case(0.0, 10.0, Scale::Linear, &["0", "2", "4", "6", "8", "10"]);
        case(-0.31, 0.52, Scale::Linear, &["−0.2", "0.0", "0.2", "0.4"]);
        case(7.93, 8.11, Scale::Linear, &["7.95", "8.00", "8.05", "8.10"]);
        case(1e-4, 20.0, Scale::Log, &["10⁻⁴", "0.001", "0.01", "0.1", "1", "10"]);
        case(200.0, 900.0, Scale::Log, &["200", "400", "600", "800"]);
        case(1.99e-5, 2.21e-5, Scale::Linear, &["2.00e−5", "2.05e−5", "2.10e−5", "2.15e−5", "2.20e−5"]);
        case(0.0, 4e-8, Scale::Linear, &["0", "1e−8", "2e−8", "3e−8", "4e−8"]);
        case(1.0, 1.0, Scale::Linear, &[]);
    }

    #[test]
    fn places_run_from_nought_to_one() {
        let axis = Axis::holding("x", Scale::Log, &[1.0, 10.0, 100.0, f64::NAN, -1.0], 0.0);
        assert!((axis.place(10.0) - 0.5).abs() < 1e-12 && (axis.at(0.5) - 10.0).abs() < 1e-9);
        let constant = Axis::holding("x", Scale::Linear, &[7.0, 7.0], 0.05);
        assert!(constant.from < 7.0 && constant.to > 7.0);
        assert!(axis.place(-1.0).is_nan());
    }

    #[test]
    fn a_ratio_makes_a_logarithmic_axis() {
        assert_eq!(Scale::fitting(&[100.0, 200.0, 400.0, 800.0, 1600.0]), Scale::Log);
        assert_eq!(Scale::fitting(&[100.0, 200.0, 300.0]), Scale::Linear);
        assert_eq!(Scale::fitting(&[1e-6, 1e-4, 1.0]), Scale::Log);
        assert_eq!(Scale::fitting(&[-1.0, 1e4]), Scale::Linear);
    }
}
