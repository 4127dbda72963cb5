//! The command line, a file for each command: options in, a question to the library, its answer out.

mod compensate;
mod completions;
mod cones;
mod cut;
mod failure;
mod fit;
mod index;
mod job;
mod join;
mod man;
mod materials;
mod options;
mod output;
mod picture;
mod progress;
mod run;
mod schema;
mod sheet;
mod state;
mod sweep_file;
mod tilt;
mod tolerance;
mod twin;

use std::process::ExitCode;

use clap::error::{ContextKind, ErrorKind};
use clap::{CommandFactory, Parser, Subcommand};

pub use failure::Failure;
pub use output::{OutputArgs, finish};

/// Which crystal to order, how to tilt it and where the photon pairs go.
#[derive(Debug, Parser)]
#[command(name = "twincone", version, about, long_about = LONG, after_help = AFTER, disable_help_subcommand = true)]
pub struct Typed {
    #[command(subcommand)]
    command: Command,
    /// Where the answer goes.
    #[command(flatten)]
    pub output: OutputArgs,
}

const LONG: &str = "Which crystal to order, how to tilt it and where the photon pairs go: spontaneous parametric \
down-conversion in birefringent crystals, from wave optics, with refraction at tilted faces treated exactly.";

const AFTER: &str = "Quantities carry a unit: 405nm, 0.5deg, \"2 mm\", 22degC. Angles are outside the crystal unless called inside.
Exit status: 0 answered; 1 there is no solution; 2 the command line or job is wrong; 3 the data do not reach that far; 4 reading or writing failed; 130 stopped by Ctrl-C.
Violet and ultraviolet lasers harm eyes and skin: local rules and the laser safety officer decide how they are used.";

#[derive(Debug, Subcommand)]
enum Command {
    /// List and show crystals with the sources of their numbers; check your own
    Materials(materials::Args),
    /// Refractive and group index, dispersion and walk-off of each wave
    Index(Box<index::Args>),
    /// Solve for the cut (or period, temperature, pump) that gives a wanted emission
    Cut(Box<cut::Args>),
    /// Trace the rings and find their crossings for the crystals as they stand
    Cones(Box<cones::Args>),
    /// Find the settings of the mount that reach a target
    Tilt(Box<tilt::Args>),
    /// Say what errors of cut, wavelength and mounting cost, and what turning repairs
    Tolerance(Box<tolerance::Args>),
    /// Read the real cut, tilt zero, roll and pump out of measured rings and crossings
    Fit(Box<fit::Args>),
    /// Follow a photon's partner
    Twin(Box<twin::Args>),
    /// Write one report at every point of a grid of settings, as CSV
    Run(Box<run::Args>),
    /// Join the parts of a sweep that was shared out
    Join(join::Args),
    /// The entangled state that filters, irises and compensators leave, and what spoils it
    State(Box<state::Args>),
    /// Design the plates that make the two histories alike
    Compensate(Box<compensate::Args>),
    /// Draw what a camera sees, the crystal in its mount, or curves
    Picture(Box<picture::Args>),
    /// Write the order sheet for the maker or the bench sheet for the table
    Sheet(Box<sheet::Args>),
    /// Write out a commented job file, or check one
    Job(Box<job::Args>),
    /// The JSON Schema of the job file, for editors
    Schema,
    /// Shell completions
    Completions(completions::Args),
    /// The man page
    Man,
}

/// Reads the command line.
///
/// # Errors
/// The exit status, after help, version or a message was shown.
pub fn parse() -> Result<Typed, ExitCode> {
    Typed::try_parse().map_err(|error| {
        let status = if error.use_stderr() { 2 } else { 0 };
        // a closed pipe is no reason to complain
        let _ = error.print();
        if let Some(hint) = hint(&error) {
            output::to_stderr(&hint);
        }
        ExitCode::from(status)
    })
}

/// What a person probably meant, where clap cannot know.
fn hint(error: &clap::Error) -> Option<String> {
    let stray = matches!(error.kind(), ErrorKind::UnknownArgument | ErrorKind::InvalidSubcommand);
    let asked_for_process = std::env::args().any(|a| a.starts_with("--process"));
    let invalid = error.get(ContextKind::InvalidArg).map(ToString::to_string);
    let arrow = invalid.is_some_and(|a| matches!(a.trim_matches('\''), "-" | "+" | "->" | "e" | "o"));
    (stray && asked_for_process && arrow).then(|| {
        "tip: the shell took the `>` of the process; quote it, --process \"e -> o + e\", or write --process e:o+e\n".into()
    })
}

/// Runs a command.
///
/// # Errors
/// What went wrong, with the exit status it calls for.
pub fn run(typed: &Typed) -> Result<output::Outcome, Failure> {
    let out = &typed.output;
    match &typed.command {
        Command::Materials(args) => materials::run(args, out),
        Command::Index(args) => index::run(args, out),
        Command::Cut(args) => cut::run(args, out),
        Command::Cones(args) => cones::run(args, out),
        Command::Tilt(args) => tilt::run(args, out),
        Command::Tolerance(args) => tolerance::run(args, out),
        Command::Fit(args) => fit::run(args, out),
        Command::Twin(args) => twin::run(args, out),
        Command::Run(args) => run::run(args, out),
        Command::Join(args) => join::run(args, out),
        Command::State(args) => state::run(args, out),
        Command::Compensate(args) => compensate::run(args, out),
        Command::Picture(args) => picture::run(args, out),
        Command::Sheet(args) => sheet::run(args, out),
        Command::Job(args) => job::run(args, out),
        Command::Schema => schema::run(out),
        Command::Completions(args) => completions::run(args, Typed::command(), out),
        Command::Man => man::run(Typed::command(), out),
    }
}
