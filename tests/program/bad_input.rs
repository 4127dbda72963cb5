//! Bad input: one clear sentence that says what to do, the right exit status, no results.

use crate::run::{assert_says, twincone};

/// Pump, crystal and cut of a run that would go well.
const GOOD: &str = "cones -m bbo -p 405nm --theta 42deg";

/// A refusal in one sentence on one line.
#[track_caller]
fn assert_refused(line: &str, status: i32, phrases: &[&str]) {
    let refusal = twincone(line).refusal(status);
    assert_eq!(refusal.trim_end().lines().count(), 1, "{refusal}");
    assert_says(&refusal, phrases);
}

#[test]
fn a_missing_unit_is_told_with_those_that_would_do() {
    for (option, phrases) in [
        ("--tilt 0.5", ["--tilt: `0.5` has no unit", "`0.5 deg`"]),
        ("--pump 405", ["--pump: `405` has no unit", "`405 nm`"]),
        ("--length 2", ["--length: `2` has no unit", "mm"]),
        ("--temperature 22", ["--temperature: `22` has no unit", "`22 degC`"]),
        ("--power 40", ["--power: `40` has no unit", "`40 mW`"]),
        ("--signal 810", ["--signal: `810` has no unit", "`810 nm`"]),
        ("--cut crossing=3", ["--cut: `3` has no unit", "`3 deg`"]),
    ] {
        assert_refused(&with(option), 2, &phrases);
    }
}

/// [`GOOD`] with an option, which takes the place of the one that is there already.
fn with(option: &str) -> String {
    match option.split_whitespace().next() {
        Some("--pump") => format!("cones -m bbo --theta 42deg {option}"),
        Some("--cut" | "--theta") => format!("cones -m bbo -p 405nm {option}"),
        Some("--material") => format!("cones -p 405nm --theta 42deg {option}"),
        _ => format!("{GOOD} {option}"),
    }
}

#[test]
fn a_wrong_unit_is_told_with_the_right_ones() {
    for (option, phrases) in [
        ("--tilt 0.5nm", ["`nm` is not a unit of an angle", "deg"]),
        ("--pump 405kg", ["`kg` is not a unit of a wavelength", "nm"]),
        ("--pump 405Nm", ["`Nm` is not a unit", "did you mean `nm`?"]),
        ("--temperature 300F", ["`F` is not a unit of a temperature", "degC, K"]),
        ("--length 2deg", ["`deg` is not a unit of a length", "mm"]),
        ("--power 40mw", ["`mw` is not a unit", "did you mean `mW`?"]),
        ("--linewidth 2deg", ["--linewidth: `2deg`", "`0.1 nm` or `200 GHz`"]),
        ("--iris 2nW", ["--iris: `2nW`", "`0.2 deg`"]),
    ] {
        assert_refused(&with(option), 2, &phrases);
    }
}

#[test]
fn a_decimal_comma_is_told_with_the_point_in_its_place() {
    assert_refused(&with("--tilt \"0,5 deg\""), 2, &["--tilt", "decimal comma; use a point: `0.5 deg`"]);
    assert_refused(&with("--pump 404,8nm"), 2, &["--pump", "`404.8nm`"]);
}

#[test]
fn values_that_are_no_numbers_are_refused() {
    for (option, phrases) in [
        ("--tilt NaN", ["--tilt: `NaN` does not start with a number", "`0.5 deg`"]),
        ("--tilt \"nan deg\"", ["--tilt: `nan deg` does not start with a number", "`0.5 deg`"]),
        ("--length inf", ["--length: `inf` does not start with a number", "such as"]),
        ("--tilt 1e999deg", ["--tilt: `1e999deg` is not a finite number", "`0.5 deg`"]),
        ("--tilt \"\"", ["--tilt", "`0.5 deg`"]),
        ("--tilt --0.5deg", ["--tilt", "`0.5 deg`"]),
    ] {
        assert_refused(&with(option), 2, &phrases);
    }
}

#[test]
fn values_that_cannot_be_are_refused_with_what_can() {
    for (option, phrases) in [
        ("--length -2mm", ["--length: the crystal length must be positive", "-2mm"]),
        ("--length 0mm", ["--length: the crystal length must be positive", "0mm"]),
        ("--pump -405nm", ["--pump: the pump wavelength must be positive", "-405nm"]),
        ("--distance -1m", ["--distance: the screen distance must be positive", "-1m"]),
        ("--poling 0um", ["--poling: the poling period must be positive", "0um"]),
        ("--waist -3um", ["--waist: the waist must be positive", "-3um"]),
        ("--tilt 89deg", ["--tilt: the tilt must lie within -80 deg to 80 deg", "89 deg"]),
        ("--tilt -1000deg", ["--tilt: the tilt must lie within -80 deg to 80 deg", "miss the face"]),
        ("--cross-tilt 2rad", ["--cross-tilt: the cross tilt must lie within -80 deg to 80 deg", "miss"]),
        ("--theta 200deg", ["--theta: theta must lie within 0 deg to 180 deg", "200 deg"]),
        ("--theta -5deg", ["--theta: theta must lie within 0 deg to 180 deg", "-5 deg"]),
        ("--temperature -300degC", ["--temperature", "absolute zero"]),
        ("--cut crossing=-3deg", ["--cut: the angle must lie between 0 deg and 60 deg", "-3 deg"]),
        ("--cut crosing=3deg", ["--cut crosing=3deg: write crossing=3deg", "collinear or beamlike"]),
        ("--type III", ["--type: `III` is none of", "`II`"]),
        ("--filter-shape round", ["--filter-shape: `round` is none of", "`gaussian`, `rectangular`"]),
    ] {
        assert_refused(&with(option), 2, &phrases);
    }
}

