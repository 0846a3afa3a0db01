//! The watch on a real terminal, made by tmux: what it shows, its keys, and that the terminal is given back whatever ends it.

#![cfg(all(feature = "live-view", unix))]

mod cli_common;

use cli_common::{Folder, clicks};
use std::process::Command;
use std::time::{Duration, Instant};

/// A terminal of its own server.
struct Terminal {
    name: String,
}

impl Terminal {
    /// None where there is no tmux.
    fn new(name: &str, width: u16, height: u16) -> Option<Self> {
        let terminal = Self { name: format!("gaptone-{name}-{}", std::process::id()) };
        let (width, height) = (width.to_string(), height.to_string());
        let made = Command::new("tmux")
            .args(["-L", &terminal.name, "-f", "/dev/null", "new-session", "-d", "-x", &width, "-y", &height, "sh"])
            .env("LC_ALL", "C.UTF-8")
            .status();
        made.is_ok_and(|status| status.success()).then_some(terminal)
    }

    fn tmux(&self, arguments: &[&str]) -> String {
        let output = Command::new("tmux").args(["-L", &self.name, "-u"]).args(arguments).output().expect("tmux runs");
        String::from_utf8_lossy(&output.stdout).into_owned()
    }

    fn keys(&self, keys: &[&str]) {
        self.tmux(&[&["send-keys"], keys].concat());
    }

    /// Waits until the screen shows what is wanted, and gives it.
    fn wait(&self, what: &str, wanted: impl Fn(&str) -> bool) -> String {
        let began = Instant::now();
        loop {
            let screen = self.tmux(&["capture-pane", "-p"]);
            if wanted(&screen) {
                return screen;
            }
            assert!(began.elapsed() < Duration::from_secs(60), "{what} is not shown:\n{screen}");
            std::thread::sleep(Duration::from_millis(50));
        }
    }
}

impl Drop for Terminal {
    fn drop(&mut self) {
        self.tmux(&["kill-server"]);
    }
}

fn command(folder: &Folder, more: &str) -> String {
    let path = folder.wav("run.wav", &clicks(60.0, 16_000), 1, 16_000, 16);
    let program = assert_cmd::cargo::cargo_bin!("gaptone").to_string_lossy().into_owned();
    format!("PS1='ready> '; clear; '{program}' watch '{}' --pace --every 0.5 {more}", path.display())
}

#[test]
fn a_terminal_shows_the_rate_takes_keys_and_sizes_and_is_given_back() {
    let folder = Folder::new();
    let Some(terminal) = Terminal::new("keys", 100, 30) else {
        println!("skipped: no tmux here");
        return;
    };
    let log = folder.path("gap.jsonl");
    terminal.keys(&[&command(&folder, &format!("--log '{}'", log.display())), "Enter"]);
    let screen = terminal.wait("the rate", |screen| screen.contains("firing") && screen.contains("95 %:"));
    assert!(screen.contains("q quit") && screen.contains("level") && screen.contains('█'), "{screen}");
    for (width, height) in [(40, 12), (200, 60)] {
        terminal.tmux(&["resize-window", "-x", &width.to_string(), "-y", &height.to_string()]);
        let screen = terminal.wait("the foot at its new place", |screen| {
            screen.contains("firing") && screen.lines().nth(height - 1).is_some_and(|line| line.contains("q quit"))
        });
        assert!(screen.contains("firing") && screen.lines().all(|line| line.chars().count() <= width), "{screen}");
    }
    terminal.keys(&["h"]);
    terminal.wait("the hold", |screen| screen.contains("HELD"));
    terminal.keys(&["h"]);
    terminal.wait("its end", |screen| !screen.contains("HELD"));
    terminal.keys(&["m"]);
    terminal.wait("the question", |screen| screen.contains("note of the mark"));
    terminal.keys(&["-l", "gap opened"]);
    terminal.keys(&["Enter"]);
    terminal.wait("the mark", |screen| screen.contains("mark: gap opened"));
    terminal.keys(&["s"]);
    terminal.keys(&["-l", "9.2 kV"]);
    terminal.keys(&["Enter"]);
    terminal.wait("the supply", |screen| screen.contains("supply 9.2 kV"));
    let marks = std::fs::read_to_string(&log).expect("a log");
    assert!(marks.contains("\"note\":\"gap opened\"") && marks.contains("\"supply_v\":9200.0"), "{marks}");
    // Figures begin anew with it; the summary needs some seconds.
    terminal.wait("a longer clock", |screen| screen.contains("firing, holding") && screen.contains("0:07"));
    terminal.keys(&["q"]);
    // The screen before it is back, with the summary below the command.
    terminal.wait("the summary", |screen| screen.contains("one standard uncertainty") && screen.contains("ready>"));
}

#[test]
fn a_terminal_is_given_back_when_the_watch_is_told_to_end() {
    let folder = Folder::new();
    let Some(terminal) = Terminal::new("signal", 80, 24) else {
        println!("skipped: no tmux here");
        return;
    };
    terminal.keys(&[
        &command(&folder, "& echo $! > pid; fg")
            .replace("PS1=", &format!("cd '{}'; set -m; PS1=", folder.0.path().display())),
        "Enter",
    ]);
    terminal.wait("the screen", |screen| screen.contains("q quit"));
    let pid = std::fs::read_to_string(folder.path("pid")).expect("written by the shell");
    assert!(Command::new("kill").arg(pid.trim()).status().expect("kill runs").success());
    let screen = terminal.wait("the prompt", |screen| screen.contains("ready>") && !screen.contains("q quit"));
    assert!(!screen.contains("panicked"), "{screen}");
    // Characters typed are shown again, and the cursor too.
    terminal.keys(&["-l", "echo back"]);
    terminal.keys(&["Enter"]);
    terminal.wait("what is typed", |screen| screen.lines().any(|line| line.trim() == "back"));
    assert_eq!(terminal.tmux(&["display-message", "-p", "#{cursor_flag}"]).trim(), "1");
}
