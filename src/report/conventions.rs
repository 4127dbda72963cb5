//! What the numbers of an answer mean: data sets, angles, signs; and cautions about the laser.

use crate::frame::Reversal;
use crate::job::Setup;
use crate::matching::{Actuator, brightness};
use crate::material::{DataSet, Optic};
use crate::optics::Crystal;
use crate::quantity::{Angle, Wavelength};

use super::angles::{fixed, rounded};

use nalgebra::Vector3;

/// Lines for people, ids for scripts.
#[derive(Debug, Clone, Default)]
pub struct Conventions {
    /// One or two lines that end a text.
    pub lines: Vec<String>,
    /// `material:dataset` in use.
    pub datasets: Vec<String>,
    /// Things to know before trusting a number; also printed on stderr.
    pub warnings: Vec<String>,
}

impl Conventions {
    /// For an experiment; `rolled` crystals and screens are described as they stand.
    #[must_use]
    pub fn of(setup: &Setup) -> Self {
        let mut all = Self::default();
        for crystal in &setup.crystals {
            all.add_dataset(crystal);
        }
        all.lines.push(angles_line(setup));
        all.add_warnings(setup);
        all
    }

    /// For an experiment whose pairs are collected: plates count too, and more of the job is used.
    #[must_use]
    pub fn of_pairs(setup: &Setup) -> Self {
        let mut all = Self::of(setup);
        all.warnings.retain(|warning| !warning.starts_with(UNUSED));
        if unread_keys(setup).contains(&"pump.power") {
            all.warnings.insert(0, format!("{UNUSED}: pump.power"));
        }
        setup.bench.compensators.iter().for_each(|c| all.add_dataset(&c.plate));
        all
    }

    /// Adds the line about a crystal's data set, once.
    pub fn add_dataset(&mut self, crystal: &Crystal) {
        let id = format!("{}:{}", crystal.material.id, crystal.set().id);
        if !self.datasets.contains(&id) {
            self.lines.insert(self.datasets.len(), dataset_line(&id, crystal));
            self.datasets.push(id);
            if let Some(warning) = &crystal.set().file.warning {
                self.warnings.push(format!("{}:{}: {warning}", crystal.material.id, crystal.set().id));
            }
        }
    }

    /// Warns where a crystal's phi gives far fewer pairs than the best phi of its cut would.
    pub fn warn_of_dim_phi(&mut self, setup: &Setup) {
        for crystal in &setup.crystals {
            let Some(brightness) = brightness(crystal, setup.photons(), setup.interaction) else { continue };
            // pairs go as d_eff squared
            if brightness.own < 0.5 * brightness.best {
                self.warnings.push(format!(
                    "few pairs: {} at phi {} deg has |d_eff| {} pm/V; at phi {} deg the same theta has {} pm/V",
                    crystal.material.id,
                    rounded(crystal.cut.phi.degrees(), 3),
                    fixed(brightness.own, 3),
                    rounded(brightness.best_phi.degrees(), 3),
                    fixed(brightness.best, 3)
                ));
            }
        }
    }

    /// Takes keys that a command does use out of the warning about unused ones.
    pub fn uses(&mut self, keys: &[&str]) {
        const HEAD: &str = "not used by this command: ";
        self.warnings.retain_mut(|warning| {
            let Some(list) = warning.strip_prefix(HEAD) else { return true };
            let left: Vec<&str> = list.split(", ").filter(|key| !keys.contains(key)).collect();
            let any = !left.is_empty();
            *warning = format!("{HEAD}{}", left.join(", "));
            any
        });
    }

