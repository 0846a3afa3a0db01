//! Which periods are worth a fit: the rhythm model itself is scored on a grid of periods (not autocorrelation, which likes
//! multiples), the best few are fitted, with half and twice the best and two loose starts beside them.

use super::fit::{FirstGains, Fit, Start, fit};
use super::path::{Law, best_chain};
use crate::clicks::Candidates;
use std::ops::Range;

/// Longest period looked for, s.
pub const LONGEST_S: f64 = 4.0;
/// Shortest period of the search with separate clicks, s.
pub const SHORTEST_SLOW_S: f64 = 0.55e-3;
/// The search for fast trains, s.
pub const FAST_S: (f64, f64) = (1.0 / 4000.0, 0.7e-3);
/// Step of the logarithmic grid, and jitter allowed for on it.
const GRID_STEP: f64 = 0.08;
/// Candidates per expected firing on the grid, and in a fit.
const GRID_DENSITY: f64 = 4.0;
const FIT_DENSITY: f64 = 6.0;
/// Longest step on the grid, periods.
const GRID_LONGEST: usize = 2;
/// Length of the stretch on which a period is scored on the grid, and on which it is fitted: periods, and s at least.
const GRID_STRETCH: (f64, f64) = (100.0, 0.2);
const FIT_STRETCH: (f64, f64) = (200.0, 0.35);
/// Below this period the distance that maxima of noise keep looks like a rhythm, s.
const NOISE_BELOW_S: f64 = 2e-3;
/// Loose starts: first period and ratio.
const LOOSE_FIRST_S: f64 = 1.5e-3;
const LOOSE_RATIO: f64 = 1.5;
const LOOSE_COUNT: usize = 17;

/// A fit, with the indices of its chain referring to the whole list of candidates.
pub fn fit_whole(c: &Candidates, duration_s: f64, start: Start, density: f64) -> Option<Fit> {
    let keep = c.strongest((density * duration_s / start.period_s + 60.0) as usize);
    let mut found = fit(&c.pick(&keep), duration_s, start)?;
    found.chain.index.iter_mut().for_each(|i| *i = keep[*i]);
    Some(found)
}

/// The same among the candidates `among` alone; the chain refers to the whole list.
pub fn fit_among(c: &Candidates, among: &[usize], duration_s: f64, start: Start, density: f64) -> Option<Fit> {
    if among.len() == c.len() {
        return fit_whole(c, duration_s, start, density);
    }
    let mut found = fit_whole(&c.pick(among), duration_s, start, density)?;
    found.chain.index.iter_mut().for_each(|i| *i = among[*i]);
    Some(found)
}

/// Fits the promising periods of one list of candidates, each on a stretch that holds enough firings; the evidence is
/// brought to the whole duration. Periods from `shortest_s` on are looked at, or those of fast trains; one that is expected is tried too. In no order; the chains
/// are those of the stretches.
#[must_use]
pub fn rhythms(c: &Candidates, duration_s: f64, fast: bool, shortest_s: f64, expected_s: Option<f64>) -> Vec<Fit> {
    let (shortest, longest) = if fast { FAST_S } else { (shortest_s, LONGEST_S) };
    let longest = longest.min(duration_s / 4.0);
    if c.len() < 8 || longest <= shortest {
        return Vec::new();
    }
    let ranked = Ranked::new(c);
    let grid = scan(&ranked, duration_s, shortest, longest);
    let peaks = local_maxima(&grid, fast);
    if !fast
        && let Some(first) = peaks.iter().max_by(|a, b| a.1.total_cmp(&b.1)).map(|p| p.0)
        && let Some(fit) = fit_all(c, duration_s, &[tight(first)]).pop()
        && beyond_doubt(&fit)
    {
        let beside = fit_all(c, duration_s, &multiples(fit.period_s));
        return std::iter::once(fit).chain(beside).collect();
    }
    let expected = expected_s.filter(|_| !fast);
    let starts: Vec<Start> = peaks.into_iter().map(|p| p.0).chain(expected).map(tight).collect();
    let mut found: Vec<Fit> = fit_all(c, duration_s, &starts);
    if !fast {
        if let Some(first) = strongest(&found).map(|f| f.period_s) {
            found.extend(fit_all(c, duration_s, &multiples(first)));
        }
        if !strongest(&found).is_some_and(explains_nearly_all) {
            found.extend(fit_all(c, duration_s, &loose_starts(c, duration_s, shortest_s)));
            found.extend(loose_among_the_clear(c, duration_s));
        }
    }
    found
}

