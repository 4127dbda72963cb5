//! Where answers go: standard output, or a file that is written whole or not at all.

use std::io::{self, IsTerminal, Write};
use std::path::{Path, PathBuf};
use std::process::ExitCode;

use clap::{Args, ValueEnum};
use twincone::report::{Answer, csv, json};

use super::failure::Failure;

/// Options of every command.
#[derive(Debug, Args)]
#[command(next_help_heading = "Output")]
pub struct OutputArgs {
    /// text for people; csv and json for scripts [default: by the extension of --output, else text]
    #[arg(short, long, global = true, value_enum)]
    pub format: Option<Format>,
    /// Write to this file, whole or not at all; - for standard output
    #[arg(short, long, global = true, value_name = "FILE")]
    pub output: Option<PathBuf>,
    /// No warnings on standard error
    #[arg(short, long, global = true)]
    pub quiet: bool,
    /// Colour of messages
    #[arg(long, global = true, value_enum, default_value = "auto")]
    pub color: Colour,
    /// Threads for sweeps [default: the cores this process may use]
    #[arg(long, global = true, value_name = "N", value_parser = clap::value_parser!(u16).range(1..))]
    pub threads: Option<u16>,
    /// Add the material files (*.toml) of this folder
    #[arg(long, global = true, value_name = "DIR")]
    pub materials: Option<PathBuf>,
}

/// Forms of an answer.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub enum Format {
    /// For people
    Text,
    /// One table for scripts
    Csv,
    /// Everything for scripts
    Json,
    /// Pixels (`picture`)
    Png,
    /// A drawing (`picture`)
    Svg,
    /// A page (`sheet`)
    Html,
}

/// When to colour.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub enum Colour {
    /// On a terminal, unless NO_COLOR is set
    Auto,
    /// Always
    Always,
    /// Never
    Never,
}

/// What a command hands on.
#[derive(Debug)]
pub struct Outcome {
    /// `None` where the command has written its answer itself.
    answer: Option<Vec<u8>>,
    warnings: Vec<String>,
    solved: bool,
}

impl Outcome {
    /// Of a command that has written its answer itself.
    pub fn written() -> Self {
        Self { answer: None, warnings: Vec::new(), solved: true }
    }
}

impl OutputArgs {
    /// A warning on standard error.
    pub fn warn(&self, message: &str) {
        self.tell("warning", "33", message);
    }

    /// A file in the form that was asked for, with warnings.
    pub fn file(bytes: Vec<u8>, warnings: Vec<String>) -> Outcome {
        Outcome { answer: Some(bytes), warnings, solved: true }
    }

    /// Does work on as many threads as asked for.
    ///
    /// # Errors
    /// Threads that cannot be started.
    pub fn on_threads<T: Send>(&self, work: impl FnOnce() -> T + Send) -> Result<T, Failure> {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(self.threads.map_or(0, usize::from)).build();
        let failed = |e| Failure { status: 4, message: format!("cannot start threads: {e}") };
        Ok(pool.map_err(failed)?.install(work))
    }

    /// A text that has no other form.
    ///
    /// # Errors
    /// csv or json asked for.
    pub fn plain(&self, text: String) -> Result<Outcome, Failure> {
        match self.format {
            Some(form) if form != Format::Text => {
                Err(Failure::usage("this answer is a text; leave --format out"))
            }
            _ => Ok(Outcome { answer: Some(text.into_bytes()), warnings: Vec::new(), solved: true }),
        }
    }

    /// The form asked for by --format or by the extension of --output.
    ///
    /// # Errors
    /// Text asked into a .csv file and the like, or an extension that says nothing.
    pub fn form(&self) -> Result<Format, Failure> {
        self.form_of(".txt, .csv or .json")
    }

    /// As [`Self::form`], for a command that writes files with these extensions.
    ///
    /// # Errors
    /// As [`Self::form`].
    pub fn form_of(&self, extensions: &str) -> Result<Format, Failure> {
        let Some(path) = self.output.as_ref().filter(|path| path.as_os_str() != "-") else {
            return Ok(self.format.unwrap_or(Format::Text));
        };
        let extension = path.extension().and_then(|e| e.to_str()).map(str::to_ascii_lowercase);
        let implied = match extension.as_deref() {
            Some("csv") => Some(Format::Csv),
            Some("json") => Some(Format::Json),
            Some("png") => Some(Format::Png),
            Some("svg") => Some(Format::Svg),
            Some("html" | "htm") => Some(Format::Html),
            Some("txt" | "text" | "md") => Some(Format::Text),
            _ => None,
        };
        match (self.format, implied) {
            (Some(asked), Some(implied)) if asked != implied => Err(Failure::usage(format!(
                "--format {} and the file name {} disagree; leave --format out, or change the extension",
                word(asked),
                path.display()
            ))),
            (Some(form), _) | (None, Some(form)) => Ok(form),
            (None, None) => Err(Failure::usage(format!(
                "{}: the extension does not say which format; use {extensions}, or pass --format",
                path.display()
            ))),
        }
    }

