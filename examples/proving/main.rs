//! Proving ground: makes recordings of spark gaps (and of things that are none) with known truth by brute force, has
//! the analyzer read them, and prints how far off it is.
//!
//! The generator shares no code with the library's forward model: complex baseband at 192 kHz, clicks laid down
//! between the samples, filters by convolution or recursion, the detector sample by sample. All quantities in SI units.
//!
//! ```text
//! cargo run --release --example proving -- --kinds clean,noisy --seeds 1000..1040 --threads 2 --verbose
//! cargo run --release --example proving -- --kinds voltage --seeds 0..4 --write clips
//! ```

mod arguments;
mod case;
mod channel;
mod circuit;
mod codec;
mod filters;
mod firings;
mod kernel;
mod kinds;
mod random;
mod receiver;
mod recorder;
mod scene;
mod score;
mod sounds;
mod table;
mod write;

use arguments::Arguments;
use case::Case;
use clap::Parser;
use kinds::Kind;
use score::Score;
use std::process::ExitCode;
use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};

fn main() -> ExitCode {
    match run(&Arguments::parse()) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("proving: {error}");
            ExitCode::FAILURE
        }
    }
}

fn run(arguments: &Arguments) -> Result<(), String> {
    let kinds = kinds::select(&arguments.kinds)?;
    let jobs: Vec<(&Kind, u64)> =
        kinds.iter().flat_map(|kind| (arguments.seeds.0..arguments.seeds.1).map(|seed| (*kind, seed))).collect();
    if let Some(directory) = &arguments.write {
        let results = on_threads(&jobs, arguments.threads, |case| {
            write::write(case, directory).map_err(|e| format!("{}: {e}", directory.display()))
        });
        return results.into_iter().collect();
    }
    let scores: Vec<Score> = on_threads(&jobs, arguments.threads, |case| score::score(case, arguments.explain));
    if arguments.verbose {
        table::print_cases(&scores);
    }
    table::print(&kinds, &scores);
    Ok(())
}

/// Makes every case and works on it, on several threads; results in the order of the jobs.
fn on_threads<T: Send>(jobs: &[(&Kind, u64)], threads: usize, work: impl Fn(&Case) -> T + Sync) -> Vec<T> {
    let next = AtomicUsize::new(0);
    let results = Mutex::new(Vec::with_capacity(jobs.len()));
    std::thread::scope(|scope| {
        for _ in 0..threads.max(1) {
            scope.spawn(|| {
                loop {
                    let index = next.fetch_add(1, Ordering::Relaxed);
                    let Some(&(kind, seed)) = jobs.get(index) else { return };
                    let result = work(&Case::make(kind, seed));
                    results.lock().expect("no thread panics while it holds the lock").push((index, result));
                }
            });
        }
    });
    let mut results = results.into_inner().expect("no thread panics while it holds the lock");
    results.sort_by_key(|(index, _)| *index);
    results.into_iter().map(|(_, result)| result).collect()
}
