//! The channel filter as a state that is carried exactly from one instant to any other.
//!
//! The transfer function is split into partial fractions, Σ g/(s − p)^k. A pole p of multiplicity m holds a chain of m states,
//! z₁' = p·z₁ + u, z_k' = p·z_k + |p|·z_(k−1), whose step over a time t is exact: z_k(t) = e^(pt)·Σ (|p|t)^j/j!·z_(k−j).
//! A click between two samples therefore enters with its exact age, and a sample costs only the order of the filter. The flat
//! filter of linear phase has no poles; it adds the samples of its impulse response for each click.
//!
//! Times in s, frequencies in Hz from the tuned frequency. Gain 1 at the tuned frequency.

use super::linear_phase::{LinearPhase, LinearState};
use super::passage::PARTS;
use super::selectivity::Pole;
use super::{Complex, Selectivity};

/// Square of a state that is as good as 0 (states are of the order of 10⁻⁴ for a click).
const NOTHING_SQUARED: f64 = 1e-60;

/// One pole with the weights of its chain of states in the output.
#[derive(Debug, Clone, PartialEq)]
struct Mode {
    pole: Complex,
    /// Weight of z₁, z₂, ….
    weights: Vec<Complex>,
}

impl Mode {
    /// |p|, which keeps the states of a chain of one size.
    fn scale(&self) -> f64 {
        self.pole.norm()
    }

    /// e^(pt)·(|p|t)^j/j! for j = 0, 1, ….
    fn step(&self, time_s: f64) -> Vec<Complex> {
        let mut term = (self.pole * time_s).exp();
        let ratio = self.scale() * time_s;
        (1..=self.weights.len())
            .map(|j| {
                let this = term;
                term *= ratio / j as f64;
                this
            })
            .collect()
    }

    /// Weights of z₁, z₂, … in the output a time from now (before now, if negative) as long as nothing comes in.
    fn weights_after(&self, time_s: f64) -> Vec<Complex> {
        let step = self.step(time_s);
        (0..step.len()).map(|k| self.weights[k..].iter().zip(&step).map(|(w, term)| w * term).sum()).collect()
    }
}

/// A channel filter.
#[derive(Debug, Clone, PartialEq)]
pub struct Channel {
    modes: Vec<Mode>,
    /// Time constant of the slowest pole, s.
    slowest_s: f64,
    /// The filter without poles, which then has no modes.
    flat: Option<LinearPhase>,
}

impl Channel {
    /// The filter of a `selectivity` with a 6 dB bandwidth in Hz.
    #[must_use]
    pub fn new(selectivity: Selectivity, bandwidth_hz: f64) -> Self {
        if let Selectivity::Flat { edge_percent } = selectivity {
            let flat = LinearPhase::new(bandwidth_hz, bandwidth_hz * f64::from(edge_percent) / 100.0);
            return Self { modes: Vec::new(), slowest_s: 0.0, flat: Some(flat) };
        }
        let poles = selectivity.poles(bandwidth_hz);
        let slowest_s = poles.iter().map(|p| -1.0 / p.at.re).fold(0.0, f64::max);
        let modes = (0..poles.len()).map(|i| Mode { pole: poles[i].at, weights: weights(&poles, i) }).collect();
        Self { modes, slowest_s, flat: None }
    }

    /// Complex gain at a distance of `offset_hz` from the tuned frequency.
    #[must_use]
    pub fn gain(&self, offset_hz: f64) -> Complex {
        if let Some(flat) = &self.flat {
            return flat.gain(offset_hz);
        }
        let s = Complex::new(0.0, std::f64::consts::TAU * offset_hz);
        self.modes
            .iter()
            .map(|mode| {
                let first = 1.0 / (s - mode.pole);
                let chain = first * mode.scale();
                let mut term = first;
                mode.weights.iter().fold(Complex::default(), |sum, weight| {
                    let sum = sum + weight * term;
                    term *= chain;
                    sum
                })
            })
            .sum()
    }

