//! `tolerance`: what errors cost and what turning repairs.

use std::fmt::Write as _;
use std::fs;

use approx::assert_abs_diff_eq;
use tempfile::TempDir;

use crate::run::{assert_says, twincone, twincone_in};
use crate::table::Table;

const COLUMNS: &str = "contribution, error, error_unit, crossing_low_deg, crossing_high_deg, half_angle_low_deg, \
     half_angle_high_deg, shift_mm, retilt_low_deg, retilt_high_deg, left_over_deg";

/// Type I, cut for a cone of 3 deg.
const CONE: &str = "tolerance -m bbo:kato-1986 -p 405nm --half-angle 3deg --length 1mm";
/// Type II, cones that cross at 3 deg.
const CROSSED: &str = "tolerance -m bbo:kato-1986 -p 405nm --crossing 3deg --length 1mm";

fn table(line: &str) -> Table {
    Table::read(&twincone(&format!("{line} -f csv")).answer())
}

fn row(table: &Table, contribution: &str) -> usize {
    table.column("contribution").iter().position(|c| *c == contribution).expect("the contribution")
}

/// Half a degree less gives no cone, half a degree more one of 4.45 deg; 0.83 deg of tilt repairs either; the cone moves
/// by 0.25 deg per nm of pump. Computed by two other programs from the same coefficients, to the digits given.
#[test]
fn a_catalogue_cut_is_repaired_by_tilting() {
    let table = table(CONE);
    table.assert_columns(COLUMNS);
    let theta = row(&table, "theta");
    table.assert_empty(theta, &["crossing_low_deg", "crossing_high_deg", "half_angle_low_deg", "shift_mm"]);
    assert_eq!(table.cell(theta, "status"), "no_phase_matching");
    assert_abs_diff_eq!(table.number(theta, "half_angle_high_deg"), 4.45, epsilon = 0.005);
    assert_abs_diff_eq!(table.number(theta, "retilt_low_deg"), 0.83, epsilon = 0.005);
    assert_abs_diff_eq!(table.number(theta, "retilt_high_deg"), -0.83, epsilon = 0.005);
    let pump = row(&table, "pump_wavelength");
    let per_nm = (table.number(pump, "half_angle_high_deg") - table.number(pump, "half_angle_low_deg")) / 4.0;
    assert_abs_diff_eq!(per_nm, 0.25, epsilon = 0.01);
}

/// Each ring and the crossings move by what `cones` says of both settings, and the largest of them is `shift_mm`.
#[test]
fn each_ring_moves_by_what_cones_says() {
    let crystal = "-m bbo:kato-1986 -p 405nm --phi 0deg --length 1mm";
    let answer = twincone(&format!(
        "tolerance {crystal} --crossing 3deg --theta 42.541deg --theta-error 0.3deg -f json"
    ))
    .answer();
    let answer: serde_json::Value = serde_json::from_str(&answer).expect("JSON");
    let table = |name: &str| answer[name].as_array().expect("a table").clone();
    let number = |value: &serde_json::Value| value.as_f64().expect("a number");
    let shift = |what: &str, column: &str| {
        let of = |row: &serde_json::Value| row["contribution"] == "theta" && row["what"] == what;
        number(&table("shifts").into_iter().find(of).expect("a row")[column])
    };
    let rings = |theta: &str| {
        Table::read(&twincone(&format!("cones {crystal} --theta {theta} --rows rings -f csv")).answer())
    };
    let (from, low, high) = (rings("42.541deg"), rings("42.241deg"), rings("42.841deg"));
    for (end, to) in [("low", &low), ("high", &high)] {
        for (what, polarization) in [("signal_ring", "e"), ("other_ring", "o")] {
            let at = |table: &Table, column: &str| {
                let row =
                    table.column("polarization").iter().position(|p| *p == polarization).expect("a ring");
                table.number(row, column)
            };
            let change = |column: &str| at(to, column) - at(&from, column);
            // axes move along x alone
            let deg = change("axis_h_deg").abs() + change("half_angle_deg").abs();
            let mm = change("x_mm").abs() + change("radius_mm").abs();
            assert_abs_diff_eq!(shift(what, &format!("shift_{end}_deg")), deg, epsilon = 1e-9);
            assert_abs_diff_eq!(shift(what, &format!("shift_{end}_mm")), mm, epsilon = 1e-8);
        }
    }
    let most = ["signal_ring", "other_ring", "crossing"]
        .iter()
        .flat_map(|what| ["shift_low_mm", "shift_high_mm"].map(|end| shift(what, end)))
        .fold(0.0, f64::max);
    let theta = table("tolerance").into_iter().find(|row| row["contribution"] == "theta").expect("a row");
    assert_abs_diff_eq!(number(&theta["shift_mm"]), most, epsilon = 1e-9);
}

