//! Settings that do not belong: locked to the ripple, in current limit, mislabelled; and forms of the law that the data demand.

use super::NoCalibration;
use super::fit::{Fit, fit};
use super::law::{Form, Point, Residual};
use super::setting::Known;
use crate::bench::si;
use crate::rhythm::mains_multiple;
use statrs::distribution::{ChiSquared, ContinuousCDF};
use std::collections::BTreeMap;

/// Probability of the chi-square below which the settings disagree: one good calibration in a hundred.
const DISAGREE: f64 = 0.01;

/// Fewest settings that are kept when others are left out.
const FEWEST: usize = 3;

/// Most settings that are left out for disagreeing.
const MOST_OUT: usize = 2;

/// Relative distance of a locked gap's rate from a multiple or fraction of the mains frequency.
const ON_THE_MAINS: f64 = 1e-3;

/// Distance within which a rate sits on the mains exactly, as only a locked gap does: a recorder's clock is better than that,
/// and another rate falls there once in some three hundred settings.
const EXACTLY: f64 = 1e-4;

/// Voltage spread of a setting over the median of the others below which the gap does not scatter freely.
const TOO_QUIET: f64 = 0.35;

/// Chi-square by which another exclusion must be worse to be ruled out: two standard deviations.
const CLEARLY_WORSE: f64 = 4.0;

/// Chi-square that a further parameter must be better by than any exclusion, before the law is changed.
const CLEARLY_BETTER: f64 = 4.0;

/// With a resistor the logarithm of the period falls at least as fast as that of the supply rises; below this share of it
/// the rate does not follow the supply.
const FOLLOWS: f64 = 0.7;

/// The settings that are kept, and the law through them.
pub(super) struct Checked {
    pub fit: Fit,
    /// Places of the points that are kept.
    pub kept: Vec<usize>,
    /// Why the others are not.
    pub reasons: BTreeMap<usize, String>,
    /// Factor on the standard uncertainties, for settings that disagree and cannot be told apart.
    pub widened: f64,
    pub notes: Vec<String>,
}

/// Probability of a chi-square as large as the fit's or larger; none without degrees of freedom.
pub(super) fn probability(fit: &Fit) -> Option<f64> {
    (fit.freedom > 0).then(|| ChiSquared::new(fit.freedom as f64).map_or(f64::NAN, |law| law.sf(fit.chi_square)))
}

fn agrees(fit: &Fit) -> bool {
    probability(fit).is_none_or(|probability| probability >= DISAGREE)
}

fn of(form: &Form, points: &[Point], places: &[usize]) -> Option<Fit> {
    let chosen: Vec<Point> = places.iter().map(|&i| points[i]).collect();
    fit(form, &chosen).filter(Fit::is_sound)
}

/// Fits the law to the points that belong.
pub(super) fn checked(form: &Form, known: &Known, points: &[Point], names: &[&str]) -> Result<Checked, NoCalibration> {
    let mut search = Search { form, known, points, names, reasons: BTreeMap::new(), notes: Vec::new() };
    let mut kept = search.unlocked();
    let mut fit = of(form, points, &kept);
    if !fit.as_ref().is_some_and(agrees) {
        (kept, fit) = search.agreeing(kept, fit);
    }
    let fit = fit.ok_or(NoCalibration::Undetermined)?;
    let widened = if agrees(&fit) { 1.0 } else { (fit.chi_square / fit.freedom as f64).sqrt() };
    Ok(Checked { fit, kept, reasons: search.reasons, widened, notes: search.notes })
}

struct Search<'a> {
    form: &'a Form,
    known: &'a Known,
    points: &'a [Point],
    names: &'a [&'a str],
    reasons: BTreeMap<usize, String>,
    notes: Vec<String>,
}

