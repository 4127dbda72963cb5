//! A crystal as it stands: its vectors in the lab, and the words that drawings share.

use nalgebra::Vector3;

use super::camera::broken;
use super::drawing::{Anchor, Drawing};
use super::pump_light::{PumpLight, taken};
use crate::frame::{Direction, Mount, Reversal};
use crate::job::Setup;
use crate::matching::{Actuator, Cones, Emission, Pairing};
use crate::optics::Crystal;
use crate::quantity::{Angle, Length};
use crate::report::room_words;

/// Size of texts.
pub(super) const SIZE: f64 = 12.5;
/// Of the axis Z.
pub(super) const DASH_DOT: &str = "14 4 2 4";

/// The crystal's vectors in the lab.
pub(super) struct Standing<'a> {
    pub setup: &'a Setup,
    /// From 0.
    pub index: usize,
    pub crystal: &'a Crystal,
    pub normal: Vector3<f64>,
    /// X, Y, Z; Z by its downstream end.
    pub axes: [Vector3<f64>; 3],
    /// The end of Z that makes the angle theta with the normal.
    pub counted: Vector3<f64>,
    /// Unit vector across the beam along u at zero tilt: where Z leans unless the crystal is turned round.
    pub lean: Vector3<f64>,
    pub pairing: Option<Pairing>,
    pub pump_ray: Option<Vector3<f64>>,
    /// Polarization before the first crystal.
    pub light: Option<PumpLight>,
    /// Azimuth of the pump's field that the crystal takes, radians.
    pub takes: Option<f64>,
}

impl<'a> Standing<'a> {
    pub fn of(setup: &'a Setup, cones: &Cones, index: usize) -> Self {
        let crystal = &setup.crystals[index];
        let placement = crystal.placement();
        let lab = |v: Vector3<f64>| placement.to_lab(Mount(v)).0;
        let dielectric = placement.dielectric_axes();
        let mut axes = [0, 1, 2].map(|n| lab(dielectric.column(n).into_owned()));
        if axes[2].z < 0.0 {
            axes[2] = -axes[2];
        }
        let normal = lab(Vector3::z());
        let off = |end: Vector3<f64>| (end.dot(&normal) - crystal.cut.theta.si().cos()).abs();
        let counted = if off(-axes[2]) < off(axes[2]) - 1e-9 { -axes[2] } else { axes[2] };
        let (sin, cos) = crystal.orientation.roll.si().sin_cos();
        let pairing = Emission::of(crystal, setup.photons()).ok().and_then(|emission| {
            let roles = *emission.wanted(crystal, setup.interaction).ok()?.first()?;
            emission.pairing(roles, Direction::forward())
        });
        Self {
            setup,
            index,
            crystal,
            normal,
            axes,
            counted,
            lean: Vector3::new(cos, sin, 0.0),
            pump_ray: pairing.map(|p| placement.to_lab(p.pump.ray).0),
            pairing,
            light: PumpLight::of(setup, cones),
            takes: taken(setup, crystal),
        }
    }

    /// "Crystal 2 (second), " where there are several.
    pub fn name(&self) -> String {
        if self.setup.crystals.len() == 1 {
            String::new()
        } else {
            format!("{}: ", named(self.setup, self.index))
        }
    }

    pub fn cut_words(&self) -> String {
        let crystal = self.crystal;
        format!(
            "{}{}:{}  theta {:.3} deg, phi {:.3} deg, length {} (lengths not to scale, angles true)",
            self.name(),
            crystal.material.id,
            crystal.set().id,
            crystal.cut.theta.degrees(),
            crystal.cut.phi.degrees(),
            crystal.length
        )
    }

    pub fn turn_words(&self) -> String {
        let o = &self.crystal.orientation;
        let more =
            |actuator| room_words(self.crystal, actuator, Angle::from_degrees(1.0)).replace(" by 1 deg", "");
        let mut words = format!(
            "tilt {:+.3} deg, cross tilt {:+.3} deg, roll {:+.1} deg{}. For more tilt, {}; for more cross tilt, {}.",
            o.tilt.degrees() + 0.0,
            o.cross_tilt.degrees() + 0.0,
            o.roll.degrees() + 0.0,
            reversed(self.crystal).map_or(String::new(), |words| format!(", {words}")),
            more(Actuator::Tilt),
            more(Actuator::CrossTilt)
        );
        if o.about_x.si() != 0.0 || o.about_y.si() != 0.0 {
            words.push_str(&format!(
                " The common mount is turned by {:+.3} deg about x and {:+.3} deg about y.",
                o.about_x.degrees() + 0.0,
                o.about_y.degrees() + 0.0
            ));
        }
        words
    }

    /// What the pump's polarization is, and how much of it the crystal takes.
    pub fn pump_words(&self) -> Option<String> {
        let light = self.light?;
        let what = match light.linear() {
            Some(azimuth) => format!("stands at {} deg from +x towards +y", tenth(azimuth)),
            None => format!(
                "is elliptical, {:.0} % of its power vertical",
                100.0 * light.share(std::f64::consts::FRAC_PI_2)
            ),
        };
        let from = if light.given { "as the job gives it" } else { "chosen to drive the crystals" };
        let takes = self.takes.map_or(String::new(), |t| {
            format!(
                "; this crystal takes {:.0} % of its power (what stands at {} deg)",
                100.0 * light.share(t),
                tenth(t)
            )
        });
        Some(format!("The pump's field {what}, {from}{takes}."))
    }
}

/// Degrees of an axis in [0, 180), to a tenth.
fn tenth(azimuth: f64) -> String {
    let degrees = azimuth.to_degrees();
    format!("{:.1}", if degrees > 179.95 { 0.0 } else { degrees })
}

/// "Crystal 2 (second)"
pub(super) fn named(setup: &Setup, index: usize) -> String {
    let name = &setup.crystals[index].name;
    if name.parse::<usize>().is_ok() || name.is_empty() {
        format!("Crystal {}", index + 1)
    } else {
        format!("Crystal {} ({name})", index + 1)
    }
}

/// The half turn that a crystal was given before it was mounted.
pub(crate) fn reversed(crystal: &Crystal) -> Option<&'static str> {
    match crystal.reversal {
        Reversal::None => None,
        Reversal::AboutBeam => Some("turned by half a turn about the beam"),
        Reversal::AboutVertical => Some("turned by half a turn about the vertical (other face first)"),
        Reversal::AboutHorizontal => Some("turned by half a turn about the horizontal (other face first)"),
    }
}

/// Sentences below a drawing.
pub(super) fn notes(d: &mut Drawing, sentences: &[String], from: f64) -> f64 {
    let lines: Vec<String> = sentences.iter().flat_map(|s| broken(s, 122)).collect();
    for (n, line) in lines.iter().enumerate() {
        d.text((16.0, from + 17.0 * n as f64), SIZE - 0.5, Anchor::Start, line);
    }
    from + 17.0 * lines.len() as f64
}

/// Height that [`notes`] need.
pub(super) fn height_of(sentences: &[String]) -> f64 {
    17.0 * sentences.iter().map(|s| broken(s, 122).len()).sum::<usize>() as f64
}

/// Air before a crystal, in words.
pub(crate) fn gap_words(setup: &Setup, index: usize) -> String {
    match setup.bench.gaps.get(index) {
        Some(gap) if gap.si() > 0.0 => format!("{} of air", Length::metres(gap.si())),
        _ => "in contact".into(),
    }
}
