//! `sheet`: the order sheet for the maker, the bench sheet for the table.

use clap::{Args as ClapArgs, ValueEnum};
use twincone::job::setup::Needs;
use twincone::report::Conventions;
use twincone::report::sheet::{bench, finish, order};

use super::failure::Failure;
use super::options::ExperimentArgs;
use super::output::{Format, Outcome, OutputArgs};

/// Options of `sheet`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// Which sheet
    #[arg(long = "kind", value_enum)]
    sheet: Kind,
    /// Print this date on the sheet [default: none, so that the same job gives the same bytes]
    #[arg(long, value_name = "TEXT")]
    date: Option<String>,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Kind {
    /// What the maker of the crystal must know
    Order,
    /// What is set and seen at the bench, in order
    Bench,
}

/// The sheet as Markdown or HTML.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let form = output.form_of(".md or .html")?;
    let setup = args.experiment.setup(output, Needs::ALL)?;
    setup.demand_length("sheet")?;
    let mut page = match args.sheet {
        Kind::Order => order(&setup)?,
        Kind::Bench => bench(&setup)?,
    };
    let mut conventions = Conventions::of(&setup);
    conventions.warn_of_dim_phi(&setup);
    conventions.uses(&["pump.waist", "pump.power", "pump.polarization", "filter", "collection"]);
    finish(&mut page, &setup, &conventions.lines, args.date.as_deref());
    let text = match form {
        Format::Text => page.markdown(),
        Format::Html => page.html(),
        _ => {
            return Err(Failure::usage(
                "a sheet is Markdown (text) or html; name a file that ends in .md or .html",
            ));
        }
    };
    Ok(OutputArgs::file(text.into_bytes(), conventions.warnings))
}