/// The ends of an error are what `cones` and `tilt` say of a crystal that is off by it.
#[test]
fn both_ends_are_confirmed_by_other_commands() {
    let table = table(&format!("{CROSSED} --theta 42.541deg --theta-error 0.3deg"));
    let theta = row(&table, "theta");
    for (cut, end) in [("42.241deg", "low"), ("42.841deg", "high")] {
        let crystal = format!("-m bbo:kato-1986 -p 405nm --theta {cut}");
        let cones = Table::read(&twincone(&format!("cones {crystal} --rows crossings -f csv")).answer());
        let crossing = table.number(theta, &format!("crossing_{end}_deg"));
        assert_abs_diff_eq!(cones.number(0, "a_polar_deg"), crossing, epsilon = 1e-9);
        let tilt = Table::read(&twincone(&format!("tilt {crystal} --crossing 3deg -f csv")).answer());
        let turn = table.number(theta, &format!("retilt_{end}_deg"));
        assert_abs_diff_eq!(tilt.number(0, "turn_deg"), turn, epsilon = 1e-6);
    }
}

#[test]
fn the_same_seed_gives_the_same_numbers_on_any_number_of_threads() {
    let line = |more: &str| twincone(&format!("{CROSSED} --samples 3000 -f json {more}")).answer();
    let one = line("--seed 7 --threads 1");
    assert_eq!(one, line("--seed 7 --threads 3"));
    assert_ne!(one, line("--seed 8 --threads 3"));
}

/// Every sample is what `run` finds at its deviations; so are the percentiles, since they are made of the samples.
#[test]
fn samples_agree_with_a_sweep_over_them() {
    let folder = TempDir::new().expect("a folder");
    let asked = format!(
        "{CROSSED} --theta 42.541deg --temperature-error 0K --samples 60 --seed 3 --write-samples s.csv -f json"
    );
    let json: serde_json::Value =
        serde_json::from_str(&twincone_in(folder.path(), &asked).answer()).expect("JSON");
    let samples = Table::read(&fs::read_to_string(folder.path().join("s.csv")).expect("the samples"));
    fs::write(folder.path().join("job.toml"), sweep(&samples)).expect("a file");
    let swept = Table::read(&twincone_in(folder.path(), "run job.toml -q").answer());
    assert_eq!(swept.len(), samples.len());
    let mut angles = Vec::new();
    for n in 0..samples.len() {
        let mean = 0.5 * (swept.number(n, "a_polar_deg") + swept.number(n, "b_polar_deg"));
        assert_abs_diff_eq!(samples.number(n, "angle_deg"), mean, epsilon = 1e-7);
        angles.push(mean);
    }
    angles.sort_by(f64::total_cmp);
    let median = 0.5 * (angles[29] + angles[30]);
    let said = json["combined"].as_array().expect("rows").iter().find(|r| r["quantity"] == "angle_p50_deg");
    let said = said.and_then(|r| r["value"].as_f64()).expect("the median");
    assert_abs_diff_eq!(said, median, epsilon = 1e-7);
}