/// Fits of one period and of those that it may be a multiple or a fraction of.
#[must_use]
pub fn rhythms_near(c: &Candidates, duration_s: f64, period_s: f64) -> Vec<Fit> {
    let mut found = fit_all(c, duration_s, &[tight(period_s)]);
    found.extend(fit_all(c, duration_s, &multiples(period_s)));
    found
}

/// Where every second or third firing stands out, the rhythm has half or a third of the period.
fn multiples(period_s: f64) -> [Start; 3] {
    [period_s / 2.0, period_s / 3.0, period_s * 2.0].map(tight)
}

/// Candidates with their indices in the order of falling marks: the strongest of any stretch are found without sorting again.
struct Ranked<'a> {
    candidates: &'a Candidates,
    order: Vec<u32>,
}

/// A stretch that holds less than one in so many of all candidates is sorted by itself.
const SHORT_STRETCH: usize = 8;

impl<'a> Ranked<'a> {
    fn new(candidates: &'a Candidates) -> Self {
        let mut order: Vec<u32> = (0..candidates.len() as u32).collect();
        let mark = &candidates.mark;
        order.sort_unstable_by(|&a, &b| mark[b as usize].total_cmp(&mark[a as usize]));
        Self { candidates, order }
    }

    /// Indices of the strongest `count` of the stretch from one index up to another, strongest first.
    fn strongest(&self, from: usize, to: usize, count: usize) -> Vec<u32> {
        if (to - from) * SHORT_STRETCH < self.order.len() {
            let mark = &self.candidates.mark;
            let falling = |a: &u32, b: &u32| mark[*b as usize].total_cmp(&mark[*a as usize]);
            let mut inside: Vec<u32> = (from as u32..to as u32).collect();
            if count < inside.len() {
                inside.select_nth_unstable_by(count, falling);
                inside.truncate(count);
            }
            inside.sort_unstable_by(falling);
            return inside;
        }
        let inside = self.order.iter().copied().filter(|&i| (from..to).contains(&(i as usize)));
        inside.take(count).collect()
    }
}

fn strongest(fits: &[Fit]) -> Option<&Fit> {
    fits.iter().max_by(|a, b| a.evidence.total_cmp(&b.evidence))
}

/// A tight rhythm that explains nearly everything: no loose one is looked for beside it.
fn explains_nearly_all(f: &Fit) -> bool {
    f.jitter < 0.06 && f.cover > 0.9 && f.missed < 0.2 && f.each > 1.5 && f.evidence > 60.0
}

/// One that leaves nothing to look for but its half and its double.
#[must_use]
pub fn beyond_doubt(f: &Fit) -> bool {
    explains_nearly_all(f) && f.cover > 0.97 && f.missed < 0.05 && f.each > 2.5 && f.period_s > NOISE_BELOW_S
}

fn fit_all(c: &Candidates, duration_s: f64, starts: &[Start]) -> Vec<Fit> {
    starts
        .iter()
        .copied()
        .filter(|s| s.period_s <= duration_s / 4.0 && s.period_s >= 1.0 / 4200.0)
        .filter_map(|s| fit_stretch(c, duration_s, s, FIT_DENSITY))
        .filter(|f| !looks_like_noise(f))
        .collect()
}

/// A loose train at a very short period is what noise looks like: (period, s, and the most jitter below it).
const NOISE_LOOKS: [(f64, f64); 2] = [(0.7e-3, 0.12), (1.2e-3, 0.25)];

/// So is one whose marks are of two kinds, clicks and noise: their standard deviation is above this.
const MIXED: f64 = 1.0;

fn looks_like_noise(f: &Fit) -> bool {
    (f.is_loose() && f.marks.on.1 > MIXED)
        || NOISE_LOOKS.iter().any(|&(period_s, jitter)| f.period_s < period_s && f.jitter > jitter)
}

