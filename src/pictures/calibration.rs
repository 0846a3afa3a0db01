//! A calibration: the charging law through the settings, with its band, and what each setting is off.

use crate::bench::Bench;
use crate::calibrate::{Calibration, SettingResult};
use crate::estimate::COVERAGE_95;
use crate::plot::{Axis, Legend, Mark, Panel, Picture, Scale, Stroke};
use crate::report::Figure;

/// A calibration with the bench that it was made with.
#[derive(Debug, Clone, Copy)]
pub struct CalibrationDrawn<'a> {
    /// The result.
    pub calibration: &'a Calibration,
    /// The bench; the default one if there was none.
    pub bench: &'a Bench,
}

/// Points of the curve.
const POINTS: usize = 100;
/// Residuals beyond this many standard uncertainties are rare.
const RARE: f64 = 2.0;

/// The picture of a calibration.
#[must_use]
pub fn calibration(drawn: CalibrationDrawn<'_>) -> Picture {
    let settings = &drawn.calibration.settings;
    let heard: Vec<(&SettingResult, f64)> =
        settings.iter().filter_map(|setting| Some((setting, setting.firing_rate_hz?.value))).collect();
    let used = || heard.iter().filter(|(setting, _)| setting.used);
    let rates = Scale::over(heard.iter().map(|(_, rate_hz)| *rate_hz), 0.08);
    let x = Scale::linear(rates.low.max(0.2 * rates.high.min(1e12) * f64::EPSILON).max(0.0), rates.high);
    let curve: Vec<(f64, f64, f64)> =
        (0..=POINTS).filter_map(|k| law(drawn, x.low + (x.high - x.low) * k as f64 / POINTS as f64)).collect();
    let edges = curve.iter().flat_map(|(_, v, u)| [v - COVERAGE_95 * u, v + COVERAGE_95 * u]);
    let y = Scale::over(edges.chain(heard.iter().map(|(setting, _)| setting.supply_v)), 0.06);
    let mut panel = Panel::new(
        Picture::area(230.0),
        Axis::new(x, "firing rate, /s", "", 6),
        Axis::new(y, "supply voltage", "V", 5),
    );
    let band: Vec<_> =
        curve.iter().map(|(rate_hz, v, u)| (*rate_hz, v - COVERAGE_95 * u, v + COVERAGE_95 * u)).collect();
    panel.band("law band", &band);
    panel.line("law", Stroke::Model, curve.iter().map(|(rate_hz, v, _)| (*rate_hz, *v)));
    panel.marks("used", Mark::Dot, used().map(|(setting, rate_hz)| (*rate_hz, setting.supply_v)));
    let out = heard.iter().filter(|(setting, _)| !setting.used);
    panel.marks("left out", Mark::Cross, out.clone().map(|(setting, rate_hz)| (*rate_hz, setting.supply_v)));
    let residuals: Vec<(f64, f64)> =
        used().filter_map(|(setting, rate_hz)| Some((*rate_hz, setting.residual?))).collect();
    let reach = residuals.iter().fold(1.2 * RARE, |reach, point| reach.max(1.15 * point.1.abs()));
    let mut below = Panel::new(
        Picture::area_below(306.0, 110.0),
        Axis::new(x, "firing rate, /s", "", 6),
        Axis::new(Scale::linear(-reach, reach), "reading less law, in standard uncertainties", "", 4),
    );
    below.level("zero", Stroke::Model, 0.0);
    below.level("rare low", Stroke::Limit, -RARE);
    below.level("rare high", Stroke::Limit, RARE);
    below.marks("residuals", Mark::Dot, residuals);
    let mut legend = vec![
        (Legend::Mark(Mark::Dot), "setting".to_owned()),
        (Legend::Line(Stroke::Model), "fitted law".to_owned()),
        (Legend::Area("band"), "its 95 % band".to_owned()),
        (Legend::Line(Stroke::Limit), "two standard uncertainties".to_owned()),
    ];
    if out.count() > 0 {
        legend.insert(1, (Legend::Mark(Mark::Cross), "setting left out".to_owned()));
    }
    Picture {
        kind: "calibration",
        title: title(drawn.calibration),
        reading: "Above: the supply voltage that the charging law demands for each rate, and the settings. Below: how far each \
                  reading is from the law. One in twenty settings may lie beyond two standard uncertainties; a bow from end to end \
                  is a wrong law (residual voltage, current limit), a single one off is a wrong label or a locked gap."
            .to_owned(),
        panels: vec![panel, below],
        legend,
    }
}

fn title(calibration: &Calibration) -> String {
    let used = calibration.settings.iter().filter(|setting| setting.used).count();
    let agree = match calibration.chi_square_probability {
        Some(probability) if probability < 0.01 => ", but they do not agree",
        Some(_) => ", and agree",
        None => "; nothing checks them",
    };
    format!(
        "{used} settings give a time constant of {} and a gap voltage of {}{agree}",
        Figure::prefixed(calibration.time_constant_s, "s").value_and_u(),
        Figure::prefixed(calibration.gap_voltage_v, "V").value_and_u()
    )
}

/// Rate, supply voltage by the law and its standard uncertainty; none where the law has no answer or is not this simple.
fn law(drawn: CalibrationDrawn<'_>, rate_hz: f64) -> Option<(f64, f64, f64)> {
    let CalibrationDrawn { calibration, bench } = drawn;
    if calibration.recovery.is_some() || bench.charging.leakage.is_some() {
        return None;
    }
    let conduction_s = bench.gap.conduction_time.map_or(0.0, |quantity| quantity.value);
    let stated_v = bench.gap.residual_voltage.map_or(0.0, |quantity| quantity.value);
    let residual_v = calibration.residual_voltage_v.map_or(stated_v, |residual| residual.value);
    let charging_s = 1.0 / rate_hz - conduction_s;
    if !(charging_s > 0.0 && charging_s.is_finite()) {
        return None;
    }
    let (tau, gap) = (calibration.time_constant_s, calibration.gap_voltage_v);
    let supply_v = |tau_s: f64, gap_v: f64| {
        let left = (-charging_s / tau_s).exp();
        (gap_v - residual_v * left) / (1.0 - left)
    };
    let value_v = supply_v(tau.value, gap.value);
    let by_tau = supply_v(tau.value + tau.u, gap.value) - value_v;
    // The scale of the meter moves readings and law together.
    let gap_u = (gap.u.powi(2) - (calibration.supply_scale_u * gap.value).powi(2)).max(0.0).sqrt();
    let by_gap = supply_v(tau.value, gap.value + gap_u) - value_v;
    let variance = by_tau.powi(2) + by_gap.powi(2) + 2.0 * calibration.correlation * by_tau * by_gap;
    value_v.is_finite().then(|| (rate_hz, value_v, variance.max(0.0).sqrt()))
}
