//! Report `tolerance`: what errors cost, and whether turning repairs it.

use crate::job::Setup;
use crate::matching::{Actuator, Status, Target};
use crate::quantity::Angle;
use crate::tolerance::{Advice, Bench, CAUSES, Chances, Contribution, End, Errors, Origin, Sample, Spread};

use super::angles::{fixed, grid, or_dash, prose, rounded, signed};
use super::conventions::room_words;
use super::cut::target_words;
use super::table::{Cell, Column, Rows, Table, column};

/// Columns of the contributions, without the two that end every table.
pub const COLUMNS: [Column; 11] = [
    column("contribution", "", "what is off; dataset: the other published indices, least and largest"),
    column("error", "", "by how much, in the next column's unit; both ends are computed"),
    column("error_unit", "", "unit of the error"),
    column("crossing_low_deg", "deg", "crossings to the pump at minus the error, outside"),
    column("crossing_high_deg", "deg", "crossings to the pump at plus the error, outside"),
    column("half_angle_low_deg", "deg", "half angle of the signal's ring at minus the error, outside"),
    column("half_angle_high_deg", "deg", "half angle of the signal's ring at plus the error, outside"),
    column("shift_mm", "mm", "most that rings and crossings move on the screen"),
    column("retilt_low_deg", "deg", "turn from the setting that repairs minus the error"),
    column("retilt_high_deg", "deg", "turn from the setting that repairs plus the error"),
    column("left_over_deg", "deg", "most that light is off its place after that turn"),
];

/// Columns of what else is known of each contribution.
pub const SENSITIVITIES: [Column; 5] = [
    column("contribution", "", "what is off"),
    column("error_unit", "", "unit of the error"),
    column(
        "sensitivity_deg_per_unit",
        "deg",
        "change of the target's angle per unit of the error, end to end",
    ),
    column("other_half_angle_low_deg", "deg", "half angle of the other ring at minus the error, outside"),
    column("other_half_angle_high_deg", "deg", "half angle of the other ring at plus the error, outside"),
];

/// Columns of how far each ring and the crossings move.
pub const SHIFTS: [Column; 6] = [
    column("contribution", "", "what is off"),
    column("what", "", "signal_ring, other_ring or crossing"),
    column("shift_low_deg", "deg", "by how much it moves at minus the error, outside"),
    column("shift_high_deg", "deg", "by how much it moves at plus the error, outside"),
    column("shift_low_mm", "mm", "by how much it moves on the screen at minus the error"),
    column("shift_high_mm", "mm", "by how much it moves on the screen at plus the error"),
];

/// What [`SHIFTS`] speak of.
const MOVING: [&str; 3] = ["signal_ring", "other_ring", "crossing"];

/// Columns of the data sets.
pub const DATASETS: [Column; 6] = [
    column("dataset", "", "whose refractive indices"),
    column("crossing_deg", "deg", "crossings to the pump, outside"),
    column("half_angle_deg", "deg", "half angle of the signal's ring, outside"),
    column("other_half_angle_deg", "deg", "half angle of the other ring, outside"),
    column("retilt_deg", "deg", "turn from the setting that brings the target back"),
    column("left_over_deg", "deg", "most that light is off its place after that turn"),
];

/// Columns of the samples taken together.
pub const CHANCES: [Column; 2] =
    [column("quantity", "", "what is said of all samples"), column("value", "", "in the unit of its name")];

/// Columns of single samples.
pub const SAMPLES: [Column; 13] = [
    column("sample", "", "from 0"),
    column("crystal_dataset", "", "whose refractive indices"),
    column("theta_off_deg", "deg", "cut: theta off by"),
    column("phi_off_deg", "deg", "cut: phi off by"),
    column("pump_wavelength_off_nm", "nm", "pump off by"),
    column("temperature_off_k", "K", "temperature off by"),
    column("tilt_setting_off_deg", "deg", "tilt off by"),
    column("roll_off_deg", "deg", "roll off by"),
    column("length_off_mm", "mm", "length off by"),
    column("pump_direction_h_off_deg", "deg", "pump points to +x by"),
    column("pump_direction_v_off_deg", "deg", "pump points up by"),
    column("angle_deg", "deg", "the angle that the target is about, before turning"),
    column("retilt_deg", "deg", "turn from the setting that brings the target back"),
];

