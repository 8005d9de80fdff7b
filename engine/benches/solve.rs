//! Cost of a solve in units that carry over between machines: see the README beside this file.
//!
//! All ratios of a run are measured in that run, interleaved, so that a busy machine disturbs both sides alike.

use lysocline_engine::activity::Model;
use lysocline_engine::solve::{Converged, Problem, Row, Settings, Total, Warm, solve};
use std::hint::black_box;
use std::time::Instant;

const LN_10: f64 = std::f64::consts::LN_10;
const COMPONENTS: usize = 10;
const SPECIES: usize = 60;

fn main() {
    let settings = Settings::default();
    let problems: Vec<Problem> = (0..400).map(random_tableau).collect();
    let mut cold = Vec::new();
    let mut effort = Vec::new();
    let mut iteration = Vec::new();
    for problem in &problems {
        let converged = run(problem, &settings, None);
        effort.push(converged.effort);
        cold.push(time(|| run(problem, &settings, None)));
        iteration.push(iteration_time(problem, &settings));
    }
    let exponentials = time_exponentials();
    let iteration = quantile(&mut iteration, 0.5);
    let warm = sweep_time(&problems, &settings);
    let near = perturbed_time(&problems, &settings);
    let mut iterations: Vec<f64> = effort.iter().map(|effort| effort.iterations as f64).collect();
    let mut evaluations: Vec<f64> = effort.iter().map(|effort| effort.evaluations as f64).collect();
    let mut pivots: Vec<f64> = effort.iter().map(|effort| effort.pivots as f64).collect();

    println!("{COMPONENTS} components, {SPECIES} species, {} random tableaux", problems.len());
    println!("{SPECIES} exp                    {:8.2} µs", exponentials * 1e6);
    println!(
        "one iteration             {:8.2} µs   {:6.1} x exp       (target 6)",
        iteration * 1e6,
        iteration / exponentials
    );
    for (name, share, target) in [("median", 0.5, 60), ("p99", 0.99, 160)] {
        let time = quantile(&mut cold, share);
        println!(
            "cold solve, {name:<8}      {:8.2} µs   {:6.1} x iteration (target {target})",
            time * 1e6,
            time / iteration
        );
    }
    println!(
        "warm point of a sweep     {:8.2} µs   {:6.1} x iteration (target 4)",
        warm.0 * 1e6,
        warm.0 / iteration
    );
    println!("   iterations a point     {:8.2}", warm.1);
    println!("warm, all constants moved {:8.2} µs   {:6.1} x iteration", near * 1e6, near / iteration);
    for (name, counts) in
        [("iterations", &mut iterations), ("evaluations", &mut evaluations), ("pivots", &mut pivots)]
    {
        println!("cold {name:<12} median {:4.0}, p99 {:4.0}", quantile(counts, 0.5), quantile(counts, 0.99));
    }
}

fn run(problem: &Problem, settings: &Settings, warm: Option<&Warm>) -> Converged {
    solve(black_box(problem), &Model::IDEAL, settings, warm).expect("random tableaux have a solution")
}

/// Seconds of one call, the least of three.
fn time<T>(mut work: impl FnMut() -> T) -> f64 {
    let once = |work: &mut dyn FnMut() -> T| {
        let start = Instant::now();
        black_box(work());
        start.elapsed().as_secs_f64()
    };
    (0..3).map(|_| once(&mut work)).fold(f64::INFINITY, f64::min)
}

/// Seconds of one Newton iteration: the difference between warm solves that need several and those that need none.
fn iteration_time(problem: &Problem, settings: &Settings) -> f64 {
    let here = run(problem, settings, None);
    let mut moved = problem.clone();
    moved.totals.iter_mut().for_each(|total| *total = *total * 1.05);
    let away = run(&moved, settings, Some(&here.warm));
    let (with, iterations) =
        (time(|| run(&moved, settings, Some(&here.warm))), away.effort.iterations as f64);
    let again = run(&moved, settings, Some(&away.warm));
    let without = time(|| run(&moved, settings, Some(&away.warm)));
    (with - without) / (iterations - again.effort.iterations as f64)
}

