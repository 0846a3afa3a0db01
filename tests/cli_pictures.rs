//! Pictures through the program: every mark lies where the figures of the JSON or the events say.

mod cli_common;
mod page_help;
mod svg_help;
mod trend_help;

use cli_common::{Folder, clicks, json};
use page_help::{BENCH, done, folder, text};
use serde_json::Value;
use svg_help::{Panel, assert_well_formed, panels};
use trend_help::Gap;

fn drawn(folder: &Folder, name: &str) -> Vec<Panel> {
    let svg = text(folder, name);
    assert_well_formed(&svg);
    assert!(!svg.contains("NaN") && svg.contains("role=\"img\"") && svg.contains("<title>") && svg.contains("<desc>"));
    panels(&svg)
}

fn number(value: &Value) -> f64 {
    value.as_f64().unwrap_or_else(|| panic!("{value} is no number"))
}

/// A line of an events file.
struct Line {
    time_s: f64,
    size: f64,
    period_s: Option<f64>,
    voltage_v: Option<f64>,
}

fn events(folder: &Folder) -> Vec<Line> {
    let lines = text(folder, "events.csv");
    lines
        .lines()
        .skip(1)
        .map(|line| {
            let fields: Vec<&str> = line.split(',').collect();
            let number = |k: usize| fields[k].parse::<f64>().ok();
            let (time_s, size) = (number(0).expect("a time"), number(2).expect("a size"));
            Line { time_s, size, period_s: number(4), voltage_v: number(5) }
        })
        .collect()
}

#[test]
fn marks_of_firings_periods_and_sizes_lie_where_the_events_are() {
    let folder = folder();
    let plots = ["periods.svg", "excerpts=excerpts.svg", "sizes=sizes.svg", "click=click.svg"];
    let options = plots.iter().flat_map(|plot| ["--plot", *plot]);
    let common = ["measure", "run.wav", "--bench", "bench.toml", "--events", "events.csv"];
    done(&folder, &common.into_iter().chain(options).collect::<Vec<_>>());
    let events = events(&folder);
    let singles: Vec<_> =
        events.iter().filter_map(|event| Some((event.time_s, event.period_s?, event.size, event.voltage_v?))).collect();
    assert!(singles.len() > 280);
    let periods = &drawn(&folder, "periods.svg")[0];
    let wanted: Vec<(f64, f64)> = singles.iter().map(|single| (single.0, single.1)).collect();
    periods.assert_drawn(&periods.marks("periods"), &wanted);
    let excerpt = &drawn(&folder, "excerpts.svg")[0];
    let marks = excerpt.marks("firing");
    let seen: Vec<f64> = events
        .iter()
        .map(|event| event.time_s)
        .filter(|t| *t < excerpt.corners("audio").last().expect("audio").0)
        .collect();
    assert_eq!(marks.len(), seen.len());
    for (mark, time_s) in marks.iter().zip(&seen) {
        assert!((mark.0 - time_s).abs() <= excerpt.x.grain(*time_s), "{mark:?} {time_s}");
    }
    // Each mark stands over the greatest sample of its neighbourhood: the picture itself says that there is a click.
    let audio = excerpt.corners("audio");
    let peak = |t: f64| audio.iter().filter(|p| (p.0 - t).abs() < 0.5e-3).map(|p| p.1.abs()).fold(0.0, f64::max);
    assert!(marks.iter().all(|mark| peak(mark.0) > 0.2), "{marks:?}");
    let sizes = &drawn(&folder, "sizes.svg")[0];
    for (voltage_v, size) in sizes.marks("firings") {
        let near = |single: &&(f64, f64, f64, f64)| {
            (single.3 - voltage_v).abs() <= sizes.x.grain(voltage_v) + 0.06
                && (single.2 - size).abs() <= sizes.y.grain(size) + 1e-4
        };
        assert!(singles.iter().any(|single| near(&single)), "{voltage_v} {size}");
    }
}

