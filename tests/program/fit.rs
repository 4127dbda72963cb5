//! `fit`: the real bench, read out of what was measured.

use std::fs;

use approx::assert_abs_diff_eq;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use tempfile::TempDir;

use crate::run::{assert_says, twincone, twincone_in, twincone_with};
use crate::table::Table;

const COLUMNS: &str = "parameter, value, uncertainty, unit, prior, prior_uncertainty, at_bound";
/// What was ordered.
const BENCH: &str = "-m bbo:kato-1986 -p 405nm --cut crossing=3deg";

/// Rows of a sweep over a crystal that is not what was ordered.
fn swept(folder: &TempDir, report: &str) -> String {
    let line = format!(
        "run -m bbo:kato-1986 -p 405nm --theta 42.2deg --report {report} --axis crystal.tilt=0deg..2deg/3 -o {report}.csv -q"
    );
    twincone_in(folder.path(), &line).answer();
    format!("{report}.csv")
}

fn value(table: &Table, parameter: &str, column: &str) -> f64 {
    let row = table.column("parameter").iter().position(|p| *p == parameter).expect("the parameter");
    table.number(row, column)
}

#[test]
fn rows_of_sweeps_are_read_as_they_are() {
    let folder = TempDir::new().expect("a folder");
    for report in ["rings", "crossings"] {
        let file = swept(&folder, report);
        let line = format!("fit {file} {BENCH} --sigma 0.5mm --free theta,roll -f csv");
        let table = Table::read(&twincone_in(folder.path(), &line).answer());
        table.assert_columns(COLUMNS);
        // priors draw a little; the rest is exact
        assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "value"), 42.2, epsilon = 1e-3);
        assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "prior"), 42.5408, epsilon = 1e-3);
        assert_eq!(table.column("at_bound"), ["false", "false"]);
    }
}

/// Commas for decimals, angles for lengths, points on rings for rings: the same bench.
#[test]
fn other_forms_of_the_same_measurements_give_the_same_cut() {
    let cone = Table::read(&twincone("cones -m bbo:kato-1986 -p 405nm --theta 42.3deg -f csv").answer());
    let number = |column: &str| cone.number(0, column);
    let (x, y, r) = (number("x_mm"), number("y_mm"), number("radius_mm"));
    let (h, half) = (number("axis_h_deg"), number("half_angle_deg"));
    let comma = |v: f64| format!("{v}").replace('.', ",");
    let forms = [
        format!("x_mm,y_mm,radius_mm,polarization,sigma_mm\n{x},{y},{r},e,0.5\n"),
        format!("x_mm;y_mm;radius_mm;polarization;sigma_mm\n{};{};{};e;0,5\n", comma(x), comma(y), comma(r)),
        format!("axis_h_deg,axis_v_deg,half_angle_deg,polarization,sigma_deg\n{h},0,{half},e,0.03\n"),
        format!("radius_mm,photon,sigma_mm\n{r},signal,0.5\n"),
    ];
    for form in forms {
        let table =
            Table::read(&twincone_with(&form, &format!("fit - {BENCH} --free theta -f csv")).answer());
        assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "value"), 42.3, epsilon = 0.01);
    }
}

/// A scale whose zero is at 3 deg and that runs backwards: 2.5 deg on it is a tilt of half a degree.
#[test]
fn readings_of_the_stage_count_from_its_zero() {
    let cone = "cones -m bbo:kato-1986 -p 405nm --theta 42.3deg --tilt 0.5deg -f csv";
    let radius = Table::read(&twincone(cone).answer()).number(0, "radius_mm");
    let form = format!("stage_reading_deg,radius_mm,polarization,sigma_mm\n2.5,{radius},e,0.5\n");
    let stage = "--set \"stage.zero='3 deg'\" --set stage.reversed=true";
    let line = format!("fit - {BENCH} {stage} --free theta -f csv");
    let table = Table::read(&twincone_with(&form, &line).answer());
    assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "value"), 42.3, epsilon = 0.01);
}

