//! Pages through the program: they hold together, give their figures back, and let nothing through.

mod cli_common;
mod page_help;
mod svg_help;

use cli_common::{Folder, clicks, json, stderr};
use gaptone::report::Figure;
use page_help::{BENCH, done, folder, run, text};
use std::path::Path;
use svg_help::assert_well_formed;

#[test]
fn a_page_holds_the_figures_and_gives_them_back() {
    let folder = folder();
    let common = ["measure", "run.wav", "--bench", "bench.toml"];
    let plain = done(&folder, &[&common[..], &["--json"]].concat());
    let with_page = done(&folder, &[&common[..], &["--json", "--report", "run.html"]].concat());
    assert_eq!(plain.stdout, with_page.stdout, "a page changes no figure and no output");
    let back = done(&folder, &["measure", "--from-report", "run.html", "--json"]);
    assert_eq!(back.stdout, plain.stdout);
    let words = done(&folder, &["measure", "--from-report", "run.html"]);
    assert_eq!(words.stdout, done(&folder, &common).stdout);
    // Drawn again from the page, a picture is the same.
    done(&folder, &[&common[..], &["--plot", "growth=one.svg"]].concat());
    done(&folder, &["measure", "--from-report", "run.html", "--plot", "growth=two.svg", "--report", "again.html"]);
    assert_eq!(text(&folder, "one.svg"), text(&folder, "two.svg"));
    assert_eq!(text(&folder, "run.html"), text(&folder, "again.html"));
    let page = text(&folder, "run.html");
    let measured = json(&plain);
    let rate = serde_json::from_value(measured["firing_rate_hz"].clone()).expect("a figure");
    let rate = Figure::plain(rate, "firings a second").value_and_u();
    assert!(page.contains(&format!("<h1>{rate}")) && page.contains("kill"), "answer and caution");
    for kind in gaptone::pictures::KINDS {
        assert!(page.contains(&format!("data-kind=\"{kind}\"")), "{kind} is missing");
    }
}

#[test]
fn a_page_needs_nothing_from_outside_and_stays_small() {
    let folder = Folder::new();
    folder.wav("long.wav", &clicks(10.0, 48_000), 1, 48_000, 16);
    folder.file("bench.toml", BENCH.as_bytes());
    done(&folder, &["measure", "long.wav", "--bench", "bench.toml", "--report", "long.html"]);
    let page = text(&folder, "long.html");
    assert!(page.len() < 1_000_000, "{} bytes", page.len());
    assert!(include_str!("../src/page/page.js").len() < 15_000, "written by hand, so kept small");
    // The name of the language of the drawings is the only address.
    let bare = page.replace("http://www.w3.org/2000/svg", "");
    assert!(
        !bare.contains("http:") && !bare.contains("https:") && !bare.contains("<link") && !bare.contains("@import")
    );
    assert!(!bare.contains(" src=") && !bare.replace("url(#", "").contains("url("));
    assert!(gaptone::page::extract(&page).is_ok());
    done(&folder, &["measure", "long.wav", "--report", "heard.html", "--with-audio"]);
    let heard = text(&folder, "heard.html");
    assert!(heard.contains("src=\"data:audio/wav;base64,UklGR") && heard.len() > 1_000_000);
}

#[test]
fn whatever_names_and_titles_hold_is_shown_as_text() {
    let folder = Folder::new();
    let name = "<img src=x onerror=alert(1)>'\".wav";
    folder.wav(name, &clicks(2.0, 16_000), 1, 16_000, 16);
    let title = r#"</script><script>alert(2)</script> \"quoted\" \u202Eright to left \u05D0\u05D1"#;
    folder.file(
        "b<b>.toml",
        format!("title = \"{title}\"\n{}", BENCH.replacen("title = \"invented\"\n", "", 1)).as_bytes(),
    );
    done(&folder, &["measure", name, "--bench", "b<b>.toml", "--report", "run.html", "--with-audio"]);
    done(
        &folder,
        &[
            "predict",
            "--bench",
            "b<b>.toml",
            "--supply",
            "8kV..12kV",
            "--report",
            "predict.html",
            "--plot",
            "predict.svg",
        ],
    );
    for place in ["run.html", "predict.html"] {
        let page = text(&folder, place);
        assert_eq!(page.matches("<script").count(), 2, "{place}: the object and ours");
        assert_eq!(page.matches("</script").count(), 2, "{place}");
        assert!(!page.contains("<img") && !page.contains("<b>"), "{place}");
        assert!(page.contains("&lt;/script&gt;"), "{place} shows it");
    }
    assert!(text(&folder, "run.html").contains("<bdi>&lt;img src=x onerror=alert(1)&gt;&#39;&quot;.wav"));
    let kept = gaptone::page::extract(&text(&folder, "run.html")).expect("our page");
    assert_eq!(kept.recordings[0].file, name);
    assert_well_formed(&text(&folder, "predict.svg"));
}

