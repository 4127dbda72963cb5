//! `cones`: where does the light go?

use approx::assert_abs_diff_eq;

use crate::run::{assert_ends_with_conventions, assert_says, twincone, twincone_with};
use crate::table::{Table, assert_json};

const RINGS: &str = "crystal, process, photon, wavelength_nm, polarization, field_azimuth_deg, axis_h_deg, axis_v_deg, \
     half_angle_deg, half_angle_min_deg, half_angle_max_deg, thickness_deg, internal_half_angle_deg, x_mm, y_mm, \
     radius_mm";

const CROSSINGS: &str = "pair, first_crystal, first_process, second_crystal, second_process, a_wavelength_nm, \
     b_wavelength_nm, a_h_deg, a_v_deg, a_polar_deg, a_azimuth_deg, a_x_mm, a_y_mm, b_h_deg, b_v_deg, b_polar_deg, \
     b_azimuth_deg, b_x_mm, b_y_mm, separation_deg, intersection_angle_deg, gap_deg, gap_kind, tilt_to_touch_deg";

/// The bright source of 1995: P. G. Kwiat et al., Phys. Rev. Lett. 75, 4337 (from memory).
const BRIGHT: &str = "cones -m bbo:eimerl-1987 --theta 49.2deg --phi 0deg --tilt 0.72deg -p 351.1nm";

fn rings(line: &str) -> Table {
    let table = Table::read(&twincone(&format!("{line} -f csv")).answer());
    table.assert_columns(RINGS);
    table
}

fn crossings(line: &str) -> Table {
    let table = Table::read(&twincone(&format!("{line} -f csv --rows crossings")).answer());
    table.assert_columns(CROSSINGS);
    table
}

#[test]
fn rings_of_the_first_bright_source() {
    let table = rings(BRIGHT);
    assert_eq!(table.column("photon"), ["signal", "idler"]);
    assert_eq!(table.column("polarization"), ["e", "o"]);
    assert_eq!(table.column("process"), ["e -> e + o"; 2]);
    assert_eq!(table.column("wavelength_nm"), ["702.2"; 2]);
    for (row, axis, half_angle) in [(0, 3.358, 4.495), (1, -3.365, 4.498)] {
        table.assert_empty(row, &[]);
        assert_abs_diff_eq!(table.number(row, "axis_h_deg"), axis, epsilon = 0.002);
        assert_abs_diff_eq!(table.number(row, "half_angle_deg"), half_angle, epsilon = 0.002);
        assert!(table.number(row, "half_angle_min_deg") < table.number(row, "half_angle_max_deg"));
    }
}

#[test]
fn values_that_are_zero_by_symmetry_are_zero() {
    let table = rings(BRIGHT);
    for column in ["field_azimuth_deg", "axis_v_deg", "y_mm"] {
        assert_eq!(table.cell(0, column), "0", "{column}");
    }
    assert_eq!(table.cell(1, "field_azimuth_deg"), "90");
}

#[test]
fn crossings_of_the_first_bright_source() {
    let table = crossings(BRIGHT);
    assert_eq!((table.len(), table.cell(0, "pair"), table.cell(0, "status")), (1, "1", "ok"));
    assert_eq!(
        [table.cell(0, "first_process"), table.cell(0, "second_process")],
        ["e -> e + o", "e -> o + e"]
    );
    table.assert_empty(0, &["gap_deg", "gap_kind", "tilt_to_touch_deg"]);
    for (photon, v) in [("a", 2.996), ("b", -2.996)] {
        assert_abs_diff_eq!(table.number(0, &format!("{photon}_v_deg")), v, epsilon = 0.002);
        assert_abs_diff_eq!(table.number(0, &format!("{photon}_h_deg")), -0.001, epsilon = 0.002);
    }
    assert_abs_diff_eq!(table.number(0, "separation_deg"), 5.992, epsilon = 0.002);
}

