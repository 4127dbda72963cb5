//! `run` and `join`: axes, reports, rows, files, parts.

use std::fs;
use std::path::Path;

use approx::assert_abs_diff_eq;
use tempfile::TempDir;

use crate::run::{Run, assert_says, twincone, twincone_in, twincone_with};
use crate::table::Table;

/// A crossed-cone crystal of the data set that most checks use.
const BENCH: &str = "-m bbo:kato-1986 -p 405nm --theta 42.541deg --phi 0deg --length 2mm";

fn run(options: &str) -> Run {
    twincone(&format!("run {BENCH} {options}"))
}

fn rows(options: &str) -> Table {
    Table::read(&run(options).answer())
}

/// Every row of a sweep is the row of `cones` at that setting, with the point and the axes in front.
#[test]
fn rows_are_those_of_the_command() {
    for (report, rows) in [("rings", "rings"), ("crossings", "crossings")] {
        let swept = run(&format!("--report {report} --axis crystal.tilt=-0.5deg..2deg/6")).answer();
        let mut lines = swept.lines();
        let header = lines.next().expect("a header");
        assert!(header.starts_with("point,crystal_tilt_deg,"), "{header}");
        for (point, tilt) in ["-0.5", "0", "0.5", "1", "1.5", "2"].into_iter().enumerate() {
            let alone = twincone(&format!("cones {BENCH} --tilt {tilt}deg --rows {rows} -f csv")).answer();
            for line in alone.lines().skip(1) {
                assert_eq!(lines.next(), Some(format!("{point},{tilt},{line}").as_str()));
            }
        }
        assert_eq!(lines.next(), None);
    }
}

/// Half angle against tilt, and crossings at 3 deg: agreed geometry of a 405 nm pump in BBO (computed twice, independently).
#[test]
fn agreed_geometry_comes_out_as_rows() {
    let crossings = rows("--report crossings --axis crystal.tilt=0deg,0.5deg");
    assert_abs_diff_eq!(crossings.number(0, "a_polar_deg"), 3.0, epsilon = 0.002);
    let type_one = "run -m bbo:kato-1986 -p 405nm --phi 90deg --type I --report rings --axis crystal.cut.theta=28.737deg,29.237deg,29.737deg";
    let cones = Table::read(&twincone(type_one).answer());
    assert_eq!(cones.column("status"), ["no_phase_matching", "ok", "ok"]);
    assert_eq!(cones.column("crystal_cut_theta_deg"), ["28.737", "29.237", "29.737"]);
    assert_abs_diff_eq!(cones.number(1, "half_angle_deg"), 3.0, epsilon = 0.002);
    // 0.5 deg more in the cut opens the cone to 4.45 deg; 402 nm and 408 nm instead of 405 nm make it 2.10 and 3.67 deg
    assert_abs_diff_eq!(cones.number(2, "half_angle_deg"), 4.45, epsilon = 0.01);
    let pump = "run -m bbo:kato-1986 --theta 29.237deg --phi 90deg --type I --report rings --axis pump.wavelength=402nm..408nm/3nm";
    let cones = Table::read(&twincone(pump).answer());
    for (row, half_angle) in [2.10, 3.00, 3.67].into_iter().enumerate() {
        assert_abs_diff_eq!(cones.number(row, "half_angle_deg"), half_angle, epsilon = 0.006);
        assert_abs_diff_eq!(
            cones.number(row, "wavelength_nm"),
            2.0 * (402.0 + 3.0 * row as f64),
            epsilon = 1e-9
        );
    }
}

