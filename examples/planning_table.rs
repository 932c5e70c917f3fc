//! Prints, for problem files, what the planner reaches in a time budget on one core.
//!
//! `cargo run --release --example planning_table -- SECONDS FILE…`

use nightwright::plan::solve::{Settings, json, solve, verify};
use std::time::Instant;

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let mut args = std::env::args().skip(1);
    let seconds: f64 = args
        .next()
        .ok_or("give seconds and problem files")?
        .parse()?;
    println!("problem     dispatcher  value  bound  gap %  steps (bound)  seconds");
    for file in args {
        let problem = json::read_problem(&std::fs::read_to_string(&file)?)?;
        let began = Instant::now();
        let settings = Settings {
            steps: u64::MAX,
            ..Settings::default()
        };
        let mut go = || began.elapsed().as_secs_f64() < seconds;
        let found = solve(&problem, &settings, None, &mut go)?;
        let took = began.elapsed().as_secs_f64();
        let counted = verify(&problem, &found.plan).map_err(|faults| format!("{faults:?}"))?;
        let bound = found.bound.unwrap_or(i64::MAX);
        println!(
            "{:<11} {:>10} {:>6} {:>6} {:>6.2} {:>8} ({:>4}) {took:>7.2}",
            problem.name,
            found.dispatcher,
            counted,
            bound,
            100.0 * (bound - counted) as f64 / bound as f64,
            found.steps,
            found.bound_steps,
        );
    }
    Ok(())
}
