//! Pages and pictures through the program: the pictures show the figures, the pages hold together and let nothing through.

mod cli_common;
mod svg_help;
mod trend_help;

use cli_common::{Folder, clicks, gaptone, json, stderr};
use gaptone::report::Figure;
use serde_json::Value;
use std::path::Path;
use std::process::Output;
use svg_help::{Panel, assert_well_formed, panels};
use trend_help::Gap;

const BENCH: &str = "title = \"invented\"\nsupply.voltage = \"9.2 kV ± 1 %\"\ncharging.resistance = \"1.2 MΩ ± 1 %\"\n\
                     charging.capacitance = \"6.8 nF ± 5 %\"\n";

fn folder() -> Folder {
    let folder = Folder::new();
    folder.wav("run.wav", &clicks(3.0, 16_000), 1, 16_000, 16);
    folder.file("bench.toml", BENCH.as_bytes());
    folder
}

fn run(folder: &Folder, arguments: &[&str]) -> Output {
    gaptone().current_dir(folder.0.path()).args(arguments).output().expect("it runs")
}

fn done(folder: &Folder, arguments: &[&str]) -> Output {
    let output = run(folder, arguments);
    assert_eq!(output.status.code(), Some(0), "{arguments:?}: {}", stderr(&output));
    output
}

fn text(folder: &Folder, name: &str) -> String {
    std::fs::read_to_string(folder.path(name)).unwrap_or_else(|error| panic!("{name}: {error}"))
}

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
fn a_page_holds_the_figures_and_gives_them_back() {
    let folder = folder();
    let common = ["measure", "run.wav", "--bench", "bench.toml"];
    let plain = done(&folder, &[&common[..], &["--json"]].concat());
    let with_page = done(&folder, &[&common[..], &["--json", "--report", "run.html"]].concat());
    assert_eq!(plain.stdout, with_page.stdout, "a page changes no figure and no output");
    let back = done(&folder, &["measure", "--from-report", "run.html", "--json"]);
    assert_eq!(back.stdout, plain.stdout);
    let words = done(&folder, &["measure", "--from-report", "run.html"]);
    assert_eq!(words.stdout, done(&folder, &common).stdout);
    // Drawn again from the page, a picture is the same.
    done(&folder, &[&common[..], &["--plot", "growth=one.svg"]].concat());
    done(&folder, &["measure", "--from-report", "run.html", "--plot", "growth=two.svg", "--report", "again.html"]);
    assert_eq!(text(&folder, "one.svg"), text(&folder, "two.svg"));
    assert_eq!(text(&folder, "run.html"), text(&folder, "again.html"));
    let page = text(&folder, "run.html");
    let measured = json(&plain);
    let rate = serde_json::from_value(measured["firing_rate_hz"].clone()).expect("a figure");
    let rate = Figure::plain(rate, "firings a second").value_and_u();
    assert!(page.contains(&format!("<h1>{rate}")) && page.contains("kill"), "answer and caution");
    for kind in gaptone::pictures::KINDS {
        assert!(page.contains(&format!("data-kind=\"{kind}\"")), "{kind} is missing");
    }
}

#[test]
fn a_page_needs_nothing_from_outside_and_stays_small() {
    let folder = Folder::new();
    folder.wav("long.wav", &clicks(10.0, 48_000), 1, 48_000, 16);
    folder.file("bench.toml", BENCH.as_bytes());
    done(&folder, &["measure", "long.wav", "--bench", "bench.toml", "--report", "long.html"]);
    let page = text(&folder, "long.html");
    assert!(page.len() < 1_000_000, "{} bytes", page.len());
    // The name of the language of the drawings is the only address.
    let bare = page.replace("http://www.w3.org/2000/svg", "");
    assert!(
        !bare.contains("http:") && !bare.contains("https:") && !bare.contains("<link") && !bare.contains("@import")
    );
    assert!(!bare.contains(" src=") && !bare.contains("url("));
    assert!(gaptone::page::extract(&page).is_ok());
    done(&folder, &["measure", "long.wav", "--report", "heard.html", "--with-audio"]);
    let heard = text(&folder, "heard.html");
    assert!(heard.contains("src=\"data:audio/wav;base64,UklGR") && heard.len() > 1_000_000);
}

