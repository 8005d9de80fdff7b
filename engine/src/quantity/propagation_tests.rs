//! First-order propagation against two other routes: divided differences and random draws.

use proptest::prelude::*;

use super::{Quantity, QuantityError, correlate};
use crate::units::Unit;

/// A random expression, to be evaluated with quantities and with plain numbers.
#[derive(Clone, Debug)]
enum Expression {
    Input(usize),
    Number(f64),
    Sum(Box<Self>, Box<Self>),
    Difference(Box<Self>, Box<Self>),
    Product(Box<Self>, Box<Self>),
    Ratio(Box<Self>, Box<Self>),
    Power(Box<Self>, i32),
    Sqrt(Box<Self>),
    Exp10(Box<Self>),
    Ln(Box<Self>),
}

impl Expression {
    fn quantity(&self, inputs: &[Quantity]) -> Result<Quantity, QuantityError> {
        match self {
            Self::Input(i) => Ok(inputs[*i].clone()),
            Self::Number(x) => Ok(Quantity::from(*x)),
            Self::Sum(a, b) => a.quantity(inputs)? + b.quantity(inputs)?,
            Self::Difference(a, b) => a.quantity(inputs)? - b.quantity(inputs)?,
            Self::Product(a, b) => a.quantity(inputs)? * b.quantity(inputs)?,
            Self::Ratio(a, b) => a.quantity(inputs)? / b.quantity(inputs)?,
            Self::Power(a, n) => a.quantity(inputs)?.powi(*n),
            Self::Sqrt(a) => a.quantity(inputs)?.sqrt(),
            Self::Exp10(a) => a.quantity(inputs)?.exp10(),
            Self::Ln(a) => a.quantity(inputs)?.ln(),
        }
    }

    fn number(&self, inputs: &[f64]) -> f64 {
        match self {
            Self::Input(i) => inputs[*i],
            Self::Number(x) => *x,
            Self::Sum(a, b) => a.number(inputs) + b.number(inputs),
            Self::Difference(a, b) => a.number(inputs) - b.number(inputs),
            Self::Product(a, b) => a.number(inputs) * b.number(inputs),
            Self::Ratio(a, b) => a.number(inputs) / b.number(inputs),
            Self::Power(a, n) => a.number(inputs).powf(f64::from(*n)),
            Self::Sqrt(a) => a.number(inputs).sqrt(),
            Self::Exp10(a) => 10f64.powf(a.number(inputs)),
            Self::Ln(a) => a.number(inputs).ln(),
        }
    }
}

const N_INPUTS: usize = 4;

fn expressions() -> impl Strategy<Value = Expression> {
    let leaf = prop_oneof![
        3 => (0..N_INPUTS).prop_map(Expression::Input),
        1 => (0.5..2.0).prop_map(Expression::Number),
    ];
    leaf.prop_recursive(4, 24, 2, |inner| {
        let two = || (inner.clone().prop_map(Box::new), inner.clone().prop_map(Box::new));
        let one = || inner.clone().prop_map(Box::new);
        prop_oneof![
            two().prop_map(|(a, b)| Expression::Sum(a, b)),
            two().prop_map(|(a, b)| Expression::Difference(a, b)),
            two().prop_map(|(a, b)| Expression::Product(a, b)),
            two().prop_map(|(a, b)| Expression::Ratio(a, b)),
            (one(), -3..4).prop_map(|(a, n)| Expression::Power(a, n)),
            one().prop_map(Expression::Sqrt),
            one().prop_map(Expression::Exp10),
            one().prop_map(Expression::Ln),
        ]
    })
}

fn inputs(values: &[f64], sigma: f64) -> Vec<Quantity> {
    let input = |(i, value): (usize, &f64)| {
        Quantity::measured(*value, Unit::one(), Some(sigma * (i + 1) as f64), &format!("x{i}")).unwrap()
    };
    values.iter().enumerate().map(input).collect()
}

/// Central difference in one input, with its own error from halving the step; `None` where it has not settled.
fn slope(expression: &Expression, values: &[f64], i: usize) -> Option<f64> {
    let difference = |step: f64| {
        let moved = |step: f64| {
            let mut values = values.to_vec();
            values[i] += step;
            expression.number(&values)
        };
        (moved(step) - moved(-step)) / (2.0 * step)
    };
    let (coarse, fine) = (difference(2e-4), difference(1e-4));
    let settled = (coarse - fine).abs() <= 1e-4 * fine.abs();
    settled.then_some(fine - (coarse - fine) / 3.0)
}

