//! A train of one window: click times with firing numbers, in stretches.

use super::hypothesis::Hypothesis;
use super::trains;
use crate::estimate::Estimate;
use crate::firing::{Event, EventKind};
use crate::rhythm::OtherTrain;
use crate::rhythm::fit::Fit;
use crate::rhythm::order::median;
use crate::rhythm::statistics::NoiseRange;
use std::ops::Range;

/// A drop-out of more periods than this ends a stretch; a shorter one counts as missed clicks.
pub const LONGEST_MISS: f64 = 8.5;

/// A train found in one window.
#[derive(Debug, Clone)]
pub struct Train {
    /// Click times from the start of the recording, s.
    pub time_s: Vec<f64>,
    /// Firing numbers.
    pub number: Vec<i64>,
    /// Click sizes, full scale.
    pub size: Vec<f32>,
    /// Stretches of clicks without a drop-out, as ranges of indices.
    pub stretches: Vec<Range<usize>>,
    /// Times and sizes of clicks off the rhythm.
    pub extra: Vec<(f64, f32)>,
    /// Timing noise to expect.
    pub noise: Option<NoiseRange>,
    /// Jitter read from the phase of the line, where clicks overlap, s.
    pub phase_jitter_s: Option<Estimate>,
    /// Mean local period, s.
    pub period_s: f64,
    /// Weaker trains beside it.
    pub others: Vec<OtherTrain>,
    /// Clear clicks in the window that belong to none of them.
    pub unexplained: usize,
}

/// Firing numbers of a chain, and its stretches.
#[must_use]
pub fn number(time_s: &[f64], steps: &[usize], period_s: f64) -> (Vec<i64>, Vec<Range<usize>>) {
    let mut numbers = Vec::with_capacity(time_s.len());
    let mut stretches = Vec::new();
    let (mut n, mut from) = (0i64, 0);
    for i in 0..time_s.len() {
        if i > 0 {
            if steps[i] > 0 {
                n += steps[i] as i64;
            } else {
                let periods = (time_s[i] - time_s[i - 1]) / period_s;
                n += (periods.round() as i64).max(1);
                if periods > LONGEST_MISS {
                    stretches.push(from..i);
                    from = i;
                }
            }
        }
        numbers.push(n);
    }
    stretches.push(from..time_s.len());
    (numbers, stretches)
}

impl Train {
    /// The train of separate clicks of a hypothesis, with the trains heard beside it.
    #[must_use]
    pub fn of_clicks(
        h: &Hypothesis,
        others: &[Fit],
        time_s: Vec<f64>,
        noise: NoiseRange,
        x: &[f32],
        rate_hz: f64,
    ) -> Self {
        let (number, stretches) = number(&time_s, &h.fit.chain.steps, h.fit.period_s);
        let foreign_s = trains::times_of(&h.candidates, others);
        let extra = extras(h, &foreign_s).into_iter().map(|t| (t, size_at(x, t * rate_hz, rate_hz))).collect();
        Self {
            size: time_s.iter().map(|t| size_at(x, t * rate_hz, rate_hz)).collect(),
            time_s,
            number,
            stretches,
            extra,
            noise: Some(noise),
            phase_jitter_s: None,
            period_s: h.fit.period_s,
            others: trains::figures_of(h, others),
            unexplained: trains::unexplained(h, others),
        }
    }

    /// The train without its slips: their clicks are off the rhythm, and a stretch ends at each.
    #[must_use]
    pub fn without_slips(mut self) -> Self {
        let mut slips: Vec<Range<usize>> = Vec::new();
        let mut stretches = Vec::new();
        let odd = super::slips::odd_sizes(&self.size);
        let struck_s: Vec<f64> = self.extra.iter().map(|e| e.0).collect();
        for stretch in &self.stretches {
            let mut from = stretch.start;
            for slip in super::slips::slips(&self.time_s[stretch.clone()], &self.number[stretch.clone()]) {
                let slip = super::slips::widened(slip, &self.time_s[stretch.clone()], &odd[stretch.clone()], &struck_s);
                let slip = (slip.start + stretch.start).max(from)..slip.end + stretch.start;
                stretches.push(from..slip.start);
                from = slip.end;
                slips.push(slip);
            }
            stretches.push(from..stretch.end);
        }
        if slips.is_empty() {
            return self;
        }
        self.extra.extend(slips.iter().flat_map(|b| b.clone()).map(|i| (self.time_s[i], self.size[i])));
        self.extra.sort_by(|a, b| a.0.total_cmp(&b.0));
        let mut rest = Self { time_s: Vec::new(), number: Vec::new(), size: Vec::new(), stretches: Vec::new(), ..self };
        for stretch in stretches.into_iter().filter(|s| !s.is_empty()) {
            let from = rest.time_s.len();
            rest.time_s.extend_from_slice(&self.time_s[stretch.clone()]);
            rest.number.extend_from_slice(&self.number[stretch.clone()]);
            rest.size.extend_from_slice(&self.size[stretch]);
            rest.stretches.push(from..rest.time_s.len());
        }
        rest
    }

