//! Whatever is asked, the program answers or refuses: it never panics, never prints NaN, never ends in another way
//! than its exit statuses. Every run of this file is checked for that by [`crate::run`].

use crate::run::{twincone, twincone_with};
use crate::table::Table;

/// A small generator of random numbers (Marsaglia's xorshift), the same on every machine.
struct Dice(u64);

impl Dice {
    fn roll(&mut self, sides: usize) -> usize {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        (self.0 >> 16) as usize % sides
    }

    fn pick<'a>(&mut self, from: &[&'a str]) -> &'a str {
        from[self.roll(from.len())]
    }

    /// One time in `out_of`.
    fn rarely(&mut self, out_of: usize) -> bool {
        self.roll(out_of) == 0
    }
}

const COMMANDS: [&str; 14] = [
    "cones",
    "cones",
    "cones --rows crossings",
    "cut",
    "cut --crossing 3deg",
    "cut --half-angle 2deg",
    "cut --beamlike",
    "tilt --crossing 3deg",
    "tilt --touching",
    "tilt --half-angle 2deg --by pump",
    "twin --direction 1deg,-2deg",
    "twin --direction 0deg,0deg",
    "index",
    "job",
];

const MATERIALS: [&str; 16] = [
    "bbo",
    "bbo:kato-1986",
    "lbo",
    "bibo",
    "ktp",
    "ktp:kato-2002",
    "kdp",
    "linbo3",
    "liio3",
    "aggas2",
    "quartz",
    "calcite",
    "alpha-bbo",
    "yvo4",
    "cdse",
    "bb0",
];