#[test]
fn the_text_says_what_to_set_and_what_is_not_known() {
    let folder = TempDir::new().expect("a folder");
    let file = swept(&folder, "rings");
    let line = format!("fit {file} {BENCH} --sigma 3mm --write-job fitted.toml");
    let text = twincone_in(folder.path(), &line).answer();
    assert_says(
        &text,
        &[
            "This crystal is cut at 42.",
            "Your tilt zero is",
            "for cones that cross 3 deg",
            "The data cannot separate",
            "back-reflection",
            "If the picture is turned by 180 deg and mirrored",
            "--view-turn",
            "Residuals",
        ],
    );
    let cones =
        Table::read(&twincone_in(folder.path(), "cones -j fitted.toml --rows crossings -f csv").answer());
    assert_eq!(cones.len(), 1);
    let job = fs::read_to_string(folder.path().join("fitted.toml")).expect("the job");
    assert_says(&job, &["zero = \""]);
    let known = twincone_in(folder.path(), &format!("{line} --view-turn 0 --mirror no")).answer();
    assert!(!known.contains("If the picture is"), "{known}");
}

#[test]
fn all_data_sets_are_held_against_the_bench() {
    let folder = TempDir::new().expect("a folder");
    let file = swept(&folder, "rings");
    let line = format!("fit {file} {BENCH} --sigma 0.5mm --free theta --all-datasets");
    let text = twincone_in(folder.path(), &line).answer();
    assert_says(&text, &["eimerl-1987: chi-square", "fits this bench best", "zhang-2000"]);
}

#[test]
fn the_template_is_read_back() {
    let template = twincone("fit --template").answer();
    let run = twincone_with(&template, &format!("fit - {BENCH}"));
    assert!(matches!(run.status, 0 | 1), "{run:#?}");
}

#[test]
fn bad_measurements_are_refused_with_what_is_missing() {
    for (text, why) in [
        ("radius_mm,polarization\n80,e\n", "1 measured number for 4 unknowns"),
        ("time,mood\n1,2\n", "--template"),
        ("x_cm,y_cm,radius_cm\n5.9,0,8\n", "x_mm"),
        ("x_mm,y_mm,radius_mm\n59,0,eighty\n", "line 2"),
        ("x_mm,y_mm,radius_mm\n59,0,-80\n", "above 0"),
        ("x_mm,y_mm,radius_mm,polarization\n59,0,80000,e\n58,0,70000,e\n", "look at the unit"),
        ("crystal_tilt_deg,x_mm,y_mm,radius_mm\n300,59,0,80\n", "miss the face"),
        ("x_mm,y_mm,radius_mm,polarization\n59,0,80,h\n", "write o, e, fast or slow"),
        ("x_mm,y_mm,radius_mm,polarization\n59,0,80,fast\n-59,0,80,fast\n", "no such photon"),
        ("", "--template"),
        ("stage_reading_deg,radius_mm,polarization\n900,80,e\n0,80,o\n", "miss the face"),
        ("x_mm,y_mm,radius_mm,sigma_mm\n59,0,80,1e-300\n-59,0,80,1e-300\n", "look at the unit of sigma"),
        (
            "x_mm,y_mm,radius_mm,polarization\n59,0,80\n",
            "line 2: 3 cells where the first line names 4 columns",
        ),
    ] {
        let said = twincone_with(text, &format!("fit - {BENCH}")).refusal(2);
        assert_says(&said, &[why]);
    }
    let ring = "x_mm,y_mm,radius_mm,polarization\n59,0,80,e\n";
    for (options, why) in [
        ("--free mood", "no unknown"),
        ("--free theta --prior zero=1deg", "add it to --free"),
        ("--free theta --prior theta=1mm", "--prior"),
        ("--free theta --sigma 0.5", "--sigma"),
    ] {
        assert_says(&twincone_with(ring, &format!("fit - {BENCH} {options}")).refusal(2), &[why]);
    }
}

/// Centimetres in a column of millimetres: no crystal does that, and the answer does not pretend.
#[test]
fn measurements_that_no_bench_gives_are_no_fit() {
    let text = "crystal_tilt_deg,x_mm,y_mm,radius_mm,polarization,sigma_mm\n0,5.9,0,8,e,0.5\n1,6,0,8.6,e,0.5\n\
                0,-5.9,0,8,o,0.5\n1,-6,0,8.5,o,0.5\n";
    let run = twincone_with(text, &format!("fit - {BENCH}"));
    assert_eq!(run.status, 1, "{run:#?}");
    assert_says(&run.stdout, &["No fit", "units"]);
    let table = Table::read(&twincone_with(text, &format!("fit - {BENCH} -q -f csv")).no_solution());
    assert!(table.column("at_bound").contains(&"true"));
}

