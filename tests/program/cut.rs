//! `cut`: which cut do I order?

use approx::assert_abs_diff_eq;

use crate::run::{assert_ends_with_conventions, assert_says, twincone};
use crate::table::{Table, assert_json};

const COLUMNS: &str = "material, dataset, process, pump_nm, signal_nm, idler_nm, temperature_degc, theta_deg, phi_deg, \
     plane, poling_um, length_mm, d_eff_pm_per_v, pump_walkoff_deg, signal_walkoff_deg, idler_walkoff_deg, \
     pair_delay_fs_per_mm, pump_angle_fwhm_deg, pump_wavelength_fwhm_nm, signal_fwhm_nm, temperature_fwhm_k";

fn cut(options: &str) -> Table {
    let table = Table::read(&twincone(&format!("cut {options} -f csv")).answer());
    table.assert_columns(COLUMNS);
    table
}

#[test]
fn collinear_type_one_is_the_default_target() {
    let asked = "-m bbo:kato-1986 -p 405nm --type I";
    let table = cut(asked);
    assert_eq!((table.len(), table.cell(0, "process")), (1, "e -> o + o"));
    assert_abs_diff_eq!(table.number(0, "theta_deg"), 28.816, epsilon = 0.002);
    assert_eq!(table.cell(0, "phi_deg"), "90");
    assert_abs_diff_eq!(table.number(0, "d_eff_pm_per_v"), 1.874, epsilon = 0.001);
    table.assert_empty(0, &["plane", "poling_um"]);
    assert_eq!(cut(&format!("{asked} --collinear")).cell(0, "theta_deg"), table.cell(0, "theta_deg"));
    let json = twincone(&format!("cut {asked} -f json")).answer();
    let json = assert_json(&json, "cut", &[("cut", &table)]);
    assert_eq!(json["datasets"][0], "bbo:kato-1986");
    assert_eq!(json["job"]["emission"]["type"], "I");
    let text = twincone(&format!("cut {asked}")).answer();
    assert_says(&text, &["theta 28.816 deg, phi 90 deg", "1 mm", "|d_eff|"]);
    let others = ["eimerl-1987 28.670", "tamosauskas-2018 28.851", "zhang-2000"];
    assert_ends_with_conventions(&text, "Data set bbo:kato-1986", &others);
}

#[test]
fn crossing_cones_of_three_degrees() {
    let table = cut("-m bbo:kato-1986 -p 405nm --crossing 3deg");
    assert_eq!((table.len(), table.cell(0, "process")), (1, "e -> e + o"));
    assert_abs_diff_eq!(table.number(0, "theta_deg"), 42.541, epsilon = 0.002);
    let same = cut("-m bbo:kato-1986 -p 405nm --separation 6deg");
    assert_abs_diff_eq!(same.number(0, "theta_deg"), table.number(0, "theta_deg"), epsilon = 1e-6);
}

#[test]
fn cones_on_the_answer_gives_the_target_back() {
    let half_angle = cut("-m bbo -p 405nm --half-angle 3deg");
    assert_eq!(half_angle.cell(0, "process"), "e -> o + o");
    for (target, column, wanted, rows) in [
        ("--half-angle 3deg", "half_angle_deg", 3.0, "rings --type I"),
        ("--crossing 3deg", "a_polar_deg", 3.0, "crossings"),
        ("--separation 5deg", "separation_deg", 5.0, "crossings"),
    ] {
        let theta = cut(&format!("-m bbo -p 405nm {target}")).cell(0, "theta_deg").to_string();
        let asked = format!("cones -m bbo -p 405nm --theta {theta}deg --rows {rows} -f csv");
        let cones = Table::read(&twincone(&asked).answer());
        assert_abs_diff_eq!(cones.number(0, column), wanted, epsilon = 1e-6);
    }
}

#[test]
fn nondegenerate_collinear_type_two_has_two_cuts() {
    let table = cut("-m bbo:kato-1986 -p 405nm --signal 780nm");
    assert_eq!(table.column("process"), ["e -> e + o", "e -> o + e"]);
    let mut found = [table.number(0, "theta_deg"), table.number(1, "theta_deg")];
    found.sort_by(f64::total_cmp);
    assert_abs_diff_eq!(found[0], 40.860, epsilon = 0.002);
    assert_abs_diff_eq!(found[1], 42.732, epsilon = 0.002);
}

/// W. P. Konig, F. N. C. Wong, Appl. Phys. Lett. 84, 1644 (2004) with the n_z of 1999: two independent programs
/// give 9.55 um at 404 nm and 120 degC.
#[test]
fn a_poling_period_at_a_given_cut() {
    let asked = "-m ktp:konig-2004 -p 404nm --find poling --theta 90deg --phi 0deg --temperature 120degC";
    let table = cut(&format!("{asked} --type II"));
    assert_abs_diff_eq!(table.number(0, "poling_um"), 9.55, epsilon = 0.01);
    let all = cut(asked);
    assert!(all.len() > 1, "with poling every assignment can match");
    let d_eff: Vec<f64> = (0..all.len()).map(|row| all.number(row, "d_eff_pm_per_v")).collect();
    assert!(d_eff.is_sorted_by(|a, b| a >= b), "largest |d_eff| first: {d_eff:?}");
}

