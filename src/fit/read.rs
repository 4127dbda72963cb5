//! Measurements from a table: the columns that sweeps write, and those a person fills in.

use std::collections::HashMap;

use nalgebra::Vector2;
use thiserror::Error;

use super::measured::{Label, Measurement, Seen, Settings};
use crate::columns::Columns;
use crate::matching::Landing;
use crate::optics::Polarization;
use crate::quantity::Wavelength;

/// A table that cannot be read, with the place and the remedy.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[error("{0}")]
pub struct FileError(pub String);

/// A table to fill in.
pub const TEMPLATE: &str = "\
# One measurement a line; leave cells empty that you do not know. Lines that begin with # are not read.
# crystal_tilt_deg: what the mount shows, counted from where you believe zero is; or stage_reading_deg: what its scale
# shows, with the back-reflection at stage.zero. photon: signal or idler;
# polarization: o, e, fast or slow; what: ring, edge (a point on a ring) or crossing.
# x_mm, y_mm: from where the undeviated pump hits, seen from downstream (+x right, +y up); radius_mm of a ring;
# sigma_mm: standard deviation of these. Angles instead: h_deg, v_deg, half_angle_deg, sigma_deg.
crystal_tilt_deg,what,photon,polarization,wavelength_nm,x_mm,y_mm,radius_mm,sigma_mm
-1,ring,,e,810,58.2,0.1,70.6,0.5
-1,ring,,o,810,-58.0,-0.2,70.3,0.5
0,ring,,e,810,59.3,0.2,79.6,0.5
0,crossing,,,810,-0.1,52.4,,0.5
1,edge,,o,810,-61.1,88.2,,0.5
";

/// A row by the names of its columns.
struct Row<'a> {
    line: usize,
    /// Names of the job's crystals.
    crystals: &'a [String],
    cells: HashMap<&'a str, String>,
    decimal_comma: bool,
}

impl Row<'_> {
    fn text(&self, column: &str) -> Option<&str> {
        self.cells.get(column).map(|cell| cell.trim()).filter(|cell| !cell.is_empty())
    }

    fn fault(&self, message: &str) -> FileError {
        FileError(format!("line {}: {message}", self.line))
    }

    fn number(&self, column: &str) -> Result<Option<f64>, FileError> {
        let Some(text) = self.text(column) else { return Ok(None) };
        let plain = if self.decimal_comma { text.replace(',', ".") } else { text.to_string() };
        let plain = plain.replace('\u{2212}', "-");
        match plain.parse::<f64>() {
            Ok(value) if value.is_finite() => Ok(Some(value)),
            _ => Err(self.fault(&format!(
                "{column} is `{text}`, which is no number; the unit stands in the name of the column"
            ))),
        }
    }

    /// A setting of the crystal that a row is about: of its own column where there is one, such as crystal_2_tilt_deg.
    fn of_crystal(&self, crystal: Option<usize>, what: &str) -> Result<Option<f64>, FileError> {
        let index = crystal.unwrap_or(0);
        let number = format!("crystal_{}_{what}", index + 1);
        let name =
            self.crystals.get(index).map(|name| format!("crystal_{}_{what}", name.to_ascii_lowercase()));
        for column in [Some(number), name].into_iter().flatten() {
            if let Some(value) = self.number(&column)? {
                return Ok(Some(value));
            }
        }
        self.number(&format!("crystal_{what}"))
    }

    fn pair(&self, x: &str, y: &str) -> Result<Option<Vector2<f64>>, FileError> {
        match (self.number(x)?, self.number(y)?) {
            (Some(x), Some(y)) => Ok(Some(Vector2::new(x, y))),
            (None, None) => Ok(None),
            (Some(_), None) => {
                Err(self.fault(&format!("{x} has a value and {y} has none; give both or neither")))
            }
            (None, Some(_)) => {
                Err(self.fault(&format!("{y} has a value and {x} has none; give both or neither")))
            }
        }
    }
}

/// Columns that hold measurements.
const MEASURED: [&str; 16] = [
    "x_mm",
    "y_mm",
    "radius_mm",
    "axis_h_deg",
    "axis_v_deg",
    "h_deg",
    "v_deg",
    "half_angle_deg",
    "a_x_mm",
    "a_y_mm",
    "b_x_mm",
    "b_y_mm",
    "a_h_deg",
    "a_v_deg",
    "b_h_deg",
    "b_v_deg",
];

/// Reads a table of a job whose crystals have these names, in the pump's order. Commas, or semicolons with decimal commas, or tabs; rows whose `status` says that there is nothing are
/// passed over.
///
/// # Errors
/// What cannot be read, with its line; a table without measurements.
pub fn read(text: &str, crystals: &[String]) -> Result<Vec<Measurement>, FileError> {
    let mut table = Columns::open(text).map_err(FileError)?;
    let names = std::mem::take(&mut table.names);
    let decimal_comma = table.decimal_comma;
    check_names(&names)?;
    let mut all = Vec::new();
    for record in table.records() {
        let (line, record) = record.map_err(FileError)?;
        let cells = names.iter().map(String::as_str).zip(record.iter().map(String::from)).collect();
        let row = Row { line, crystals, cells, decimal_comma };
        measurements(&row, &mut all)?;
    }
    if all.is_empty() {
        return Err(FileError(
            "no line holds a measurement; `twincone fit --template` prints a table to fill in".into(),
        ));
    }
    Ok(all)
}

