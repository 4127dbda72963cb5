//! `job`, job files, `--set` and `--write-job`.

use std::fs;

use approx::assert_abs_diff_eq;
use tempfile::TempDir;

use crate::run::{Run, assert_says, twincone, twincone_in, twincone_with};
use crate::table::Table;

const ONE: &str = r#"[pump]
wavelength = "405 nm"

[crystal]
material = "bbo"
cut = { theta = "42.4 deg", phi = "0 deg" }
"#;

const TWO: &str = r#"[pump]
wavelength = "405 nm"

[[crystal]]
name = "first"
material = "bbo"
cut = { theta = "29 deg", phi = "90 deg" }

[[crystal]]
material = "bbo"
cut = { theta = "29 deg", phi = "90 deg" }
roll = "90 deg"

[emission]
type = "I"
"#;

fn cones(job: &str, options: &str) -> Run {
    twincone_with(job, &format!("cones -j - -f csv {options}"))
}

#[test]
fn the_complete_job_is_valid_and_reads_back_as_itself() {
    let options = "-m bbo:kato-1986 -p 405nm --cut crossing=3deg --length 2mm --tilt 0.25deg --signal 800nm";
    let job = twincone(&format!("job {options}")).answer();
    let unspaced = job.replace(' ', "");
    assert_says(
        &unspaced,
        &["[pump]", "[crystal]", "[emission]", "[screen]", "[stage]", "dataset=\"kato-1986\""],
    );
    assert_says(&unspaced, &["cut={crossing=\"3deg\"}", "length=\"2mm\"", "signal=[\"800nm\"]"]);
    let checked = twincone_with(&job, "job check -").answer();
    assert_says(&checked, &["a valid job", "bbo:kato-1986", "tilt 0.25 deg", "signal 800 nm"]);
    assert_eq!(cones(&job, "").answer(), twincone(&format!("cones {options} -f csv")).answer());
}

/// Reading a job and writing it changes nothing.
#[test]
fn a_job_written_again_is_the_same_job() {
    let job =
        twincone("job -m bbo:kato-1986 -p 405nm --cut crossing=3deg --length 2mm --signal 800nm").answer();
    assert_eq!(twincone_with(&job, "job -j -").answer(), job);
}

#[test]
fn without_options_the_job_is_a_violet_pump_and_crossed_cones() {
    let job = twincone("job").answer();
    assert_says(&job, &["wavelength = \"405 nm\"", "material = \"bbo\"", "cut = { crossing = \"3 deg\" }"]);
    assert_eq!(cones(&job, "").status, 0);
    assert_eq!(cones(&job, "").stdout, twincone("cones -m bbo -p 405nm --cut crossing=3deg -f csv").answer());
}

#[test]
fn every_option_that_describes_the_experiment_is_in_the_job() {
    let options = "--waist 80um --power 3mW --linewidth 0.2nm --iris 0.3deg --filter-width 4nm --filter-centre 811nm \
                   --filter-shape rectangular";
    let job = twincone(&format!("job {options}")).answer().replace(' ', "");
    for (key, value) in [
        ("waist", "80um"),
        ("power", "3mW"),
        ("linewidth", "0.2nm"),
        ("iris", "0.3deg"),
        ("width", "4nm"),
        ("centre", "811nm"),
        ("shape", "rectangular"),
    ] {
        assert_says(&job, &[&format!("\n{key}=\"{value}\"")]);
    }
}

#[test]
fn options_override_single_keys_of_a_job() {
    let plain = Table::read(&cones(ONE, "").answer());
    let turned = Table::read(&cones(ONE, "--tilt 0.5deg").answer());
    let typed = twincone("cones -m bbo -p 405nm --theta 42.4deg --phi 0deg --tilt 0.5deg -f csv").answer();
    assert_ne!(plain.cell(0, "axis_h_deg"), turned.cell(0, "axis_h_deg"));
    assert_eq!(cones(ONE, "--tilt 0.5deg").stdout, typed);
    assert_eq!(cones(ONE, "--set crystal.tilt=0.5deg").stdout, typed);
    assert_eq!(cones(ONE, "--set \"crystal.tilt = 0.5 deg\"").stdout, typed);
    assert_eq!(cones(ONE, "--set crystal.*.tilt=0.5deg").stdout, typed);
    let other_cut = cones(ONE, "--cut crossing=3deg").answer();
    assert_eq!(other_cut, twincone("cones -m bbo -p 405nm --phi 0deg --cut crossing=3deg -f csv").answer());
}

