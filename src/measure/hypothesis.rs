//! The first pass: which shape, which sign, which period.

use super::window::Window;
use crate::clicks::candidates::{self, Candidates};
use crate::clicks::shape::{FirstLook, Shape, first_look, pieces};
use crate::clicks::snippet::dot;
use crate::rhythm::fit::{Fit, Start};
use crate::rhythm::search;
use rustfft::num_complex::Complex32;

/// A rhythm with the candidates and the shape that it was found with.
pub struct Hypothesis {
    /// The fit; its chain refers to `candidates`.
    pub fit: Fit,
    /// All candidates.
    pub candidates: Candidates,
    /// The click's shape.
    pub shape: Shape,
    /// True if found among closely spaced candidates.
    pub fast: bool,
}

/// Which periods are looked for.
#[derive(Debug, Clone, Copy)]
pub struct Reach {
    /// Shortest of separate clicks, s.
    pub shortest_s: f64,
    /// One that is tried whatever the grid says, s.
    pub expected_s: Option<f64>,
}

/// Candidates per shortest period that a search for slow rhythms keeps.
const SLOW_DENSITY: f64 = 16.0;

impl Reach {
    /// All periods.
    pub const ALL: Self = Self { shortest_s: search::SHORTEST_SLOW_S, expected_s: None };

    /// Periods above one, s.
    #[must_use]
    pub fn slow(shortest_s: f64) -> Self {
        Self { shortest_s: shortest_s.max(search::SHORTEST_SLOW_S), expected_s: None }
    }

    /// True if fast trains and lines are looked for too.
    #[must_use]
    pub fn is_all(self) -> bool {
        self.shortest_s <= search::SHORTEST_SLOW_S
    }

    fn thinned(self, c: Candidates, duration_s: f64) -> Candidates {
        let most = (SLOW_DENSITY * duration_s / self.shortest_s) as usize;
        if self.is_all() || c.len() <= most { c } else { c.pick(&c.strongest(most)) }
    }
}

/// From this share of one sign on, clicks are likely signed …
const SIGNED: f64 = 0.8;
/// … and from this on, nothing else is tried.
const CERTAIN: f64 = 0.985;
/// Maxima nearer than this are one click, s (slow trains only) …
const APART_S: f64 = 0.2e-3;
/// … or nearer than the click's swings and a little, s, but not this share of the period.
const SWING_MORE_S: f64 = 0.1e-3;
const APART_PERIODS: f64 = 0.35;
/// Of a slow train, nor so near in periods up to this many s: which of a click's swings is the click is told by its size, not by what
/// makes the rhythm most regular.
const SLOW_APART: (f64, f64) = (0.05, 1e-3);
/// The period taken for that before one is known, s.
const FIRST_PERIOD_S: f64 = 1e-3;
/// Candidates per expected firing when the best is fitted to all of the window.
pub const DENSITY: f64 = 8.0;

/// How far apart clicks of a shape are told apart, s; `fast` trains of overlapping clicks take every maximum.
#[must_use]
pub fn apart_s(shape: &Shape, rate_hz: f64, period_s: f64, fast: bool) -> f64 {
    if fast {
        return 0.0;
    }
    let swings_s = shape.swings() as f64 / rate_hz + SWING_MORE_S;
    let slow_s = (SLOW_APART.0 * period_s).min(SLOW_APART.1);
    swings_s.min(APART_PERIODS * period_s).max(APART_S).max(slow_s)
}

/// Looks for the best rhythm; lines of the explanation are appended.
#[must_use]
pub fn best(window: &Window, whitened: &[f32], reach: Reach, explanation: &mut Vec<String>) -> Option<Hypothesis> {
    let mut envelope: Vec<Complex32> = Vec::new();
    window.bank.apply_analytic(whitened, &window.kernel(|_| 1.0), &mut envelope);
    let look = first_look(whitened, &envelope, window.rate_hz)?;
    explanation.push(format!(
        "click shape learnt from the strongest peaks; {:.0} % of them have one sign",
        100.0 * look.positive_share.max(1.0 - look.positive_share)
    ));
    let mut best: Option<Hypothesis> = None;
    let mut output = Vec::new();
    for (turn, shape) in shapes(&look).into_iter().enumerate() {
        if best.as_ref().is_some_and(|b| rules_out(b, &shape, whitened, window.rate_hz)) {
            continue;
        }
        candidates::matched_output(window.bank, whitened, &shape, &mut output);
        for fast in [false, true] {
            let Some(search) = worth(best.as_ref(), turn, fast, reach) else { continue };
            let found =
                candidates::find(&output, window.rate_hz, apart_s(&shape, window.rate_hz, FIRST_PERIOD_S, fast));
            let found = reach.thinned(found, window.duration_s());
            let fits = match search {
                Search::Near(period_s) => search::rhythms_near(&found, window.duration_s(), period_s),
                Search::All => search::rhythms(&found, window.duration_s(), fast, reach.shortest_s, reach.expected_s),
            };
            for mut fit in fits {
                if !fit.fills_its_time() {
                    fit.evidence = fit.evidence.min(1e-3 * fit.evidence);
                }
                explanation.push(describe(&fit, &shape, fast));
                if best.as_ref().is_none_or(|b| better(&fit, &found, b)) {
                    best = Some(Hypothesis { fit, candidates: found.clone(), shape: shape.clone(), fast });
                }
            }
        }
    }
    let mut best = best?;
    let start = Start::again(&best.fit);
    let whole = search::fit_whole(&best.candidates, window.duration_s(), start, DENSITY)?;
    best.fit = Fit { evidence: whole.evidence.max(best.fit.evidence), ..whole };
    Some(best)
}

