//! The sentences under a camera picture: how it is seen, what of, and on which data it rests.

use super::light::Light;
use super::sensor::{Optics, Sensor};
use crate::job::Setup;
use crate::optics::Crystal;

/// A crystal or plate as it is cut and as it stands.
pub(super) fn crystal_words(crystal: &Crystal) -> String {
    let turn = &crystal.orientation;
    format!(
        "{}:{} cut theta {:.3} deg, phi {:.3} deg, {} long, tilt {:.3} deg, cross tilt {:.3} deg, roll {:.1} deg",
        crystal.material.id,
        crystal.set().id,
        crystal.cut.theta.degrees(),
        crystal.cut.phi.degrees(),
        crystal.length,
        turn.tilt.degrees() + 0.0,
        turn.cross_tilt.degrees() + 0.0,
        turn.roll.degrees() + 0.0,
    )
}

/// Sentences.
#[must_use]
pub fn notes(setup: &Setup, light: &Light, sensor: &Sensor) -> Vec<String> {
    let mut lines = vec![format!("Seen {}.", sensor.seen.words())];
    lines.extend(setup.crystals.iter().map(|crystal| format!("{}.", crystal_words(crystal))));
    let waist = light.waist.map_or("a plane wave".into(), |w| format!("of waist {} um", w.um()));
    let filter = |name: &str, filters: &[super::light::Filter]| -> String {
        let words = |f: &super::light::Filter| {
            let shape = f.kind();
            let centre = f.centre.map_or("the photon's wavelength".into(), |c| format!("{:.2} nm", c.nm()));
            format!("; {name} filter {shape}, {:.2} nm wide at {centre}", f.width.si() * 1e9)
        };
        filters.iter().map(words).collect()
    };
    let filters = if light.signal == light.idler {
        filter("the", &light.signal).replace("; the filter", "; filter")
    } else {
        filter("signal", &light.signal) + &filter("idler", &light.idler)
    };
    let optics = match sensor.optics {
        Optics::Screen(_) => String::new(),
        Optics::Lens(_) => " Places are those in the lens's focal plane.".into(),
    };
    lines.push(format!("{}, pump {:.3} nm {waist}{filters}.{optics}", setup.interaction, setup.pump().nm()));
    lines.push(
        "Lines: e or slow rings full, o or fast rings dashed, for the nominal wavelengths. 1a and 1b: the first crossing, \
         where a photon and its partner go."
            .into(),
    );
    lines
}
