//! `tilt`: how far do I turn?

use approx::assert_abs_diff_eq;

use crate::run::{assert_ends_with_conventions, assert_says, twincone, twincone_with};
use crate::table::{Table, assert_json};

const COLUMNS: &str = "solution, crystal_tilt_deg, crystal_cross_tilt_deg, turn_deg, theta_inside_deg, phi_inside_deg, \
     half_angle_deg, crossing_deg, separation_deg, stage_reading_deg, stage_turns";

/// A crystal cut a little too flat for crossings of 3 deg.
const BBO: &str = "-m bbo:kato-1986 -p 405nm --theta 42.4deg --phi 0deg";

/// A crystal cut in its XY plane, where tilt acts in second order only.
const KTP: &str = "-m ktp:kato-2002 -p 532nm --theta 90deg --phi 30deg";

fn tilt(options: &str) -> Table {
    Table::read(&twincone(&format!("tilt {options} -f csv")).answer())
}

#[test]
fn the_answer_is_confirmed_by_cones() {
    let table = tilt(&format!("{BBO} --crossing 3deg"));
    table.assert_columns(COLUMNS);
    assert_eq!(table.cell(0, "solution"), "1");
    assert_eq!(table.cell(0, "crystal_cross_tilt_deg"), "0");
    assert_abs_diff_eq!(table.number(0, "theta_inside_deg"), 42.543, epsilon = 0.002);
    table.assert_empty(0, &["stage_reading_deg", "stage_turns"]);
    let turned = table.cell(0, "crystal_tilt_deg");
    let asked = format!("cones {BBO} --tilt {turned}deg --rows crossings -f csv");
    let cones = Table::read(&twincone(&asked).answer());
    assert_abs_diff_eq!(cones.number(0, "a_polar_deg"), 3.0, epsilon = 1e-6);
    assert_abs_diff_eq!(cones.number(0, "separation_deg"), table.number(0, "separation_deg"), epsilon = 1e-6);
}

#[test]
fn every_target_is_met() {
    for (target, column, wanted) in [
        ("--crossing 2.5deg", "crossing_deg", 2.5),
        ("--separation 5deg", "separation_deg", 5.0),
        ("--half-angle 4deg --type II", "half_angle_deg", 4.0),
    ] {
        let table = tilt(&format!("{BBO} {target}"));
        assert_abs_diff_eq!(table.number(0, column), wanted, epsilon = 1e-6);
    }
    assert_eq!(tilt(&format!("{BBO} --beamlike")).column("crossing_deg"), [""]);
}

/// Rings that touch have a crossing: the point where they do, here along the pump.
#[test]
fn rings_that_touch_are_said_to_touch() {
    let table = tilt(&format!("{BBO} --touching"));
    assert_eq!(table.cell(0, "status"), "touching");
    assert_abs_diff_eq!(table.number(0, "crossing_deg"), 0.0, epsilon = 1e-3);
}

#[test]
fn text_and_json_say_the_same() {
    let asked = format!("{BBO} --crossing 3deg");
    let table = tilt(&asked);
    let json = twincone(&format!("tilt {asked} -f json")).answer();
    assert_json(&json, "tilt", &[("tilt", &table)]);
    let text = twincone(&format!("tilt {asked}")).answer();
    assert_says(
        &text,
        &["turned: tilt", "+0.233", "turn the mount counterclockwise seen from above by 0.233 deg"],
    );
    assert_ends_with_conventions(
        &text,
        "0.233",
        &["eimerl-1987 -0.386", "tamosauskas-2018 -0.079", "zhang-2000"],
    );
}

#[test]
fn tilt_says_where_the_mount_stands_now() {
    let from_zero = tilt(&format!("{BBO} --crossing 3deg"));
    let from_one = tilt(&format!("{BBO} --crossing 3deg --tilt 1deg"));
    let setting = from_zero.number(0, "crystal_tilt_deg");
    assert_abs_diff_eq!(from_one.number(0, "crystal_tilt_deg"), setting, epsilon = 1e-9);
    assert_abs_diff_eq!(from_one.number(0, "turn_deg"), setting - 1.0, epsilon = 1e-9);
    let text = twincone(&format!("tilt {BBO} --crossing 3deg --tilt 1deg")).answer();
    assert_says(&text, &["now at tilt 1 deg", "turn the mount clockwise seen from above by 0.767 deg"]);
}

#[test]
fn an_xy_plane_cut_is_turned_by_cross_tilt_and_says_so() {
    let asked = format!("{KTP} --crossing 2deg");
    let table = tilt(&asked);
    assert_eq!(table.cell(0, "crystal_tilt_deg"), "0");
    assert_abs_diff_eq!(table.number(0, "theta_inside_deg"), 90.0, epsilon = 1e-9);
    let turned = table.cell(0, "crystal_cross_tilt_deg");
    let text = twincone(&format!("tilt {asked}")).answer();
    assert_says(&text, &["turned: cross tilt (chosen", "Other data sets for the cross tilt in deg"]);
    let cones = Table::read(
        &twincone(&format!("cones {KTP} --cross-tilt {turned}deg --rows crossings -f csv")).answer(),
    );
    assert_abs_diff_eq!(cones.number(0, "a_polar_deg"), 2.0, epsilon = 1e-6);
}

