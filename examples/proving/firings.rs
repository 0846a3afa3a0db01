//! When a gap strikes: trains of firing times and what is true about them. Times in seconds.

use crate::random::Dice;

/// One strike as the receiver hears it.
#[derive(Clone, Copy)]
pub struct Strike {
    /// Instant, s.
    pub time_s: f64,
    /// Peak of its click in the channel, relative to a typical click of the main train; 0: not heard.
    pub size: f64,
}

/// How single periods scatter.
#[derive(Clone, Copy)]
pub enum Scatter {
    /// Normal.
    Normal,
    /// Gamma of the same mean and variance.
    Gamma,
}

/// Rate, scatter and length of one train.
#[derive(Clone, Copy)]
pub struct Plan {
    /// Mean period, s.
    pub period_s: f64,
    /// Standard deviation of a period over its mean.
    pub jitter: f64,
    /// Length of the recording, s.
    pub duration_s: f64,
}

impl Plan {
    /// Draws a plan with a rate in the given range (1/s), a jitter of 0.2..8 % and room for 400..4000 firings.
    pub fn draw(dice: &mut Dice, slowest_hz: f64, fastest_hz: f64) -> Self {
        let period_s = 1.0 / dice.log_uniform(slowest_hz, fastest_hz);
        let jitter = dice.log_uniform(0.002, 0.08);
        Self { period_s, jitter, duration_s: Self::duration(dice, period_s) }
    }

    /// Length for 400..4000 firings, within 4..20 s.
    pub fn duration(dice: &mut Dice, period_s: f64) -> f64 {
        let wanted = dice.log_uniform(400.0, 4000.0) * period_s;
        let longest = dice.uniform(12.0, 20.0);
        let shortest = dice.uniform(4.0, 7.0);
        wanted.clamp(shortest, longest)
    }

    /// Firing times of independent periods, from a random start to the end of the recording.
    pub fn times(&self, dice: &mut Dice, scatter: Scatter) -> Vec<f64> {
        let start = dice.uniform(0.1, 1.2) * self.period_s;
        self.times_between(dice, scatter, start, self.duration_s)
    }

    /// Firing times of independent periods from `start` to before `end`.
    pub fn times_between(&self, dice: &mut Dice, scatter: Scatter, start: f64, end: f64) -> Vec<f64> {
        let mut times = Vec::new();
        let mut time = start;
        while time < end - END_MARGIN_S {
            times.push(time);
            let factor = match scatter {
                Scatter::Normal => (1.0 + self.jitter * dice.normal()).max(0.3),
                Scatter::Gamma => dice.gamma(1.0 / (self.jitter * self.jitter)),
            };
            time += self.period_s * factor;
        }
        times
    }
}

/// No firing so close to the end that its click would be cut, s.
const END_MARGIN_S: f64 = 0.002;

/// Strikes of the given times with sizes that scatter a little (distance and spark differ from firing to firing).
pub fn strikes(dice: &mut Dice, times: &[f64], size: f64) -> Vec<Strike> {
    let spread = dice.log_uniform(0.003, 0.1);
    times.iter().map(|&time_s| Strike { time_s, size: size * (spread * dice.normal()).exp() }).collect()
}

/// What a recording's firings really did.
#[derive(Clone, Copy)]
pub struct Realised {
    /// (Firings − 1) over (last − first), stretch by stretch, 1/s.
    pub rate_hz: f64,
    /// Standard deviation of the periods about a straight line, s.
    pub jitter_s: f64,
}

/// Realised rate and jitter of stretches of firing times; the line is common to all periods in their order.
pub fn realised(stretches: &[Vec<f64>]) -> Realised {
    let periods: Vec<f64> = stretches.iter().flat_map(|s| s.windows(2).map(|w| w[1] - w[0])).collect();
    let n = periods.len() as f64;
    let mean = periods.iter().sum::<f64>() / n;
    let middle = (n - 1.0) / 2.0;
    let (mut cross, mut spread) = (0.0, 0.0);
    for (i, period) in periods.iter().enumerate() {
        let k = i as f64 - middle;
        cross += k * (period - mean);
        spread += k * k;
    }
    let slope = if spread > 0.0 { cross / spread } else { 0.0 };
    let sum: f64 = periods.iter().enumerate().map(|(i, p)| (p - mean - slope * (i as f64 - middle)).powi(2)).sum();
    Realised { rate_hz: 1.0 / mean, jitter_s: (sum / (n - 2.0).max(1.0)).sqrt() }
}
