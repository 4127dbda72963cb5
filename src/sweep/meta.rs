//! What stands beside the rows of a sweep: which program made them, from which job, with which data, and what they mean.

use serde::Serialize;

use super::{Slice, Sweep};
use crate::job::JobError;
use crate::job::description::Description;
use crate::material::digest;

#[derive(Serialize)]
struct Meta<'a> {
    version: &'static str,
    report: &'static str,
    points: u64,
    #[serde(skip_serializing_if = "Option::is_none")]
    part: Option<Part>,
    dataset: Vec<Source>,
    /// Files with curves that the job names.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    file: Vec<Named>,
    column: Vec<ColumnMeta<'a>>,
    job: &'a Description,
}

#[derive(Serialize)]
struct Part {
    number: u64,
    of: u64,
    first_point: u64,
    end_point: u64,
}

#[derive(Serialize, PartialEq)]
struct Source {
    id: String,
    citation: String,
    known: String,
    range: String,
    temperature: String,
    /// Of the material's file.
    digest: String,
}

#[derive(Serialize)]
struct Named {
    name: String,
    digest: String,
}

#[derive(Serialize)]
struct ColumnMeta<'a> {
    name: &'a str,
    #[serde(skip_serializing_if = "str::is_empty")]
    unit: &'a str,
    meaning: &'a str,
}

/// The text of the file beside the rows of a slice: the same for the same job and version.
///
/// # Errors
/// A job that cannot be read, which [`Sweep::new`] would have refused.
pub fn meta(sweep: &Sweep<'_>, slice: Slice) -> Result<String, JobError> {
    let points = slice.points(sweep.count());
    let part = (slice.of > 1).then_some(Part {
        number: slice.part,
        of: slice.of,
        first_point: points.start,
        end_point: points.end,
    });
    let meta = Meta {
        version: env!("CARGO_PKG_VERSION"),
        report: sweep.report().name(),
        points: sweep.count(),
        part,
        dataset: sources(sweep),
        file: sweep
            .setups
            .document()
            .attachments()
            .map(|(name, text)| Named { name: name.into(), digest: format!("{:016x}", digest(text)) })
            .collect(),
        column: sweep
            .columns()
            .iter()
            .map(|c| ColumnMeta { name: &c.name, unit: c.unit, meaning: c.meaning })
            .collect(),
        job: &sweep.setups.document().describe()?,
    };
    Ok(toml::to_string(&meta).expect("texts, numbers and tables are TOML"))
}

/// The data sets of all materials and sets that the sweep names, once each.
fn sources(sweep: &Sweep<'_>) -> Vec<Source> {
    let mut all = Vec::new();
    for setup in sweep.setups.of_each_material(&sweep.plan) {
        for crystal in &setup.crystals {
            let set = crystal.set();
            let source = Source {
                id: format!("{}:{}", crystal.material.id, set.id),
                citation: set.file.citation.clone(),
                known: set.file.known.to_string(),
                range: format!("{} to {}", set.from, set.to),
                temperature: set.temperature.to_string(),
                digest: format!("{:016x}", crystal.material.digest),
            };
            if !all.contains(&source) {
                all.push(source);
            }
        }
    }
    all
}
