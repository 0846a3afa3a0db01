//! The whole receiver at its internal rate: clicks in, audio out.
//!
//! Internal rate: a whole multiple of the output rate, at least sixteen times the bandwidth of the channel and twenty-four times
//! the high corner of the audio. Noise and carrier enter the channel as impulses at this rate. Between its samples the channel
//! is known exactly, and what goes to the audio stage is the mean over each step, so that neither the bends that taking the
//! length makes nor the images of these impulses fold back into the audio. What mean and audio filter take from the audio
//! beyond the circuits that they stand for, [`Chain::to_give_back`] tells the decimator.

use super::passage::{PARTS, Passage};
use super::turning::Turning;
use super::{
    Agc, AudioFilter, CarrierSource, Channel, ChannelState, Complex, Demodulator, DetectorKind, Draw, Normals,
    ReceiverSettings, Stream,
};
use std::f64::consts::PI;

/// Least internal rate in bandwidths of the channel.
const RATE_PER_BANDWIDTH: f64 = 16.0;
/// Least internal rate in high corners of the audio.
const RATE_PER_HIGH_CORNER: f64 = 24.0;
/// Internal samples between two looks for states so small that arithmetic on them is slow.
const SETTLE_EVERY: i64 = 1024;
/// Filters up to this order turn so sharply at a click that the mean over the step must know where it came.
const SHARP_ORDER: usize = 2;

/// Internal samples for one output sample.
pub(crate) fn oversampling(settings: &ReceiverSettings, output_rate_hz: f64) -> usize {
    let least = (RATE_PER_BANDWIDTH * settings.bandwidth_hz).max(RATE_PER_HIGH_CORNER * settings.audio_band.high_hz);
    (least / output_rate_hz).ceil().max(2.0) as usize
}

/// A receiver at work.
#[derive(Debug, Clone)]
pub(crate) struct Chain {
    rate_hz: f64,
    /// Internal sample number from time 0; time is this over the rate, so it never drifts.
    index: i64,
    channel: ChannelState,
    order: Option<usize>,
    /// Strength of the impulse of a click of peak 1, s.
    impulse: f64,
    phases: Draw,
    drive: Option<Drive>,
    /// Envelope after what came in at the sample before.
    from: Complex,
    /// Strength and age in s of the clicks since then.
    clicks: Vec<(Complex, f64)>,
    /// Where in the step they came, in parts of it, if the detector must know.
    breaks: Vec<f64>,
    agc: Option<Agc>,
    detector: Demodulator,
    reference: Option<Reference>,
    audio: AudioFilter,
}

/// What enters the channel at every internal sample.
#[derive(Debug, Clone)]
struct Drive {
    noise: Option<(Normals, f64)>,
    carrier: Option<CarrierSource>,
}

impl Drive {
    #[inline]
    fn next(&mut self) -> Complex {
        let noise = self.noise.as_mut().map(|(normals, strength)| normals.complex() * *strength);
        let carrier = self.carrier.as_mut().map(CarrierSource::next_impulse);
        noise.unwrap_or_default() + carrier.unwrap_or_default()
    }
}

/// The carrier to which a synchronous detector is locked.
#[derive(Debug, Clone)]
struct Reference {
    phasor: Turning,
    /// Back by half a step and by a step.
    back: [Complex; 2],
    /// Phase that the channel adds.
    channel: Complex,
}

impl Reference {
    fn new(carrier: &CarrierSource, channel: Complex, offset_hz: f64, step_s: f64) -> Self {
        let back = [0.5, 1.0].map(|part| Complex::from_polar(1.0, -2.0 * PI * offset_hz * part * step_s));
        Self { phasor: carrier.phasor(), back, channel }
    }

    /// Beginning, middle and end of the step to the coming sample.
    fn next(&mut self) -> [Complex; 3] {
        let end = self.phasor.next() * self.channel;
        [end * self.back[1], end * self.back[0], end]
    }
}

impl Chain {
    /// A receiver at rest whose next sample is number `first` from time 0.
    pub(crate) fn new(settings: &ReceiverSettings, rate_hz: f64, first: i64, seed: u64) -> Self {
        let step_s = 1.0 / rate_hz;
        let channel = Channel::new(settings.selectivity, settings.bandwidth_hz);
        let state = channel.state(step_s);
        let noise = (settings.noise > 0.0).then(|| {
            let strength = settings.noise / energy(&channel, step_s).sqrt();
            (Draw::new(seed, Stream::ChannelNoise).normals(), strength)
        });
        let mut reference = None;
        let carrier = settings.carrier.as_ref().filter(|carrier| carrier.amplitude > 0.0).map(|carrier| {
            let gain = channel.gain(carrier.offset_hz);
            let source = CarrierSource::new(carrier, gain.norm(), step_s, Draw::new(seed, Stream::Carrier));
            if settings.detector.kind == DetectorKind::Synchronous {
                reference = Some(Reference::new(&source, gain / gain.norm(), carrier.offset_hz, step_s));
            }
            source
        });
        Self {
            rate_hz,
            index: first - 1,
            order: state.order(),
            channel: state,
            impulse: 1.0 / channel.impulse_peak().1,
            phases: Draw::new(seed, Stream::ClickPhase),
            drive: (noise.is_some() || carrier.is_some()).then_some(Drive { noise, carrier }),
            from: Complex::default(),
            clicks: Vec::new(),
            breaks: Vec::new(),
            agc: settings.agc.map(|agc| Agc::new(agc, step_s)),
            detector: Demodulator::new(settings.detector, settings.bandwidth_hz, step_s),
            reference,
            audio: AudioFilter::new(settings.audio_band, rate_hz).with_de_emphasis(settings.de_emphasis_s, rate_hz),
        }
    }

