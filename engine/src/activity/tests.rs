//! What holds for every model: the limiting law, derivatives, Gibbs-Duhem.

use super::*;
use crate::physics::constants::LN_10;

const A: f64 = 0.509;
const CHARGES: [f64; 5] = [2.0, 1.0, -1.0, -2.0, 0.0];

/// The models over the same five solutes.
fn models() -> Vec<Model> {
    let ion = |size: f64, b: f64| IonCoefficients { size, linear: b * LN_10 };
    let pair = |i, k, epsilon: f64| Pair { solutes: (i, k), epsilon: epsilon * LN_10 };
    let sizes = [ion(6.0, 0.0), ion(4.0, 0.0), ion(3.0, 0.0), ion(4.0, 0.0), ion(0.0, 0.0)];
    let fitted = [ion(5.0, 0.165), ion(4.0, 0.075), ion(3.5, 0.015), ion(5.0, -0.04), ion(0.0, 0.1)];
    let pairs = vec![pair(0, 2, 0.14), pair(1, 2, 0.03), pair(1, 3, -0.12), pair(4, 1, 0.07)];
    let sized = |solutes: [IonCoefficients; 5], valid_to| DebyeHuckel {
        a_ln: A * LN_10,
        b: 0.3284,
        solutes: solutes.to_vec(),
        valid_to,
    };
    vec![
        Model::davies(Davies::new(A)),
        Model::consistent(Solutes::DebyeHuckel(sized(sizes, 0.1))),
        Model::consistent(Solutes::DebyeHuckel(sized(fitted, 3.0))),
        Model::consistent(Solutes::Sit(Sit { a_ln: A * LN_10, pairs })),
    ]
}

/// An electroneutral mixture, every molality times `factor`.
fn molalities(factor: f64) -> [f64; 5] {
    [0.1, 0.3, 0.2, 0.15, 0.05].map(|m| m * factor)
}

fn at<'a>(molalities: &'a [f64]) -> Composition<'a> {
    let ionic_strength = CHARGES.iter().zip(molalities).map(|(z, m)| z * z * m).sum::<f64>() / 2.0;
    Composition { charges: &CHARGES, molalities, ionic_strength }
}

#[test]
fn dilute_solutions_are_ideal_and_then_follow_the_limiting_law() {
    for model in models() {
        assert!(model.ln_gammas(at(&[0.0; 5])).iter().all(|ln_gamma| *ln_gamma == 0.0), "{}", model.name());
        let m = molalities(1e-10);
        let at = at(&m);
        for (ln_gamma, z) in model.ln_gammas(at).iter().zip(CHARGES) {
            let limit = -A * LN_10 * z * z * at.ionic_strength.sqrt();
            assert!(
                (ln_gamma - limit).abs() <= 2e-5 * limit.abs() + 1e-10,
                "{}: {ln_gamma} {limit}",
                model.name()
            );
        }
    }
}

#[test]
fn derivatives_are_difference_quotients() {
    let m = molalities(1.0);
    for model in models() {
        for k in 0..5 {
            let h = 1e-5;
            let moved = |step: f64| {
                let mut moved = m;
                moved[k] += step;
                let ionic_strength = at(&m).ionic_strength + 0.5 * CHARGES[k].powi(2) * step;
                let moved = Composition { charges: &CHARGES, molalities: &moved, ionic_strength };
                (model.ln_gammas(moved), model.ln_water_activity(moved))
            };
            let ((above, water_above), (below, water_below)) = (moved(h), moved(-h));
            let mut slopes = [0.0; 5];
            for (i, slope) in slopes.iter_mut().enumerate() {
                *slope = model.d_ln_gamma(i, CHARGES[i], at(&m).ionic_strength) * 0.5 * CHARGES[k].powi(2);
            }
            model.for_each_specific_slope(|i, by, slope| slopes[i] += if by == k { slope } else { 0.0 });
            for i in 0..5 {
                let quotient = (above[i] - below[i]) / (2.0 * h);
                assert!(
                    (quotient - slopes[i]).abs() < 1e-8,
                    "{} {i} by {k}: {quotient} {}",
                    model.name(),
                    slopes[i]
                );
            }
            let water = model.d_ln_water_activity(at(&m));
            let slope = water.by_molality[k] + 0.5 * CHARGES[k].powi(2) * water.by_ionic_strength;
            let quotient = (water_above - water_below) / (2.0 * h);
            assert!((quotient - slope).abs() < 1e-9, "{}: {quotient} {slope}", model.name());
        }
    }
}

