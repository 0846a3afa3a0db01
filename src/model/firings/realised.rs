//! The figures of a train as they came out, by the definitions that a measurement uses.

use super::Outage;
use crate::firing::{EventKind, Firing};
use serde::{Deserialize, Serialize};

/// Realised figures of one train. A figure that too few firings leave undefined is absent.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct Realised {
    /// Firings on the rhythm, heard or not.
    pub firings: usize,
    /// (n − 1)/(last − first) over the stretches in which the gap fires, Hz.
    pub firing_rate_hz: Option<f64>,
    /// Mean period, s.
    pub period_s: Option<f64>,
    /// Standard deviation of the periods about a straight line through them, s.
    pub period_jitter_s: Option<f64>,
    /// Standard deviation of the difference of neighbouring periods, s.
    pub cycle_jitter_s: Option<f64>,
    /// Relative change of the rate per second, from that straight line, 1/s.
    pub drift_per_s: Option<f64>,
    /// Mean voltage at breakdown, V.
    pub gap_voltage_v: Option<f64>,
    /// Standard deviation of the voltage at breakdown, V; a drift is in it.
    pub gap_voltage_spread_v: Option<f64>,
}

/// A period and the time of its middle.
type Period = (f64, f64);

impl Realised {
    /// Figures of a train; the outages cut it into stretches. Extra strikes are left out, unheard firings counted.
    #[must_use]
    pub fn of(firings: &[Firing], outages: &[Outage]) -> Self {
        let on_rhythm: Vec<&Firing> = firings.iter().filter(|f| f.kind != EventKind::Extra).collect();
        let apart = |a: f64, b: f64| outages.iter().any(|o| o.to_s > a && o.from_s < b);
        let mut stretches: Vec<Vec<Period>> = vec![Vec::new()];
        for pair in on_rhythm.windows(2) {
            let (a, b) = (pair[0].time_s, pair[1].time_s);
            if apart(a, b) {
                stretches.push(Vec::new());
            } else if let Some(stretch) = stretches.last_mut() {
                stretch.push((0.5 * (a + b), b - a));
            }
        }
        let periods: Vec<Period> = stretches.iter().flatten().copied().collect();
        let changes: Vec<f64> =
            stretches.iter().flat_map(|stretch| stretch.windows(2).map(|w| w[1].1 - w[0].1)).collect();
        let voltages: Vec<f64> = on_rhythm.iter().map(|f| f.voltage_v).collect();
        let mean_period = mean(&periods.iter().map(|p| p.1).collect::<Vec<_>>());
        let line = straight_line(&periods);
        Self {
            firings: on_rhythm.len(),
            firing_rate_hz: mean_period.map(|period| 1.0 / period),
            period_s: mean_period,
            period_jitter_s: line.map(|line| line.1),
            cycle_jitter_s: standard_deviation(&changes),
            drift_per_s: line.zip(mean_period).map(|((slope, _), period)| -slope / period),
            gap_voltage_v: mean(&voltages),
            gap_voltage_spread_v: standard_deviation(&voltages),
        }
    }
}

fn mean(values: &[f64]) -> Option<f64> {
    (!values.is_empty()).then(|| values.iter().sum::<f64>() / values.len() as f64)
}

fn standard_deviation(values: &[f64]) -> Option<f64> {
    let mean = mean(values)?;
    let square: f64 = values.iter().map(|v| (v - mean) * (v - mean)).sum();
    (values.len() > 1).then(|| (square / (values.len() - 1) as f64).sqrt())
}

/// Slope and standard deviation of the residuals of the least-squares line of period against time.
fn straight_line(periods: &[Period]) -> Option<(f64, f64)> {
    if periods.len() < 3 {
        return None;
    }
    let n = periods.len() as f64;
    let time = periods.iter().map(|p| p.0).sum::<f64>() / n;
    let period = periods.iter().map(|p| p.1).sum::<f64>() / n;
    let square: f64 = periods.iter().map(|p| (p.0 - time) * (p.0 - time)).sum();
    let slope = periods.iter().map(|p| (p.0 - time) * (p.1 - period)).sum::<f64>() / square;
    let rest: f64 = periods.iter().map(|p| (p.1 - period - slope * (p.0 - time)).powi(2)).sum();
    Some((slope, (rest / (n - 2.0)).sqrt()))
}