    /// What the mean over a step and the audio filter take from the audio at a frequency in cycles per internal sample, beyond
    /// the circuits that they stand for, as the gain that gives it back.
    pub(crate) fn to_give_back(&self, cycles: f64) -> Complex {
        let x = PI * cycles;
        self.audio.bend(cycles) * (x / x.sin())
    }

    /// Carries the channel to the next internal sample and returns its time in s.
    #[inline]
    pub(crate) fn advance(&mut self) -> f64 {
        if let (Some(drive), Some(count)) = (&mut self.drive, self.channel.wants()) {
            let impulses: Vec<Complex> = (0..count).map(|_| drive.next()).collect();
            self.channel.drive(&impulses);
        }
        self.index += 1;
        self.channel.advance();
        self.index as f64 / self.rate_hz
    }

    /// A click of the given peak at a time at or before the sample last advanced to, with a random carrier phase.
    pub(crate) fn click(&mut self, time_s: f64, peak: f64) {
        let strength = self.phases.phase() * (peak * self.impulse);
        if peak != 0.0 {
            let age_s = self.index as f64 / self.rate_hz - time_s;
            self.channel.add_impulse(strength, age_s);
            self.clicks.push((strength, age_s));
        }
    }

    /// Mean of the audio over the step to the sample last advanced to; to be asked for once in each step.
    #[inline]
    pub(crate) fn audio(&mut self) -> f64 {
        let quarters = self.channel.quarters();
        let now = quarters[3];
        let detected = self.detected(quarters);
        self.clicks.clear();
        self.drive(now);
        if self.index % SETTLE_EVERY == 0 {
            self.channel.settle();
            self.audio.settle();
        }
        self.audio.step(detected)
    }

    /// Output of the detector for the step whose quarters end at these values of the envelope.
    #[inline]
    fn detected(&mut self, quarters: [Complex; 4]) -> f64 {
        let (channel, clicks) = (&self.channel, &self.clicks);
        let at = |part: usize| {
            let z = channel.output_before(PARTS - part);
            let premature = |(strength, age_s): &(Complex, f64)| strength * channel.premature(*age_s, PARTS - part);
            if clicks.is_empty() { z } else { z - clicks.iter().map(premature).sum::<Complex>() }
        };
        self.breaks.clear();
        if !clicks.is_empty() && self.order.is_some_and(|order| order <= SHARP_ORDER) {
            self.breaks.extend(clicks.iter().map(|(_, age_s)| PARTS as f64 * (1.0 - age_s * self.rate_hz)));
        }
        let [quarter, middle, three_quarters, now] = quarters;
        let within = if clicks.is_empty() {
            [quarter, middle, three_quarters]
        } else {
            [1, 2, 3].map(|quarters| at(quarters * PARTS / 4))
        };
        let [quarter, middle, three_quarters] = within;
        let mut passage = Passage::new([self.from, quarter, middle, three_quarters, now], &self.breaks, at);
        let reference = self.reference.as_mut().map_or([Complex::from(1.0); 3], Reference::next);
        if let Some(agc) = &mut self.agc {
            let before = agc.now();
            let after = agc.passage(&passage);
            passage.amplify(before, after);
        }
        self.detector.passage(&passage, reference)
    }

    /// Lets in what comes at the sample last advanced to, at which the envelope is `now`.
    #[inline]
    fn drive(&mut self, now: Complex) {
        if let Some(drive) = self.drive.as_mut().filter(|_| self.order.is_some()) {
            self.channel.add_impulse_now(drive.next());
        }
        // A filter of higher order does not jump.
        self.from = if self.order == Some(1) { self.channel.output() } else { now };
    }
}

/// Mean square behind the filter of white impulses of mean square 1, one in each step: ∫|h|² dt over the step, by the trapezoidal
/// rule.
fn energy(channel: &Channel, step_s: f64) -> f64 {
    const FINE: i64 = 8;
    let fine_s = step_s / FINE as f64;
    let count = (channel.memory_s() / fine_s).ceil() as i64;
    let square = |k: i64| channel.impulse_response(k as f64 * fine_s).norm_sqr();
    (0.5 * square(0) + (1..count).map(square).sum::<f64>()) / FINE as f64
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
            chain.drive(chain.channel.output());
            all.push(chain.channel.output());
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
            peak = peak.max(chain.channel.output().norm());
        }
        assert!((peak - 1.0).abs() < 1e-4, "{peak}");
    }
}
