//! Cost of a solve in units that carry over between machines: see the README beside this file.
//!
//! All ratios of a run are measured in that run, interleaved, so that a busy machine disturbs both sides alike.

mod tableaux;

use std::hint::black_box;
use std::time::Instant;

use lysocline_engine::activity::Model;
use lysocline_engine::solve::{Prepared, Problem, Settings, Total};
use tableaux::{
    COMPONENTS, N_TABLEAUX, Random, SPECIES, iteration_time, quantile, random_tableau, run, time,
};

fn main() {
    let settings = Settings::default();
    let problems: Vec<Problem> = (0..N_TABLEAUX).map(random_tableau).collect();
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
    let prepared = prepared_time(&problems, &settings);
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
    println!(
        "the same, prepared        {:8.2} µs   {:6.1} x iteration (target 4)",
        prepared * 1e6,
        prepared / iteration
    );
    println!("   iterations a point     {:8.2}", warm.1);
    println!("warm, all constants moved {:8.2} µs   {:6.1} x iteration", near * 1e6, near / iteration);
    for (name, counts) in
        [("iterations", &mut iterations), ("evaluations", &mut evaluations), ("pivots", &mut pivots)]
    {
        println!("cold {name:<12} median {:4.0}, p99 {:4.0}", quantile(counts, 0.5), quantile(counts, 0.99));
    }
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
        let mut points = Vec::with_capacity(POINTS);
        for point in 0..POINTS {
            problem.totals[last] = Total::from(first * 10_f64.powf(point as f64 / POINTS as f64));
            points.push(time(|| run(&problem, settings, Some(&warm))));
            let converged = run(&problem, settings, Some(&warm));
            iterations += converged.effort.iterations;
            warm = converged.warm;
        }
        times.push(quantile(&mut points, 0.5));
    }
    let per_point = iterations as f64 / (POINTS * times.len()) as f64;
    (quantile(&mut times, 0.5), per_point)
}

/// Seconds of one point of the same sweep with a prepared problem, checks and certificate included.
fn prepared_time(problems: &[Problem], settings: &Settings) -> f64 {
    const POINTS: usize = 1000;
    let sweep = |problem: &Problem| {
        let last = problem.n_components - 1;
        let first = problem.totals[last].to_f64();
        let mut prepared = Prepared::new(problem.clone()).expect("random tableaux are sound");
        prepared.solve(&Model::IDEAL, settings).expect("random tableaux have a solution");
        let mut point = |point: usize| {
            let total = Total::from(first * 10_f64.powf(point as f64 / POINTS as f64));
            let start = Instant::now();
            prepared.set_total(last, total).expect("a component with a finite total");
            black_box(prepared.solve(&Model::IDEAL, settings).expect("random tableaux have a solution"));
            start.elapsed().as_secs_f64()
        };
        let mut points: Vec<f64> = (0..POINTS).map(&mut point).collect();
        quantile(&mut points, 0.5)
    };
    let mut times: Vec<f64> = problems.iter().take(20).map(sweep).collect();
    quantile(&mut times, 0.5)
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