#[test]
fn json_holds_both_tables_and_the_resolved_job() {
    let json = twincone(&format!("{BRIGHT} -f json")).answer();
    let tables = [("rings", &rings(BRIGHT)), ("crossings", &crossings(BRIGHT))];
    let json = assert_json(&json, "cones", &tables);
    assert_eq!(json["datasets"], serde_json::json!(["bbo:eimerl-1987"]));
    let job = |section: &str, key: &str| json["job"][section][key].as_str().expect("a text").replace(' ', "");
    assert_eq!([job("crystal", "tilt"), job("crystal", "length")], ["0.72deg", "1mm"]);
    assert_eq!(job("pump", "wavelength"), "351.1nm");
}

#[test]
fn text_says_where_the_light_goes_in_words() {
    let text = twincone(BRIGHT).answer();
    assert_says(&text, &["1 mm (default length)", "tilt 0.72 deg", "Pair 1", "v +2.996 deg", "v -2.996 deg"]);
    assert_says(&text, &["e ring (702.2 nm) is off the pump to +x (left, looking along the beam)"]);
    assert_says(&text, &["entrance face reflects pump light"]);
    assert_ends_with_conventions(&text, "2.996", &["kato-1986", "tamosauskas-2018", "zhang-2000"]);
}

#[test]
fn a_place_on_the_screen_is_distance_times_tangent() {
    let near = crossings(&format!("{BRIGHT} --distance 0.5m"));
    let far = crossings(BRIGHT);
    for photon in ["a", "b"] {
        let v = near.number(0, &format!("{photon}_v_deg")).to_radians();
        assert_abs_diff_eq!(near.number(0, &format!("{photon}_y_mm")), 500.0 * v.tan(), epsilon = 1e-9);
        assert_eq!(near.cell(0, &format!("{photon}_polar_deg")), far.cell(0, &format!("{photon}_polar_deg")));
    }
}

#[test]
fn one_row_for_each_distinct_ring() {
    let two = "cones -m bbo:eimerl-1987 --theta 42.2deg -p 405nm";
    assert_eq!(rings(two).len(), 2);
    let four = rings(&format!("{two} --signal 800nm"));
    assert_eq!(four.len(), 4);
    let mut wavelengths = four.column("wavelength_nm");
    wavelengths.dedup();
    assert!(wavelengths.len() > 1, "{wavelengths:?}");
    let one = "cones -m bbo:kato-1986 --theta 29deg -p 405nm --type I";
    assert_eq!(rings(one).column("polarization"), ["o"]);
    assert_eq!(rings(&format!("{one} --signal 800nm")).column("photon"), ["signal", "idler"]);
    assert_eq!(crossings(one).len(), 0);
}

#[test]
fn a_wavelength_named_twice_counts_once() {
    let two = "cones -m bbo:eimerl-1987 --theta 42.2deg -p 405nm";
    assert_eq!(rings(&format!("{two} --signal 800nm --signal 800nm")).len(), 4);
    assert_eq!(rings(&format!("{two} --signal degenerate --signal 810nm")).len(), 2);
    assert_eq!(crossings(&format!("{two} --signal 800nm --signal 800nm")).len(), 2);
}

#[test]
fn nondegenerate_crossings_come_in_two_pairs() {
    let table = crossings("cones -m bbo:eimerl-1987 --theta 42.2deg -p 405nm --signal 800nm");
    assert_eq!(table.column("pair"), ["1", "2"]);
    for (row, v) in [(0, 2.979), (1, -2.979)] {
        assert_abs_diff_eq!(table.number(row, "a_h_deg"), 0.585, epsilon = 0.002);
        assert_abs_diff_eq!(table.number(row, "a_v_deg"), v, epsilon = 0.002);
        assert_abs_diff_eq!(
            table.number(row, "b_wavelength_nm"),
            1.0 / (1.0 / 405.0 - 1.0 / 800.0),
            epsilon = 1e-9
        );
    }
    let by_idler = crossings("cones -m bbo:eimerl-1987 --theta 42.2deg -p 405nm --idler 800nm");
    assert_abs_diff_eq!(by_idler.number(0, "b_wavelength_nm"), 800.0, epsilon = 1e-9);
}

