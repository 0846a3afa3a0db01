//! Fits one rhythm to marked candidates: the chain, its jitter, the share of missed clicks and the densities of the marks, in
//! turns (expectation–maximisation with the best chain in place of the expectation).
//!
//! The evidence of a fit is the log likelihood of the candidates under it over that of the same candidates with the same marks
//! and no rhythm (independent arrivals). At short periods maxima of band-limited noise keep a distance from each other, which is
//! no rhythm: both sides are then given the regularity of a gamma law.

use super::local::local_period;
use super::marks::{Binned, Density, MarkLaw};
use super::order::median;
use super::path::{Chain, Law, MOST_PERIODS, best_chain};
use crate::clicks::Candidates;
use crate::clicks::candidates::nth_largest;
use statrs::distribution::{ContinuousCDF, Gamma};
use statrs::function::gamma::ln_gamma;

/// A fitted rhythm.
#[derive(Debug, Clone)]
pub struct Fit {
    /// Evidence, nats.
    pub evidence: f64,
    /// Evidence per firing, nats.
    pub each: f64,
    /// Candidates on the rhythm.
    pub chain: Chain,
    /// Median local period, s.
    pub period_s: f64,
    /// Relative scatter of single periods (timing noise in it).
    pub jitter: f64,
    /// Share of firings without a candidate.
    pub missed: f64,
    /// Share of the window's time that the chain covers.
    pub cover: f64,
    /// Where the marks of candidates on and off the rhythm lie.
    pub marks: MarkLaw,
}

/// Firings per stretch, evidence per firing (nats) and cover from which a train is believed though it is silent most of the time.
const SOLID: (f64, f64, f64) = (25.0, 2.0, 0.08);
/// Cover from which it needs no such excuse.
const COVER: f64 = 0.4;

/// A tight rhythm that needs no more proof: most scatter, least evidence in all and per firing (nats).
const PROVEN: (f64, f64, f64) = (0.12, 60.0, 0.8);

impl Fit {
    /// True if the rhythm is tight and beyond chance: a loose one with more evidence in all, as the spacing of noise maxima gives
    /// over many of them, does not displace it.
    #[must_use]
    pub fn is_proven(&self) -> bool {
        self.jitter <= PROVEN.0 && self.evidence >= PROVEN.1 && self.each >= PROVEN.2 && self.fills_its_time()
    }

    /// True if the rhythm is loose.
    #[must_use]
    pub fn is_loose(&self) -> bool {
        self.jitter > PROVEN.0
    }

    /// Times of the candidates on the rhythm, s.
    #[must_use]
    pub fn times_s(&self, c: &Candidates) -> Vec<f64> {
        self.chain.index.iter().map(|&i| c.time_s[i]).collect()
    }

    /// Marks of the candidates on the rhythm.
    #[must_use]
    pub fn marks_on(&self, c: &Candidates) -> Vec<f64> {
        self.chain.index.iter().map(|&i| c.mark[i]).collect()
    }

    /// Where the marks of all candidates lie that are on the rhythm and off it.
    #[must_use]
    pub fn marks_among(&self, c: &Candidates) -> MarkLaw {
        let mut on = vec![false; c.len()];
        self.chain.index.iter().for_each(|&i| on[i] = true);
        MarkLaw::of(&c.mark, &on)
    }

    /// True if the train fills the time, or fires in long stretches of strong evidence with silence between.
    #[must_use]
    pub fn fills_its_time(&self) -> bool {
        let n = self.chain.index.len() as f64;
        let stretches = self.chain.steps.iter().filter(|k| **k == 0).count().max(1) as f64;
        self.cover >= COVER || (n / stretches >= SOLID.0 && self.each >= SOLID.1 && self.cover >= SOLID.2)
    }
}

/// Where a fit starts.
#[derive(Debug, Clone, Copy)]
pub struct Start {
    /// Period, s.
    pub period_s: f64,
    /// Relative jitter.
    pub jitter: f64,
    /// How fast the period follows in the first round.
    pub follow: f64,
    /// Where the first gains come from.
    pub gains: FirstGains,
    /// Rounds.
    pub rounds: usize,
}

/// Gains of candidates before a chain is known.
#[derive(Debug, Clone, Copy)]
pub enum FirstGains {
    /// A soft threshold a little under the mark of rank 0.9·duration/T.
    Soft,
    /// A steep threshold at the mark of rank duration/T (loose trains).
    Steep,
    /// From the marks of an earlier fit.
    Known(MarkLaw),
}

