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

const STACK: &str =
    "--job examples/two-crystals.toml --set crystal.2.tilt=0.3deg --set crystal.2.gap_before=5mm";

#[test]
fn every_mount_of_a_stack_has_its_steps() {
    let sheet = twincone(&format!("sheet --kind bench {STACK} --set crystal.2.reversed=about-beam")).answer();
    assert_says(&sheet, &["Mount crystal 1 (first)", "Mount crystal 2 (second)", "5 mm of air"]);
    // at roll 90 deg Z leans up, turned about the beam down; the reflection turns by twice the tilt: 1000 tan 0.6 deg
    assert_says(&sheet, &["leans down (-y)", "turned by half a turn about the beam"]);
    assert_says(&sheet, &["10.47 mm down (-y)", "tip the top of the mount towards the laser by 0.3 deg"]);
    assert_says(&sheet, &["Rings against tilt of crystal 1", "Rings against tilt of crystal 2"]);
    let order = twincone(&format!("sheet --kind order {STACK}")).answer();
    assert_says(
        &order,
        &["For crystal 1 (first) and crystal 2 (second): 2 equal pieces", "| quantity | 2 |"],
    );
    let order = twincone(&format!("sheet --kind order {STACK} --set crystal.2.length=0.6mm")).answer();
    assert_says(&order, &["For crystal 1 (first): one piece", "For crystal 2 (second): one piece", "0.6 mm"]);
}

#[test]
fn cross_tilts_are_dialled_by_the_spot_and_swept_where_they_tune() {
    let sheet =
        twincone("sheet --kind bench --job examples/biaxial.toml --cross-tilt 0.5deg --tilt 1deg").answer();
    // 1000 mm tan 2 deg = 34.92 mm; after both turns 17.46 mm down as well
    assert_says(&sheet, &["34.92 mm to the right (-x)", "more, about the other axis", "mm down (-y)"]);
    // every turn that is asked for has its spot: 1000 tan 4 deg, 1000 tan 0.2 deg
    assert_says(
        &sheet,
        &["the reflected spot moves by 69.9 mm", "by 0.1 deg moves the reflected spot by 3.49 mm"],
    );
    assert_says(&sheet, &["run clockwise for who looks along the beam"]);
    assert_says(&sheet, &["| cross tilt of the crystal |", "cross tilt +0.1 deg: tip the top"]);
    let ring = |line: &str| {
        let row = sheet.lines().find(|l| l.starts_with(line)).expect("a line");
        row.split('|').nth(3).expect("a radius").trim().parse::<f64>().expect("a number")
    };
    // the table moves: more cross tilt, larger ring
    assert!(ring("| +1.50 deg") > ring("| -0.50 deg") + 10.0);
}

#[test]
fn a_setting_without_light_says_what_gives_some() {
    let sheet = twincone("sheet --kind bench --job examples/telecom.toml").answer();
    // the temperature at which the rings of this period open, as a sweep of that example shows
    assert_says(
        &sheet,
        &["There is no ring at this setting", "A temperature of 42.5 degC (+12.5 K from now)"],
    );
    assert_says(
        &sheet,
        &["Set the oven so that the crystal is at 30 degC", "A cross tilt changed by +3.975 deg"],
    );
    assert_says(&sheet, &["as planned | no ring; the best direction misses by 0.16 rad/mm"]);
    let picture = twincone("picture --job examples/telecom.toml --pixels 16").answer();
    assert_says(&picture, &["There is no ring at this setting"]);
    let hot = twincone("cones --job examples/telecom.toml --temperature 43degC").answer();
    assert!(!hot.contains("No direction is phase matched"), "{hot}");
}

