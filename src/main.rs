//! The program: what was typed goes to a command, what it answers goes out, and the exit status says how it went.

mod cli;

use std::process::ExitCode;

fn main() -> ExitCode {
    match cli::parse() {
        Ok(typed) => cli::finish(cli::run(&typed), &typed.output),
        Err(refused) => refused,
    }
}