/// Quantities that no command reads yet are checked all the same.
#[test]
fn what_must_be_positive_is_said_for_every_quantity() {
    for option in [
        "--power -3mW",
        "--pulse -150fs",
        "--linewidth -1nm",
        "--linewidth -200GHz",
        "--iris -0.2deg",
        "--iris 0mm",
    ] {
        let name = option.split(' ').next().expect("an option");
        assert_refused(&with(option), 2, &[name, "positive"]);
    }
}

#[test]
fn no_temperature_lies_below_absolute_zero() {
    for key in ["temperature", "reference_temperature"] {
        assert_refused(&with(&format!("--set crystal.{key}=-400degC")), 2, &[key, "absolute zero"]);
    }
}

#[test]
fn negative_values_need_no_equals_sign() {
    for option in
        ["--tilt -0.5deg", "--cross-tilt -0.5deg", "--roll -90deg", "--phi -60deg", "--tilt=-0.5deg"]
    {
        twincone(&with(option)).answer();
    }
    assert_refused(
        &with("--temperature -20degC"),
        3,
        &["-20 degC is outside 0 degC to 100 degC", "--extrapolate"],
    );
    twincone("twin -m bbo -p 405nm --theta 42deg --direction -1deg,-3deg").answer();
    twincone(&with("--tilt \"\u{2212}0.5 deg\"")).answer();
}

#[test]
fn unknown_crystals_and_data_sets_are_told_with_the_known_ones() {
    assert_refused(&with("--material bb0"), 2, &["unknown crystal `bb0`", "did you mean `bbo`?"]);
    assert_refused(&with("--material BBO"), 2, &["unknown crystal `BBO`", "did you mean `bbo`?"]);
    assert_refused(&with("--material ktp2"), 2, &["did you mean `ktp`?", "`twincone materials`"]);
    assert_refused(&with("--material unobtainium"), 2, &["`unobtainium`", "`twincone materials` lists them"]);
    assert_refused(&with("--material bbo:kato-1896"), 2, &["no data set `kato-1896`", "it has", "kato-1986"]);
    assert_refused(&with("--material bbo:"), 2, &["data set", "kato-1986"]);
    assert_refused(&with("--material \"\""), 2, &["`twincone materials`"]);
}

#[test]
fn wavelengths_outside_the_range_end_with_status_three_and_a_remedy() {
    assert_refused(
        "cones -m bbo -p 150nm --theta 42deg",
        3,
        &["the pump, 150 nm", "188 nm to 5200 nm", "--extrapolate"],
    );
    let other_sets = ["640 nm to 3180 nm", "use eimerl-1987 or kato-1986", "--extrapolate"];
    assert_refused("cones -m bbo:zhang-2000 -p 405nm --theta 42deg", 3, &other_sets);
    let idler = ["the idler, 1246.154 nm", "220 nm to 1060 nm", "tamosauskas-2018"];
    assert_refused("cones -m bbo:kato-1986 -p 405nm --theta 42deg --signal 600nm", 3, &idler);
    assert_refused("cut -m bbo:kato-1986 -p 405nm --signal 600nm", 3, &idler);
    assert_refused("tilt -m bbo:kato-1986 -p 405nm --theta 42deg --signal 600nm --touching", 3, &idler);
    assert_refused(
        "twin -m bbo:kato-1986 -p 405nm --theta 42deg --signal 600nm --direction 0deg,3deg",
        3,
        &idler,
    );
}

#[test]
fn a_temperature_that_a_set_does_not_know_ends_with_status_three() {
    let refusal = ["aggas2", "20 degC only", "no thermo-optic terms"];
    assert_refused("cones -m aggas2 -p 2um --theta 40deg --temperature 50degC", 3, &refusal);
}

#[test]
fn a_signal_has_less_energy_than_the_pump() {
    for signal in ["400nm", "405nm"] {
        let phrases = ["--signal", "is not longer than the pump, 405 nm", "less energy than the pump"];
        assert_refused(&with(&format!("--signal {signal}")), 2, &phrases);
    }
    assert_refused(&with("--idler 300nm"), 2, &["--idler", "is not longer than the pump"]);
}