/// All that a text needs.
#[derive(Debug)]
pub struct Finding<'a> {
    /// The question.
    pub bench: &'a Bench,
    /// Stated errors.
    pub errors: &'a Errors,
    /// How they are meant.
    pub spread: Spread,
    /// One error at a time.
    pub contributions: &'a [Contribution],
    /// All together.
    pub chances: &'a Chances,
    /// What follows.
    pub advice: Advice,
    /// The largest turn that the mount can make, radians.
    pub limit: f64,
    /// Of the random numbers.
    pub seed: u64,
    /// Chances with theta ordered otherwise by `advice.shift_theta`.
    pub shifted: Option<Chances>,
}

/// What stands in one line: both ends.
struct Line {
    name: String,
    error: Option<f64>,
    unit: &'static str,
    crossing: [Option<f64>; 2],
    half: [Option<f64>; 2],
    other: [Option<f64>; 2],
    turn: [Option<f64>; 2],
    /// Of what [`MOVING`] names: deg, mm.
    moved: [[Option<[f64; 2]>; 2]; 3],
    shift: Option<f64>,
    left: Option<f64>,
    sensitivity: Option<f64>,
    status: Status,
}

fn degrees(radians: Option<f64>) -> Option<f64> {
    radians.map(|r| Angle::radians(r).degrees())
}

fn half_angle(end: &End, ring: usize) -> Option<f64> {
    degrees(end.seen.rings.get(ring).copied().flatten().map(|r| r.half_angle))
}

/// How far a ring (0 and 1) or the crossings (2) move, deg and mm.
fn moved(end: &End, what: usize) -> Option<[f64; 2]> {
    let shift = if what < 2 { end.moved.rings.get(what).copied().flatten() } else { end.moved.crossing };
    shift.map(|shift| [shift.angle.to_degrees(), shift.screen * 1e3])
}

/// Largest of two ends; nothing where one of them has none.
fn larger(values: [Option<f64>; 2]) -> Option<f64> {
    values[0].zip(values[1]).map(|(a, b)| a.max(b))
}

impl Line {
    fn of(contribution: &Contribution, target: Target) -> Self {
        let at = |f: &dyn Fn(&End) -> Option<f64>| {
            contribution.ends.each_ref().map(|end| end.as_ref().ok().and_then(f))
        };
        let (name, error, unit, scale) = match &contribution.origin {
            Origin::AsOrdered => ("as_ordered".to_string(), None, "", 1.0),
            Origin::Cause(cause) => {
                let error = contribution.error.map(|e| cause.shown(e));
                let scale = contribution.error.zip(error).map_or(1.0, |(si, shown)| si / shown);
                (cause.name().to_string(), error, cause.unit(), scale)
            }
            Origin::Dataset(id) => (id.clone(), None, "", 1.0),
        };
        Self {
            name,
            error,
            unit,
            crossing: at(&|e| degrees(e.seen.crossing)),
            half: at(&|e| half_angle(e, 0)),
            other: at(&|e| half_angle(e, 1)),
            turn: at(&|e| degrees(e.turn)),
            moved: [0, 1, 2].map(|what| {
                contribution.ends.each_ref().map(|end| end.as_ref().ok().and_then(|end| moved(end, what)))
            }),
            shift: larger(at(&|e| e.moved.most().map(|s| s * 1e3))),
            left: larger(at(&|e| degrees(e.left_over))),
            sensitivity: contribution.sensitivity(target).map(|s| (s * scale).to_degrees()),
            status: contribution.status(),
        }
    }

