//! The table of scores, a line a kind.

use crate::kinds::Kind;
use crate::score::{Errors, Outcome, Score};

/// Bounds of a good answer, relative: rate, jitter; and of a wrong one: rate.
const RATE_GOOD: f64 = 0.005;
const JITTER_GOOD: f64 = 0.15;
const RATE_WRONG: f64 = 0.02;

/// Sums over kinds.
#[derive(Default)]
struct Total {
    gaps: usize,
    refused: usize,
    wrong: usize,
    rate_good: usize,
    jitter_good: usize,
    no_gaps: usize,
    false_accepts: usize,
    crashes: usize,
}

/// Prints the table, a line a kind, and the totals.
pub fn print(kinds: &[&Kind], scores: &[Score]) {
    println!(
        "{:12} {:>4} {:>4} {:>5} | {:>7} {:>7} {:>6} | {:>6} {:>6} {:>6} | {:>7} {:>7} | {:>5} {:>5} | {:>6}",
        "kind",
        "n",
        "ans",
        "wrong",
        "rate% m",
        "max",
        "<0.5%",
        "jit% m",
        "p90",
        "<15%",
        "covR%",
        "covJ%",
        "wR",
        "wJ",
        "ms/s"
    );
    let mut total = Total::default();
    for kind in kinds {
        let of_kind: Vec<&Score> = scores.iter().filter(|s| s.kind == kind.name).collect();
        print_kind(kind.name, &of_kind, &mut total);
    }
    let percent = |part: usize, of: usize| 100.0 * part as f64 / of.max(1) as f64;
    println!(
        "TOTAL gaps {}: rate within 0.5 % {} ({:.1} %), jitter within 15 % {} ({:.1} %), wrong by over 2 % {}, refused {}; \
         no gap {}: false accepts {}; crashes {}",
        total.gaps,
        total.rate_good,
        percent(total.rate_good, total.gaps),
        total.jitter_good,
        percent(total.jitter_good, total.gaps),
        total.wrong,
        total.refused,
        total.no_gaps,
        total.false_accepts,
        total.crashes
    );
    let read: Vec<&Errors> = scores.iter().filter_map(Score::errors).collect();
    println!(
        "coverage of 95 % intervals: rate {:.1} %, jitter {:.1} %",
        100.0 * share(read.iter().map(|e| e.rate_covered)),
        100.0 * share(read.iter().filter_map(|e| e.jitter_covered))
    );
}

fn print_kind(name: &str, scores: &[&Score], total: &mut Total) {
    let cost = scores.iter().map(|s| s.cost_s.0).sum::<f64>() / scores.iter().map(|s| s.cost_s.1).sum::<f64>();
    total.crashes += scores.iter().filter(|s| matches!(s.outcome, Outcome::Crashed)).count();
    let told = scores.iter().filter(|s| matches!(s.outcome, Outcome::NoGap(true) | Outcome::OtherRhythm(true))).count();
    let no_gaps = scores.iter().filter(|s| matches!(s.outcome, Outcome::NoGap(_))).count();
    let others = scores.iter().filter(|s| matches!(s.outcome, Outcome::OtherRhythm(_))).count();
    if no_gaps + others > 0 {
        total.no_gaps += no_gaps;
        total.false_accepts += if no_gaps > 0 { told } else { 0 };
        let what = if no_gaps > 0 { "false accepts" } else { "a rhythm is there; figures given" };
        println!("{name:12} {:4} {what} {told} | {:.1} ms/s", scores.len(), 1e3 * cost);
        return;
    }
    let read: Vec<&Errors> = scores.iter().filter_map(|s| s.errors()).collect();
    let rate = sorted(read.iter().map(|e| e.rate.abs()));
    let jitter = sorted(read.iter().filter_map(|e| e.jitter.map(f64::abs)));
    let count = |errors: &[f64], bound: f64| errors.iter().filter(|e| **e <= bound).count();
    let wrong = rate.len() - count(&rate, RATE_WRONG);
    total.gaps += scores.len();
    total.refused += scores.len() - read.len();
    total.wrong += wrong;
    total.rate_good += count(&rate, RATE_GOOD);
    total.jitter_good += count(&jitter, JITTER_GOOD);
    println!(
        "{:12} {:4} {:4} {:5} | {:7.4} {:7.3} {:6} | {:6.2} {:6.1} {:6} | {:7.1} {:7.1} | {:5.2} {:5.2} | {:6.1}",
        name,
        scores.len(),
        read.len(),
        wrong,
        100.0 * quantile(&rate, 0.5),
        100.0 * quantile(&rate, 1.0),
        count(&rate, RATE_GOOD),
        100.0 * quantile(&jitter, 0.5),
        100.0 * quantile(&jitter, 0.9),
        count(&jitter, JITTER_GOOD),
        100.0 * share(read.iter().map(|e| e.rate_covered)),
        100.0 * share(read.iter().filter_map(|e| e.jitter_covered)),
        quantile(&sorted(read.iter().map(|e| e.rate_width)), 0.5),
        quantile(&sorted(read.iter().filter_map(|e| e.jitter_width)), 0.5),
        1e3 * cost
    );
}

