//! Everything that the README tells a person to type or to write is tried: commands are run, files are read.

mod cli_common;

use cli_common::Folder;
use std::io::Write;
use std::path::Path;
use std::process::{Command, Output, Stdio};

const README: &str = include_str!("../README.md");

/// Commands for the Rust toolchain that the README holds; those that `cargo run` the program are run as well.
const CARGO: [&str; 2] =
    ["cargo run --release -- measure sounds/steady.wav --bench sounds/steady.toml", "cargo test --release"];

/// Commands that are shown because they end with another status than 0.
const ENDS_WITH: [(&str, i32); 1] = [("gaptone measure sounds/no-gap.wav", 3)];

/// A fenced block of the README: its language and its lines.
struct Fence {
    language: String,
    lines: Vec<String>,
}

impl Fence {
    fn text(&self) -> String {
        self.lines.join("\n")
    }
}

fn fences() -> Vec<Fence> {
    let mut found: Vec<Fence> = Vec::new();
    let mut open = false;
    for line in README.lines() {
        match line.strip_prefix("```") {
            Some(language) if !open => {
                assert!(!language.is_empty(), "a block without a language would not be tried");
                found.push(Fence { language: language.to_owned(), lines: Vec::new() });
                open = true;
            }
            Some(_) => open = false,
            None if open => found.last_mut().expect("a block is open").lines.push(line.to_owned()),
            None => {}
        }
    }
    assert!(!open, "the last block is not closed");
    found
}

fn of_language(language: &str) -> Vec<Fence> {
    fences().into_iter().filter(|fence| fence.language == language).collect()
}

fn commands() -> Vec<String> {
    of_language("sh").into_iter().flat_map(|fence| fence.lines).collect()
}

/// Words of a command as a shell would take them; double quotes are the only quoting in the README.
fn words(command: &str) -> Vec<String> {
    assert!(!command.contains(['\'', '$', '>', '<', ';', '&', '*', '\\']), "not understood here: {command}");
    let quoted = command.split('"').enumerate();
    quoted
        .flat_map(
            |(i, part)| {
                if i % 2 == 1 { vec![part.to_owned()] } else { part.split_whitespace().map(str::to_owned).collect() }
            },
        )
        .collect()
}

/// The arguments of the program in one stage of a command.
fn arguments(stage: &str) -> Vec<String> {
    let mut words = words(stage);
    let skip = match words.first().map(String::as_str) {
        Some("gaptone") => 1,
        Some("cargo") => 1 + words.iter().position(|word| word == "--").expect("cargo run has its --"),
        _ => panic!("neither gaptone nor cargo: {stage}"),
    };
    words.drain(..skip);
    words
}

/// Runs a command, each stage fed with the output of the one before.
fn run(command: &str, folder: &Path) -> Output {
    let mut input = Vec::new();
    let mut last = None;
    for stage in command.split('|') {
        let mut child = Command::new(assert_cmd::cargo::cargo_bin!("gaptone"))
            .args(arguments(stage))
            .current_dir(folder)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .expect("the program starts");
        let mut pipe = child.stdin.take().expect("a pipe");
        let bytes = std::mem::take(&mut input);
        let feeder = std::thread::spawn(move || pipe.write_all(&bytes));
        let output = child.wait_with_output().expect("the program ends");
        feeder.join().expect("no panic").expect("the program reads its input");
        input.clone_from(&output.stdout);
        last = Some(output);
    }
    last.expect("a command has a stage")
}

/// A folder that holds what a fresh clone holds of demonstration files.
fn clone_of_demonstrations() -> Folder {
    let folder = Folder::new();
    for name in ["sounds", "examples/benches", "examples/teaching"] {
        let from = Path::new(env!("CARGO_MANIFEST_DIR")).join(name);
        std::fs::create_dir_all(folder.path(name)).expect("a folder");
        for entry in std::fs::read_dir(from).expect("demonstration files") {
            let path = entry.expect("an entry").path();
            let to = folder.path(name).join(path.file_name().expect("a name"));
            std::fs::copy(path, to).expect("copied");
        }
    }
    folder
}

#[test]
fn every_command_of_the_readme_ends_as_it_should() {
    let folder = clone_of_demonstrations();
    let mut tried = 0;
    for command in commands() {
        if command.starts_with("cargo ") {
            assert!(CARGO.contains(&command.as_str()), "cargo command that nothing tries: {command}");
            if !command.starts_with("cargo run ") {
                continue;
            }
        }
        let wanted = ENDS_WITH.iter().find(|(shown, _)| *shown == command).map_or(0, |(_, status)| *status);
        let output = run(&command, folder.0.path());
        let said = String::from_utf8_lossy(&output.stderr);
        assert_eq!(output.status.code(), Some(wanted), "{command}\n{said}");
        assert!(!output.stdout.is_empty(), "{command} prints nothing");
        tried += 1;
    }
    assert!(tried >= 10, "only {tried} commands were found");
    for written in ["clicks.csv", "concert-pitch.wav", "clip.flac", "clip.json"] {
        assert!(folder.path(written).is_file(), "{written} was not written");
    }
}