/// Seconds of `SPECIES` exponentials of the standard library.
fn time_exponentials() -> f64 {
    const REPEATS: usize = 1000;
    let mut arguments: Vec<f64> = (0..SPECIES).map(|k| -0.7 * k as f64).collect();
    let total = time(|| {
        let mut sum = 0.0;
        for repeat in 0..REPEATS {
            arguments[repeat % SPECIES] += 1e-9;
            sum += black_box(&arguments).iter().map(|x| x.exp()).sum::<f64>();
        }
        sum
    });
    total / REPEATS as f64
}

/// Seconds and iterations of one point of a sweep of one total over one decade in 1000 points.
fn sweep_time(problems: &[Problem], settings: &Settings) -> (f64, f64) {
    const POINTS: usize = 1000;
    let mut times = Vec::new();
    let mut iterations = 0;
    for problem in problems.iter().take(20) {
        let mut problem = problem.clone();
        let last = problem.n_components - 1;
        let first = problem.totals[last].to_f64();
        let mut warm = run(&problem, settings, None).warm;
        let start = Instant::now();
        for point in 0..POINTS {
            problem.totals[last] = Total::from(first * 10_f64.powf(point as f64 / POINTS as f64));
            let converged = run(&problem, settings, Some(&warm));
            iterations += converged.effort.iterations;
            warm = converged.warm;
        }
        times.push(start.elapsed().as_secs_f64() / POINTS as f64);
    }
    let per_point = iterations as f64 / (POINTS * times.len()) as f64;
    (quantile(&mut times, 0.5), per_point)
}

/// Seconds of a warm solve after every ln K moved by up to 0.1 and every total by up to 1 %.
fn perturbed_time(problems: &[Problem], settings: &Settings) -> f64 {
    let mut random = Random(99);
    let mut times: Vec<f64> = problems
        .iter()
        .map(|problem| {
            let warm = run(problem, settings, None).warm;
            let mut moved = problem.clone();
            moved.species.iter_mut().for_each(|row| row.ln_k += random.uniform(-0.1, 0.1));
            moved.totals.iter_mut().for_each(|total| *total = *total * random.uniform(0.99, 1.01));
            time(|| run(&moved, settings, Some(&warm)))
        })
        .collect();
    quantile(&mut times, 0.5)
}

fn quantile(values: &mut [f64], share: f64) -> f64 {
    values.sort_by(f64::total_cmp);
    values[((values.len() - 1) as f64 * share).round() as usize]
}

/// Ten components of which the first is the proton; complexes of up to three components, log10 K within ±20.
fn random_tableau(seed: u64) -> Problem {
    let mut random = Random(seed * 7919 + 1);
    let mut species: Vec<Row> = (0..COMPONENTS).map(|j| Row::new(&[(j, 1)], 0.0)).collect();
    species.push(Row::new(&[(0, -1)], -14.0 * LN_10));
    while species.len() < SPECIES {
        let mut stoichiometry = vec![(random.below(COMPONENTS - 1) + 1, random.below(4) as i64 + 1)];
        for _ in 0..random.below(3) {
            let j = random.below(COMPONENTS);
            let nu = if j == 0 { random.below(9) as i64 - 4 } else { random.below(4) as i64 + 1 };
            if nu != 0 && stoichiometry.iter().all(|(k, _)| *k != j) {
                stoichiometry.push((j, nu));
            }
        }
        species.push(Row::new(&stoichiometry, random.uniform(-20.0, 20.0) * LN_10));
    }
    let mut total = |j| {
        let size = 10_f64.powf(random.uniform(-14.0, 0.0));
        Total::from(if j == 0 && random.uniform(0.0, 1.0) < 0.5 { -size } else { size })
    };
    let totals = (0..COMPONENTS).map(&mut total).collect();
    Problem { n_components: COMPONENTS, species, totals, ..Problem::default() }
}

/// SplitMix64 (Steele, Lea & Flood 2014).
struct Random(u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    fn below(&mut self, end: usize) -> usize {
        (self.next() % end as u64) as usize
    }

    fn uniform(&mut self, from: f64, to: f64) -> f64 {
        from + (self.next() >> 11) as f64 / (1_u64 << 53) as f64 * (to - from)
    }
}