#[test]
fn one_tilt_is_said_to_be_one_tilt() {
    let text = "crystal_tilt_deg,x_mm,y_mm,radius_mm,polarization,sigma_mm\n0,59.3,0,80,e,0.5\n0,-59.3,0,79.5,o,0.5\n";
    let said = twincone_with(text, &format!("fit - {BENCH}")).answer();
    assert_says(&said, &["measured at one tilt", "The data cannot separate"]);
}

/// Pixels along each side of a frame, and the crystal that it is of.
const PIXELS: usize = 400;
const CAMERA: &str = "--view camera -m bbo:kato-1986 -p 405nm --length 1mm --size 240mm --pixels 400";
/// Side of a pixel on the screen.
const PITCH: &str = "--pixel-pitch 0.6mm";

/// A frame as a camera counts it: the program's own picture, scaled to `brightest` photons in the brightest pixel above a
/// background of 10, each pixel's photons by chance; four counts a photon, one pixel in a thousand hot.
fn counted(folder: &TempDir, options: &str, brightest: f64, seed: u64) -> String {
    twincone_in(folder.path(), &format!("picture {CAMERA} {options} -o picture.png -q")).answer();
    let (light, _) = grey(&fs::read(folder.path().join("picture.png")).expect("the picture"));
    let most = light.iter().copied().fold(0.0, f64::max);
    let mut chance = ChaCha8Rng::seed_from_u64(seed);
    let mut uniform = || (chance.next_u64() >> 11) as f64 / (1u64 << 53) as f64;
    // Knuth: so many factors below 1 until their product falls below exp(-mean)
    let mut poisson = |mean: f64| {
        let (mut product, mut count) = (uniform(), 0u32);
        while product > (-mean).exp() {
            product *= uniform();
            count += 1;
        }
        (count, uniform() < 1e-3)
    };
    let mut count = |value: f64| {
        let (photons, hot) = poisson(brightest * value / most + 10.0);
        if hot { 255 } else { (4 * photons).min(255) as u8 }
    };
    let data: Vec<u8> = light.into_iter().map(&mut count).collect();
    let name = format!("frame-{seed}.png");
    let mut bytes = Vec::new();
    let mut encoder = png::Encoder::new(&mut bytes, PIXELS as u32, PIXELS as u32);
    encoder.set_color(png::ColorType::Grayscale);
    encoder.set_depth(png::BitDepth::Eight);
    encoder.write_header().and_then(|mut w| w.write_image_data(&data)).expect("a frame");
    fs::write(folder.path().join(&name), bytes).expect("a file");
    name
}

/// First samples of all pixels of a PNG, and how many samples a pixel has.
fn grey(bytes: &[u8]) -> (Vec<f64>, usize) {
    let mut reader = png::Decoder::new(std::io::Cursor::new(bytes)).read_info().expect("a PNG");
    let mut buffer = vec![0; reader.output_buffer_size().expect("a size")];
    let info = reader.next_frame(&mut buffer).expect("a frame");
    let samples = info.color_type.samples();
    let each = if info.bit_depth == png::BitDepth::Sixteen { 2 } else { 1 };
    let value = |pixel: &[u8]| match each {
        2 => f64::from(u16::from_be_bytes([pixel[0], pixel[1]])),
        _ => f64::from(pixel[0]),
    };
    (buffer.chunks_exact(samples * each).map(value).collect(), samples)
}

/// Crystals anywhere within a catalogue's tolerance, as the program's own camera sees them with photon noise, background and
/// hot pixels: theta to 0.02 deg.
#[test]
fn frames_of_the_camera_picture_give_the_cut() {
    let folder = TempDir::new().expect("a folder");
    for (seed, (theta, roll)) in [(42.15, 1.5), (42.5, 0.0), (42.95, -2.0)].into_iter().enumerate() {
        let crystal = format!("--theta {theta}deg --roll {roll}deg");
        let frame = counted(&folder, &crystal, 15.0, seed as u64 + 1);
        let line = format!("fit --image {frame} {PITCH} {BENCH} --free theta,roll -f csv");
        let table = Table::read(&twincone_in(folder.path(), &line).answer());
        assert_abs_diff_eq!(value(&table, "crystal.cut.theta", "value"), theta, epsilon = 0.02);
        assert_abs_diff_eq!(value(&table, "crystal.roll", "value"), roll, epsilon = 0.3);
    }
}