impl Search<'_> {
    /// The points whose gap is not locked to the ripple. A locked gap sits on the mains exactly, and hardly scatters.
    fn unlocked(&mut self) -> Vec<usize> {
        let all: Vec<usize> = (0..self.points.len()).collect();
        let lines: Vec<Option<f64>> = self.points.iter().map(|point| self.line(point, ON_THE_MAINS)).collect();
        let suspects: Vec<usize> = all.iter().copied().filter(|&i| lines[i].is_some()).collect();
        let others: Vec<usize> = all.iter().copied().filter(|&i| lines[i].is_none()).collect();
        if suspects.is_empty() || others.len() < 2 {
            return all;
        }
        let Some(fit) = of(self.form, self.points, &others) else { return all };
        let mut spreads: Vec<f64> = others.iter().map(|&i| fit.spread(&self.points[i])).collect();
        spreads.sort_by(f64::total_cmp);
        let usual = spreads[spreads.len() / 2];
        for place in suspects {
            let exactly = self.line(&self.points[place], EXACTLY).is_some();
            if exactly || fit.spread(&self.points[place]) < TOO_QUIET * usual {
                let line_hz = lines[place].unwrap_or_default();
                let reason = format!("it fires in step with {line_hz:.0} Hz: locked to the ripple of the supply");
                self.notes.push(format!("{} is left out: {reason}", self.names[place]));
                self.reasons.insert(place, reason);
            }
        }
        all.into_iter().filter(|place| !self.reasons.contains_key(place)).collect()
    }

    /// The mains line that a point's rate sits on.
    fn line(&self, point: &Point, within: f64) -> Option<f64> {
        let rate_hz = 1.0 / (point.charging_s + self.known.conduction.value);
        let stated = self.known.ripple_hz.filter(|ripple_hz| {
            let ratio = rate_hz / ripple_hz;
            let whole = if ratio >= 1.0 { ratio } else { 1.0 / ratio };
            (whole / whole.round() - 1.0).abs() < within
        });
        stated.or_else(|| mains_multiple(rate_hz, within))
    }

    /// Leaves settings out, or extends the law, until the rest agrees.
    fn agreeing(&mut self, kept: Vec<usize>, all: Option<Fit>) -> (Vec<usize>, Option<Fit>) {
        let out = self.exclusion(&kept);
        if let Some(extended) = self.extension(&kept, out.as_ref().map(|out| out.1.chi_square)) {
            return (kept, Some(extended));
        }
        let Some((out, found)) = out else {
            if let Some(all) = &all {
                let names: Vec<&str> = kept.iter().map(|&i| self.names[i]).collect();
                self.notes.push(format!(
                    "the settings disagree (chi-square {:.1} with {} degrees of freedom) and too few are left to tell which is \
                     wrong among {}; the uncertainties are widened for it",
                    all.chi_square,
                    all.freedom,
                    names.join(", ")
                ));
            }
            return (kept, all);
        };
        for &place in &out {
            let reason = self.reason(place, &found, &kept);
            self.notes.push(format!("{} is left out: {reason}", self.names[place]));
            self.reasons.insert(place, reason);
        }
        self.rivals(&kept, &out, &found);
        (kept.into_iter().filter(|place| !out.contains(place)).collect(), Some(found))
    }

    /// The smallest set of settings without which the rest agrees, and the law through the rest. Of several the one with the
    /// least chi-square, unless the rate of one does not follow the supply.
    fn exclusion(&self, kept: &[usize]) -> Option<(Vec<usize>, Fit)> {
        let most = kept.len().saturating_sub(FEWEST.max(self.form.demanded())).min(MOST_OUT);
        let limited = self.limited(kept);
        (1..=most).find_map(|size| {
            let mut candidates = self.without(kept, size);
            candidates.retain(|(_, fit)| agrees(fit) && !fit.at_bound);
            let by_limit = candidates.iter().position(|(out, _)| *out == limited);
            match by_limit {
                Some(place) => Some(candidates.swap_remove(place)),
                None => candidates.into_iter().min_by(|a, b| a.1.chi_square.total_cmp(&b.1.chi_square)),
            }
        })
    }

    /// All ways to leave `size` settings out.
    fn without(&self, kept: &[usize], size: usize) -> Vec<(Vec<usize>, Fit)> {
        let mut sets: Vec<Vec<usize>> = kept.iter().map(|&i| vec![i]).collect();
        if size == 2 {
            sets = kept.iter().flat_map(|&i| kept.iter().filter(move |&&j| j > i).map(move |&j| vec![i, j])).collect();
        }
        let rest = |out: &[usize]| kept.iter().copied().filter(|place| !out.contains(place)).collect::<Vec<_>>();
        sets.into_iter().filter_map(|out| of(self.form, self.points, &rest(&out)).map(|fit| (out, fit))).collect()
    }

    /// The settings whose rate does not follow their supply from the one below.
    fn limited(&self, kept: &[usize]) -> Vec<usize> {
        let mut order = kept.to_vec();
        order.sort_by(|&a, &b| self.points[a].supply_v.total_cmp(&self.points[b].supply_v));
        let mut limited: Vec<usize> =
            order.windows(2).filter(|pair| !self.follows(pair[0], pair[1])).flatten().copied().collect();
        limited.sort_unstable();
        limited.dedup();
        limited
    }

    fn follows(&self, lower: usize, upper: usize) -> bool {
        let (lower, upper) = (&self.points[lower], &self.points[upper]);
        let supplies = (upper.supply_v / lower.supply_v).ln();
        let periods = (lower.charging_s / upper.charging_s).ln();
        let u = (lower.supply_u_v / lower.supply_v).hypot(upper.supply_u_v / upper.supply_v);
        periods > FOLLOWS * supplies || supplies < 4.0 * u
    }

    /// A further parameter that makes all settings agree, if it does so clearly better than leaving one out.
    fn extension(&mut self, kept: &[usize], rival: Option<f64>) -> Option<Fit> {
        if kept.len() < self.form.demanded() + 2 {
            return None;
        }
        let free = Form { residual: Residual::Free, ..*self.form };
        let recovering = self.known.recovery_s.map(|time_s| Form { recovery_s: Some(time_s), ..*self.form });
        let forms = [
            (self.form.residual != Residual::Free).then_some((free, "a residual voltage, which is fitted")),
            recovering.map(|form| (form, "a gap voltage that falls with the rate by recovery, which is fitted")),
        ];
        let (found, words) = forms
            .into_iter()
            .flatten()
            .filter_map(|(form, words)| of(&form, self.points, kept).map(|fit| (fit, words)))
            .filter(|(fit, _)| agrees(fit) && !fit.at_bound)
            .min_by(|a, b| a.0.chi_square.total_cmp(&b.0.chi_square))?;
        if rival.is_some_and(|rival| found.chi_square + CLEARLY_BETTER > rival) {
            return None;
        }
        self.notes.push(format!("the settings demand {words}"));
        Some(found)
    }

    /// What is wrong with a setting that is left out.
    fn reason(&self, place: usize, found: &Fit, kept: &[usize]) -> String {
        let point = &self.points[place];
        let law_v = found.form.supply_v(point, found.time_constant_s, &found.linear);
        let implied = si(law_v / self.known.reach, "V", 3);
        let below = kept.iter().any(|&other| {
            self.points[other].supply_v < point.supply_v && other != place && !self.follows(other, place)
        });
        let highest = kept.iter().all(|&other| self.points[other].supply_v <= point.supply_v);
        if law_v < point.supply_v && (below || highest) {
            format!(
                "its rate does not follow the supply and would belong to {implied}: current limit, or a wrong label"
            )
        } else {
            format!("it disagrees with the others, which give {implied} for its rate: a wrong label, or another gap")
        }
    }

    /// Names other single settings that might as well be the wrong one.
    fn rivals(&mut self, kept: &[usize], out: &[usize], found: &Fit) {
        if out.len() != 1 {
            return;
        }
        let names: Vec<&str> = self
            .without(kept, 1)
            .iter()
            .filter(|(other, fit)| other != out && agrees(fit) && fit.chi_square < found.chi_square + CLEARLY_WORSE)
            .map(|(other, _)| self.names[other[0]])
            .collect();
        if !names.is_empty() {
            self.notes
                .push(format!("it may as well be {} that is wrong; a further setting would tell", names.join(" or ")));
        }
    }
}
