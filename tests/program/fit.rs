//! `fit`: the real bench, read out of what was measured.

use std::fs;

use approx::assert_abs_diff_eq;
use tempfile::TempDir;

use crate::run::{assert_says, twincone, twincone_in, twincone_with};
use crate::table::Table;

const COLUMNS: &str = "parameter, value, uncertainty, unit, prior, prior_uncertainty, at_bound";
/// What was ordered.
const BENCH: &str = "-m bbo:kato-1986 -p 405nm --cut crossing=3deg";

/// Rows of a sweep over a crystal that is not what was ordered.
fn swept(folder: &TempDir, report: &str) -> String {
    let line = format!(
        "run -m bbo:kato-1986 -p 405nm --theta 42.2deg --report {report} --axis crystal.tilt=0deg..2deg/3 -o {report}.csv -q"
    );
    twincone_in(folder.path(), &line).answer();
    format!("{report}.csv")
}

fn value(table: &Table, parameter: &str, column: &str) -> f64 {
    let row = table.column("parameter").iter().position(|p| *p == parameter).expect("the parameter");
    table.number(row, column)
}

#[test]
fn rows_of_sweeps_are_read_as_they_are() {
    let folder = TempDir::new().expect("a folder");
    for report in ["rings", "crossings"] {
        let file = swept(&folder, report);
        let line = format!("fit {file} {BENCH} --sigma 0.5mm --free theta,roll -f csv");
        let table = Table::read(&twincone_in(folder.path(), &line).answer());
        table.assert_columns(COLUMNS);
        // priors draw a little; the rest is exact
        assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "value"), 42.2, epsilon = 1e-3);
        assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "prior"), 42.5408, epsilon = 1e-3);
        assert_eq!(table.column("at_bound"), ["false", "false"]);
    }
}

/// Commas for decimals, angles for lengths, points on rings for rings: the same bench.
#[test]
fn other_forms_of_the_same_measurements_give_the_same_cut() {
    let cone = Table::read(&twincone("cones -m bbo:kato-1986 -p 405nm --theta 42.3deg -f csv").answer());
    let number = |column: &str| cone.number(0, column);
    let (x, y, r) = (number("x_mm"), number("y_mm"), number("radius_mm"));
    let (h, half) = (number("axis_h_deg"), number("half_angle_deg"));
    let comma = |v: f64| format!("{v}").replace('.', ",");
    let forms = [
        format!("x_mm,y_mm,radius_mm,polarization,sigma_mm\n{x},{y},{r},e,0.5\n"),
        format!("x_mm;y_mm;radius_mm;polarization;sigma_mm\n{};{};{};e;0,5\n", comma(x), comma(y), comma(r)),
        format!("axis_h_deg,axis_v_deg,half_angle_deg,polarization,sigma_deg\n{h},0,{half},e,0.03\n"),
        format!("radius_mm,photon,sigma_mm\n{r},signal,0.5\n"),
    ];
    for form in forms {
        let table =
            Table::read(&twincone_with(&form, &format!("fit - {BENCH} --free theta -f csv")).answer());
        assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "value"), 42.3, epsilon = 0.01);
    }
}

/// A scale whose zero is at 3 deg and that runs backwards: 2.5 deg on it is a tilt of half a degree.
#[test]
fn readings_of_the_stage_count_from_its_zero() {
    let cone = "cones -m bbo:kato-1986 -p 405nm --theta 42.3deg --tilt 0.5deg -f csv";
    let radius = Table::read(&twincone(cone).answer()).number(0, "radius_mm");
    let form = format!("stage_reading_deg,radius_mm,polarization,sigma_mm\n2.5,{radius},e,0.5\n");
    let stage = "--set \"stage.zero='3 deg'\" --set stage.reversed=true";
    let line = format!("fit - {BENCH} {stage} --free theta -f csv");
    let table = Table::read(&twincone_with(&form, &line).answer());
    assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "value"), 42.3, epsilon = 0.01);
}

#[test]
fn the_text_says_what_to_set_and_what_is_not_known() {
    let folder = TempDir::new().expect("a folder");
    let file = swept(&folder, "rings");
    let line = format!("fit {file} {BENCH} --sigma 3mm --write-job fitted.toml");
    let text = twincone_in(folder.path(), &line).answer();
    assert_says(
        &text,
        &[
            "This crystal is cut at 42.",
            "Your tilt zero is",
            "for cones that cross 3 deg",
            "The data cannot separate",
            "back-reflection",
            "If the picture is turned by 180 deg and mirrored",
            "--view-turn",
            "Residuals",
        ],
    );
    let cones =
        Table::read(&twincone_in(folder.path(), "cones -j fitted.toml --rows crossings -f csv").answer());
    assert_eq!(cones.len(), 1);
    let job = fs::read_to_string(folder.path().join("fitted.toml")).expect("the job");
    assert_says(&job, &["zero = \""]);
    let known = twincone_in(folder.path(), &format!("{line} --view-turn 0 --mirror no")).answer();
    assert!(!known.contains("If the picture is"), "{known}");
}