/// Finds columns that look like measurements in a unit that is not read.
fn check_names(names: &[String]) -> Result<(), FileError> {
    for name in names {
        let stem = |s: &str| s.rsplit_once('_').map_or(s.to_string(), |(stem, _)| stem.to_string());
        let known = MEASURED.iter().find(|known| stem(known) == stem(name) || stem(known) == *name);
        if let Some(known) = known
            && !MEASURED.contains(&name.as_str())
        {
            return Err(FileError(format!("column {name}: write {known}, converted to that unit")));
        }
    }
    if names.iter().any(|name| MEASURED.contains(&name.as_str())) {
        return Ok(());
    }
    Err(FileError(
        "no column holds measurements (x_mm, y_mm, radius_mm, half_angle_deg, a_x_mm, ...); `twincone fit --template` \
         prints a table to fill in"
            .into(),
    ))
}

fn measurements(row: &Row<'_>, all: &mut Vec<Measurement>) -> Result<(), FileError> {
    let label = label(row)?;
    let settings = Settings {
        tilt: row.of_crystal(label.crystal, "tilt_deg")?,
        reading: row.number("stage_reading_deg")?,
        cross_tilt: row.of_crystal(label.crystal, "cross_tilt_deg")?,
        temperature: row.of_crystal(label.crystal, "temperature_degc")?,
    };
    for turn in [settings.tilt, settings.cross_tilt, settings.reading].into_iter().flatten() {
        if turn.abs() > 60.0 {
            return Err(row.fault(&format!("a turn of {turn} deg: the beam would miss the face")));
        }
    }
    let (in_mm, in_deg) = (positive(row, "sigma_mm")?, positive(row, "sigma_deg")?);
    let before = all.len();
    let mut push = |seen: Seen, label: Label| {
        let sigma = if seen.is_angle() { in_deg } else { in_mm };
        all.push(Measurement { line: row.line, settings, label, seen, sigma });
    };
    for arm in ["a", "b"] {
        let name = |what: &str| format!("{arm}_{what}");
        let label = Label {
            wavelength: wavelength(row, &name("wavelength_nm"))?,
            crystal: label.crystal,
            ..Label::default()
        };
        if let Some(place) = row.pair(&name("x_mm"), &name("y_mm"))? {
            push(Seen::Crossing(place), label);
        } else if let Some(place) = row.pair(&name("h_deg"), &name("v_deg"))? {
            push(Seen::CrossingAngles(place), label);
        }
    }
    if let Some(seen) = ring_or_point(row)? {
        push(seen, label);
    }
    let said_nothing = all.len() == before;
    match row.text("status") {
        None if said_nothing => Err(row.fault("no measurement stands in it; delete the line or fill it in")),
        _ => Ok(()),
    }
}

fn ring_or_point(row: &Row<'_>) -> Result<Option<Seen>, FileError> {
    let (place, radius) = (row.pair("x_mm", "y_mm")?, positive(row, "radius_mm")?);
    let what = row.text("what").map(str::to_ascii_lowercase);
    if place.is_none() && radius.is_none() {
        let axis = row.pair("axis_h_deg", "axis_v_deg")?.or(row.pair("h_deg", "v_deg")?);
        let half_angle = positive(row, "half_angle_deg")?;
        if what.as_deref() == Some("crossing") {
            return Ok(axis.map(Seen::CrossingAngles));
        }
        let any = axis.is_some() || half_angle.is_some();
        return Ok(any.then_some(Seen::Cone { axis, half_angle }));
    }
    match (what.as_deref(), place, radius) {
        (Some("crossing"), Some(place), None) => Ok(Some(Seen::Crossing(place))),
        (Some("ring"), centre, radius) | (None, centre, radius @ Some(_)) => {
            Ok(Some(Seen::Ring { centre, radius }))
        }
        (Some("edge") | None, Some(place), None) => Ok(Some(Seen::Edge(place))),
        (Some(what @ ("edge" | "crossing")), ..) => {
            Err(row.fault(&format!("{what} is a point: it needs x_mm and y_mm and no radius_mm")))
        }
        (Some(other), ..) => Err(row.fault(&format!("what is `{other}`; write ring, edge or crossing"))),
        (None, None, None) => Ok(None),
    }
}

fn positive(row: &Row<'_>, column: &str) -> Result<Option<f64>, FileError> {
    let value = row.number(column)?;
    match value {
        Some(value) if value <= 0.0 => Err(row.fault(&format!("{column} must be above 0, not {value}"))),
        other => Ok(other),
    }
}

