//! The example jobs: each is valid, agrees with the schema, runs, and its rows are what the library gives when asked at
//! those points alone.

use std::fs;
use std::path::{Path, PathBuf};

use approx::assert_abs_diff_eq;
use assert_cmd::Command;
use twincone::job::plan::Report;
use twincone::job::setup::{Needs, SetupError};
use twincone::job::{Document, Plan, Setup, resolve};
use twincone::matching::{Target, Want, cones, tune};
use twincone::material::Catalogue;
use twincone::pairs::{Basis, compensate};
use twincone::report::cones::{crossings_table, rings_table};
use twincone::report::{Cell, Table, compensate, cut, state, tilt};

fn jobs() -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("examples");
    let entries = fs::read_dir(folder).expect("examples");
    let mut all: Vec<PathBuf> = entries.map(|e| e.expect("an entry").path()).collect();
    all.retain(|path| path.extension().is_some_and(|e| e == "toml"));
    all.sort();
    all
}

fn program(arguments: &[&str], job: &Path) -> String {
    let mut command = Command::new(env!("CARGO_BIN_EXE_twincone"));
    let output = command.args(arguments).arg(job).output().expect("the program starts");
    assert!(output.status.success(), "{}: {}", job.display(), String::from_utf8_lossy(&output.stderr));
    String::from_utf8(output.stdout).expect("UTF-8")
}

/// Editors read the schema named in the first line, and find nothing wrong with any example.
#[test]
fn every_job_agrees_with_the_schema() {
    let schema: serde_json::Value = serde_json::from_str(
        &fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("examples/job.schema.json"))
            .expect("the schema"),
    )
    .expect("JSON");
    let validator = jsonschema::draft7::new(&schema).expect("a draft-07 schema");
    for job in jobs() {
        let text = fs::read_to_string(&job).expect("a job");
        assert!(text.starts_with("#:schema ./job.schema.json\n"), "{}", job.display());
        let value: toml::Value = toml::from_str(&text).expect("TOML");
        let value = serde_json::to_value(value).expect("JSON");
        let faults: Vec<String> =
            validator.iter_errors(&value).map(|e| format!("{}: {e}", e.instance_path)).collect();
        assert!(faults.is_empty(), "{}: {faults:#?}", job.display());
    }
    // the schema finds what the program refuses
    for fault in [
        r#"{ "crystal": { "titl": "1 deg" } }"#,
        r#"{ "crystal": { "tilt": 1 } }"#,
        r#"{ "crystal": { "tilt": "1 nm" } }"#,
        r#"{ "pump": { "wavelength": "405" } }"#,
        r#"{ "emission": { "type": "III" } }"#,
        r#"{ "sweep": { "report": "ring" } }"#,
        r#"{ "sweep": { "axes": [ { "key": "crystal.titl", "values": ["1 deg"] } ] } }"#,
    ] {
        let value = serde_json::from_str(fault).expect("JSON");
        assert!(!validator.is_valid(&value), "{fault}");
    }
    for fine in [
        r#"{ "pump": { "wavelength": "405 nm air", "polarization": { "angle": "45 deg" } } }"#,
        r#"{ "crystal": [ { "tilt": "-1 deg" }, { "name": "second", "roll": "90°" } ] }"#,
        r#"{ "emission": { "signal": ["degenerate", "800 nm"] } }"#,
        r#"{ "sweep": { "axes": [ { "key": "crystal.2.tilt", "from": "0 deg", "to": "1 deg", "points": 3 } ] } }"#,
    ] {
        let value = serde_json::from_str(fine).expect("JSON");
        assert!(validator.is_valid(&value), "{fine}");
    }
}

