//! `completions`, `man` and `--help`: made from one declaration, so they must agree.

use std::collections::BTreeSet;

use crate::run::{assert_says, twincone};

const COMMANDS: [&str; 9] =
    ["materials", "index", "cut", "cones", "tilt", "twin", "job", "completions", "man"];

/// Every `--option` in a help text.
fn long_options(help: &str) -> BTreeSet<String> {
    let option = |word: &str| {
        let name = word.strip_prefix("--")?;
        let end = name.find(|c: char| !c.is_ascii_lowercase() && c != '-').unwrap_or(name.len());
        (end > 0).then(|| name[..end].to_string())
    };
    help.lines().filter_map(|line| line.split_whitespace().find_map(option)).collect()
}

#[test]
fn every_option_of_cones_is_completed_in_every_shell() {
    let options = long_options(&twincone("cones --help").answer());
    for expected in ["material", "theta", "cross-tilt", "rows", "write-job", "format", "output", "threads"] {
        assert!(options.contains(expected), "--{expected} is not in {options:?}");
    }
    for shell in ["bash", "zsh", "fish"] {
        let script = twincone(&format!("completions {shell}")).answer();
        for option in &options {
            let spellings = [format!("--{option}"), format!("-l {option}")];
            assert!(spellings.iter().any(|s| script.contains(s)), "--{option} is missing for {shell}");
        }
        assert_says(&script, &COMMANDS);
        assert_says(&script, &["twincone"]);
    }
}

#[test]
fn an_unknown_shell_is_told_with_the_known_ones() {
    assert_says(&twincone("completions tcsh").refusal(2), &["'tcsh'", "bash", "fish", "zsh"]);
}

#[test]
fn the_man_page_has_every_command_and_option() {
    let page = twincone("man").answer();
    assert_says(&page, &[".TH twincone 1", ".SH NAME", ".SH SYNOPSIS", ".SH DESCRIPTION", "Exit status"]);
    for command in COMMANDS {
        assert_says(&page, &[&format!("TWINCONE {}", command.to_uppercase())]);
    }
    for option in long_options(&twincone("cones --help").answer()) {
        assert_says(&page, &[&format!("\\-\\-{}", option.replace('-', "\\-"))]);
    }
}

#[test]
fn help_names_every_command_and_every_exit_status() {
    let help = twincone("--help").answer();
    assert_says(&help, &COMMANDS);
    assert_says(
        &help,
        &[
            "Exit status: 0 answered; 1 there is no solution; 2 the command line",
            "4 reading",
            "Quantities carry a unit",
        ],
    );
    for command in COMMANDS {
        let help = twincone(&format!("{command} --help")).answer();
        assert_says(&help, &[&format!("Usage: twincone {command}")]);
    }
    assert_eq!(twincone("--version").answer(), format!("twincone {}\n", env!("CARGO_PKG_VERSION")));
}

#[test]
fn every_option_of_the_experiment_is_the_same_everywhere() {
    let of = |command: &str| long_options(&twincone(&format!("{command} --help")).answer());
    let experiment = of("job");
    for command in ["index", "cut", "cones", "tilt", "twin"] {
        assert!(experiment.is_subset(&of(command)), "{command} lacks some of {experiment:?}");
    }
}

#[test]
fn a_bare_call_shows_the_commands() {
    let run = twincone("");
    assert_eq!((run.status, run.stdout.as_str()), (2, ""));
    assert_says(&run.stderr, &COMMANDS);
}
