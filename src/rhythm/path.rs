//! The most likely train through marked candidates, by dynamic programming.
//!
//! A train is a chain of candidates. A step from candidate `j` to `i` spans `k` = 1..4 periods (k − 1 missed clicks); its
//! length has mean `k·T` and variance `k·(s·T)²`, Gaussian for small relative jitter `s`, gamma above 12 % (Gaussian tails
//! would allow periods near zero, and then call every double strike a short period). The score of a chain is
//!
//! ```text
//! score_i = gain_i + max_j [ score_j + ln p(t_i − t_j | k, T_j) + (k − 1)·ln p_missed + ln(1 − p_missed) ]
//! ```
//!
//! with gain_i = ln(density of the mark on the rhythm / off it) − ln(rate of candidates off the rhythm). Candidates that the
//! chain skips are off the rhythm and cost nothing: that is what the gain already counts. A chain may begin anywhere for
//! −ln T and begin anew (drop-out) for `RESTART` more.

use statrs::function::gamma::ln_gamma;
use std::sync::LazyLock;

/// Longest step, periods.
pub const MOST_PERIODS: usize = 4;
/// Cost of beginning anew after a drop-out, nats: about one false restart in 160 000 chances.
const RESTART: f64 = 12.0;
/// Log density of a step that no jitter explains, in units of 1/T: ln 2·10⁻³.
const LN_TAIL: f64 = -6.214_608_098_422_191;
/// Relative jitter from which steps are taken as gamma distributed.
pub const GAMMA_FROM: f64 = 0.12;
/// A predecessor that cannot win even with the densest step is not looked at; this many nats of slack cover the gamma law,
/// whose mode is denser than its Gaussian.
const SLACK: f64 = 0.5;
const LN_SQRT_TAU: f64 = 0.918_938_533_204_672_7;

/// What the chain is to look like.
#[derive(Debug, Clone, Copy)]
pub struct Law {
    /// Relative period jitter.
    pub jitter: f64,
    /// Probability that a firing leaves no candidate.
    pub missed: f64,
    /// How fast the period follows the chain, 0..1; 0 keeps to the given periods.
    pub follow: f64,
    /// Longest step, periods: at most [`MOST_PERIODS`].
    pub longest: usize,
}

/// The best chain.
#[derive(Debug, Clone, Default)]
pub struct Chain {
    /// Its log score.
    pub score: f64,
    /// Candidates on it, in the order of time.
    pub index: Vec<usize>,
    /// Periods spanned by the step to each of them; 0 for the first and after a restart.
    pub steps: Vec<usize>,
}

/// The law of a step in units of the period: everything that does not depend on the two candidates is computed once.
struct StepLaw {
    /// (k − 1)·ln p_missed + ln(1 − p_missed).
    ln_choice: [f64; MOST_PERIODS + 1],
    /// What the density adds to that at its Gaussian peak; 1/(2·k·s²).
    gauss_peak: [f64; MOST_PERIODS + 1],
    gauss_curve: [f64; MOST_PERIODS + 1],
    /// Constant of the gamma law, and its shape less one.
    gamma_const: [f64; MOST_PERIODS + 1],
    gamma_power: [f64; MOST_PERIODS + 1],
    /// 1/s².
    precision: f64,
    loose: bool,
    shortest: f64,
    longest: f64,
    /// The most that a step can add to a score, before −ln T.
    hope: f64,
}

impl StepLaw {
    fn new(law: Law) -> Self {
        let precision = 1.0 / (law.jitter * law.jitter);
        let k = |k: usize| k.max(1) as f64;
        let row = |f: &dyn Fn(f64) -> f64| std::array::from_fn(|i| f(k(i)));
        Self {
            ln_choice: row(&|k| (k - 1.0) * law.missed.ln() + (1.0 - law.missed).ln()),
            gauss_peak: row(&|k| -0.5 * k.ln() - law.jitter.ln() - LN_SQRT_TAU),
            gauss_curve: row(&|k| 0.5 * precision / k),
            gamma_const: row(&|k| k * precision * precision.ln() - ln_gamma(k * precision)),
            gamma_power: row(&|k| k * precision - 1.0),
            precision,
            loose: law.jitter > GAMMA_FROM,
            shortest: (1.0 - 5.0 * law.jitter - 0.1).max(0.08),
            longest: law.longest.min(MOST_PERIODS) as f64 + 0.5,
            hope: (-law.jitter.ln() - LN_SQRT_TAU).max(LN_TAIL) + SLACK,
        }
    }

