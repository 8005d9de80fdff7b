//! Random equilibrium problems, reproducible from a seed.

use lysocline_engine::activity::{DebyeHuckel, IonCoefficients, Model, Pair, Sit, Solutes};
use lysocline_engine::solve::{Mineral, Mixture, Problem, Reservoir, Row, Total};

/// log10 to natural logarithm.
pub const LN_10: f64 = std::f64::consts::LN_10;

/// SplitMix64 (Steele, Lea & Flood 2014).
pub struct Random(pub u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    /// Uniform between two numbers.
    pub fn uniform(&mut self, from: f64, to: f64) -> f64 {
        from + (self.next() >> 11) as f64 / (1_u64 << 53) as f64 * (to - from)
    }

    /// Uniform integer between two integers, both included.
    pub fn integer(&mut self, from: i64, to: i64) -> i64 {
        from + (self.next() % (to - from + 1) as u64) as i64
    }

    /// True with the given probability.
    pub fn chance(&mut self, probability: f64) -> bool {
        self.uniform(0.0, 1.0) < probability
    }
}

/// Sizes and spread of a family of random problems.
#[derive(Clone, Copy)]
pub struct Family {
    /// Components, from and to.
    pub components: (i64, i64),
    /// Most species.
    pub species: i64,
    /// log10 K of complexes lies within plus or minus this.
    pub log_k: f64,
}

/// Small systems with moderate constants, for methods that are not made for more.
pub const SMALL: Family = Family { components: (1, 3), species: 10, log_k: 15.0 };

/// Components 2 to 10, species to 60, log10 K within ±60.
pub const HARD: Family = Family { components: (2, 10), species: 60, log_k: 60.0 };

/// A mineral-free problem: component 0 is the proton, component 1 in half of the larger ones the electron. Complexes
/// have one to three components with coefficients 1 to 4 (proton -4 to 4, electron -8 to 8), totals run from 1e-14 to 1,
/// and every fifth proton and every third electron total is exactly zero. Water and its two redox couples make every
/// total of proton and electron attainable, so each problem has an interior solution.
pub fn tableau(random: &mut Random, family: Family) -> Problem {
    let m = random.integer(family.components.0, family.components.1) as usize;
    let electron = m >= 3 && random.chance(0.5);
    let first_other = 1 + usize::from(electron);
    let mut species = vec![Row::new(&[(0, 1)], 0.0), Row::new(&[(0, -1)], -14.0 * LN_10)];
    if electron {
        species.push(Row::new(&[(0, 2), (1, 2)], -3.1 * LN_10));
        species.push(Row::new(&[(0, -4), (1, -4)], -86.0 * LN_10));
    }
    species.extend((first_other..m).map(|j| Row::new(&[(j, 1)], 0.0)));
    let least = species.len() as i64;
    for _ in least..random.integer(least + 1, family.species.max(least + 1)) {
        let row = complex(random, m, electron);
        species.push(Row { ln_k: random.uniform(-family.log_k, family.log_k) * LN_10, ..row });
    }
    let totals = (0..m).map(|j| random_total(random, j, first_other)).collect();
    Problem { n_components: m, species, totals, ..Problem::default() }
}

fn random_total(random: &mut Random, component: usize, first_other: usize) -> Total {
    let size = 10_f64.powf(random.uniform(-14.0, 0.0));
    let zero_share = [0.2, 0.3][component.min(1)];
    match component {
        j if j >= first_other => Total::from(size),
        _ if random.chance(zero_share) => Total::from(0.0),
        _ => Total::from(if random.chance(0.5) { size } else { -size }),
    }
}

/// A complex of one to three components, at least one of them neither proton nor electron if there is any.
fn complex(random: &mut Random, m: usize, electron: bool) -> Row {
    let first_other = 1 + usize::from(electron);
    let mut stoichiometry: Vec<(usize, i64)> = Vec::new();
    if first_other < m {
        stoichiometry.push((random.integer(first_other as i64, m as i64 - 1) as usize, random.integer(1, 4)));
    }
    for _ in 0..random.integer(0, 2) {
        let j = random.integer(0, m as i64 - 1) as usize;
        let nu = match j {
            0 => random.integer(-4, 4),
            1 if electron => random.integer(-8, 8),
            _ => random.integer(1, 4),
        };
        if nu != 0 && stoichiometry.iter().all(|(k, _)| *k != j) {
            stoichiometry.push((j, nu));
        }
    }
    if stoichiometry.is_empty() {
        stoichiometry.push((0, random.integer(1, 4)));
    }
    Row::new(&stoichiometry, 0.0)
}