#[test]
fn the_last_axis_varies_fastest_and_columns_are_named_by_key_and_unit() {
    let table = rows(
        "--report crossings --axis crystal.dataset=kato-1986,eimerl-1987 --axis crystal.tilt=0deg..1deg/3 --axis screen.distance=1m,50cm",
    );
    assert_eq!(table.column("crystal_dataset"), [["kato-1986"; 6], ["eimerl-1987"; 6]].concat());
    assert_eq!(table.column("crystal_tilt_deg"), [["0", "0", "0.5", "0.5", "1", "1"]; 2].concat());
    assert_eq!(table.column("screen_distance_mm"), ["1000", "500"].repeat(6));
    let points: Vec<String> = (0..12).map(|n: usize| n.to_string()).collect();
    assert_eq!(table.column("point"), points);
    assert_abs_diff_eq!(table.number(0, "a_y_mm"), 2.0 * table.number(1, "a_y_mm"), epsilon = 1e-9);
}

#[test]
fn axes_run_side_by_side_where_they_are_told_to() {
    let job = r#"
[pump]
[crystal]
material = "bbo"
cut = { theta = "42.5 deg", phi = "0 deg" }
[sweep]
report = "crossings"
axes = [
  { together = [
      { key = "pump.wavelength", values = ["404 nm", "405 nm"] },
      { key = "crystal.dataset", values = ["kato-1986", "eimerl-1987"] } ] },
  { key = "crystal.tilt", from = "0 deg", to = "1 deg", step = "0.5 deg" },
]
"#;
    let table = Table::read(&twincone_with(job, "run -").answer());
    assert_eq!(table.column("pump_wavelength_nm"), [["404"; 3], ["405"; 3]].concat());
    assert_eq!(table.column("crystal_dataset"), [["kato-1986"; 3], ["eimerl-1987"; 3]].concat());
}

/// Any key: numbers that are set directly and those that are read anew give the same as the command with that key.
#[test]
fn any_scalar_key_is_an_axis() {
    let axes = [
        ("crystal.cut.theta", "42.4deg", "crystal_cut_theta_deg"),
        ("crystal.cut.phi", "10deg", "crystal_cut_phi_deg"),
        ("crystal.cut.crossing", "3.3deg", "crystal_cut_crossing_deg"),
        ("crystal.tilt", "0.3deg", "crystal_tilt_deg"),
        ("crystal.1.tilt", "0.3deg", "crystal_1_tilt_deg"),
        ("crystal.cross_tilt", "0.3deg", "crystal_cross_tilt_deg"),
        ("crystal.roll", "20deg", "crystal_roll_deg"),
        ("crystal.length", "0.7mm", "crystal_length_mm"),
        ("crystal.temperature", "20degC", "crystal_temperature_degc"),
        ("crystal.reversed", "about-beam", "crystal_reversed"),
        ("crystal.material", "bbo:zhang-2000", "crystal_material"),
        ("crystal.dataset", "eimerl-1987", "crystal_dataset"),
        ("crystal.extrapolate", "true", "crystal_extrapolate"),
        ("pump.wavelength", "406nm", "pump_wavelength_nm"),
        ("pump.waist", "100um", "pump_waist_um"),
        ("pump.linewidth", "100GHz", "pump_linewidth_ghz"),
        ("emission.signal", "800nm", "emission_signal_nm"),
        ("emission.idler", "800nm", "emission_idler_nm"),
        ("emission.process", "e:o+e", "emission_process"),
        ("emission.type", "I", "emission_type"),
        ("screen.distance", "0.5m", "screen_distance_mm"),
        ("mount.about_x", "0.5deg", "mount_about_x_deg"),
        ("mount.about_y", "0.5deg", "mount_about_y_deg"),
        ("filter.*.width", "3nm", "filter_all_width_nm"),
    ];
    for (key, value, column) in axes {
        let swept = run(&format!("--quiet --report rings --axis {key}={value}"));
        let alone = twincone(&format!("cones {BENCH} --quiet -f csv --set {key}={value}"));
        if alone.status == 3 {
            assert_says(&swept.stdout, &["out_of_range"]);
            continue;
        }
        let (swept, alone) = (swept.answer(), alone.answer());
        assert!(
            swept.starts_with(&format!("point,{column},")),
            "{key}: {}",
            swept.lines().next().unwrap_or("")
        );
        let own: Vec<&str> = swept.lines().skip(1).filter_map(|line| line.splitn(3, ',').nth(2)).collect();
        let expected: Vec<&str> = alone.lines().skip(1).collect();
        assert_eq!(own.len(), expected.len(), "{key}");
        for (own, expected) in own.iter().zip(expected) {
            for (a, b) in own.split(',').zip(expected.split(',')) {
                match (a.parse::<f64>(), b.parse::<f64>()) {
                    // a number set directly may differ in its last bit from one that is read as text
                    (Ok(a), Ok(b)) => assert_abs_diff_eq!(a, b, epsilon = 1e-9),
                    _ => assert_eq!(a, b, "{key}"),
                }
            }
        }
    }
}

