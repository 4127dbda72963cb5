//! Report `fit`: the bench as the measurements say it is.

use crate::fit::{Doubt, Fitted, Question, Residual, View};
use crate::job::Setup;
use crate::matching::{Status, Target};
use crate::quantity::Angle;

use super::angles::{fixed, grid, or_dash, prose, rounded, signed};
use super::cut::target_words;
use super::table::{Cell, Column, Rows, Table, column};

/// Columns of the unknowns, without the two that end every table.
pub const COLUMNS: [Column; 7] = [
    column("parameter", "", "key of the job"),
    column("value", "", "as fitted, in the unit of column unit"),
    column("uncertainty", "", "standard deviation of it"),
    column("unit", "", "of value, uncertainty and prior"),
    column("prior", "", "what was believed before"),
    column("prior_uncertainty", "", "standard deviation of that; empty where nothing was known"),
    column("at_bound", "", "whether the search was stopped there: the value means nothing then"),
];

/// Columns of single numbers.
pub const RESIDUALS: [Column; 8] = [
    column("line", "", "line of the file, from 1"),
    column("crystal_tilt_deg", "deg", "as the line has it"),
    column("quantity", "", "which number of the line"),
    column("measured", "", "in the unit of its name"),
    column("fitted", "", "in the unit of its name"),
    column("sigma", "", "standard deviation of the measurement"),
    column("pull", "", "measured minus fitted in standard deviations"),
    column("outlier", "", "whether it is more than 4 standard deviations off"),
];

/// Columns of pairs of unknowns.
pub const CORRELATIONS: [Column; 3] = [
    column("parameter", "", "one unknown"),
    column("with", "", "another"),
    column("correlation", "", "-1 to 1; near either end the data know only a combination"),
];

/// Columns of other data sets, views and assignments that were tried.
pub const ALTERNATIVES: [Column; 4] = [
    column("alternative", "", "a data set, or how the picture stands"),
    column("parameter", "", "key of the job"),
    column("value", "", "as fitted then"),
    column("chi_square", "", "of the data then"),
];

/// All that a report needs.
#[derive(Debug)]
pub struct Finding<'a> {
    /// The question.
    pub question: &'a Question,
    /// The answer.
    pub fitted: &'a Fitted,
    /// What it cannot say.
    pub doubts: &'a [Doubt],
    /// Wanted emission and the tilt that reaches it with the fitted crystal.
    pub advice: Option<(Target, Option<Angle>)>,
    /// The other ways the picture may stand, with what they give.
    pub views: &'a [(View, Fitted)],
    /// The other data sets, with what they give.
    pub datasets: &'a [(String, Result<Fitted, String>)],
}

impl Finding<'_> {
    /// Whether the numbers mean anything: the model describes the data, and no unknown was stopped.
    #[must_use]
    pub fn holds(&self) -> bool {
        let fitted = self.fitted;
        // of what was assumed, no more than of what was stated
        let typical = fitted.typical().is_none_or(|typical| typical < 30.0);
        let described = match fitted.scatter {
            // outliers that a robust fit was asked to bear with
            _ if self.question.robust => typical,
            Some(scatter) => scatter * scatter < 30.0,
            None => fitted.reduced().is_none_or(|r| r < 30.0),
        };
        described && fitted.absent.is_empty() && !fitted.at_bound.contains(&true)
    }

    fn extrapolated(&self) -> bool {
        let setup = &self.fitted.setup;
        let photons = setup.photons();
        [photons.pump, photons.signal, photons.idler]
            .iter()
            .any(|w| setup.crystals.iter().any(|c| c.extrapolates(*w)))
    }
}

/// The unknowns, then all that is known beside them.
#[must_use]
pub fn tables(finding: &Finding<'_>) -> Vec<Table> {
    let Finding { question, fitted, .. } = finding;
    let status = if finding.holds() { Status::Ok } else { Status::NotConverged };
    let mut table = Table::new("fit", &COLUMNS);
    for (i, unknown) in question.unknowns.iter().enumerate() {
        let row: [Cell; COLUMNS.len()] = [
            unknown.name.clone().into(),
            fitted.values[i].into(),
            fitted.sigmas[i].into(),
            unknown.unit.into(),
            unknown.prior.into(),
            unknown.prior_sigma.into(),
            fitted.at_bound[i].into(),
        ];
        table.push(&row, finding.extrapolated(), status);
    }
    vec![table, residuals(fitted), correlations(finding), alternatives(finding), summary(finding)]
}

