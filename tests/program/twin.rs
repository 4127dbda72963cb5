//! `twin`: a photon goes this way; where is its partner?

use approx::assert_abs_diff_eq;

use crate::run::{assert_says, twincone};
use crate::table::{Table, assert_json};

const COLUMNS: &str = "process, polarization, h_deg, v_deg, wavelength_nm, partner_polarization, partner_h_deg, \
     partner_v_deg, partner_wavelength_nm, mismatch_rad_per_mm, phase_matching_factor";

const BBO: &str = "-m bbo:eimerl-1987 -p 405nm --theta 42.2deg --phi 0deg --signal 800nm";

fn twin(options: &str) -> Table {
    let table = Table::read(&twincone(&format!("twin {options} -f csv")).answer());
    table.assert_columns(COLUMNS);
    table
}

#[test]
fn the_twin_of_a_crossing_direction_is_its_partner() {
    let crossings = Table::read(&twincone(&format!("cones {BBO} --rows crossings -f csv")).answer());
    for row in 0..crossings.len() {
        let (h, v) = (crossings.cell(row, "a_h_deg"), crossings.cell(row, "a_v_deg"));
        let table = twin(&format!("{BBO} --direction {h}deg,{v}deg"));
        assert_eq!(table.column("process"), ["e -> e + o", "e -> o + e"]);
        assert_eq!(table.column("polarization"), ["e", "o"]);
        assert_eq!(table.column("partner_polarization"), ["o", "e"]);
        for history in 0..2 {
            for angle in ["h_deg", "v_deg"] {
                let partner = table.number(history, &format!("partner_{angle}"));
                assert_abs_diff_eq!(partner, crossings.number(row, &format!("b_{angle}")), epsilon = 1e-9);
            }
            assert_abs_diff_eq!(table.number(history, "mismatch_rad_per_mm"), 0.0, epsilon = 1e-6);
            assert_abs_diff_eq!(table.number(history, "phase_matching_factor"), 1.0, epsilon = 1e-9);
            assert_abs_diff_eq!(
                table.number(history, "partner_wavelength_nm"),
                crossings.number(row, "b_wavelength_nm"),
                epsilon = 1e-9
            );
        }
    }
}

#[test]
fn text_and_json_say_the_same() {
    let asked = format!("{BBO} --direction 0.6deg,3deg");
    let table = twin(&asked);
    let json = twincone(&format!("twin {asked} -f json")).answer();
    assert_json(&json, "twin", &[("twin", &table)]);
    let text = twincone(&format!("twin {asked}")).answer();
    assert_says(
        &text,
        &["A 800 nm photon at h +0.600 deg, v +3.000 deg", "820.253 nm", "Data set bbo:eimerl-1987"],
    );
}

#[test]
fn lengths_mean_a_place_on_the_screen() {
    let place = twin(&format!("{BBO} --distance 0.5m --direction 10mm,-2cm"));
    assert_abs_diff_eq!(place.number(0, "h_deg"), 0.02_f64.atan().to_degrees(), epsilon = 1e-12);
    assert_abs_diff_eq!(place.number(0, "v_deg"), -0.04_f64.atan().to_degrees(), epsilon = 1e-12);
}

#[test]
fn the_wavelength_is_that_of_the_signal_unless_given() {
    assert_eq!(twin(&format!("{BBO} --direction 0deg,3deg")).cell(0, "wavelength_nm"), "800");
    let other = twin(&format!("{BBO} --direction 0deg,3deg --wavelength 810nm"));
    assert_eq!([other.cell(0, "wavelength_nm"), other.cell(0, "partner_wavelength_nm")], ["810", "810"]);
}

#[test]
fn momentum_goes_round_in_a_circle() {
    let there = twin(&format!("{BBO} --direction 1deg,-2deg --wavelength 790nm"));
    let (h, v) = (there.cell(0, "partner_h_deg"), there.cell(0, "partner_v_deg"));
    let wavelength = there.cell(0, "partner_wavelength_nm");
    let back = twin(&format!("{BBO} --direction {h}deg,{v}deg --wavelength {wavelength}nm"));
    assert_abs_diff_eq!(back.number(1, "partner_h_deg"), 1.0, epsilon = 1e-9);
    assert_abs_diff_eq!(back.number(1, "partner_v_deg"), -2.0, epsilon = 1e-9);
}

#[test]
fn a_partner_that_cannot_leave_is_a_status() {
    let table = twin("-m bbo -p 405nm --theta 42deg --direction 60deg,0deg --wavelength 450nm");
    assert_eq!(table.column("status"), ["total_reflection", "total_reflection"]);
    for column in ["partner_h_deg", "partner_v_deg"] {
        assert_eq!(table.cell(0, column), "");
    }
}

#[test]
fn directions_that_cannot_be_are_refused() {
    for (direction, phrase) in [
        ("0,3", "`0` has no unit"),
        ("0deg", "there is no comma"),
        ("0mm,3deg", "`mm` is not a unit of an angle"),
        ("0deg,95deg", "within -90 deg to 90 deg"),
        ("NaN,3deg", "does not start with a number"),
    ] {
        let refusal = twincone(&format!("twin {BBO} --direction {direction}")).refusal(2);
        assert_says(&refusal, &["--direction", phrase, "0deg,3deg", "0mm,52mm"]);
    }
    assert_says(&twincone(&format!("twin {BBO}")).refusal(2), &["--direction <H,V>"]);
    let short = twincone(&format!("twin {BBO} --direction 0deg,3deg --wavelength 400nm")).refusal(2);
    assert_says(&short, &["--wavelength: 400 nm is not longer than the pump, 405 nm"]);
}