    /// An answer in the form asked for; CSV takes the table of this name, else the first.
    ///
    /// # Errors
    /// As [`Self::form`].
    pub fn outcome(&self, answer: &Answer, table: Option<&str>) -> Result<Outcome, Failure> {
        let text = match self.form()? {
            Format::Text => answer.to_text(),
            Format::Json => json(answer),
            Format::Png | Format::Svg | Format::Html => {
                return Err(Failure::usage(
                    "this answer has the formats text, csv and json; `picture` draws, `sheet` writes pages",
                ));
            }
            Format::Csv => {
                let chosen = answer.tables.iter().find(|t| table.is_none_or(|name| t.name == name));
                let chosen = chosen
                    .ok_or_else(|| Failure::usage("this answer has no table; use --format text or json"))?;
                csv(chosen)
            }
        };
        let warnings = answer.conventions.warnings.clone();
        Ok(Outcome { answer: Some(text.into_bytes()), warnings, solved: answer.solved })
    }

    fn colours_stderr(&self) -> bool {
        match self.color {
            Colour::Always => true,
            Colour::Never => false,
            Colour::Auto => {
                io::stderr().is_terminal() && std::env::var_os("NO_COLOR").is_none_or(|v| v.is_empty())
            }
        }
    }

    /// A warning or an error on standard error.
    fn tell(&self, kind: &str, code: &str, message: &str) {
        let label =
            if self.colours_stderr() { format!("\x1b[1;{code}m{kind}:\x1b[0m") } else { format!("{kind}:") };
        to_stderr(&format!("{label} {message}\n"));
    }
}

fn word(format: Format) -> &'static str {
    match format {
        Format::Text => "text",
        Format::Csv => "csv",
        Format::Json => "json",
        Format::Png => "png",
        Format::Svg => "svg",
        Format::Html => "html",
    }
}

/// Writes to standard error; nobody can be told if that fails.
pub fn to_stderr(text: &str) {
    let _ = io::stderr().lock().write_all(text.as_bytes());
}

/// Writes a command's outcome and says how it went.
pub fn finish(outcome: Result<Outcome, Failure>, args: &OutputArgs) -> ExitCode {
    let written = outcome.and_then(|outcome| {
        if !args.quiet {
            outcome.warnings.iter().for_each(|w| args.warn(w));
        }
        match (&outcome.answer, &args.output) {
            (None, _) => {}
            (Some(bytes), Some(path)) if path.as_os_str() != "-" => write_whole(path, bytes)
                .map_err(|e| Failure::file("write", &path.display().to_string(), &e))?,
            (Some(bytes), _) => {
                to_stdout(bytes).map_err(|e| Failure::file("write to", "standard output", &e))?;
            }
        }
        Ok(outcome.solved)
    });
    match written {
        Ok(true) => ExitCode::SUCCESS,
        Ok(false) => ExitCode::from(1),
        Err(failure) => {
            args.tell("error", "31", &failure.message);
            ExitCode::from(failure.status)
        }
    }
}

/// A closed pipe ends quietly.
fn to_stdout(bytes: &[u8]) -> io::Result<()> {
    let mut out = io::stdout().lock();
    match out.write_all(bytes).and_then(|()| out.flush()) {
        Err(e) if e.kind() == io::ErrorKind::BrokenPipe => Ok(()),
        other => other,
    }
}

/// Writes beside the file and renames, so that the file is whole or untouched.
pub fn write_whole(path: &Path, bytes: &[u8]) -> io::Result<()> {
    let mut beside = path.as_os_str().to_owned();
    beside.push(format!(".{}.unfinished", std::process::id()));
    let beside = PathBuf::from(beside);
    let written = std::fs::File::create_new(&beside).and_then(|mut file| {
        file.write_all(bytes)?;
        file.sync_all()?;
        std::fs::rename(&beside, path)
    });
    if written.is_err() {
        let _ = std::fs::remove_file(&beside);
    }
    written
}
