//! `materials`: the catalogue, its sources, and files of the user's own.

use std::fs;
use std::path::Path;

use tempfile::TempDir;

use crate::run::{assert_says, twincone, twincone_in, twincone_with};
use crate::table::{Table, assert_json};

const IDS: [&str; 28] = [
    "bbo",
    "lbo",
    "bibo",
    "ktp",
    "rtp",
    "kta",
    "kdp",
    "dkdp",
    "adp",
    "clbo",
    "liio3",
    "linbo3",
    "mgo-linbo3",
    "litao3",
    "knbo3",
    "aggas2",
    "aggase2",
    "zngep2",
    "cdse",
    "gase",
    "cdgeas2",
    "alpha-bbo",
    "quartz",
    "calcite",
    "yvo4",
    "rutile",
    "mgf2",
    "sapphire",
];

/// A folder with the commented template as `mine.toml`, some of its words replaced.
fn folder_with_material(replacements: &[(&str, &str)]) -> TempDir {
    let folder = TempDir::new().expect("a folder");
    write_material(folder.path(), "mine.toml", replacements);
    folder
}

fn write_material(folder: &Path, name: &str, replacements: &[(&str, &str)]) {
    let mut text = twincone("materials template").answer();
    for (from, to) in replacements {
        assert!(text.contains(from), "the template has no `{from}`");
        text = text.replacen(from, to, 1);
    }
    fs::write(folder.join(name), text).expect("a file in the folder");
}

#[test]
fn every_crystal_is_listed_once() {
    let table = Table::read(&twincone("materials --format csv").answer());
    let listed = table.column("material");
    assert!(IDS.iter().all(|id| listed.iter().filter(|l| *l == id).count() == 1), "{listed:?}");
    assert_json(&twincone("materials list -f json").answer(), "materials", &[("materials", &table)]);
    let text = twincone("materials").answer();
    assert_eq!(text, twincone("materials list").answer());
    assert_says(&text, &IDS);
}

#[test]
fn one_crystal_is_shown_with_every_data_set_and_its_source() {
    let text = twincone("materials show bbo").answer();
    let sets = ["eimerl-1987", "kato-1986", "kato-2010", "zhang-2000", "tamosauskas-2018"];
    assert_says(&text, &sets);
    assert_says(&text, &["point group     3m", "uniaxial negative", "tamosauskas-2018 (default)", "d22 2.2"]);
    assert_says(&text, &["K. Kato, IEEE J. Quantum Electron. 22, 1013 (1986)", "220 nm to 1060 nm"]);
    let table = Table::read(&twincone("materials show bbo -f csv").answer());
    assert_eq!((table.len(), table.cell(0, "datasets")), (1, sets.join(" ").as_str()));
    let json: serde_json::Value =
        serde_json::from_str(&twincone("materials show bbo -f json").answer()).expect("valid JSON");
    let ids: Vec<_> = json["sets"].as_array().expect("a list").iter().map(|s| s["dataset"].clone()).collect();
    assert_eq!(ids, sets);
    assert_eq!(json["sets"][1]["citation"], "K. Kato, IEEE J. Quantum Electron. 22, 1013 (1986)");
    assert_eq!(json["tensor"][0]["element"], "d22");
    assert!(json["notes"].as_array().is_some_and(|notes| !notes.is_empty()));
}

#[test]
fn an_unknown_crystal_gets_the_nearest_name() {
    let refusal = twincone("materials show ktpp").refusal(2);
    assert_says(
        &refusal,
        &["unknown crystal `ktpp`", "did you mean `ktp`?", "`twincone materials` lists them"],
    );
}

#[test]
fn the_template_is_a_valid_file_and_works_as_a_crystal() {
    let folder = folder_with_material(&[]);
    let told = twincone_in(folder.path(), "materials check mine.toml").answer();
    assert_says(&told, &["mine.toml: a valid material, my-crystal"]);
    let index = "index --wavelength 600nm -f csv";
    let by_path = twincone_in(folder.path(), &format!("{index} -m ./mine.toml")).answer();
    let by_folder = twincone_in(folder.path(), &format!("{index} -m my-crystal --materials .")).answer();
    assert_eq!(by_path, by_folder);
    assert_eq!(Table::read(&by_path).cell(0, "material"), "my-crystal");
    let listed = Table::read(&twincone_in(folder.path(), "materials --materials . -f csv").answer());
    assert_eq!(listed.column("material").last(), Some(&"my-crystal"));
}

#[test]
fn the_template_is_checked_on_standard_input_too() {
    let template = twincone("materials template").answer();
    assert_says(&twincone_with(&template, "materials check -").answer(), &["a valid material"]);
}

#[test]
fn a_broken_file_is_told_with_its_place() {
    // (replaced, by, place and words of the message)
    let broken: [(&str, &str, &[&str]); 5] = [
        ("formula = ", "formla = ", &["mine.toml:", "`formla`", "^"]),
        ("point_group = \"3m\"", "point_group = \"3n\"", &["mine.toml:", "`3n`", "^"]),
        ("optic = \"uniaxial\"", "optic = \"triaxial\"", &["mine.toml:", "`triaxial`", "^"]),
        ("id = \"my-crystal\"", "id = ", &["mine.toml:", "^"]),
        ("id = \"my-crystal\"", "", &["mine.toml:", "`id`"]),
    ];
    for (from, to, phrases) in broken {
        let folder = folder_with_material(&[(from, to)]);
        assert_says(&twincone_in(folder.path(), "materials check mine.toml").refusal(2), phrases);
        assert_says(&twincone_in(folder.path(), "materials --materials .").refusal(2), phrases);
        let used = twincone_in(folder.path(), "index -m ./mine.toml --wavelength 600nm");
        assert_says(&used.refusal(2), phrases);
    }
}

#[test]
fn an_id_that_is_taken_is_told_with_both_places() {
    let folder = folder_with_material(&[("my-crystal", "bbo")]);
    let refusal = twincone_in(folder.path(), "materials --materials .").refusal(2);
    assert_says(&refusal, &["mine.toml", "the id `bbo` is taken by a crystal compiled into the program"]);
    let folder = folder_with_material(&[]);
    write_material(folder.path(), "other.toml", &[]);
    let refusal = twincone_in(folder.path(), "cut --materials . -m bbo -p 405nm").refusal(2);
    assert_says(&refusal, &["mine.toml", "other.toml", "`my-crystal`", "choose another id"]);
}

#[test]
fn a_file_named_by_its_path_is_used_whatever_ids_are_taken() {
    let folder = folder_with_material(&[("my-crystal", "bbo")]);
    let index = "index --wavelength 600nm -f csv -m";
    let own = Table::read(&twincone_in(folder.path(), &format!("{index} ./mine.toml")).answer());
    let compiled_in = Table::read(&twincone_in(folder.path(), &format!("{index} bbo")).answer());
    assert_eq!(own.cell(0, "material"), "bbo");
    assert_ne!(own.cell(0, "dataset"), compiled_in.cell(0, "dataset"));
}

#[test]
fn files_that_are_not_there_are_file_trouble() {
    assert_says(&twincone("materials check nowhere.toml").refusal(4), &["cannot read nowhere.toml"]);
    assert_says(&twincone("materials --materials nowhere").refusal(4), &["cannot read nowhere"]);
    let used = twincone("index -m ./nowhere.toml --wavelength 600nm");
    assert_says(&used.refusal(4), &["cannot read ./nowhere.toml"]);
}