#[test]
fn whatever_names_and_titles_hold_is_shown_as_text() {
    let folder = Folder::new();
    let name = "<img src=x onerror=alert(1)>'\".wav";
    folder.wav(name, &clicks(2.0, 16_000), 1, 16_000, 16);
    let title = r#"</script><script>alert(2)</script> \"quoted\" \u202Eright to left \u05D0\u05D1"#;
    folder.file(
        "b<b>.toml",
        format!("title = \"{title}\"\n{}", BENCH.replacen("title = \"invented\"\n", "", 1)).as_bytes(),
    );
    done(&folder, &["measure", name, "--bench", "b<b>.toml", "--report", "run.html", "--with-audio"]);
    done(
        &folder,
        &[
            "predict",
            "--bench",
            "b<b>.toml",
            "--supply",
            "8kV..12kV",
            "--report",
            "predict.html",
            "--plot",
            "predict.svg",
        ],
    );
    for place in ["run.html", "predict.html"] {
        let page = text(&folder, place);
        assert_eq!(page.matches("<script").count(), 2, "{place}: the object and ours");
        assert_eq!(page.matches("</script").count(), 2, "{place}");
        assert!(!page.contains("<img") && !page.contains("<b>"), "{place}");
        assert!(page.contains("&lt;/script&gt;"), "{place} shows it");
    }
    assert!(text(&folder, "run.html").contains("<bdi>&lt;img src=x onerror=alert(1)&gt;&#39;&quot;.wav"));
    let kept = gaptone::page::extract(&text(&folder, "run.html")).expect("our page");
    assert_eq!(kept.recordings[0].file, name);
    assert_well_formed(&text(&folder, "predict.svg"));
}

#[test]
fn a_place_that_cannot_be_written_is_told_before_any_work() {
    let folder = folder();
    // None of the inputs is there: that the place is told shows that nothing was read before.
    for arguments in [
        &["measure", "gone.wav", "--report", "no/run.html"][..],
        &["measure", "gone.wav", "--plot", "no/run.html"],
        &["calibrate", "gone.wav@1kV", "--report", "no/run.html"],
        &["trend", "gone.jsonl", "--report", "no/run.html"],
        &["predict", "--bench", "gone.toml", "--report", "no/run.html"],
    ] {
        let output = run(&folder, arguments);
        assert_eq!(output.status.code(), Some(1), "{arguments:?}");
        assert!(
            stderr(&output).contains("no/run.html: cannot be written: there is no such folder"),
            "{}",
            stderr(&output)
        );
    }
    let output = run(&folder, &["measure", "run.wav", "--plot", "pie=x.svg"]);
    assert_eq!(output.status.code(), Some(2));
    assert!(stderr(&output).contains("pie is no kind of picture; write one of click, excerpts"), "{}", stderr(&output));
    let output = run(&folder, &["measure", "-", "--report", "x.html", "--with-audio"]);
    assert_eq!(output.status.code(), Some(2), "{}", stderr(&output));
    let left: Vec<_> =
        std::fs::read_dir(folder.0.path()).expect("a folder").map(|e| e.expect("an entry").file_name()).collect();
    assert_eq!(left.len(), 2, "nothing is left behind: {left:?}");
}

#[test]
fn what_is_no_page_of_ours_is_refused() {
    let folder = folder();
    folder.file("other.html", b"<!DOCTYPE html><p>hello");
    done(&folder, &["measure", "run.wav", "--report", "run.html"]);
    let whole = text(&folder, "run.html");
    let cut = whole.replace("\"gaptone.evidence/1\"", "7");
    folder.file("cut.html", cut.as_bytes());
    done(&folder, &["predict", "--bench", "bench.toml", "--report", "predict.html"]);
    for (name, words) in [
        ("other.html", "is no report of gaptone"),
        ("cut.html", "its report cannot be read"),
        ("predict.html", "holds a gaptone.prediction/1"),
        ("run.wav", "is no text"),
        ("gone.html", "no such file"),
    ] {
        let output = run(&folder, &["measure", "--from-report", name]);
        assert_eq!(output.status.code(), Some(1), "{name}: {}", stderr(&output));
        assert!(stderr(&output).contains(&format!("{name}: {words}")), "{}", stderr(&output));
    }
}