/// A job that visits each sample's deviations.
fn sweep(samples: &Table) -> String {
    let mut out = String::from(
        "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\ndataset = \"kato-1986\"\n\
         cut = { theta = \"42.541 deg\", phi = \"0 deg\" }\n[sweep]\nreport = \"crossings\"\naxes = [ { together = [\n",
    );
    let axes = [
        ("crystal.cut.theta", "theta_off_deg", 42.541, 1.0, "deg"),
        ("pump.wavelength", "pump_wavelength_off_nm", 405.0, 1.0, "nm"),
        ("crystal.tilt", "tilt_setting_off_deg", 0.0, 1.0, "deg"),
        ("crystal.roll", "roll_off_deg", 0.0, 1.0, "deg"),
        ("mount.about_y", "pump_direction_h_off_deg", 0.0, -1.0, "deg"),
        ("mount.about_x", "pump_direction_v_off_deg", 0.0, 1.0, "deg"),
    ];
    for (key, column, from, sign, unit) in axes {
        let values: Vec<String> = (0..samples.len())
            .map(|n| format!("\"{} {unit}\"", from + sign * samples.number(n, column)))
            .collect();
        writeln!(out, "{{ key = \"{key}\", values = [{}] }},", values.join(", ")).expect("a text");
    }
    let sets: Vec<String> =
        (0..samples.len()).map(|n| format!("\"{}\"", samples.cell(n, "crystal_dataset"))).collect();
    writeln!(out, "{{ key = \"crystal.dataset\", values = [{}] }},\n] }} ]", sets.join(", "))
        .expect("a text");
    out
}

#[test]
fn the_text_names_what_to_pay_for() {
    let text = twincone(CONE).answer();
    assert_says(
        &text,
        &[
            "no light at all before turning",
            "ask the mount for",
            "Most of the turning is asked for by theta: 0.83 deg",
            "That is the tolerance to pay for",
            "Order the cut a little high",
            "limits",
        ],
    );
    let calm =
        twincone(&format!("{CROSSED} --roll-error 0deg --pump-direction-error 0deg --samples 100")).answer();
    assert_says(&calm, &["Turning repairs every one of these errors"]);
}

/// Near collinear a cone grows as a square root: nothing on one side, much on the other.
#[test]
fn collinear_cuts_are_answered_at_both_ends() {
    let table = table("tolerance -m bbo:kato-1986 -p 405nm --collinear --type I --length 1mm --samples 100");
    let theta = row(&table, "theta");
    assert_eq!(table.cell(theta, "half_angle_low_deg"), "");
    assert!(table.number(theta, "half_angle_high_deg") > 3.0);
    assert_abs_diff_eq!(table.number(theta, "retilt_low_deg"), 0.83, epsilon = 0.01);
}

/// A stack is refused in this command's own name.
#[test]
fn several_crystals_are_refused() {
    let folder = TempDir::new().expect("a folder");
    let crystal = "[[crystal]]\nmaterial = \"bbo\"\nlength = \"1 mm\"\ncut = { theta = \"29 deg\", phi = \"90 deg\" }\n";
    let job = format!("[pump]\nwavelength = \"405 nm\"\n{crystal}{crystal}[emission]\ntype = \"I\"\n");
    fs::write(folder.path().join("two.toml"), job).expect("a file");
    let said = twincone_in(folder.path(), "tolerance -j two.toml --half-angle 3deg").refusal(2);
    assert_says(&said, &["`tolerance` looks at one"]);
}

#[test]
fn nonsense_is_refused() {
    for (options, why) in [
        ("--theta-error 0.5", "deg"),
        ("--theta-error=-1deg", "a size from 0"),
        ("--pump-error 3deg", "--pump-error"),
        ("--temperature-error 2", "write 2K"),
        ("--tilt-limit far", "--tilt-limit"),
    ] {
        let said = twincone(&format!("{CROSSED} {options}")).refusal(2);
        assert_says(&said, &[why]);
    }
    assert_says(&twincone("tolerance -m bbo -p 405nm --theta 42deg").refusal(2), &["no target"]);
    assert_says(&twincone("tolerance -m bbo -p 405nm --beamlike --length 1mm").refusal(2), &["--crossing"]);
}
