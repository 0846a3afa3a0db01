//! The ring of every spark: frequencies, quality, cycles, and what the receiver gets of it.

use super::setting::Setting;
use crate::bench::{Bench, si, signed, with_uncertainty};
use crate::model::receiver::Burst;
use crate::model::ring::{self, Mode, Network, Readings};
use serde::{Deserialize, Serialize};

/// Share of the first peak down to which cycles are counted as visible: a line's width on a screen.
const VISIBLE: f64 = 0.05;

/// A mode of the ring.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct ModeForecast {
    /// Ring frequency, Hz.
    pub ring_hz: f64,
    /// Quality factor.
    pub quality: f64,
    /// Amplitude of its current in the coil over that of the strongest mode.
    pub share: f64,
}

/// What was read off a picture of the ring.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PeakReadings {
    /// Cycles that the peaks span: one fewer than there are peaks.
    pub cycles: usize,
    /// Ring frequency, Hz, with its standard uncertainty.
    pub ring_hz: (f64, f64),
    /// Logarithmic decrement with its standard uncertainty.
    pub decrement: (f64, f64),
    /// Quality factor with its standard uncertainty.
    pub quality: (f64, f64),
    /// The peaks fall along a line, as an arc makes them.
    pub arc: bool,
    /// Quality factor of the circuit without the arc.
    pub quality_without_arc: Option<f64>,
}

/// The ring of every spark.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BurstForecast {
    /// Ring frequency, Hz.
    pub ring_hz: f64,
    /// Quality factor.
    pub quality: f64,
    /// Logarithmic decrement.
    pub decrement: f64,
    /// Bandwidth of the damped wave between its half-power points, Hz: frequency over quality.
    pub bandwidth_hz: f64,
    /// Cycles until the ring has fallen to 5 % of its first peak.
    pub visible_cycles: f64,
    /// Share of its energy that the ring loses in a cycle.
    pub loss_per_cycle: f64,
    /// Every mode while the gap conducts, from the parts; the strongest first.
    pub modes: Vec<ModeForecast>,
    /// Coil and tank capacitor after the gap has opened, from the parts.
    pub after_opening: Option<ModeForecast>,
    /// Frequency and quality by the simple formulas, from the parts, for comparison.
    pub simple: Option<(f64, f64)>,
    /// Half cycles until an arc of the stated voltage goes out.
    pub arc_half_cycles: Option<u32>,
    /// What the peaks say.
    pub readings: Option<PeakReadings>,
    /// Impulse that the receiver gets at its tuned frequency, V·s at the gap voltage.
    pub strength_v_s: Option<f64>,
    /// The same over that on the ring frequency.
    pub strength_share: Option<f64>,
}

impl From<Mode> for ModeForecast {
    fn from(mode: Mode) -> Self {
        Self { ring_hz: mode.ring_hz, quality: mode.quality(), share: mode.share }
    }
}

impl From<Readings> for PeakReadings {
    fn from(found: Readings) -> Self {
        Self {
            cycles: found.cycles,
            ring_hz: (found.ring_hz, found.u_ring_hz),
            decrement: (found.decrement, found.u_decrement),
            quality: (found.quality(), found.u_quality()),
            arc: found.arc.is_some(),
            quality_without_arc: found.arc.and_then(|arc| arc.quality),
        }
    }
}

impl Setting<'_> {
    /// The ring; none if the bench does not describe a tank in full, and a sentence if what it describes does not ring.
    pub(super) fn burst_forecast(&self) -> Result<Option<BurstForecast>, String> {
        let bench = self.bench;
        let refused = |error| format!("the tank does not ring: {error}");
        let Some(burst) = ring::burst(bench).map_err(refused)? else { return Ok(None) };
        let readings = ring::readings(bench).transpose().map_err(refused)?;
        let network = Network::of_bench(bench);
        let decrement = burst.decay_per_s() / burst.ring_hz();
        let arc_v = bench.gap.arc_drop.map(|arc| arc.value);
        let strength = |hz: f64| self.gap_v().map(|gap_v| burst.strength(hz, gap_v));
        let strength_v_s = bench.receiver.tuned.and_then(|tuned| strength(tuned.value));
        Ok(Some(BurstForecast {
            ring_hz: burst.ring_hz(),
            quality: burst.quality(),
            decrement,
            bandwidth_hz: natural_hz(&burst) / burst.quality(),
            visible_cycles: -VISIBLE.ln() / decrement,
            loss_per_cycle: -(-2.0 * decrement).exp_m1(),
            modes: network.map_or_else(Vec::new, |network| network.closed().into_iter().map(Into::into).collect()),
            after_opening: network.and_then(|network| network.open()).map(Into::into),
            simple: network.map(|network| (network.simple_hz(), network.simple_quality())),
            arc_half_cycles: network
                .zip(arc_v)
                .zip(self.gap_v())
                .and_then(|((network, arc_v), gap_v)| network.arc_half_cycles(gap_v, arc_v)),
            readings: readings.map(Into::into),
            strength_v_s,
            strength_share: strength_v_s.zip(strength(burst.ring_hz())).map(|(here, on)| here / on),
        }))
    }
}