    /// The data sets as one contribution: least and largest over them, where all have a value.
    fn over_datasets(contributions: &[Contribution], target: Target) -> Option<Self> {
        let lines: Vec<Self> = contributions
            .iter()
            .filter(|c| c.origin == Origin::AsOrdered || matches!(c.origin, Origin::Dataset(_)))
            .filter(|c| c.ends[0].is_ok())
            .map(|c| Self::of(c, target))
            .collect();
        let range = |f: fn(&Self) -> [Option<f64>; 2]| {
            let each = || lines.iter().map(|line| f(line)[0]);
            // a set that has none is the least of all
            let least = each().try_fold(f64::INFINITY, |a, b| b.map(|b| a.min(b)));
            [least, each().flatten().reduce(f64::max)]
        };
        let most = |f: fn(&Self) -> Option<f64>| {
            lines.iter().map(f).try_fold(f64::NEG_INFINITY, |a, b| b.map(|b| a.max(b)))
        };
        let moved = [0, 1, 2].map(|what| {
            let unit = |unit: usize| {
                let each = || lines.iter().map(|line| line.moved[what][0].map(|m| m[unit]));
                let least = each().try_fold(f64::INFINITY, |a, b| b.map(|b| a.min(b)))?;
                Some([least, each().try_fold(0.0, |a: f64, b| b.map(|b| a.max(b)))?])
            };
            let both = unit(0).zip(unit(1));
            [0, 1].map(|end| both.map(|(deg, mm)| [deg[end], mm[end]]))
        });
        let status = lines.iter().map(|l| l.status).find(|s| *s != Status::Ok).unwrap_or(Status::Ok);
        (lines.len() > 1).then(|| Self {
            name: "dataset".into(),
            error: None,
            unit: "",
            crossing: range(|l| l.crossing),
            half: range(|l| l.half),
            other: range(|l| l.other),
            turn: range(|l| l.turn),
            moved,
            shift: most(|l| l.shift),
            left: most(|l| l.left),
            sensitivity: None,
            status,
        })
    }

    fn cells(&self) -> Vec<Cell> {
        vec![
            self.name.clone().into(),
            self.error.into(),
            unit_cell(self.unit),
            self.crossing[0].into(),
            self.crossing[1].into(),
            self.half[0].into(),
            self.half[1].into(),
            self.shift.into(),
            self.turn[0].map_or(Cell::Empty, clean),
            self.turn[1].map_or(Cell::Empty, clean),
            self.left.map_or(Cell::Empty, clean),
        ]
    }

    fn sensitivity_cells(&self) -> [Cell; SENSITIVITIES.len()] {
        [
            self.name.clone().into(),
            unit_cell(self.unit),
            self.sensitivity.into(),
            self.other[0].into(),
            self.other[1].into(),
        ]
    }

    /// Rows of [`SHIFTS`].
    fn shift_cells(&self) -> impl Iterator<Item = [Cell; SHIFTS.len()]> {
        MOVING.iter().zip(self.moved).map(|(what, [low, high])| {
            let cell = |end: Option<[f64; 2]>, unit: usize| end.map_or(Cell::Empty, |end| clean(end[unit]));
            let name = self.name.clone().into();
            [name, (*what).into(), cell(low, 0), cell(high, 0), cell(low, 1), cell(high, 1)]
        })
    }

    /// How far some of what [`MOVING`] names move, in words.
    fn moved_words(&self, moving: &[usize]) -> Vec<String> {
        let both = |ends: [Option<[f64; 2]>; 2], unit: usize, decimals: usize| {
            ends.map(|end| end.map_or_else(|| "none".to_string(), |end| fixed(end[unit], decimals)))
                .join(" .. ")
        };
        let each = |what: &usize| [both(self.moved[*what], 0, 3), both(self.moved[*what], 1, 1)];
        std::iter::once(self.name.clone()).chain(moving.iter().flat_map(each)).collect()
    }