/// A ring's radius is no straight line of the wavelength, so a filter moves its crest: through a rectangular one of 10 nm a
/// crystal of 2 mm seems to be cut 0.003 deg lower, one of 5 mm 0.01 deg higher. A fit that knows the filter is right to
/// 0.001 deg where there is no noise, twenty times less than what is asked of frames; what is left is that |d_eff| differs
/// across a ring.
#[test]
fn filters_do_not_bias_frames() {
    let folder = TempDir::new().expect("a folder");
    let off = |length: &str, picture: &str, fit: &str| {
        let camera = CAMERA.replace("1mm", length);
        twincone_in(folder.path(), &format!("picture {camera} --theta 42.5deg {picture} -o f.png -q"))
            .answer();
        let line =
            format!("fit --image f.png {PITCH} {BENCH} --free theta --length {length} {fit} -f csv -q");
        let table = Table::read(&twincone_in(folder.path(), &line).answer());
        value(&table, "crystal.cut.theta", "value") - 42.5
    };
    let rectangular = "--filter-width 10nm --filter-shape rectangular";
    for length in ["1mm", "2mm", "5mm"] {
        for filter in ["", "--filter-width 10nm", rectangular] {
            let known = off(length, filter, filter);
            assert!(known.abs() < 1e-3, "{length} {filter}: off by {known}");
        }
    }
    let unknown = off("2mm", rectangular, "");
    assert!(unknown.abs() > 2e-3, "not told of the filter: off by {unknown}");
}

/// Frames at two tilts tell the cut from the tilt's zero, and come back with the fitted rings over them.
#[test]
fn several_frames_are_fitted_together_and_written() {
    let folder = TempDir::new().expect("a folder");
    // the scale reads 0.4 deg more than the tilt
    let frames = [("0deg", "0.4deg"), ("1.5deg", "1.9deg")].map(|(tilt, shown)| {
        let seed = if tilt == "0deg" { 11 } else { 12 };
        (counted(&folder, &format!("--theta 42.2deg --tilt {tilt}"), 15.0, seed), shown)
    });
    let [(first, one), (second, two)] = frames;
    let images = format!("--image {first} --image-tilt {one} --image {second} --image-tilt {two}");
    let line = format!(
        "fit {images} {PITCH} {BENCH} --free theta,zero --prior theta=0.5deg --write-frame over.png -f csv"
    );
    let table = Table::read(&twincone_in(folder.path(), &line).answer());
    // cut and zero act almost alike; each is as sharp as the fit says
    for (key, truth) in [("crystal.cut.theta", 42.2), ("stage.zero", 0.4)] {
        let (found, sigma) = (value(&table, key, "value"), value(&table, key, "uncertainty"));
        assert!((found - truth).abs() < 3.0 * sigma + 0.02 && sigma < 0.2, "{key}: {found} +- {sigma}");
    }
    for name in ["over.png", "over.2.png"] {
        let bytes = fs::read(folder.path().join(name)).expect("the frame");
        let (first, samples) = grey(&bytes);
        assert_eq!((first.len(), samples), (PIXELS * PIXELS, 3));
        let mut reader = png::Decoder::new(std::io::Cursor::new(&bytes[..])).read_info().expect("a PNG");
        let mut buffer = vec![0; reader.output_buffer_size().expect("a size")];
        reader.next_frame(&mut buffer).expect("a frame");
        let drawn = |colour: [u8; 3]| buffer.chunks_exact(3).filter(|p| *p == colour).count();
        // a ring of 130 pixels radius and more is a line of at least 400 pixels within the frame
        assert!(drawn([40, 120, 255]) > 400 && drawn([255, 120, 20]) > 400, "{name}");
    }
}

