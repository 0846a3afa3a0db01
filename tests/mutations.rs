//! Damaged files: every one is read or refused, none brings the program down.

mod cli_common;
mod mutation_help;

use gaptone::model::random::Random;
use mutation_help::{mutate, read, seeds};
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::PathBuf;

/// Mutations of the bounded run and of the long one.
const BOUNDED: u64 = 10_000;
const MANY: u64 = 1_000_000;
/// One in so many is measured as well: the analyzer never sees a head, only samples.
const MEASURED: u64 = 50;

/// Where a mutation that fails is kept: it belongs into `tests/data/audio/`.
fn kept(ending: &str, number: u64) -> PathBuf {
    std::env::temp_dir().join(format!("gaptone-mutation-{number}.{ending}"))
}

fn run(numbers: std::ops::Range<u64>) {
    let folder = cli_common::Folder::new();
    let seeds = seeds(folder.0.path(), &cli_common::clicks(0.6, 16_000));
    let opened = std::thread::scope(|scope| {
        let halves = [0, 1].map(|half| {
            let (seeds, folder, numbers) = (&seeds, &folder, numbers.clone());
            scope.spawn(move || {
                let mut opened = 0u64;
                for number in numbers.filter(|number| number % 2 == half) {
                    let mut random = Random::stream(4711, number);
                    let (ending, bytes) = &seeds[(number / 2) as usize % seeds.len()];
                    let (_, other) = &seeds[(random.uniform() * seeds.len() as f64) as usize];
                    let damaged = mutate(bytes, other, &mut random);
                    let path = folder.path(&format!("damaged-{half}.{ending}"));
                    std::fs::write(&path, &damaged).expect("written");
                    let done = catch_unwind(AssertUnwindSafe(|| read(&path, number % MEASURED < 2)));
                    opened += u64::from(done.unwrap_or_else(|_| {
                        let keep = kept(ending, number);
                        std::fs::write(&keep, &damaged).expect("written");
                        panic!("mutation {number} of the {ending} file: kept as {}", keep.display())
                    }));
                }
                opened
            })
        });
        halves.map(|half| half.join().expect("no mutation fails")).iter().sum::<u64>()
    });
    let count = numbers.end - numbers.start;
    eprintln!("{count} mutations, {opened} of them could be opened");
    // Both ways out have been taken.
    assert!(opened > count / 10 && opened < count * 99 / 100, "{opened} of {count}");
}

#[test]
fn ten_thousand_damaged_files_of_every_kind_are_read_or_refused() {
    run(0..BOUNDED);
}

/// Run with --ignored --nocapture; it takes an hour.
#[test]
#[ignore = "takes an hour"]
fn a_million_damaged_files_of_every_kind_are_read_or_refused() {
    run(BOUNDED..BOUNDED + MANY);
}

#[test]
fn the_undamaged_files_can_all_be_opened() {
    let folder = cli_common::Folder::new();
    for (number, (ending, bytes)) in seeds(folder.0.path(), &cli_common::clicks(0.6, 16_000)).iter().enumerate() {
        let path = folder.file(&format!("whole-{number}.{ending}"), bytes);
        assert!(read(&path, true), "{ending}");
    }
}