    fn words(&self, crossings: bool) -> Vec<String> {
        let both = |values: [Option<f64>; 2], decimals: usize| {
            values.map(|v| v.map_or_else(|| "none".to_string(), |v| fixed(v, decimals))).join(" .. ")
        };
        let error = self.error.map_or(String::new(), |e| format!("+-{} {}", rounded(e, 4), self.unit));
        let turn = |v: Option<f64>| v.map_or_else(|| "none".to_string(), |v| signed(v, 2));
        vec![
            self.name.clone(),
            error,
            if crossings { both(self.crossing, 3) } else { "-".into() },
            both(self.half, 3),
            or_dash(self.shift, 1),
            format!("{} .. {}", turn(self.turn[0]), turn(self.turn[1])),
            or_dash(self.left, 3),
            self.sensitivity.map_or("-".into(), |s| format!("{} deg/{}", signed(s, 3), self.unit)),
        ]
    }
}

fn unit_cell(unit: &'static str) -> Cell {
    if unit.is_empty() { Cell::Empty } else { unit.into() }
}

/// A turn that is zero by design is not 1e-11.
fn clean(value: f64) -> Cell {
    Cell::from(if value.abs() < 1e-6 { 0.0 } else { value })
}

fn lines(finding: &Finding<'_>) -> Vec<Line> {
    let target = finding.bench.target;
    let own = finding.contributions.iter().filter(|c| !matches!(c.origin, Origin::Dataset(_)));
    own.map(|c| Line::of(c, target)).chain(Line::over_datasets(finding.contributions, target)).collect()
}

fn extrapolated(bench: &Bench) -> bool {
    let photons = bench.photons;
    [photons.pump, photons.signal, photons.idler].iter().any(|w| bench.crystal.extrapolates(*w))
}

/// Contributions, data sets and chances.
#[must_use]
pub fn tables(finding: &Finding<'_>) -> Vec<Table> {
    let extrapolated = extrapolated(finding.bench);
    let mut table = Table::new("tolerance", &COLUMNS);
    let mut more = Table::new("sensitivities", &SENSITIVITIES);
    let mut shifts = Table::new("shifts", &SHIFTS);
    for line in lines(finding) {
        table.push(&line.cells(), extrapolated, line.status);
        more.push(&line.sensitivity_cells(), extrapolated, line.status);
        line.shift_cells().for_each(|cells| shifts.push(&cells, extrapolated, line.status));
    }
    let mut sets = Table::new("datasets", &DATASETS);
    for contribution in finding.contributions {
        let id = match &contribution.origin {
            Origin::AsOrdered => finding.bench.crystal.set().id.clone(),
            Origin::Dataset(id) => id.clone(),
            Origin::Cause(_) => continue,
        };
        let line = Line::of(contribution, finding.bench.target);
        let values = [line.crossing[0], line.half[0], line.other[0], line.turn[0], line.left];
        let cells: Vec<Cell> =
            std::iter::once(id.into()).chain(values.map(|v| v.map_or(Cell::Empty, clean))).collect();
        sets.push(&cells, false, line.status);
    }
    vec![table, more, shifts, sets, chances_table(finding)]
}

fn chances_table(finding: &Finding<'_>) -> Table {
    let mut table = Table::new("combined", &CHANCES);
    let chances = finding.chances;
    let mut push = |name: &str, value: Option<f64>| {
        table.push(&[name.into(), value.into()], false, Status::Ok);
    };
    push("samples", Some(chances.count as f64));
    push("seed", Some(finding.seed as f64));
    let angles = ["p2.5", "p16", "p50", "p84", "p97.5"];
    for (index, name) in angles.iter().enumerate() {
        push(&format!("angle_{name}_deg"), chances.angle.map(|a| a[index].to_degrees()));
    }
    push("chance_of_the_angle", Some(chances.has_angle));
    push("chance_of_no_light_untilted", Some(chances.dark));
    push("tilt_limit_deg", Some(Angle::radians(finding.limit).degrees()));
    push("chance_within_tilt_limit", Some(chances.reached));
    for (index, name) in ["p0.5", "p2.5", "p50", "p97.5", "p99.5"].iter().enumerate() {
        push(&format!("retilt_{name}_deg"), chances.turn.map(|t| t[index].to_degrees()));
    }
    table
}