#[test]
fn the_turn_can_be_named() {
    let by_tilt = tilt(&format!("{BBO} --crossing 3deg --by tilt"));
    by_tilt.assert_columns(COLUMNS);
    assert_eq!(
        by_tilt.cell(0, "crystal_tilt_deg"),
        tilt(&format!("{BBO} --crossing 3deg")).cell(0, "crystal_tilt_deg")
    );
    let by_cross = twincone(&format!("tilt {KTP} --crossing 2deg --by cross-tilt")).answer();
    assert_says(&by_cross, &["turned: cross tilt\n"]);
}

#[test]
fn the_column_of_pump_or_temperature_leads() {
    let by_pump = tilt(&format!("{BBO} --crossing 3deg --by pump"));
    by_pump.assert_columns(&format!("pump_wavelength_nm, {COLUMNS}"));
    let pump = by_pump.cell(0, "pump_wavelength_nm");
    let asked = format!("cones {BBO} --pump {pump}nm --rows crossings -f csv").replace("-p 405nm", "");
    let cones = Table::read(&twincone(&asked).answer());
    assert_abs_diff_eq!(cones.number(0, "a_polar_deg"), 3.0, epsilon = 1e-6);
    let nearly = BBO.replace("42.4deg", "42.53deg");
    let by_temperature = tilt(&format!("{nearly} --crossing 3deg --by temperature"));
    by_temperature.assert_columns(&format!("crystal_temperature_degc, {COLUMNS}"));
    let celsius = by_temperature.cell(0, "crystal_temperature_degc");
    let asked = format!("cones {nearly} --temperature {celsius}degC --rows crossings -f csv");
    let cones = Table::read(&twincone(&asked).answer());
    assert_abs_diff_eq!(cones.number(0, "a_polar_deg"), 3.0, epsilon = 1e-6);
    assert_eq!(by_temperature.cell(0, "turn_deg"), "");
}

/// A job with a mount whose scale reads 3.2 deg at back-reflection.
fn staged(reversed: bool) -> String {
    format!(
        r#"
        [pump]
        wavelength = "405 nm"
        [crystal]
        material = "bbo"
        dataset = "kato-1986"
        cut = {{ theta = "42.4 deg", phi = "0 deg" }}
        [stage]
        zero = "3.2 deg"
        per_turn = "5 mrad"
        reversed = {reversed}
    "#
    )
}

fn tilt_staged(reversed: bool) -> Table {
    Table::read(&twincone_with(&staged(reversed), "tilt -j - --crossing 3deg -f csv").answer())
}

#[test]
fn a_stage_turns_degrees_into_readings() {
    let table = tilt_staged(false);
    let (setting, turn) = (table.number(0, "crystal_tilt_deg"), table.number(0, "turn_deg"));
    assert_abs_diff_eq!(table.number(0, "stage_reading_deg"), 3.2 + setting, epsilon = 1e-9);
    assert_abs_diff_eq!(table.number(0, "stage_turns"), turn.to_radians() / 5e-3, epsilon = 1e-9);
    assert_abs_diff_eq!(tilt_staged(true).number(0, "stage_reading_deg"), 3.2 - setting, epsilon = 1e-9);
}

/// Turns of the screw count the way the scale counts.
#[test]
fn a_reversed_stage_is_turned_backwards() {
    let table = tilt_staged(true);
    let change_of_reading = table.number(0, "stage_reading_deg") - 3.2;
    assert_abs_diff_eq!(
        table.number(0, "stage_turns"),
        change_of_reading.to_radians() / 5e-3,
        epsilon = 1e-9
    );
}

#[test]
fn the_half_angle_of_a_collinear_cut() {
    let asked = "-m bbo:kato-1986 -p 405nm --theta 28.8deg --phi 90deg --half-angle 3.010deg";
    let table = tilt(asked);
    assert_abs_diff_eq!(table.number(0, "crystal_tilt_deg"), 0.73, epsilon = 0.002);
    assert_says(&twincone(&format!("tilt {asked}")).answer(), &["type I"]);
}

#[test]
fn no_turn_is_told_with_what_there_is_now_and_what_else_to_try() {
    let told = twincone(&format!("tilt {BBO} --crossing 3deg --by temperature")).no_solution();
    assert_says(
        &told,
        &["no temperature from -50 degC to 300 degC", "the crossing is 2.703 deg now", "--by"],
    );
    let far = BBO.replace("42.4deg", "10deg");
    assert_says(
        &twincone(&format!("tilt {far} --crossing 3deg")).no_solution(),
        &["within 30 deg", "--by", "twincone cut"],
    );
}

#[test]
fn targets_that_cannot_be_are_refused() {
    assert_says(&twincone(&format!("tilt {BBO}")).refusal(2), &["no target: pass --crossing", "--touching"]);
    let refusal = twincone(&format!("tilt {BBO} --type I --crossing 3deg")).refusal(2);
    assert_says(&refusal, &["opposite polarization", "--type II", "--half-angle"]);
    assert_says(
        &twincone(&format!("tilt {BBO} --crossing 3nm")).refusal(2),
        &["--crossing", "not a unit of an angle"],
    );
}