#[test]
fn report_cut_solves_at_every_point() {
    let table = Table::read(
        &twincone(
            "run -m bbo:kato-1986 --type I --report cut --axis pump.wavelength=405nm,410nm --half-angle 3deg",
        )
        .answer(),
    );
    assert_abs_diff_eq!(table.number(0, "theta_deg"), 29.237, epsilon = 0.002);
    assert_eq!(table.column("pump_nm"), ["405", "410"]);
    let materials = Table::read(
        &twincone("run -p 405nm --type I --report cut --axis crystal.material=bbo,lbo,kdp,quartz,alpha-bbo")
            .answer(),
    );
    let statuses = materials.column("status");
    assert!(statuses.contains(&"ok") && statuses.contains(&"no_phase_matching"), "{statuses:?}");
    assert_eq!(materials.cell(materials.len() - 1, "status"), "no_nonlinearity");
    let angles = Table::read(
        &twincone("run -m bbo:kato-1986 -p 405nm --report cut --axis sweep.target.crossing=2deg..4deg/3")
            .answer(),
    );
    let thetas: Vec<f64> = (0..3).map(|row| angles.number(row, "theta_deg")).collect();
    assert!(thetas.windows(2).all(|pair| pair[0] < pair[1]), "{thetas:?}");
    assert_abs_diff_eq!(thetas[1], 42.541, epsilon = 0.002);
}

#[test]
fn report_tilt_searches_at_every_point() {
    let table = rows("--report tilt --crossing 3deg --axis crystal.cut.theta=42.4deg,42.541deg");
    let alone = Table::read(
        &twincone(
            "tilt -m bbo:kato-1986 -p 405nm --theta 42.4deg --phi 0deg --length 2mm --crossing 3deg -f csv",
        )
        .answer(),
    );
    let first = table.column("point").iter().position(|p| *p == "0").expect("rows of the first point");
    assert_eq!(table.cell(first, "crystal_tilt_deg"), alone.cell(0, "crystal_tilt_deg"));
    let second = table.column("point").iter().position(|p| *p == "1").expect("rows of the second point");
    assert_abs_diff_eq!(table.number(second, "crystal_tilt_deg"), 0.0, epsilon = 0.002);
    let by = rows("--report tilt --crossing 3deg --by pump --axis crystal.cut.theta=42.5deg,42.6deg");
    assert_abs_diff_eq!(by.number(0, "pump_wavelength_nm"), 405.0, epsilon = 2.0);
    let refusal = run("--report tilt --axis crystal.cut.theta=42.4deg,42.5deg").refusal(2);
    assert_says(&refusal, &["report tilt needs to know what for", "--crossing 3deg"]);
    let refusal = run("--report tilt --crossing 3deg --axis crystal.tilt=0deg,1deg").refusal(2);
    assert_says(&refusal, &["crystal.tilt", "leave that axis out"]);
}

