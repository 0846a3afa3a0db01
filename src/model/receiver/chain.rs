//! The whole receiver at its internal rate: clicks in, audio out.
//!
//! Internal rate: a whole multiple of the output rate, at least sixteen times the bandwidth of the channel, so that neither the
//! bends that taking the modulus makes nor the images of noise and carrier (which enter as impulses at this rate) fold back
//! into the audio, and at least twelve times the high corner of the audio.

use super::{
    Agc, AudioFilter, CarrierSource, Channel, ChannelState, Complex, Demodulator, Draw, ReceiverSettings, Stream,
};

/// Least internal rate in bandwidths of the channel.
const RATE_PER_BANDWIDTH: f64 = 16.0;
/// Least internal rate in high corners of the audio.
const RATE_PER_HIGH_CORNER: f64 = 12.0;
/// Internal samples between two looks for states so small that arithmetic on them is slow.
const SETTLE_EVERY: i64 = 1024;

/// Internal samples for one output sample.
pub(crate) fn oversampling(settings: &ReceiverSettings, output_rate_hz: f64) -> usize {
    let least = (RATE_PER_BANDWIDTH * settings.bandwidth_hz).max(RATE_PER_HIGH_CORNER * settings.audio_band.high_hz);
    (least / output_rate_hz).ceil().max(1.0) as usize
}

/// A receiver at work.
#[derive(Debug, Clone)]
pub(crate) struct Chain {
    rate_hz: f64,
    /// Internal sample number from time 0; time is this over the rate, so it never drifts.
    index: i64,
    channel: ChannelState,
    /// Strength of the impulse of a click of peak 1, s.
    impulse: f64,
    phases: Draw,
    noise: Option<(Draw, f64)>,
    carrier: Option<CarrierSource>,
    agc: Option<Agc>,
    detector: Demodulator,
    /// Phase that the channel adds to the carrier, for the detector that is locked to it.
    carrier_turn: Complex,
    audio: AudioFilter,
}

impl Chain {
    /// A receiver at rest whose next sample is number `first` from time 0.
    pub(crate) fn new(settings: &ReceiverSettings, rate_hz: f64, first: i64, seed: u64) -> Self {
        let step_s = 1.0 / rate_hz;
        let channel = Channel::new(settings.selectivity, settings.bandwidth_hz);
        let noise = (settings.noise > 0.0).then(|| {
            let strength = settings.noise / sampled_energy(&channel, step_s).sqrt();
            (Draw::new(seed, Stream::ChannelNoise), strength)
        });
        let mut carrier_turn = Complex::from(1.0);
        let carrier = settings.carrier.as_ref().filter(|carrier| carrier.amplitude > 0.0).map(|carrier| {
            let gain = channel.gain(carrier.offset_hz);
            carrier_turn = gain / gain.norm();
            CarrierSource::new(carrier, gain.norm(), step_s, Draw::new(seed, Stream::Carrier))
        });
        Self {
            rate_hz,
            index: first - 1,
            channel: channel.state(step_s),
            impulse: 1.0 / channel.impulse_peak().1,
            phases: Draw::new(seed, Stream::ClickPhase),
            noise,
            carrier,
            agc: settings.agc.map(|agc| Agc::new(agc, step_s)),
            detector: Demodulator::new(settings.detector, settings.bandwidth_hz, step_s),
            carrier_turn,
            audio: AudioFilter::new(settings.audio_band, rate_hz).with_de_emphasis(settings.de_emphasis_s, rate_hz),
        }
    }

    /// Carries the channel to the next internal sample and returns its time in s.
    #[inline]
    pub(crate) fn advance(&mut self) -> f64 {
        self.index += 1;
        self.channel.advance();
        self.index as f64 / self.rate_hz
    }

    /// A click of the given peak at a time at or before the sample last advanced to, with a random carrier phase.
    pub(crate) fn click(&mut self, time_s: f64, peak: f64) {
        let strength = self.phases.phase() * (peak * self.impulse);
        if peak != 0.0 {
            self.channel.add_impulse(strength, self.index as f64 / self.rate_hz - time_s);
        }
    }