impl Start {
    /// A start from what an earlier fit found: tight trains follow the period, loose ones would wander.
    #[must_use]
    pub fn again(fit: &Fit) -> Self {
        let loose = fit.jitter > super::path::GAMMA_FROM;
        Self {
            period_s: fit.period_s,
            jitter: fit.jitter,
            follow: if loose { 0.0 } else { 0.1 },
            gains: FirstGains::Known(fit.marks),
            rounds: 3,
        }
    }
}

/// Share of missed clicks where there is no sign of any, and the periods from which a step may be taken for two.
const NONE_MISSED: f64 = 1e-7;
const LONG: f64 = 1.5;

/// Least jitter allowed for where a train is followed: its rate may drift from what was learnt.
const FOLLOW_JITTER: f64 = 0.04;

impl Start {
    /// A start for following a train into a longer stretch.
    #[must_use]
    pub fn onward(fit: &Fit) -> Self {
        let again = Self::again(fit);
        if again.follow == 0.0 {
            return again;
        }
        Self { jitter: again.jitter.max(FOLLOW_JITTER), follow: 0.15, rounds: 4, ..again }
    }
}

/// Deviations by which marks on a loose rhythm stand above those off it for their gains to be held.
const APART: f64 = 6.0;

impl Start {
    /// True if known gains are not learnt anew: a loose train whose clicks stand clear of noise would take noise into its long periods,
    /// and learn that noise belongs to it.
    fn holds_gains(&self) -> bool {
        match self.gains {
            FirstGains::Known(marks) if self.jitter > super::path::GAMMA_FROM => {
                marks.on.0 - marks.off.0 > APART * marks.on.1.max(0.5 * marks.off.1)
            }
            _ => false,
        }
    }
}

/// Fewest firings of a chain that is looked at.
const FEWEST: usize = 5;

/// What a round gives: the chain, its steps, which candidates are on it, and the densities of the marks on and off it.
type Round = (Chain, Steps, Vec<bool>, (Density, Density));

/// A fit whose chain is the same as in the round before, and whose jitter changed by less than this share, has come to its end.
const SETTLED: f64 = 0.02;

/// Fits a rhythm; none if no chain of five candidates is found.
#[must_use]
pub fn fit(c: &Candidates, duration_s: f64, start: Start) -> Option<Fit> {
    if c.len() < FEWEST {
        return None;
    }
    let binned = Binned::new(&c.mark);
    let (mut gain, mut off_rate) = first_gain(c, duration_s, start);
    let held = start.holds_gains();
    let mut law = Law { jitter: start.jitter, missed: 0.05, follow: start.follow, longest: MOST_PERIODS };
    let mut periods = vec![start.period_s; c.len()];
    let mut last: Option<Round> = None;
    for round in 0..start.rounds {
        let mut chain = chain_of_hopeful(c, &gain, off_rate.ln(), &periods, law, round == 0);
        if chain.index.len() < FEWEST {
            return None;
        }
        periods = local_period(c, &chain, start.period_s);
        law.follow = if round >= 1 { 0.0 } else { start.follow };
        let steps = Steps::of(c, &chain, &periods);
        let before = law.jitter;
        law.jitter = steps.jitter(law.jitter);
        law.missed = if steps.long_by_chance(law.jitter) { NONE_MISSED } else { steps.missed() };
        let mut on = vec![false; c.len()];
        chain.index.iter().for_each(|&i| on[i] = true);
        let densities = (binned.density(|i| on[i]), binned.density(|i| !on[i]));
        let off = (c.len() - chain.index.len()).max(1) as f64;
        let learnt = binned.gain(&densities.0, &densities.1);
        if held {
            // The evidence is that of the marks as they are.
            chain.score += chain.index.iter().map(|&i| learnt[i] - gain[i]).sum::<f64>();
        } else {
            gain = learnt;
        }
        off_rate = (off / duration_s).max(0.02 * chain.index.len() as f64 / duration_s);
        let settled = round > 0
            && (law.jitter / before - 1.0).abs() < SETTLED
            && last.as_ref().is_some_and(|(before, ..): &Round| before.index == chain.index);
        last = Some((chain, steps, on, densities));
        if settled {
            break;
        }
    }
    let (chain, steps, on, densities) = last?;
    let evidence = evidence(c, duration_s, &binned, &chain, &on, &densities, off_rate, &steps);
    Some(Fit {
        evidence,
        each: evidence / chain.index.len() as f64,
        period_s: median(&steps.period),
        jitter: law.jitter,
        missed: law.missed,
        cover: steps.span() / duration_s,
        marks: MarkLaw::of(&c.mark, &on),
        chain,
    })
}

