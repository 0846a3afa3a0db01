//! The pages in a real browser: no error, no request, nothing too wide, nothing that keeps people out.
//!
//! Needs Chromium, node and the two packages of `tests/browser/package.json`; without them it tells so and passes. `.ci/run`
//! installs them. `SHOTS=FOLDER` keeps screenshots and printed pages there.

mod cli_common;
mod trend_help;

use cli_common::{Folder, clicks, gaptone, stderr};
use std::path::{Path, PathBuf};
use std::process::Command;
use trend_help::Gap;

const BROWSERS: [&str; 4] = ["chromium", "chromium-browser", "google-chrome", "chrome"];

fn on_path(name: &str) -> Option<PathBuf> {
    std::env::split_paths(&std::env::var_os("PATH")?).map(|folder| folder.join(name)).find(|path| path.is_file())
}

/// Browser, and the folder with the packages.
fn tools() -> Option<(PathBuf, PathBuf)> {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let packages = root.join("tests/browser");
    let browser = BROWSERS.iter().find_map(|name| on_path(name))?;
    (on_path("node").is_some() && packages.join("node_modules/playwright-core").is_dir()).then_some((browser, packages))
}

fn run(folder: &Folder, arguments: &[&str]) {
    let output = gaptone().current_dir(folder.0.path()).args(arguments).output().expect("it runs");
    let code = output.status.code();
    assert!(matches!(code, Some(0 | 1 | 3)), "{arguments:?}: {}", stderr(&output));
}

/// Pages of every kind, and of many kinds of recording.
fn pages(folder: &Folder) -> Vec<PathBuf> {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let sound = |name: &str| root.join("sounds").join(name).to_string_lossy().into_owned();
    let mut names = Vec::new();
    for clip in ["steady", "noisy", "carrier", "missing", "two-trains", "fast-overlapping", "hum", "no-gap"] {
        let (recording, bench, page) =
            (sound(&format!("{clip}.wav")), sound(&format!("{clip}.toml")), format!("{clip}.html"));
        match clip {
            "no-gap" => run(folder, &["measure", &recording, "--report", &page, "--with-audio"]),
            "missing" => run(folder, &["measure", &recording, "--bench", &bench, "--report", &page, "--with-audio"]),
            _ => run(folder, &["measure", &recording, "--bench", &bench, "--report", &page]),
        }
        names.push(page);
    }
    // A name that is markup, a title that turns the direction of writing, and a recording that is not there.
    let odd = "<b onclick=alert(1)>&\"'.wav";
    folder.wav(odd, &clicks(2.0, 16_000), 1, 16_000, 16);
    let bench = "title = \"\\u202E\\u05D0\\u05D1\\u05D2 <script>alert(1)</script>\"\nsupply.voltage = \"9.2 kV\"\n\
                 charging.time_constant = \"12 ms\"\ngap.voltage = \"5.2 kV\"\ngap.spread = \"1 %\"\n";
    folder.file("odd.toml", bench.as_bytes());
    run(folder, &["measure", odd, "gone.wav", "--bench", "odd.toml", "--with-audio", "--report", "several.html"]);
    run(folder, &["predict", "--bench", "odd.toml", "--report", "predict.html"]);
    let ripple = root.join("examples/benches/mains-ripple.toml").to_string_lossy().into_owned();
    run(folder, &["predict", "--bench", &ripple, "--supply", "8kV..12kV", "--report", "range.html"]);
    let entries = Gap::default().entries(30, 5);
    let lines: String = entries.iter().map(|entry| serde_json::to_string(entry).expect("JSON") + "\n").collect();
    folder.file("gap.jsonl", lines.as_bytes());
    run(folder, &["trend", "gap.jsonl", "--report", "trend.html"]);
    let mut calibrate = vec!["calibrate".to_owned(), "--report".to_owned(), "calibrate.html".to_owned()];
    for supply in ["6.2kV", "7.6kV", "10.2kV"] {
        run(
            folder,
            &["render", "--bench", "odd.toml", "--supply", supply, "--seconds", "3", "-o", &format!("{supply}.wav")],
        );
        calibrate.push(format!("{supply}.wav@{supply}"));
    }
    run(folder, &calibrate.iter().map(String::as_str).collect::<Vec<_>>());
    let series = root.join("examples/teaching/series.toml").to_string_lossy().into_owned();
    run(folder, &["render", "--series", &series, "-o", "series"]);
    names.extend(
        ["several", "predict", "range", "trend", "calibrate", "series/index"].map(|name| format!("{name}.html")),
    );
    names.iter().map(|name| folder.path(name)).collect()
}

#[test]
fn every_page_is_sound_in_a_real_browser() {
    let Some((browser, packages)) = tools() else {
        println!(
            "skipped: it needs Chromium (such as `apt-get install chromium`) and node, and `npm install` in tests/browser; \
             .ci/run installs all of it"
        );
        return;
    };
    let folder = Folder::new();
    let pages = pages(&folder);
    assert!(pages.len() >= 14);
    let output = Command::new("node")
        .arg(packages.join("check.mjs"))
        .arg(browser)
        .arg(&packages)
        .args(&pages)
        .output()
        .expect("node runs");
    let told = String::from_utf8_lossy(&output.stdout);
    assert!(output.status.success(), "{told}{}", stderr(&output));
}
