//! What stands at the end of every help and manual page: examples and exit statuses.

use super::Arguments;
use clap::{Command, CommandFactory};

const EXIT_STATUS: &str = "\
Exit status:
  0  done
  1  a file could not be read or written
  2  wrong usage or a wrong bench file
  3  a recording holds no firing that can be measured
  4  a watch was ended by a limit";

/// Examples of each command.
const EXAMPLES: [(&str, &str); 9] = [
    (
        "measure",
        "\
  gaptone measure run.wav --bench bench.toml --supply \"9.2 kV ± 0.3 %\"
  gaptone measure a.wav b.flac --json
  gaptone measure run.wav --from 10 --to 70 --events clicks.csv --report run.html",
    ),
    (
        "calibrate",
        "  gaptone calibrate low.wav@6.2kV middle.wav@7.6kV high.wav@10.2kV --bench bench.toml --write-bench new.toml",
    ),
    (
        "predict",
        "\
  gaptone predict --bench bench.toml --supply 8kV..12kV --settings 5
  gaptone predict --bench bench.toml --target A4 --clip concert-pitch.wav",
    ),
    (
        "render",
        "\
  gaptone render --bench bench.toml -o clip.wav --seconds 10 --seed 7 --truth clip.json
  gaptone render --series series.toml -o clips",
    ),
    (
        "trend",
        "\
  gaptone trend gap.jsonl --report gap.html
  gaptone trend gap.jsonl --since 2026-11-30 --csv",
    ),
    ("watch", "  arecord -q -f S16_LE -r 48000 | gaptone watch - --bench bench.toml --log gap.jsonl"),
    ("abilities", "  gaptone abilities --json"),
    ("completions", "  gaptone completions bash > ~/.local/share/bash-completion/completions/gaptone"),
    ("manual", "  gaptone manual ~/.local/share/man/man1; man gaptone-measure"),
];

/// The command line with examples and exit statuses at the end of every help.
#[must_use]
pub fn definition() -> Command {
    let whole = ending(Arguments::command());
    let names: Vec<String> = whole.get_subcommands().map(|command| command.get_name().to_owned()).collect();
    names.iter().fold(whole, |whole, name| whole.mut_subcommand(name, ending))
}

fn ending(command: Command) -> Command {
    let examples = EXAMPLES.iter().filter(|(name, _)| *name == command.get_name());
    let examples = examples.map(|(_, examples)| format!("Examples:\n{examples}"));
    let before = command.get_after_help().map(ToString::to_string);
    let parts: Vec<String> = before.into_iter().chain(examples).chain([EXIT_STATUS.to_owned()]).collect();
    command.after_help(parts.join("\n\n"))
}
