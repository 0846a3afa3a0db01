//! A long history made short enough to be drawn and mailed, its extremes kept.

use super::{Point, Trend};

impl Trend {
    /// The same with about `most` points at most: of every so many in a row the lowest and the highest, the largest sums, and the last
    /// of all. A note says so. Figures, limits and alarms stay those of all entries.
    #[must_use]
    pub fn shortened(&self, most: usize) -> Self {
        let every = self.points.len().div_ceil((most / EACH).max(1));
        if self.points.len() <= most {
            return self.clone();
        }
        let last = self.points.len() - 1;
        let mut kept: Vec<usize> = Vec::with_capacity(most);
        for from in (0..=last).step_by(every) {
            let row = from..(from + every).min(last + 1);
            let least = |of: fn(&Point) -> f64| {
                row.clone().min_by(|&a, &b| of(&self.points[a]).total_cmp(&of(&self.points[b])))
            };
            kept.extend(
                [least(|p| p.value), least(|p| -p.value), least(|p| -p.cusum_high), least(|p| -p.cusum_low)]
                    .into_iter()
                    .flatten(),
            );
        }
        kept.push(last);
        kept.sort_unstable();
        kept.dedup();
        let mut short = Self { points: kept.iter().map(|&i| self.points[i].clone()).collect(), ..self.clone() };
        short.notes.push(format!(
            "of {} entries the lowest and the highest of every {every} are drawn and kept here; figures and limits are of all",
            self.points.len()
        ));
        short
    }
}

/// Points that are kept of a row.
const EACH: usize = 4;

#[cfg(test)]
mod tests {
    use crate::trend::{Entry, Options, analyse};

    fn history(count: usize) -> Vec<Entry> {
        (0..count)
            .map(|k| {
                let rate = 440.0 + ((k * 7919) % 1009) as f64 * 1e-3 + if k == 777 { 5.0 } else { 0.0 };
                let line = format!(
                    r#"{{"format":"gaptone.log/1","time":"2026-01-{:02}T{:02}:{:02}:00Z","file":"a.wav","verdict":"steady","firings":{{"on_rhythm":1000,"missed":0,"extra":0}},"firing_time_s":2.0,"firing_rate_hz":{{"value":{rate},"u":0.1,"low":{},"high":{}}},"period_jitter_s":null,"gap_voltage_v":null,"gap_voltage_spread_v":null}}"#,
                    1 + k / 1440,
                    k / 60 % 24,
                    k % 60,
                    rate - 0.2,
                    rate + 0.2
                );
                serde_json::from_str(&line).expect("an entry")
            })
            .collect()
    }

    #[test]
    fn a_long_history_keeps_its_extremes_and_a_short_one_everything() {
        let whole = analyse(&history(5000), &Options::default());
        let short = whole.shortened(400);
        assert!(short.points.len() <= 405 && short.points.len() > 100, "{}", short.points.len());
        let ends = |points: &[crate::trend::Point], of: fn(&crate::trend::Point) -> f64| {
            points.iter().map(of).fold((f64::INFINITY, f64::NEG_INFINITY), |e, v| (e.0.min(v), e.1.max(v)))
        };
        for of in [(|p| p.value) as fn(&crate::trend::Point) -> f64, |p| p.time.0 as f64] {
            assert_eq!(ends(&short.points, of), ends(&whole.points, of));
        }
        assert_eq!(ends(&short.points, |p| p.cusum_high).1, ends(&whole.points, |p| p.cusum_high).1);
        assert_eq!((short.entries, &short.limits, &short.alarms), (whole.entries, &whole.limits, &whole.alarms));
        assert!(short.notes.len() == whole.notes.len() + 1 && short.points.windows(2).all(|p| p[0].time <= p[1].time));
        assert_eq!(whole.shortened(5000), whole);
    }
}
