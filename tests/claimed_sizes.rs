//! A head may claim any size; no more is allocated than is there. Every place of a head is made to claim gigabytes in turn, and the
//! largest address space that the process ever had is asked of the system (Linux; elsewhere the files are only read).
//! Alone in its program, for other tests would allocate beside it.

mod cli_common;
mod mutation_help;

use mutation_help::{read, seeds};

/// Claims: 2 GiB, in both orders of bytes.
const CLAIMS: [[u8; 4]; 2] = [[0x7f, 0xff, 0xff, 0xf0], [0xf0, 0xff, 0xff, 0x7f]];
/// Bytes of a head that are tried.
const HEAD: usize = 128;
/// Bytes behind the beginning of the table of an M4A file.
const TABLE: usize = 1500;
/// What reading files of some kilobytes may take beyond what it took for sound ones, KiB: far below what is claimed.
const ALLOWED_KIB: u64 = 96 * 1024;

/// Largest address space of this process so far, KiB.
fn peak_kib() -> Option<u64> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find(|line| line.starts_with("VmPeak:"))?;
    line.split_whitespace().nth(1)?.parse().ok()
}

#[test]
fn a_head_that_claims_gigabytes_gets_no_memory() {
    let folder = cli_common::Folder::new();
    let seeds = seeds(folder.0.path(), &cli_common::clicks(0.3, 16_000));
    for (ending, bytes) in &seeds {
        read(&folder.file(&format!("whole.{ending}"), bytes), false);
    }
    let before = peak_kib();
    let mut tried = 0;
    for (ending, bytes) in &seeds {
        let table = bytes.windows(4).position(|name| name == b"moov").map_or(0..0, |at| at..at + TABLE);
        for at in (0..HEAD).chain(table.step_by(2)).filter(|at| at + 4 <= bytes.len()) {
            for claim in CLAIMS {
                let mut claiming = bytes.clone();
                claiming[at..at + 4].copy_from_slice(&claim);
                read(&folder.file(&format!("claims.{ending}"), &claiming), false);
                tried += 1;
                if let (Some(before), Some(now)) = (before, peak_kib()) {
                    assert!(now < before + ALLOWED_KIB, "{ending}, byte {at}: {} MiB more", (now - before) / 1024);
                }
            }
        }
    }
    assert!(tried > 2000, "only {tried} heads were tried");
}
