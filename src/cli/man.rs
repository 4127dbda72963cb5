//! `man`: the man page, commands included.

use clap::Command;
use clap_mangen::Man;

use super::failure::Failure;
use super::output::{Outcome, OutputArgs};

/// The page in roff: the program, then each command.
///
/// # Errors
/// None in practice: the text goes to memory.
pub fn run(mut command: Command, output: &OutputArgs) -> Result<Outcome, Failure> {
    command.build();
    let mut page = Vec::new();
    let failed = |e: std::io::Error| Failure { status: 4, message: format!("cannot write the page: {e}") };
    Man::new(command.clone()).render(&mut page).map_err(failed)?;
    for sub in command.get_subcommands() {
        let heading = format!("\n.SH \"TWINCONE {}\"\n", sub.get_name().to_uppercase());
        page.extend_from_slice(heading.as_bytes());
        let man = Man::new(sub.clone());
        man.render_synopsis_section(&mut page).map_err(failed)?;
        man.render_description_section(&mut page).map_err(failed)?;
        man.render_options_section(&mut page).map_err(failed)?;
    }
    let page = String::from_utf8(page).map_err(|e| Failure { status: 4, message: e.to_string() })?;
    output.plain(page)
}
