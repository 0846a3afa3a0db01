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

/// Longest step, periods.
pub const MOST_PERIODS: usize = 4;
/// Cost of beginning anew after a drop-out, nats: about one false restart in 160 000 chances.
const RESTART: f64 = 12.0;
/// Density of a step that no jitter explains, in units of 1/T.
const TAIL: f64 = 2e-3;
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

struct StepLaw {
    jitter: f64,
    ln_choice: [f64; MOST_PERIODS + 2],
    /// −½·ln k − ln s − ln √2π of the Gaussian law.
    gauss_const: [f64; MOST_PERIODS + 2],
    /// −ln Γ(k/s²) of the gamma law.
    gamma_const: [f64; MOST_PERIODS + 2],
    ln_tail: f64,
    loose: bool,
    shortest: f64,
    /// The most that a step can add to a score, before −ln T.
    hope: f64,
}

impl StepLaw {
    fn new(law: Law) -> Self {
        let mut me = Self {
            jitter: law.jitter,
            ln_choice: [0.0; MOST_PERIODS + 2],
            gauss_const: [0.0; MOST_PERIODS + 2],
            gamma_const: [0.0; MOST_PERIODS + 2],
            ln_tail: TAIL.ln(),
            loose: law.jitter > GAMMA_FROM,
            shortest: (1.0 - 5.0 * law.jitter - 0.1).max(0.08),
            hope: (-law.jitter.ln() - LN_SQRT_TAU).max(TAIL.ln()) + SLACK,
        };
        for k in 1..MOST_PERIODS + 2 {
            let kf = k as f64;
            me.ln_choice[k] = (kf - 1.0) * law.missed.ln() + (1.0 - law.missed).ln();
            me.gauss_const[k] = -0.5 * kf.ln() - law.jitter.ln() - LN_SQRT_TAU;
            me.gamma_const[k] = -ln_gamma(kf / (law.jitter * law.jitter));
        }
        me
    }

    /// Log density of a step of `length` over `k` periods of `period`.
    fn ln_density(&self, length: f64, k: usize, period: f64, ln_period: f64) -> f64 {
        let kf = k as f64;
        let tail = self.ln_tail - ln_period;
        let value = if self.loose {
            let s2 = self.jitter * self.jitter;
            let shape = kf / s2;
            let x = length / (s2 * period);
            (shape - 1.0) * x.ln() - x + self.gamma_const[k] - s2.ln() - ln_period
        } else {
            let z = (length - kf * period) / (self.jitter * period);
            -0.5 * z * z / kf + self.gauss_const[k] - ln_period
        };
        value.max(tail)
    }
}

/// Finds the best chain. `period_s` holds the expected period at each candidate, `gain` the gain of each.
#[must_use]
pub fn best_chain(time_s: &[f64], gain: &[f64], period_s: &[f64], law: Law) -> Chain {
    let n = time_s.len();
    let step_law = StepLaw::new(law);
    let mut score = vec![0.0f64; n];
    let mut back = vec![(usize::MAX, 0usize); n];
    let mut period = vec![0.0f64; n];
    let mut ln_period = vec![0.0f64; n];
    // The most that a predecessor offers before its step, and the most up to each: older ones that cannot win end the search.
    let mut offer = vec![0.0f64; n];
    let mut most = vec![f64::NEG_INFINITY; n];
    let mut top = (f64::NEG_INFINITY, usize::MAX);
    for i in 0..n {
        let expected = period_s[i];
        let ln_expected = expected.ln();
        let mut best = Step { score: -ln_expected, from: usize::MAX, steps: 0, period: expected };
        if top.1 != usize::MAX && top.0 - RESTART - ln_expected > best.score {
            best = Step { score: top.0 - RESTART - ln_expected, from: top.1, steps: 0, period: expected };
        }
        let limit = (MOST_PERIODS as f64 + 0.5) * expected * 1.25;
        for j in (0..i).rev() {
            let length = time_s[i] - time_s[j];
            if length > limit || most[j] + step_law.hope <= best.score {
                break;
            }
            if offer[j] + step_law.hope > best.score {
                best.consider(&step_law, law.follow, j, length, score[j], period[j], ln_period[j]);
            }
        }
        score[i] = best.score + gain[i];
        back[i] = (best.from, best.steps);
        period[i] = if law.follow > 0.0 && best.steps > 0 {
            best.period.clamp(0.55 * expected, 1.8 * expected)
        } else {
            expected
        };
        ln_period[i] = if period[i] == expected { ln_expected } else { period[i].ln() };
        offer[i] = score[i] - ln_period[i];
        most[i] = if i > 0 { most[i - 1].max(offer[i]) } else { offer[i] };
        if score[i] > top.0 {
            top = (score[i], i);
        }
    }
    trace(&back, top)
}

struct Step {
    score: f64,
    from: usize,
    steps: usize,
    period: f64,
}

impl Step {
    #[allow(clippy::too_many_arguments, reason = "the innermost step of the search, called per pair of candidates")]
    #[inline]
    fn consider(
        &mut self,
        law: &StepLaw,
        follow: f64,
        from: usize,
        length: f64,
        score: f64,
        period: f64,
        ln_period: f64,
    ) {
        let ratio = length / period;
        if ratio < law.shortest || ratio >= MOST_PERIODS as f64 + 0.5 {
            return;
        }
        let nearest = ((ratio + 0.5) as usize).max(1);
        let lowest = if law.loose && nearest > 1 { nearest - 1 } else { nearest };
        for k in lowest..=nearest {
            let base = law.ln_choice[k] + score;
            if base - ln_period + law.hope <= self.score {
                continue;
            }
            let total = base + law.ln_density(length, k, period, ln_period);
            if total > self.score {
                *self = Self { score: total, from, steps: k, period: period + follow * (length / k as f64 - period) };
            }
        }
    }
}

fn trace(back: &[(usize, usize)], top: (f64, usize)) -> Chain {
    let mut chain = Chain { score: top.0, ..Chain::default() };
    let mut i = top.1;
    while i != usize::MAX {
        chain.index.push(i);
        chain.steps.push(back[i].1);
        i = back[i].0;
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
                    step_law.ln_choice[k] + step_law.ln_density(length, k, period, period.ln())
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
            let law = Law { jitter: 0.08, missed: 0.1, follow: 0.0 };
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
        let law = Law { jitter: 0.02, missed: 0.1, follow: 0.0 };
        let chain = best_chain(&time_s, &vec![3.0; n], &vec![1.0; n], law);
        assert_eq!(chain.index.len(), n);
        assert_eq!(chain.steps.iter().sum::<usize>(), 18);
    }
}