    /// Envelope `time_s` after an impulse of unit strength, 1/s; 0 before it.
    #[must_use]
    pub fn impulse_response(&self, time_s: f64) -> Complex {
        if time_s < 0.0 {
            return Complex::default();
        }
        if let Some(flat) = &self.flat {
            return Complex::from(flat.impulse_response(time_s));
        }
        self.modes
            .iter()
            .map(|mode| mode.step(time_s).iter().zip(&mode.weights).map(|(z, weight)| z * weight).sum::<Complex>())
            .sum()
    }

    /// Peak of the envelope after an impulse of unit strength: (time in s, height in 1/s). The height is the impulse
    /// bandwidth in Hz.
    #[must_use]
    pub fn impulse_peak(&self) -> (f64, f64) {
        let height = |t: f64| self.impulse_response(t).norm();
        if let Some(flat) = &self.flat {
            return (0.5 * flat.length_s(), height(0.5 * flat.length_s()));
        }
        let mut step = self.slowest_s / 32.0;
        let mut best = 0.0;
        // The peak of an n-th order filter lies near n − 1 time constants.
        let steps = 64 * (2 + self.modes.iter().map(|m| m.weights.len()).sum::<usize>());
        for k in 0..steps {
            let t = k as f64 * step;
            if height(t) > height(best) {
                best = t;
            }
        }
        while step > 1e-9 * self.slowest_s {
            step /= 2.0;
            for t in [(best - step).max(0.0), best + step] {
                if height(t) > height(best) {
                    best = t;
                }
            }
        }
        (best, height(best))
    }

    /// Time after which what an impulse left is under 10⁻⁷ of its peak, s.
    #[must_use]
    pub fn memory_s(&self) -> f64 {
        if let Some(flat) = &self.flat {
            return flat.length_s();
        }
        let (peak_s, height) = self.impulse_peak();
        let mut t = peak_s + self.slowest_s;
        // A ringing tail crosses zero: look at two instants a quarter of a ring apart.
        while self.impulse_response(t).norm() + self.impulse_response(t + self.slowest_s).norm() > 1e-7 * height {
            t += self.slowest_s;
        }
        t
    }

    /// A state at rest that is carried from sample to sample by `step_s`.
    #[must_use]
    pub fn state(&self, step_s: f64) -> ChannelState {
        let flat = self.flat.as_ref().map(|f| f.state(step_s));
        let mut state = ChannelState { step_s, pairs: Vec::new(), chains: Vec::new(), flat };
        let quarters = QUARTERS.map(|quarter| -step_s * (1.0 - quarter));
        for mode in &self.modes {
            let step = mode.step(step_s);
            let before = (0..=PARTS).map(|part| mode.weights_after(-step_s * part as f64 / PARTS as f64));
            let nothing = Complex::default();
            let first_two = |terms: &[Complex]| [terms[0], terms.get(1).copied().unwrap_or(nothing)];
            if step.len() <= 2 {
                let before = before.map(|weights| first_two(&weights)).collect();
                let along = quarters.map(|time_s| first_two(&mode.weights_after(time_s)));
                let along = [0, 1].map(|k| QuarterWeights::new(along.map(|weights| weights[k])));
                let step = first_two(&step);
                state.pairs.push(Pair { mode: mode.clone(), step, along, before, states: [nothing; 2] });
            } else {
                let (before, states) = (before.collect(), vec![nothing; step.len()]);
                let along = quarters.map(|time_s| mode.weights_after(time_s));
                let along = (0..step.len()).map(|k| QuarterWeights::new(along.each_ref().map(|w| w[k]))).collect();
                state.chains.push(Chain { mode: mode.clone(), states, step, along, before });
            }
        }
        state
    }
}

/// Weights of the chain of pole `which`: the Taylor series of the rest of the transfer function about it.
fn weights(poles: &[Pole], which: usize) -> Vec<Complex> {
    let Pole { at, multiplicity } = poles[which];
    let mut series = vec![Complex::default(); multiplicity];
    series[0] = Complex::from(1.0);
    for (_, other) in poles.iter().enumerate().filter(|(i, _)| *i != which) {
        let distance = at - other.at;
        for _ in 0..other.multiplicity {
            divide_by_linear(&mut series, -other.at, distance);
        }
    }
    // H = Σ series_r·(s − p)^(r − m)·(−p)^m, and z_k stands for |p|^(k−1)/(s − p)^k.
    let gain = (0..multiplicity).fold(Complex::from(1.0), |g, _| g * -at);
    let scale = at.norm();
    (1..=multiplicity).map(|k| gain * series[multiplicity - k] / scale.powi(k as i32 - 1)).collect()
}