    /// Log density of a step of `ratio` periods taken for `k`, times the period.
    #[inline]
    fn ln_density(&self, ratio: f64, k: usize) -> f64 {
        let value = if self.loose {
            self.gamma_power[k] * ln_ratio(ratio) - ratio * self.precision + self.gamma_const[k]
        } else {
            let off = ratio - k as f64;
            self.gauss_peak[k] - self.gauss_curve[k] * off * off
        };
        value.max(LN_TAIL)
    }
}

/// Steps per unit of the table of logarithms, and its range.
const LN_STEPS: usize = 512;
const LN_UNITS: usize = MOST_PERIODS + 1;

/// Natural logarithm of a step's length in periods, 0.08 to 4.5: that of the nearest place of a table, and four terms of the series from
/// there. Within 1e-10.
#[inline]
fn ln_ratio(ratio: f64) -> f64 {
    static TABLE: LazyLock<Vec<(f64, f64)>> = LazyLock::new(|| {
        let place = |k: usize| k.max(1) as f64 / LN_STEPS as f64;
        (0..=LN_STEPS * LN_UNITS).map(|k| (place(k).ln(), 1.0 / place(k))).collect()
    });
    let k = ((ratio * LN_STEPS as f64 + 0.5) as usize).min(LN_STEPS * LN_UNITS);
    let (ln, per) = TABLE[k];
    let d = ratio * per - 1.0;
    ln + d * (1.0 - d * (0.5 - d * (1.0 / 3.0 - 0.25 * d)))
}

/// What the search keeps of each candidate.
#[derive(Clone, Copy)]
struct Node {
    time_s: f64,
    /// Score less ln T: what it offers to a successor before the step; and the most that any up to here offers.
    offer: f64,
    most: f64,
    per_s: f64,
}

/// Finds the best chain. `period_s` holds the expected period at each candidate, `gain` the gain of each.
#[must_use]
pub fn best_chain(time_s: &[f64], gain: &[f64], period_s: &[f64], law: Law) -> Chain {
    let n = time_s.len();
    let step_law = StepLaw::new(law);
    let mut nodes: Vec<Node> = Vec::with_capacity(n);
    let mut back = Vec::with_capacity(n);
    let mut top = (f64::NEG_INFINITY, NOWHERE);
    let mut most = f64::NEG_INFINITY;
    let (mut expected, mut ln_expected) = (f64::NAN, f64::NAN);
    for i in 0..n {
        if period_s[i] != expected {
            expected = period_s[i];
            ln_expected = expected.ln();
        }
        let mut best = Step { score: -ln_expected, from: NOWHERE, steps: 0, ratio: 0.0 };
        if top.1 != NOWHERE && top.0 - RESTART > 0.0 {
            best = Step { score: top.0 - RESTART - ln_expected, from: top.1, ..best };
        }
        best.look_back(&step_law, &nodes, time_s[i], step_law.longest * expected * 1.25);
        let score = best.score + gain[i];
        back.push((best.from, best.steps));
        let (mut per_s, mut ln_period) = (1.0 / expected, ln_expected);
        if law.follow > 0.0 && best.steps > 0 {
            let before = 1.0 / nodes[best.from as usize].per_s;
            let now = before * (1.0 + law.follow * (best.ratio / f64::from(best.steps) - 1.0));
            let now = now.clamp(0.55 * expected, 1.8 * expected);
            (per_s, ln_period) = (1.0 / now, now.ln());
        }
        let offer = score - ln_period;
        most = f64::max(most, offer);
        nodes.push(Node { time_s: time_s[i], offer, most, per_s });
        if score > top.0 {
            top = (score, i as u32);
        }
    }
    trace(&back, top)
}

/// No candidate.
const NOWHERE: u32 = u32::MAX;

struct Step {
    score: f64,
    from: u32,
    steps: u32,
    /// Length in the predecessor's periods.
    ratio: f64,
}

