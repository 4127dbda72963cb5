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

/// A Gaussian of this FWHM as a table.
fn curve(header: &str, centre_nm: f64, width_nm: f64) -> String {
    let row = |j: i32| {
        let x = f64::from(j) / 12.0;
        format!(
            "{:.5},{:.7}\n",
            centre_nm + x * width_nm,
            0.9 * (-4.0 * std::f64::consts::LN_2 * x * x).exp()
        )
    };
    (-36..=36).map(row).fold(format!("{header}\n"), |table, row| table + &row)
}

fn with_files(filter: &str, pump: &str, two_crystals: bool) -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a folder");
    let write = |name: &str, text: &str| std::fs::write(folder.path().join(name), text).expect("a file");
    write("trace.csv", &curve("wavelength_nm,transmission", 810.0, 3.0));
    write("line.csv", &curve("wavelength_nm,intensity", 405.0, 0.6));
    let crystal = |roll: u32| {
        let cut = if two_crystals {
            "theta = \"29.237 deg\", phi = \"90 deg\""
        } else {
            "theta = \"42.541 deg\", phi = \"0 deg\""
        };
        format!(
            "[[crystal]]\nmaterial = \"bbo:kato-1986\"\ncut = {{ {cut} }}\nlength = \"1 mm\"\nroll = \"{roll} deg\"\n"
        )
    };
    let crystals = if two_crystals { crystal(0) + &crystal(90) } else { crystal(0) };
    let kind = if two_crystals { "I" } else { "II" };
    let job = format!(
        "[pump]\nwavelength = \"405 nm\"\n{pump}\n{crystals}[emission]\ntype = \"{kind}\"\n[[filter]]\n{filter}\n"
    );
    write("job.toml", &job);
    folder
}

fn visibility_in(folder: &tempfile::TempDir, command: &str) -> f64 {
    let job = folder.path().join("job.toml");
    let line = command.replace("JOB", &format!("\"{}\"", job.display()));
    Table::read(&twincone(&line).answer()).number(0, "visibility_diagonal")
}

#[test]
fn a_filter_from_a_file_is_the_filter_it_was_sampled_from() {
    for two in [false, true] {
        let measured = visibility_in(&with_files("file = \"trace.csv\"", "", two), "state --job JOB -f csv");
        let stated = visibility_in(&with_files("width = \"3 nm\"", "", two), "state --job JOB -f csv");
        assert_abs_diff_eq!(measured, stated, epsilon = 1e-3);
        assert!(two || (0.2..0.95).contains(&stated), "{stated}");
    }
    // with irises, and in one arm alone
    let options = "state --job JOB -f csv --set collection.*.iris=0.2deg --set filter.*.arm=a";
    let measured = visibility_in(&with_files("file = \"trace.csv\"", "", false), options);
    let stated = visibility_in(&with_files("width = \"3 nm\"", "", false), options);
    assert_abs_diff_eq!(measured, stated, epsilon = 1e-3);
    // moved to a centre of its own
    let moved = visibility_in(
        &with_files("file = \"trace.csv\"\ncentre = \"812 nm\"", "", false),
        "state --job JOB -f csv",
    );
    let stated = visibility_in(
        &with_files("width = \"3 nm\"\ncentre = \"812 nm\"", "", false),
        "state --job JOB -f csv",
    );
    assert_abs_diff_eq!(moved, stated, epsilon = 1e-3);
}

#[test]
fn a_pump_spectrum_from_a_file_is_the_line_it_was_sampled_from() {
    let filter = "width = \"10 nm\"";
    let measured = with_files(filter, "spectrum = \"line.csv\"", true);
    let stated = with_files(filter, "linewidth = \"0.6 nm\"", true);
    let found = [&measured, &stated].map(|folder| visibility_in(folder, "state --job JOB -f csv"));
    assert_abs_diff_eq!(found[0], found[1], epsilon = 1e-3);
    let narrow = visibility_in(&with_files(filter, "", true), "state --job JOB -f csv");
    assert!(narrow > found[0] + 0.1, "{narrow} {found:?}");
    // plates in the pump mend both alike
    let after = |folder: &tempfile::TempDir| {
        let job = folder.path().join("job.toml");
        let line = format!("compensate --job \"{}\" --allow bbo:kato-1986 -f csv", job.display());
        Table::read(&twincone(&line).answer()).number(0, "visibility_after")
    };
    assert_abs_diff_eq!(after(&measured), after(&stated), epsilon = 2e-3);
}

#[test]
fn files_that_are_no_curves_are_refused_where_they_are_named() {
    let refused = |filter: &str, pump: &str, trace: &str, status: i32| {
        let folder = with_files(filter, pump, false);
        std::fs::write(folder.path().join("bad.csv"), trace).expect("a file");
        twincone(&format!("state --job \"{}\"", folder.path().join("job.toml").display())).refusal(status)
    };
    let falling = "wavelength_nm,transmission\n812,0\n810,0.9\n808,0\n";
    assert_says(
        &refused("file = \"bad.csv\"", "", falling, 2),
        &["bad.csv: line 3: wavelengths must rise", "job.toml"],
    );
    assert_says(&refused("file = \"none.csv\"", "", "", 4), &["cannot read", "none.csv"]);
    let both = refused("file = \"trace.csv\"\nwidth = \"3 nm\"", "", "", 2);
    assert_says(&both, &["this filter has a file", "leave out width"]);
    let both = refused("width = \"3 nm\"", "spectrum = \"line.csv\"\npulse = \"100 fs\"", "", 2);
    assert_says(&both, &["the spectrum of the pump is in a file already"]);
    let far = "wavelength_nm,intensity\n532,0\n533,0.9\n534,0\n";
    let far = refused("width = \"3 nm\"", "spectrum = \"bad.csv\"", far, 2);
    assert_says(&far, &["does not hold the pump wavelength, 405 nm"]);
}

