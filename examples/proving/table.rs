//! The table of scores, a line a kind.

use crate::score::{Errors, Outcome, Score};
use crate::volts::VoltageErrors;

/// Bounds of a good answer, relative: rate, jitter; and of a wrong one: rate.
const RATE_GOOD: f64 = 0.005;
const JITTER_GOOD: f64 = 0.15;
const RATE_WRONG: f64 = 0.02;

/// Heading of the table. m: median, max: highest, p90: nine in ten are below. cov: share of 95 % intervals that hold the
/// truth of the process. w: width of the interval over what the number of firings allows (median).
const HEADING: &str = "kind            n  ans wrong | rate% m     max <0.5% | jitt% m    p90  <15% |  covR%  covJ% |   wR    wJ |  volt% m    max  covV% spread% m |   ms/s";

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
    rate_covered: Vec<bool>,
    jitter_covered: Vec<bool>,
}

/// The table as it grows.
pub struct Table {
    at_once: bool,
    rows: Vec<String>,
    total: Total,
}

impl Table {
    /// An empty table; `at_once`: rows are printed as they come, otherwise at the end.
    pub fn new(at_once: bool) -> Self {
        let mut table = Self { at_once, rows: Vec::new(), total: Total::default() };
        table.row(HEADING.into());
        table
    }

    fn row(&mut self, text: String) {
        if self.at_once {
            println!("{text}");
        } else {
            self.rows.push(text);
        }
    }

    /// Adds the scores of one kind.
    pub fn add(&mut self, name: &str, scores: &[Score]) {
        let seconds = |of: fn(&Score) -> f64| scores.iter().map(of).sum::<f64>();
        let cost = 1e3 * seconds(|s| s.cost_s.0) / seconds(|s| s.cost_s.1);
        let count = |is: fn(&Outcome) -> bool| scores.iter().filter(|s| is(&s.outcome)).count();
        self.total.crashes += count(|o| matches!(o, Outcome::Crashed));
        let other = count(|o| matches!(o, Outcome::OtherRhythm(_)));
        let text = if name.starts_with("no-") {
            let told = count(|o| matches!(o, Outcome::NoGap(true) | Outcome::OtherRhythm(true)));
            if other == 0 {
                self.total.no_gaps += scores.len();
                self.total.false_accepts += told;
            }
            let what = if other > 0 { "a rhythm is there; figures given" } else { "false accepts" };
            format!("{what} {told}")
        } else {
            self.gap_row(scores)
        };
        self.row(format!("{name:12} {:4} {text} | {cost:6.1}", scores.len()));
    }

    fn gap_row(&mut self, scores: &[Score]) -> String {
        let read: Vec<&Errors> = scores.iter().filter_map(Score::errors).collect();
        let rate = sorted(read.iter().map(|e| e.rate.abs()));
        let jitter = sorted(read.iter().filter_map(|e| e.jitter.map(f64::abs)));
        let within = |errors: &[f64], bound: f64| errors.iter().filter(|e| **e <= bound).count();
        let wrong = rate.len() - within(&rate, RATE_WRONG);
        let rate_covered: Vec<bool> = read.iter().map(|e| e.rate_covered).collect();
        let jitter_covered: Vec<bool> = read.iter().filter_map(|e| e.jitter_covered).collect();
        let text = format!(
            "{:4} {wrong:5} | {:7.4} {:7.3} {:5} | {:7.2} {:6.1} {:5} | {:6.1} {:6.1} | {:5.2} {:5.2} | {}",
            read.len(),
            100.0 * quantile(&rate, 0.5),
            100.0 * quantile(&rate, 1.0),
            within(&rate, RATE_GOOD),
            100.0 * quantile(&jitter, 0.5),
            100.0 * quantile(&jitter, 0.9),
            within(&jitter, JITTER_GOOD),
            percent(&rate_covered),
            percent(&jitter_covered),
            quantile(&sorted(read.iter().map(|e| e.rate_width)), 0.5),
            quantile(&sorted(read.iter().filter_map(|e| e.jitter_width)), 0.5),
            voltage_cells(&read)
        );
        let total = &mut self.total;
        total.gaps += scores.len();
        total.refused += scores.len() - read.len();
        total.wrong += wrong;
        total.rate_good += within(&rate, RATE_GOOD);
        total.jitter_good += within(&jitter, JITTER_GOOD);
        total.rate_covered.extend(rate_covered);
        total.jitter_covered.extend(jitter_covered);
        text
    }