fn residuals(fitted: &Fitted) -> Table {
    let mut table = Table::new("residuals", &RESIDUALS);
    for r in &fitted.residuals {
        let row: [Cell; RESIDUALS.len()] = [
            r.line.into(),
            r.tilt.into(),
            r.quantity.into(),
            r.measured.into(),
            r.fitted.into(),
            r.sigma.into(),
            r.pull().into(),
            r.is_outlier().into(),
        ];
        table.push(&row, false, Status::Ok);
    }
    table
}

fn correlations(finding: &Finding<'_>) -> Table {
    let mut table = Table::new("correlations", &CORRELATIONS);
    let unknowns = &finding.question.unknowns;
    for i in 0..unknowns.len() {
        for j in i + 1..unknowns.len() {
            let value = finding.fitted.correlations[(i, j)];
            table.push(
                &[unknowns[i].name.clone().into(), unknowns[j].name.clone().into(), value.into()],
                false,
                Status::Ok,
            );
        }
    }
    table
}

fn alternatives(finding: &Finding<'_>) -> Table {
    let mut table = Table::new("alternatives", &ALTERNATIVES);
    let mut push = |name: &str, fitted: &Fitted| {
        for (unknown, value) in finding.question.unknowns.iter().zip(&fitted.values) {
            let row = [name.into(), unknown.name.clone().into(), (*value).into(), fitted.chi_square.into()];
            table.push(&row, false, Status::Ok);
        }
    };
    finding.views.iter().for_each(|(view, fitted)| push(view_words(*view), fitted));
    for (id, fitted) in finding.datasets {
        if let Ok(fitted) = fitted {
            push(id, fitted);
        }
    }
    table
}

fn summary(finding: &Finding<'_>) -> Table {
    let mut table = Table::new(
        "summary",
        &[column("quantity", "", "what is said of the whole fit"), column("value", "", "a number")],
    );
    let fitted = finding.fitted;
    let mut push =
        |name: &str, value: Option<f64>| table.push(&[name.into(), value.into()], false, Status::Ok);
    push("measured_numbers", Some(fitted.residuals.len() as f64));
    push("chi_square", Some(fitted.chi_square));
    push("degrees_of_freedom", Some(fitted.freedom));
    push("chi_square_per_degree", fitted.reduced());
    push("outliers", Some(fitted.residuals.iter().filter(|r| r.is_outlier()).count() as f64));
    push("chi_square_other_assignment", fitted.other_way);
    table
}

/// How a picture stands, in words.
#[must_use]
pub fn view_words(view: View) -> &'static str {
    match (view.turned, view.mirrored) {
        (false, false) => "upright",
        (true, false) => "turned by 180 deg",
        (false, true) => "mirrored",
        (true, true) => "turned by 180 deg and mirrored",
    }
}

/// For people.
#[must_use]
pub fn text(finding: &Finding<'_>) -> String {
    let Finding { question, fitted, .. } = finding;
    let crystals = &fitted.setup.crystals;
    let each = crystals.iter().map(|c| format!("{}:{}", c.material.id, c.set().id));
    let mut out = prose(&format!(
        "{}, {}; {} numbers in {} measurements\n",
        each.collect::<Vec<_>>().join(" and "),
        fitted.setup.interaction,
        fitted.residuals.len(),
        question.data.len()
    ));
    out.push('\n');
    let header = ["parameter", "value", "+-", "unit", "believed before", "+-"];
    let rows: Vec<Vec<String>> = question
        .unknowns
        .iter()
        .enumerate()
        .map(|(i, u)| {
            let decimals = decimals(fitted.sigmas[i]);
            vec![
                u.name.clone(),
                fixed(fitted.values[i], decimals),
                fixed(fitted.sigmas[i], decimals),
                u.unit.into(),
                rounded(u.prior, 4),
                or_dash(u.prior_sigma, 3),
            ]
        })
        .collect();
    out.push_str(&grid(&header, &rows));
    out.push('\n');
    let parts = [
        verdict(finding),
        sentences(finding),
        quality(finding),
        doubts(finding),
        outliers(fitted),
        others(finding),
    ];
    parts.iter().filter(|p| !p.is_empty()).for_each(|p| out.push_str(&prose(p)));
    out.push_str("\nResiduals (sigma: measured minus fitted in standard deviations)\n");
    out.push_str(&residual_grid(fitted));
    out
}