#[test]
fn rings_on_the_sheet_are_as_thick_as_filter_and_pump_make_them() {
    let thickness = |more: &str| {
        let sheet = twincone(&format!("sheet --kind bench --job examples/crossed-cones.toml{more}")).answer();
        let row = sheet.lines().find(|l| l.starts_with("| e 810 nm |")).expect("a row").to_string();
        let cell = row.split('|').nth(6).expect("a cell").trim().trim_end_matches(" mm").to_string();
        cell.parse::<f64>().expect("mm")
    };
    let plain = thickness("");
    // `cones`: 0.208 deg at one wavelength
    assert!((plain - 3.7).abs() < 0.11, "{plain}");
    // a rectangular filter far wider than that: the rings of its edges, 800 and 820 nm, lie that far apart
    let wide = thickness(" --filter-width 20nm --filter-shape rectangular");
    let csv =
        twincone("cones --job examples/crossed-cones.toml --signal 800nm --signal 820nm -f csv").answer();
    let table = crate::table::Table::read(&csv);
    let outer = |nm: f64| {
        let row = (0..table.len()).find(|r| {
            (table.number(*r, "wavelength_nm") - nm).abs() < 1e-6 && table.cell(*r, "polarization") == "e"
        });
        table.number(row.expect("a ring"), "radius_mm")
    };
    let centre = |nm: f64| {
        let row = (0..table.len()).find(|r| {
            (table.number(*r, "wavelength_nm") - nm).abs() < 1e-6 && table.cell(*r, "polarization") == "e"
        });
        table.number(row.expect("a ring"), "x_mm")
    };
    // mean over azimuth of the distance of two circles: the difference of radii, as the shift of centres averages out
    let apart = (outer(820.0) - outer(800.0)).abs();
    assert!((centre(820.0) - centre(800.0)).abs() < 0.7 * apart);
    assert!((wide - apart).abs() < 0.15 * apart, "{wide} {apart}");
    // what a pump's spread adds goes as 1/waist
    let added = |waist: &str| (thickness(&format!(" --waist {waist}")).powi(2) - plain * plain).sqrt();
    let (loose, tight) = (added("30um"), added("20um"));
    assert!(loose > 4.0 && (tight / loose / 1.5 - 1.0).abs() < 0.05, "{loose} {tight}");
}

#[test]
fn seed_steps_reach_from_full_light_to_half() {
    let sheet = twincone("sheet --kind bench --job examples/crossed-cones.toml").answer();
    let table = sheet.split("| seed |").nth(1).expect("a table");
    let values: Vec<f64> = table
        .lines()
        .skip(2)
        .take(5)
        .map(|l| l.split('|').nth(5).expect("sinc^2").trim().parse().expect("a number"))
        .collect();
    assert!(values[2] > 0.99 && values.iter().all(|v| *v > 0.2), "{values:?}");
    assert!(values[0].min(values[4]) < 0.9, "{values:?}");
}

#[test]
fn a_turn_that_changes_the_ring_alike_both_ways_is_no_test() {
    // light across Z at normal incidence: the table of this sheet shrinks on both sides
    let sheet = twincone("sheet --kind bench --job examples/telecom.toml --temperature 50degC").answer();
    assert!(!sheet.contains("must grow") && !sheet.contains("turned about the beam"), "{sheet}");
    let dark = twincone("sheet --kind bench --job examples/telecom.toml").answer();
    assert!(!dark.contains("must grow"), "{dark}");
    let crossed = twincone("sheet --kind bench --job examples/two-crystals.toml").answer();
    assert_says(&crossed, &["the rings must grow", "is the same both ways; only a turn tells"]);
    // beside normal incidence the two rings of a biaxial crystal differ: 40 mm, 26 mm
    let biaxial = twincone("sheet --kind bench --job examples/biaxial.toml --cross-tilt 0.5deg").answer();
    assert_says(&biaxial, &["the rings must grow", "slow 810 nm of radius 40.", "slow 810 nm of radius 26."]);
}

#[test]
fn crossed_crystals_are_never_dark_together() {
    // cos^2 + sin^2 = 1
    let sheet = twincone("sheet --kind bench --job examples/two-crystals.toml").answer();
    assert_says(
        &sheet,
        &["the sum stays the same", "axis at 90.0 deg from +x towards +y: it passes the pairs of crystal 1"],
    );
    let row = sheet.lines().find(|l| l.starts_with("| no light")).expect("a row");
    assert!(!row.contains("quarter turn off") && !row.contains("rolled by 90 deg"), "{row}");
    let one = twincone("sheet --kind bench --job examples/crossed-cones.toml").answer();
    assert_says(&one, &["pump polarization a quarter turn off"]);
}