/// Adds minerals whose ln saturation at `ln_a` lies between -10 and 25 log10 units; 30 % repeat the stoichiometry of an
/// earlier one.
pub fn add_minerals(random: &mut Random, problem: &mut Problem, ln_a: &[f64], count: usize) {
    for _ in 0..count {
        let row = match problem.minerals.len() {
            0 => complex(random, problem.n_components, false),
            n if random.chance(0.3) => problem.minerals[random.integer(0, n as i64 - 1) as usize].row.clone(),
            _ => complex(random, problem.n_components, false),
        };
        let saturation = random.uniform(-10.0, 25.0) * LN_10;
        let ln_iap: f64 = row.stoichiometry.iter().map(|(j, nu)| *nu.numer() as f64 * ln_a[*j]).sum();
        problem.minerals.push(Mineral { row: Row { ln_k: saturation - ln_iap, ..row }, ln_target: 0.0 });
    }
}

/// Adds ideal mixtures of two to four members whose ln saturation at `ln_a` lies between -10 and 25 log10 units, and those
/// of the single members up to 8 below it.
pub fn add_mixtures(random: &mut Random, problem: &mut Problem, ln_a: &[f64], count: usize) {
    for _ in 0..count {
        let saturation = random.uniform(-10.0, 25.0) * LN_10;
        let members = (0..random.integer(2, 4)).map(|_| {
            let row = complex(random, problem.n_components, false);
            let ln_iap: f64 = row.stoichiometry.iter().map(|(j, nu)| *nu.numer() as f64 * ln_a[*j]).sum();
            Row { ln_k: saturation - random.uniform(0.0, 8.0) * LN_10 - ln_iap, ..row }
        });
        let members = members.collect();
        problem.mixtures.push(Mixture { members, ln_target: 0.0 });
    }
}

/// Holds the activity of one component.
pub fn hold_component(problem: &mut Problem, component: usize, ln_value: f64) {
    problem.reservoirs.push(Reservoir { row: Row::new(&[(component, 1)], 0.0), ln_value });
}

/// Gives every species the charge that balances it from random charges of the components.
pub fn add_charges(random: &mut Random, problem: &mut Problem) {
    let charges: Vec<i64> =
        (0..problem.n_components).map(|j| if j == 0 { 1 } else { random.integer(-3, 3) }).collect();
    for row in &mut problem.species {
        row.charge = row.stoichiometry.iter().map(|(j, nu)| (charges[*j] * nu.numer()) as f64).sum();
    }
}

/// Ion sizes and linear terms as those of Truesdell and Jones spread.
pub fn ion_sizes(random: &mut Random, problem: &Problem) -> Model {
    let ion = |random: &mut Random| IonCoefficients {
        size: random.uniform(2.5, 11.0),
        linear: random.uniform(-0.05, 0.25) * LN_10,
    };
    let solutes = problem.species.iter().map(|_| ion(random)).collect();
    Model::consistent(Solutes::DebyeHuckel(DebyeHuckel {
        a_ln: 0.509 * LN_10,
        b: 0.3284,
        solutes,
        valid_to: 3.0,
    }))
}

/// Interaction coefficients for half of all pairs of unlike charge, as widely spread as the published ones.
pub fn interactions(random: &mut Random, problem: &Problem) -> Model {
    let mut pairs = vec![];
    for j in 0..problem.species.len() {
        for k in 0..j {
            let unlike = problem.species[j].charge * problem.species[k].charge < 0.0;
            if unlike && random.chance(0.5) {
                pairs.push(Pair { solutes: (j, k), epsilon: random.uniform(-0.2, 0.35) * LN_10 });
            }
        }
    }
    Model::consistent(Solutes::Sit(Sit { a_ln: 0.509 * LN_10, pairs }))
}