/// Crystals are numbered from 1, also where there is only one.
#[test]
fn a_single_crystal_has_the_number_one() {
    assert_eq!(cones(ONE, "--set crystal.1.tilt=0.5deg").answer(), cones(ONE, "--tilt 0.5deg").answer());
    let refusal = cones(ONE, "--set crystal.2.tilt=0.5deg").refusal(2);
    assert_says(&refusal, &["there is no crystal 2"]);
}

#[test]
fn one_of_several_crystals_is_named_by_number_or_name() {
    let half_angles = |options: &str| {
        let table = Table::read(&cones(TWO, options).answer());
        [table.number(0, "half_angle_deg"), table.number(1, "half_angle_deg")]
    };
    let [first, second] = half_angles("");
    assert!((first - second).abs() < 1e-9);
    let turned = half_angles("--set crystal.*.tilt=0.3deg")[0];
    assert!(turned > first);
    assert_eq!(half_angles("--set crystal.1.tilt=0.3deg"), [turned, second]);
    assert_eq!(half_angles("--set crystal.first.tilt=0.3deg"), [turned, second]);
    let [first_now, second_now] = half_angles("--set crystal.2.tilt=0.3deg");
    assert!(first_now == first && (second_now - turned).abs() < 1e-9);
}

#[test]
fn a_bare_key_of_several_crystals_lists_them() {
    for (option, key) in [
        ("--tilt 0.3deg", "tilt"),
        ("--set crystal.tilt=0.3deg", "tilt"),
        ("--length 2mm", "length"),
        ("--material lbo", "material"),
        ("--theta 30deg", "cut"),
    ] {
        let refusal = cones(TWO, option).refusal(2);
        assert_says(
            &refusal,
            &[&format!("crystal.first.{key}"), &format!("crystal.2.{key}"), &format!("crystal.*.{key}")],
        );
    }
    assert_says(
        &cones(TWO, "--set crystal.3.tilt=1deg").refusal(2),
        &["there is no crystal 3; they are numbered 1 to 2"],
    );
}

#[test]
fn an_unknown_name_of_a_crystal_is_not_taken_for_a_key() {
    assert_says(&cones(TWO, "--set crystal.frist.tilt=1deg").refusal(2), &["`frist`", "first"]);
}

/// (wrong text, what it replaces, what the message says)
const FAULTS: [(&str, &str, &[&str]); 11] = [
    (
        "wavelength = \"405 nm\"",
        "wavelenght = \"405 nm\"",
        &[
            "job.toml:2:1: unknown key `wavelenght`",
            "did you mean `wavelength`?",
            "\n2 | wavelenght",
            "\n  | ^^^^^^^^^^",
        ],
    ),
    (
        "[crystal]",
        "[cristal]",
        &["job.toml:4:2: unknown key `cristal`", "did you mean `crystal`?", "^^^^^^^"],
    ),
    (
        "theta = ",
        "teta = ",
        &["job.toml:6:9: unknown key `teta`", "did you mean `theta`?", "\n  |         ^^^^"],
    ),
    (
        "\"405 nm\"",
        "\"405 kg\"",
        &["job.toml:2:14: `405 kg`", "`kg` is not a unit of a wavelength", "\n  |              ^^^^^^^^"],
    ),
    ("\"42.4 deg\"", "\"42,4 deg\"", &["job.toml:6:17:", "decimal comma", "`42.4 deg`", "^^^^^^^^^^"]),
    ("\"42.4 deg\"", "\"42.4\"", &["job.toml:6:17:", "has no unit", "deg"]),
    ("\"bbo\"", "\"bbq\"", &["job.toml:5:12:", "unknown crystal `bbq`", "did you mean `bbo`?", "^^^^^"]),
    ("\"bbo\"", "\"bbo:kato-1896\"", &["job.toml:5:12:", "no data set `kato-1896`", "kato-1986"]),
    ("\"405 nm\"", "\"-405 nm\"", &["job.toml:2:14:", "must be positive", "^^^^^^^^^"]),
    (
        "\"405 nm\"\n",
        "\"405 nm\"\nwaist = \"1 mm\"\nwaist = \"2 mm\"\n",
        &["job.toml:4:1:", "duplicate key", "^^^^^"],
    ),
    (", phi", " phi", &["job.toml:6:", "comma", "^"]),
];

#[test]
fn faults_of_a_job_file_are_told_with_their_place() {
    let folder = TempDir::new().expect("a folder");
    for (right, wrong, phrases) in FAULTS {
        fs::write(folder.path().join("job.toml"), ONE.replacen(right, wrong, 1)).expect("a job file");
        for command in
            ["cones -j job.toml", "job check job.toml", "cut -j job.toml", "tilt --touching --job job.toml"]
        {
            assert_says(&twincone_in(folder.path(), command).refusal(2), phrases);
        }
    }
}