impl Step {
    /// Looks at predecessors within `limit_s`, latest first, while one of them can still win.
    #[inline]
    fn look_back(&mut self, law: &StepLaw, nodes: &[Node], time_s: f64, limit_s: f64) {
        let mut needed = self.score - law.hope;
        for (from, node) in nodes.iter().enumerate().rev() {
            let length_s = time_s - node.time_s;
            if length_s > limit_s || node.most <= needed {
                break;
            }
            if node.offer > needed {
                self.consider(law, from, node.offer, length_s * node.per_s);
                needed = self.score - law.hope;
            }
        }
    }

    #[inline]
    fn consider(&mut self, law: &StepLaw, from: usize, offer: f64, ratio: f64) {
        if ratio < law.shortest || ratio >= law.longest {
            return;
        }
        let nearest = ((ratio + 0.5) as usize).max(1);
        let lowest = if law.loose && nearest > 1 { nearest - 1 } else { nearest };
        for k in lowest..=nearest {
            let base = offer + law.ln_choice[k];
            if base + law.hope <= self.score {
                continue;
            }
            let total = base + law.ln_density(ratio, k);
            if total > self.score {
                *self = Self { score: total, from: from as u32, steps: k as u32, ratio };
            }
        }
    }
}

fn trace(back: &[(u32, u32)], top: (f64, u32)) -> Chain {
    let mut chain = Chain { score: top.0, ..Chain::default() };
    let mut i = top.1;
    while i != NOWHERE {
        let (from, steps) = back[i as usize];
        chain.index.push(i as usize);
        chain.steps.push(steps as usize);
        i = from;
    }
    chain.index.reverse();
    chain.steps.reverse();
    if let Some(first) = chain.steps.first_mut() {
        *first = 0;
    }
    chain
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The slow obvious version: every chain of a small set, scored by the formula of the module's header.
    fn exhaustive(time_s: &[f64], gain: &[f64], period: f64, law: Law) -> f64 {
        let step_law = StepLaw::new(law);
        let n = time_s.len();
        let mut best = f64::NEG_INFINITY;
        for set in 1u32..(1 << n) {
            let members: Vec<usize> = (0..n).filter(|i| set >> i & 1 == 1).collect();
            let mut total = -period.ln() + gain[members[0]];
            for pair in members.windows(2) {
                let length = time_s[pair[1]] - time_s[pair[0]];
                let k = ((length / period + 0.5) as usize).max(1);
                let direct = if k <= MOST_PERIODS && length / period >= step_law.shortest {
                    step_law.ln_choice[k] + step_law.ln_density(length / period, k) - period.ln()
                } else {
                    f64::NEG_INFINITY
                };
                total += direct.max(-RESTART - period.ln()) + gain[pair[1]];
            }
            best = best.max(total);
        }
        best
    }

    #[test]
    fn the_chain_found_is_the_best_of_all_chains() {
        let mut state = 12345u64;
        let mut uniform = || {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            (state >> 33) as f64 / (1u64 << 31) as f64
        };
        for case in 0..60 {
            let mut time_s: Vec<f64> = (0..11).map(|_| uniform() * 8.0).collect();
            time_s.sort_by(f64::total_cmp);
            let gain: Vec<f64> = (0..11).map(|_| uniform() * 8.0 - 3.0).collect();
            let law = Law { jitter: 0.08, missed: 0.1, follow: 0.0, longest: MOST_PERIODS };
            let found = best_chain(&time_s, &gain, &[1.0; 11], law);
            let want = exhaustive(&time_s, &gain, 1.0, law);
            // Restarts from a score that is not the best so far are not looked for: they never win.
            assert!((found.score - want).abs() < 1e-9, "case {case}: {} against {want}", found.score);
        }
    }

    #[test]
    fn a_gap_in_a_clock_is_counted_as_missed() {
        let time_s: Vec<f64> = (0..20).filter(|n| n % 7 != 5).map(f64::from).collect();
        let n = time_s.len();
        let law = Law { jitter: 0.02, missed: 0.1, follow: 0.0, longest: MOST_PERIODS };
        let chain = best_chain(&time_s, &vec![3.0; n], &vec![1.0; n], law);
        assert_eq!(chain.index.len(), n);
        assert_eq!(chain.steps.iter().sum::<usize>(), 18);
    }
}
