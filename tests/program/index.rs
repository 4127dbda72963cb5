//! `index`: what each wave sees.

use approx::assert_abs_diff_eq;

use crate::run::{assert_says, twincone};
use crate::table::{Table, assert_json};

const COLUMNS: &str = "material, dataset, wavelength_nm, temperature_degc, polarization, n, group_index, \
                       gvd_fs2_per_mm, walkoff_deg, dn_dt_per_k";

/// The formula of K. Kato, IEEE J. Quantum Electron. 22, 1013 (1986), as handbooks print it: n_o and n_e of BBO.
fn kato_1986(um: f64) -> [f64; 2] {
    let l2 = um * um;
    let o: f64 = 2.7359 + 0.01878 / (l2 - 0.01822) - 0.01354 * l2;
    let e: f64 = 2.3753 + 0.01224 / (l2 - 0.01667) - 0.01516 * l2;
    [o.sqrt(), e.sqrt()]
}

#[test]
fn principal_indices_follow_the_published_formula() {
    let asked = "index -m bbo:kato-1986 -p 405nm";
    let table = Table::read(&twincone(&format!("{asked} -f csv")).answer());
    table.assert_columns(COLUMNS);
    assert_eq!(table.column("wavelength_nm"), ["405", "405", "810", "810"]);
    assert_eq!(table.column("polarization"), ["o", "e", "o", "e"]);
    for row in 0..4 {
        let um = table.number(row, "wavelength_nm") / 1e3;
        assert_abs_diff_eq!(table.number(row, "n"), kato_1986(um)[row % 2], epsilon = 1e-12);
        assert_eq!(table.cell(row, "walkoff_deg"), "0");
        table.assert_empty(row, &[]);
    }
    assert_json(&twincone(&format!("{asked} -f json")).answer(), "index", &[("index", &table)]);
    let text = twincone(asked).answer();
    assert_says(&text, &["1.691887", "1.544181", "Data set bbo:kato-1986", "220"]);
}

#[test]
fn a_direction_gives_the_two_waves_along_it_and_their_walkoff() {
    let asked = "index -m bbo:kato-1986 --theta 28.8deg --wavelength 405nm -f csv";
    let table = Table::read(&twincone(asked).answer());
    assert_eq!(table.column("polarization"), ["e", "o"]);
    assert_abs_diff_eq!(table.number(0, "walkoff_deg"), 3.851, epsilon = 0.001);
    assert_eq!(table.cell(1, "walkoff_deg"), "0");
}

#[test]
fn biaxial_crystals_have_three_axes_and_two_waves() {
    let axes = Table::read(&twincone("index -m ktp --wavelength 1064nm -f csv").answer());
    assert_eq!(axes.column("polarization"), ["x", "y", "z"]);
    assert!(axes.number(0, "n") < axes.number(1, "n") && axes.number(1, "n") < axes.number(2, "n"));
    let waves =
        Table::read(&twincone("index -m ktp --theta 90deg --phi 20deg --wavelength 1064nm -f csv").answer());
    assert_eq!(waves.column("polarization"), ["fast", "slow"]);
}

#[test]
fn a_curve_has_as_many_points_as_asked_for() {
    let asked = "index -m bbo --from 400nm --to 800nm --points 5 -f csv";
    let table = Table::read(&twincone(asked).answer());
    let wavelengths = ["400", "400", "500", "500", "600", "600", "700", "700", "800", "800"];
    assert_eq!(table.column("wavelength_nm"), wavelengths);
}

#[test]
fn several_crystals_and_all_data_sets_stand_below_one_another() {
    let table = Table::read(&twincone("index -m bbo -m ktp --wavelength 600nm -f csv").answer());
    assert_eq!(table.column("material"), ["bbo", "bbo", "ktp", "ktp", "ktp"]);
    let table = Table::read(&twincone("index -m bbo --all-datasets --wavelength 600nm -f csv").answer());
    let covering = ["tamosauskas-2018", "eimerl-1987", "kato-1986", "kato-2010"];
    for set in covering {
        assert_eq!(table.column("dataset").iter().filter(|s| **s == set).count(), 2, "{set}");
    }
    let row = table.column("dataset").iter().position(|s| *s == "zhang-2000").expect("a row");
    assert_eq!(table.cell(row, "status"), "out_of_range");
    let missing = ["polarization", "n", "group_index", "gvd_fs2_per_mm", "walkoff_deg", "dn_dt_per_k"];
    table.assert_empty(row, &missing);
}

#[test]
fn extrapolated_rows_are_marked() {
    let asked = "index -m bbo:kato-1986 --wavelength 1100nm -f csv";
    assert_says(&twincone(asked).refusal(3), &["1100", "220 nm to 1060 nm", "--extrapolate"]);
    let run = twincone(&format!("{asked} --extrapolate"));
    assert_eq!(run.status, 0, "{run:#?}");
    assert_eq!(Table::read(&run.stdout).column("extrapolated"), ["true", "true"]);
}

#[test]
fn a_set_without_thermo_optic_terms_leaves_the_slope_empty() {
    let table = Table::read(&twincone("index -m aggas2 --wavelength 2um -f csv").answer());
    table.assert_empty(0, &["dn_dt_per_k"]);
    assert_eq!(table.cell(0, "status"), "ok");
}

#[test]
fn wavelengths_that_cannot_be_are_refused() {
    for (options, phrase) in [
        ("--wavelength 600", "--wavelength: `600` has no unit"),
        ("--wavelength -600nm", "--wavelength: a wavelength must be positive"),
        ("--from 400nm", "--to"),
        ("--from 400nm --to 800nm --points 1", "--points"),
        ("", "no pump wavelength: pass --pump"),
    ] {
        assert_says(&twincone(&format!("index -m bbo {options}")).refusal(2), &[phrase]);
    }
}
