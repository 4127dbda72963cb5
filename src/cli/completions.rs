//! `completions`: a completion script for a shell.

use clap::{Args as ClapArgs, Command};
use clap_complete::Shell;

use super::failure::Failure;
use super::output::{Outcome, OutputArgs};

/// Options of `completions`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// The shell
    #[arg(value_enum)]
    shell: Shell,
}

/// The script, as a text.
///
/// # Errors
/// None in practice: the text goes to memory.
pub fn run(args: &Args, mut command: Command, output: &OutputArgs) -> Result<Outcome, Failure> {
    let mut script = Vec::new();
    clap_complete::generate(args.shell, &mut command, "twincone", &mut script);
    let script = String::from_utf8(script).map_err(|e| Failure { status: 4, message: e.to_string() })?;
    output.plain(script)
}