    /// Complex envelope behind the channel filter at the sample last advanced to, noise and carrier added.
    #[inline]
    fn envelope(&mut self) -> Complex {
        if self.noise.is_some() || self.carrier.is_some() {
            let noise = self.noise.as_mut().map(|(draw, strength)| draw.complex_normal() * *strength);
            let carrier = self.carrier.as_mut().map(CarrierSource::next_impulse);
            self.channel.add_impulse_now(noise.unwrap_or_default() + carrier.unwrap_or_default());
        }
        self.channel.output()
    }

    /// Audio at the sample last advanced to; to be asked for once in each step.
    #[inline]
    pub(crate) fn audio(&mut self) -> f64 {
        let mut envelope = self.envelope();
        let mut level = envelope.norm_sqr().sqrt();
        if let Some(agc) = &mut self.agc {
            let gain = agc.gain(level);
            envelope *= gain;
            level *= gain;
        }
        let reference = self.carrier.as_ref().map_or(Complex::from(1.0), |carrier| carrier.phase() * self.carrier_turn);
        let detected = self.detector.step_at_level(envelope, level, reference);
        if self.index % SETTLE_EVERY == 0 {
            self.channel.settle();
            self.audio.settle();
        }
        self.audio.step(detected)
    }
}

/// Sum of the squared impulse response at the samples: the mean square behind the filter of white impulses of mean square 1.
fn sampled_energy(channel: &Channel, step_s: f64) -> f64 {
    let samples = (channel.memory_s() / step_s).ceil() as i64;
    (0..samples).map(|k| channel.impulse_response(k as f64 * step_s).norm_sqr()).sum()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::receiver::Carrier;

    const RATE_HZ: f64 = 96_000.0;

    fn envelopes(settings: &ReceiverSettings, count: usize) -> Vec<Complex> {
        let mut chain = Chain::new(settings, RATE_HZ, 0, 3);
        let mut all = Vec::new();
        for _ in 0..count {
            chain.advance();
            all.push(chain.envelope());
        }
        // The filter has filled within a few milliseconds.
        all.split_off(1000)
    }

    #[test]
    fn noise_behind_the_channel_has_the_stated_rms() {
        let settings = ReceiverSettings { noise: 0.1, ..ReceiverSettings::default() };
        let z = envelopes(&settings, 2_000_000);
        let rms = (z.iter().map(Complex::norm_sqr).sum::<f64>() / z.len() as f64).sqrt();
        // 20 s of a noise bandwidth of 5 kHz: 10⁵ independent values, 0.16 % in rms.
        assert!((rms / 0.1 - 1.0).abs() < 0.007, "{rms}");
    }

    #[test]
    fn a_carrier_has_its_stated_amplitude_behind_the_channel_even_on_the_slope() {
        for offset_hz in [0.0, 2600.0, -4000.0] {
            let carrier = Some(Carrier { amplitude: 0.7, offset_hz, programme: None });
            let settings = ReceiverSettings { noise: 0.0, carrier, ..ReceiverSettings::default() };
            for z in envelopes(&settings, 3000) {
                // Images of the impulses at the internal rate are 90 dB down.
                assert!((z.norm() - 0.7).abs() < 1e-4, "{offset_hz}: {}", z.norm());
            }
        }
    }

    #[test]
    fn a_click_has_peak_one_behind_the_channel() {
        let settings = ReceiverSettings { noise: 0.0, ..ReceiverSettings::default() };
        let mut chain = Chain::new(&settings, 960_000.0, 0, 3);
        let mut peak = 0.0f64;
        for k in 0..2000 {
            let now_s = chain.advance();
            if k == 1 {
                chain.click(0.4 * now_s, 1.0);
            }
            peak = peak.max(chain.envelope().norm());
        }
        assert!((peak - 1.0).abs() < 1e-4, "{peak}");
    }
}