/// A point that fails has a row with its status and its numbers; the sweep goes on.
#[test]
fn points_that_fail_have_rows() {
    let table =
        rows("--report crossings --axis pump.wavelength=100nm,405nm,600nm --axis crystal.tilt=-85deg,0deg");
    assert_eq!(table.len(), 6);
    let statuses = table.column("status");
    assert_eq!(statuses, ["invalid", "out_of_range", "invalid", "ok", "invalid", "out_of_range"]);
    assert_eq!(table.column("pump_wavelength_nm"), ["100", "100", "405", "405", "600", "600"]);
    let missed = rows("--report crossings --axis crystal.tilt=-1.3deg,-5deg");
    assert_eq!(missed.column("status"), ["apart", "no_phase_matching"]);
    let signals = rows("--report rings --axis emission.signal=300nm,800nm");
    assert_eq!(signals.cell(0, "status"), "invalid");
    assert_eq!(signals.cell(1, "status"), "ok");
    // a cut that exists for one pump only
    let job = "run -m bbo:kato-1986 --cut crossing=3deg --phi 0deg --quiet --report crossings --axis pump.wavelength=405nm,330nm,180nm";
    let cuts = Table::read(&twincone(job).answer());
    assert_eq!(cuts.cell(0, "status"), "ok");
    assert_ne!(cuts.cell(cuts.len() - 1, "status"), "ok");
    // type I has no rings of opposite polarization
    let none = rows("--quiet --type I --report crossings --axis crystal.tilt=0deg,1deg");
    assert_eq!(none.column("status"), ["invalid", "invalid"]);
}

#[test]
fn mistakes_in_axes_are_found_before_the_first_point() {
    for (axis, says) in [
        ("crystal.titl=0deg..1deg/3", "did you mean `crystal.tilt`"),
        ("crystal.tilt=0deg..1deg", "does not say how many points"),
        ("crystal.tilt=0deg..1deg/0.3deg", "does not divide the range"),
        ("crystal.tilt=0deg..1deg/1", "at least 2"),
        ("crystal.tilt=0..1deg/3", "has no unit"),
        ("crystal.tilt=0deg..1mm/3", "`mm` is not a unit of an angle"),
        ("crystal.tilt=0nm,1nm", "`nm` is not a unit of an angle"),
        ("crystal.material=bbo,bb0", "did you mean `bbo`"),
        ("crystal.dataset=kato-1986,kato-1987", "kato-1987"),
        ("emission.type=I,III", "`III` is none of 0, I, II"),
        ("crystal.2.tilt=0deg,1deg", "there is only one"),
        ("crystal.tilt", "there is no ="),
        ("title=a,b", "cannot be swept"),
        ("collection.*.iris=0.2deg,3mm", "of another kind"),
        ("sweep.by=tilt,pump", "cannot be swept"),
        ("sweep.pair=1,2", "cannot be swept"),
    ] {
        let refusal = run(&format!("--report rings --axis {axis}")).refusal(2);
        assert_says(&refusal, &[says]);
    }
    assert_says(&run("--axis crystal.tilt=0deg,1deg").refusal(2), &["no report", "--report"]);
    assert_says(&run("--report ring --axis crystal.tilt=0deg,1deg").refusal(2), &["did you mean `rings`"]);
    let twice = run("--report rings --axis crystal.tilt=0deg,1deg --axis crystal.tilt=0deg,1deg").refusal(2);
    assert_says(&twice, &["an axis twice"]);
    assert_says(&run("--report rings --axis crystal.tilt=0deg,1deg -f json").refusal(2), &["written as csv"]);
    assert_says(
        &run("--report rings --axis crystal.tilt=0deg,1deg -o rows.txt").refusal(2),
        &["name a .csv file"],
    );
}

