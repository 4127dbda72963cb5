//! The rows of one point.

use super::Fault;
use crate::job::Setup;
use crate::job::plan::{Report, Search};
use crate::matching::{Cones, ConesError, Status, Target, Want, cones_with, tune};
use crate::material::Catalogue;
use crate::optics::Indices;
use crate::pairs::{self, Basis};
use crate::report::{Column, Lines, Rows as _, compensate, cones as report, cut, state, tilt};

/// Columns of a report, without the two that end every table.
pub(super) fn columns(report: Report, search: &Search) -> Vec<Column> {
    match report {
        Report::Cut => cut::COLUMNS.to_vec(),
        Report::Rings => report::RINGS.to_vec(),
        Report::Crossings => report::CROSSINGS.to_vec(),
        Report::Tilt => tilt::columns(search.by),
        Report::State => state::COLUMNS.to_vec(),
        Report::Compensate => compensate::COLUMNS.to_vec(),
    }
}

/// Whether a report is about a cut that is given or solved for.
pub(super) fn needs_cut(report: Report) -> bool {
    report != Report::Cut
}

/// Writes the rows of a setup; on a fault none.
pub(super) fn write(
    report: Report,
    setup: &mut Setup,
    search: &Search,
    catalogue: &Catalogue,
    indices: &mut Indices,
    out: &mut Lines,
) -> Result<(), Fault> {
    match report {
        Report::Cut => write_cut(setup, search, out),
        Report::Rings => write_rings(setup, indices, out),
        Report::Crossings => write_crossings(setup, indices, out),
        Report::Tilt => write_tilt(setup, search, out),
        Report::State => write_state(setup, search, out),
        Report::Compensate => write_compensate(setup, search, catalogue, out),
    }
}

/// The one row of a point that has no answer.
pub(super) fn write_blank(columns: usize, status: Status, out: &mut Lines) {
    out.blank(columns);
    out.end(false, status);
}

fn find(setup: &Setup, indices: &mut Indices, want: Want) -> Result<Cones, Fault> {
    let Setup { crystals, interaction, .. } = setup;
    Ok(cones_with(indices, crystals, setup.pump(), &setup.signals(), *interaction, want)?)
}

fn write_rings(setup: &Setup, indices: &mut Indices, out: &mut Lines) -> Result<(), Fault> {
    let found = find(setup, indices, Want::Rings)?;
    found.rings.iter().for_each(|row| report::ring_row(row, setup.screen, out));
    Ok(())
}

fn write_crossings(setup: &Setup, indices: &mut Indices, out: &mut Lines) -> Result<(), Fault> {
    let found = find(setup, indices, Want::Crossings)?;
    if found.crossings.is_empty() {
        return Err(Fault::invalid("no two rings have opposite polarization, so none can cross"));
    }
    found.crossings.iter().for_each(|row| report::crossing_row(row, setup.screen, out));
    Ok(())
}

fn write_cut(setup: &Setup, search: &Search, out: &mut Lines) -> Result<(), Fault> {
    let attempt = cut::Attempt::of(&setup.design(search.target, search.find)?)?;
    cut::rows(setup, &[attempt], false, out);
    Ok(())
}

fn write_tilt(setup: &mut Setup, search: &Search, out: &mut Lines) -> Result<(), Fault> {
    let tuned = tune(&setup.tuning(search.target.unwrap_or(Target::Collinear), search.by)?)?;
    tilt::rows(setup, tuned.actuator, &tuned.turns, out);
    Ok(())
}

/// Error of a visibility that rows go for.
const WANTED: f64 = 1e-3;

fn write_state(setup: &Setup, search: &Search, out: &mut Lines) -> Result<(), Fault> {
    setup.demand_length("state")?;
    let state = setup.pairs(&setup.signals(), search.pair, WANTED).state()?;
    match search.basis {
        Some(basis) => state::rows(&state, &[basis], out),
        None => state::rows(&state, &Basis::ALL, out),
    }
    Ok(())
}

fn write_compensate(
    setup: &Setup,
    search: &Search,
    catalogue: &Catalogue,
    out: &mut Lines,
) -> Result<(), Fault> {
    setup.demand_length("compensate")?;
    let materials = setup.plates(catalogue, &[]).map_err(ConesError::from)?;
    let answers =
        pairs::compensate(&setup.pairs(&setup.signals(), search.pair, WANTED), &materials, search.half_wave)?;
    if answers.proposals.is_empty() {
        return Err(Fault {
            status: Status::NotConverged,
            message: "no plate of these materials helps".into(),
        });
    }
    compensate::rows(&answers, out);
    Ok(())
}
