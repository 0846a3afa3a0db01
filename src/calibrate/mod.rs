//! Time constant and gap voltage from recordings at several supply settings.
//!
//! Each setting gives a supply reading and a mean period; the charging law ties them together through the time constant and
//! the gap voltage. The fit is in `fit.rs`, the law in `law.rs`; `checks.rs` finds settings that do not belong (locked to the
//! ripple, in current limit, mislabelled), `design.rs` tells which setting was worth most and which further one would be.
//!
//! An error of the supply meter that all readings share in proportion (its scale) does not change one period: it cannot be
//! found from audio. The time constant does not depend on it; the gap voltage inherits it.
//!
//! Units: V, s.

mod checks;
mod curve;
mod design;
mod fit;
mod law;
mod matrix;
mod ramp;
mod result;
mod setting;
mod sizes;

pub use ramp::{SupplyLog, SupplyLogError, ramp_settings};
pub use result::{
    CALIBRATION_FORMAT, Calibration, ClickSizes, Influence, LawPoint, NextSetting, NoCalibration, Recovery,
    SettingResult,
};
pub use setting::{ASSUMED_READING_U, Known, Setting};
pub use sizes::{SizeMeter, SizeTrend};

use crate::estimate::Estimate;
use fit::{Fit, fit};
use law::{Form, Point, Residual};

/// Relative spread of the supply readings below which they count as equal.
const LEAST_SPREAD: f64 = 0.01;

/// Relative standard uncertainty of the time constant from which on nothing was found: two of them reach to zero.
const LARGEST_U: f64 = 0.5;

/// What to fit besides time constant and gap voltage.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct Options {
    /// Fit the residual voltage, whatever the bench says of it.
    pub residual: bool,
}

/// Fits time constant and gap voltage to the settings.
///
/// # Errors
/// [`NoCalibration`] if fewer than two settings with different supplies can be used, or if they do not determine the
/// parameters.
pub fn calibrate(settings: &[Setting], known: &Known, options: Options) -> Result<Calibration, NoCalibration> {
    let usable: Vec<usize> = (0..settings.len()).filter(|&i| settings[i].left_out.is_none()).collect();
    let supplies = || usable.iter().map(|&i| settings[i].supply.value);
    let (lowest, highest) = (supplies().fold(f64::INFINITY, f64::min), supplies().fold(0.0, f64::max));
    let form = Form { residual: known.residual(options.residual), recovery_s: None };
    if usable.len() < form.demanded() {
        return Err(NoCalibration::TooFew { usable: usable.len(), needed: form.demanded() });
    }
    if highest < (1.0 + LEAST_SPREAD) * lowest {
        return Err(NoCalibration::EqualSupplies { lowest_v: lowest, highest_v: highest });
    }
    let points: Vec<Point> = usable.iter().map(|&i| known.point(&settings[i])).collect();
    if let Some(at) = points.iter().position(|point| point.charging_s <= 0.0) {
        return Err(NoCalibration::WithinConduction { name: settings[usable[at]].name.clone() });
    }
    let names: Vec<&str> = usable.iter().map(|&i| settings[i].name.as_str()).collect();
    let checked = checks::checked(&form, known, &points, &names)?;
    let known_well = checked.widened * checked.fit.time_constant_relative_u() < LARGEST_U;
    if checked.fit.at_bound || !checked.fit.is_sound() || !known_well {
        return Err(NoCalibration::Undetermined);
    }
    Ok(Assembly { settings, usable: &usable, points: &points, known, checked: &checked }.calibration())
}

/// Everything that the result is put together from.
struct Assembly<'a> {
    settings: &'a [Setting],
    /// Which settings the points are.
    usable: &'a [usize],
    points: &'a [Point],
    known: &'a Known,
    checked: &'a checks::Checked,
}