/// Faults in a job's sweep point at line and column.
#[test]
fn mistakes_in_a_job_point_at_their_place() {
    let job = |axis: &str| {
        format!(
            "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\ncut = {{ theta = \"42 deg\", phi = \"0 deg\" }}\n[sweep]\nreport = \"rings\"\naxes = [\n  {axis},\n]\n"
        )
    };
    for (axis, column, says) in [
        (
            "{ key = \"crystal.tlt\", from = \"0 deg\", to = \"1 deg\", points = 3 }",
            11,
            "did you mean `crystal.tilt`",
        ),
        (
            "{ key = \"crystal.tilt\", from = \"0 deg\", to = \"1 nm\", points = 3 }",
            48,
            "not a unit of an angle",
        ),
        ("{ key = \"crystal.tilt\", from = \"0 deg\", to = \"1 deg\" }", 3, "needs points"),
        ("{ key = \"crystal.tilt\", from = \"0 deg\", to = \"1 deg\", pionts = 3 }", 57, "points"),
        (
            "{ together = [ { key = \"crystal.tilt\", values = [\"1 deg\"] }, { key = \"crystal.roll\", values = [\"1 deg\", \"2 deg\"] } ] }",
            64,
            "equally many values",
        ),
    ] {
        let refusal = twincone_with(&job(axis), "run -").refusal(2);
        assert_says(&refusal, &[says, &format!("standard input:9:{column}"), "^"]);
        let checked = twincone_with(&job(axis), "job check -").refusal(2);
        assert_says(&checked, &[says, "standard input:9:"]);
    }
}

#[test]
fn job_check_tells_points_rows_and_time() {
    let job = "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\ncut = { theta = \"42.5 deg\", phi = \"0 deg\" }\n[sweep]\nreport = \"rings\"\naxes = [ { key = \"crystal.tilt\", from = \"0 deg\", to = \"1 deg\", points = 21 } ]\n";
    assert_says(
        &twincone_with(job, "job check -").answer(),
        &["report rings: 21 points, 42 rows, about a second"],
    );
}

fn in_folder(folder: &Path, options: &str) -> Run {
    twincone_in(folder, &format!("run {BENCH} --report rings --axis crystal.tilt=-1deg..2deg/101 {options}"))
}

fn read(folder: &Path, name: &str) -> String {
    fs::read_to_string(folder.join(name)).unwrap_or_else(|e| panic!("{name}: {e}"))
}

fn names(folder: &Path) -> Vec<String> {
    let entries = fs::read_dir(folder).expect("a folder");
    let mut names: Vec<String> =
        entries.map(|e| e.expect("an entry").file_name().into_string().expect("UTF-8")).collect();
    names.sort();
    names
}

/// The same bytes for any number of threads, and for parts that are joined.
#[test]
fn bytes_do_not_depend_on_threads_or_parts() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    let piped = in_folder(folder, "").answer();
    for threads in [1, 2, 7] {
        in_folder(folder, &format!("--threads {threads} -o rows.csv")).answer();
        assert_eq!(read(folder, "rows.csv"), piped);
    }
    for part in 1..=12 {
        in_folder(folder, &format!("-o shared.csv --part {part}/12")).answer();
    }
    assert!(names(folder).contains(&"shared.003-of-012.csv".to_string()), "{:?}", names(folder));
    // each part is a table of its own
    Table::read(&read(folder, "shared.003-of-012.csv"));
    twincone_in(folder, "join shared.csv").answer();
    assert_eq!(read(folder, "shared.csv"), piped);
    assert_eq!(read(folder, "shared.csv.meta.toml"), read(folder, "rows.csv.meta.toml"));
}

/// Beside the rows stand version, job, data sets with sources, and what the columns mean.
#[test]
fn what_stands_beside_the_rows_tells_where_they_come_from() {
    let folder = TempDir::new().expect("a folder");
    in_folder(folder.path(), "-o rows.csv").answer();
    assert_eq!(names(folder.path()), ["rows.csv", "rows.csv.meta.toml"]);
    let meta: toml::Table = read(folder.path(), "rows.csv.meta.toml").parse().expect("TOML");
    assert_eq!(meta["version"].as_str(), Some(env!("CARGO_PKG_VERSION")));
    assert_eq!(meta["points"].as_integer(), Some(101));
    assert_eq!(meta["job"]["crystal"][0]["cut"]["theta"].as_str(), Some("42.541deg"));
    assert_says(meta["dataset"][0]["citation"].as_str().unwrap_or_default(), &["Kato"]);
    let columns: Vec<&str> =
        meta["column"].as_array().expect("columns").iter().filter_map(|c| c["name"].as_str()).collect();
    let rows = read(folder.path(), "rows.csv");
    assert_eq!(columns.join(","), rows.lines().next().unwrap_or_default());
}

