//! Report `compensate`: plates, what they leave, and how exactly they have to be made and mounted.

use super::angles::{fixed, grid, prose, rounded, signed};
use super::table::{Cell, Column, Rows, Table, column};
use crate::matching::Status;
use crate::pairs::{Answers, Designed, Proposal};

/// Columns, without the two that end every table.
pub const COLUMNS: [Column; 11] = [
    column("arm", "", "a, b or pump"),
    column("material", "", "of the plate"),
    column("dataset", "", "its indices"),
    column("theta_deg", "deg", "between face normal and Z"),
    column("phi_deg", "deg", "azimuth of the normal from X"),
    column("length_mm", "mm", "thickness"),
    column("roll_deg", "deg", "about the arm, from lab x made perpendicular to it"),
    column("tilt_deg", "deg", "positive increases theta"),
    column(
        "delay_fs",
        "fs",
        "group delay of the first history's wave minus that of the second's in the plate",
    ),
    column("visibility_before", "", "between diagonal polarizers, without any plate"),
    column("visibility_after", "", "with all plates of this material in this table"),
];

/// One row per plate; those of one material belong together, the best material first.
#[must_use]
pub fn table(answers: &Answers) -> Table {
    let mut table = Table::new("compensate", &COLUMNS);
    rows(answers, &mut table);
    table
}

/// The same as rows.
pub fn rows(answers: &Answers, out: &mut impl Rows) {
    for proposal in &answers.proposals {
        for designed in &proposal.plates {
            let plate = &designed.plate.plate;
            let mut cells: Vec<Cell> = vec![
                designed.plate.place.to_string().into(),
                plate.material.id.clone().into(),
                plate.set().id.clone().into(),
            ];
            let numbers = [
                plate.cut.theta.degrees(),
                plate.cut.phi.degrees(),
                plate.length.mm(),
                plate.orientation.roll.degrees(),
                plate.orientation.tilt.degrees(),
                designed.delay * 1e15,
                proposal.before,
                proposal.after,
            ];
            cells.extend(numbers.map(Cell::from));
            let extrapolated = proposal.state.extrapolated;
            out.push(&cells, extrapolated, proposal.status);
        }
    }
}

/// For people; `rules` are those of half the length, where there are any.
#[must_use]
pub fn text(answers: &Answers, rules: &[Proposal]) -> String {
    let mut out = String::new();
    for proposal in &answers.proposals {
        out.push_str(&prose(&proposal_words(proposal)));
        out.push_str(&plates(proposal));
        proposal.plates.iter().for_each(|designed| out.push_str(&prose(&mounting(designed))));
        out.push('\n');
    }
    if answers.proposals.iter().all(|proposal| proposal.after < proposal.before) {
        out.push_str(&prose(
            "None of these plates is better than no plate: leave them out, or allow other materials, narrower filters or \
             smaller irises.",
        ));
        out.push('\n');
    }
    if answers.proposals.iter().any(|proposal| proposal.status == Status::NotConverged) {
        out.push_str(&prose(
            "Not converged: some of these visibilities may be far off, because the state turns too fast over the \
             wavelengths or directions that are collected; `twincone state` says by how much. Take narrower filters or \
             irises, or a shorter crystal.",
        ));
        out.push('\n');
    }
    for (id, why) in &answers.useless {
        out.push_str(&prose(&format!("{id}: {why}.")));
    }
    if let [rolled, flipped] = rules {
        out.push_str(&prose(&format!(
            "For comparison, the source's own cut at half its length in both arms: visibility {} rolled by a quarter turn; \
             {} as the source stands, behind half-wave plates at 45 deg (half_wave = true; \
             --half-wave designs plates for there).",
            fixed(rolled.after, 4),
            fixed(flipped.after, 4)
        )));
    }
    out.push_str(&prose(
        "Delay is that of the first history's wave in the plate minus that of the second's; the phase left is that of \
         the nearest Bell state in the basis of the histories, as `twincone state` gives it; +1 %, -1 % and +1 deg are what visibility changes by for a thicker or thinner plate and \
         for roll. Plates stand across the beam; roll is counted from lab x (made perpendicular to the arm) and lays u, towards \
         which Z leans, at that azimuth. Visibility is that between diagonal polarizers in the basis of the two \
         histories, the phase set for the best. A half-wave plate at 45 deg in one arm exchanges H and V there and so \
         makes |HV>, |VH> of |HH>, |VV>: with the two phases below all four Bell states are in reach.",
    ));
    out
}

fn proposal_words(proposal: &Proposal) -> String {
    let material = proposal.plates.first().map_or("", |d| d.plate.plate.material.id.as_str());
    format!(
        "{material}: visibility {} instead of {}; the phase left between the histories is {} deg",
        fixed(proposal.after, 4),
        fixed(proposal.before, 4),
        rounded(proposal.state.histories.nearest_bell().phase.to_degrees(), 1)
    )
}

fn plates(proposal: &Proposal) -> String {
    let header = [
        "arm",
        "theta deg",
        "phi deg",
        "length mm",
        "roll deg",
        "tilt deg",
        "delay fs",
        "+1 %",
        "-1 %",
        "+1 deg roll",
    ];
    let rows: Vec<Vec<String>> = proposal
        .plates
        .iter()
        .map(|designed| {
            let plate = &designed.plate.plate;
            vec![
                designed.plate.place.to_string(),
                fixed(plate.cut.theta.degrees(), 2),
                fixed(plate.cut.phi.degrees(), 2),
                fixed(plate.length.mm(), 3),
                signed(plate.orientation.roll.degrees(), 2),
                fixed(plate.orientation.tilt.degrees(), 2),
                signed(designed.delay * 1e15, 1),
                signed(designed.per_thickness[0], 4),
                signed(designed.per_thickness[1], 4),
                signed(designed.per_roll, 4),
            ]
        })
        .collect();
    grid(&header, &rows)
}

fn mounting(designed: &Designed) -> String {
    let tilt = |tilt: Option<f64>| match tilt {
        Some(tilt) => format!("{} deg", signed(tilt.to_degrees(), 2)),
        None => "more than 30 deg".into(),
    };
    format!(
        "Plate {}{}: tilt it by {} for a phase of pi; {} brings both histories into phase, {} into opposite phase.",
        designed.plate.place,
        if designed.plate.half_wave { " (behind a half-wave plate at 45 deg)" } else { "" },
        tilt(designed.tilt_for_pi),
        tilt(designed.tilt_to[0]),
        tilt(designed.tilt_to[1])
    )
}