/// The series times gain/(distance + x), in place.
fn divide_by_linear(series: &mut [Complex], gain: Complex, distance: Complex) {
    let mut before = Complex::default();
    for term in series.iter_mut() {
        before = (*term * gain - before) / distance;
        *term = before;
    }
}

/// Places in a step at which the envelope is always asked for.
const QUARTERS: [f64; 4] = [0.25, 0.5, 0.75, 1.0];

/// Weights of one state in the envelope at the four quarters of the step that ends now. A weight w stands as (w.re, w.re) and
/// (−w.im, w.im), so that the real and the imaginary part of a product are computed side by side.
#[derive(Debug, Clone, Copy, PartialEq)]
struct QuarterWeights([[[f64; 2]; 2]; 4]);

impl QuarterWeights {
    fn new(weights: [Complex; 4]) -> Self {
        Self(weights.map(|w| [[w.re, w.re], [-w.im, w.im]]))
    }

    /// Adds what a state gives to real and imaginary parts.
    #[inline]
    fn add(&self, z: Complex, sums: &mut [[f64; 2]; 4]) {
        let (straight, crossed) = ([z.re, z.im], [z.im, z.re]);
        for (sum, [re, im]) in sums.iter_mut().zip(&self.0) {
            for part in 0..2 {
                sum[part] += re[part] * straight[part] + im[part] * crossed[part];
            }
        }
    }
}

/// z_k = Σ step_j·z_(k−j), in place.
fn convolve(z: &mut [Complex], step: &[Complex]) {
    for k in (0..z.len()).rev() {
        z[k] = (0..=k).map(|j| step[j] * z[k - j]).sum();
    }
}

/// States of a single or double pole, as the usual filters have; of a single one the second state stays zero.
#[derive(Debug, Clone, PartialEq)]
struct Pair {
    mode: Mode,
    /// What one step does to the states.
    step: [Complex; 2],
    along: [QuarterWeights; 2],
    states: [Complex; 2],
    /// Weights in the output so many parts of a step ago.
    before: Vec<[Complex; 2]>,
}

/// States of one pole of higher multiplicity.
#[derive(Debug, Clone, PartialEq)]
struct Chain {
    mode: Mode,
    /// Step over one sample.
    step: Vec<Complex>,
    along: Vec<QuarterWeights>,
    /// Weights in the output so many parts of a step ago.
    before: Vec<Vec<Complex>>,
    states: Vec<Complex>,
}

/// A channel filter at work.
#[derive(Debug, Clone)]
pub struct ChannelState {
    step_s: f64,
    pairs: Vec<Pair>,
    chains: Vec<Chain>,
    flat: Option<LinearState>,
}

impl ChannelState {
    /// Carries the state on by one sample.
    #[inline]
    pub fn advance(&mut self) {
        if let Some(flat) = &mut self.flat {
            flat.advance();
        }
        for Pair { step: [e, e_t], states: [z, chained], .. } in &mut self.pairs {
            *chained = *e * *chained + *e_t * *z;
            *z *= *e;
        }
        for chain in &mut self.chains {
            convolve(&mut chain.states, &chain.step);
        }
    }

    /// Adds what an impulse of the given strength has become `age_s` after it.
    pub fn add_impulse(&mut self, strength: Complex, age_s: f64) {
        if let Some(flat) = &mut self.flat {
            flat.add_impulse(strength, age_s);
        }
        for pair in &mut self.pairs {
            for (z, term) in pair.states.iter_mut().zip(pair.mode.step(age_s)) {
                *z += strength * term;
            }
        }
        for chain in &mut self.chains {
            for (z, term) in chain.states.iter_mut().zip(chain.mode.step(age_s)) {
                *z += strength * term;
            }
        }
    }