proptest! {
    #[test]
    fn sensitivities_are_slopes(
        expression in expressions(),
        values in prop::array::uniform4(0.5..2.0),
    ) {
        let inputs = inputs(&values, 0.01);
        let Ok(y) = expression.quantity(&inputs) else { return Ok(()) };
        prop_assert_eq!(y.value(), expression.number(&values));
        for (i, input) in inputs.iter().enumerate() {
            let key = &input.parts()[0].input;
            let sensitivity = y.parts().iter().find(|part| part.input == *key).map_or(0.0, |part| part.sensitivity);
            let noise = 1e-10 * (1.0 + y.value().abs());
            if let Some(slope) = slope(&expression, &values, i) {
                prop_assert!((sensitivity - slope).abs() <= 1e-5 * slope.abs() + noise, "{sensitivity} {slope}");
            }
        }
    }

    #[test]
    fn order_of_inputs_leaves_no_trace(
        expression in expressions(),
        values in prop::array::uniform4(0.5..2.0),
    ) {
        let forwards = inputs(&values, 0.01);
        // The same inputs, brought into being last first.
        let mut backwards: Vec<Quantity> = (0..N_INPUTS).rev().map(|i| {
            Quantity::measured(values[i], Unit::one(), forwards[i].sigma(), &format!("x{i}")).unwrap()
        }).collect();
        backwards.reverse();
        if let (Ok(one), Ok(other)) = (expression.quantity(&forwards), expression.quantity(&backwards)) {
            prop_assert_eq!(one.sigma().map(f64::to_bits), other.sigma().map(f64::to_bits));
            // As text, in which every bit shows: a variance beyond 1e308 has no shares, and NaN is not equal to itself.
            prop_assert_eq!(format!("{:?}", one.budget()), format!("{:?}", other.budget()));
        }
    }
}

/// Standard normal draws: splitmix64 (Steele, Lea and Flood 2014) and the transformation of Box and Muller (1958).
struct Normal(u64);

impl Normal {
    fn uniform(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^= z >> 31;
        ((z >> 11) as f64 + 0.5) / (1u64 << 53) as f64
    }

    fn draw(&mut self) -> f64 {
        (-2.0 * self.uniform().ln()).sqrt() * (std::f64::consts::TAU * self.uniform()).cos()
    }
}

/// Draws enough to know a standard deviation to 1/√(2 n) = 0.35 %; 2 % is far outside that.
const N_DRAWS: usize = 40_000;

fn standard_deviation(mut draw: impl FnMut() -> f64) -> f64 {
    let draws: Vec<f64> = (0..N_DRAWS).map(|_| draw()).collect();
    let mean = draws.iter().sum::<f64>() / N_DRAWS as f64;
    (draws.iter().map(|y| (y - mean).powi(2)).sum::<f64>() / (N_DRAWS - 1) as f64).sqrt()
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    #[test]
    fn sigma_is_what_random_draws_give(
        expression in expressions(),
        values in prop::array::uniform4(0.5..2.0),
        r in -0.9..0.9,
        seed in any::<u64>(),
    ) {
        const SIGMA: f64 = 1e-5; // so small that every smooth expression is linear over it
        let mut inputs = inputs(&values, SIGMA);
        let pair = correlate(&inputs[..2], r).unwrap();
        inputs.splice(..2, pair);
        let Ok(y) = expression.quantity(&inputs) else { return Ok(()) };
        let gradient: Vec<Option<f64>> = (0..N_INPUTS).map(|i| slope(&expression, &values, i)).collect();
        prop_assume!(gradient.iter().all(Option::is_some));

        let mut normal = Normal(seed);
        let drawn = standard_deviation(|| {
            let z: [f64; N_INPUTS] = std::array::from_fn(|_| normal.draw());
            let correlated = [z[0], r * z[0] + (1.0 - r * r).sqrt() * z[1], z[2], z[3]];
            let moved: Vec<f64> =
                (0..N_INPUTS).map(|i| values[i] + SIGMA * (i + 1) as f64 * correlated[i]).collect();
            expression.number(&moved) - y.value()
        });
        let sigma = y.sigma().unwrap();
        let noise = 1e-13 * (1.0 + y.value().abs());
        prop_assert!((drawn - sigma).abs() <= 0.02 * sigma + noise, "{drawn} {sigma}");
    }
}