/// A candidate this many nats worse than leaving its firing out as missed is not looked at.
const HOPELESS: f64 = 4.0;

/// The best chain through the candidates that can be on one; indices refer to all. The first round looks at all.
fn chain_of_hopeful(c: &Candidates, gain: &[f64], ln_off: f64, periods: &[f64], law: Law, all: bool) -> Chain {
    // The most that a step's density can add is that of its peak, about −ln(2.5·s·T).
    let least = law.missed.ln() + (2.5 * law.jitter).ln() - HOPELESS;
    let keep: Vec<usize> = (0..c.len()).filter(|&i| all || gain[i] - ln_off >= least + periods[i].ln()).collect();
    let time_s: Vec<f64> = keep.iter().map(|&i| c.time_s[i]).collect();
    let net: Vec<f64> = keep.iter().map(|&i| gain[i] - ln_off).collect();
    let period_s: Vec<f64> = keep.iter().map(|&i| periods[i]).collect();
    let mut chain = best_chain(&time_s, &net, &period_s, law);
    chain.index.iter_mut().for_each(|i| *i = keep[*i]);
    chain
}

/// Gains before any chain is known, and the rate of candidates off the rhythm.
fn first_gain(c: &Candidates, duration_s: f64, start: Start) -> (Vec<f64>, f64) {
    let expected = duration_s / start.period_s;
    let n = c.len() as f64;
    let soft = |share: f64| (n - expected).max(share * expected) / duration_s;
    match start.gains {
        FirstGains::Steep => {
            let threshold = nth_largest(&c.mark, expected as usize);
            (c.mark.iter().map(|m| (6.0 * (m - threshold)).clamp(-6.0, 12.0)).collect(), soft(0.2))
        }
        FirstGains::Soft => {
            let threshold = nth_largest(&c.mark, (0.9 * expected) as usize) + 0.7f64.ln();
            (c.mark.iter().map(|m| (4.0 * (m - threshold)).clamp(-4.0, 3.0)).collect(), soft(0.3))
        }
        FirstGains::Known(marks) => (c.mark.iter().map(|m| marks.gain(*m)).collect(), soft(0.2)),
    }
}

/// The steps of a chain, restarts left out.
struct Steps {
    length: Vec<f64>,
    count: Vec<f64>,
    period: Vec<f64>,
}

impl Steps {
    fn of(c: &Candidates, chain: &Chain, periods: &[f64]) -> Self {
        let mut me = Self { length: Vec::new(), count: Vec::new(), period: Vec::new() };
        for (w, &k) in chain.index.windows(2).zip(&chain.steps[1..]) {
            if k > 0 {
                me.length.push(c.time_s[w[1]] - c.time_s[w[0]]);
                me.count.push(k as f64);
                me.period.push(0.5 * (periods[w[0]] + periods[w[1]]));
            }
        }
        me
    }

    fn residuals(&self) -> Vec<f64> {
        self.length.iter().zip(&self.count).zip(&self.period).map(|((d, k), t)| (d - k * t) / k.sqrt() / t).collect()
    }

    /// Relative jitter for the next round: 1.1 × the rms of residuals within five robust deviations, falling slowly.
    fn jitter(&self, before: f64) -> f64 {
        let z = self.residuals();
        if z.is_empty() {
            return before;
        }
        let centre = median(&z);
        let robust = 1.4826 * median(&z.iter().map(|v| (v - centre).abs()).collect::<Vec<_>>());
        let (sum, n) =
            z.iter().filter(|v| v.abs() < 5.0 * robust + 1e-9).fold((0.0, 0usize), |(s, n), v| (s + v * v, n + 1));
        let rms = if n > 3 { (sum / n as f64).sqrt() } else { robust };
        let seen = rms.max(robust).max(3e-6 / median(&self.period)).max(5e-4);
        (1.1 * seen).max(0.3 * before).min(0.6)
    }

