//! `measure --budget`: the table, the field in the JSON, and what it needs.

mod cli_common;

use cli_common::gaptone;

#[test]
fn the_budget_stands_in_the_text_and_in_the_json() {
    let run = |more: &[&str]| {
        let mut command = gaptone();
        command.args(["measure", "sounds/steady.wav", "--bench", "sounds/steady.toml"]).args(more);
        let output = command.output().expect("it runs");
        assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
        String::from_utf8(output.stdout).expect("UTF-8")
    };
    let text = run(&["--budget"]);
    for shown in ["budget of the gap voltage:", "capacitance (± 2 %)", "rectangular", "Monte Carlo", "to reduce it"] {
        assert!(text.contains(shown), "{shown} is missing in\n{text}");
    }
    let json: serde_json::Value = serde_json::from_str(&run(&["--budget", "--json"])).expect("JSON");
    let budget = &json["budget"][0];
    assert_eq!(budget["quantity"], "gap_voltage_v");
    assert_eq!(budget["result"], json["gap_voltage_v"]);
    let shares: f64 =
        budget["inputs"].as_array().expect("inputs").iter().map(|line| line["share"].as_f64().expect("a share")).sum();
    assert!((shares - 1.0).abs() < 1e-9);
    assert_eq!(json["budget"][1]["result"], json["gap_voltage_spread_v"]);
    let without: serde_json::Value = serde_json::from_str(&run(&["--json"])).expect("JSON");
    assert!(without.get("budget").is_none());
    assert_eq!(without["gap_voltage_v"], json["gap_voltage_v"], "the figure does not depend on the option");
}

#[test]
fn electrodes_give_an_implied_spacing_and_a_budget_needs_a_bench() {
    let output = gaptone()
        .args(["measure", "sounds/steady.wav", "--bench", "examples/benches/north-bench.toml", "--budget", "--json"])
        .output()
        .expect("it runs");
    let json: serde_json::Value = serde_json::from_slice(&output.stdout).expect("JSON");
    let budgets = json["budget"].as_array().expect("budgets");
    let spacing = budgets.iter().find(|budget| budget["quantity"] == "implied_spacing_m").expect("an implied spacing");
    let spacing_m = spacing["result"]["value"].as_f64().expect("a value");
    assert!((1e-5..1e-2).contains(&spacing_m), "{spacing_m}");
    gaptone().args(["measure", "sounds/steady.wav", "--budget"]).assert().code(2);
}

#[test]
fn two_runs_of_one_bench_are_compared_without_what_they_have_in_common() {
    let folder = cli_common::Folder::new();
    let bench = concat!(env!("CARGO_MANIFEST_DIR"), "/sounds/steady.toml");
    let run = |arguments: &[&str]| {
        let output = gaptone().args(arguments).current_dir(folder.0.path()).output().expect("it runs");
        assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
        output.stdout
    };
    let worn =
        std::fs::read_to_string(bench).expect("a bench").replace("voltage = \"5.2 kV\"", "voltage = \"5.226 kV\"");
    folder.file("worn.toml", worn.as_bytes());
    run(&["render", "--bench", bench, "--seed", "5", "-o", "before.wav"]);
    run(&["render", "--bench", "worn.toml", "--seed", "6", "-o", "after.wav"]);
    let compared = ["measure", "before.wav", "after.wav", "--bench", bench, "--difference"];
    let found: serde_json::Value = serde_json::from_slice(&run(&[&compared[..], &["--json"]].concat())).expect("JSON");
    assert_eq!(found["format"], "gaptone.difference/1");
    let differences = found["differences"].as_array().expect("differences");
    let voltage = differences.iter().find(|one| one["quantity"] == "gap_voltage_v").expect("a voltage");
    let of = |key: &str| voltage["difference"][key].as_f64().expect(key);
    // The gap is 26 V higher; each voltage alone is only known to 45 V.
    assert!(voltage["differs"] == true && (of("value") - 26.0).abs() < 4.0 * of("u") && of("u") < 5.0, "{voltage}");
    let text = String::from_utf8(run(&compared)).expect("UTF-8");
    assert!(text.contains("the two runs differ in firing rate") && text.contains("gap voltage"), "{text}");
    gaptone().args(["measure", "sounds/steady.wav", "--difference"]).assert().code(2);
}
