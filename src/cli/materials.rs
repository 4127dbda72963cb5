//! `materials`: what is known about which crystal.

use std::path::PathBuf;

use clap::{Args as ClapArgs, Subcommand};
use twincone::material::{Catalogue, Material, TEMPLATE};
use twincone::report::materials::{detail, sets_table, table, tensor_and_notes, text};
use twincone::report::{Answer, Conventions, Table};

use super::failure::Failure;
use super::options::{catalogue, read_text};
use super::output::{Outcome, OutputArgs};

/// Options of `materials`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    #[command(subcommand)]
    action: Option<Action>,
}

#[derive(Debug, Subcommand)]
enum Action {
    /// All crystals (default)
    List,
    /// Everything about one crystal, with sources
    Show {
        /// Its id, or a material file
        id: String,
    },
    /// Validate a material file of your own
    Check {
        /// The file
        file: PathBuf,
    },
    /// A commented material file to start from
    Template,
}

/// Lists, shows, checks.
///
/// # Errors
/// An unknown crystal, or what is wrong with a file.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let mut catalogue = catalogue(output, &twincone::job::Document::default())?;
    match &args.action {
        None | Some(Action::List) => {
            let all: Result<Vec<Material>, _> = catalogue.ids().map(|id| catalogue.get(id)).collect();
            let hint =
                "Ranges are those of the data sets; where numbers come from: `twincone materials show ID`.";
            answer(&all?, text, Vec::new(), &[hint], output)
        }
        Some(Action::Show { id }) => {
            super::options::add_file(&mut catalogue, id)?;
            // a data set after the colon changes nothing: all are shown
            let id = if id.contains(".toml") { id.as_str() } else { id.split(':').next().unwrap_or(id) };
            let material = catalogue.get(id)?;
            let [tensor, notes] = tensor_and_notes(&material);
            let tables = vec![sets_table(&material), tensor, notes];
            answer(&[material], |all| detail(&all[0]), tables, &[], output)
        }
        Some(Action::Check { file }) => check(file, output),
        Some(Action::Template) => output.plain(TEMPLATE.into()),
    }
}

fn answer(
    all: &[Material],
    words: impl Fn(&[Material]) -> String,
    more: Vec<Table>,
    lines: &[&str],
    output: &OutputArgs,
) -> Result<Outcome, Failure> {
    let datasets = all.iter().flat_map(|m| m.sets().iter().map(|s| format!("{}:{}", m.id, s.id))).collect();
    let lines = lines.iter().map(ToString::to_string).collect();
    let answer = Answer {
        command: "materials",
        tables: std::iter::once(table(all)).chain(more).collect(),
        text: words(all),
        conventions: Conventions { lines, datasets, warnings: Vec::new() },
        job: serde_json::Value::Null,
        solved: true,
    };
    output.outcome(&answer, None)
}

fn check(file: &std::path::Path, output: &OutputArgs) -> Result<Outcome, Failure> {
    let name = file.display().to_string();
    let mut catalogue = Catalogue::default();
    let material = catalogue.add_or_replace(&name, &read_text(file)?)?;
    material.examine().map_err(|why| Failure::usage(format!("{name}: {why}")))?;
    let sets: Vec<&str> = material.sets().iter().map(|s| s.id.as_str()).collect();
    output.plain(format!("{name}: a valid material, {} with data sets {}\n", material.id, sets.join(", ")))
}