/// So many decimals that an uncertainty shows two digits.
fn decimals(sigma: f64) -> usize {
    if !sigma.is_finite() || sigma <= 0.0 {
        return 4;
    }
    (1.0 - sigma.log10().floor()).clamp(0.0, 6.0) as usize
}

fn with_error(value: f64, sigma: f64) -> String {
    let decimals = decimals(sigma);
    format!("{} +- {}", fixed(value, decimals), fixed(sigma, decimals))
}

/// What stands against believing any of it.
fn verdict(finding: &Finding<'_>) -> String {
    let fitted = finding.fitted;
    let mut out = String::new();
    let stopped: Vec<&str> = finding
        .question
        .unknowns
        .iter()
        .zip(&fitted.at_bound)
        .filter(|(_, stopped)| **stopped)
        .map(|(u, _)| u.name.as_str())
        .collect();
    if !stopped.is_empty() {
        out.push_str(&format!(
            "No fit: {} ran as far as it may, 8 standard deviations from what was believed. Look at units, signs of tilt, \
             labels of the rings and --distance.\n",
            stopped.join(" and ")
        ));
    }
    if !fitted.absent.is_empty() {
        let lines: Vec<String> = fitted.absent.iter().map(ToString::to_string).collect();
        out.push_str(&format!(
            "No fit: at the fitted values there is no light of the kind that line {} has.\n",
            lines.join(", ")
        ));
    }
    if out.is_empty() && !finding.holds() {
        out.push_str(
            "No fit: the bench described does not give these measurements, whatever the free values. Look at units, labels, \
             the sign of the tilt and --view-turn, or free another key.\n",
        );
    }
    out
}

/// Each unknown in plain words, and what to set.
fn sentences(finding: &Finding<'_>) -> String {
    let Finding { question, fitted, .. } = finding;
    if !finding.holds() {
        return String::new();
    }
    let mut out = String::new();
    for (i, unknown) in question.unknowns.iter().enumerate() {
        let value = with_error(fitted.values[i], fitted.sigmas[i]);
        let off = fitted.values[i] - unknown.prior;
        let off = with_error(off, fitted.sigmas[i]);
        let unit = unknown.unit;
        let sentence = match unknown.name.as_str() {
            "crystal.cut.theta" => format!("This crystal is cut at {value} {unit}."),
            "stage.zero" => {
                format!("Your tilt zero is {off} {unit} off: the back-reflection is at {value} {unit}.")
            }
            "crystal.roll" => format!("The crystal is rolled by {value} {unit}."),
            "pump.wavelength" => format!("The pump is at {value} {unit}."),
            "screen.distance" => format!("The screen stands {value} {unit} from the crystal."),
            _ => format!("{} is {value} {unit}.", unknown.name),
        };
        out.push_str(&sentence);
        out.push(' ');
    }
    out.push_str(&advice(finding));
    out.truncate(out.trim_end().len());
    out.push('\n');
    out
}

fn advice(finding: &Finding<'_>) -> String {
    let Some((target, tilt)) = finding.advice else { return String::new() };
    let Some(tilt) = tilt else {
        return format!("No tilt of this crystal gives {}.", target_words(target));
    };
    let setup: &Setup = &finding.question.setup;
    let sense = if setup.stage.is_some_and(|s| s.reversed) { -1.0 } else { 1.0 };
    let believed = setup.stage.and_then(|s| s.zero);
    let zero = finding.fitted.zero.unwrap_or(believed.map_or(0.0, Angle::degrees));
    // reading = zero + sense tilt
    let reading = zero + sense * tilt.degrees();
    let shown = match believed {
        Some(_) => format!("a reading of {} deg", signed(reading, 2)),
        None => format!("{} deg", signed(reading, 2)),
    };
    format!("Set {shown} for {}.", target_words(target))
}