#[test]
fn a_recording_without_a_gap_and_one_that_is_not_there_have_their_place() {
    let folder = folder();
    folder.wav("silent.wav", &vec![0.0; 16_000], 1, 16_000, 16);
    let output = run(&folder, &["measure", "run.wav", "silent.wav", "gone.wav", "--report", "all.html"]);
    assert_eq!(output.status.code(), Some(1), "{}", stderr(&output));
    let page = text(&folder, "all.html");
    assert!(
        page.contains("1 of 3 recordings hold a gap")
            && page.contains("No gap is heard")
            && page.contains("no such file")
    );
    let back = run(&folder, &["measure", "--from-report", "all.html"]);
    assert_eq!((back.status.code(), &back.stdout[..20]), (Some(1), &output.stdout[..20]));
    let alone = run(&folder, &["measure", "silent.wav", "--report", "silent.html", "--plot", "recording=silent.svg"]);
    assert_eq!(alone.status.code(), Some(3), "{}", stderr(&alone));
    assert!(text(&folder, "silent.html").contains("No figure:"));
    let nothing = run(&folder, &["measure", "silent.wav", "--plot", "silent-periods.svg"]);
    assert_eq!(nothing.status.code(), Some(3));
    assert!(stderr(&nothing).contains("there is nothing to draw of the periods"), "{}", stderr(&nothing));
    assert!(!Path::new(&folder.path("silent-periods.svg")).exists());
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

#[test]
fn a_calibration_is_drawn_as_it_is_told() {
    let folder = folder();
    folder.file("gap.toml", format!("{BENCH}gap.voltage = \"5.2 kV\"\ngap.spread = \"0.5 %\"\n").as_bytes());
    let mut named = Vec::new();
    for (k, supply) in ["6.2kV", "7.6kV", "10.2kV"].iter().enumerate() {
        let (file, seed) = (format!("{supply}.wav"), format!("{}", k + 1));
        let options = ["--supply", supply, "--seconds", "4", "--seed", &seed, "-o", &file];
        done(&folder, &[&["render", "--bench", "gap.toml"][..], &options].concat());
        named.push(format!("{file}@{supply}"));
    }
    let mut arguments = vec!["calibrate", "--json", "--bench", "bench.toml", "--plot", "c.svg", "--report", "c.html"];
    arguments.extend(named.iter().map(String::as_str));
    let told = json(&done(&folder, &arguments));
    let settings = told["settings"].as_array().expect("settings");
    let rate = |one: &Value| number(&one["firing_rate_hz"]["value"]);
    let panels = drawn(&folder, "c.svg");
    let points: Vec<(f64, f64)> = settings.iter().map(|one| (rate(one), number(&one["supply_v"]))).collect();
    panels[0].assert_drawn(&panels[0].marks("used"), &points);
    let residuals: Vec<(f64, f64)> = settings.iter().map(|one| (rate(one), number(&one["residual"]))).collect();
    panels[1].assert_drawn(&panels[1].marks("residuals"), &residuals);
    // The curve passes where the result says that the law is.
    for one in settings {
        let implied_v = number(&one["implied_supply_v"]);
        let curve = panels[0].corners("law");
        let after = curve.iter().position(|point| point.0 > rate(one)).expect("the curve goes on");
        let (a, b) = (curve[after - 1], curve[after]);
        let on_curve = a.1 + (b.1 - a.1) * (rate(one) - a.0) / (b.0 - a.0);
        assert!((on_curve / implied_v - 1.0).abs() < 2e-3, "{on_curve} {implied_v}");
    }
    assert!(text(&folder, "c.html").contains("data-kind=\"calibration\""));
}