#[test]
fn the_readme_opens_with_one_paragraph_and_two_commands_in_blocks_of_their_own() {
    let body = README.split_once("\n\n").expect("a title").1;
    let before = body.split("```").next().expect("a beginning");
    assert_eq!(
        before.trim().split("\n\n").count(),
        2,
        "the job in one paragraph, then a line that leads to the command"
    );
    let first: Vec<Fence> = fences().into_iter().take(2).collect();
    for (fence, command) in first.iter().zip(CARGO) {
        assert_eq!((fence.language.as_str(), fence.text().as_str()), ("sh", command));
    }
    for command in CARGO.iter().filter(|command| command.starts_with("cargo run ")) {
        for file in words(command).iter().filter(|word| word.starts_with("sounds/")) {
            assert!(Path::new(env!("CARGO_MANIFEST_DIR")).join(file).is_file(), "{file} is not in the clone");
        }
    }
}

/// Label, value and standard uncertainty of a line such as `  firing rate     423.524 ± 0.060 /s   …`.
fn figure(line: &str) -> Option<(String, f64, f64)> {
    let (label, rest) = line.trim().split_once("  ")?;
    let mut fields = rest.split_whitespace();
    let value = fields.next()?.parse().ok()?;
    let u = (fields.next()? == "±").then(|| fields.next()?.parse().ok()).flatten()?;
    Some((label.to_owned(), value, u))
}

#[test]
fn the_output_shown_is_the_output_given() {
    let shown = of_language("text").first().expect("the output of the first command").text();
    let folder = clone_of_demonstrations();
    let output = run(CARGO[0], folder.0.path());
    let given = String::from_utf8_lossy(&output.stdout);
    let real: Vec<_> = given.lines().filter_map(figure).collect();
    let figures: Vec<_> = shown.lines().filter_map(figure).collect();
    assert_eq!(figures.len(), 8, "{shown}");
    for (label, value, u) in figures {
        let (_, now, _) = real.iter().find(|(other, ..)| *other == label).unwrap_or_else(|| panic!("{label}: {given}"));
        // The same clip read by a later version may differ, by a fraction of what the figure claims to be worth.
        assert!((now - value).abs() <= u, "{label}: {value} ± {u} is shown, {now} given");
    }
}

#[test]
fn the_bench_file_shown_is_right() {
    let fences = of_language("toml");
    assert_eq!(fences.len(), 1);
    let bench = gaptone::bench::parse(&fences[0].text(), "README.md").unwrap_or_else(|error| panic!("{error}"));
    assert_eq!(bench.supply.voltage.expect("a supply").value, 9200.0);
}

#[test]
fn the_json_and_the_events_shown_have_the_format_of_the_program() {
    let fences = of_language("json");
    assert_eq!(fences.len(), 1);
    let shown: gaptone::report::Measurement = serde_json::from_str(&fences[0].text()).expect("a measurement");
    let written = serde_json::to_value(&shown).expect("JSON");
    let typed: serde_json::Value = serde_json::from_str(&fences[0].text()).expect("JSON");
    let keys = |value: &serde_json::Value| value.as_object().expect("an object").keys().cloned().collect::<Vec<_>>();
    assert_eq!(keys(&written), keys(&typed));
    assert_eq!(shown.format, gaptone::report::FORMAT);
    let csv = of_language("csv");
    assert_eq!(csv[0].lines[0], gaptone::report::EVENTS_HEADER);
}

#[test]
fn every_file_that_the_pages_name_is_there() {
    const ROOTS: [&str; 6] = ["src/", "tests/", "examples/", "benches/", "sounds/", ".ci/"];
    let pages = [README, include_str!("../DEVELOPERS.md"), include_str!("../CHANGELOG.md")];
    let mut named = 0;
    for name in pages.iter().flat_map(|page| page.split('`').skip(1).step_by(2)) {
        if ROOTS.iter().any(|root| name.starts_with(root)) && !name.contains(' ') {
            named += 1;
            assert!(Path::new(env!("CARGO_MANIFEST_DIR")).join(name).exists(), "{name} is named but not there");
        }
    }
    assert!(named > 30, "only {named} files are named");
}
