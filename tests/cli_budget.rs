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
