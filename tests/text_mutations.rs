//! Damaged texts: bench and series files, logs, supply logs, pages. Each is read or refused with a message, none brings the program
//! down.

mod mutation_help;

use gaptone::model::random::Random;
use gaptone::trend::{Entry, Options, analyse};
use mutation_help::mutate;
use std::path::Path;

/// Damaged texts of each kind.
const EACH: u64 = 3000;

fn files(folder: &str) -> Vec<Vec<u8>> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join(folder);
    let entries = std::fs::read_dir(&folder).expect("a folder").map(|entry| entry.expect("an entry").path());
    entries.filter(|path| path.is_file()).map(|path| std::fs::read(path).expect("read")).collect()
}

/// Reads damaged texts made of these; `read` tells the message of a refusal.
fn damage(seeds: &[Vec<u8>], stream: u64, read: impl Fn(&str) -> Result<(), String>) {
    let mut refused = 0;
    for number in 0..EACH {
        let mut random = Random::stream(stream, number);
        let pick = |random: &mut Random| &seeds[(random.uniform() * seeds.len() as f64) as usize];
        let (bytes, other) = (pick(&mut random), pick(&mut random));
        let text = String::from_utf8_lossy(&mutate(bytes, other, &mut random)).into_owned();
        if let Err(message) = read(&text) {
            assert!(!message.is_empty(), "{text}");
            refused += 1;
        }
    }
    assert!(refused > EACH / 10, "only {refused} were refused");
}

fn told<T>(result: Result<T, impl ToString>) -> Result<(), String> {
    result.map(drop).map_err(|error| error.to_string())
}

#[test]
fn damaged_bench_and_series_files_are_read_or_refused() {
    let benches = [files("tests/bench/valid"), files("tests/bench/broken"), files("examples/benches")].concat();
    damage(&benches, 1, |text| told(gaptone::bench::parse(text, "damaged.toml")));
    damage(&files("examples/teaching"), 2, |text| told(gaptone::bench::parse_series(text, "damaged.toml")));
}

const LOG: &str = r#"{"format":"gaptone.log/1","time":"2026-11-01T10:00:00Z","file":"a.wav","verdict":"steady","firings":{"on_rhythm":2117,"missed":0,"extra":0},"firing_time_s":4.99,"hour_meter_h":null,"firing_rate_hz":{"value":423.5,"u":0.06,"low":423.4,"high":423.6},"period_jitter_s":{"value":1.46e-5,"u":4e-7,"low":1.37e-5,"high":1.54e-5},"gap_voltage_v":{"value":5200.0,"u":45.0,"low":5118.0,"high":5285.0},"gap_voltage_spread_v":{"value":20.3,"u":0.6,"low":19.1,"high":21.5},"bench":{"title":"Invented","supply_v":9200.0,"electrodes":null,"diameter_m":null},"air":{"temperature_k":null,"pressure_pa":null,"humidity":null}}
"#;

#[test]
fn damaged_logs_supply_logs_and_pages_are_read_or_refused() {
    serde_json::from_str::<Entry>(LOG).expect("the undamaged line is one");
    damage(&[LOG.repeat(12).into_bytes()], 3, |text| {
        let lines = || text.lines().map(serde_json::from_str::<Entry>);
        let entries: Vec<Entry> = lines().filter_map(Result::ok).collect();
        let _ = analyse(&entries, &Options::default());
        lines().find_map(Result::err).map_or(Ok(()), |error| Err(error.to_string()))
    });
    let supply = b"time_s,supply_v\n0,8000\n1.5,8200\n3,8400.5\n4.5,8600\n6,8800\n".to_vec();
    damage(&[supply], 4, |text| told(gaptone::calibrate::SupplyLog::parse(text)));
    let page = format!("<html><script type=\"application/json\" id=\"gaptone-report\">{LOG}</script></html>");
    damage(&[page.into_bytes()], 5, |text| told(gaptone::page::extract(text)));
}
