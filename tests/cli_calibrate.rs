//! `calibrate` from the command line: whole audio to figures, benches written, bad input.

mod cli_common;

use cli_common::{Folder, gaptone, json, stderr};
use std::path::Path;
use std::process::Output;

/// An invented bench: 2.88 ms, 5.2 kV.
const BENCH: &str = r#"# Invented; keep this line.
[supply]
voltage = "9.2 kV ± 0.5 %"   # the meter
[charging]
resistance = "1.2 MΩ"        # as printed on the parts
capacitance = "2.4 nF"
[gap]
voltage = "5.2 kV"
spread = "0.8 %"
residual_voltage = "120 V"
[receiver]
noise = "-30 dB"
"#;

const SUPPLIES_KV: [&str; 5] = ["6.2", "6.8", "7.6", "8.8", "10.2"];

fn run(folder: &Folder, arguments: &[&str]) -> Output {
    gaptone().args(arguments).current_dir(folder.0.path()).output().expect("the program runs")
}

/// A folder with the bench and a recording at each supply; their names with their supplies.
fn recorded() -> (Folder, Vec<String>) {
    let folder = Folder::new();
    folder.file("bench.toml", BENCH.as_bytes());
    let named = SUPPLIES_KV.iter().enumerate().map(|(seed, kv)| {
        let (name, supply, seed) = (format!("at-{kv}.wav"), format!("{kv}kV"), seed.to_string());
        let output = run(
            &folder,
            &["render", "--bench", "bench.toml", "--supply", &supply, "--seed", &seed, "--seconds", "6", "-o", &name],
        );
        assert!(output.status.success(), "{}", stderr(&output));
        format!("{name}@{supply} ± 0.3 %")
    });
    let named = named.collect();
    (folder, named)
}

fn with<'a>(first: &[&'a str], recordings: &'a [String]) -> Vec<&'a str> {
    first.iter().copied().chain(recordings.iter().map(String::as_str)).collect()
}

#[test]
fn recordings_at_five_supplies_give_time_constant_and_gap_voltage_and_a_bench() {
    let (folder, recordings) = recorded();
    let arguments = with(&["calibrate", "--bench", "bench.toml", "--write-bench", "found.toml", "--json"], &recordings);
    let output = run(&folder, &arguments);
    assert!(output.status.success(), "{}", stderr(&output));
    let found = json(&output);
    assert_eq!(found["format"], "gaptone.calibration/1");
    let value = |key: &str| found[key]["value"].as_f64().expect(key);
    // The supplies are exact here; 0.3 % is only stated, so the result is far better than its interval.
    assert!((value("time_constant_s") / 2.88e-3 - 1.0).abs() < 5e-3, "{found}");
    assert!((value("gap_voltage_v") / 5.2e3 - 1.0).abs() < 3e-3, "{found}");
    assert_eq!(found["degrees_of_freedom"], 3);
    assert_eq!(found["settings"][2]["file"], "at-7.6.wav");
    assert!(found["settings"].as_array().expect("settings").iter().all(|s| s["residual"].is_number()));
    let written = std::fs::read_to_string(folder.path("found.toml")).expect("it was written");
    for kept in ["# Invented; keep this line.", "# the meter", "# as printed on the parts", "1.2 MΩ"] {
        assert!(written.contains(kept), "{kept} is lost in\n{written}");
    }
    let bench = gaptone::bench::parse(&written, "found.toml").unwrap_or_else(|error| panic!("{error}"));
    assert!((bench.charging.time_constant.expect("found").value / value("time_constant_s") - 1.0).abs() < 1e-4);
    let measured =
        json(&run(&folder, &["measure", "at-7.6.wav", "--bench", "found.toml", "--supply", "7.6kV", "--json"]));
    assert!((measured["gap_voltage_v"]["value"].as_f64().expect("a voltage") / 5.2e3 - 1.0).abs() < 5e-3);
}

#[test]
fn two_settings_give_a_result_that_nothing_checks_and_the_text_says_so() {
    let (folder, recordings) = recorded();
    let two = [recordings[0].clone(), recordings[4].clone()];
    let output = run(&folder, &with(&["calibrate", "--bench", "bench.toml"], &two));
    assert!(output.status.success(), "{}", stderr(&output));
    let text = String::from_utf8(output.stdout).expect("UTF-8");
    let flat = text.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(flat.contains("note: no degrees of freedom are left") && flat.contains("one more setting would"), "{text}");
    let found = json(&run(&folder, &with(&["calibrate", "--bench", "bench.toml", "--json"], &two)));
    assert_eq!(found["degrees_of_freedom"], 0);
    assert!(found["chi_square_probability"].is_null(), "{found}");
    // 0.3 % a reading, as stated, and exact here.
    assert!((found["time_constant_s"]["value"].as_f64().expect("a figure") / 2.88e-3 - 1.0).abs() < 0.02, "{found}");
    let refused = run(&folder, &with(&["calibrate", "--residual"], &two));
    assert_eq!(refused.status.code(), Some(3));
    assert!(stderr(&refused).contains("at 3 supply settings at least"), "{}", stderr(&refused));
}

