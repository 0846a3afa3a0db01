//! One recording with its truth: a pure function of a kind and a seed.

use crate::firings::realised;
use crate::kinds;
use crate::random::Dice;
use crate::scene::Scene;

/// What is true of a recording of a gap.
#[derive(Clone, Default)]
pub struct Truth {
    /// Realised rate, 1/s.
    pub rate_hz: f64,
    /// Realised standard deviation of the periods about a straight line, s.
    pub jitter_s: f64,
    /// Mean period of the process, s, where there is one.
    pub process_period_s: Option<f64>,
    /// Standard deviation of the periods of the process, s, where there is one.
    pub process_jitter_s: Option<f64>,
    /// All firings on the rhythm, heard or not, s (without the receiver's delay).
    pub times_s: Vec<f64>,
    /// Firings not heard.
    pub unheard: usize,
    /// Extra strikes.
    pub extra: usize,
    /// Rate of a second, weaker train, 1/s.
    pub second_rate_hz: Option<f64>,
    /// The circuit, where the firings come from one.
    pub circuit: Option<CircuitTruth>,
}

/// The circuit behind the firings.
#[derive(Clone, Copy)]
pub struct CircuitTruth {
    /// Realised mean voltage at breakdown, V.
    pub gap_voltage_v: f64,
    /// Realised standard deviation of it, V.
    pub gap_voltage_spread_v: f64,
    /// Supply, V.
    pub supply_v: f64,
    /// Charging resistance, Ω.
    pub resistance_ohm: f64,
    /// Capacitance, F.
    pub capacitance_f: f64,
    /// Voltage left after a spark, V.
    pub residual_v: f64,
}

impl CircuitTruth {
    /// The bench file to pass with the recording.
    pub fn bench_toml(&self) -> String {
        format!(
            "[supply]\nvoltage = \"{:.6} V\"\n\n[charging]\nresistance = \"{:.6e} Ω\"\ncapacitance = \"{:.6e} F\"\n\n\
             [gap]\nresidual_voltage = \"{:.6} V\"\n",
            self.supply_v, self.resistance_ohm, self.capacitance_f, self.residual_v
        )
    }
}

impl Truth {
    /// Truth of firings in stretches (one stretch if the gap never stops).
    pub fn of(stretches: &[Vec<f64>]) -> Self {
        let realised = realised(stretches);
        Self { rate_hz: realised.rate_hz, jitter_s: realised.jitter_s, times_s: stretches.concat(), ..Self::default() }
    }

    /// Truth of one stretch.
    pub fn of_times(times: &[f64]) -> Self {
        Self::of(&[times.to_vec()])
    }

    /// The same with the process it was drawn from.
    pub fn with_process(mut self, period_s: f64, jitter_s: f64) -> Self {
        self.process_period_s = Some(period_s);
        self.process_jitter_s = Some(jitter_s);
        self
    }
}

/// What an analyzer may say of a recording.
#[derive(Clone)]
pub enum Answer {
    /// A gap: these figures.
    Gap(Box<Truth>),
    /// Not a gap: no figure.
    Nothing,
    /// Clicks without a rhythm: nothing, or `irregular`.
    NoRhythm,
    /// A rhythm that no gap made; a figure is no fault.
    OtherRhythm,
}

/// The sound of a case before rendering.
pub enum Source {
    /// Heard through a receiver.
    Scene(Box<Scene>),
    /// Recorded as it is: samples within −1..1 and their rate in hertz.
    Sound(Vec<f32>, u32),
}

/// What a kind builds from its draws.
pub struct Draft {
    /// What is heard.
    pub source: Source,
    /// What is right.
    pub answer: Answer,
}

impl Draft {
    /// A recording of a gap.
    pub fn gap(scene: Scene, truth: Truth) -> Self {
        Self { source: Source::Scene(Box::new(scene)), answer: Answer::Gap(Box::new(truth)) }
    }
}

/// A recording with known truth.
pub struct Case {
    /// Kind.
    pub kind: &'static str,
    /// Seed.
    pub seed: u64,
    /// Sample rate, Hz.
    pub sample_rate_hz: u32,
    /// Samples, full scale = 1.
    pub samples: Vec<f32>,
    /// What is right.
    pub answer: Answer,
}

impl Case {
    /// Makes the case.
    pub fn make(kind: &kinds::Kind, seed: u64) -> Self {
        let mut dice = Dice::new(kind.name, seed);
        let draft = (kind.build)(&mut dice);
        let (samples, sample_rate_hz) = match draft.source {
            Source::Scene(scene) => (scene.render(&mut dice), scene.recorder.sample_rate_hz),
            Source::Sound(samples, rate_hz) => (samples, rate_hz),
        };
        Self { kind: kind.name, seed, sample_rate_hz, samples, answer: draft.answer }
    }

    /// Length, s.
    pub fn duration_s(&self) -> f64 {
        self.samples.len() as f64 / f64::from(self.sample_rate_hz)
    }
}