/// Prints a line a case, worst first: refused and falsely accepted ones, then by rate and jitter error.
pub fn print_cases(scores: &[Score]) {
    let mut order: Vec<&Score> = scores.iter().collect();
    order.sort_by(|a, b| b.badness().total_cmp(&a.badness()));
    for s in order {
        let errors = match &s.outcome {
            Outcome::Read(e) => {
                let jitter = e.jitter.map_or("     -".into(), |j| format!("{:+6.1}", 100.0 * j));
                let outside = |covered: bool, letter| if covered { ' ' } else { letter };
                let (r, j) = (outside(e.rate_covered, 'R'), outside(e.jitter_covered.unwrap_or(true), 'J'));
                format!("rate {:+8.4} % jitter {jitter} % {r}{j}", 100.0 * e.rate)
            }
            Outcome::Refused => "REFUSED".into(),
            Outcome::Crashed => "CRASHED".into(),
            Outcome::NoGap(true) => "FALSE ACCEPT".into(),
            Outcome::NoGap(false) => "nothing, rightly".into(),
            Outcome::OtherRhythm(told) => format!("other rhythm, figures: {told}"),
        };
        println!("{}-{} {errors} | {}", s.kind, s.seed, s.line);
    }
}

impl Score {
    fn errors(&self) -> Option<&Errors> {
        if let Outcome::Read(errors) = &self.outcome { Some(errors) } else { None }
    }

    /// Order of interest: 1 is the bound of a good answer.
    fn badness(&self) -> f64 {
        match &self.outcome {
            Outcome::Read(e) => (e.rate.abs() / RATE_GOOD).max(e.jitter.map_or(1.5, f64::abs) / JITTER_GOOD),
            Outcome::Refused => 1e6,
            Outcome::Crashed => 1e8,
            Outcome::NoGap(true) => 1e7,
            Outcome::NoGap(false) => -1.0,
            Outcome::OtherRhythm(_) => 0.0,
        }
    }
}

fn sorted(values: impl Iterator<Item = f64>) -> Vec<f64> {
    let mut values: Vec<f64> = values.collect();
    values.sort_by(f64::total_cmp);
    values
}

/// Nearest-rank quantile of sorted values; not a number if there are none.
fn quantile(sorted: &[f64], q: f64) -> f64 {
    let last = sorted.len().saturating_sub(1);
    sorted.get((q * last as f64).round() as usize).copied().unwrap_or(f64::NAN)
}

fn share(values: impl Iterator<Item = bool>) -> f64 {
    let (mut yes, mut all) = (0_u32, 0_u32);
    for value in values {
        yes += u32::from(value);
        all += 1;
    }
    f64::from(yes) / f64::from(all)
}
