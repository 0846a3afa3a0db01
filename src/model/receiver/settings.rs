//! What the receiver is set to: from a bench, with the defaults for what the bench leaves open.

use super::described;
use super::{AgcSettings, AudioBand, Burst, BurstError, Carrier, DetectorSettings, Hum, Programme, Selectivity};
use crate::bench::{Bench, Quantity};
use crate::model::ring;
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// 6 dB bandwidth of the channel where the bench gives none, Hz: an ordinary AM broadcast receiver (common practice).
pub const DEFAULT_BANDWIDTH_HZ: f64 = 6000.0;
/// Audio band where the bench gives none, Hz: a small receiver's loudspeaker stage (common practice).
pub const DEFAULT_AUDIO_BAND_HZ: (f64, f64) = (120.0, 3400.0);
/// Noise in the channel against a click's peak where the bench gives none: −30 dB.
pub const DEFAULT_CLICK_TO_NOISE: f64 = 0.031_622_776_601_683_79;

/// A receiver that cannot be built.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum ReceiverError {
    /// The tank does not ring.
    #[error("the tank does not ring: {0}")]
    Burst(#[from] BurstError),
    /// A setting outside what the model covers.
    #[error("receiver {what} = {value} {unit} is outside {low} .. {high} {unit}")]
    Range {
        /// Which setting.
        what: &'static str,
        /// Its value.
        value: f64,
        /// Its unit.
        unit: &'static str,
        /// Least allowed.
        low: f64,
        /// Greatest allowed.
        high: f64,
    },
    /// The tuned frequency is known but the tank is not, or the other way round.
    #[error("receiver tuned to {tuned_hz} Hz against a tank at {tank_hz} Hz: the click has no strength there")]
    OffTune {
        /// Tuned frequency, Hz.
        tuned_hz: f64,
        /// Tank frequency, Hz.
        tank_hz: f64,
    },
}

/// A receiver.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ReceiverSettings {
    /// Circuits of the channel filter.
    pub selectivity: Selectivity,
    /// 6 dB bandwidth of the channel, Hz.
    pub bandwidth_hz: f64,
    /// Rms of the complex noise behind the channel filter, in click peaks; 0 for none.
    pub noise: f64,
    /// Carrier under the clicks.
    pub carrier: Option<Carrier>,
    /// Automatic gain control.
    pub agc: Option<AgcSettings>,
    /// Kind and time constants of the detector.
    pub detector: DetectorSettings,
    /// Audio band.
    pub audio_band: AudioBand,
    /// Time constant of the de-emphasis, s; 0 for none.
    pub de_emphasis_s: f64,
    /// Mains hum.
    pub hum: Option<Hum>,
    /// True if a rise of the envelope is negative in the audio.
    pub inverted: bool,
    /// Ring of the tank and tuned frequency in Hz, where known. They set the strength of a click in volts, which the audio
    /// level of a recorder hides.
    pub burst: Option<(Burst, f64)>,
}

impl Default for ReceiverSettings {
    fn default() -> Self {
        let (low_hz, high_hz) = DEFAULT_AUDIO_BAND_HZ;
        Self {
            selectivity: Selectivity::default(),
            bandwidth_hz: DEFAULT_BANDWIDTH_HZ,
            noise: DEFAULT_CLICK_TO_NOISE,
            carrier: None,
            agc: None,
            detector: DetectorSettings::default(),
            audio_band: AudioBand { low_hz, low_poles: 2, high_hz, high_poles: 4 },
            de_emphasis_s: 0.0,
            hum: None,
            inverted: false,
            burst: None,
        }
    }
}

impl ReceiverSettings {
    /// The receiver of a bench; what the bench does not say is as in [`ReceiverSettings::default`], and a tuned frequency that
    /// is not given is the tank's. The defaults of each key stand with the keys in the handbook.
    ///
    /// # Errors
    /// If the bench describes a tank that does not ring or a receiver outside the limits of [`ReceiverSettings::check`].
    pub fn from_bench(bench: &Bench) -> Result<Self, ReceiverError> {
        let described = &bench.receiver;
        let default = Self::default();
        let value = |quantity: Option<Quantity>, default: f64| quantity.map_or(default, |q| q.value);
        let burst = ring::burst(bench)?;
        let settings = Self {
            selectivity: described::selectivity(described),
            bandwidth_hz: value(described.bandwidth, default.bandwidth_hz),
            noise: value(described.noise, default.noise),
            carrier: described::carrier(described),
            agc: described::agc(described),
            detector: described::detector(described),
            audio_band: described::audio_band(described, default.audio_band),
            de_emphasis_s: value(described.de_emphasis, 0.0),
            hum: described::hum(described),
            inverted: described::inverted(described),
            burst: burst.map(|burst| (burst, value(described.tuned, burst.ring_hz()))),
        };
        settings.check()?;
        Ok(settings)
    }