    fn add_warnings(&mut self, setup: &Setup) {
        let unread = unread_keys(setup);
        if !unread.is_empty() {
            self.warnings.push(format!("{UNUSED}: {}", unread.join(", ")));
        }
        let Some(pump) = setup.pump else { return };
        for crystal in &setup.crystals {
            let signals = setup.signals.for_pump(pump);
            let idlers = signals.iter().filter_map(|s| s.partner(pump));
            let outside: Vec<String> = std::iter::once(pump)
                .chain(signals.iter().copied())
                .chain(idlers)
                .filter(|w| !crystal.set().covers(*w))
                .map(|w| format!("{} nm", rounded(w.nm(), 1)))
                .collect();
            if !outside.is_empty() {
                let mut unique = outside;
                unique.dedup();
                self.warnings.push(format!(
                    "extrapolated: {} is outside {} to {}, where {}:{} is valid",
                    unique.join(", "),
                    crystal.set().from,
                    crystal.set().to,
                    crystal.material.id,
                    crystal.set().id
                ));
            }
            if crystal.material.file.point_group.get_ref() == "2" {
                self.warnings.push(format!(
                    "{} is monoclinic: its dielectric axes turn slightly with wavelength, which is neglected",
                    crystal.material.id
                ));
            }
        }
        if let Some(pump) = setup.pump.filter(|p| p.nm() < 450.0) {
            self.lines.push(caution(pump));
        }
    }
}

/// "Data set bbo:kato-1986 (...), 220 nm to 1060 nm, 20 degC".
fn dataset_line(id: &str, crystal: &Crystal) -> String {
    let set: &DataSet = crystal.set();
    let temperature = match set.file.temperature {
        None if (crystal.temperature.degc() - 20.0).abs() < 1e-9 => {
            "20 degC (the source states no temperature)".to_string()
        }
        _ => crystal.temperature.to_string(),
    };
    format!(
        "Data set {id} ({}; {}), valid {} to {}, at {temperature}.",
        set.file.citation, set.file.known, set.from, set.to
    )
}

fn angles_line(setup: &Setup) -> String {
    let uniaxial = setup.crystals.iter().all(|c| c.material.file.optic == Optic::Uniaxial);
    let z = if uniaxial { "the optic axis Z" } else { "the dielectric axis Z" };
    let mut line = format!(
        "theta is the angle between face normal and {z}, phi the normal's azimuth from X; positive tilt increases the \
         angle between pump and Z inside, positive cross tilt the pump's azimuth. At roll 0 Z leans towards +x, on the \
         left of who looks along the beam; h is the angle towards +x, v upwards, outside the crystal unless called \
         inside; mm on a screen at {} m.",
        rounded(setup.screen.si(), 3)
    );
    if setup.crystals.iter().any(|c| c.cut.theta.degrees() > 90.0) {
        line.push_str(" With theta above 90 deg it is the upstream end of Z that leans towards +x, the downstream end to -x.");
    }
    for crystal in &setup.crystals {
        line.push_str(match crystal.reversal {
            Reversal::None => "",
            Reversal::AboutBeam => {
                " Turned about the beam Z leans to -x and positive tilt brings it nearer to the pump."
            }
            Reversal::AboutVertical => " Turned about the vertical Z leans as before.",
            Reversal::AboutHorizontal => {
                " Turned about the horizontal Z leans to -x and positive tilt brings it nearer to the pump."
            }
        });
    }
    line
}

/// How the warning about keys without effect begins.
const UNUSED: &str = "not used by this command";

/// Keys that were given and that only some commands read.
fn unread_keys(setup: &Setup) -> Vec<&'static str> {
    let written = &setup.written;
    let pump = written.pump.as_ref().map(|p| p.get_ref().clone()).unwrap_or_default();
    let given = [
        ("pump.waist", pump.waist.is_some()),
        ("pump.power", pump.power.is_some()),
        ("pump.linewidth", pump.linewidth.is_some()),
        ("pump.pulse", pump.pulse.is_some()),
        ("pump.spectrum", pump.spectrum.is_some()),
        ("pump.polarization", pump.polarization.is_some()),
        ("collection", !written.collection.is_empty()),
        ("filter", !written.filter.is_empty()),
        ("compensator", !written.compensator.is_empty()),
    ];
    given.into_iter().filter(|(_, given)| *given).map(|(key, _)| key).collect()
}