#[test]
fn sweeps_remember_the_files_they_read() {
    let folder = with_files("file = \"trace.csv\"", "", false);
    let job = folder.path().join("job.toml");
    let rows = folder.path().join("rows.csv");
    let line = format!(
        "run \"{}\" --report state --axis crystal.length=1mm..2mm/3 --basis oe -o \"{}\"",
        job.display(),
        rows.display()
    );
    assert_eq!(twincone(&format!("{line} -q")).status, 0);
    let meta = std::fs::read_to_string(folder.path().join("rows.csv.meta.toml")).expect("a meta file");
    assert_says(&meta, &["[[file]]", "name = \"trace.csv\"", "digest = "]);
    std::fs::write(folder.path().join("trace.csv"), curve("wavelength_nm,transmission", 810.0, 4.0))
        .expect("a file");
    let other = twincone(&format!("{line} --resume"));
    assert_eq!(other.status, 2, "{other:?}");
    // files as an axis
    std::fs::write(folder.path().join("wide.csv"), curve("wavelength_nm,transmission", 810.0, 10.0))
        .expect("a file");
    let axis = format!(
        "run \"{}\" --report state --axis filter.1.file=trace.csv,wide.csv --basis oe -q",
        job.display()
    );
    let answer = twincone(&axis).answer();
    let cells: Vec<Vec<&str>> = answer.lines().map(|line| line.split(',').collect()).collect();
    let place = cells[0].iter().position(|name| *name == "visibility_diagonal").expect("a column");
    let [narrow, wide] = [1, 2].map(|row| cells[row][place].parse::<f64>().expect("a number"));
    assert!(narrow > wide + 0.1, "{answer}");
}

#[test]
fn one_type_i_crystal_has_nothing_to_entangle() {
    let said =
        twincone("state -m bbo:kato-1986 -p 405nm --type I --theta 29.237deg --phi 90deg --length 1mm")
            .refusal(1);
    assert_says(&said, &["each photon has one polarization", "roll = \"90 deg\"", "type II"]);
}

#[test]
fn a_pair_and_fixed_directions_exclude_each_other() {
    let folder = with_files("width = \"3 nm\"", "", false);
    let job = folder.path().join("job.toml");
    let text = std::fs::read_to_string(&job).expect("a job");
    std::fs::write(
        &job,
        text + "[[collection]]\narm = \"a\"\ndirection = { h = \"0 deg\", v = \"3 deg\" }\n",
    )
    .expect("a job");
    let job = job.display();
    let said = twincone(&format!("state --job \"{job}\" --pair 2")).refusal(2);
    assert_says(&said, &["pair 2 is asked for", "collection.direction fixes"]);
    assert_says(&twincone(&format!("state --job \"{job}\"")).answer(), &["Fixed directions: a at"]);
}

#[test]
fn plates_behind_half_wave_plates_are_never_worse_than_the_rule() {
    for more in [
        "--length 2mm --filter-width 40nm",
        "--length 1mm --filter-width 10nm --iris 0.2deg",
        "--length 3mm --filter-width 5nm --iris 0.06deg",
    ] {
        for half_wave in [false, true] {
            let flag = if half_wave { "--half-wave" } else { "" };
            let said = twincone(&format!("compensate {BBO} {more} --allow bbo:kato-1986 {flag}")).answer();
            let unbroken = said.split_whitespace().collect::<Vec<_>>().join(" ");
            let number = |after: &str| -> f64 {
                let rest =
                    &unbroken[unbroken.find(after).unwrap_or_else(|| panic!("no `{after}` in {said}"))
                        + after.len()..];
                rest.split([' ', ';', ',']).find_map(|word| word.parse().ok()).expect("a number")
            };
            let rolled = number("in both arms: visibility ");
            let rule = if half_wave { number("by a quarter turn; ") } else { rolled };
            let found = number("bbo: visibility ");
            assert!(found >= rule, "{more} {flag}: {found} against {rule}");
        }
    }
}

#[test]
fn plates_whose_visibilities_did_not_converge_say_so() {
    let long = format!("compensate {BBO} --length 1m --filter-width 3nm --allow bbo:kato-1986 -f csv");
    let table = Table::read(&twincone(&long).answer());
    assert_eq!(table.column("status"), ["not_converged"; 2]);
}

#[test]
fn a_waist_that_is_no_beam_is_refused() {
    let said = twincone(&format!("state {BBO} --length 1mm --waist 1um")).refusal(2);
    assert_says(&said, &["a waist of 1 um spreads the pump over 7.4 deg", "2.6 um or more"]);
}