/// The candidates of the middle stretch for a period, with its length.
fn middle(c: &Candidates, duration_s: f64, period_s: f64, (periods, least_s): (f64, f64)) -> (Candidates, f64) {
    let length = (periods * period_s).max(least_s);
    if length >= 0.8 * duration_s {
        return (c.clone(), duration_s);
    }
    let from = 0.5 * (duration_s - length);
    (c.between(from, from + length), length)
}

fn fit_stretch(c: &Candidates, duration_s: f64, start: Start, density: f64) -> Option<Fit> {
    let (part, length) = middle(c, duration_s, start.period_s, FIT_STRETCH);
    let mut found = fit_whole(&part, length, start, density)?;
    found.evidence *= duration_s / length;
    Some(found)
}

fn tight(period_s: f64) -> Start {
    Start { period_s, jitter: 0.07, follow: 0.15, gains: FirstGains::Soft, rounds: 5 }
}

/// Evidence of the best chain for each period of the grid, brought to the whole duration.
fn scan(c: &Ranked, duration_s: f64, shortest_s: f64, longest_s: f64) -> Vec<(f64, f64)> {
    let count = ((longest_s / shortest_s).ln() / GRID_STEP).floor() as usize + 1;
    (0..count)
        .map(|q| shortest_s * (GRID_STEP * q as f64).exp())
        .filter_map(|period_s| {
            let length = (GRID_STRETCH.0 * period_s).max(GRID_STRETCH.1);
            let all = length >= 0.8 * duration_s;
            let (from_s, length) = if all { (0.0, duration_s) } else { (0.5 * (duration_s - length), length) };
            let at = |t: f64| c.candidates.time_s.partition_point(|&s| s < t);
            let range = if all { 0..c.candidates.len() } else { at(from_s)..at(from_s + length) };
            Some((period_s, grid_score(c, range, length, period_s)? * duration_s / length))
        })
        .collect()
}

fn grid_score(c: &Ranked, range: Range<usize>, duration_s: f64, period_s: f64) -> Option<f64> {
    let expected = duration_s / period_s;
    if range.is_empty() || 0.7 * expected > range.len() as f64 {
        return None;
    }
    let mark = |i: u32| c.candidates.mark[i as usize];
    let mut keep = c.strongest(range.start, range.end, (GRID_DENSITY * expected + 60.0) as usize);
    let threshold = mark(keep[((0.9 * expected) as usize).min(keep.len() - 1)]) + 0.7f64.ln();
    keep.sort_unstable();
    let off_rate = (keep.len() as f64 - expected).max(0.3 * expected) / duration_s;
    let ln_off = off_rate.ln();
    let soft: Vec<f64> = keep.iter().map(|&i| (4.0 * (mark(i) - threshold)).clamp(-4.0, 3.0)).collect();
    let gain: Vec<f64> = soft.iter().map(|s| s - ln_off).collect();
    let time_s: Vec<f64> = keep.iter().map(|&i| c.candidates.time_s[i as usize]).collect();
    let law = Law { jitter: GRID_STEP, missed: 0.05, follow: 0.15, longest: GRID_LONGEST };
    let chain = best_chain(&time_s, &gain, &vec![period_s; keep.len()], law);
    // Against the same candidates with the same two kinds of marks and no rhythm.
    let on = chain.index.len() as f64;
    let odds = on / duration_s / off_rate;
    Some(chain.score - null_of_soft(&soft, odds) + on)
}

/// Σ ln(1 + odds·eᵍ) over soft gains of −4..3, each rounded to the nearest of a row of levels.
fn null_of_soft(soft: &[f64], odds: f64) -> f64 {
    const PER_UNIT: f64 = 16.0;
    let levels: [f64; 113] = std::array::from_fn(|k| (odds * (k as f64 / PER_UNIT - 4.0).exp()).ln_1p());
    soft.iter().map(|g| levels[(((g + 4.0) * PER_UNIT).round() as usize).min(112)]).sum()
}

