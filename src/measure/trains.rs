//! Trains beside the one that was found: the search is repeated on the candidates that it leaves over.

use super::hypothesis::{DENSITY, Hypothesis};
use crate::clicks::Candidates;
use crate::estimate::Estimate;
use crate::rhythm::OtherTrain;
use crate::rhythm::fit::{Fit, Start, median};
use crate::rhythm::search;
use crate::rhythm::statistics::robust;

/// Most trains looked for beside the first.
const MOST: usize = 2;
/// Candidates within this of a click on the rhythm belong to it, s and periods.
const OWN_S: f64 = 0.5e-3;
const OWN_PERIODS: f64 = 0.2;
/// Fewest candidates left over that stand out of the noise (natural log of sigmas) for a search to be worth its time.
const FEWEST: usize = 12;
const STANDS_OUT: f64 = 1.6;
/// Marks this much under the train's median are its noise and ringing.
const FAR_BELOW: f64 = 2.5;
/// A second train needs this evidence, nats, in all and per firing, and this cover.
const EVIDENCE: f64 = 60.0;
const EVIDENCE_PER_FIRING: f64 = 0.7;
const COVER: f64 = 0.6;
/// Loosest second train: beyond, leftovers of the first look like one.
const LOOSEST: f64 = 0.2;

/// Looks for trains beside a hypothesis; the fits refer to its candidates.
#[must_use]
pub fn beside(h: &Hypothesis, duration_s: f64) -> Vec<Fit> {
    let mut taken = vec![false; h.candidates.len()];
    claim(&mut taken, &h.candidates, &h.fit);
    let mut found = Vec::new();
    while found.len() < MOST {
        let rest: Vec<usize> = (0..taken.len()).filter(|&i| !taken[i]).collect();
        let Some(fit) = best_of(&h.candidates, &rest, duration_s, median_mark(&h.candidates, &h.fit)) else { break };
        claim(&mut taken, &h.candidates, &fit);
        found.push(fit);
    }
    found
}

fn best_of(c: &Candidates, rest: &[usize], duration_s: f64, typical: f64) -> Option<Fit> {
    let part = c.pick(rest);
    let threshold = STANDS_OUT.max(typical - FAR_BELOW);
    if part.mark.iter().filter(|m| **m > threshold).count() < FEWEST {
        return None;
    }
    let best =
        search::rhythms(&part, duration_s, false).into_iter().max_by(|a, b| a.evidence.total_cmp(&b.evidence))?;
    let mut fit = search::fit_whole(&part, duration_s, Start::again(&best), DENSITY)?;
    let n = fit.chain.index.len() as f64;
    let sound =
        fit.evidence > EVIDENCE && fit.evidence > EVIDENCE_PER_FIRING * n && fit.cover > COVER && fit.jitter < LOOSEST;
    fit.chain.index.iter_mut().for_each(|i| *i = rest[*i]);
    (sound && median_mark(c, &fit) > threshold).then_some(fit)
}

fn claim(taken: &mut [bool], c: &Candidates, fit: &Fit) {
    let reach = OWN_S.min(OWN_PERIODS * fit.period_s);
    for &i in &fit.chain.index {
        let t = c.time_s[i];
        let from = c.time_s.partition_point(|&s| s < t - reach);
        let to = c.time_s.partition_point(|&s| s <= t + reach);
        taken[from..to].iter_mut().for_each(|x| *x = true);
    }
}

/// Median mark of a train.
#[must_use]
pub fn median_mark(c: &Candidates, fit: &Fit) -> f64 {
    median(&fit.chain.index.iter().map(|&i| c.mark[i]).collect::<Vec<_>>())
}

/// The figures of a weaker train; `mark` is the median mark of the measured one.
#[must_use]
pub fn figures(c: &Candidates, fit: &Fit, mark: f64) -> Option<OtherTrain> {
    let time_s: Vec<f64> = fit.chain.index.iter().map(|&i| c.time_s[i]).collect();
    let (number, stretches) = super::train::number(&time_s, &fit.chain.steps, fit.period_s);
    let (mut steps, mut span) = (0.0, 0.0);
    for r in stretches.iter().filter(|r| r.len() > 1) {
        steps += (number[r.end - 1] - number[r.start]) as f64;
        span += time_s[r.end - 1] - time_s[r.start];
    }
    if steps < 4.0 {
        return None;
    }
    let period_s = span / steps;
    let scatter = robust::scatter(&time_s, &number);
    Some(OtherTrain {
        firing_rate_hz: Estimate::normal(period_s, scatter / steps.sqrt()).reciprocal(),
        period_jitter_s: Some(Estimate::normal(scatter, scatter / (2.0 * steps).sqrt())),
        relative_size: (median_mark(c, fit) - mark).exp(),
    })
}
