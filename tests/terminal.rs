//! What a terminal is shown: a drawing that fits, and none where nothing but text is wanted.

mod cli_common;

use cli_common::{Folder, clicks};
use std::process::Command;

/// Runs `gaptone measure` in a terminal of a width; none where there is no `script` to make one (util-linux).
fn in_a_terminal(folder: &Folder, columns: u16, set: &[(&str, &str)]) -> Option<String> {
    let program = assert_cmd::cargo::cargo_bin!("gaptone").to_string_lossy().into_owned();
    let line = format!("stty rows 24 cols {columns} && '{program}' measure run.wav");
    let mut command = Command::new("script");
    command.current_dir(folder.0.path()).args(["-qec", &line, "/dev/null"]);
    command.env("TERM", "xterm").env("LC_ALL", "C.UTF-8").envs(set.iter().copied());
    let output = command.stdin(std::process::Stdio::null()).output().ok()?;
    output.status.success().then(|| String::from_utf8_lossy(&output.stdout).replace('\r', ""))
}

#[test]
fn a_terminal_is_shown_a_drawing_in_its_width_and_a_pipe_is_not() {
    let folder = Folder::new();
    let path = folder.wav("run.wav", &clicks(3.0, 16_000), 1, 16_000, 16);
    let (_, piped, _) = cli_common::measure(&path, &[]);
    assert!(!piped.contains('█') && !piped.contains("how often"), "{piped}");
    let Some(wide) = in_a_terminal(&folder, 120, &[]) else {
        println!("skipped: no `script` makes a terminal here");
        return;
    };
    assert!(wide.contains("period over time") && wide.contains("how often") && wide.contains('█'), "{wide}");
    let narrow = in_a_terminal(&folder, 50, &[]).expect("as before");
    let drawing =
        |text: &str| text.lines().filter(|line| line.contains(['█', '▁', '▄'])).map(|line| line.chars().count()).max();
    assert!(drawing(&narrow) <= Some(50) && drawing(&wide) > Some(50), "{narrow}");
    for set in [("TERM", "dumb"), ("LC_ALL", "C")] {
        let plain = in_a_terminal(&folder, 120, &[set]).expect("as before");
        assert!(drawing(&plain).is_none(), "{set:?}: {plain}");
    }
    // No colour is used, with or without NO_COLOR.
    let asked = in_a_terminal(&folder, 120, &[("NO_COLOR", "1")]).expect("as before");
    assert!(!asked.contains("\u{1b}[3") && !wide.contains("\u{1b}[3"));
}