/// Rows of a setup, asked of the library directly.
fn direct(report: Report, mut setup: Setup, plan: &Plan) -> Table {
    let all = |setup: &Setup, want| {
        cones(&setup.crystals, setup.pump(), &setup.signals(), setup.interaction, want).expect("cones")
    };
    match report {
        Report::Rings => rings_table(&setup, &all(&setup, Want::Both)),
        Report::Crossings => crossings_table(&setup, &all(&setup, Want::Both)),
        Report::Cut => {
            let question = setup.design(plan.search.target, plan.search.find).expect("a question");
            cut::table(&setup, &[cut::Attempt::of(&question).expect("an answer")], false)
        }
        Report::Tilt => {
            let question = setup.tuning(plan.search.target.unwrap_or(Target::Collinear), plan.search.by);
            let tuned = tune(&question.expect("a question")).expect("an answer");
            tilt::table(&setup, tuned.actuator, &tuned.turns)
        }
        Report::State => {
            let signals = setup.signals();
            let state = setup.pairs(&signals, plan.search.pair, 1e-3).state().expect("a state");
            state::tables(&state, &[], &Basis::ALL).swap_remove(0)
        }
        Report::Compensate => {
            let plates = setup.plates(&Catalogue::default(), &[]).expect("materials");
            let signals = setup.signals();
            let answers = compensate(&setup.pairs(&signals, plan.search.pair, 1e-3), &plates, false);
            compensate::table(&answers.expect("plates"))
        }
    }
}

/// Up to fifty points of each sweep, each described as a job of its own.
#[test]
fn rows_are_what_the_library_gives_at_each_point() {
    let catalogue = Catalogue::default();
    let mut sweeps = 0;
    for job in jobs() {
        let text = fs::read_to_string(&job).expect("a job");
        let document = Document::from_file("job", &text);
        let description = document.describe().expect("a job");
        if description.sweep.is_none() {
            continue;
        }
        sweeps += 1;
        let plan = Plan::read(&document, &description).expect("a plan");
        let rows = program(&["run", "--quiet"], &job);
        let mut reader = csv::Reader::from_reader(rows.as_bytes());
        let records: Vec<csv::StringRecord> = reader.records().map(|r| r.expect("a row")).collect();
        let axes = plan.grid.axes().count();
        let count = plan.grid.count();
        for point in (0..50.min(count)).map(|n| n * count / 50.min(count)) {
            let mut alone = document.clone();
            for (axis, value) in plan.grid.axes().zip(plan.grid.values(point)) {
                // what report cut solves for is given as the cut; the table of the search reads the same key
                alone.set("the axis", &axis.path.typed, &axis.text(value));
            }
            let own: Vec<&csv::StringRecord> = records.iter().filter(|r| r[0] == point.to_string()).collect();
            let needs = Needs { cut: plan.report != Report::Cut, pump: true };
            let table = match resolve(&alone, &catalogue, needs) {
                Ok(setup) => match std::panic::catch_unwind(|| direct(plan.report, setup, &plan)) {
                    Ok(table) => table,
                    Err(_) => {
                        assert!(
                            own.len() == 1 && own[0][own[0].len() - 1] != *"ok",
                            "{}: point {point}",
                            job.display()
                        );
                        continue;
                    }
                },
                Err(SetupError::NoCut(_)) => {
                    assert_eq!(&own[0][own[0].len() - 1], "no_phase_matching");
                    continue;
                }
                Err(other) => panic!("{}: point {point}: {other}", job.display()),
            };
            assert_eq!(own.len(), table.rows.len(), "{}: point {point}", job.display());
            for (record, row) in own.into_iter().zip(&table.rows) {
                compare(record, row, axes + 1, &format!("{}: point {point}", job.display()));
            }
        }
    }
    assert!(sweeps >= 8, "only {sweeps} examples have a sweep");
}

/// A number set directly may differ in its last bit from one read as text; a root is found to 1e-9 deg or better.
fn compare(record: &csv::StringRecord, row: &[Cell], skip: usize, place: &str) {
    for (field, cell) in record.iter().skip(skip).zip(row) {
        match cell {
            Cell::Empty => assert_eq!(field, "", "{place}"),
            Cell::Number(number) => {
                let found: f64 = field.parse().unwrap_or_else(|_| panic!("{place}: `{field}` is no number"));
                assert_abs_diff_eq!(found, *number, epsilon = 2e-8 * (1.0 + number.abs()));
            }
            Cell::Integer(number) => assert_eq!(field, number.to_string(), "{place}"),
            Cell::Text(text) => assert_eq!(field, text, "{place}"),
            Cell::Flag(flag) => assert_eq!(field, flag.to_string(), "{place}"),
        }
    }
}
