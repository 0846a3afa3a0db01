//! What the program tells about itself: abilities, completions, manual pages, help.

mod cli_common;

use cli_common::{Folder, gaptone, json};

const COMMANDS: [&str; 9] =
    ["measure", "calibrate", "predict", "render", "trend", "watch", "abilities", "completions", "manual"];

fn stdout(arguments: &[&str]) -> String {
    let output = gaptone().args(arguments).output().expect("the program runs");
    assert!(output.status.success(), "{arguments:?}: {}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8(output.stdout).expect("text")
}

#[test]
fn abilities_are_those_of_the_decoders_and_of_the_features() {
    let told = json(&gaptone().args(["abilities", "--json"]).output().expect("it runs"));
    let list = |name: &str| -> Vec<String> { serde_json::from_value(told[name].clone()).expect("a list") };
    for kind in ["FLAC", "Ogg Vorbis", "MP3", "M4A, AAC", "M4A and CAF, ALAC", "WAV, AIFF and CAF, 24 bit"] {
        assert!(list("reads").iter().any(|name| name == kind), "{kind}: {told}");
    }
    assert_eq!(list("does_not_read"), ["Opus"]);
    assert_eq!(told["sound_outputs"].is_null(), !cfg!(feature = "sound-card"));
    assert!(stdout(&["abilities"]).contains("Ogg Vorbis"));
}

#[test]
fn completions_of_every_shell_name_every_command() {
    for shell in ["bash", "zsh", "fish", "elvish", "powershell"] {
        let script = stdout(&["completions", shell]);
        for command in COMMANDS {
            assert!(script.contains(command), "{command} in {shell}");
        }
        // Fish writes it without dashes.
        assert!(script.contains("budget"), "{shell}");
    }
}

// Whether the shell takes it is asked of the shell itself, where there is one.
#[test]
fn bash_completes_a_command_and_an_option() {
    let folder = Folder::new();
    let script = folder.file("gaptone.bash", stdout(&["completions", "bash"]).as_bytes());
    let ask = |words: &str, at: usize| {
        let line = format!(
            "source {}; COMP_WORDS=({words}); COMP_CWORD={at}; _gaptone gaptone \"${{COMP_WORDS[{at}]}}\" x; echo ${{COMPREPLY[@]}}",
            script.display()
        );
        std::process::Command::new("bash").args(["-c", &line]).output().ok().filter(|output| output.status.success())
    };
    let Some(output) = ask("gaptone cal", 1) else { return };
    assert_eq!(String::from_utf8_lossy(&output.stdout).trim(), "calibrate");
    let output = ask("gaptone measure --bud", 2).expect("bash");
    assert_eq!(String::from_utf8_lossy(&output.stdout).trim(), "--budget");
}

#[test]
fn manual_pages_are_one_for_the_program_and_one_for_each_command() {
    let folder = Folder::new();
    let into = folder.path("share/man1");
    stdout(&["manual", into.to_str().expect("UTF-8")]);
    let page = |name: String| std::fs::read_to_string(into.join(name)).expect("a page");
    let whole = page("gaptone.1".to_owned());
    assert!(whole.starts_with(".ie") && whole.contains(".TH gaptone 1"), "{whole}");
    assert!(whole.contains("Exit status"));
    for command in COMMANDS {
        let one = page(format!("gaptone-{command}.1"));
        assert!(
            one.contains(&format!(".TH gaptone\\-{command} 1")) || one.contains(&format!(".TH gaptone-{command} 1"))
        );
        assert!(one.contains(&format!("gaptone {command}")), "{one}");
    }
    assert!(page("gaptone-measure.1".to_owned()).contains("budget"));
    assert_eq!(std::fs::read_dir(&into).expect("read").count(), 1 + COMMANDS.len());
}

#[test]
fn a_folder_for_the_manual_that_cannot_be_made_is_named() {
    let folder = Folder::new();
    let file = folder.file("taken", b"x");
    let output = gaptone().arg("manual").arg(file.join("man")).output().expect("it runs");
    assert_eq!(output.status.code(), Some(1));
    assert_eq!(String::from_utf8_lossy(&output.stderr).lines().count(), 1);
}

#[test]
fn the_help_of_every_command_has_an_example_and_the_exit_statuses() {
    for command in COMMANDS {
        let help = stdout(&[command, "--help"]);
        assert!(help.contains(&format!("gaptone {command} ")), "{command}: {help}");
        assert!(help.contains("Exit status"), "{command}: {help}");
    }
}