/// `join` names the part that is missing, unfinished or of another job.
#[test]
fn join_refuses_what_is_not_a_whole_sweep() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    let join = |status: i32, says: &[&str]| {
        assert_says(&twincone_in(folder, "join rows.csv").refusal(status), says);
        assert!(!folder.join("rows.csv").exists());
    };
    join(4, &["there are no parts of rows.csv"]);
    for part in [1, 3] {
        in_folder(folder, &format!("-o rows.csv --part {part}/3")).answer();
    }
    join(4, &["rows.002-of-003.csv is missing"]);
    fs::write(folder.join("rows.002-of-003.csv.unfinished"), "point").expect("a file");
    join(4, &["rows.002-of-003.csv is not finished", "--resume"]);
    fs::remove_file(folder.join("rows.002-of-003.csv.unfinished")).expect("it was there");
    // another job's part
    in_folder(folder, "-o rows.csv --part 2/3 --roll 5deg").answer();
    join(2, &["rows.002-of-003.csv cannot be joined", "crystal.1.roll"]);
    in_folder(folder, "-o rows.csv --part 2/3").answer();
    // one that lost its end
    let whole = read(folder, "rows.003-of-003.csv");
    fs::write(folder.join("rows.003-of-003.csv"), &whole[..whole.len() / 2]).expect("a file");
    join(2, &["rows.003-of-003.csv cannot be joined", "does not hold points 67 to 100"]);
    fs::write(folder.join("rows.003-of-003.csv"), &whole).expect("a file");
    // two ways of sharing out
    in_folder(folder, "-o rows.csv --part 1/4").answer();
    join(2, &["of 3 and 4 parts"]);
    fs::remove_file(folder.join("rows.001-of-004.csv")).expect("it was there");
    twincone_in(folder, "join rows.csv").answer();
    assert_eq!(read(folder, "rows.csv"), in_folder(folder, "").answer());
}

#[test]
fn parts_must_be_parts() {
    for (part, says) in
        [("0/3", "K from 1 to N"), ("4/3", "K from 1 to N"), ("1/200", "has 101 points"), ("x", "write K/N")]
    {
        let folder = TempDir::new().expect("a folder");
        assert_says(&in_folder(folder.path(), &format!("-o rows.csv --part {part}")).refusal(2), &[says]);
        assert_eq!(names(folder.path()), [""; 0]);
    }
}

#[test]
fn a_target_that_is_solved_again_at_every_point_is_pointed_out() {
    let ran = twincone(
        "run -m bbo:kato-1986 --cut crossing=3deg --report crossings --axis pump.wavelength=404nm,405nm",
    );
    assert_eq!(ran.status, 0);
    assert_says(&ran.stderr, &["warning", "each point has a crystal of its own cut", "give theta"]);
    let table = Table::read(&ran.stdout);
    for row in 0..2 {
        assert_abs_diff_eq!(table.number(row, "a_polar_deg"), 3.0, epsilon = 1e-6);
    }
    // a tilt does not move the cut
    twincone(
        "run -m bbo:kato-1986 -p 405nm --cut crossing=3deg --report crossings --axis crystal.tilt=0deg,1deg",
    )
    .answer();
}