/// `d ln a_w = -M_w Σ m d ln(m γ)` along a path of constant proportions, by Simpson's rule over the root of the factor.
#[test]
fn the_activity_of_water_satisfies_gibbs_duhem() {
    for model in models() {
        let (panels, end) = (4000, 1.3);
        let h = end / f64::from(panels);
        // Σ m d ln γ / d factor, times d factor / d root
        let integrand = |root: f64| {
            if root == 0.0 {
                return 0.0;
            }
            let m = molalities(root * root);
            let own = at(&m);
            let mut slope = 0.0;
            for i in 0..5 {
                slope += m[i] * model.d_ln_gamma(i, CHARGES[i], own.ionic_strength) * own.ionic_strength;
            }
            model.for_each_specific_slope(|i, k, by| slope += m[i] * by * m[k]);
            2.0 * slope / root
        };
        let interior: f64 =
            (1..panels).map(|k| integrand(f64::from(k) * h) * if k % 2 == 1 { 4.0 } else { 2.0 }).sum();
        let integral = (integrand(0.0) + interior + integrand(end)) * h / 3.0;
        let m = molalities(end * end);
        let expected = -WATER_MOLAR_MASS * (m.iter().sum::<f64>() + integral);
        let found = model.ln_water_activity(at(&m));
        assert!((found / expected - 1.0).abs() < 1e-9, "{}: {found} {expected}", model.name());
    }
}

/// Kielland (1937) as reprinted in Freeze & Cherry (1979), appendix IV: |z|, å, then γ at the ionic strengths. His A and B
/// were those of an older permittivity; the differences reach 0.006.
#[test]
fn the_extended_equation_reproduces_kielland() {
    let strengths = [0.0005, 0.001, 0.0025, 0.005, 0.01, 0.025, 0.05, 0.1];
    let table = [
        (1.0, 2.5, [0.975, 0.964, 0.945, 0.924, 0.898, 0.85, 0.8, 0.75]),
        (1.0, 3.0, [0.975, 0.964, 0.945, 0.925, 0.899, 0.85, 0.805, 0.755]),
        (1.0, 4.0, [0.975, 0.964, 0.947, 0.928, 0.902, 0.86, 0.82, 0.775]),
        (1.0, 9.0, [0.975, 0.967, 0.95, 0.933, 0.914, 0.88, 0.86, 0.83]),
        (2.0, 4.5, [0.903, 0.867, 0.805, 0.742, 0.665, 0.55, 0.455, 0.37]),
        (2.0, 6.0, [0.905, 0.87, 0.809, 0.749, 0.675, 0.57, 0.485, 0.405]),
        (3.0, 9.0, [0.802, 0.738, 0.632, 0.54, 0.445, 0.325, 0.245, 0.18]),
    ];
    for (charge, size, gammas) in table {
        let ion = IonCoefficients { size, linear: 0.0 };
        let equation = DebyeHuckel { a_ln: 0.5085 * LN_10, b: 0.3281, solutes: vec![ion], valid_to: 0.1 };
        for (i, gamma) in strengths.iter().zip(gammas) {
            let found = equation.ln_gamma(0, charge, *i).exp();
            assert!((found - gamma).abs() <= 0.006, "z {charge}, size {size}, I {i}: {found} {gamma}");
        }
    }
}
