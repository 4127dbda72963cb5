//! The rows of one point.

use super::Fault;
use crate::job::Setup;
use crate::job::plan::{Report, Search};
use crate::matching::{Cones, Status, Target, Want, cones_with, tune};
use crate::optics::Indices;
use crate::report::{Column, Lines, Rows as _, cones as report, cut, tilt};

/// Columns of a report, without the two that end every table.
pub(super) fn columns(report: Report, search: &Search) -> Vec<Column> {
    match report {
        Report::Cut => cut::COLUMNS.to_vec(),
        Report::Rings => report::RINGS.to_vec(),
        Report::Crossings => report::CROSSINGS.to_vec(),
        Report::Tilt => tilt::columns(search.by),
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
    indices: &mut Indices,
    out: &mut Lines,
) -> Result<(), Fault> {
    match report {
        Report::Cut => write_cut(setup, search, out),
        Report::Rings => write_rings(setup, indices, out),
        Report::Crossings => write_crossings(setup, indices, out),
        Report::Tilt => write_tilt(setup, search, out),
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