fn quality(finding: &Finding<'_>) -> String {
    let fitted = finding.fitted;
    let mut out = match fitted.reduced() {
        _ if fitted.scatter.is_some() => format!(
            "No uncertainties were stated (column sigma_mm or --sigma): they are taken from the scatter, {} times 0.5 mm \
             (0.03 deg).",
            fixed(fitted.scatter.unwrap_or(1.0), 2)
        ),
        Some(reduced) => {
            let word = match reduced {
                r if r < 0.3 => {
                    "less than the stated uncertainties allow: they are too large, or copied from a computation"
                }
                r if r < 2.0 => "as expected",
                r if r < 30.0 => {
                    "more than the stated uncertainties explain: they are too small, or something is not in the model"
                }
                _ => "far too much",
            };
            format!(
                "chi-square {} over {} degrees of freedom: {word}.",
                fixed(fitted.chi_square, 1),
                fixed(fitted.freedom, 1)
            )
        }
        None => {
            "There are no more measurements than unknowns, so nothing tests the fit: measure at more tilts."
                .into()
        }
    };
    let mut tilts: Vec<f64> = question_tilts(finding);
    tilts.dedup();
    if tilts.len() < 2 {
        out.push_str(" All of it was measured at one tilt: measure at three or more, which tests the tilt's sign and the cut.");
    }
    if !fitted.settled {
        out.push_str(" The search did not settle.");
    }
    let strained: Vec<&str> = finding
        .question
        .unknowns
        .iter()
        .zip(&fitted.values)
        .filter(|(u, value)| u.prior_sigma.is_some_and(|s| (**value - u.prior).abs() > 3.0 * s))
        .map(|(u, _)| u.name.as_str())
        .collect();
    if !strained.is_empty() {
        out.push_str(&format!(" Further off than was believed possible: {}.", strained.join(", ")));
    }
    out.push('\n');
    out
}

/// Tilts of all lines, in order.
fn question_tilts(finding: &Finding<'_>) -> Vec<f64> {
    let mut tilts: Vec<f64> =
        finding.question.data.iter().filter_map(|m| m.settings.tilt.or(m.settings.reading)).collect();
    tilts.sort_by(f64::total_cmp);
    tilts
}

fn doubts(finding: &Finding<'_>) -> String {
    let mut out = String::new();
    for doubt in finding.doubts.iter().filter(|_| finding.holds()) {
        let share = fixed(100.0 * doubt.left, 0);
        out.push_str(&match doubt.names.as_slice() {
            [only] => format!(
                "The data say little about {only}: {share} % of what was uncertain before is left. To know it, {}.\n",
                doubt.remedy
            ),
            names => format!(
                "The data cannot separate {}: of one combination of them {share} % of what was uncertain before is left. To tell \
                 them apart, {}.\n",
                names.join(" and "),
                doubt.remedy
            ),
        });
    }
    out
}

fn outliers(fitted: &Fitted) -> String {
    let far: Vec<&Residual> = fitted.residuals.iter().filter(|r| r.is_outlier()).collect();
    if far.is_empty() {
        return String::new();
    }
    let each: Vec<String> = far
        .iter()
        .take(8)
        .map(|r| format!("line {} {} ({} sigma)", r.line, r.quantity, signed(r.pull(), 1)))
        .collect();
    let more = if far.len() > 8 { format!(" and {} more", far.len() - 8) } else { String::new() };
    format!(
        "Far off: {}{more}. All are kept; look at those lines, or let --robust weigh them less.\n",
        each.join(", ")
    )
}

