//! `sheet`: every number is on it, and the same job gives the same bytes.

use crate::run::{assert_says, twincone};

const ONE_CONE: &str = "--job examples/collinear-cut-tilted.toml";

#[test]
fn the_bench_sheet_has_the_readings_to_dial() {
    let sheet = twincone(&format!("sheet --kind bench {ONE_CONE} --power 40mW")).answer();
    // zero 3.2 deg, tilt 0.73 deg, 5 mrad per turn: 0.73 deg is 12.74 mrad
    assert_says(&sheet, &["Stage reading there: 3.200 deg", "Stage reading to set: 3.930 deg", "2.55 turns"]);
    // the reflection turns by twice the tilt: 1000 mm tan(1.46 deg) = 25.49 mm
    assert_says(
        &sheet,
        &["| 1000 mm | -25.49 mm | +0.00 mm |", "counterclockwise seen from above by 0.73 deg"],
    );
    assert_says(&sheet, &["class 3B", "IEC 60825-1:2014", "laser safety officer decide"]);
    // the geometry of tests/geometry.rs: 3.010 deg at this tilt, 52.58 mm at 1 m; none the other way
    assert_says(&sheet, &["3.010 deg", "+52.58", "at tilt -0.730 deg this crystal gives o 810 nm: none"]);
    assert_says(
        &sheet,
        &["polarization: horizontal", "no light above background", "singles but no coincidences"],
    );
}

#[test]
fn the_bench_sheet_warns_of_pulses() {
    let sheet = |more: &str| {
        let crystal = "-m bbo --theta 28.8deg --type I -p 405nm --length 1mm --power 40mW";
        twincone(&format!("sheet --kind bench --quiet {crystal}{more}")).answer()
    };
    assert_says(&sheet(" --set pump.pulse=150fs"), &["the class of a continuous beam does not hold"]);
    let continuous = sheet("");
    assert!(!continuous.contains("pulsed"), "{continuous}");
    // no tilt: the reflection meets the laser
    assert_says(&continuous, &["reflects pump light straight back into the laser"]);
    assert_says(&sheet(" --pump-polarization 30deg"), &["as the job gives it: 30.0 deg"]);
}

#[test]
fn the_bench_sheet_places_arms_at_the_crossings() {
    let line = "sheet --kind bench --job examples/two-colours.toml --iris 3mm --filter-width 5nm";
    let sheet = twincone(line).answer();
    assert_says(&sheet, &["1a (800 nm)", "1b (820.253 nm)", "5 nm wide (FWHM) at 800 nm", "| 800 mm |"]);
    // an iris of 3 mm on the screen at 0.8 m is 0.94 mm at 0.25 m
    assert_says(&sheet, &["full angle 0.215 deg", "| 250 mm | 0.94 mm |", "1.5 mm at 800 mm"]);
}

#[test]
fn the_order_sheet_says_what_the_maker_must_know() {
    let line = "sheet --kind order --job examples/crossed-cones.toml --waist 150um";
    let sheet = twincone(line).answer();
    assert_says(
        &sheet,
        &["beta-BaB2O4", "type II (e -> e + o): 405 nm -> 810 nm + 810 nm", "theta | 42.35 deg"],
    );
    assert_says(
        &sheet,
        &["the same cut is phi 30 deg", "antireflection", "Orientation mark", "Questions for the maker"],
    );
    assert_says(&sheet, &["kato-1986 42.538 deg", "theta +0.25 deg", "scratch-dig", "hygroscopic"]);
    // 5.8 % for n = 1.63 or so
    assert_says(&sheet, &["each bare face reflects 5.8 % at 405 nm"]);
}

#[test]
fn the_same_job_gives_the_same_bytes_and_no_date_unless_asked() {
    for kind in ["order", "bench"] {
        for form in ["text", "html"] {
            let line = format!("sheet --kind {kind} {ONE_CONE} -f {form}");
            let sheet = twincone(&line).answer();
            assert_eq!(sheet, twincone(&format!("{line} --threads 1")).answer());
            assert!(!sheet.contains("1 May 2030"));
            assert_says(&twincone(&format!("{line} --date \"1 May 2030\"")).answer(), &["1 May 2030"]);
        }
    }
}

#[test]
fn html_stands_alone() {
    let html = twincone(&format!("sheet --kind bench {ONE_CONE} -f html")).answer();
    assert!(html.starts_with("<!DOCTYPE html>") && html.trim_end().ends_with("</html>"));
    assert_says(&html, &["<svg ", "@page", "data:image/png;base64,"]);
    assert!(!html.contains("<script") && !html.contains("src=\"http") && !html.contains("@import"));
}

#[test]
fn a_sheet_needs_a_length_and_a_kind() {
    let crystal = "-m bbo --theta 42.35deg -p 405nm";
    assert_says(&twincone(&format!("sheet --kind order {crystal}")).refusal(2), &["--length"]);
    assert_eq!(twincone(&format!("sheet {crystal} --length 1mm")).status, 2);
    assert_says(
        &twincone(&format!("sheet --kind order {crystal} --length 1mm -f csv")).refusal(2),
        &["Markdown"],
    );
}