fn wavelength(row: &Row<'_>, column: &str) -> Result<Option<Wavelength>, FileError> {
    match row.number(column)? {
        Some(nm) if !(100.0..=20_000.0).contains(&nm) => {
            Err(row.fault(&format!("{column} is {nm} nm: look at the unit")))
        }
        other => Ok(other.map(Wavelength::from_nm)),
    }
}

/// The crystal that a row names, by number or name; rows of crossings name two, which have to be one.
fn crystal(row: &Row<'_>) -> Result<Option<usize>, FileError> {
    if let (Some(first), Some(second)) = (row.text("first_crystal"), row.text("second_crystal"))
        && first != second
    {
        return Err(row.fault(
            "a crossing of two crystals' rings is not fitted: give the rings themselves, a line for each with its crystal",
        ));
    }
    let Some(word) = row.text("crystal").or(row.text("first_crystal")) else { return Ok(None) };
    let named = row.crystals.iter().position(|name| name == word);
    let numbered =
        || word.parse::<usize>().ok().map(|n| n.wrapping_sub(1)).filter(|n| *n < row.crystals.len());
    match named.or_else(numbered) {
        Some(index) => Ok(Some(index)),
        None => Err(row.fault(&format!(
            "there is no crystal `{word}` in the job, which has {}; describe all of them, each in a [[crystal]]",
            row.crystals.join(", ")
        ))),
    }
}

fn label(row: &Row<'_>) -> Result<Label, FileError> {
    let photon = match row.text("photon") {
        None => None,
        Some("signal") => Some(Landing::Signal),
        Some("idler") => Some(Landing::Idler),
        Some(other) => {
            return Err(row.fault(&format!("photon is `{other}`; write signal or idler, or nothing")));
        }
    };
    let polarization = match row.text("polarization") {
        None => None,
        Some("o") => Some(Polarization::Ordinary),
        Some("e") => Some(Polarization::Extraordinary),
        Some("fast") => Some(Polarization::Fast),
        Some("slow") => Some(Polarization::Slow),
        Some(other) => {
            return Err(
                row.fault(&format!("polarization is `{other}`; write o, e, fast or slow, or nothing"))
            );
        }
    };
    Ok(Label { crystal: crystal(row)?, photon, polarization, wavelength: wavelength(row, "wavelength_nm")? })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn one() -> Vec<String> {
        vec!["1".into()]
    }

    /// Each row turns the crystal that it is about.
    #[test]
    fn rows_of_a_stack_name_their_crystal() {
        let both = ["first".to_string(), "second".to_string()];
        let text = "crystal_1_tilt_deg,crystal_second_tilt_deg,crystal,radius_mm\n1,2,first,50\n1,2,2,51\n";
        let all = read(text, &both).expect("a table");
        assert_eq!(all.iter().map(|m| m.label.crystal).collect::<Vec<_>>(), [Some(0), Some(1)]);
        assert_eq!(all.iter().map(|m| m.settings.tilt).collect::<Vec<_>>(), [Some(1.0), Some(2.0)]);
        let said = read("crystal,radius_mm\nthird,50\n", &both).expect_err("no such crystal").0;
        assert!(said.contains("line 2") && said.contains("first, second"), "{said}");
        let met = "first_crystal,second_crystal,a_x_mm,a_y_mm\nfirst,second,1,2\n";
        assert!(read(met, &both).expect_err("two crystals").0.contains("give the rings"));
    }

    #[test]
    fn the_template_reads() {
        let all = read(TEMPLATE, &one()).expect("the template is a table");
        assert_eq!(all.len(), 5);
        assert!(matches!(all[3].seen, Seen::Crossing(_)) && matches!(all[4].seen, Seen::Edge(_)));
    }

    #[test]
    fn semicolons_come_with_decimal_commas() {
        let all = read("crystal_tilt_deg;x_mm;y_mm;radius_mm;sigma_mm\n0,5;1,25;-3;80,5;0,5\n", &one())
            .expect("a table");
        let Seen::Ring { centre: Some(centre), radius: Some(radius) } = all[0].seen else { panic!("a ring") };
        assert_eq!((centre.x, centre.y, radius, all[0].settings.tilt), (1.25, -3.0, 80.5, Some(0.5)));
    }

    #[test]
    fn what_cannot_be_read_is_named() {
        let said = |text: &str| read(text, &one()).expect_err("no table").0;
        assert!(said("x_cm,y_cm,radius_cm\n1,2,3\n").contains("x_mm"));
        assert!(said("x_mm,y_mm,radius_mm\n1,2,80mm\n").contains("line 2"));
        assert!(said("x_mm,y_mm,radius_mm\n1,,80\n").contains("y_mm"));
        assert!(said("x_mm,y_mm,radius_mm\n1,2,-80\n").contains("above 0"));
        assert!(said("x_mm,y_mm,radius_mm\n1,2,80,4\n").contains("line 2: 4 cells"));
        assert!(said("time,mood\n1,2\n").contains("--template"));
        assert!(said("").contains("--template"));
    }
}