/// f₀ from the ring frequency f₁ = f₀·√(1 − 1/(4Q²)).
fn natural_hz(burst: &Burst) -> f64 {
    burst.ring_hz() / (1.0 - 0.25 / burst.quality().powi(2)).sqrt()
}

impl BurstForecast {
    /// In sentences.
    #[must_use]
    pub fn words(&self) -> Vec<String> {
        let hz = |value: f64| si(value, "Hz", 4);
        let mut said = vec![format!(
            "rings at {} with Q {:.2} (decrement {:.3}): bandwidth {}, {:.1} cycles down to 5 %, each loses {:.0} % of its energy",
            hz(self.ring_hz),
            self.quality,
            self.decrement,
            si(self.bandwidth_hz, "Hz", 3),
            self.visible_cycles,
            100.0 * self.loss_per_cycle
        )];
        for mode in self.modes.iter().skip(1) {
            said.push(format!(
                "the leads ring with the tank capacitor at {} (Q {:.0}, {:.1} % of the coil current)",
                hz(mode.ring_hz),
                mode.quality,
                100.0 * mode.share
            ));
        }
        if let Some(open) = self.after_opening {
            said.push(format!(
                "after the gap has opened coil and tank capacitor ring at {} with Q {:.1}",
                hz(open.ring_hz),
                open.quality
            ));
        }
        if let Some((simple_hz, _)) = self.simple
            && (simple_hz / self.ring_hz - 1.0).abs() > 0.002
        {
            said.push(format!(
                "1/(2π√(L·C)) of coil and both capacitors, which leaves out the leads, would say {}, {} %",
                hz(simple_hz),
                signed(100.0 * (simple_hz / self.ring_hz - 1.0), 1)
            ));
        }
        if let Some(count) = self.arc_half_cycles {
            said.push(format!(
                "with the stated arc drop the peaks fall along a line and the arc goes out after {count} half cycles"
            ));
        }
        said.extend(self.readings.iter().flat_map(reading_words));
        if let (Some(strength), Some(share)) = (self.strength_v_s, self.strength_share) {
            said.push(format!(
                "the receiver gets an impulse of {:.3e} V·s at its tuned frequency, {} dB against the ring frequency",
                strength,
                signed(20.0 * share.log10(), 1)
            ));
        }
        said
    }
}

fn reading_words(readings: &PeakReadings) -> Vec<String> {
    let mut said = vec![format!(
        "read off {} peaks, which span {} {}: {} and Q {}",
        readings.cycles + 1,
        readings.cycles,
        if readings.cycles == 1 { "cycle" } else { "cycles" },
        with_uncertainty(readings.ring_hz.0, readings.ring_hz.1, "Hz"),
        with_uncertainty(readings.quality.0, readings.quality.1, "")
    )];
    if readings.arc {
        let without = readings
            .quality_without_arc
            .map_or_else(String::new, |quality| format!("; without it the circuit would have Q {quality:.1}"));
        said.push(format!(
            "the peaks fall along a line and not by a fixed share: an arc takes its voltage from every half cycle, and one \
             decrement does not describe the ring{without}"
        ));
    }
    said
}

/// The keys that are needed for the ring.
pub(super) fn missing(bench: &Bench) -> bool {
    let tank = &bench.tank;
    tank.frequency.is_none() && tank.inductance.is_none() && tank.peaks.is_none()
}
