//! The complete commented job for a setup: a file to start from.

use std::fmt::Write as _;

use super::description::{Cut, Description, Text};
use super::setup::{GivenCut, Setup, Signals};
use crate::frame::Reversal;
use crate::matching::{Interaction, Target};
use crate::material::Reach;
use crate::optics::Crystal;

/// Writes every key with the value it has; keys that say nothing stand as comments.
#[must_use]
pub fn template(setup: &Setup) -> String {
    let mut out = String::new();
    let o = &mut out;
    line(o, "title", &quoted(setup.title.as_deref().unwrap_or("untitled")), "what you call it");
    section(o, "[pump]");
    let typed = setup.written.pump.as_ref().and_then(|p| p.get_ref().wavelength.as_ref());
    let pump = typed.map(|text| text.get_ref().to_string()).or(setup.pump.map(|p| p.to_string()));
    let why = "vacuum; \"405 nm air\" converts from standard air";
    match pump {
        Some(pump) => line(o, "wavelength", &quoted(&pump), why),
        None => comment(o, "wavelength = \"405 nm\"", why),
    }
    pump_section(o, setup);
    for (index, crystal) in setup.crystals.iter().enumerate() {
        crystal_section(o, setup, index, crystal);
    }
    emission_section(o, setup);
    section(o, "[screen]");
    let typed = setup.written.screen.as_ref().and_then(|s| s.distance.as_ref());
    let distance = typed.map_or(setup.screen.to_string(), |text| text.get_ref().to_string());
    line(o, "distance", &quoted(&distance), "from the crystal, across the pump");
    section(o, "[stage]");
    stage_section(o, setup);
    other_sections(o, setup);
    out
}

/// What of the pump no command reads yet is kept as it was written.
fn pump_section(o: &mut String, setup: &Setup) {
    let pump = setup.written.pump.as_ref().map(|p| p.get_ref().clone()).unwrap_or_default();
    let hints = [
        ("waist", pump.waist, "\"150 um\"", "1/e^2 radius in the crystal; without it a plane wave"),
        ("power", pump.power, "\"40 mW\"", ""),
        (
            "linewidth",
            pump.linewidth,
            "\"0.1 nm\"",
            "FWHM; or pulse = \"150 fs\"; without either monochromatic",
        ),
        ("pulse", pump.pulse, "\"150 fs\"", ""),
        ("spectrum", pump.spectrum, "\"diode.csv\"", ""),
    ];
    for (key, value, example, why) in hints {
        match value {
            Some(value) => line(o, key, &quoted(value.get_ref()), why),
            None if why.is_empty() && key != "power" => {}
            None => comment(o, &format!("{key} = {example}"), why),
        }
    }
    let why = "or { angle = \"45 deg\", phase = \"0 deg\" }: E from +x towards +y";
    match pump.polarization {
        Some(value) => line(o, "polarization", &value.get_ref().to_string(), why),
        None => comment(o, "polarization = \"matched\"", why),
    }
}

fn stage_section(o: &mut String, setup: &Setup) {
    let written = setup.written.stage.clone().unwrap_or_default();
    let mut key = |name: &str, value: Option<String>, example: &str, why: &str| match value {
        Some(value) => line(o, name, &value, why),
        None => comment(o, &format!("{name} = {example}"), why),
    };
    let text = |text: &Text| quoted(text.get_ref());
    let zero = setup.stage.and_then(|s| s.zero).map(|zero| quoted(&zero.to_string()));
    let zero = written.zero.as_ref().map(text).or(zero);
    key("zero", zero, "\"0 deg\"", "reading at back-reflection");
    let why = "turn of the crystal per turn of the screw";
    key("per_turn", written.per_turn.as_ref().map(text), "\"5 mrad\"", why);
    let why = "readings fall when the tilt rises";
    key("reversed", written.reversed.map(|r| r.to_string()), "false", why);
}

/// Sections that no command reads yet, as they were written.
fn other_sections(o: &mut String, setup: &Setup) {
    let written = &setup.written;
    let rest = Description {
        mount: written.mount.clone(),
        collection: written.collection.clone(),
        filter: written.filter.clone(),
        compensator: written.compensator.clone(),
        sweep: written.sweep.clone(),
        ..Description::default()
    };
    let text = toml::to_string(&rest).expect("texts, lists and tables are TOML");
    if !text.is_empty() {
        o.push('\n');
        o.push_str(&text);
    }
}

