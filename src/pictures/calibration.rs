//! A calibration: the charging law through the settings, with its band, and what each setting is off.

use crate::calibrate::{Calibration, LawPoint, SettingResult};
use crate::estimate::COVERAGE_95;
use crate::plot::{Axis, Legend, Mark, Panel, Picture, Scale, Stroke};
use crate::report::Figure;

/// Residuals beyond this many standard uncertainties are rare.
const RARE: f64 = 2.0;

/// The picture of a calibration.
#[must_use]
pub fn calibration(calibration: &Calibration) -> Picture {
    let Calibration { settings, law, .. } = calibration;
    let heard: Vec<(&SettingResult, f64)> =
        settings.iter().filter_map(|setting| Some((setting, setting.firing_rate_hz?.value))).collect();
    let used = || heard.iter().filter(|(setting, _)| setting.used);
    let rates = heard.iter().map(|(_, rate_hz)| *rate_hz).chain(law.iter().map(|point| point.firing_rate_hz));
    let x = Scale::over(rates, 0.0);
    let band: Vec<_> = law.iter().map(band).collect();
    let edges = band.iter().flat_map(|(_, low_v, high_v)| [*low_v, *high_v]);
    let y = Scale::over(edges.chain(heard.iter().map(|(setting, _)| setting.supply_v)), 0.06);
    let mut panel = Panel::new(
        Picture::area(230.0),
        Axis::new(x, "firing rate, /s", "", 6),
        Axis::new(y, "supply voltage", "V", 5),
    );
    panel.band("law band", &band);
    panel.line("law", Stroke::Model, law.iter().map(|point| (point.firing_rate_hz, point.supply_v)));
    panel.marks("used", Mark::Dot, used().map(|(setting, rate_hz)| (*rate_hz, setting.supply_v)));
    let out = heard.iter().filter(|(setting, _)| !setting.used);
    panel.marks("left out", Mark::Cross, out.clone().map(|(setting, rate_hz)| (*rate_hz, setting.supply_v)));
    let used: Vec<(&SettingResult, f64)> = used().copied().collect();
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
        title: title(calibration),
        reading: "Above: the supply voltage that the charging law demands for each rate, and the settings. Middle: the same less the \
                  law, so that its band can be seen. Below: how far each reading is from the law. One in twenty settings may lie \
                  beyond two standard uncertainties; a bow from end to end is a wrong law (residual voltage, current limit), a \
                  single one off is a wrong label or a locked gap."
            .to_owned(),
        panels: vec![panel, departures(calibration, &used, x), residuals(&used, x)],
        legend,
    }
}

/// What the readings are off the law, as shares of it, in the band of the law.
fn departures(calibration: &Calibration, used: &[(&SettingResult, f64)], x: Scale) -> Panel {
    let reach = |point: &LawPoint| COVERAGE_95 * point.u_v / point.supply_v;
    let band: Vec<_> =
        calibration.law.iter().map(|point| (point.firing_rate_hz, -reach(point), reach(point))).collect();
    let off: Vec<(f64, f64)> = used
        .iter()
        .filter_map(|(setting, rate_hz)| Some((*rate_hz, setting.supply_v / setting.implied_supply_v? - 1.0)))
        .collect();
    let y = Scale::over(band.iter().flat_map(|edge| [edge.1, edge.2]).chain(off.iter().map(|point| point.1)), 0.1);
    let mut panel = Panel::new(
        Picture::area_below(304.0, 120.0),
        Axis::new(x, "firing rate, /s", "", 6),
        Axis::percent(y, "reading less law", 4),
    );
    panel.band("law band alone", &band);
    panel.level("law alone", Stroke::Model, 0.0);
    panel.marks("departures", Mark::Dot, off);
    panel
}

/// What the readings are off the law, in standard uncertainties.
fn residuals(used: &[(&SettingResult, f64)], x: Scale) -> Panel {
    let residuals: Vec<(f64, f64)> =
        used.iter().filter_map(|(setting, rate_hz)| Some((*rate_hz, setting.residual?))).collect();
    let reach = residuals.iter().fold(1.2 * RARE, |reach, point| reach.max(1.15 * point.1.abs()));
    let mut panel = Panel::new(
        Picture::area_below(500.0, 110.0),
        Axis::new(x, "firing rate, /s", "", 6),
        Axis::new(Scale::linear(-reach, reach), "reading less law, in standard uncertainties", "", 4),
    );
    panel.level("zero", Stroke::Model, 0.0);
    panel.level("rare low", Stroke::Limit, -RARE);
    panel.level("rare high", Stroke::Limit, RARE);
    panel.marks("residuals", Mark::Dot, residuals);
    panel
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

/// Rate, and the ends of the 95 % band of the supply voltage.
fn band(point: &LawPoint) -> (f64, f64, f64) {
    let reach_v = COVERAGE_95 * point.u_v;
    (point.firing_rate_hz, point.supply_v - reach_v, point.supply_v + reach_v)
}
