//! The complete commented job for a setup: a file to start from.

use std::fmt::Write as _;

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
    let pump = setup.pump.map_or_else(|| "405 nm".into(), |p| p.to_string());
    line(o, "wavelength", &quoted(&pump), "vacuum; \"405 nm air\" converts from standard air");
    comment(o, "waist = \"150 um\"", "1/e^2 radius in the crystal; without it a plane wave");
    comment(o, "power = \"40 mW\"", "");
    comment(o, "linewidth = \"0.1 nm\"", "FWHM; or pulse = \"150 fs\"; without either monochromatic");
    comment(
        o,
        "polarization = \"matched\"",
        "or { angle = \"45 deg\", phase = \"0 deg\" }: E from +x towards +y",
    );
    for (crystal, given) in setup.crystals.iter().zip(&setup.cut) {
        crystal_section(o, crystal, *given, setup.crystals.len() > 1);
    }
    emission_section(o, setup);
    section(o, "[screen]");
    line(o, "distance", &quoted(&setup.screen.to_string()), "from the crystal, across the pump");
    section(o, "[stage]");
    match &setup.stage {
        Some(stage) => {
            line(o, "zero", &quoted(&stage.zero.to_string()), "reading at back-reflection");
            if let Some(per_turn) = stage.per_turn {
                line(
                    o,
                    "per_turn",
                    &quoted(&per_turn.to_string()),
                    "turn of the crystal per turn of the screw",
                );
            }
            line(o, "reversed", &stage.reversed.to_string(), "readings fall when the tilt rises");
        }
        None => {
            comment(o, "zero = \"0 deg\"", "reading at back-reflection");
            comment(o, "per_turn = \"5 mrad\"", "turn of the crystal per turn of the screw");
            comment(o, "reversed = false", "readings fall when the tilt rises");
        }
    }
    out
}

fn crystal_section(o: &mut String, crystal: &Crystal, given: GivenCut, several: bool) {
    section(o, if several { "[[crystal]]" } else { "[crystal]" });
    if several {
        line(o, "name", &quoted(&crystal.name), "");
    }
    line(o, "material", &quoted(&crystal.material.id), "`twincone materials` lists them");
    line(o, "dataset", &quoted(&crystal.set().id), "whose refractive indices");
    line(o, "cut", &cut(crystal, given), "theta: face normal to Z; phi: azimuth of the normal from X");
    line(o, "length", &quoted(&crystal.length.to_string()), "along the face normal");
    line(o, "temperature", &quoted(&crystal.temperature.to_string()), "");
    let turn = &crystal.orientation;
    line(o, "tilt", &quoted(&turn.tilt.to_string()), "positive increases theta");
    line(o, "cross_tilt", &quoted(&turn.cross_tilt.to_string()), "positive increases phi");
    line(o, "roll", &quoted(&turn.roll.to_string()), "90 deg lets Z lean up instead of towards +x");
    match crystal.poling {
        Some(period) => line(o, "poling", &quoted(&format!("{} um", period.um())), "period along the normal"),
        None => comment(o, "poling = \"10 um\"", "period along the normal"),
    }
    match crystal.reversal {
        Reversal::None => comment(o, "reversed = \"about-beam\"", "or about-vertical, about-horizontal"),
        Reversal::AboutBeam => line(o, "reversed", "\"about-beam\"", ""),
        Reversal::AboutVertical => line(o, "reversed", "\"about-vertical\"", ""),
        Reversal::AboutHorizontal => line(o, "reversed", "\"about-horizontal\"", ""),
    }
    if crystal.reach == Reach::Extrapolate {
        line(o, "extrapolate", "true", "outside the data set's range");
    }
}

fn cut(crystal: &Crystal, given: GivenCut) -> String {
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

fn emission_section(o: &mut String, setup: &Setup) {
    section(o, "[emission]");
    match setup.interaction {
        Interaction::Zero => line(o, "type", "\"0\"", "0, I or II; or process = \"e -> o + e\""),
        Interaction::One => line(o, "type", "\"I\"", "0, I or II; or process = \"e -> o + e\""),
        Interaction::Two | Interaction::Any => {
            line(o, "type", "\"II\"", "0, I or II; or process = \"e -> o + e\"")
        }
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
    let _ = if why.is_empty() { writeln!(o, "{written}") } else { writeln!(o, "{written:<44}# {why}") };
}

fn comment(o: &mut String, written: &str, why: &str) {
    let written = format!("# {written}");
    let _ = if why.is_empty() { writeln!(o, "{written}") } else { writeln!(o, "{written:<44}# {why}") };
}

fn quoted(text: &str) -> String {
    toml::Value::String(text.into()).to_string()
}