/// One row for each sample.
#[must_use]
pub fn samples_table(bench: &Bench, samples: &[Sample]) -> Table {
    let mut table = Table::new("samples", &SAMPLES);
    for (number, sample) in samples.iter().enumerate() {
        table.count(number);
        table.words(&bench.crystal.material.sets()[sample.dataset].id);
        CAUSES.iter().for_each(|cause| table.number(cause.shown(sample.off.of(*cause))));
        table.maybe(degrees(sample.angle));
        table.maybe(degrees(sample.turn));
        let status = match (sample.has_light(), sample.angle) {
            (false, _) => Status::NoPhaseMatching,
            (true, None) => Status::Apart,
            (true, Some(_)) => Status::Ok,
        };
        table.end(false, status);
    }
    table
}

/// For people.
#[must_use]
pub fn text(setup: &Setup, finding: &Finding<'_>) -> String {
    let Finding { bench, .. } = finding;
    let crystal = &bench.crystal;
    let mut out = prose(&format!(
        "{}:{} cut theta {} deg, phi {} deg, {} mm{}; pump {} nm, {}; wanted: {}\n",
        crystal.material.id,
        crystal.set().id,
        rounded(crystal.cut.theta.degrees(), 3),
        rounded(crystal.cut.phi.degrees(), 3),
        rounded(crystal.length.mm(), 3),
        if setup.length_given { "" } else { " (default length)" },
        rounded(bench.photons.pump.nm(), 3),
        setup.interaction,
        target_words(bench.target)
    ));
    let turn = if bench.actuator == Actuator::CrossTilt { "cross tilt" } else { "tilt" };
    out.push_str(&format!(
        "\nOne error at a time, at both ends (degrees outside the crystal; re-tilt by {turn} from the setting)\n"
    ));
    out.push_str(&prose(
        "(shift: the most that rings and crossings move; left over: the most that light is off its place after the re-tilt)\n",
    ));
    let crossings = bench.target.needs_two_rings();
    let rings = bench.ring_polarizations().unwrap_or_default();
    let half_angle = rings.first().map_or_else(|| "half angle".into(), |ring| format!("{ring} half angle"));
    let header =
        ["contribution", "error", "crossing", &half_angle, "shift mm", "re-tilt", "left over", "sensitivity"];
    let all = lines(finding);
    let rows: Vec<Vec<String>> = all.iter().map(|line| line.words(crossings)).collect();
    out.push_str(&grid(&header, &rows));
    out.push_str(
        "\nHow far each moves at minus .. plus the error (a ring: its middle and, on top, its radius; over data sets least \
         .. most)\n",
    );
    let mut moving: Vec<usize> = (0..rings.len()).collect();
    let mut header = vec!["contribution".to_string()];
    for name in &rings {
        header.extend([format!("{name} ring, deg"), "mm".to_string()]);
    }
    if crossings {
        moving.push(2);
        header.extend(["crossing, deg".to_string(), "mm".to_string()]);
    }
    let header: Vec<&str> = header.iter().map(String::as_str).collect();
    let rows: Vec<Vec<String>> = all[1..].iter().map(|line| line.moved_words(&moving)).collect();
    out.push_str(&grid(&header, &rows));
    out.push('\n');
    out.push_str(&prose(&together(finding)));
    out.push_str(&prose(&suggestions(finding)));
    out
}

