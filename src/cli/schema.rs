//! `schema`: the JSON Schema of the job file.

use twincone::job::schema;

use super::failure::Failure;
use super::output::{Outcome, OutputArgs};

/// Prints the schema.
///
/// # Errors
/// Another form asked for.
pub fn run(output: &OutputArgs) -> Result<Outcome, Failure> {
    output.plain(schema())
}
