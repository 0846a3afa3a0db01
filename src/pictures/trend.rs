//! The history of a gap: the charted figure between its limits, and the cumulative sums.

use crate::plot::{Axis, Legend, Mark, Panel, Picture, Scale, Stroke};
use crate::trend::{Charted, Moment, Trend, advice, cusum};

/// Ticks of the axis of time.
const DATES: i64 = 4;

/// The picture of a trend.
#[must_use]
pub fn trend(trend: &Trend) -> Picture {
    let points = &trend.points;
    let at = |time: Moment| time.0 as f64;
    let ends = (points.first().map_or(0.0, |p| at(p.time)), points.last().map_or(1.0, |p| at(p.time)));
    let x = Scale::linear(ends.0 - 0.02 * (ends.1 - ends.0), ends.1 + 0.02 * (ends.1 - ends.0));
    let limits = trend.limits.as_ref();
    let beside = limits.map(|limits| [limits.low, limits.high]).into_iter().flatten();
    let y = Scale::over(points.iter().map(|point| point.value).chain(beside), 0.1);
    let words = trend.charted.words();
    let in_air = if trend.charted == Charted::GapVoltage { " in standard air" } else { "" };
    let y_axis = match trend.charted {
        Charted::Jitter | Charted::Missed => Axis::percent(y, words, 5),
        Charted::GapVoltage => Axis::new(y, &format!("{words}{in_air}"), "V", 5),
        Charted::FiringRate => Axis::new(y, "firing rate, /s", "", 5),
    };
    let mut panel = Panel::new(Picture::area(220.0), time_axis(x), y_axis);
    let mut legend = vec![(Legend::Mark(Mark::Dot), "entry".to_owned())];
    let mut panels = Vec::new();
    if let Some(change) = &trend.change_point {
        panel.zone("change", at(change.from), at(change.to));
        let end = at(change.time);
        panel.line("before", Stroke::Other, [(x.low, change.before), (end, change.before)]);
        panel.line("after", Stroke::Other, [(end, change.after), (x.high, change.after)]);
        legend.push((Legend::Area("zone"), "the change lies here (95 %)".to_owned()));
        legend.push((Legend::Line(Stroke::Other), "mean before and after".to_owned()));
    }
    if let Some(limits) = limits {
        panel.level("centre", Stroke::Faint, limits.centre);
        panel.level("low limit", Stroke::Limit, limits.low);
        panel.level("high limit", Stroke::Limit, limits.high);
        legend.push((Legend::Line(Stroke::Limit), "limits".to_owned()));
    }
    panel.line("course", Stroke::Faint, points.iter().map(|point| (at(point.time), point.value)));
    panel.marks("entries", Mark::Dot, points.iter().map(|point| (at(point.time), point.value)));
    let outside: Vec<(f64, f64)> =
        points.iter().filter(|point| point.outside != 0).map(|point| (at(point.time), point.value)).collect();
    if !outside.is_empty() {
        panel.marks("outside", Mark::Ring, outside);
        legend.push((Legend::Mark(Mark::Ring), "beyond a limit".to_owned()));
    }
    panels.push(panel);
    if limits.is_some() {
        panels.push(sums(trend, x));
        legend.push((Legend::Line(Stroke::Main), "sum upwards".to_owned()));
        legend.push((Legend::Line(Stroke::Model), "sum downwards".to_owned()));
    }
    Picture { kind: "trend", title: title(trend), reading: reading(trend), panels, legend }
}

fn title(trend: &Trend) -> String {
    let of = |value: f64| advice::amount(trend.charted, value, 4);
    match (&trend.change_point, trend.limits.as_ref(), trend.points.last()) {
        (Some(change), _, _) => format!(
            "The {} changed from {} to {} about {}",
            trend.charted.words(),
            of(change.before),
            of(change.after),
            change.time.day()
        ),
        (None, Some(limits), Some(last)) => format!(
            "The {} was {} in the last of {} entries, {} the limits of {} and {}",
            trend.charted.words(),
            of(last.value),
            trend.entries,
            if last.outside == 0 { "within" } else { "beyond" },
            of(limits.low),
            of(limits.high)
        ),
        (None, None, Some(last)) => {
            format!(
                "The {} was {} in the last entry; there are too few for limits",
                trend.charted.words(),
                of(last.value)
            )
        }
        (None, _, None) => "The log holds no entry".to_owned(),
    }
}

fn reading(trend: &Trend) -> String {
    if trend.limits.is_none() {
        return "Each dot is one measurement.".to_owned();
    }
    "Above: each dot is one measurement; by chance one in several hundred lies beyond a limit. Below: sums of what the entries are \
     off the centre, in standard deviations. They rise when a gap changes slowly, long before a single entry crosses a limit; the \
     dash-and-dot line is where they raise an alarm."
        .to_owned()
}

fn sums(trend: &Trend, x: Scale) -> Panel {
    let points = &trend.points;
    let most = points.iter().map(|point| point.cusum_high.max(point.cusum_low)).fold(1.3 * cusum::H, f64::max);
    let mut panel = Panel::new(
        Picture::area_below(296.0, 110.0),
        time_axis(x),
        Axis::new(Scale::linear(0.0, 1.05 * most), "cumulative sums, standard deviations", "", 4),
    );
    panel.level("alarm", Stroke::Limit, cusum::H);
    panel.line("sum up", Stroke::Main, points.iter().map(|point| (point.time.0 as f64, point.cusum_high)));
    panel.line("sum down", Stroke::Model, points.iter().map(|point| (point.time.0 as f64, point.cusum_low)));
    panel
}

/// Days at even distances.
fn time_axis(x: Scale) -> Axis {
    const DAY_S: f64 = 86_400.0;
    let step = ((x.high - x.low) / DATES as f64 / DAY_S).ceil().max(1.0) * DAY_S;
    // The first one keeps clear of the labels of the other axis.
    let first = ((x.low + 0.09 * (x.high - x.low)) / DAY_S).ceil() * DAY_S;
    let mut ticks: Vec<(f64, String)> = (0..=DATES)
        .map(|k| first + step * k as f64)
        .filter(|tick| *tick <= x.high)
        .map(|tick| (tick, Moment(tick as i64).day()))
        .collect();
    if ticks.is_empty() {
        let middle = 0.5 * (x.low + x.high);
        ticks.push((middle, Moment(middle as i64).to_string()));
    }
    Axis::named(x, "date (UTC)", ticks)
}
