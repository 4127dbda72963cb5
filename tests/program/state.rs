//! `state` and `compensate`: what comes out, and the plates that mend it.

use approx::assert_abs_diff_eq;

use crate::run::{assert_says, twincone, twincone_with};
use crate::table::Table;

const COLUMNS: &str = "pair, a_wavelength_nm, b_wavelength_nm, a_h_deg, a_v_deg, b_h_deg, b_v_deg, basis, visibility_hv, \
     visibility_diagonal, concurrence, purity, fidelity, phase_deg, chsh_max, quadrature_error";

const PLATES: &str = "arm, material, dataset, theta_deg, phi_deg, length_mm, roll_deg, tilt_deg, delay_fs, \
     visibility_before, visibility_after";

const BBO: &str = "-m bbo:kato-1986 -p 405nm --theta 42.541deg --phi 0deg";

fn state(options: &str) -> Table {
    let table = Table::read(&twincone(&format!("state {options} -f csv")).answer());
    table.assert_columns(COLUMNS);
    table
}

#[test]
fn a_filter_decides_how_well_the_histories_are_told_apart() {
    let table = state(&format!("{BBO} --length 2mm --filter-width 3nm"));
    assert_eq!(table.column("basis"), ["oe", "lab"]);
    assert_eq!(table.column("status"), ["ok", "ok"]);
    // the agreed number of tests/state.rs
    assert_abs_diff_eq!(table.number(0, "visibility_diagonal"), 0.650, epsilon = 0.002);
    for row in 0..2 {
        assert_abs_diff_eq!(table.number(row, "a_v_deg"), 3.0, epsilon = 0.01);
        assert_abs_diff_eq!(table.number(row, "b_v_deg"), -3.0, epsilon = 0.01);
        assert_abs_diff_eq!(
            table.number(row, "concurrence"),
            table.number(1 - row, "concurrence"),
            epsilon = 1e-9
        );
        assert!(table.number(row, "quadrature_error") < 1e-3);
    }
}

#[test]
fn a_pump_across_the_wave_that_pumps_makes_no_pairs() {
    let one = format!("{BBO} --length 1mm --filter-width 3nm");
    // the optic axis lies along x: the e wave that pumps is horizontal
    for command in ["state", "compensate"] {
        let refused = twincone(&format!("{command} {one} --pump-polarization 90deg")).refusal(1);
        assert_says(&refused, &["drives none of the histories"]);
    }
    let told = twincone(&format!("state {one} --pump-polarization 60deg")).answer();
    assert_says(&told, &["near ("]);
}

#[test]
fn a_quadrature_that_misses_its_aim_is_told() {
    let long = format!("{BBO} --length 1m --filter-width 3nm");
    let table = state(&long);
    assert!(table.number(0, "quadrature_error") > 0.01);
    assert_eq!(table.column("status"), ["not_converged", "not_converged"]);
    assert_says(&twincone(&format!("state {long}")).answer(), &["Not converged: visibilities may be off by"]);
}

#[test]
fn a_pump_that_drives_one_of_two_crystals_leaves_a_product() {
    let job = "state --job examples/two-crystals.toml --pump-polarization";
    let product = twincone(&format!("{job} 0deg")).answer();
    assert_says(&product, &["a product |", "not an entangled state"]);
    assert!(!product.contains("near ("), "{product}");
}

#[test]
fn a_basis_can_be_chosen_and_precision_asked_for() {
    let table = state(&format!("{BBO} --length 1mm --filter-width 10nm --basis lab --precision 1e-7"));
    assert_eq!(table.column("basis"), ["lab"]);
    assert!(table.number(0, "quadrature_error") < 1e-7);
}

#[test]
fn json_holds_the_density_matrices_and_the_budget() {
    let asked = format!("{BBO} --length 1mm --iris 0.1deg --filter-width 10nm");
    let table = state(&asked);
    let json = twincone(&format!("state {asked} -f json")).answer();
    let value: serde_json::Value = serde_json::from_str(&json).expect("valid JSON");
    for row in 0..2 {
        let visibility = value["state"][row]["visibility_diagonal"].as_f64().expect("a number");
        assert_abs_diff_eq!(visibility, table.number(row, "visibility_diagonal"), epsilon = 1e-15);
    }
    let elements = value["density_matrix"].as_array().expect("a list");
    assert_eq!(elements.len(), 32);
    for basis in ["oe", "lab"] {
        let diagonal = elements.iter().filter(|e| e["basis"] == basis && e["row"] == e["column"]);
        let trace: f64 = diagonal.map(|e| e["re"].as_f64().expect("a number")).sum();
        assert_abs_diff_eq!(trace, 1.0, epsilon = 1e-12);
    }
    let losses: Vec<f64> = value["budget"]
        .as_array()
        .expect("a list")
        .iter()
        .map(|row| row["loss"].as_f64().expect("a number"))
        .collect();
    assert_eq!(losses.len(), 6);
    assert!(losses.windows(2).all(|pair| pair[0] >= pair[1]), "biggest first: {losses:?}");
}

