//! Sheets on paper: what a maker of crystals must know, and what is set at the bench.

mod arms;
mod bench;
mod caution;
mod facts;
mod mount;
mod order;
mod page;
mod safety;
mod trouble;

pub use bench::bench;
pub use order::order;
pub use page::{Block, Page};
pub use safety::{Class, class, limits};

use crate::job::{Setup, template};

/// What ends every sheet: conventions, data sets, job, version, and the date where it is asked for.
pub fn finish(page: &mut Page, setup: &Setup, lines: &[String], date: Option<&str>) {
    page.heading("What these numbers rest on");
    page.blocks.push(Block::List(lines.iter().filter(|l| !l.starts_with("Laser safety")).cloned().collect()));
    page.text(format!(
        "twincone {}{}",
        env!("CARGO_PKG_VERSION"),
        date.map_or(String::new(), |d| format!("; {d}"))
    ));
    page.heading("Job");
    page.blocks.push(Block::Verbatim(template(setup)));
}