/// A bare number where a unit is due: the message points at it and shows how it is written.
#[test]
fn a_number_without_quotes_is_told_how_to_write_it() {
    for (right, bare, phrases) in [
        ("\"405 nm\"", "405", ["standard input:2:14: `405` has no unit", "\"405 nm\""]),
        ("\"42.4 deg\"", "42.4", ["standard input:6:17: `42.4` has no unit", "\"42.4 deg\""]),
        ("\"bbo\"", "\"bbo\"\nlength = 2", ["standard input:6:10: `2` has no unit", "\"2 mm\""]),
    ] {
        assert_says(&cones(&ONE.replacen(right, bare, 1), "").refusal(2), &phrases);
    }
    let refusal = cones(ONE, "--set crystal.tilt=0.5").refusal(2);
    assert_says(&refusal, &["--set crystal.tilt=0.5: `0.5` has no unit", "0.5 deg"]);
}

/// The signal may be one text or a list of them; a bare number is told the same.
#[test]
fn a_signal_without_quotes_is_told_how_to_write_it() {
    let job = ONE.replacen("[crystal]", "[emission]\nsignal = 810\n[crystal]", 1);
    assert_says(&cones(&job, "").refusal(2), &["standard input:5:10: `810` has no unit", "\"810 nm\""]);
}

#[test]
fn faults_of_an_option_name_the_option() {
    for (option, phrases) in [
        (
            "--set crystal.tlt=1deg",
            &["--set crystal.tlt=1deg", "unknown key `tlt`", "did you mean `tilt`?"][..],
        ),
        ("--set crystal.tilt=1nm", &["--set crystal.tilt=1nm", "`nm` is not a unit of an angle"]),
        ("--set crystal.tilt", &["--set crystal.tilt", "KEY=VALUE"]),
        ("--set screen.distance=0m", &["screen distance must be positive"]),
        ("--tilt 1nm", &["--tilt", "`nm` is not a unit of an angle"]),
    ] {
        assert_says(&cones(ONE, option).refusal(2), phrases);
    }
}

#[test]
fn a_job_on_standard_input_is_called_so() {
    let refusal = cones(&ONE.replace("bbo", "bbq"), "").refusal(2);
    assert_says(&refusal, &["standard input:5:12: unknown crystal `bbq`"]);
}

/// `job check -` calls it by the same name as `--job -` does.
#[test]
fn a_checked_job_on_standard_input_is_called_so_too() {
    let refusal = twincone_with(&ONE.replace("bbo", "bbq"), "job check -").refusal(2);
    assert_says(&refusal, &["standard input:5:12"]);
}

#[test]
fn a_job_that_cannot_be_read_is_file_trouble() {
    assert_says(&twincone("cones -j nowhere.toml").refusal(4), &["cannot read nowhere.toml"]);
    assert_says(&twincone("job check nowhere.toml").refusal(4), &["cannot read nowhere.toml"]);
}

/// Runs a command with `--write-job`, and again with the job instead of the options; `target` belongs to the command.
#[track_caller]
fn assert_round_trip(command: &str, target: &str, options: &str) {
    let folder = TempDir::new().expect("a folder");
    let first =
        twincone_in(folder.path(), &format!("{command} {target} {options} -f csv --write-job job.toml"));
    assert_eq!(first.status, 0, "{command} {options}\n{first:#?}");
    let second = twincone_in(folder.path(), &format!("{command} {target} -j job.toml -f csv"));
    assert_eq!(second.stdout, first.stdout, "{command} {target} {options}");
}

#[test]
fn the_written_job_gives_the_same_bytes() {
    for options in [
        "-m bbo -p 405nm --theta 42.4deg --tilt 0.72deg --roll 12.3deg --length 2mm",
        "-m bbo:kato-1986 -p 405.03nm --theta 42.123456deg --phi 30deg --cross-tilt -1.7deg",
        "-m bbo -p 0.4051um --cut crossing=3deg --signal 790nm --signal degenerate",
        "-m bbo -p 405nm --cut half-angle=3.3deg",
        "-m bbo -p 405nm --cut separation=6.1deg --phi 10deg --idler 820nm",
        "-m bbo -p 405nm --cut beamlike --type II --distance 333.3mm",
        "-m bbo -p 405nm --theta 29deg --type I --temperature 313.15K",
        "-m bbo -p 405nm --theta 42.4deg --process \"e -> o + e\"",
        "-m ktp:kato-2002 -p 532nm --theta 90deg --phi 25.5deg --set crystal.reversed=about-vertical",
        "-m bbo:kato-1986 -p 405nm --theta 42.4deg --signal 600nm --extrapolate",
        "-m ktp -p 792nm --theta 90deg --phi 0deg --poling 46.1um --temperature 30degC --length 1cm",
        "-m bbo -p 405nm --theta 42.4deg --set mount.about_y=0.4deg --set mount.about_x=-0.2deg",
    ] {
        assert_round_trip("cones", "", options);
        assert_round_trip("cones", "--rows crossings", options);
    }
}