/// An option, values that mean something, values that are extreme or nonsense.
type Choice = (&'static str, &'static [&'static str], &'static [&'static str]);

const ANGLES: &[&str] = &["0deg", "0.5deg", "-3deg", "12mrad", "20deg", "-45deg"];
const BAD_ANGLES: &[&str] =
    &["80deg", "-80deg", "90deg", "1e9deg", "NaN", "0.5", "1nm", "1e-300deg", "-0deg", "0,5deg", ""];

const CHOICES: [Choice; 21] = [
    (
        "--theta",
        &["0deg", "28.8deg", "42deg", "90deg", "30deg", "60deg"],
        &["180deg", "1e-9deg", "89.9999999deg", "-1deg", "200deg", "x"],
    ),
    ("--phi", &["0deg", "90deg", "30deg", "-17deg", "45deg"], &["1e6deg", "360deg", "nan", "1"]),
    ("--tilt", ANGLES, BAD_ANGLES),
    ("--cross-tilt", ANGLES, BAD_ANGLES),
    ("--roll", ANGLES, &["90deg", "1e12deg", "inf", "-0deg"]),
    ("--length", &["1mm", "2cm", "0.1mm"], &["1pm", "1e9m", "-1mm", "0mm", "1deg"]),
    ("--temperature", &["20degC", "100degC", "300K"], &["-273.15degC", "0K", "2000degC", "-300degC", "20"]),
    ("--poling", &["10um", "46.1um", "1mm"], &["1pm", "1e6m", "0um", "-3um"]),
    ("--type", &["I", "II", "0"], &["III", "", "i"]),
    ("--process", &["e:o+e", "e:o+o", "fast:slow+slow", "slow:fast+slow"], &["e-", "o:e+e", "x:y+z", "e:o"]),
    (
        "--signal",
        &["800nm", "810nm", "1064nm", "degenerate", "650nm"],
        &["1e-3nm", "1e9m", "405.0000001nm", "0nm", "-1nm"],
    ),
    ("--idler", &["820nm", "1550nm"], &["1m", "405nm", "q"]),
    ("--distance", &["1m", "30cm"], &["1e-300m", "1e300m", "-1m", "0m"]),
    (
        "--cut",
        &["crossing=3deg", "half-angle=3deg", "collinear", "beamlike"],
        &["separation=119deg", "crossing=0deg", "x"],
    ),
    (
        "--set",
        &["crystal.reversed=about-vertical", "mount.about_y=1deg", "stage.zero=2deg"],
        &["crystal=1", "a.b.c=2", "=", "crystal.cut=3", "pump=[]", "crystal.2.tilt=1deg"],
    ),
    ("--waist", &["100um"], &["0um", "1e400um"]),
    ("--power", &["3mW"], &["-3mW", "3"]),
    ("--linewidth", &["0.1nm", "200GHz"], &["1deg"]),
    ("--iris", &["0.2deg", "3mm"], &["1s"]),
    ("--filter-width", &["3nm"], &["0nm", "1s"]),
    ("--pump-polarization", &["45deg"], &["x"]),
];

const PUMPS: [&str; 6] = ["405nm", "405nm", "532nm", "792nm", "351.1nm", "355nm air"];
const BAD_PUMPS: [&str; 6] = ["1nm", "1m", "0nm", "-405nm", "1e-9nm", "405"];

/// A command line from the grammar above.
fn command_line(dice: &mut Dice) -> String {
    let mut line = format!("{} -m {}", dice.pick(&COMMANDS), dice.pick(&MATERIALS));
    let pump = if dice.rarely(12) { dice.pick(&BAD_PUMPS) } else { dice.pick(&PUMPS) };
    line.push_str(&format!(" -p \"{pump}\""));
    for (option, good, bad) in CHOICES {
        let wanted = if option == "--theta" { 2 } else { 6 };
        if dice.rarely(wanted) {
            let value = if dice.rarely(8) { dice.pick(bad) } else { dice.pick(good) };
            line.push_str(&format!(" {option} \"{value}\""));
        }
    }
    if dice.rarely(2) {
        line.push_str(" --extrapolate");
    }
    line.push_str(&format!(" -f {}", dice.pick(&["text", "csv", "json"])));
    line
}

/// Runs this many random command lines; returns how many had an answer.
fn volley(seed: u64, count: usize) -> usize {
    let mut dice = Dice(seed);
    (0..count).map(|_| command_line(&mut dice)).filter(|line| is_answered(line)).count()
}

/// Runs a command line and reads what it wrote as a script would; `job` writes a job whatever the format.
fn is_answered(line: &str) -> bool {
    let run = twincone(line);
    if !run.stdout.is_empty() && !line.starts_with("job") {
        if line.ends_with("csv") {
            Table::read(&run.stdout);
        } else if line.ends_with("json") {
            serde_json::from_str::<serde_json::Value>(&run.stdout).expect("valid JSON");
        }
    }
    run.status == 0
}

#[test]
fn random_command_lines_are_answered_or_refused() {
    let answered = volley(0x9e37_79b9_7f4a_7c15, 300);
    assert!(answered > 30, "the grammar is too wild to test answers: {answered} of 300");
}

#[test]
fn other_random_command_lines_are_answered_or_refused() {
    let answered = volley(0xd1b5_4a32_d192_ed03, 300);
    assert!(answered > 30, "the grammar is too wild to test answers: {answered} of 300");
}

/// A valid job with a few random bytes changed, inserted or taken away.
fn damaged(job: &str, dice: &mut Dice) -> String {
    let mut text: Vec<char> = job.chars().collect();
    for _ in 0..=dice.roll(3) {
        let at = dice.roll(text.len());
        let other =
            dice.pick(&["\"", "=", "[", "]", "\n", "{", ".", "9", "-", "\u{b5}", "\u{0}", "e", "#", "nm"]);
        match dice.roll(3) {
            0 => drop(text.remove(at)),
            1 => text[at] = other.chars().next().unwrap_or(' '),
            _ => drop(text.splice(at..at, other.chars())),
        }
    }
    text.into_iter().collect()
}

#[test]
fn damaged_jobs_are_read_or_refused() {
    let job = twincone("job -m bbo -p 405nm --theta 42deg --signal 800nm").answer();
    let bare: String =
        job.lines().map(|line| line.split('#').next().unwrap_or("").trim_end().to_owned() + "\n").collect();
    let mut dice = Dice(0x2545_f491_4f6c_dd1d);
    for _ in 0..150 {
        let command = dice.pick(&["job check -", "cones -j - -f csv", "cut -j - -f csv", "index -j -"]);
        twincone_with(&damaged(&bare, &mut dice), command);
    }
}

#[test]
fn damaged_materials_are_read_or_refused() {
    let template = twincone("materials template").answer();
    let mut dice = Dice(0x94d0_49bb_1331_11eb);
    for _ in 0..60 {
        twincone_with(&damaged(&template, &mut dice), "materials check -");
    }
}

/// A pump so short that the energy of its photons is infinite.
#[test]
fn an_absurdly_short_pump_is_refused() {
    let run = twincone("cones -m bbo -p 1e-300m --idler 820nm --theta 42deg");
    assert!([2, 3].contains(&run.status), "{run:#?}");
}