#[test]
fn bars_of_the_budget_and_of_the_distribution_add_up() {
    let folder = folder();
    let options = ["--budget", "--json", "--plot", "budget=budget.svg", "--plot", "distribution=distribution.svg"];
    let output = done(&folder, &[&["measure", "run.wav", "--bench", "bench.toml"][..], &options].concat());
    let measured = json(&output);
    let shares: Vec<f64> =
        measured["budget"][0]["inputs"].as_array().expect("inputs").iter().map(|line| number(&line["share"])).collect();
    let budget = &drawn(&folder, "budget.svg")[0];
    let lengths = budget.lengths("shares");
    assert_eq!(lengths.len(), shares.len());
    for (length, share) in lengths.iter().zip(&shares) {
        assert!((length - share).abs() <= budget.x.grain(*share), "{length} {share}");
    }
    // Each to a hundredth of a unit of the drawing.
    assert!((lengths.iter().sum::<f64>() - 1.0).abs() < 1e-3, "{lengths:?}");
    let distribution = &drawn(&folder, "distribution.svg")[0];
    let counted: f64 = distribution.heights("counts").iter().sum();
    let firings = number(&measured["firings"]["on_rhythm"]);
    // A uniform jitter has no tail, so no period lies beyond the edges; the first firing has none.
    assert!((counted - (firings - 1.0)).abs() < 0.5, "{counted} of {firings}");
}

#[test]
fn ticks_stand_at_their_values() {
    let folder = folder();
    done(&folder, &["measure", "run.wav", "--plot", "periods.svg"]);
    let panel = &drawn(&folder, "periods.svg")[0];
    let labels: Vec<(f64, f64)> = panel
        .texts
        .iter()
        .filter(|(x, _, _)| *x < 63.0)
        .filter_map(|(_, y, words)| Some((words.parse::<f64>().ok()?, panel.y.value(y - 4.0))))
        .collect();
    assert!(labels.len() >= 3 && panel.texts.iter().any(|text| text.2 == "period, ms"), "{labels:?}");
    for (label_ms, value_s) in labels {
        assert!((1e-3 * label_ms - value_s).abs() <= panel.y.grain(value_s), "{label_ms} ms at {value_s} s");
    }
}

#[test]
fn the_growth_follows_the_events() {
    let folder = folder();
    done(&folder, &["measure", "run.wav", "--events", "events.csv", "--plot", "growth=growth.svg"]);
    let times: Vec<f64> = events(&folder).iter().map(|event| event.time_s).collect();
    let panel = &drawn(&folder, "growth.svg")[0];
    for (periods, sd_s) in panel.marks("growth") {
        let m = periods.round() as usize;
        let apart: Vec<f64> = times.windows(m + 1).map(|part| part[m] - part[0]).collect();
        let mean = apart.iter().sum::<f64>() / apart.len() as f64;
        let plain = (apart.iter().map(|t| (t - mean).powi(2)).sum::<f64>() / (apart.len() - 1) as f64).sqrt();
        // Times in the file end at a nanosecond.
        assert!((sd_s / plain - 1.0).abs() < 2e-3, "over {m}: {sd_s} {plain}");
    }
}

#[test]
fn a_prediction_is_drawn_as_it_is_told() {
    let folder = folder();
    folder.file("gap.toml", format!("{BENCH}gap.voltage = \"5.2 kV\"\ngap.spread = \"1 %\"\n").as_bytes());
    let options = ["--supply", "6kV..12kV", "--settings", "200", "--json", "--plot", "p.svg", "--report", "p.html"];
    let told = json(&done(&folder, &[&["predict", "--bench", "gap.toml"][..], &options].concat()));
    let settings = told["settings"].as_array().expect("settings");
    let rates: Vec<(f64, f64)> =
        settings.iter().map(|one| (number(&one["supply_v"]), number(&one["firing_rate_hz"]["value"]))).collect();
    let panels = drawn(&folder, "p.svg");
    panels[0].assert_drawn(&panels[0].corners("rate"), &rates);
    let page = text(&folder, "p.html");
    assert!(page.contains("kill") && page.contains("data-kind=\"prediction\""));
}

#[test]
fn a_trend_is_drawn_as_it_is_told() {
    let folder = Folder::new();
    let entries = Gap::default().entries(30, 5);
    let lines: String = entries.iter().map(|entry| serde_json::to_string(entry).expect("JSON") + "\n").collect();
    folder.file("gap.jsonl", lines.as_bytes());
    let told = json(&done(&folder, &["trend", "gap.jsonl", "--json", "--plot", "t.svg", "--report", "t.html"]));
    let panels = drawn(&folder, "t.svg");
    let points = told["points"].as_array().expect("points");
    assert_eq!(panels[0].marks("entries").len(), points.len());
    for (mark, point) in panels[0].marks("entries").iter().zip(points) {
        let value = number(&point["value"]);
        assert!((mark.1 - value).abs() <= panels[0].y.grain(value), "{mark:?} {value}");
    }
    for (name, key) in [("low limit", "low"), ("high limit", "high")] {
        let limit = number(&told["limits"][key]);
        assert!((panels[0].corners(name)[0].1 - limit).abs() <= panels[0].y.grain(limit), "{name}");
    }
    assert!(text(&folder, "t.html").contains("data-kind=\"trend\""));
}