fn caution(pump: Wavelength) -> String {
    let sight = if pump.nm() < 380.0 { "is invisible" } else { "looks far dimmer than it is" };
    format!(
        "Laser safety: {} nm {sight} and harms eyes and skin; reflections from tilted faces too. Enclose the beam, wear \
         goggles rated for it; local rules and the laser safety officer decide.",
        rounded(pump.nm(), 1)
    )
}

/// A turn in the words of a room: which way, seen from where, for the crystal's actual roll.
#[must_use]
pub fn room_words(crystal: &Crystal, actuator: Actuator, turn: Angle) -> String {
    axis_words(crystal.turning_axis(actuator == Actuator::CrossTilt), turn)
}

/// A right-handed turn about a lab axis across the beam in the words of a room.
#[must_use]
pub fn axis_words(axis: Vector3<f64>, turn: Angle) -> String {
    let size = format!("{} deg", rounded(turn.degrees().abs(), 3));
    if turn.degrees().abs() < 5e-4 {
        return "leave the mount as it is".into();
    }
    let axis = axis * turn.si().signum();
    if axis.y.abs() > 0.999 {
        let sense = if axis.y > 0.0 { "counterclockwise" } else { "clockwise" };
        return format!("turn the mount {sense} seen from above by {size}");
    }
    if axis.x.abs() > 0.999 {
        // a right-handed turn about +x carries the top (+y) towards +z, downstream
        let towards = if axis.x > 0.0 { "away from the laser" } else { "towards the laser" };
        return format!("tip the top of the mount {towards} by {size}");
    }
    // an axis across the beam at some angle from the vertical: describe it by its upper end
    let (upper, sense) = if axis.y >= 0.0 { (axis, "counterclockwise") } else { (-axis, "clockwise") };
    let lean = upper.x.atan2(upper.y).to_degrees();
    let side = if lean >= 0.0 { "left" } else { "right" };
    format!(
        "turn the mount {sense} by {size}, seen from the upper end of an axis across the beam that leans {} deg from the \
         vertical to the {side} of who looks along the beam",
        rounded(lean.abs(), 1)
    )
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::material::Catalogue;
    use std::sync::Arc;

    fn bbo(roll: f64) -> Crystal {
        let material = Arc::new(Catalogue::default().get("bbo").expect("bbo"));
        let mut crystal = Crystal::new(material, None).expect("the default set").with_cut(29.0, 90.0);
        crystal.orientation.roll = Angle::from_degrees(roll);
        crystal
    }

    /// Z leans to +x, to the left of who looks along the beam. To increase theta the normal must swing towards +x too,
    /// left: from above, with the beam going up the page and +x to the left, that is counterclockwise.
    #[test]
    fn positive_tilt_at_roll_0_is_counterclockwise_from_above() {
        let words = room_words(&bbo(0.0), Actuator::Tilt, Angle::from_degrees(0.42));
        assert_eq!(words, "turn the mount counterclockwise seen from above by 0.42 deg");
        let words = room_words(&bbo(0.0), Actuator::Tilt, Angle::from_degrees(-0.42));
        assert_eq!(words, "turn the mount clockwise seen from above by 0.42 deg");
    }

    /// At roll 90 deg Z leans up; the normal must swing up, so the top of the crystal comes back towards the laser.
    #[test]
    fn positive_tilt_at_roll_90_tips_the_top_towards_the_laser() {
        let words = room_words(&bbo(90.0), Actuator::Tilt, Angle::from_degrees(1.0));
        assert_eq!(words, "tip the top of the mount towards the laser by 1 deg");
    }

    #[test]
    fn oblique_axes_are_described_by_their_upper_end() {
        let words = room_words(&bbo(45.0), Actuator::Tilt, Angle::from_degrees(1.0));
        assert!(
            words.contains("counterclockwise") && words.contains("45 deg from the vertical to the right"),
            "{words}"
        );
    }
}