/// What the shell leaves of an unquoted `e -> o + e`, however it was spaced: the arrow's head took the next word away.
#[test]
fn an_unquoted_arrow_is_recognised_in_every_form() {
    for left in [
        "--process e-",      // e->o+e
        "--process=e-",      // the same after an equals sign
        "--process e -",     // e -> o+e
        "--process e - e",   // e -> o+ e
        "--process e - + e", // e -> o + e
        "--process e- + e",  // e->o + e
        "--process e",       // only `>` and its file are gone
        "--process fast - + slow",
        "--process fast-",
    ] {
        assert_shell_is_blamed(left);
    }
}

#[test]
fn an_unquoted_arrow_after_an_equals_sign_is_recognised() {
    assert_shell_is_blamed("--process=e - + e");
}

#[track_caller]
fn assert_shell_is_blamed(left: &str) {
    let refusal = twincone(&format!("{GOOD} {left}")).refusal(2);
    assert_says(&refusal, &["the shell took", "quote it", "e:o+e"]);
}

#[test]
fn processes_that_cannot_be_are_refused_with_one_that_can() {
    for process in ["x:o+e", "e:o", "\"e -> o\"", "\"\"", "oee", "\"o + e\""] {
        let refusal = twincone(&format!("{GOOD} --process {process}")).refusal(2);
        assert_says(&refusal, &["--process", "\"e -> o + e\"", "e:o+e"]);
    }
    assert_refused(
        "cones -m ktp -p 532nm --theta 90deg --phi 24deg --process e:o+e",
        2,
        &["biaxial", "fast and slow"],
    );
}

#[test]
fn both_spellings_of_a_process_are_one() {
    let arrow = twincone(&with("--process \"e -> o + e\" -f csv")).answer();
    assert_eq!(arrow, twincone(&with("--process e:o+e -f csv")).answer());
    assert_eq!(arrow, twincone(&with("--process e->o+e -f csv")).answer());
}

#[test]
fn two_materials_are_one_too_many() {
    assert_refused(
        &with("--material bbo --material lbo"),
        2,
        &["--material is given more than once", "one crystal"],
    );
}

/// Options that exclude each other: neither simply wins.
#[track_caller]
fn assert_exclusive(options: &str) {
    let names: Vec<&str> = options.split_whitespace().filter(|word| word.starts_with("--")).collect();
    assert_says(&twincone(&with(options)).refusal(2), &names);
}

#[test]
fn signal_and_idler_exclude_each_other() {
    assert_exclusive("--signal 800nm --idler 800nm");
}

#[test]
fn type_and_process_exclude_each_other() {
    assert_exclusive("--type I --process e:o+e");
}

#[test]
fn theta_and_a_cut_to_be_solved_exclude_each_other() {
    assert_exclusive("--theta 42deg --cut crossing=3deg");
}

#[test]
fn iris_and_fibre_exclude_each_other() {
    assert_exclusive("--iris 0.2deg --fibre 80um");
}

#[test]
fn linewidth_and_pulse_exclude_each_other() {
    assert_exclusive("--linewidth 0.1nm --pulse 150fs");
}

#[test]
fn what_is_missing_is_told_with_an_example() {
    assert_refused("cones -m bbo --theta 42deg", 2, &["no pump wavelength", "--pump 405nm"]);
    assert_refused("cones -p 405nm --theta 42deg", 2, &["no material", "--material bbo"]);
    assert_refused("cones -m ktp -p 532nm --theta 90deg", 2, &["no phi", "biaxial", "--phi 0deg"]);
    assert_refused(
        "cones -m bbo -p 405nm",
        2,
        &["no cut", "--theta", "--cut crossing=3deg", "`twincone cut`"],
    );
    assert_refused("cones -m bbo -p 405nm --type I", 2, &["--cut half-angle=3deg"]);
    assert_refused("cut -p 405nm", 2, &["no crystal", "--material bbo"]);
    assert_refused("cones -m bbo -p 405nm --phi 0deg", 2, &["no cut", "--theta"]);
}

#[test]
fn mistyped_options_and_commands_get_the_nearest() {
    assert_says(&twincone("cones --pum 405nm").refusal(2), &["'--pum'", "'--pump'"]);
    assert_says(&twincone("cones --halfangle 3deg").refusal(2), &["'--halfangle'"]);
    assert_says(&twincone("cone -m bbo").refusal(2), &["'cone'", "'cones'"]);
    assert_says(&twincone("cones --format xml").refusal(2), &["'xml'", "text, csv, json"]);
    assert_says(&twincone(&format!("{GOOD} --threads 0")).refusal(2), &["--threads"]);
}

#[test]
fn a_cut_that_does_not_exist_ends_with_status_one() {
    assert_refused("cones -m bbo -p 1000nm --cut crossing=40deg", 1, &["no cut of bbo", "`twincone cut`"]);
}