#[test]
fn rings_that_miss_are_an_answer_and_say_what_makes_them_touch() {
    let asked = "cones -m bbo:kato-1986 --extrapolate --theta 45.7deg -p 405nm --signal 700nm";
    let run = twincone(&format!("{asked} --rows crossings -f csv"));
    let table = Table::read(&run.stdout);
    assert_eq!((run.status, table.cell(0, "status"), table.cell(0, "gap_kind")), (0, "apart", "inside"));
    assert_abs_diff_eq!(table.number(0, "gap_deg"), 0.80, epsilon = 0.005);
    let places = "a_h_deg a_v_deg a_polar_deg a_azimuth_deg a_x_mm a_y_mm b_h_deg b_v_deg b_polar_deg b_azimuth_deg \
                  b_x_mm b_y_mm separation_deg intersection_angle_deg";
    table.assert_empty(0, &std::iter::once("pair").chain(places.split_whitespace()).collect::<Vec<_>>());
    let touch = table.cell(0, "tilt_to_touch_deg");
    let run = twincone(&format!("{asked} --tilt {touch}deg --rows crossings -f csv"));
    assert_eq!(Table::read(&run.stdout).cell(0, "status"), "touching");
}

#[test]
fn a_crystal_tilted_the_wrong_way_gives_no_light_and_says_which_way_is_right() {
    let asked = "cones -m bbo:kato-1986 --theta 28.8deg --phi 90deg -p 405nm --type I --tilt -0.5deg";
    let table = rings(asked);
    assert_eq!(table.cell(0, "status"), "no_phase_matching");
    let missing = "field_azimuth_deg axis_h_deg axis_v_deg half_angle_deg half_angle_min_deg half_angle_max_deg \
                   thickness_deg internal_half_angle_deg x_mm y_mm radius_mm";
    table.assert_empty(0, &missing.split_whitespace().collect::<Vec<_>>());
    let text = twincone(asked).answer();
    assert_says(&text, &["No direction is phase matched", "rad/mm", "begins to give", "turn the mount"]);
    for (tilt, half_angle) in [("0.73deg", 3.010), ("1.00deg", 3.544)] {
        let opened = rings(&asked.replace("-0.5deg", tilt));
        assert_abs_diff_eq!(opened.number(0, "half_angle_deg"), half_angle, epsilon = 0.002);
    }
}

/// `thickness_deg` is empty where the inside of the ring is filled.
#[test]
fn a_filled_ring_has_no_thickness() {
    let table = rings("cones -m bbo:kato-1986 --theta 28.83deg --phi 90deg -p 405nm --type I");
    assert_eq!(table.cell(0, "status"), "ok");
    table.assert_empty(0, &["thickness_deg"]);
}

#[test]
fn a_cut_can_be_solved_first() {
    for (target, column, wanted) in
        [("crossing=3deg", "a_polar_deg", 3.0), ("separation=5deg", "separation_deg", 5.0)]
    {
        let table = crossings(&format!("cones -m bbo -p 405nm --cut {target}"));
        assert_abs_diff_eq!(table.number(0, column), wanted, epsilon = 1e-6);
    }
    let table = rings("cones -m bbo -p 405nm --cut half-angle=3deg");
    assert_eq!(table.column("process"), ["e -> o + o"]);
    assert_abs_diff_eq!(table.number(0, "half_angle_deg"), 3.0, epsilon = 1e-6);
}

#[test]
fn air_wavelengths_are_converted() {
    let table = rings(&BRIGHT.replace("-p 351.1nm", "-p \"351.1 nm air\""));
    // refractive index of standard air near 351 nm: 1.000286
    assert_abs_diff_eq!(table.number(0, "wavelength_nm"), 702.2 * 1.000_286, epsilon = 0.001);
}