/// Contrast over filters, irises and plates: agreed states of a 2 mm crystal (computed twice, independently).
#[test]
fn report_state_sums_at_every_point() {
    let filters = rows("--report state --basis oe --axis filter.*.width=1nm,3nm,10nm");
    for (row, contrast) in [0.946, 0.650, 0.156].into_iter().enumerate() {
        assert_abs_diff_eq!(filters.number(row, "visibility_diagonal"), contrast, epsilon = 0.002);
    }
    let both = rows("--filter-width 3nm --report state --axis crystal.length=0.5mm,1mm");
    assert_eq!(both.column("basis"), ["oe", "lab", "oe", "lab"]);
    assert_abs_diff_eq!(both.number(0, "visibility_diagonal"), 0.969, epsilon = 0.002);
    assert_abs_diff_eq!(both.number(2, "visibility_diagonal"), 0.886, epsilon = 0.002);
    let missed = rows("--filter-width 3nm --report state --axis crystal.tilt=-1.3deg,0deg");
    assert_eq!(missed.column("status"), ["apart", "ok", "ok"]);
    let job = "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\ndataset = \"kato-1986\"\ncut = { theta = \"42.541 deg\", phi = \"0 deg\" }\nlength = \"2 mm\"\n[[filter]]\nwidth = \"40 nm\"\n[[compensator]]\nlength = \"1 mm\"\nroll = \"90 deg\"\n[sweep]\nreport = \"state\"\nbasis = \"oe\"\naxes = [ { key = \"compensator.length\", values = [\"0.9 mm\", \"1 mm\"] } ]\n";
    let plates = Table::read(&twincone_with(job, "run -").answer());
    assert_eq!(plates.column("compensator_length_mm"), ["0.9", "1"]);
    assert_abs_diff_eq!(plates.number(0, "visibility_diagonal"), 0.943, epsilon = 0.002);
    assert_abs_diff_eq!(plates.number(1, "visibility_diagonal"), 0.981, epsilon = 0.002);
    let refusal =
        twincone("run -m bbo -p 405nm --theta 42.5deg --report state --axis crystal.tilt=0deg,1deg");
    assert_says(&refusal.stdout, &["invalid"]);
}

#[test]
fn report_compensate_designs_at_every_point() {
    let table = rows("--filter-width 10nm --report compensate --axis crystal.length=1mm,2mm");
    // an e photon of 810 nm lags behind an o photon by 195 fs per mm (practice at the bench: half of it in each arm)
    for (point, delay) in [("0", 97.5), ("1", 195.0)] {
        let mut plates = (0..table.len()).filter(|row| table.cell(*row, "point") == point);
        let row = plates.next().expect("a plate");
        assert_abs_diff_eq!(table.number(row, "delay_fs").abs(), delay, epsilon = 2.0);
        assert!(table.number(row, "visibility_after") > 0.99);
        assert!(table.number(row, "visibility_before") < 0.4);
    }
}

/// Nothing of one point is left for the next: not even a default that depends on what was looked for.
#[test]
fn points_do_not_depend_on_those_before_them() {
    for options in [
        "-m bbo:kato-1986 -p 405nm --cut crossing=3deg --length 2mm -q --report tilt --half-angle 3deg --axis crystal.temperature=20degC,20.0000000001degC,20.0000000002degC",
        "-m bbo:kato-1986 --cut crossing=3deg --length 2mm -q --report tilt --half-angle 3deg --axis pump.wavelength=400nm..410nm/5",
        "-m bbo:kato-1986 -p 405nm --theta 42.5deg -q --report rings --axis crystal.cut.half-angle=2deg,3deg --axis crystal.tilt=0deg,1deg",
    ] {
        let folder = TempDir::new().expect("a folder");
        let one = twincone(&format!("run {options} --threads 1")).answer();
        assert!(one.contains(",ok\n"), "{one}");
        let count =
            one.lines().filter_map(|l| l.split(',').next()?.parse::<u64>().ok()).max().expect("points") + 1;
        for part in 1..=count {
            twincone_in(folder.path(), &format!("run {options} -o rows.csv --part {part}/{count}")).answer();
        }
        twincone_in(folder.path(), "join rows.csv").answer();
        assert_eq!(read(folder.path(), "rows.csv"), one);
    }
}