/// The settings of a calibration, drawn, and its object.
fn calibrated(gap: &str, bench: &str, options: &[&str]) -> (Folder, Value) {
    let folder = Folder::new();
    folder.file("gap.toml", gap.as_bytes());
    folder.file("bench.toml", bench.as_bytes());
    let mut named = Vec::new();
    for (k, supply) in ["6.2kV", "7.6kV", "10.2kV"].iter().enumerate() {
        let (file, seed) = (format!("{supply}.wav"), format!("{}", k + 1));
        let options = ["--supply", supply, "--seconds", "4", "--seed", &seed, "-o", &file];
        done(&folder, &[&["render", "--bench", "gap.toml"][..], &options].concat());
        named.push(format!("{file}@{supply}"));
    }
    let mut arguments = vec!["calibrate", "--json", "--bench", "bench.toml", "--plot", "c.svg", "--report", "c.html"];
    arguments.extend(options);
    arguments.extend(named.iter().map(String::as_str));
    let told = json(&done(&folder, &arguments));
    (folder, told)
}

#[test]
fn a_calibration_is_drawn_as_it_is_told() {
    let gap = format!("{BENCH}gap.voltage = \"5.2 kV\"\ngap.spread = \"0.5 %\"\n");
    let (folder, told) = calibrated(&gap, BENCH, &[]);
    assert_calibration_drawn(&folder, &told);
}

#[test]
fn the_law_of_a_calibration_is_drawn_with_leakage_and_a_fitted_residual_voltage_too() {
    let bench = format!("{BENCH}charging.leakage = \"60 MΩ\"\ngap.conduction_time = \"12 us\"\n");
    let gap = format!("{bench}gap.voltage = \"5.2 kV\"\ngap.spread = \"0.5 %\"\ngap.residual_voltage = \"200 V\"\n");
    let (folder, told) = calibrated(&gap, &bench, &["--residual"]);
    assert!(told["residual_voltage_v"].is_object(), "{told}");
    assert_calibration_drawn(&folder, &told);
}

fn assert_calibration_drawn(folder: &Folder, told: &Value) {
    let settings = told["settings"].as_array().expect("settings");
    let rate = |one: &Value| number(&one["firing_rate_hz"]["value"]);
    let panels = drawn(folder, "c.svg");
    let points: Vec<(f64, f64)> = settings.iter().map(|one| (rate(one), number(&one["supply_v"]))).collect();
    panels[0].assert_drawn(&panels[0].marks("used"), &points);
    let residuals: Vec<(f64, f64)> = settings.iter().map(|one| (rate(one), number(&one["residual"]))).collect();
    panels[2].assert_drawn(&panels[2].marks("residuals"), &residuals);
    // The curve is that of the object, its band 1.96 standard uncertainties wide (95 % of a normal law).
    let law = told["law"].as_array().expect("a law");
    let of = |one: &Value, key: &str| number(&one[key]);
    let curve: Vec<(f64, f64)> = law.iter().map(|one| (of(one, "firing_rate_hz"), of(one, "supply_v"))).collect();
    panels[0].assert_drawn(&panels[0].corners("law"), &curve);
    let edge =
        |sign: f64| move |one: &Value| (of(one, "firing_rate_hz"), of(one, "supply_v") + sign * 1.96 * of(one, "u_v"));
    let edges: Vec<(f64, f64)> = law.iter().map(edge(1.0)).chain(law.iter().rev().map(edge(-1.0))).collect();
    panels[0].assert_drawn(&panels[0].corners("law band"), &edges);
    let off: Vec<(f64, f64)> = settings
        .iter()
        .map(|one| (rate(one), number(&one["supply_v"]) / number(&one["implied_supply_v"]) - 1.0))
        .collect();
    panels[1].assert_drawn(&panels[1].marks("departures"), &off);
    // The curve passes where the result says that the law is.
    for one in settings {
        let implied_v = number(&one["implied_supply_v"]);
        let curve = panels[0].corners("law");
        let after = curve.iter().position(|point| point.0 > rate(one)).expect("the curve goes on");
        let (a, b) = (curve[after - 1], curve[after]);
        let on_curve = a.1 + (b.1 - a.1) * (rate(one) - a.0) / (b.0 - a.0);
        assert!((on_curve / implied_v - 1.0).abs() < 2e-3, "{on_curve} {implied_v}");
    }
    assert!(text(folder, "c.html").contains("data-kind=\"calibration\""));
}