/// The best local maxima, period and score: of each side of 2 ms a few, since noise keeps a distance at short periods and its
/// evidence there is settled only by a fit.
fn local_maxima(grid: &[(f64, f64)], fast: bool) -> Vec<(f64, f64)> {
    let mut peaks: Vec<(f64, f64)> = (0..grid.len())
        .filter(|&i| {
            let near = &grid[i.saturating_sub(2)..(i + 3).min(grid.len())];
            near.iter().all(|g| g.1 <= grid[i].1)
        })
        .map(|i| grid[i])
        .collect();
    peaks.sort_by(|a, b| b.1.total_cmp(&a.1));
    let side =
        |short: bool, most: usize| peaks.iter().copied().filter(move |p| (p.0 < NOISE_BELOW_S) == short).take(most);
    if fast { side(true, 3).collect() } else { side(true, 2).chain(side(false, 4)).collect() }
}

/// The two best starts for trains with 15 to 40 % jitter, by short fits over a coarse row of periods.
fn loose_starts(c: &Candidates, duration_s: f64, shortest_s: f64) -> Vec<Start> {
    let mut found: Vec<(f64, f64)> = (0..LOOSE_COUNT)
        .map(|k| LOOSE_FIRST_S * LOOSE_RATIO.powi(k as i32))
        .chain(period_of_the_clear(c, duration_s))
        .filter(|t| (shortest_s..duration_s / 10.0).contains(t))
        .filter_map(|period_s| {
            let start = Start { period_s, jitter: 0.3, follow: 0.0, gains: FirstGains::Steep, rounds: 3 };
            let fitted = fit_stretch(c, duration_s, start, 6.0)?;
            Some((fitted.evidence, fitted.period_s))
        })
        .collect();
    found.sort_by(|a, b| b.0.total_cmp(&a.0));
    found.truncate(2);
    found
        .into_iter()
        .map(|(_, period_s)| Start { period_s, jitter: 0.3, follow: 0.0, gains: FirstGains::Steep, rounds: 6 })
        .collect()
}

/// The mean spacing of the candidates above the widest gap in the sorted marks: where clicks stand clear of noise these are the
/// clicks, however loose their rhythm.
fn period_of_the_clear(c: &Candidates, duration_s: f64) -> Option<f64> {
    widest_gap(c, duration_s).map(|gap| duration_s / gap.above as f64)
}

/// The widest gap in the sorted marks.
struct Gap {
    /// Candidates above it.
    above: usize,
    /// Marks at its two ends, the larger first.
    between: (f64, f64),
}

fn widest_gap(c: &Candidates, duration_s: f64) -> Option<Gap> {
    let mut marks = c.mark.clone();
    marks.sort_by(|a, b| b.total_cmp(a));
    let most = ((duration_s / LOOSE_FIRST_S) as usize).min(marks.len() * 9 / 10);
    let ends = |rank: usize| (marks[rank * 19 / 20], marks[(rank * 21 / 20).min(marks.len() - 1)]);
    let width = |rank: usize| ends(rank).0 - ends(rank).1;
    let above = (20..most).max_by(|&a, &b| width(a).total_cmp(&width(b)))?;
    Some(Gap { above, between: ends(above) })
}

/// Width of the gap from which clicks are told from noise by their marks alone.
const CLEAR_GAP: f64 = 0.8;

/// A loose rhythm of the candidates that stand clear of noise: among all of them a loose train takes noise into its long periods.
fn loose_among_the_clear(c: &Candidates, duration_s: f64) -> Option<Fit> {
    let gap = widest_gap(c, duration_s).filter(|gap| gap.between.0 - gap.between.1 > CLEAR_GAP)?;
    let middle = 0.5 * (gap.between.0 + gap.between.1);
    let clear: Vec<usize> = (0..c.len()).filter(|&i| c.mark[i] > middle).collect();
    let period_s = duration_s / clear.len() as f64;
    let start = Start { period_s, jitter: 0.3, follow: 0.0, gains: FirstGains::Steep, rounds: 5 };
    let mut found = fit(&c.pick(&clear), duration_s, start)?;
    found.chain.index.iter_mut().for_each(|i| *i = clear[*i]);
    found.marks = found.marks_among(c);
    Some(found)
}