#[test]
fn a_place_that_cannot_be_written_is_told_before_any_work() {
    let folder = folder();
    // None of the inputs is there: that the place is told shows that nothing was read before.
    for arguments in [
        &["measure", "gone.wav", "--report", "no/run.html"][..],
        &["measure", "gone.wav", "--plot", "no/run.html"],
        &["calibrate", "gone.wav@1kV", "--report", "no/run.html"],
        &["trend", "gone.jsonl", "--report", "no/run.html"],
        &["predict", "--bench", "gone.toml", "--report", "no/run.html"],
    ] {
        let output = run(&folder, arguments);
        assert_eq!(output.status.code(), Some(1), "{arguments:?}");
        assert!(
            stderr(&output).contains("no/run.html: cannot be written: there is no such folder"),
            "{}",
            stderr(&output)
        );
    }
    let output = run(&folder, &["measure", "run.wav", "--plot", "pie=x.svg"]);
    assert_eq!(output.status.code(), Some(2));
    assert!(stderr(&output).contains("pie is no kind of picture; write one of click, excerpts"), "{}", stderr(&output));
    let output = run(&folder, &["measure", "-", "--report", "x.html", "--with-audio"]);
    assert_eq!(output.status.code(), Some(2), "{}", stderr(&output));
    let left: Vec<_> =
        std::fs::read_dir(folder.0.path()).expect("a folder").map(|e| e.expect("an entry").file_name()).collect();
    assert_eq!(left.len(), 2, "nothing is left behind: {left:?}");
}

#[test]
fn what_is_no_page_of_ours_is_refused() {
    let folder = folder();
    folder.file("other.html", b"<!DOCTYPE html><p>hello");
    done(&folder, &["measure", "run.wav", "--report", "run.html"]);
    let whole = text(&folder, "run.html");
    let cut = whole.replace("\"gaptone.evidence/1\"", "7");
    folder.file("cut.html", cut.as_bytes());
    done(&folder, &["predict", "--bench", "bench.toml", "--report", "predict.html"]);
    for (name, words) in [
        ("other.html", "is no report of gaptone"),
        ("cut.html", "its report cannot be read"),
        ("predict.html", "holds a gaptone.prediction/1"),
        ("run.wav", "is no text"),
        ("gone.html", "no such file"),
    ] {
        let output = run(&folder, &["measure", "--from-report", name]);
        assert_eq!(output.status.code(), Some(1), "{name}: {}", stderr(&output));
        assert!(stderr(&output).contains(&format!("{name}: {words}")), "{}", stderr(&output));
    }
}

#[test]
fn a_recording_without_a_gap_and_one_that_is_not_there_have_their_place() {
    let folder = folder();
    folder.wav("silent.wav", &vec![0.0; 16_000], 1, 16_000, 16);
    let output = run(&folder, &["measure", "run.wav", "silent.wav", "gone.wav", "--report", "all.html"]);
    assert_eq!(output.status.code(), Some(1), "{}", stderr(&output));
    let page = text(&folder, "all.html");
    assert!(
        page.contains("1 of 3 recordings hold a gap")
            && page.contains("No gap is heard")
            && page.contains("no such file")
    );
    let back = run(&folder, &["measure", "--from-report", "all.html"]);
    assert_eq!((back.status.code(), &back.stdout[..20]), (Some(1), &output.stdout[..20]));
    let alone = run(&folder, &["measure", "silent.wav", "--report", "silent.html", "--plot", "recording=silent.svg"]);
    assert_eq!(alone.status.code(), Some(3), "{}", stderr(&alone));
    assert!(text(&folder, "silent.html").contains("No figure:"));
    let nothing = run(&folder, &["measure", "silent.wav", "--plot", "silent-periods.svg"]);
    assert_eq!(nothing.status.code(), Some(3));
    assert!(stderr(&nothing).contains("there is nothing to draw of the periods"), "{}", stderr(&nothing));
    assert!(!Path::new(&folder.path("silent-periods.svg")).exists());
}