impl Assembly<'_> {
    fn kept(&self) -> Vec<Point> {
        self.checked.kept.iter().map(|&i| self.points[i]).collect()
    }

    /// Shift of ln τ and of the gap voltage when the conduction time is longer by its standard uncertainty.
    fn by_conduction(&self) -> (f64, f64) {
        let u = self.known.conduction.u();
        let shifted: Vec<Point> = self.kept().iter().map(|p| Point { charging_s: p.charging_s - u, ..*p }).collect();
        let found = &self.checked.fit;
        match (u > 0.0).then(|| fit(&found.form, &shifted)).flatten() {
            Some(moved) => ((moved.time_constant_s / found.time_constant_s).ln(), moved.gap_v() - found.gap_v()),
            None => (0.0, 0.0),
        }
    }

    fn calibration(&self) -> Calibration {
        let found = &self.checked.fit;
        let widened = self.checked.widened;
        let (tau_shift, gap_shift_v) = self.by_conduction();
        let factor = self.known.without_leakage();
        let tau_s = factor * found.time_constant_s;
        let gap_u_v = (widened * found.gap_u_v()).hypot(gap_shift_v).hypot(self.known.scale_u * found.gap_v());
        let linear_u = |place: usize| widened * found.covariance[place + 1][place + 1].sqrt();
        let residual = found.form.fits_residual().then(|| {
            let u = linear_u(1).hypot(self.known.scale_u * found.residual_v());
            Estimate::normal(found.residual_v(), u)
        });
        let recovery = found.form.recovery_s.map(|time_s| {
            let last = found.linear.len() - 1;
            Recovery { depth: Estimate::normal(found.linear[last], linear_u(last)).scaled(1.0 / found.gap_v()), time_s }
        });
        let correlation = found.covariance[0][1] / (found.covariance[0][0] * found.covariance[1][1]).sqrt();
        let settings = self.results();
        let rates_hz: Vec<f64> = settings.iter().filter_map(|setting| Some(setting.firing_rate_hz?.value)).collect();
        Calibration {
            format: CALIBRATION_FORMAT.to_owned(),
            time_constant_s: Estimate::normal(
                tau_s,
                tau_s * (widened * found.time_constant_relative_u()).hypot(tau_shift),
            ),
            gap_voltage_v: Estimate::normal(found.gap_v(), gap_u_v),
            residual_voltage_v: residual,
            recovery,
            correlation,
            law: curve::curve(found, &self.kept(), self.known, widened, &rates_hz),
            chi_square: found.chi_square,
            degrees_of_freedom: found.freedom,
            chi_square_probability: checks::probability(found),
            supply_scale_u: self.known.scale_u,
            next_setting: design::next_setting(found, &self.kept(), widened, factor, self.known.reach),
            notes: self.notes(&settings),
            settings,
        }
    }

    fn results(&self) -> Vec<SettingResult> {
        let found = &self.checked.fit;
        let mut results: Vec<SettingResult> = self.settings.iter().map(SettingResult::unused).collect();
        for (place, &index) in self.usable.iter().enumerate() {
            let (point, result) = (&self.points[place], &mut results[index]);
            let law_v = found.form.supply_v(point, found.time_constant_s, &found.linear);
            let u_v = found.form.u_v(point, found.time_constant_s, &found.linear);
            result.residual = Some((point.supply_v - law_v) / u_v).filter(|residual| residual.is_finite());
            result.implied_supply_v = Some(law_v / self.known.reach).filter(|supply_v| supply_v.is_finite());
            result.used = self.checked.kept.contains(&place);
            result.left_out = self.checked.reasons.get(&place).cloned();
            result.influence = design::influence(found, self.points, &self.checked.kept, place);
            result.click_size = self.settings[index].size.and_then(|trend| sizes::witness(&trend, found, point));
        }
        results
    }

    fn notes(&self, results: &[SettingResult]) -> Vec<String> {
        let refused = self.settings.iter().filter_map(|setting| {
            setting.left_out.as_ref().map(|reason| format!("{} is left out: {reason}", setting.name))
        });
        let mut notes: Vec<String> = refused.chain(self.checked.notes.iter().cloned()).collect();
        let found = &self.checked.fit;
        if found.freedom == 0 {
            notes.push(
                "no degrees of freedom are left: the law goes through every setting exactly, so nothing checks it; one more \
                 setting would"
                    .to_owned(),
            );
        }
        if self.settings.iter().any(|setting| setting.supply.u() == 0.0) {
            notes.push(format!(
                "a supply without a tolerance is taken as read to {:.1} % (standard uncertainty); write it as 9.2kV±0.5%",
                100.0 * ASSUMED_READING_U
            ));
        }
        notes.push(if self.known.scale_u > 0.0 {
            format!(
                "an error of scale of the supply meter does not show in the audio: the gap voltage carries the {:.2} % of the \
                 bench for it, the time constant does not depend on it",
                100.0 * self.known.scale_u
            )
        } else {
            "an error of scale of the supply meter does not show in the audio: the gap voltage is off by as many percent as the \
             meter; a bench with a tolerance of supply.voltage adds it"
                .to_owned()
        });
        notes.extend(self.about_residual());
        notes.extend(sizes::note(results));
        notes
    }

    /// What an unstated residual voltage would change.
    fn about_residual(&self) -> Option<String> {
        let found = &self.checked.fit;
        if self.known.residual.is_some() || found.form.fits_residual() {
            return None;
        }
        let form = Form { residual: Residual::Fixed(100.0), ..found.form };
        let moved: Fit = fit(&form, &self.kept())?;
        Some(format!(
            "residual voltage is not stated and taken as 0; 100 V left on the capacitor would change the time constant by \
             {:+.2} % and the gap voltage by {:+.2} %",
            100.0 * (moved.time_constant_s / found.time_constant_s - 1.0),
            100.0 * (moved.gap_v() / found.gap_v() - 1.0)
        ))
    }
}