#[test]
fn the_text_names_a_wrong_label_and_leaves_a_recording_without_a_gap_out() {
    let (folder, mut recordings) = recorded();
    std::fs::copy(Path::new(env!("CARGO_MANIFEST_DIR")).join("sounds/no-gap.wav"), folder.path("no-gap.wav"))
        .expect("copied");
    recordings[3] = "at-8.8.wav@9.6kV".to_owned();
    recordings.push("no-gap.wav@9kV".to_owned());
    let output = run(&folder, &with(&["calibrate", "--bench", "bench.toml"], &recordings));
    assert!(output.status.success(), "{}", stderr(&output));
    let text = String::from_utf8(output.stdout).expect("UTF-8");
    let flat = text.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(flat.contains("at-8.8.wav is left out: it disagrees"), "{text}");
    assert!(flat.contains("no-gap.wav is left out: no rhythm"), "{text}");
    assert!(flat.contains("a further recording at") && flat.contains("kilovolts on a capacitor kill"), "{text}");
}

#[test]
fn a_ramp_with_its_log_is_one_recording() {
    let folder = Folder::new();
    folder.file("bench.toml", BENCH.as_bytes());
    folder.file("short.csv", b"time_s,supply_v\n0,6000\n");
    folder.file("log.csv", b"time_s,supply_v\n0,7600\n5,7600\n");
    let render = ["render", "--bench", "bench.toml", "--supply", "7.6kV", "--seconds", "5", "-o", "ramp.wav"];
    assert!(run(&folder, &render).status.success());
    let code = |arguments: &[&str]| {
        let output = run(&folder, arguments);
        (output.status.code(), stderr(&output))
    };
    let (status, said) = code(&["calibrate", "--supply-log", "short.csv", "ramp.wav"]);
    assert!(status == Some(2) && said.contains("two or more"), "{said}");
    let (status, said) = code(&["calibrate", "--supply-log", "log.csv", "ramp.wav"]);
    assert!(status == Some(3) && said.contains("as good as equal"), "{said}");
    let (status, said) = code(&["calibrate", "--supply-log", "log.csv", "ramp.wav", "other.wav"]);
    assert!(status == Some(2) && said.contains("one recording"), "{said}");
}

#[test]
fn bad_input_gives_one_error_and_no_file() {
    let folder = Folder::new();
    folder.file("bench.toml", BENCH.as_bytes());
    let refuse = |arguments: &[&str], status: i32, part: &str| {
        let output = run(&folder, &[&["calibrate"], arguments].concat());
        let said = stderr(&output);
        assert_eq!(output.status.code(), Some(status), "{arguments:?}: {said}");
        assert!(said.contains(part), "{arguments:?}: {said}");
        assert!(output.stdout.is_empty());
    };
    refuse(&["a.wav"], 2, "a.wav@9.2kV");
    refuse(&["@9kV", "b.wav@8kV"], 2, "behind an @");
    refuse(&["a.wav@9.2", "b.wav@8kV"], 2, "no unit");
    refuse(&["a.wav@9.2ms", "b.wav@8kV"], 2, "voltage");
    refuse(&["a.wav@-9.2kV", "b.wav@8kV"], 2, "above 0 V");
    refuse(&["a.wav@9.2kV", "b.wav@8kV", "--write-bench", "new.toml"], 1, "a.wav");
    refuse(&["a.wav@9.2kV", "--write-bench", "no-such-folder/new.toml"], 1, "no-such-folder");
    refuse(&["a.wav@9.2kV", "--bench", "gone.toml"], 1, "gone.toml");
    assert!(!folder.path("new.toml").exists());
}

#[test]
fn a_clip_whose_supply_moves_gives_the_parameters_with_its_log() {
    let folder = Folder::new();
    folder.file("bench.toml", BENCH.as_bytes());
    folder.file(
        "ramp.toml",
        b"[[clip]]\nname = \"ramp\"\nbench = \"bench.toml\"\nseconds = \"20 s\"\nvary = \"supply.voltage\"\n\
          through = [\"6.4 kV\", \"10.4 kV\"]\n",
    );
    let output = run(&folder, &["render", "--series", "ramp.toml", "-o", "clips"]);
    assert!(output.status.success(), "{}", stderr(&output));
    folder.file("log.csv", b"time_s,supply_v\n0,6400\n20,10400\n");
    let output =
        run(&folder, &["calibrate", "--supply-log", "log.csv", "clips/ramp.wav", "--bench", "bench.toml", "--json"]);
    assert!(output.status.success(), "{}", stderr(&output));
    let found = json(&output);
    let value = |key: &str| found[key]["value"].as_f64().expect(key);
    assert!((value("time_constant_s") / 2.88e-3 - 1.0).abs() < 0.015, "{found}");
    assert!((value("gap_voltage_v") / 5.2e3 - 1.0).abs() < 0.01, "{found}");
}