#[test]
fn axes_that_undo_one_another_are_refused() {
    for axes in [
        "--axis crystal.tilt=0deg,1deg --axis crystal.1.tilt=0deg,2deg",
        "--axis crystal.*.tilt=0deg,1deg --axis crystal.1.tilt=0deg,2deg",
        "--axis crystal.cut.theta=42deg,43deg --axis crystal.cut.crossing=2deg,3deg",
        "--axis emission.signal=800nm,810nm --axis emission.idler=800nm,810nm",
    ] {
        assert_says(&run(&format!("--report rings {axes}")).refusal(2), &["set the same thing"]);
    }
}

/// A part made with another material file is another job, though every key is the same.
#[test]
fn a_changed_material_file_is_noticed() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    let text = include_str!("../../data/materials/bbo.toml");
    let mine = |text: &str| fs::write(folder.join("mine.toml"), text).expect("a file");
    let sweep = "run -m ./mine.toml:kato-1986 -p 405nm --theta 42.541deg --phi 0deg --report rings --axis crystal.tilt=0deg..1deg/11 -o rows.csv";
    mine(text);
    twincone_in(folder, &format!("{sweep} --part 1/2")).answer();
    mine(&format!("{text}\n# another text\n"));
    twincone_in(folder, &format!("{sweep} --part 2/2")).answer();
    assert_says(&twincone_in(folder, "join rows.csv").refusal(2), &["material files differ"]);
}

/// Every point of a part is looked at, and names that only look like parts are left alone.
#[test]
fn join_counts_the_points_and_minds_odd_names() {
    let folder = TempDir::new().expect("a folder");
    let folder = folder.path();
    for part in 1..=2 {
        in_folder(folder, &format!("-o rows.csv --part {part}/2")).answer();
    }
    for odd in ["rows.1-of-0.csv", "rows.1-of-999999999.csv", "rows.tilt.1-of-4.csv", "rows.5-of-3.csv"] {
        fs::write(folder.join(odd), "").expect("a file");
    }
    let whole = read(folder, "rows.001-of-002.csv");
    let torn: Vec<&str> = whole.lines().filter(|line| !line.starts_with("7,")).collect();
    fs::write(folder.join("rows.001-of-002.csv"), torn.join("\n") + "\n").expect("a file");
    assert_says(&twincone_in(folder, "join rows.csv").refusal(2), &["does not hold points 0 to 49"]);
    fs::write(folder.join("rows.001-of-002.csv"), whole).expect("a file");
    twincone_in(folder, "join rows.csv").answer();
}

#[test]
fn a_sweep_that_can_never_be_says_why() {
    let ran = run("--type I --report crossings --axis crystal.tilt=0deg,1deg");
    assert_eq!(ran.status, 0);
    assert_says(&ran.stderr, &["warning", "no point can be", "opposite polarization"]);
    let folder = TempDir::new().expect("a folder");
    fs::create_dir(folder.path().join("rows.csv")).expect("a folder");
    assert_says(&in_folder(folder.path(), "-o rows.csv").refusal(4), &["it is a folder"]);
}

/// A word that no point can have is pointed at, in a list of a job as well.
#[test]
fn a_word_that_never_fits_is_pointed_at() {
    let job = "[pump]\nwavelength = \"405 nm\"\n[crystal]\nmaterial = \"bbo\"\ncut = { theta = \"42 deg\", phi = \"0 deg\" }\n[sweep]\nreport = \"rings\"\naxes = [\n  { key = \"crystal.dataset\", values = [\"kato-1986\", \"kato-1987\"] },\n]\n";
    let refusal = twincone_with(job, "run -").refusal(2);
    assert_says(
        &refusal,
        &["standard input:9:53: bbo has no data set `kato-1987`", "it has eimerl-1987", "^"],
    );
}