    /// True if a loose train's steps of two periods and more are no more than its own law gives long periods.
    fn long_by_chance(&self, jitter: f64) -> bool {
        if jitter <= super::path::GAMMA_FROM {
            return false;
        }
        let shape = 1.0 / (jitter * jitter);
        let share = Gamma::new(shape, shape).map_or(0.0, |law| law.sf(LONG));
        let double = self.count.iter().filter(|k| **k > 1.0).count() as f64;
        let chance = share * self.count.len() as f64;
        double < chance + 3.0 * chance.sqrt() + 2.0
    }

    fn missed(&self) -> f64 {
        let missed: f64 = self.count.iter().map(|k| k - 1.0).sum();
        ((missed + 0.5) / (missed + self.count.len() as f64 + 1.0)).clamp(5e-4, 0.35)
    }

    fn span(&self) -> f64 {
        self.count.iter().zip(&self.period).map(|(k, t)| k * t).sum()
    }
}

#[allow(clippy::too_many_arguments, reason = "one formula over everything that the last round knows")]
fn evidence(
    c: &Candidates,
    duration_s: f64,
    binned: &Binned,
    chain: &Chain,
    on: &[bool],
    densities: &(Density, Density),
    off_rate: f64,
    steps: &Steps,
) -> f64 {
    let (n, n_on) = (c.len() as f64, chain.index.len() as f64);
    let (rate_on, rate_off) = (n_on / duration_s, (n - n_on) / duration_s);
    let mut null = -n;
    let mut with = chain.score - off_rate * duration_s;
    for ((count, f_on), f_off) in binned.counts().iter().zip(&densities.0).zip(&densities.1) {
        null += count * (rate_on * f_on + rate_off * f_off + 1e-300).ln();
        with += count * (off_rate * f_off).ln();
    }
    if steps.period.is_empty() {
        return f64::NEG_INFINITY;
    }
    if median(&steps.period) < 2e-3 {
        let gaps: Vec<f64> = c.time_s.windows(2).map(|w| w[1] - w[0]).collect();
        let off_gaps: Vec<f64> =
            gaps.iter().zip(on.windows(2)).filter(|(_, o)| !o[0] && !o[1]).map(|(g, _)| *g).collect();
        with += regularity(&off_gaps);
        null += regularity(&gaps);
    }
    with - null
}

/// How much more likely gaps are under a gamma law (shape up to 18: maxima of band-limited noise) than under the exponential.
fn regularity(gaps: &[f64]) -> f64 {
    if gaps.len() < 5 {
        return 0.0;
    }
    let n = gaps.len() as f64;
    let mean = gaps.iter().sum::<f64>() / n;
    let (mut ln_sum, mut sum) = (0.0, 0.0);
    for g in gaps {
        let x = (g / mean).max(1e-3);
        ln_sum += x.ln();
        sum += x;
    }
    [1.0, 1.5, 2.0, 3.0, 4.0, 6.0, 8.0, 12.0, 18.0]
        .iter()
        .map(|&k: &f64| n * (k * k.ln() - ln_gamma(k)) + (k - 1.0) * ln_sum - k * sum + sum)
        .fold(f64::NEG_INFINITY, f64::max)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_jittered_clock_among_noise_is_fitted() {
        let mut state = 7u64;
        let mut uniform = || {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            (state >> 33) as f64 / (1u64 << 31) as f64
        };
        let mut all: Vec<(f64, f64)> =
            (0..400).map(|n| (0.01 * f64::from(n) + 4e-4 * (uniform() - 0.5), 2.0 + uniform())).collect();
        all.extend((0..4000).map(|_| (uniform() * 4.0, uniform())));
        all.sort_by(|a, b| a.0.total_cmp(&b.0));
        let c = Candidates {
            time_s: all.iter().map(|a| a.0).collect(),
            mark: all.iter().map(|a| a.1).collect(),
            scale: 1.0,
        };
        let start = Start { period_s: 0.0103, jitter: 0.07, follow: 0.15, gains: FirstGains::Soft, rounds: 6 };
        let fitted = fit(&c, 4.0, start).unwrap();
        assert!((fitted.period_s / 0.01 - 1.0).abs() < 0.003 && fitted.evidence > 1_000.0);
        assert!(fitted.chain.index.len().abs_diff(400) < 4, "{}", fitted.chain.index.len());
        assert!((0.010..0.03).contains(&fitted.jitter), "{}", fitted.jitter);
    }
}