#[test]
fn clicks_without_a_rhythm_are_marked_one_by_one() {
    let folder = Folder::new();
    let (rate_hz, seconds) = (16_000, 20.0);
    // Independent arrivals, 12 a second, from a plain congruential generator; no two within 3 ms.
    let mut state = 7u64;
    let mut uniform = || {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (state >> 11) as f64 / (1u64 << 53) as f64
    };
    let mut samples: Vec<f32> =
        (0..(seconds * f64::from(rate_hz)) as usize).map(|_| (0.004 * (uniform() - 0.5)) as f32).collect();
    let mut times = Vec::new();
    let mut time_s = 0.1;
    while time_s < seconds - 0.1 {
        let at = (time_s * f64::from(rate_hz)) as usize;
        for k in 0..40 {
            let t = k as f64 / f64::from(rate_hz);
            samples[at + k] += (0.5 * (-t / 0.2e-3).exp() * (std::f64::consts::TAU * 2500.0 * t).cos()) as f32;
        }
        times.push(at as f64 / f64::from(rate_hz));
        time_s += 0.003 - (1.0 - uniform()).ln() / 12.0;
    }
    folder.wav("static.wav", &samples, 1, rate_hz, 16);
    let options = ["--json", "--events", "events.csv", "--plot", "excerpts=excerpts.svg"];
    let told = json(&done(&folder, &[&["measure", "static.wav"][..], &options].concat()));
    assert_eq!(told["verdict"], "irregular");
    let events = events(&folder);
    assert_eq!(number(&told["firings"]["extra"]) as usize, events.len());
    let close = |found: f64, time_s: f64| (found - time_s).abs() < 0.5e-3;
    assert!(events.iter().all(|event| event.period_s.is_none() && times.iter().any(|t| close(event.time_s, *t))));
    assert!(events.len() as f64 > 0.95 * times.len() as f64, "{} of {}", events.len(), times.len());
    let panel = &drawn(&folder, "excerpts.svg")[0];
    let marks = panel.marks("extra");
    assert_eq!(marks.len(), 12);
    for (mark, event) in marks.iter().zip(&events) {
        assert!((mark.0 - event.time_s).abs() <= panel.x.grain(event.time_s), "{mark:?} {}", event.time_s);
    }
}

#[test]
fn the_mains_is_marked_in_spectrum_and_growth() {
    let folder = Folder::new();
    let bench = "supply.voltage = \"8.5 kV\"\nsupply.ripple = \"3 %\"\nsupply.ripple_frequency = \"100 Hz\"\n\
                 charging.resistance = \"1.5 MΩ\"\ncharging.capacitance = \"1 nF\"\ngap.voltage = \"5.6 kV\"\ngap.spread = \"0.5 %\"\n\
                 receiver.hum = \"20 %\"\nreceiver.hum_frequency = \"50 Hz\"\n";
    folder.file("ripple.toml", bench.as_bytes());
    done(&folder, &["render", "--bench", "ripple.toml", "--seconds", "5", "-o", "ripple.wav"]);
    let plots = ["--plot", "spectrum=s.svg", "--plot", "growth=g.svg"];
    let told = json(&done(&folder, &[&["measure", "ripple.wav", "--json"][..], &plots].concat()));
    let line_hz = number(&told["mains_locked_jitter_s"]["frequency_hz"]);
    assert_eq!(line_hz, 100.0, "{told}");
    let spectrum = &drawn(&folder, "s.svg")[0];
    assert!((spectrum.corners("ripple")[0].0 - line_hz).abs() <= spectrum.x.grain(line_hz));
    let mains = spectrum.marks("mains");
    // Each on a multiple of 50 Hz, to within the lines that are told apart and what a column of the drawing is wide.
    assert!(!mains.is_empty() && mains.iter().all(|(f, _)| (f / 50.0 - (f / 50.0).round()).abs() < 0.05), "{mains:?}");
    let growth = &drawn(&folder, "g.svg")[0];
    let cycle = number(&told["firing_rate_hz"]["value"]) / line_hz;
    assert!((growth.corners("mains")[0].0 / cycle - 1.0).abs() < 2e-3, "{cycle}");
    // Without hum and ripple there is nothing to mark.
    folder.wav("quiet.wav", &clicks(3.0, 16_000), 1, 16_000, 16);
    done(&folder, &["measure", "quiet.wav", "--plot", "spectrum=q.svg"]);
    assert!(drawn(&folder, "q.svg")[0].series.iter().all(|series| series.name != "mains"));
}
