//! Results as rows, and rows as text, CSV and JSON.

mod angles;
pub mod compensate;
pub mod cones;
mod conventions;
pub mod cut;
mod darkness;
mod export;
pub mod fit;
pub mod index;
pub mod materials;
pub mod sheet;
mod spread;
pub mod state;
pub mod table;
pub mod tilt;
pub mod tolerance;
pub mod twin;

pub use conventions::{Conventions, axis_words, room_words};
pub use darkness::{Advice, Opening, advice, darkness};
pub use export::{Lead, Lines, csv, json};
pub use table::{Cell, Column, Rows, Table};

/// What a command found, in every form it can be written in.
#[derive(Debug, Clone)]
pub struct Answer {
    /// Name of the command.
    pub command: &'static str,
    /// Tables for scripts; the first is the one that CSV takes unless told otherwise.
    pub tables: Vec<Table>,
    /// For people: body without conventions.
    pub text: String,
    /// What the numbers mean, and warnings.
    pub conventions: Conventions,
    /// The job as it was understood.
    pub job: serde_json::Value,
    /// Whether a single question had a solution.
    pub solved: bool,
}

impl Answer {
    /// For people: body, then conventions.
    #[must_use]
    pub fn to_text(&self) -> String {
        let mut text = self.text.trim_end().to_string();
        text.push_str("\n\n");
        self.conventions.lines.iter().for_each(|line| text.push_str(&angles::prose(line)));
        text
    }
}

/// The job of a setup, every default filled in and every cut solved, as JSON.
#[must_use]
pub fn resolved_job(setup: &crate::job::Setup) -> serde_json::Value {
    let mut solved = setup.clone();
    solved.forget_all_typed();
    solved.interaction_given = true;
    solved.cut.iter_mut().filter(|cut| cut.theta || cut.target.is_some()).for_each(|cut| cut.target = None);
    let text = crate::job::template(&solved);
    let value: toml::Value = toml::from_str(&text).expect("the template is valid TOML");
    serde_json::to_value(value).expect("TOML without dates is JSON")
}