    /// Prints what is left and the totals.
    pub fn finish(self) {
        for row in &self.rows {
            println!("{row}");
        }
        let t = &self.total;
        let share = |part: usize| 100.0 * part as f64 / t.gaps.max(1) as f64;
        println!(
            "TOTAL gaps {}: rate within 0.5 % {} ({:.1} %), jitter within 15 % {} ({:.1} %), wrong by over 2 % {}, refused {}",
            t.gaps,
            t.rate_good,
            share(t.rate_good),
            t.jitter_good,
            share(t.jitter_good),
            t.wrong,
            t.refused
        );
        println!(
            "95 % intervals hold the process: rate {:.1} %, jitter {:.1} %; no gap {}: false accepts {}; crashes {}",
            percent(&t.rate_covered),
            percent(&t.jitter_covered),
            t.no_gaps,
            t.false_accepts,
            t.crashes
        );
    }
}

fn voltage_cells(read: &[&Errors]) -> String {
    let volts: Vec<VoltageErrors> = read.iter().filter_map(|e| e.voltage).collect();
    if volts.is_empty() {
        return " ".repeat(33);
    }
    let mean = sorted(volts.iter().map(|v| v.mean.abs()));
    let covered: Vec<bool> = volts.iter().map(|v| v.covered).collect();
    format!(
        "{:8.4} {:6.3} {:6.1} {:9.1}",
        100.0 * quantile(&mean, 0.5),
        100.0 * quantile(&mean, 1.0),
        percent(&covered),
        100.0 * quantile(&sorted(volts.iter().filter_map(|v| v.spread.map(f64::abs))), 0.5)
    )
}

/// Prints a line a case, worst first: crashes, false accepts, refusals, then by rate and jitter error.
pub fn print_cases(scores: &[Score]) {
    let mut order: Vec<&Score> = scores.iter().collect();
    order.sort_by(|a, b| b.badness().total_cmp(&a.badness()));
    for s in order {
        println!("{}-{} {} | {}", s.kind, s.seed, s.verdict(), s.line);
    }
}

impl Score {
    fn errors(&self) -> Option<&Errors> {
        if let Outcome::Read(errors) = &self.outcome { Some(errors) } else { None }
    }

    fn verdict(&self) -> String {
        match &self.outcome {
            Outcome::Read(e) => {
                let jitter = e.jitter.map_or("     -".into(), |j| format!("{:+6.1}", 100.0 * j));
                let volts = e.voltage.map_or(String::new(), |v| format!(" volts {:+.4} %", 100.0 * v.mean));
                let outside = |covered: bool, letter| if covered { ' ' } else { letter };
                let (r, j) = (outside(e.rate_covered, 'R'), outside(e.jitter_covered.unwrap_or(true), 'J'));
                format!("rate {:+8.4} % jitter {jitter} %{volts} {r}{j}", 100.0 * e.rate)
            }
            Outcome::Refused => "REFUSED".into(),
            Outcome::Crashed => "CRASHED".into(),
            Outcome::NoGap(true) => "FALSE ACCEPT".into(),
            Outcome::NoGap(false) => "nothing, rightly".into(),
            Outcome::OtherRhythm(told) => format!("other rhythm, figures: {told}"),
        }
    }

    /// Order of interest: 1 is the bound of a good answer.
    fn badness(&self) -> f64 {
        match &self.outcome {
            Outcome::Read(e) => (e.rate.abs() / RATE_GOOD).max(e.jitter.map_or(1.5, f64::abs) / JITTER_GOOD),
            Outcome::Refused => 1e6,
            Outcome::NoGap(true) => 1e7,
            Outcome::Crashed => 1e8,
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

/// Share of yes, percent; not a number if there are none.
fn percent(values: &[bool]) -> f64 {
    100.0 * values.iter().filter(|v| **v).count() as f64 / values.len() as f64
}