    /// Adds an impulse at this very instant.
    #[inline]
    pub fn add_impulse_now(&mut self, strength: Complex) {
        if let Some(flat) = &mut self.flat {
            flat.add_impulse(strength, 0.0);
        }
        for pair in &mut self.pairs {
            pair.states[0] += strength;
        }
        for chain in &mut self.chains {
            chain.states[0] += strength;
        }
    }

    /// Number of impulses, one at each of the coming samples, that the filter wants to be given together by
    /// [`ChannelState::drive`] before the next [`ChannelState::advance`]; none where they may come one by one.
    #[inline]
    pub(crate) fn wants(&self) -> Option<usize> {
        self.flat.as_ref().and_then(LinearState::wants)
    }

    /// Takes the impulses of the coming samples.
    pub(crate) fn drive(&mut self, impulses: &[Complex]) {
        if let Some(flat) = &mut self.flat {
            flat.drive(impulses);
        }
    }

    /// Puts states that are far below anything audible to rest, where arithmetic on them would become slow.
    pub fn settle(&mut self) {
        let pairs = self.pairs.iter_mut().flat_map(|pair| &mut pair.states);
        for z in pairs.chain(self.chains.iter_mut().flat_map(|chain| &mut chain.states)) {
            if z.norm_sqr() < NOTHING_SQUARED {
                *z = Complex::default();
            }
        }
    }

    /// Order of the filter; none for one without poles.
    pub(crate) fn order(&self) -> Option<usize> {
        let of_chains = self.chains.iter().map(|chain| chain.states.len());
        let of_pairs = self.pairs.iter().map(|pair| pair.mode.weights.len());
        self.flat.is_none().then(|| of_chains.chain(of_pairs).sum())
    }

    /// Complex envelope so many parts of a step ago, as if what has come in since had been there.
    #[inline]
    pub(crate) fn output_before(&self, parts: usize) -> Complex {
        let mut sum = self.flat.as_ref().map_or(Complex::default(), |flat| flat.output_before(parts));
        for Pair { before, states: [z, chained], .. } in &self.pairs {
            let [w, chained_w] = before[parts];
            sum = sum + z * w + chained * chained_w;
        }
        for chain in &self.chains {
            for (z, weight) in chain.states.iter().zip(&chain.before[parts]) {
                sum += z * weight;
            }
        }
        sum
    }

    /// What [`ChannelState::output_before`] holds of a click of strength 1 that is `age_s` old although it had not come yet.
    pub(crate) fn premature(&self, age_s: f64, parts: usize) -> Complex {
        if let Some(flat) = &self.flat {
            return Complex::from(flat.premature(age_s, parts));
        }
        let since_s = age_s - self.step_s * parts as f64 / PARTS as f64;
        if since_s >= 0.0 {
            return Complex::default();
        }
        let modes = self.pairs.iter().map(|pair| &pair.mode).chain(self.chains.iter().map(|chain| &chain.mode));
        modes.map(|mode| mode.weights_after(since_s)[0]).sum()
    }

    /// Complex envelope at this instant.
    #[inline]
    #[must_use]
    pub fn output(&self) -> Complex {
        let mut sum = self.flat.as_ref().map_or(Complex::default(), LinearState::output);
        for Pair { mode, states, .. } in &self.pairs {
            sum += states.iter().zip(&mode.weights).map(|(z, weight)| z * weight).sum::<Complex>();
        }
        for chain in &self.chains {
            for (z, weight) in chain.states.iter().zip(&chain.mode.weights) {
                sum += z * weight;
            }
        }
        sum
    }

    /// Complex envelope after each quarter of the step that ends now, as if what has come in since had been there.
    #[inline]
    pub(crate) fn quarters(&self) -> [Complex; 4] {
        if let Some(flat) = &self.flat {
            return [3, 2, 1, 0].map(|left| flat.output_before(left * PARTS / 4));
        }
        let mut sums = [[0.0; 2]; 4];
        for Pair { along: [w, chained_w], states: [z, chained], .. } in &self.pairs {
            w.add(*z, &mut sums);
            chained_w.add(*chained, &mut sums);
        }
        for chain in &self.chains {
            for (z, weights) in chain.states.iter().zip(&chain.along) {
                weights.add(*z, &mut sums);
            }
        }
        sums.map(|[re, im]| Complex::new(re, im))
    }
}