#[test]
fn the_written_job_gives_the_same_bytes_in_every_command() {
    assert_round_trip("twin", "--direction 0deg,3deg", "-m bbo -p 405nm --theta 42.4deg --length 2mm");

    assert_round_trip("index", "--wavelength 600nm", "-m bbo --theta 30deg");
}

#[test]
fn the_written_job_gives_the_same_bytes_for_several_crystals() {
    let folder = TempDir::new().expect("a folder");
    fs::write(folder.path().join("two.toml"), TWO).expect("a job file");
    let options = "--set crystal.2.tilt=0.3deg --set crystal.first.length=0.5mm";
    let first =
        twincone_in(folder.path(), &format!("cones -j two.toml {options} -f csv --write-job again.toml"));
    assert_eq!(twincone_in(folder.path(), "cones -j again.toml -f csv").answer(), first.answer());
}

/// Without a `[stage]` there is no reading, in the written job neither.
#[test]
fn the_written_job_does_not_invent_a_stage() {
    assert_round_trip("tilt", "--crossing 3deg", "-m bbo -p 405nm --theta 42.4deg --tilt 0.1deg");
}

/// What was typed in another unit reads back exactly, too.
#[test]
fn the_written_job_keeps_other_units_to_the_last_bit() {
    for tilt in ["12.5mrad", "1arcmin", "33.3arcsec", "0.017rad", "1234urad"] {
        assert_round_trip("cones", "", &format!("-m bbo -p 405nm --theta 42.35deg --tilt {tilt}"));
    }
    assert_round_trip("cones", "", "-m bbo -p \"405.03 nm air\" --theta 42.35deg");
}

/// A default that depends on the question is not written as if it had been asked for.
#[test]
fn the_written_job_leaves_the_type_open_where_it_was() {
    assert_round_trip("tilt", "--half-angle 3deg", "-m bbo -p 405nm --theta 29deg");
    assert_round_trip("cones", "", "-m bbo -p 405nm --cut half-angle=3deg");
}

/// The job that `cut` writes is the crystal it found.
#[test]
fn the_job_of_cut_is_its_answer() {
    let folder = TempDir::new().expect("a folder");
    let job_of =
        |line: &str| twincone_in(folder.path(), &format!("cut {line} --write-job job.toml --quiet")).answer();
    let then =
        |line: &str| Table::read(&twincone_in(folder.path(), &format!("{line} -j job.toml -f csv")).answer());
    job_of("-m bbo -p 405nm --crossing 3deg");
    assert_abs_diff_eq!(then("cones --rows crossings").number(0, "a_polar_deg"), 3.0, epsilon = 1e-6);
    job_of("-m bbo -p 405nm --half-angle 3deg");
    assert_abs_diff_eq!(then("cones").number(0, "half_angle_deg"), 3.0, epsilon = 1e-6);
    job_of("-m bbo -p 405nm --type I");
    assert!(then("cut").number(0, "d_eff_pm_per_v") > 1.8);
    job_of("-m ktp -p 792nm --find poling --theta 90deg --phi 0deg --type II");
    let twin = then("twin --direction 0deg,0deg");
    assert_abs_diff_eq!(twin.number(0, "mismatch_rad_per_mm"), 0.0, epsilon = 1e-6);
}

/// Without a cut `index` tells the principal axes, from the written job too.
#[test]
fn the_written_job_does_not_invent_a_cut() {
    assert_round_trip("index", "--wavelength 600nm", "-m bbo");
}

/// A crystal of the user's own is written by the path it came from.
#[test]
fn the_written_job_finds_the_users_own_crystal_again() {
    let folder = TempDir::new().expect("a folder");
    fs::write(folder.path().join("mine.toml"), twincone("materials template").answer())
        .expect("a material file");
    let first = twincone_in(
        folder.path(),
        "index -m ./mine.toml --theta 30deg --wavelength 600nm -f csv --write-job job.toml",
    )
    .answer();
    assert_eq!(twincone_in(folder.path(), "index -j job.toml --wavelength 600nm -f csv").answer(), first);
}

#[test]
fn a_job_that_cannot_be_written_is_file_trouble() {
    let run = twincone("cones -m bbo -p 405nm --theta 42deg --write-job nowhere/job.toml");
    assert_says(&run.refusal(4), &["cannot write nowhere/job.toml"]);
}