#[test]
fn an_axis_across_the_beam_is_told_from_its_reverse_by_another() {
    // normal at 31.5 deg from X about Z, Z towards +x: X leans to one side of the plane of Z and beam, turned round to the other
    let job = "--job examples/biaxial.toml";
    let side = |more: &str| {
        let sheet = twincone(&format!("sheet --kind bench {job} {more}")).answer();
        let line = sheet.lines().find(|l| l.contains("The end of X that points downstream")).expect("a line");
        (line.contains("leans up (+y)"), line.contains("leans down (-y)"))
    };
    let (planned, round) = (side(""), side("--set crystal.reversed=about-beam"));
    assert!(planned.0 != planned.1 && planned == (round.1, round.0), "{planned:?} {round:?}");
    let order = twincone(&format!("sheet --kind order {job}")).answer();
    assert_says(&order, &["the end of X that points to the output leans", "Z lies across the beam"]);
    let uniaxial = twincone("sheet --kind order --job examples/crossed-cones.toml").answer();
    assert_says(&uniaxial, &["the end of Z that points downstream leans to the left (+x)"]);
}

#[test]
fn the_order_of_a_poled_crystal_is_about_its_period() {
    let job = "sheet --kind order --job examples/telecom.toml";
    let dark = twincone(job).answer();
    let hot = twincone(&format!("{job} --temperature 50degC")).answer();
    for sheet in [&dark, &hot] {
        assert_says(
            sheet,
            &["| period +0.05 um |", "| temperature +5 K", "leaves 2/pi of it", "kato-2002", "kato-1991"],
        );
        assert!(!sheet.contains("How sure the cut is"), "{sheet}");
    }
    // as `cut --find poling` at this temperature
    assert_says(&dark, &["konig-2004 46.204 um", "kato-2002 45.028 um", "fan-1987 50.041 um"]);
    // the oven that is 5 K too warm is set back by 5 K
    let row = hot.lines().find(|l| l.starts_with("| temperature +5 K")).expect("a row");
    assert!(row.contains("50.0 degC"), "{row}");
}

#[test]
fn a_ring_that_is_not_round_has_its_own_extent() {
    let sheet = twincone("sheet --kind bench --job examples/biaxial.toml").answer();
    let row = sheet.lines().find(|l| l.starts_with("| slow 810 nm | x")).expect("a row");
    // up and down as far as the arms stand, sideways less
    assert_says(row, &["-33.6 to +33.6", "-34.2 to +34.2"]);
}

#[test]
fn what_is_to_be_dialled_is_on_the_sheet() {
    let sheet = |more: &str| twincone(&format!("sheet --kind bench {more}")).answer();
    let cross = sheet("--job examples/biaxial.toml --cross-tilt 0.5deg");
    assert!(!cross.contains("it names the readings"), "{cross}");
    let scaled = sheet("--job examples/biaxial.toml --cross-tilt 0.5deg --set stage.zero=3.2deg");
    assert_says(&scaled, &["reads tilt, not this turn: set it by the spot"]);
    // 0.1 deg = 1.745 mrad of 5 mrad a turn; 0.25 deg 0.87 turns
    let screw = sheet("--job examples/two-colours.toml --set \"stage.per_turn=5 mrad\"");
    assert_says(&screw, &["(+0.35 turns of the screw)", "| +0.25 deg | +0.87 turns |"]);
    let at = |place: &str| screw.find(place).expect("a row");
    assert!(at("| 1a (800 nm) | 800 mm") < at("| 1a (800 nm) | 1000 mm"));
    assert!(screw.split("| iris at").nth(1).is_some_and(|table| table.contains("| 800 mm |")));
    let filled = sheet("--job examples/telecom.toml --temperature 50degC");
    assert_says(&filled, &["half the ring's radius: 3.5 mm at 1000 mm", "class 1 to 0.551 mW"]);
    let order = twincone("sheet --kind order --job examples/telecom.toml").answer();
    assert_says(&order, &["1550 nm, normal incidence; ask"]);
}