#[test]
fn the_text_says_points_or_irises() {
    let points = twincone(&format!("state {BBO} --length 1mm --filter-width 10nm")).answer();
    assert_says(&points, &["Points: a's direction stands", "delay", "|HV>", "Data set bbo:kato-1986"]);
    let irises = twincone(&format!("state {BBO} --length 1mm --filter-width 10nm --iris 0.1deg")).answer();
    assert_says(&irises, &["Irises: a pair counts when both photons pass", "spatial phase"]);
}

#[test]
fn what_is_missing_is_named() {
    let fails = |options: &str, status: i32, says: &[&str]| {
        let run = twincone(&format!("state {options}"));
        assert_eq!(run.status, status, "{options}: {}", run.stderr);
        assert_says(&run.stderr, says);
    };
    fails(BBO, 2, &["no length", "--length 2mm"]);
    fails(&format!("{BBO} --length 1mm --pair 2"), 1, &["there is no pair 2"]);
    fails(
        &format!("{BBO} --length 1mm --filter-width 1nm --filter-centre 800nm"),
        1,
        &["no pair passes", "filters"],
    );
    fails("-m bbo:kato-1986 -p 405nm --theta 40deg --length 1mm", 1, &["no pair of directions"]);
    fails(&format!("{BBO} --length 1mm --precision 0"), 2, &["1e-9 to 0.1"]);
}

const JOB: &str = r#"
[pump]
wavelength = "405 nm"

[crystal]
material = "bbo"
dataset = "kato-1986"
cut = { theta = "42.541 deg", phi = "0 deg" }
length = "2 mm"

[[filter]]
width = "40 nm"

[[compensator]]
arm = "both"
length = "1 mm"
roll = "90 deg"
"#;

#[test]
fn compensators_take_material_and_cut_of_the_crystal_where_they_say_nothing() {
    let run = twincone_with(JOB, "state -j - -f csv --basis oe");
    let table = Table::read(&run.answer());
    // the agreed number of tests/state.rs
    assert_abs_diff_eq!(table.number(0, "visibility_diagonal"), 0.981, epsilon = 0.002);
}

#[test]
fn directions_of_their_own_do_not_follow_the_crossing() {
    let job = format!(
        "{JOB}\n[[collection]]\narm = \"a\"\ndirection = {{ h = \"0.1 deg\", v = \"2.9 deg\" }}\niris = \"0.1 deg\"\n"
    );
    let table = Table::read(&twincone_with(&job, "state -j - -f csv --basis oe").answer());
    assert_eq!(table.cell(0, "pair"), "");
    assert_abs_diff_eq!(table.number(0, "a_h_deg"), 0.1, epsilon = 1e-9);
    assert_abs_diff_eq!(table.number(0, "b_h_deg"), -0.1, epsilon = 1e-6);
}

#[test]
fn a_bench_that_cannot_be_is_refused_where_it_is_written() {
    for (more, says) in [
        ("[[filter]]\narm = \"a\"\n", "a filter needs a width"),
        ("[[compensator]]\nmaterial = \"quartz\"\n", "a compensator needs a length"),
        ("[[collection]]\ndirection = { h = \"0 deg\", v = \"3 deg\" }\n", "belongs to one arm"),
        ("[[collection]]\niris = \"1 mm\"\nfibre = \"50 um\"\n", "iris or a fibre, not both"),
    ] {
        let run = twincone_with(&format!("{JOB}\n{more}"), "state -j -");
        assert_eq!(run.status, 2, "{more}: {}", run.stderr);
        assert_says(&run.stderr, &[says]);
    }
}

#[test]
fn plates_are_proposed_and_do_what_they_promise() {
    let asked = format!("{BBO} --length 2mm --filter-width 10nm");
    let table = Table::read(&twincone(&format!("compensate {asked} --allow bbo -f csv")).answer());
    table.assert_columns(PLATES);
    assert!(table.number(0, "visibility_after") > 0.99);
    assert_abs_diff_eq!(table.number(0, "visibility_before"), 0.156, epsilon = 0.002);
    let mut job = JOB[..JOB.find("[[filter]]").expect("a filter")].to_string();
    for row in 0..table.len() {
        let of = |column: &str| table.cell(row, column).to_string();
        job.push_str(&format!(
            "[[compensator]]\narm = \"{}\"\nlength = \"{} mm\"\nroll = \"{} deg\"\ncut = {{ theta = \"{} deg\", phi = \"0 deg\" }}\n",
            of("arm"), of("length_mm"), of("roll_deg"), of("theta_deg"),
        ));
    }
    let state = Table::read(&twincone_with(&job, "state -j - -f csv --filter-width 10nm").answer());
    assert_abs_diff_eq!(
        state.number(0, "visibility_diagonal"),
        table.number(0, "visibility_after"),
        epsilon = 1e-6
    );
    let text = twincone(&format!("compensate {asked}")).answer();
    assert_says(&text, &["for a phase of pi", "For comparison", "quartz", "Bell states"]);
}
