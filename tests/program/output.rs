//! Where answers go: formats, files, pipes, warnings, colours.

use std::fs;
use std::io::{BufRead, BufReader, Read};
use std::path::Path;
use std::process::{Command, Stdio};

use tempfile::TempDir;

use crate::run::{assert_says, program, twincone, twincone_in, words};

const ASKED: &str = "cones -m bbo -p 405nm --theta 42deg";

/// A run that warns: the data set is marked as unreliable.
const WARNS: &str = "cones -m rtp:carvajal-2007 -p 532nm --theta 90deg --phi 60deg";

fn names(folder: &Path) -> Vec<String> {
    let entries = fs::read_dir(folder).expect("a folder");
    entries.map(|e| e.expect("an entry").file_name().into_string().expect("UTF-8")).collect()
}

#[test]
fn the_extension_picks_the_format() {
    for (name, option) in [("a.csv", "csv"), ("a.json", "json"), ("a.txt", "text"), ("A.CSV", "csv")] {
        let folder = TempDir::new().expect("a folder");
        let said = twincone_in(folder.path(), &format!("{ASKED} -o {name}")).answer();
        assert_eq!(said, "", "results go to the file alone");
        let written = fs::read_to_string(folder.path().join(name)).expect("the file");
        assert_eq!(written, twincone(&format!("{ASKED} --format {option}")).answer());
        assert_eq!(names(folder.path()), [name], "nothing else is left in the folder");
    }
}

#[test]
fn format_and_extension_must_agree() {
    let refusal = twincone(&format!("{ASKED} -f text -o rows.csv")).refusal(2);
    assert_says(&refusal, &["--format text", "rows.csv", "leave --format out, or change the extension"]);
    let refusal = twincone(&format!("{ASKED} -o rows.dat")).refusal(2);
    assert_says(&refusal, &["rows.dat", "use .txt, .csv or .json, or pass --format"]);
    let folder = TempDir::new().expect("a folder");
    twincone_in(folder.path(), &format!("{ASKED} -o rows.dat -f csv")).answer();
    assert_eq!(names(folder.path()), ["rows.dat"]);
}

#[test]
fn output_that_cannot_be_written_ends_with_status_four() {
    let folder = TempDir::new().expect("a folder");
    fs::create_dir(folder.path().join("taken.csv")).expect("a folder in the way");
    for path in ["nowhere/rows.csv", "taken.csv"] {
        let refusal = twincone_in(folder.path(), &format!("{ASKED} -o {path}")).refusal(4);
        assert_says(&refusal, &["cannot write", path]);
        assert_eq!(refusal.trim_end().lines().count(), 1, "{refusal}");
    }
    assert_eq!(names(folder.path()), ["taken.csv"]);
}

#[test]
fn a_run_that_fails_leaves_the_file_as_it_was() {
    let folder = TempDir::new().expect("a folder");
    let file = folder.path().join("rows.csv");
    fs::write(&file, "what was there").expect("a file");
    for (line, status) in [
        ("cones -m bbo -p 150nm --theta 42deg -o rows.csv", 3),
        ("cones -m bbo -p 405 --theta 42deg -o rows.csv", 2),
        ("cones -m bbo -p 405nm --cut crossing=59deg -o rows.csv", 1),
        ("cones -j nowhere.toml -o rows.csv", 4),
    ] {
        twincone_in(folder.path(), line).refusal(status);
        assert_eq!(fs::read_to_string(&file).expect("the file"), "what was there", "{line}");
        assert_eq!(names(folder.path()), ["rows.csv"], "{line}");
    }
    twincone_in(folder.path(), &format!("{ASKED} -o rows.csv")).answer();
    assert!(fs::read_to_string(&file).expect("the file").starts_with("crystal,process,"));
}

/// One line is read, then the reader goes away while the program has more to say than a pipe holds.
#[test]
fn a_closed_pipe_ends_quietly() {
    for line in [
        "index -m bbo --from 400nm --to 800nm --points 20000 -f csv",
        "index -m bbo --from 400nm --to 800nm --points 20000 -f text",
        "index -m bbo --from 400nm --to 800nm --points 20000 -f json",
    ] {
        let mut child = Command::new(env!("CARGO_BIN_EXE_twincone"))
            .args(words(line))
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .expect("the program starts");
        let mut first = String::new();
        BufReader::with_capacity(64, child.stdout.take().expect("a pipe"))
            .read_line(&mut first)
            .expect("a line");
        let mut said = String::new();
        child.stderr.take().expect("a pipe").read_to_string(&mut said).expect("UTF-8");
        let ended = child.wait().expect("the program ends");
        assert_eq!((ended.code(), said.as_str()), (Some(0), ""), "{line}");
        assert!(!first.is_empty());
    }
}

#[test]
fn the_same_input_gives_the_same_bytes() {
    for line in [
        "cones -m bbo -p 405nm --cut crossing=3deg",
        "cut --all-materials -p 405nm --type I",
        "tilt -m bbo -p 405nm --theta 42deg --crossing 3deg",
        "twin -m ktp -p 532nm --theta 90deg --phi 24deg --direction 0deg,1deg",
        "index -m bbo --all-datasets --wavelength 600nm",
        "materials",
    ] {
        for format in ["text", "csv", "json"] {
            let asked = format!("{line} -f {format}");
            let once = twincone(&asked).stdout;
            assert_eq!(twincone(&asked).stdout, once, "{asked}");
            assert_eq!(twincone(&format!("{asked} --threads 1")).stdout, once, "{asked}");
        }
    }
}

#[test]
fn warnings_go_to_standard_error_and_can_be_silenced() {
    let run = twincone(WARNS);
    assert_says(&run.stderr, &["warning: rtp:carvajal-2007: not reliable"]);
    assert!(!run.stdout.contains("warning:"));
    let quiet = twincone(&format!("{WARNS} --quiet")).answer();
    assert_eq!(quiet, run.stdout);
    let json: serde_json::Value =
        serde_json::from_str(&twincone(&format!("{WARNS} -f json")).stdout).expect("JSON");
    assert!(json["warnings"][0].as_str().is_some_and(|w| w.contains("not reliable")));
}

#[test]
fn colour_is_for_terminals_and_for_who_asks() {
    let plain = twincone(&format!("{ASKED} --tilt 1")).refusal(2);
    assert!(!plain.contains('\u{1b}'));
    let coloured = twincone(&format!("{ASKED} --tilt 1 --color always"));
    assert!(coloured.stderr.starts_with("\u{1b}["), "{coloured:?}");
    let never = twincone(&format!("{ASKED} --tilt 1 --color never")).refusal(2);
    assert_eq!(never, plain);
    let mut asked = program(&words(&format!("{ASKED} --tilt 1")));
    let output = asked.env("NO_COLOR", "1").output().expect("the program starts");
    assert_eq!(String::from_utf8_lossy(&output.stderr), plain);
}

#[test]
fn text_is_the_default_and_has_no_line_wider_than_a_wide_terminal() {
    let text = twincone(ASKED).answer();
    assert_eq!(text, twincone(&format!("{ASKED} -f text")).answer());
    assert!(text.lines().all(|line| line.chars().count() <= 130), "{text}");
    assert!(text.lines().all(|line| line == line.trim_end()), "{text}");
}