#[test]
fn all_data_sets_are_held_against_the_bench() {
    let folder = TempDir::new().expect("a folder");
    let file = swept(&folder, "rings");
    let line = format!("fit {file} {BENCH} --sigma 0.5mm --free theta --all-datasets");
    let text = twincone_in(folder.path(), &line).answer();
    assert_says(&text, &["eimerl-1987: chi-square", "fits this bench best", "zhang-2000"]);
}

#[test]
fn the_template_is_read_back() {
    let template = twincone("fit --template").answer();
    let run = twincone_with(&template, &format!("fit - {BENCH}"));
    assert!(matches!(run.status, 0 | 1), "{run:#?}");
}

#[test]
fn bad_measurements_are_refused_with_what_is_missing() {
    for (text, why) in [
        ("radius_mm,polarization\n80,e\n", "1 measured number for 4 unknowns"),
        ("time,mood\n1,2\n", "--template"),
        ("x_cm,y_cm,radius_cm\n5.9,0,8\n", "x_mm"),
        ("x_mm,y_mm,radius_mm\n59,0,eighty\n", "line 2"),
        ("x_mm,y_mm,radius_mm\n59,0,-80\n", "above 0"),
        ("x_mm,y_mm,radius_mm,polarization\n59,0,80000,e\n58,0,70000,e\n", "look at the unit"),
        ("crystal_tilt_deg,x_mm,y_mm,radius_mm\n300,59,0,80\n", "miss the face"),
        ("x_mm,y_mm,radius_mm,polarization\n59,0,80,h\n", "write o, e, fast or slow"),
        ("x_mm,y_mm,radius_mm,polarization\n59,0,80,fast\n-59,0,80,fast\n", "no such photon"),
        ("", "--template"),
    ] {
        let said = twincone_with(text, &format!("fit - {BENCH}")).refusal(2);
        assert_says(&said, &[why]);
    }
    let ring = "x_mm,y_mm,radius_mm,polarization\n59,0,80,e\n";
    for (options, why) in [
        ("--free mood", "no unknown"),
        ("--free theta --prior zero=1deg", "add it to --free"),
        ("--free theta --prior theta=1mm", "--prior"),
        ("--free theta --sigma 0.5", "--sigma"),
    ] {
        assert_says(&twincone_with(ring, &format!("fit - {BENCH} {options}")).refusal(2), &[why]);
    }
}

/// Centimetres in a column of millimetres: no crystal does that, and the answer does not pretend.
#[test]
fn measurements_that_no_bench_gives_are_no_fit() {
    let text = "crystal_tilt_deg,x_mm,y_mm,radius_mm,polarization,sigma_mm\n0,5.9,0,8,e,0.5\n1,6,0,8.6,e,0.5\n\
                0,-5.9,0,8,o,0.5\n1,-6,0,8.5,o,0.5\n";
    let run = twincone_with(text, &format!("fit - {BENCH}"));
    assert_eq!(run.status, 1, "{run:#?}");
    assert_says(&run.stdout, &["No fit", "units"]);
    let table = Table::read(&twincone_with(text, &format!("fit - {BENCH} -q -f csv")).no_solution());
    assert!(table.column("at_bound").contains(&"true"));
}

#[test]
fn one_tilt_is_said_to_be_one_tilt() {
    let text = "crystal_tilt_deg,x_mm,y_mm,radius_mm,polarization,sigma_mm\n0,59.3,0,80,e,0.5\n0,-59.3,0,79.5,o,0.5\n";
    let said = twincone_with(text, &format!("fit - {BENCH}")).answer();
    assert_says(&said, &["measured at one tilt", "The data cannot separate"]);
}

#[test]
fn frames_need_a_pitch_and_must_be_pictures() {
    let folder = TempDir::new().expect("a folder");
    fs::write(folder.path().join("f.png"), "no picture").expect("a file");
    let asked = |options: &str| twincone_in(folder.path(), &format!("fit --image f.png {BENCH} {options}"));
    assert_says(&asked("").refusal(2), &["--pixel-pitch"]);
    assert_says(&asked("--pixel-pitch 0.5mm").refusal(2), &["no PNG"]);
}
