//! Faults laid over a rhythm: firings that stay unheard, extra strikes, outages.

use super::{NoTrain, check, stream};
use crate::firing::{EventKind, Firing};
use crate::model::random::Random;

/// A time without firing; afterwards the capacitor charges anew.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Outage {
    /// Start, s.
    pub from_s: f64,
    /// End, s.
    pub to_s: f64,
}

/// Bursts in which the gap breaks down early, as dust or a fibre between the electrodes makes it (common practice: single low
/// values that come in groups).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Dust {
    /// Bursts per second, Hz.
    pub rate_hz: f64,
    /// Length of a burst, s.
    pub length_s: f64,
    /// Greatest loss of strength in a burst; each breakdown loses a uniform share of it, 0..1.
    pub depth: f64,
}

/// Dust at work.
pub(super) struct DustSource {
    dust: Dust,
    random: Random,
    from_s: f64,
}

impl DustSource {
    pub(super) fn new(dust: Dust, mut random: Random) -> Self {
        let from_s = random.exponential() / dust.rate_hz;
        Self { dust, random, from_s }
    }

    /// What is left of the strength for a breakdown that begins to charge at this time.
    pub(super) fn strength(&mut self, time_s: f64) -> f64 {
        while time_s >= self.from_s + self.dust.length_s {
            self.from_s += self.dust.length_s + self.random.exponential() / self.dust.rate_hz;
        }
        if time_s >= self.from_s { 1.0 - self.dust.depth * self.random.uniform() } else { 1.0 }
    }
}

/// Faults of a train.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Faults {
    /// Share of the firings that the audio does not show, 0..1.
    pub missed: f64,
    /// Share of the firings that an extra strike follows, 0..1.
    pub extra: f64,
    /// Mean time from the firing to its extra strike, s; it scatters by ± 30 %, uniformly.
    pub extra_delay_s: f64,
    /// Voltage of an extra strike over that of the firing before it.
    pub extra_size: f64,
    /// Outages.
    pub outages: Vec<Outage>,
    /// Early breakdown in bursts; of a gap across a circuit only.
    pub dust: Option<Dust>,
}

/// Half width of the scatter of the delay of an extra strike.
const DELAY_SCATTER: f64 = 0.3;

impl Faults {
    /// No faults.
    #[must_use]
    pub fn none() -> Self {
        Self::default()
    }

    pub(super) fn check(&self) -> Result<(), NoTrain> {
        let share = |x: f64| (0.0..1.0).contains(&x);
        check("the share of missed clicks", self.missed, share(self.missed), "it must be 0 to below 1")?;
        check("the share of extra strikes", self.extra, share(self.extra), "it must be 0 to below 1")?;
        let delay_ok = self.extra == 0.0 || self.extra_delay_s > 0.0;
        check("the delay of extra strikes", self.extra_delay_s, delay_ok, "it must be above 0 s")?;
        let size_ok = self.extra == 0.0 || self.extra_size > 0.0;
        check("the size of extra strikes", self.extra_size, size_ok, "it must be above 0")?;
        if let Some(Dust { rate_hz, length_s, depth }) = self.dust {
            check("the rate of bursts of dust", rate_hz, rate_hz > 0.0, "it must be above 0 Hz")?;
            check("the length of a burst of dust", length_s, length_s > 0.0, "it must be above 0 s")?;
            check("the depth of dust", depth, (0.0..1.0).contains(&depth), "it must be 0 to below 1")?;
        }
        for outage in &self.outages {
            check("the end of an outage", outage.to_s, outage.to_s > outage.from_s, "it must come after its start")?;
        }
        Ok(())
    }

    /// End of the outage that holds this time, if one does.
    pub(super) fn outage_end(&self, time_s: f64) -> Option<f64> {
        self.outages.iter().find(|o| (o.from_s..o.to_s).contains(&time_s)).map(|o| o.to_s)
    }

    /// Marks missed firings and adds extra strikes.
    pub(super) fn apply(&self, mut firings: Vec<Firing>, duration_s: f64, seed: u64) -> Vec<Firing> {
        let mut extra = Random::stream(seed, stream::EXTRA);
        let mut missed = Random::stream(seed, stream::MISSED);
        let mut strikes = Vec::new();
        for firing in &mut firings {
            // Drawn for every firing, needed or not: another share then changes no other draw.
            let (strikes_again, delay, unheard) = (extra.uniform(), extra.uniform(), missed.uniform());
            if strikes_again < self.extra {
                let delay_s = self.extra_delay_s * (1.0 + DELAY_SCATTER * (2.0 * delay - 1.0));
                strikes.push(Firing {
                    time_s: firing.time_s + delay_s,
                    voltage_v: firing.voltage_v * self.extra_size,
                    kind: EventKind::Extra,
                });
            }
            if unheard < self.missed {
                firing.kind = EventKind::Missed;
            }
        }
        firings.extend(strikes.into_iter().filter(|strike| strike.time_s < duration_s));
        firings.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
        firings
    }
}