/// Two crossed crystals, each cut a little off: rings that say which crystal they are of give both cuts.
#[test]
fn rings_of_a_stack_are_fitted_crystal_by_crystal() {
    let folder = TempDir::new().expect("a folder");
    let job = |first: f64, second: f64| {
        let crystal = |theta: f64, roll: f64| {
            format!(
                "[[crystal]]\nmaterial = \"bbo\"\ndataset = \"kato-1986\"\nroll = \"{roll} deg\"\nlength = \"0.5 mm\"\n\
                 cut = {{ theta = \"{theta} deg\", phi = \"90 deg\" }}\n"
            )
        };
        let (one, two) = (crystal(first, 0.0), crystal(second, 90.0));
        format!("[pump]\nwavelength = \"405 nm\"\n{one}{two}[emission]\ntype = \"I\"\n")
    };
    fs::write(folder.path().join("true.toml"), job(29.5, 29.1)).expect("a file");
    fs::write(folder.path().join("believed.toml"), job(29.237, 29.237)).expect("a file");
    let axes = "--axis crystal.1.tilt=0deg..1deg/3 --axis crystal.2.tilt=0deg,0.5deg";
    let line = format!("run true.toml --report rings {axes} -o rings.csv -q");
    twincone_in(folder.path(), &line).answer();
    let free = "--free crystal.1.cut.theta,crystal.2.cut.theta,pump";
    let asked = format!("fit rings.csv -j believed.toml --sigma 0.5mm {free}");
    let table =
        Table::read(&twincone_in(folder.path(), &format!("{asked} -f csv --write-job fitted.toml")).answer());
    assert_abs_diff_eq!(value(&table, "crystal.1.cut.theta", "value"), 29.5, epsilon = 0.01);
    assert_abs_diff_eq!(value(&table, "crystal.2.cut.theta", "value"), 29.1, epsilon = 0.01);
    let job = fs::read_to_string(folder.path().join("fitted.toml")).expect("the job");
    assert_says(&job, &["theta = \"29.", "[[crystal]]"]);
    let text = twincone_in(folder.path(), &asked).answer();
    assert_says(&text, &["bbo:kato-1986 and bbo:kato-1986", "crystal.2.cut.theta is 29.09"]);
    for (rows, options, why) in [
        ("radius_mm\n50\n51\n52\n", free, "column `crystal`"),
        ("crystal,radius_mm\n3,50\n", free, "no crystal `3`"),
        (
            "crystal,radius_mm\n1,50\n2,51\n",
            "--free theta",
            "write crystal.1.cut.theta or crystal.2.cut.theta",
        ),
    ] {
        fs::write(folder.path().join("rows.csv"), rows).expect("a file");
        let line = format!("fit rows.csv -j believed.toml {options}");
        assert_says(&twincone_in(folder.path(), &line).refusal(2), &[why]);
    }
    let frame = counted(&folder, "--theta 42.5deg", 15.0, 21);
    let line = format!("fit --image {frame} {PITCH} -j believed.toml {free}");
    assert_says(&twincone_in(folder.path(), &line).refusal(2), &["which crystal a ring is of"]);
}

/// Without stated uncertainties every description would make its own scatter the measure, and all would fit alike.
#[test]
fn data_sets_are_compared_by_one_measure() {
    let folder = TempDir::new().expect("a folder");
    let file = swept(&folder, "rings");
    let text =
        twincone_in(folder.path(), &format!("fit {file} {BENCH} --free theta --all-datasets")).answer();
    assert_says(&text, &["Of the published sets kato-1986 fits this bench best", "eimerl-1987: chi-square"]);
    let line = text.lines().find(|l| l.contains("eimerl-1987: chi-square")).expect("the line");
    let far: f64 =
        line.split("chi-square ").nth(1).and_then(|t| t.split(',').next()?.parse().ok()).expect("a number");
    assert!(far > 1000.0, "{line}");
}

#[test]
fn frames_need_a_pitch_and_must_be_pictures() {
    let folder = TempDir::new().expect("a folder");
    fs::write(folder.path().join("f.png"), "no picture").expect("a file");
    let asked = |options: &str| twincone_in(folder.path(), &format!("fit --image f.png {BENCH} {options}"));
    assert_says(&asked("").refusal(2), &["--pixel-pitch"]);
    assert_says(&asked("--pixel-pitch 0.5mm").refusal(2), &["no PNG"]);
}