#[test]
fn two_equal_crystals_crossed_coincide() {
    let job = r#"
        [pump]
        wavelength = "405 nm"
        [[crystal]]
        material = "bbo"
        cut = { half-angle = "3 deg", phi = "90 deg" }
        [[crystal]]
        material = "bbo"
        cut = { half-angle = "3 deg", phi = "90 deg" }
        roll = "90 deg"
        [emission]
        type = "I"
    "#;
    let table = Table::read(&twincone_with(job, "cones -j - -f csv").answer());
    assert_eq!(table.column("crystal"), ["1", "2"]);
    assert_abs_diff_eq!(table.number(0, "half_angle_deg"), 3.0, epsilon = 1e-6);
    let table = Table::read(&twincone_with(job, "cones -j - -f csv --rows crossings").answer());
    assert_eq!([table.cell(0, "first_crystal"), table.cell(0, "second_crystal")], ["1", "2"]);
    assert_eq!(table.cell(0, "status"), "coincident");
    assert!(!table.cell(0, "a_polar_deg").is_empty());
}

#[test]
fn crystals_that_give_no_pairs_still_have_a_geometry() {
    let table = rings("cones -m calcite --theta 28deg -p 405nm --type I");
    assert!(["no_nonlinearity", "no_phase_matching"].contains(&table.cell(0, "status")));
}

#[test]
fn extrapolation_is_marked_in_the_row_and_warned_of() {
    let run = twincone("cones -m bbo:kato-1986 --theta 42.2deg -p 405nm --signal 600nm --extrapolate -f csv");
    assert_eq!(run.status, 0, "{run:#?}");
    assert_says(&run.stderr, &["warning: extrapolated: 1246.2 nm is outside 220 nm to 1060 nm"]);
    assert!(Table::read(&run.stdout).column("extrapolated").iter().all(|e| *e == "true"));
}

/// The same pairs with their photons renamed are one pair; more histories in the same directions share its number.
#[test]
fn each_pair_of_directions_has_one_number() {
    let crystal = |roll: u32, cut: &str| {
        format!(
            "[[crystal]]\nmaterial = \"bbo:kato-1986\"\ncut = {{ {cut} }}\nlength = \"1 mm\"\nroll = \"{roll} deg\"\n"
        )
    };
    let rows = |crystals: &str, options: &str| {
        let job = format!("[pump]\nwavelength = \"405 nm\"\n{crystals}");
        Table::read(
            &twincone_with(&job, &format!("cones --job - {options} -f csv --rows crossings")).answer(),
        )
    };
    let two = "theta = \"42.541 deg\", phi = \"0 deg\"";
    let crossed = rows(&(crystal(0, two) + &crystal(90, two)), "");
    assert_eq!(crossed.column("pair"), ["1", "2", "3", "4"]);
    let place = |row: usize, arm: &str| {
        ["h", "v"].map(|axis| (crossed.number(row, &format!("{arm}_{axis}_deg")) * 1e5).round() as i64)
    };
    for row in 0..4 {
        let [a, b] = [place(row, "a"), place(row, "b")];
        // a above b, or level with it and at larger h
        assert!((a[1], a[0]) > (b[1], b[0]), "{a:?} {b:?}");
        for other in 0..row {
            assert!(place(other, "a") != a || place(other, "b") != b, "{row} is {other}");
            assert!(place(other, "a") != b || place(other, "b") != a, "{row} is {other} renamed");
        }
    }
    // rings that lie on each other: three crystals, of which two stand alike; and both photons listed
    let one = "theta = \"29.237 deg\", phi = \"90 deg\"";
    let three = rows(&(crystal(0, one) + &crystal(90, one) + &crystal(0, one)), "--type I");
    assert_eq!(three.column("pair"), ["1", "1"]);
    let both = rows(&(crystal(0, one) + &crystal(90, one)), "--type I --signal 780nm --signal 842.4nm");
    assert_eq!((both.column("pair"), both.column("a_wavelength_nm")), (vec!["1"], vec!["780"]));
    let told =
        twincone_with(&format!("[pump]\nwavelength = \"405 nm\"\n{}", crystal(0, two)), "cones --job -")
            .answer();
    assert_says(&told, &["Pair 1:", "1a 810 nm: h", "1b 810 nm: h"]);
}
