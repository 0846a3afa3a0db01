//! Whether a fitted period is half or twice the gap's own, seen from the clicks.
//!
//! Evidence alone can prefer twice the period where periods alternate (a long one follows a short one, as under supply ripple
//! near half the rate): every second click is then steadier than every click. The clicks between are as large and come once
//! a period: they are firings too.

use super::hypothesis::{DENSITY, Hypothesis};
use crate::rhythm::fit::{FirstGains, Fit, Start};
use crate::rhythm::marks::MarkLaw;
use crate::rhythm::order::median;
use crate::rhythm::search;

/// A click between counts as one of the train if it reaches the median mark less this.
const AS_LARGE: f64 = 0.3;
/// Medians of the two sets of marks differ by less than this.
const ALIKE: f64 = 0.12;
/// Where between two clicks it lies, as a share of the step.
const BETWEEN: (f64, f64) = (0.25, 0.75);
/// Share of single steps with just one such click.
const MOST: f64 = 0.85;
/// Fewest single steps for a judgement.
const FEWEST: usize = 12;
/// Share of missed clicks from which a multiple of the period is tried.
const MISSES: f64 = 0.25;

/// Marks alternate if this share of neighbouring second differences have opposite signs (0.73 by chance), and by more than
/// this in the median.
const ALTERNATING: (f64, f64) = (0.93, 0.5);

/// Least standard deviation of a class of marks.
const LEAST_SD: f64 = 0.15;

/// Settles whether the period is to be halved or multiplied, in place. The error is the reason to refuse.
pub fn settle(h: &mut Hypothesis, duration_s: f64, explanation: &mut Vec<String>) -> Result<(), &'static str> {
    if let Some(start) = halved(h) {
        explanation.push(format!("equal clicks lie between: half of {:.4} ms", 1e3 * h.fit.period_s));
        let half = search::fit_whole(&h.candidates, duration_s, start, DENSITY)
            .filter(|f| 10 * f.chain.index.len() > 17 * h.fit.chain.index.len())
            .ok_or("equal clicks lie between those on the rhythm, and no rhythm holds them")?;
        h.fit = Fit { evidence: h.fit.evidence.max(half.evidence), ..half };
    }
    if let Some(start) = doubled(h)
        && let Some(fit) = search::fit_whole(&h.candidates, duration_s, start, DENSITY)
        && 5 * fit.chain.index.len() > 2 * h.fit.chain.index.len()
    {
        explanation.push(format!("large and small alternate: twice {:.4} ms", 1e3 * h.fit.period_s));
        h.fit = fit;
        return Ok(());
    }
    if h.fit.missed > MISSES {
        for times in [2.0, 3.0] {
            let start = Start { period_s: times * h.fit.period_s, ..Start::again(&h.fit) };
            if let Some(fit) = search::fit_whole(&h.candidates, duration_s, start, DENSITY)
                && fit.evidence > h.fit.evidence
                && fit.missed < MISSES
            {
                explanation.push(format!("most steps span {times:.0} periods: {:.4} ms", 1e3 * fit.period_s));
                h.fit = fit;
                return Ok(());
            }
        }
    }
    Ok(())
}

/// Another train is a share of the same gap's firings if its period goes into the first one's so nearly, and its clicks are as large
/// within this (natural log).
const GOES_INTO: f64 = 0.015;
const SAME_SIZE: f64 = 0.35;
/// The joined rhythm must explain so much more than the better of the two.
const JOINED: f64 = 1.2;

/// Joins trains that are shares of one: where a third of the clicks was taken for the rhythm, what is left keeps the same rhythm or a
/// multiple of it. Two gaps whose rates are alike by chance wander against each other: no one rhythm holds both. True if the period
/// was changed.
pub fn join(h: &mut Hypothesis, others: &[Fit], duration_s: f64, explanation: &mut Vec<String>) -> bool {
    let own = median(&h.fit.marks_on(&h.candidates));
    for other in others {
        let ratio = h.fit.period_s / other.period_s;
        let whole = ratio.round();
        let size = median(&other.marks_on(&h.candidates));
        if whole < 1.0 || (ratio / whole - 1.0).abs() > GOES_INTO || (size - own).abs() > SAME_SIZE {
            continue;
        }
        let parts: &[f64] = if whole == 1.0 { &[2.0, 3.0] } else { &[1.0, 2.0] };
        let best = parts
            .iter()
            .filter_map(|part| {
                let start = Start {
                    period_s: h.fit.period_s / (whole * part),
                    jitter: h.fit.jitter.max(other.jitter).clamp(0.03, 0.12),
                    follow: 0.15,
                    rounds: 5,
                    ..Start::again(&h.fit)
                };
                search::fit_whole(&h.candidates, duration_s, start, DENSITY)
            })
            .max_by(|a, b| a.evidence.total_cmp(&b.evidence));
        if let Some(fit) = best
            && (explains_more(&fit, &h.fit, other) || holds_both(&fit, h, own))
        {
            explanation.push(format!(
                "trains of {:.4} and {:.4} ms are one of {:.4} ms",
                1e3 * h.fit.period_s,
                1e3 * other.period_s,
                1e3 * fit.period_s
            ));
            h.fit = fit;
            return true;
        }
    }
    false
}