    /// Checks every setting.
    ///
    /// # Errors
    /// Names the first setting that is outside what the model covers, with its limits.
    pub fn check(&self) -> Result<(), ReceiverError> {
        within("bandwidth", self.bandwidth_hz, "Hz", 100.0, 200_000.0)?;
        within("filter order", self.selectivity.order() as f64, "", 1.0, Selectivity::MAX_ORDER as f64)?;
        if let Selectivity::Flat { edge_percent } = self.selectivity {
            within("filter edge", f64::from(edge_percent), "% of the bandwidth", 2.0, 100.0)?;
        }
        within("noise", self.noise, "of a click peak", 0.0, 1000.0)?;
        let band = self.audio_band;
        within("audio band, high corner", band.high_hz, "Hz", 100.0, 100_000.0)?;
        within("audio band, low corner", band.low_hz, "Hz", 0.0, 0.9 * band.high_hz)?;
        within("audio low cut", f64::from(band.low_poles), "poles", 1.0, 2.0)?;
        within("audio high cut", f64::from(band.high_poles), "poles", 1.0, 8.0)?;
        within("detector charge time", self.detector.charge_s, "s", 0.0, 1.0)?;
        within("detector discharge time", self.detector.discharge_s, "s", 0.0, 1.0)?;
        within("de-emphasis", self.de_emphasis_s, "s", 0.0, 1.0)?;
        if let Some(carrier) = &self.carrier {
            within("carrier", carrier.amplitude, "of a click peak", 0.0, 1000.0)?;
            within("carrier offset", carrier.offset_hz, "Hz", -self.bandwidth_hz, self.bandwidth_hz)?;
            within("carrier modulation depth", carrier.programme.as_ref().map_or(0.0, Programme::depth), "", 0.0, 1.0)?;
        }
        if let Some(Carrier { programme: Some(Programme::Tone { frequency_hz, .. }), .. }) = self.carrier {
            within("programme frequency", frequency_hz, "Hz", 1.0, self.bandwidth_hz)?;
        }
        if let Some(agc) = self.agc {
            within("AGC attack", agc.attack_s, "s", 0.0, 60.0)?;
            within("AGC decay", agc.decay_s, "s", 0.0, 60.0)?;
            within("AGC threshold", agc.threshold, "of a click peak", 1e-3, 1000.0)?;
            within("AGC margin", agc.margin, "of a click peak", 0.0, 1000.0)?;
            within("AGC gain", agc.greatest_gain, "", 1e-3, 1e6)?;
        }
        if let Some(hum) = self.hum {
            within("hum", hum.amplitude, "of a click peak", 0.0, 1000.0)?;
            within("hum frequency", hum.frequency_hz, "Hz", 1.0, 1000.0)?;
            within("hum buzz", hum.buzz, "", 0.0, 10.0)?;
        }
        match self.burst {
            Some((burst, tuned_hz)) if !(tuned_hz > 0.0 && burst.strength(tuned_hz, 1.0) > 0.0) => {
                Err(ReceiverError::OffTune { tuned_hz, tank_hz: burst.ring_hz() })
            }
            _ => Ok(()),
        }
    }

    /// Peak in volts of the click of a spark of `volts` across the channel filter, with unit gain from tank to receiver; none
    /// if the tank is not known.
    #[must_use]
    pub fn click_peak_v(&self, volts: f64) -> Option<f64> {
        let channel = super::Channel::new(self.selectivity, self.bandwidth_hz);
        self.burst.map(|(burst, tuned_hz)| burst.strength(tuned_hz, volts) * channel.impulse_peak().1)
    }
}

/// Checks a value against its limits; not-a-number is outside.
pub(crate) fn within(
    what: &'static str,
    value: f64,
    unit: &'static str,
    low: f64,
    high: f64,
) -> Result<(), ReceiverError> {
    if value >= low && value <= high { Ok(()) } else { Err(ReceiverError::Range { what, value, unit, low, high }) }
}