fn crystal_section(o: &mut String, setup: &Setup, index: usize, crystal: &Crystal) {
    let (given, several) = (setup.cut[index], setup.crystals.len() > 1);
    let written = setup.written.crystal.get(index).map(|c| c.get_ref().clone()).unwrap_or_default();
    section(o, if several { "[[crystal]]" } else { "[crystal]" });
    if several || written.name.is_some() {
        line(o, "name", &quoted(&crystal.name), "");
    }
    // a material file is named by its path, which the id does not tell
    let typed = written.material.as_ref().map(|m| &**m.get_ref()).filter(|m| m.contains(".toml"));
    let typed =
        typed.map(|m| m.split_once(".toml:").map_or(m.to_string(), |(stem, _)| format!("{stem}.toml")));
    line(
        o,
        "material",
        &quoted(&typed.unwrap_or_else(|| crystal.material.id.clone())),
        "`twincone materials` lists them",
    );
    line(o, "dataset", &quoted(&crystal.set().id), "whose refractive indices");
    let why = "theta: face normal to Z; phi: azimuth of the normal from X";
    match given.theta || given.target.is_some() {
        true => line(o, "cut", &cut(crystal, given, written.cut.as_ref().map(|c| c.get_ref())), why),
        false => comment(o, "cut = { theta = \"42 deg\", phi = \"0 deg\" }", why),
    }
    // as typed where it was typed, so that it reads back to the last bit
    let typed = |text: &Option<Text>, value: String| {
        quoted(&text.as_ref().map_or(value, |text| text.get_ref().to_string()))
    };
    let length = typed(&written.length, crystal.length.to_string());
    line(o, "length", &length, "along the face normal");
    line(o, "temperature", &typed(&written.temperature, crystal.temperature.to_string()), "");
    if let Some(reference) = &written.reference_temperature {
        line(
            o,
            "reference_temperature",
            &quoted(reference.get_ref()),
            "at which length and poling are stated",
        );
    }
    if let Some(gap) = &written.gap_before {
        line(o, "gap_before", &quoted(gap.get_ref()), "air before the crystal");
    }
    let turn = &crystal.orientation;
    line(o, "tilt", &typed(&written.tilt, turn.tilt.to_string()), "positive increases theta");
    line(o, "cross_tilt", &typed(&written.cross_tilt, turn.cross_tilt.to_string()), "positive increases phi");
    let roll = typed(&written.roll, turn.roll.to_string());
    line(o, "roll", &roll, "90 deg lets Z lean up instead of towards +x");
    match crystal.poling {
        Some(period) => {
            let poling = typed(&written.poling, format!("{} um", period.um()));
            line(o, "poling", &poling, "period along the normal");
        }
        None => comment(o, "poling = \"10 um\"", "period along the normal"),
    }
    match crystal.reversal {
        Reversal::None => comment(o, "reversed = \"about-beam\"", "or about-vertical, about-horizontal"),
        Reversal::AboutBeam => line(o, "reversed", "\"about-beam\"", ""),
        Reversal::AboutVertical => line(o, "reversed", "\"about-vertical\"", ""),
        Reversal::AboutHorizontal => line(o, "reversed", "\"about-horizontal\"", ""),
    }
    if !crystal.expands {
        line(o, "thermal_expansion", "false", "length and poling period do not grow with temperature");
    }
    if crystal.reach == Reach::Extrapolate {
        line(o, "extrapolate", "true", "outside the data set's range");
    }
}

fn cut(crystal: &Crystal, given: GivenCut, written: Option<&Cut>) -> String {
    if let Some(cut) = written.filter(|cut| cut.is_decided() && given != GivenCut::default()) {
        return as_typed(cut);
    }
    let phi = if given.phi { format!(", phi = \"{}\"", crystal.cut.phi) } else { String::new() };
    let degrees = |angle: f64| crate::quantity::Angle::radians(angle);
    match given.target {
        Some(Target::Crossing(a)) => format!("{{ crossing = \"{}\"{phi} }}", degrees(a)),
        Some(Target::HalfAngle(a)) => format!("{{ half-angle = \"{}\"{phi} }}", degrees(a)),
        Some(Target::Separation(a)) => format!("{{ separation = \"{}\"{phi} }}", degrees(a)),
        Some(Target::Collinear) => format!("{{ collinear = true{phi} }}"),
        Some(Target::Beamlike) => format!("{{ beamlike = true{phi} }}"),
        Some(Target::Touching) | None => {
            format!("{{ theta = \"{}\", phi = \"{}\" }}", crystal.cut.theta, crystal.cut.phi)
        }
    }
}

/// The cut in the words it was typed in; an azimuth that was chosen stays open.
fn as_typed(cut: &Cut) -> String {
    let cut = toml::Value::try_from(cut).expect("texts and flags are TOML");
    let keys = cut.as_table().into_iter().flatten().map(|(key, value)| format!("{key} = {value}"));
    format!("{{ {} }}", keys.collect::<Vec<_>>().join(", "))
}

fn emission_section(o: &mut String, setup: &Setup) {
    section(o, "[emission]");
    let why = "0, I or II; or process = \"e -> o + e\"";
    // a default that depends on the question stays open
    let mut kind = |name: &str| match setup.interaction_given {
        true => line(o, "type", &quoted(name), why),
        false => comment(o, &format!("type = \"{name}\""), why),
    };
    match setup.interaction {
        Interaction::Zero => kind("0"),
        Interaction::One => kind("I"),
        Interaction::Two | Interaction::Any => kind("II"),
        Interaction::Explicit(process) => {
            line(o, "process", &quoted(&process.to_string()), "or type = \"II\"")
        }
    }
    let signal = match &setup.signals {
        Signals::Degenerate => "\"degenerate\"".into(),
        Signals::At(all) => {
            let list: Vec<String> = all.iter().map(|w| quoted(&w.to_string())).collect();
            format!("[{}]", list.join(", "))
        }
    };
    line(o, "signal", &signal, "\"degenerate\" follows the pump; or a list of wavelengths");
}

fn section(o: &mut String, name: &str) {
    let _ = writeln!(o, "\n{name}");
}

fn line(o: &mut String, key: &str, value: &str, why: &str) {
    let written = format!("{key} = {value}");
    let _ = if why.is_empty() { writeln!(o, "{written}") } else { writeln!(o, "{written:<43} # {why}") };
}

fn comment(o: &mut String, written: &str, why: &str) {
    let written = format!("# {written}");
    let _ = if why.is_empty() { writeln!(o, "{written}") } else { writeln!(o, "{written:<43} # {why}") };
}

fn quoted(text: &str) -> String {
    toml::Value::String(text.into()).to_string()
}
