//! Trains beside the one that was found: the search is repeated on the candidates that it leaves over.

use super::hypothesis::{DENSITY, Hypothesis};
use crate::clicks::Candidates;
use crate::estimate::Estimate;
use crate::rhythm::OtherTrain;
use crate::rhythm::fit::{Fit, Start};
use crate::rhythm::order::median;
use crate::rhythm::search;
use crate::rhythm::statistics::robust;

/// Most trains looked for beside the first.
const MOST: usize = 2;
/// Candidates within this of a click on the rhythm belong to it, s and periods.
const OWN_S: f64 = 0.5e-3;
const OWN_PERIODS: f64 = 0.2;
/// Candidates within this of another train's click are that click, s.
const SAME_S: f64 = 0.15e-3;
/// Natural log of the ratio from which clicks count as larger.
const LARGER: f64 = 0.05;
/// Fewest candidates left over that stand out of the noise (natural log of sigmas) for a search to be worth its time.
const FEWEST: usize = 12;
const STANDS_OUT: f64 = 1.6;
/// Marks this far below that are looked at too.
const SPREAD: f64 = 0.7;
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
        let Some(fit) = best_of(&h.candidates, &left_over(&taken), duration_s, median_mark(&h.candidates, &h.fit))
        else {
            break;
        };
        claim(&mut taken, &h.candidates, &fit);
        found.push(fit);
    }
    found
}

fn best_of(c: &Candidates, rest: &[usize], duration_s: f64, typical: f64) -> Option<Fit> {
    let threshold = STANDS_OUT.max(typical - FAR_BELOW);
    if rest.iter().filter(|&&i| c.mark[i] > threshold).count() < FEWEST {
        return None;
    }
    // A train whose median mark is above the threshold has few clicks far below it.
    let large: Vec<usize> = rest.iter().copied().filter(|&i| c.mark[i] > threshold - SPREAD).collect();
    let part = c.pick(&large);
    let best = search::rhythms(&part, duration_s, false, search::SHORTEST_SLOW_S, None)
        .into_iter()
        .max_by(|a, b| a.evidence.total_cmp(&b.evidence))?;
    let fit = search::fit_among(c, rest, duration_s, Start::again(&best), DENSITY)?;
    let n = fit.chain.index.len() as f64;
    let sound =
        fit.evidence > EVIDENCE && fit.evidence > EVIDENCE_PER_FIRING * n && fit.cover > COVER && fit.jitter < LOOSEST;
    (sound && median_mark(c, &fit) > threshold).then_some(fit)
}

/// How many candidates stand clear of the noise and belong to neither the hypothesis nor the trains beside it.
#[must_use]
pub fn unexplained(h: &Hypothesis, others: &[Fit]) -> usize {
    let c = &h.candidates;
    let mut taken = vec![false; c.len()];
    claim(&mut taken, c, &h.fit);
    others.iter().for_each(|other| claim(&mut taken, c, other));
    let threshold = STANDS_OUT.max(median_mark(c, &h.fit) - FAR_BELOW);
    left_over(&taken).into_iter().filter(|&i| c.mark[i] > threshold).count()
}

fn left_over(taken: &[bool]) -> Vec<usize> {
    (0..taken.len()).filter(|&i| !taken[i]).collect()
}

/// Follows a train and those beside it through candidates found in another stretch: the train among what is larger than the
/// others' clicks, the others among what is left, then the train again among what the others leave.
#[must_use]
pub fn follow(c: &Candidates, duration_s: f64, lead: &Fit, others: &[Fit]) -> Option<(Fit, Vec<Fit>)> {
    if others.is_empty() {
        return search::fit_whole(c, duration_s, Start::onward(lead), DENSITY).map(|fit| (fit, Vec::new()));
    }
    let between = others.iter().map(|o| o.marks.on.0).fold(f64::NEG_INFINITY, f64::max);
    let threshold = if lead.marks.on.0 - between > LARGER { 0.5 * (lead.marks.on.0 + between) } else { f64::MIN };
    let large: Vec<usize> = (0..c.len()).filter(|&i| c.mark[i] > threshold).collect();
    let first = search::fit_among(c, &large, duration_s, Start::onward(lead), DENSITY)?;
    let mut taken = vec![false; c.len()];
    claim(&mut taken, c, &first);
    let mut followed = Vec::new();
    for other in others {
        if let Some(fit) = search::fit_among(c, &left_over(&taken), duration_s, Start::onward(other), DENSITY) {
            claim(&mut taken, c, &fit);
            followed.push(fit);
        }
    }
    let free = free_of(c, &times_of(c, &followed));
    let fit = search::fit_among(c, &free, duration_s, Start::again(&first), DENSITY)?;
    Some((fit, followed))
}

/// Times of the clicks of some trains, s, sorted.
#[must_use]
pub fn times_of(c: &Candidates, fits: &[Fit]) -> Vec<f64> {
    let mut all: Vec<f64> = fits.iter().flat_map(|f| f.times_s(c)).collect();
    all.sort_by(f64::total_cmp);
    all
}

/// The candidates that are not at one of the times `foreign_s` (sorted).
#[must_use]
pub fn free_of(c: &Candidates, foreign_s: &[f64]) -> Vec<usize> {
    let is_foreign = |t: f64| {
        let k = foreign_s.partition_point(|&f| f < t - SAME_S);
        foreign_s.get(k).is_some_and(|&f| f <= t + SAME_S)
    };
    (0..c.len()).filter(|&i| !is_foreign(c.time_s[i])).collect()
}

/// Which of the other trains has clearly larger clicks than the hypothesis, if any.
#[must_use]
pub fn largest(h: &Hypothesis, others: &[Fit]) -> Option<usize> {
    let own = median_mark(&h.candidates, &h.fit) + LARGER;
    (0..others.len())
        .map(|i| (i, median_mark(&h.candidates, &others[i])))
        .filter(|(_, m)| *m > own)
        .max_by(|a, b| a.1.total_cmp(&b.1))
        .map(|(i, _)| i)
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
    median(&fit.marks_on(c))
}

/// The figures of the trains beside a hypothesis.
#[must_use]
pub fn figures_of(h: &Hypothesis, others: &[Fit]) -> Vec<OtherTrain> {
    let mark = median_mark(&h.candidates, &h.fit);
    others.iter().filter_map(|f| figures(&h.candidates, f, mark)).collect()
}

/// The figures of a weaker train; `mark` is the median mark of the measured one.
fn figures(c: &Candidates, fit: &Fit, mark: f64) -> Option<OtherTrain> {
    let time_s = fit.times_s(c);
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