fn others(finding: &Finding<'_>) -> String {
    let Finding { question, fitted, .. } = finding;
    let mut out = String::new();
    if let Some(other) = fitted.other_way {
        let how =
            if other - fitted.chi_square < 9.0 { "hardly worse: label the rings" } else { "clearly worse" };
        out.push_str(&format!(
            "Rings without a label were assigned both ways; the other way gives a sum of squares of {} instead of {}, {how}.\n",
            fixed(other, 1),
            fixed(fitted.chi_square, 1)
        ));
    }
    let key = |f: &Fitted| {
        let each = question.unknowns.iter().enumerate().take(4);
        let each = each.map(|(i, u)| {
            // with several crystals a last word says too little
            let last = u.name.rsplit('.').next().unwrap_or_default();
            let last = if question.setup.crystals.len() > 1 { u.name.as_str() } else { last };
            format!("{last} {} {}", with_error(f.values[i], f.sigmas[i]), u.unit)
        });
        each.collect::<Vec<_>>().join(", ")
    };
    let mut told = false;
    for (view, other) in finding.views {
        let gain = fitted.against() - other.against();
        if gain > -9.0 && other.absent.is_empty() && finding.holds() {
            told = true;
            let how = if gain > 9.0 { "fits much better" } else { "fits as well" };
            out.push_str(&format!(
                "If the picture is {} it {how} (chi-square {}): {}.\n",
                view_words(*view),
                fixed(other.chi_square, 1),
                key(other)
            ));
        }
    }
    if told {
        out.push_str(
            "A picture that is turned or mirrored changes the sign of what the tilt seems to do; say how it stands with \
             --view-turn 0|180 and --mirror yes|no.\n",
        );
    }
    if !finding.datasets.is_empty() {
        out.push_str(&datasets(finding, key));
    }
    out
}

fn datasets(finding: &Finding<'_>, key: impl Fn(&Fitted) -> String) -> String {
    let own = (finding.fitted.setup.crystals[0].set().id.clone(), finding.fitted.against());
    let mut out = String::new();
    let mut best = own.clone();
    for (id, fitted) in finding.datasets {
        match fitted {
            Ok(fitted) => {
                if fitted.against() < best.1 {
                    best = (id.clone(), fitted.against());
                }
                out.push_str(&format!(
                    "{id}: chi-square {}, and {} against what was believed; {}.\n",
                    fixed(fitted.chi_square, 1),
                    fixed(fitted.strain, 1),
                    key(fitted)
                ));
            }
            Err(why) => out.push_str(&format!("{id}: {why}.\n")),
        }
    }
    out.push_str(&format!(
        "Of the published sets {} fits this bench best (both together {}; {} has {}).\n",
        best.0,
        fixed(best.1, 1),
        own.0,
        fixed(own.1, 1)
    ));
    out
}

/// Every number but points on edges, of which there may be hundreds: those that are far off, and their scatter.
fn residual_grid(fitted: &Fitted) -> String {
    const MANY: usize = 24;
    let header = ["quantity", "line", "tilt deg", "measured", "fitted", "sigma"];
    let edges: Vec<&Residual> = fitted.residuals.iter().filter(|r| r.quantity == "edge_mm").collect();
    let told = |r: &&Residual| edges.len() <= MANY || r.quantity != "edge_mm" || r.is_outlier();
    let rows: Vec<Vec<String>> = fitted
        .residuals
        .iter()
        .filter(told)
        .map(|r| {
            vec![
                r.quantity.into(),
                r.line.to_string(),
                or_dash(r.tilt, 2),
                fixed(r.measured, 3),
                fixed(r.fitted, 3),
                format!("{}{}", signed(r.pull(), 2), if r.is_outlier() { " !" } else { "" }),
            ]
        })
        .collect();
    let mut out = if rows.is_empty() { String::new() } else { grid(&header, &rows) };
    if edges.len() > MANY {
        let square = edges.iter().map(|r| (r.measured - r.fitted).powi(2)).sum::<f64>() / edges.len() as f64;
        out.push_str(&format!(
            "  {} points on rings lie {} mm off on average (root mean square); --format json has each\n",
            edges.len(),
            fixed(square.sqrt(), 3)
        ));
    }
    out
}