/// All errors at once.
fn together(finding: &Finding<'_>) -> String {
    let Finding { chances, .. } = finding;
    let how = match finding.spread {
        Spread::Limit => "each error anywhere within its limits",
        Spread::Deviation => "each error a standard deviation",
    };
    let mut out = format!("All together: {} samples, seed {}, {how}.\n", chances.count, finding.seed);
    if let Some([low, l, middle, h, high]) = chances.angle {
        let what = match finding.bench.target {
            Target::Crossing(_) => "crossing",
            Target::Separation(_) => "separation",
            _ => "half angle",
        };
        out.push_str(&format!(
            "  {what} before turning: median {} deg; 68 % within {} .. {}; 95 % within {} .. {} deg\n",
            fixed(middle.to_degrees(), 2),
            fixed(l.to_degrees(), 2),
            fixed(h.to_degrees(), 2),
            fixed(low.to_degrees(), 2),
            fixed(high.to_degrees(), 2)
        ));
        if chances.has_angle < 1.0 {
            out.push_str(&format!("  it exists in {} of the samples\n", percent(chances.has_angle)));
        }
    }
    out.push_str(&format!(
        "  no light at all before turning: {}\n  a turn within +-{} deg reaches the target: {}\n",
        percent(chances.dark),
        rounded(finding.limit.to_degrees(), 3),
        percent(chances.reached)
    ));
    if let Some([low, _, _, _, high]) = chances.turn {
        out.push_str(&format!(
            "  ask the mount for {} .. {} deg about the setting (99 % of the samples)\n",
            signed(low.to_degrees(), 2),
            signed(high.to_degrees(), 2)
        ));
    }
    out
}

fn percent(share: f64) -> String {
    let percent = 100.0 * share;
    let decimals = if percent > 0.0 && percent < 1.0 || percent > 99.0 && percent < 100.0 { 2 } else { 1 };
    format!("{} %", rounded(percent, decimals))
}

fn suggestions(finding: &Finding<'_>) -> String {
    let Finding { advice, bench, chances, .. } = finding;
    let mut out = String::from("\n");
    if bench.turn.is_none() {
        out.push_str(
            "No turn brings this crystal to the target, so no tolerance helps: `twincone cut` says which cut has it.\n",
        );
        return out;
    }
    if let Some((cause, turn)) = advice.most_turn.filter(|(_, t)| *t > 1e-4) {
        out.push_str(&format!(
            "Most of the turning is asked for by {}: {} deg. ",
            cause.name().replace('_', " "),
            fixed(turn.to_degrees(), 2)
        ));
        out.push_str(match turn <= finding.limit {
            true => "The mount repairs that, so a tighter tolerance there buys light on the first day and nothing later. ",
            false => "That is beyond the mount: pay for this tolerance, or for a mount that turns further. ",
        });
    }
    if let Some((cause, left)) = advice.most_left.filter(|(_, l)| *l > 1e-4) {
        out.push_str(&format!(
            "What turning cannot repair comes most from {}: {} deg is left, {} mm on the screen. \
             That is the tolerance to pay for.",
            cause.name().replace('_', " "),
            fixed(left.to_degrees(), 3),
            fixed(left.tan() * bench.screen.mm(), 1)
        ));
    } else {
        out.push_str("Turning repairs every one of these errors: pay for none of them.");
    }
    out.push('\n');
    match (advice.shift_theta, &finding.shifted) {
        (Some(shift), Some(shifted)) => {
            let theta = bench.crystal.cut.theta.degrees() + shift.to_degrees();
            let way = if shift > 0.0 { "high" } else { "low" };
            out.push_str(&format!(
                "Order the cut a little {way}: theta {} deg instead of {} deg leaves {} of the samples dark before turning \
                 instead of {}, and the mount turns by {} deg in the middle case ({}).\n",
                fixed(theta, 2),
                fixed(bench.crystal.cut.theta.degrees(), 2),
                percent(shifted.dark),
                percent(chances.dark),
                shifted.turn.map_or("-".into(), |t| signed(t[2].to_degrees(), 2)),
                shifted.turn.map_or("-".into(), |t| room_words(
                    &bench.crystal,
                    bench.actuator,
                    Angle::radians(t[2])
                ))
            ));
        }
        _ if advice.shift_theta.is_some() => {
            out.push_str("Another theta would not leave fewer samples dark.\n");
        }
        _ => out.push_str("No need to order the cut high or low: nearly every sample shows light at once.\n"),
    }
    out
}
