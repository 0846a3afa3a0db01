//! Cumulative sums of scores: the chart that finds slow wear.
//!
//! Source: NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.3 (tabular CUSUM; k = 0.5 and h = 5, both in σ).
//! Its run lengths hold for a known mean and σ, which nobody has at a new gap. Each value is therefore judged by all good ones
//! before it: (x − mean)/(s·√(1 + 1/n)) follows Student's distribution with n − 1 degrees of freedom, and the normal score of
//! the same probability is standard normal and independent of the earlier ones while nothing changes (self-starting CUSUM,
//! Hawkins 1987, from memory), so that the published run lengths hold from the third entry on.

use crate::model::random::normal_quantile;
use statrs::function::beta::beta_reg;

/// Reference value, σ: half the shift that is to be found soonest.
pub const K: f64 = 0.5;
/// Decision interval, σ.
pub const H: f64 = 5.0;
/// Largest score that counts: one bad entry alone must not raise the alarm, that is the business of the other chart.
const MOST_SCORE: f64 = 4.0;
/// A sum grows no further than this: after a repair the alarm ends within ten entries.
const MOST_SUM: f64 = 2.0 * H;
/// Good entries from which an alarm stops the learning. With fewer the mean may be off by chance so far that what follows would
/// look like a shift for ever.
const SETTLED: f64 = 20.0;
/// Degrees of freedom from which the normal score comes from a closed form (Wallace 1959, from memory), good to 2e-4 up to the
/// largest score that counts.
const MANY: f64 = 100.0;

/// State of the chart.
#[derive(Debug, Clone, Default)]
pub struct Cusum {
    count: f64,
    mean: f64,
    squares: f64,
    high: f64,
    low: f64,
}

/// One entry on the chart.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Step {
    /// Standard normal score; none for the first two entries.
    pub score: Option<f64>,
    /// Upper sum, σ.
    pub high: f64,
    /// Lower sum, σ; positive too.
    pub low: f64,
}

impl Step {
    /// Direction of the alarm that stands: −1, 0 or 1.
    #[must_use]
    pub fn alarm(&self) -> i8 {
        i8::from(self.high > H) - i8::from(self.low > H)
    }
}

impl Cusum {
    /// Takes the next value.
    pub fn push(&mut self, value: f64) -> Step {
        let score = self.score(value);
        if let Some(score) = score {
            let counted = score.clamp(-MOST_SCORE, MOST_SCORE);
            self.high = (self.high + counted - K).clamp(0.0, MOST_SUM);
            self.low = (self.low - counted - K).clamp(0.0, MOST_SUM);
        }
        let step = Step { score, high: self.high, low: self.low };
        // What is out of control must not become the standard.
        let settled = self.count >= SETTLED;
        if !settled || (step.alarm() == 0 && score.is_none_or(|score| score.abs() < MOST_SCORE)) {
            self.learn(value);
        }
        step
    }

    fn learn(&mut self, value: f64) {
        self.count += 1.0;
        let off = value - self.mean;
        self.mean += off / self.count;
        self.squares += off * (value - self.mean);
    }

    /// Standard normal score of a value against the good ones before it.
    fn score(&self, value: f64) -> Option<f64> {
        if self.count < 2.0 {
            return None;
        }
        let freedom = self.count - 1.0;
        let off = value - self.mean;
        let spread = (self.squares / freedom * (1.0 + 1.0 / self.count)).sqrt();
        if spread <= 0.0 {
            return Some(if off == 0.0 { 0.0 } else { MOST_SCORE.copysign(off) });
        }
        Some(normal_score(off / spread, freedom))
    }
}

/// The normal value of the same probability as a value of Student's distribution.
fn normal_score(t: f64, freedom: f64) -> f64 {
    let size = if freedom >= MANY {
        (8.0 * freedom + 1.0) / (8.0 * freedom + 3.0) * (freedom * (t * t / freedom).ln_1p()).sqrt()
    } else {
        // The lower tail, so that a far value keeps its digits.
        let tail = 0.5 * beta_reg(0.5 * freedom, 0.5, freedom / (freedom + t * t));
        -normal_quantile(tail.max(f64::MIN_POSITIVE))
    };
    size.copysign(t)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn normal_scores_have_the_probability_of_students_distribution() {
        // Printed quantiles: t of 0.975 is 12.706 for 1, 2.228 for 10, 2.042 for 30 degrees of freedom; of the normal, 1.960.
        for (freedom, t) in [(1.0, 12.706), (10.0, 2.228), (30.0, 2.042), (120.0, 1.980)] {
            assert!((normal_score(t, freedom) - 1.960).abs() < 1e-3, "{freedom}");
            assert!((normal_score(-t, freedom) + 1.960).abs() < 1e-3, "{freedom}");
        }
        assert_eq!(normal_score(0.0, 5.0), 0.0);
    }

    #[test]
    fn the_closed_form_continues_the_exact_one() {
        for t in [0.1, 1.0, 2.5, 4.0] {
            let (exact, closed) = (normal_score(t, MANY - 1e-9), normal_score(t, MANY));
            assert!((exact - closed).abs() < 2e-4, "{t}: {exact} {closed}");
        }
    }

    #[test]
    fn known_scores_sum_up_as_in_the_table_of_the_handbook() {
        // NIST/SEMATECH e-Handbook, 6.3.2.3: the last eight of twenty means of four about 325, upper sums with k = 0.3175
        // in their own unit (from memory). Here k is 0.5, so the unit is 0.635.
        let means = [328.325, 327.250, 327.825, 328.500, 326.675, 327.775, 326.875, 328.350];
        let sums = [3.01, 4.94, 7.45, 10.63, 11.99, 14.44, 16.00, 19.04];
        let unit = 0.3175 / K;
        let mut high: f64 = 0.0;
        for (mean, sum) in means.iter().zip(sums) {
            high = (high + (mean - 325.0) / unit - K).max(0.0);
            assert!((high * unit - sum).abs() < 0.015, "{mean}: {}", high * unit);
        }
    }

    #[test]
    fn one_bad_entry_raises_no_alarm_and_does_not_become_the_standard() {
        let mut chart = Cusum::default();
        for k in 0..30 {
            chart.push(if k % 2 == 0 { 1.0 } else { -1.0 });
        }
        let bad = chart.push(1e6);
        assert!(bad.score.unwrap() > 10.0 && bad.alarm() == 0);
        let after = chart.push(1.0);
        assert!(after.score.unwrap().abs() < 1.1 && after.alarm() == 0);
    }

    #[test]
    fn equal_values_and_then_another_have_a_score() {
        let mut chart = Cusum::default();
        for _ in 0..5 {
            assert_eq!(chart.push(7.0).alarm(), 0);
        }
        assert_eq!(chart.push(7.1).score, Some(MOST_SCORE));
    }
}
