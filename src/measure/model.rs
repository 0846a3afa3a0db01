//! A train that was learnt, and how it is followed through other audio of the same recording.

use super::hypothesis::{Hypothesis, apart_s};
use super::refine::Finder;
use super::times::Timing;
use super::train::Train;
use super::trains;
use super::window::Window;
use crate::clicks::candidates;
use crate::clicks::filter::Kernel;
use crate::clicks::shape::Shape;
use crate::clicks::timing::Flatness;
use crate::rhythm::fit::Fit;
use crate::rhythm::phase;

/// Firings and cover of the part learnt from that are enough to follow the train elsewhere; the part may be silent between with
/// many firings, or with a few that each bring much evidence (nats).
const ENOUGH_FIRINGS: usize = 40;
const ENOUGH_COVER: f64 = 0.8;
const MANY_FIRINGS: usize = 150;
const FEW_FIRINGS: usize = 25;
const SOLID_EVIDENCE: f64 = 2.0;
/// A followed train that leaves more equal clicks than this beside it, per firing, has lost its rhythm …
const MOST_STRAYS: f64 = 0.3;
/// … and so has one whose firings bring less than this share of the evidence that they brought where it was learnt.
const LEAST_EVIDENCE: f64 = 0.4;

/// Separate clicks: how they are found and timed. Filters stay those of the part learnt from, so that times and sizes of all windows
/// belong together.
pub struct Model {
    fit: Fit,
    others: Vec<Fit>,
    shape: Shape,
    fast: bool,
    /// Standard deviation that marks are counted in.
    scale: f64,
    /// From audio to the matched output, one for each vector of the shape.
    find: Vec<Kernel>,
    /// From audio to what sizes are read in, and the factor back to full scale.
    plain: Kernel,
    plain_scale: f32,
    /// From audio to what times are read in.
    flat: Option<Kernel>,
    timing: Timing,
    /// True if clicks overlap, so that the phase of the line is read as well.
    overlaps: bool,
    /// Evidence of a firing where it was learnt, nats.
    each: f64,
}

impl Model {
    /// The model of a hypothesis on the window that taught it.
    #[must_use]
    pub fn new(
        window: &Window,
        h: &Hypothesis,
        others: &[Fit],
        finder: &Finder,
        timing: Timing,
        overlaps: bool,
    ) -> Self {
        let correlator = |v: &Vec<f32>| window.bank.correlator(v, h.shape.centre);
        Self {
            fit: h.fit.clone(),
            others: others.to_vec(),
            fast: h.fast,
            scale: h.candidates.scale,
            find: h.shape.vectors.iter().map(|v| finder.kernel.then(&correlator(v))).collect(),
            plain: window.flattening(Flatness::Plain),
            plain_scale: plain_scale(window),
            flat: timing.reader.as_ref().map(|(_, flatness)| window.flattening(*flatness)),
            shape: h.shape.clone(),
            timing,
            overlaps,
            each: h.fit.each,
        }
    }

    /// True if the part learnt from held enough of the train to follow it.
    #[must_use]
    pub fn is_enough(&self) -> bool {
        let fit = &self.fit;
        let firings = fit.chain.index.len();
        let solid =
            firings >= MANY_FIRINGS || (firings >= FEW_FIRINGS && fit.evidence > SOLID_EVIDENCE * firings as f64);
        (firings >= ENOUGH_FIRINGS && fit.cover > ENOUGH_COVER) || (solid && fit.fills_its_time())
    }

    /// Period, s.
    #[must_use]
    pub fn period_s(&self) -> f64 {
        self.fit.period_s
    }

    /// The train in the very window that taught it.
    #[must_use]
    pub fn train_of(&self, window: &Window, h: &Hypothesis, others: &[Fit]) -> Train {
        let flat = self.timing.reader.as_ref().map_or(&[][..], |(_, flatness)| window.flat(*flatness));
        self.finish(window, h, others, window.flat(Flatness::Plain), flat).without_slips()
    }

    /// Follows the train through another window; none if it is lost there. What the window tells of its period and its marks is taken
    /// on, so that a slow drift is followed from window to window.
    pub fn follow(&mut self, window: &Window, explanation: &mut Vec<String>) -> Option<Train> {
        let trace = self.trace(window)?;
        let fit = &trace.hypothesis.fit;
        explanation.push(format!(
            "followed through {:.1} s: {} firings, evidence {:.0} nats, covers {:.0} %",
            window.duration_s(),
            fit.chain.index.len(),
            fit.evidence,
            100.0 * fit.cover
        ));
        if fit.each < LEAST_EVIDENCE * self.each {
            return None;
        }
        let train = self.finish(window, &trace.hypothesis, &trace.others, &trace.plain, &trace.flat);
        let strays = train.extra.len() as f64 / train.time_s.len() as f64;
        if strays >= MOST_STRAYS {
            return None;
        }
        self.fit = trace.hypothesis.fit;
        if trace.others.len() == self.others.len() {
            self.others = trace.others;
        }
        Some(train.without_slips())
    }

    /// The rhythm in another window, as a hypothesis to learn from.
    #[must_use]
    pub fn hypothesis_in(&self, window: &Window) -> Option<Hypothesis> {
        self.trace(window).map(|trace| trace.hypothesis)
    }

    fn trace(&self, window: &Window) -> Option<Trace> {
        let mut kernels: Vec<&Kernel> = self.find.iter().collect();
        kernels.push(&self.plain);
        kernels.extend(&self.flat);
        let mut outputs = window.bank.apply_all(&window.x, &kernels);
        let flat = self.flat.as_ref().and_then(|_| outputs.pop()).unwrap_or_default();
        let plain = outputs.pop().unwrap_or_default();
        let output = candidates::joined(outputs, self.shape.signed);
        let apart = apart_s(&self.shape, window.rate_hz, self.fit.period_s, self.fast);
        let found = candidates::find(&output, window.rate_hz, apart).over(self.scale);
        let (fit, others) = trains::follow(&found, window.duration_s(), &self.fit, &self.others)?;
        let hypothesis = Hypothesis { fit, candidates: found, shape: self.shape.clone(), fast: self.fast };
        Some(Trace { hypothesis, others, plain, flat })
    }

    fn finish(&self, window: &Window, h: &Hypothesis, others: &[Fit], plain: &[f32], flat: &[f32]) -> Train {
        let time_s = self.timing.read(flat, &h.fit.times_s(&h.candidates));
        let mut train = Train::of_clicks(h, others, time_s, self.timing.noise, plain, window.rate_hz);
        train.size.iter_mut().for_each(|s| *s *= self.plain_scale);
        train.extra.iter_mut().for_each(|e| e.1 *= self.plain_scale);
        if self.overlaps {
            let read = phase::read(window.bank, &window.x, window.rate_hz, 1.0 / h.fit.period_s);
            train.phase_jitter_s = read.map(|p| p.jitter_s);
        }
        train
    }
}

/// A train found again in another window: with the trains beside it, and the signals that its sizes and times are read in.
struct Trace {
    hypothesis: Hypothesis,
    others: Vec<Fit>,
    plain: Vec<f32>,
    flat: Vec<f32>,
}

/// The flattened signal for reading sizes is scaled by its gain: this takes it back to full scale.
fn plain_scale(window: &Window) -> f32 {
    let (high_pass_hz, floor) = Flatness::Plain.settings();
    let gain = window.spectrum().whitening(high_pass_hz, floor);
    (1.0 / gain(1_000.0).max(1e-30)) as f32
}