    /// The part of the train within a range of time, s; none if that holds no click.
    #[must_use]
    pub fn within(mut self, range_s: &Range<f64>) -> Option<Self> {
        let from = self.time_s.partition_point(|t| *t < range_s.start);
        let to = self.time_s.partition_point(|t| *t < range_s.end);
        if from >= to {
            return None;
        }
        let inside = |r: &Range<usize>| r.start.clamp(from, to) - from..r.end.clamp(from, to) - from;
        self.stretches = self.stretches.iter().map(inside).filter(|r| !r.is_empty()).collect();
        self.time_s = self.time_s[from..to].to_vec();
        self.number = self.number[from..to].to_vec();
        self.size = self.size[from..to].to_vec();
        self.extra.retain(|e| range_s.contains(&e.0));
        Some(self)
    }

    /// Moves the train by the start of its window in the recording.
    pub fn shift(&mut self, offset_s: f64) {
        self.time_s.iter_mut().for_each(|t| *t += offset_s);
        self.extra.iter_mut().for_each(|e| e.0 += offset_s);
    }

    /// Number of missed firings.
    #[must_use]
    pub fn missed(&self) -> u64 {
        self.stretches
            .iter()
            .filter(|r| !r.is_empty())
            .map(|r| (self.number[r.end - 1] - self.number[r.start]) as u64 + 1 - r.len() as u64)
            .sum()
    }

    /// Everything as events in the order of time.
    #[must_use]
    pub fn events(&self, timing_u_s: f64) -> Vec<Event> {
        let mut all = Vec::with_capacity(self.time_s.len() + self.extra.len());
        for stretch in &self.stretches {
            for i in stretch.clone() {
                let steps = if i > stretch.start { self.number[i] - self.number[i - 1] } else { 0 };
                for k in 1..steps {
                    let share = k as f64 / steps as f64;
                    let time_s = self.time_s[i - 1] + share * (self.time_s[i] - self.time_s[i - 1]);
                    all.push(Event {
                        time_s,
                        kind: EventKind::Missed,
                        size: 0.0,
                        timing_u_s: self.period_s,
                        period_s: None,
                    });
                }
                let period_s = (steps == 1).then(|| self.time_s[i] - self.time_s[i - 1]);
                all.push(Event {
                    time_s: self.time_s[i],
                    kind: EventKind::Firing,
                    size: f64::from(self.size[i]),
                    timing_u_s,
                    period_s,
                });
            }
        }
        all.extend(self.extra.iter().map(|&(time_s, size)| Event {
            time_s,
            kind: EventKind::Extra,
            size: f64::from(size),
            timing_u_s,
            period_s: None,
        }));
        all.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
        all
    }
}

/// Clicks nearer than this to one on the rhythm are its ringing, s.
const RING_S: f64 = 0.45e-3;

/// Candidates off the rhythm that are as strong as firings: above the mark that nine in ten firings exceed. Those at the times
/// `foreign_s` are another train's.
fn extras(h: &Hypothesis, foreign_s: &[f64]) -> Vec<f64> {
    let c = &h.candidates;
    let chain = &h.fit.chain.index;
    let mut marks = h.fit.marks_on(c);
    let middle = median(&marks);
    let rank = marks.len() / 10;
    let tenth = *marks.select_nth_unstable_by(rank, f64::total_cmp).1;
    // Where sizes vary wildly (carrier, noise) a strike must still look like a click: half the median size.
    let threshold = tenth.max(middle - std::f64::consts::LN_2);
    let ring_s = RING_S.min(0.35 * h.fit.period_s);
    let mut found = Vec::new();
    let mut next = 0;
    for i in trains::free_of(c, foreign_s) {
        while next < chain.len() && c.time_s[chain[next]] < c.time_s[i] - ring_s {
            next += 1;
        }
        let rings = next < chain.len() && (c.time_s[chain[next]] - c.time_s[i]).abs() <= ring_s;
        let repeats = found.last().is_some_and(|t| c.time_s[i] - t < ring_s);
        if !rings && !repeats && c.mark[i] > threshold {
            found.push(c.time_s[i]);
        }
    }
    found
}

/// Largest magnitude within ± 0.3 ms.
fn size_at(x: &[f32], position: f64, rate_hz: f64) -> f32 {
    let reach = (0.3e-3 * rate_hz) as usize;
    let at = position.round().max(0.0) as usize;
    let from = at.saturating_sub(reach).min(x.len());
    x[from..(at + reach + 1).min(x.len()).max(from)].iter().fold(0.0f32, |m, v| m.max(v.abs()))
}