/// What is searched in the candidates of one shape.
enum Search {
    All,
    Near(f64),
}

/// What is worth searching, given the best so far and how many shapes were tried before. Nothing fast hides behind slow clicks that
/// leave nothing over; and once a rhythm is proven, another shape is only asked whether it shows that rhythm better.
fn worth(best: Option<&Hypothesis>, turn: usize, fast: bool, reach: Reach) -> Option<Search> {
    if fast && !reach.is_all() {
        return None;
    }
    let Some(best) = best else { return Some(Search::All) };
    if search::beyond_doubt(&best.fit) || (turn > 0 && best.fit.is_proven()) {
        let both = best.fit.period_s < search::FAST_S.1;
        return (both || best.fast == fast).then_some(Search::Near(best.fit.period_s));
    }
    Some(Search::All)
}

/// Clicks looked at for their sign, at most and at least: of fewer the shapes are those of noise.
const SIGNS: (usize, usize) = (200, 100);

/// True if a proven rhythm of unsigned clicks shows that a sign is not that of the clicks: then one sign shows the rhythm no better.
fn rules_out(best: &Hypothesis, shape: &Shape, whitened: &[f32], rate_hz: f64) -> bool {
    if best.shape.signed || !shape.signed || !best.fit.is_proven() || best.shape.centre != shape.centre {
        return false;
    }
    let times = best.fit.times_s(&best.candidates);
    if times.len() < SIGNS.1 {
        return false;
    }
    let stride = times.len().div_ceil(SIGNS.0);
    let positions: Vec<f64> = times.iter().step_by(stride).map(|t| t * rate_hz).collect();
    let rows = pieces(whitened, &positions, shape.centre);
    let agree = rows.iter().filter(|row| dot(row, &shape.vectors[0]) > 0.0).count();
    (agree as f64) < SIGNED * rows.len() as f64
}

/// Evidences nearer than this share are alike; the larger clicks then decide (natural log of the ratio): a side lobe keeps the
/// same rhythm.
const ALIKE: f64 = 0.03;
const LARGER: f64 = 0.15;

fn better(fit: &Fit, found: &Candidates, than: &Hypothesis) -> bool {
    if (fit.is_proven() && than.fit.is_loose()) || (than.fit.is_proven() && fit.is_loose()) {
        return fit.is_proven();
    }
    let ratio = fit.evidence / than.fit.evidence.max(1e-9);
    let size = |f: &Fit, c: &Candidates| f.marks.on.0 + c.scale.ln();
    let larger = size(fit, found) - size(&than.fit, &than.candidates);
    let same_rhythm = (fit.period_s / than.fit.period_s - 1.0).abs() < ALIKE;
    if same_rhythm && (ratio - 1.0).abs() < ALIKE && larger.abs() > LARGER { larger > 0.0 } else { ratio > 1.0 }
}

/// The shapes tried, the likeliest first: one signed shape, or both signs and an unsigned pair.
fn shapes(look: &FirstLook) -> Vec<Shape> {
    let share = look.positive_share.max(1.0 - look.positive_share);
    let flipped = look.positive_share < 0.5;
    let signed = |flip: bool| Shape {
        vectors: vec![look.vectors[0].iter().map(|v| if flip { -v } else { *v }).collect()],
        centre: look.centre,
        signed: true,
    };
    if share >= CERTAIN {
        return vec![signed(flipped)];
    }
    let pair = Shape { vectors: look.vectors[..2].to_vec(), centre: look.centre, signed: false };
    if share > SIGNED {
        vec![signed(flipped), signed(!flipped), pair]
    } else {
        vec![pair, signed(flipped), signed(!flipped)]
    }
}

fn describe(fit: &Fit, shape: &Shape, fast: bool) -> String {
    format!(
        "period {:.4} ms ({} clicks, {}): evidence {:.0} nats over no rhythm, {} firings, {:.2} % missed, scatter {:.2} %, covers {:.0} %",
        1e3 * fit.period_s,
        if shape.signed { "signed" } else { "unsigned" },
        if fast { "close" } else { "apart" },
        fit.evidence,
        fit.chain.index.len(),
        100.0 * fit.missed,
        100.0 * fit.jitter,
        100.0 * fit.cover
    )
}