#[test]
fn pump_and_temperature_can_be_sought_at_a_given_cut() {
    let pump = cut("-m bbo:kato-1986 -p 400nm --type I --find pump --theta 28.816deg");
    assert_abs_diff_eq!(pump.number(0, "pump_nm"), 405.0, epsilon = 0.02);
    assert_eq!(pump.number(0, "signal_nm"), 2.0 * pump.number(0, "pump_nm"));
    // noncritical: known to be near 150 degC for 1064 nm, common practice
    let oven = cut("-m lbo:kato-1994 -p 532nm --type I --find temperature --theta 90deg --phi 0deg");
    assert_abs_diff_eq!(oven.number(0, "temperature_degc"), 149.0, epsilon = 5.0);
}

#[test]
fn an_xy_plane_cut_is_found_by_phi() {
    let table = cut("-m ktp:kato-2002 -p 532nm --find phi --theta 90deg");
    assert_eq!((table.cell(0, "theta_deg"), table.cell(0, "plane")), ("90", "XY"));
    let planes = cut("-m ktp:kato-2002 -p 532nm");
    let row = planes.column("plane").iter().position(|p| *p == "XY").expect("an XY cut");
    assert_abs_diff_eq!(planes.number(row, "phi_deg"), table.number(0, "phi_deg"), epsilon = 1e-6);
}

#[test]
fn every_data_set_gets_a_row() {
    let table = cut("-m bbo:kato-1986 -p 405nm --type I --all-datasets");
    assert_eq!((table.len(), table.cell(0, "dataset")), (5, "kato-1986"));
    let row = |set: &str| table.column("dataset").iter().position(|s| *s == set).expect("a row");
    for (set, theta) in [("kato-1986", 28.816), ("eimerl-1987", 28.670), ("tamosauskas-2018", 28.851)] {
        assert_eq!(table.cell(row(set), "status"), "ok");
        assert_abs_diff_eq!(table.number(row(set), "theta_deg"), theta, epsilon = 0.002);
    }
    assert_eq!(table.cell(row("zhang-2000"), "status"), "out_of_range");
    for column in ["process", "theta_deg", "phi_deg", "d_eff_pm_per_v", "signal_fwhm_nm"] {
        assert_eq!(table.cell(row("zhang-2000"), column), "");
    }
}

#[test]
fn every_material_gets_a_row_that_says_why_it_cannot() {
    let run = twincone("cut --all-materials -p 405nm --type I -f csv");
    assert_eq!(run.status, 0);
    let table = Table::read(&run.stdout);
    table.assert_columns(COLUMNS);
    let ids = Table::read(&twincone("materials -f csv").answer());
    for id in ids.column("material") {
        assert!(table.column("material").contains(&id), "{id}");
    }
    let status = |id: &str| {
        let row = table.column("material").iter().position(|m| *m == id).expect("a row");
        table.cell(row, "status").to_string()
    };
    assert_eq!(
        ["bbo", "quartz", "calcite", "aggas2"].map(status),
        ["ok", "no_phase_matching", "no_nonlinearity", "out_of_range"]
    );
    let text = twincone("cut --all-materials -p 405nm --type I --quiet").answer();
    assert_says(
        &text,
        &["bbo:tamosauskas-2018", "no phase matching: ", "no nonlinearity: ", "out of range: "],
    );
}

#[test]
fn several_materials_compete() {
    let table = cut("-m bbo -m lbo:kato-1994 -p 405nm --type I");
    assert_eq!(table.column("material").first(), Some(&"bbo"));
    assert_eq!(table.column("dataset").last(), Some(&"kato-1994"));
    let refusal = twincone("cut -m bbo --all-materials -p 405nm").refusal(2);
    assert_says(&refusal, &["--material", "--all-materials", "leave one out"]);
}

#[test]
fn no_solution_is_an_answer_with_exit_status_one() {
    let asked = "cut -m quartz -p 405nm --type I";
    let run = twincone(asked);
    assert_eq!((run.status, run.stderr.as_str()), (1, ""), "{run:#?}");
    assert_says(&run.stdout, &["no cut gives pairs along the pump", "rad/mm"]);
    let run = twincone(&format!("{asked} -f csv"));
    assert_eq!(run.status, 1);
    let table = Table::read(&run.stdout);
    table.assert_columns(COLUMNS);
    assert_eq!((table.len(), table.cell(0, "status")), (1, "no_phase_matching"));
    assert_eq!(table.cell(0, "theta_deg"), "");
    assert_eq!((table.cell(0, "pump_nm"), table.cell(0, "idler_nm")), ("405", "810"));
}

#[test]
fn what_would_match_is_said() {
    let run = twincone("cut -m kdp -p 350nm --type II");
    assert_eq!(run.status, 1, "{run:#?}");
    assert_says(&run.stdout, &["rad/mm", "type I, a pump of 365.9 nm", "would match"]);
}

#[test]
fn targets_that_cannot_be_are_refused() {
    for (options, phrases) in [
        ("--crossing 3", ["--crossing: `3` has no unit", "deg"]),
        ("--crossing -3deg", ["--crossing", "between 0 deg and 60 deg"]),
        ("--half-angle 90deg", ["--half-angle", "between 0 deg and 60 deg"]),
        ("--separation 3nm", ["--separation", "`nm` is not a unit of an angle"]),
        ("--crossing 3deg --type I", ["opposite polarization", "type II"]),
        ("--crossing 3deg --half-angle 3deg", ["--crossing", "cannot be used with"]),
        ("--find temperature", ["given cut", "--theta"]),
        ("--theta 40deg", ["--theta is what is sought", "leave it out"]),
    ] {
        assert_says(&twincone(&format!("cut -m bbo -p 405nm {options}")).refusal(2), &phrases);
    }
}
