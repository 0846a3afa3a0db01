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
mod volts;
mod watching;
mod write;

use arguments::Arguments;
use case::Case;
use clap::Parser;
use kinds::Kind;
use std::process::ExitCode;
use std::sync::Mutex;
use std::sync::atomic::{AtomicU64, Ordering};
use table::Table;

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
    if arguments.changes {
        watching::reactions(&arguments.kinds, arguments.seeds.0..arguments.seeds.1, arguments.verbose);
        return Ok(());
    }
    let kinds = kinds::select(&arguments.kinds)?;
    if let Some(directory) = &arguments.write {
        let write = |case: &Case| write::write(case, directory).map_err(|e| format!("{}: {e}", directory.display()));
        return kinds.iter().flat_map(|kind| on_threads(kind, arguments, write)).collect();
    }
    if arguments.watch {
        let watched = |kind: &Kind| on_threads(kind, arguments, |case| watching::score(case, arguments.verbose));
        watching::print(&kinds.iter().flat_map(|kind| watched(kind)).collect::<Vec<_>>());
        return Ok(());
    }
    let mut table = Table::new(!arguments.verbose);
    for kind in kinds {
        let scores = on_threads(kind, arguments, |case| score::score(case, arguments.explain));
        if arguments.verbose {
            table::print_cases(&scores);
        }
        table.add(kind.name, &scores);
    }
    table.finish();
    Ok(())
}

/// Makes every case of a kind and works on it, on several threads; results in the order of the seeds.
fn on_threads<T: Send>(kind: &Kind, arguments: &Arguments, work: impl Fn(&Case) -> T + Sync) -> Vec<T> {
    let (first, after_last) = arguments.seeds;
    let next = AtomicU64::new(first);
    let results = Mutex::new(Vec::new());
    std::thread::scope(|scope| {
        for _ in 0..arguments.threads.max(1) {
            scope.spawn(|| {
                loop {
                    let seed = next.fetch_add(1, Ordering::Relaxed);
                    if seed >= after_last {
                        return;
                    }
                    let result = work(&Case::make(kind, seed));
                    results.lock().expect("no thread panics while it holds the lock").push((seed, result));
                }
            });
        }
    });
    let mut results = results.into_inner().expect("no thread panics while it holds the lock");
    results.sort_by_key(|(seed, _)| *seed);
    results.into_iter().map(|(_, result)| result).collect()
}