fn explains_more(fit: &Fit, one: &Fit, other: &Fit) -> bool {
    fit.is_proven() && fit.evidence > JOINED * one.evidence.max(other.evidence)
}

/// Clicks of a joined rhythm per click of the first, its scatter and its missed share at most.
const BOTH: (f64, f64, f64) = (1.7, 0.12, 0.25);

/// True if a tight rhythm holds the clicks of both: below 2 ms its evidence is small, because noise keeps a distance too.
fn holds_both(fit: &Fit, h: &Hypothesis, own: f64) -> bool {
    fit.chain.index.len() as f64 > BOTH.0 * h.fit.chain.index.len() as f64
        && fit.jitter < BOTH.1
        && fit.missed < BOTH.2
        && (median(&fit.marks_on(&h.candidates)) - own).abs() < SAME_SIZE
}

/// Where a fit of half the period starts, if one click as large as the train's lies between most of its clicks.
fn halved(h: &Hypothesis) -> Option<Start> {
    let (c, chain) = (&h.candidates, &h.fit.chain);
    let own = median(&h.fit.marks_on(c));
    let (mut singles, mut marks, mut places) = (0usize, Vec::new(), Vec::new());
    for (pair, _) in chain.index.windows(2).zip(&chain.steps[1..]).filter(|(_, k)| **k == 1) {
        singles += 1;
        let (from, to) = (c.time_s[pair[0]], c.time_s[pair[1]]);
        let place = |i: usize| (c.time_s[i] - from) / (to - from);
        let mut between = (pair[0] + 1..pair[1])
            .filter(|&i| c.mark[i] > own - AS_LARGE && (BETWEEN.0..BETWEEN.1).contains(&place(i)));
        if let (Some(i), None) = (between.next(), between.next()) {
            marks.push(c.mark[i]);
            places.push(place(i));
        }
    }
    if singles < FEWEST || (marks.len() as f64) < MOST * singles as f64 || (median(&marks) - own).abs() > ALIKE {
        return None;
    }
    let off_middle = places.iter().map(|p| (2.0 * p - 1.0).powi(2)).sum::<f64>() / places.len() as f64;
    Some(Start {
        period_s: 0.5 * h.fit.period_s,
        jitter: (h.fit.jitter + off_middle.sqrt()).min(0.3),
        follow: 0.05,
        gains: FirstGains::Known(h.fit.marks),
        rounds: 4,
    })
}

/// Where a fit of twice the period starts, if large and small clicks alternate: the small ones are what noise or ringing left
/// half way.
fn doubled(h: &Hypothesis) -> Option<Start> {
    let marks = h.fit.marks_on(&h.candidates);
    if marks.len() < 3 * FEWEST {
        return None;
    }
    let off: Vec<f64> = marks.windows(3).map(|m| m[1] - 0.5 * (m[0] + m[2])).collect();
    let opposite = off.windows(2).filter(|d| d[0] * d[1] < 0.0).count() as f64;
    let size = median(&off.iter().map(|d| d.abs()).collect::<Vec<_>>());
    if opposite < ALTERNATING.0 * (off.len() - 1) as f64 || size < ALTERNATING.1 {
        return None;
    }
    let class = |large: bool| -> Vec<f64> {
        marks[1..].iter().zip(&off).filter(|(_, d)| (**d > 0.0) == large).map(|(m, _)| *m).collect()
    };
    let law = |class: &[f64]| {
        let mean = class.iter().sum::<f64>() / class.len() as f64;
        let square = class.iter().map(|m| (m - mean).powi(2)).sum::<f64>() / class.len() as f64;
        (mean, square.sqrt().max(LEAST_SD))
    };
    let marks = MarkLaw { on: law(&class(true)), off: law(&class(false)) };
    Some(Start { period_s: 2.0 * h.fit.period_s, gains: FirstGains::Known(marks), rounds: 4, ..Start::again(&h.fit) })
}
