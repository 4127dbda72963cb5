//! One run of the program, and what must hold for every run whatever was asked.

use std::path::Path;

use assert_cmd::Command;

/// How a run ended and what it said.
#[derive(Debug)]
pub struct Run {
    pub status: i32,
    pub stdout: String,
    pub stderr: String,
}

/// Runs a command line; double quotes hold words together, as in a shell.
#[track_caller]
pub fn twincone(line: &str) -> Run {
    finish(program(&words(line)), line)
}

/// As [`twincone`], in a folder.
#[track_caller]
pub fn twincone_in(folder: &Path, line: &str) -> Run {
    let mut command = program(&words(line));
    command.current_dir(folder);
    finish(command, line)
}

/// As [`twincone`], with a text on standard input.
#[track_caller]
pub fn twincone_with(input: &str, line: &str) -> Run {
    let mut command = program(&words(line));
    command.write_stdin(input);
    finish(command, line)
}

/// The program with words as a shell hands them over, away from the caller's terminal and environment.
pub fn program(words: &[String]) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_twincone"));
    command.args(words).env_clear();
    command
}

/// The words of a command line.
pub fn words(line: &str) -> Vec<String> {
    let mut words = Vec::new();
    for (n, part) in line.split('"').enumerate() {
        if n % 2 == 1 {
            words.push(part.to_string());
        } else {
            words.extend(part.split_whitespace().map(String::from));
        }
    }
    words
}

#[track_caller]
fn finish(mut command: Command, line: &str) -> Run {
    let output = command.output().expect("the program starts");
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("the program writes UTF-8");
    let run = Run {
        status: output.status.code().expect("the program ends by itself"),
        stdout: text(output.stdout),
        stderr: text(output.stderr),
    };
    run.check(line);
    run
}

impl Run {
    /// No panic, a known exit status, and no NaN, infinity or negative zero among the results.
    #[track_caller]
    fn check(&self, line: &str) {
        assert!(!self.stderr.contains("panicked at"), "twincone {line}\n{}", self.stderr);
        assert!((0..=4).contains(&self.status), "twincone {line}\nexit status {}", self.status);
        let separators = |c: char| c.is_whitespace() || ",;:=\"()[]{}".contains(c);
        for token in self.stdout.split(separators) {
            let Ok(number) = token.parse::<f64>() else { continue };
            assert!(number.is_finite(), "twincone {line}\n{token} in\n{}", self.stdout);
            assert!(number != 0.0 || !token.starts_with('-'), "twincone {line}\n{token} in\n{}", self.stdout);
        }
    }

    /// The results of a run that went well and had nothing to warn of.
    #[track_caller]
    pub fn answer(self) -> String {
        assert_eq!((self.status, self.stderr.as_str()), (0, ""), "{self:#?}");
        self.stdout
    }

    /// What a single question without a solution is answered with: on standard output, for scripts and people alike.
    #[track_caller]
    pub fn no_solution(self) -> String {
        assert_eq!((self.status, self.stderr.as_str()), (1, ""), "{self:#?}");
        self.stdout
    }

    /// What a run that failed with this status said; it wrote no results.
    #[track_caller]
    pub fn refusal(self, status: i32) -> String {
        assert_eq!((self.status, self.stdout.as_str()), (status, ""), "{self:#?}");
        assert!(self.stderr.starts_with("error: "), "{self:#?}");
        self.stderr
    }
}

/// The text holds each of these phrases, however its lines are broken.
#[track_caller]
pub fn assert_says(text: &str, phrases: &[&str]) {
    let unbroken = text.split_whitespace().collect::<Vec<_>>().join(" ");
    for phrase in phrases {
        assert!(text.contains(phrase) || unbroken.contains(phrase), "`{phrase}` is missing in\n{text}");
    }
}

/// Text ends with what the other data sets give and with the conventions.
#[track_caller]
pub fn assert_ends_with_conventions(text: &str, own: &str, others: &[&str]) {
    let at = text.find("Other data sets").unwrap_or_else(|| panic!("no other data sets in\n{text}"));
    let end = &text[at..];
    assert_says(end, others);
    assert_says(end, &[own, "with this one", "theta is the angle between", "positive tilt increases"]);
}
