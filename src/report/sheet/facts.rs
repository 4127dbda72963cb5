//! What both sheets ask of an experiment.

use nalgebra::Vector3;

use crate::frame::{Direction, Lab, Mount};
use crate::job::Setup;
use crate::matching::{
    Actuator, Cones, ConesError, Emission, Measure, Pairing, Photons, RingRow, Roles, Target, Triplet,
    Tuning, Want, cones, tune, tuning_turn,
};
use crate::optics::Crystal;
use crate::picture::{Light, ring_widths};
use crate::quantity::{Angle, Length, Power};
use crate::report::angles::{fixed, rounded, signed};
use crate::report::{Opening, advice};

/// An experiment with its rings.
pub(super) struct Facts<'a> {
    pub setup: &'a Setup,
    pub cones: Cones,
    pub photons: Photons,
    /// Of each ring, FWHM along a radius in the job's light, in units of the screen's distance.
    pub widths: Vec<Option<f64>>,
}

impl<'a> Facts<'a> {
    pub fn of(setup: &'a Setup) -> Result<Self, ConesError> {
        let cones = rings(setup, &setup.crystals)?;
        let light = Light::of(setup);
        // where no picture can be taken the width at one wavelength must do
        let widths = ring_widths(setup, &light, &cones).unwrap_or_else(|_| {
            let width = |row: &RingRow| row.ring.as_ref().ok()?.thickness.map(f64::tan);
            cones.rings.iter().map(width).collect()
        });
        Ok(Self { setup, cones, photons: setup.photons(), widths })
    }

    pub fn roles(&self, crystal: &Crystal) -> Option<Roles> {
        let emission = Emission::of(crystal, self.photons).ok()?;
        emission.wanted(crystal, self.setup.interaction).ok()?.first().copied()
    }

    /// The turn with the larger effect.
    pub fn tuning(&self, crystal: &Crystal) -> Actuator {
        let triplet = Triplet::new(crystal, &self.photons).ok();
        let turn = triplet.zip(self.roles(crystal)).map(|(t, r)| tuning_turn(crystal, self.photons, &t, r));
        turn.unwrap_or(Actuator::Tilt)
    }

    /// What begins to give a ring of a crystal that has none.
    pub fn openings(&self, index: usize) -> Vec<Opening> {
        let all = self.cones.rings.iter().zip(advice(self.setup, &self.cones));
        all.filter(|(row, _)| row.crystal == index).map(|(_, advice)| advice).next().unwrap_or_default()
    }

    /// Whether the cut's phi decides the phase matching and not its theta, as in XY cuts.
    pub fn tunes_by_phi(&self, crystal: &Crystal) -> bool {
        self.tuning(crystal) == Actuator::CrossTilt
    }

    /// The waves of a pair whose signal leaves towards `signal`.
    pub fn pairing(&self, crystal: &Crystal, signal: Direction) -> Option<Pairing> {
        Emission::of(crystal, self.photons).ok()?.pairing(self.roles(crystal)?, signal)
    }

    pub fn measure(&self, crystal: &Crystal, photons: Photons) -> Measure {
        let emission = Emission::of(crystal, photons).ok();
        let roles = self.roles(crystal);
        emission.zip(roles).map(|(e, r)| Measure::of(&e, r)).unwrap_or_default()
    }

    /// The angle that the sheet watches: of the crossings where there are some, else the ring's half angle.
    pub fn watched(&self, crystal: &Crystal) -> Option<Watched> {
        let now = self.measure(crystal, self.photons);
        let crossing = now.crossing.filter(|_| !now.touching).map(|a| Watched { crossing: true, angle: a });
        crossing.or(now.half_angle.map(|a| Watched { crossing: false, angle: a }))
    }

    /// The tuning turn that brings a changed crystal back to the watched angle: change in radians.
    pub fn repair(&self, changed: &Crystal, watched: Watched) -> Option<f64> {
        let tuned = tune(&self.question(changed, watched, None)).ok()?;
        let turn = tuned.turns.first()?;
        let now = match tuned.actuator {
            Actuator::CrossTilt => changed.orientation.cross_tilt,
            _ => changed.orientation.tilt,
        };
        Some(turn.setting - now.si())
    }

    /// The temperature, degrees Celsius, that brings a changed crystal back to the watched angle.
    pub fn heat(&self, changed: &Crystal, watched: Watched) -> Option<f64> {
        let question = self.question(changed, watched, Some(Actuator::Temperature));
        Some(tune(&question).ok()?.turns.first()?.setting)
    }

    fn question(&self, changed: &Crystal, watched: Watched, actuator: Option<Actuator>) -> Tuning {
        Tuning {
            crystal: changed.clone(),
            photons: self.photons,
            fixed_signal: self.setup.signals.fixed(),
            interaction: self.setup.interaction,
            target: watched.target(),
            actuator,
        }
    }

    /// In which light rings are as thick as the sheet says.
    pub fn light_words(&self) -> String {
        let filtered = self.setup.bench.filters.iter().any(|filters| !filters.is_empty());
        let pump = self
            .setup
            .bench
            .waist
            .map_or("plane pump".into(), |waist| format!("pump of waist {} um", rounded(waist.um(), 1)));
        format!("{}, {pump}", if filtered { "behind the filter" } else { "one wavelength" })
    }

    pub fn power(&self) -> Option<Power> {
        let pump = self.setup.written.pump.as_ref()?.get_ref();
        pump.power.as_ref()?.get_ref().parse().ok()
    }

    pub fn waist(&self) -> Option<Length> {
        let pump = self.setup.written.pump.as_ref()?.get_ref();
        pump.waist.as_ref()?.get_ref().parse().ok()
    }

    /// Full angle of the iris seen from the crystal, radians.
    pub fn iris(&self) -> Option<f64> {
        let text = self.setup.written.collection.iter().find_map(|c| c.iris.as_ref())?.get_ref();
        let angle = text.parse::<Angle>().ok().map(Angle::si);
        angle.or_else(|| {
            text.parse::<Length>().ok().map(|l| 2.0 * (0.5 * l.si() / self.setup.screen.si()).atan())
        })
    }

    /// "bbo:kato-1986"
    pub fn id(crystal: &Crystal) -> String {
        format!("{}:{}", crystal.material.id, crystal.set().id)
    }
}

/// The angle that is watched.
#[derive(Debug, Clone, Copy)]
pub(super) struct Watched {
    pub crossing: bool,
    pub angle: f64,
}

impl Watched {
    pub fn target(self) -> Target {
        if self.crossing { Target::Crossing(self.angle) } else { Target::HalfAngle(self.angle) }
    }

    pub fn of(self, measure: &Measure) -> Option<f64> {
        if self.crossing { measure.crossing } else { measure.half_angle }
    }

    pub fn name(self) -> &'static str {
        if self.crossing { "angle of the crossings from the pump" } else { "half angle of the ring" }
    }
}

pub(super) fn rings(setup: &Setup, crystals: &[Crystal]) -> Result<Cones, ConesError> {
    cones(crystals, setup.pump(), &setup.signals(), setup.interaction, Want::Both)
}

/// Whether two crystals are the same piece on an order: same material, indices, cut, length, poling and temperature.
pub(super) fn same_order(a: &Crystal, b: &Crystal) -> bool {
    a.material.id == b.material.id
        && a.dataset == b.dataset
        && a.cut == b.cut
        && a.length == b.length
        && a.poling == b.poling
        && a.temperature == b.temperature
        && a.reference_temperature == b.reference_temperature
}

pub(super) fn nm(wavelength: crate::quantity::Wavelength) -> String {
    format!("{} nm", rounded(wavelength.nm(), 3))
}

pub(super) fn deg(radians: f64, decimals: usize) -> String {
    format!("{} deg", signed(radians.to_degrees(), decimals))
}

pub(super) fn plain_deg(radians: f64, decimals: usize) -> String {
    format!("{} deg", fixed(radians.to_degrees(), decimals))
}

pub(super) fn mm(value: f64, decimals: usize) -> String {
    format!("{} mm", signed(value, decimals))
}

/// "e 810 nm", with the crystal's number where there are several.
pub(super) fn ring_name(setup: &Setup, row: &RingRow) -> String {
    let of =
        if setup.crystals.len() > 1 { format!(" of crystal {}", row.crystal + 1) } else { String::new() };
    format!("{} {}{of}", row.polarization, nm(row.wavelength))
}

/// "horizontal (0.0 deg)"
pub(super) fn field_words(azimuth: f64) -> String {
    let word = if !(0.5..=179.5).contains(&azimuth) {
        "horizontal, "
    } else if (azimuth - 90.0).abs() < 0.5 {
        "vertical, "
    } else {
        ""
    };
    format!("{word}{} deg from +x towards +y", fixed(azimuth, 1))
}

pub(super) fn capital(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or(String::new(), |first| first.to_uppercase().chain(letters).collect())
}

/// How the marked axes of a crystal lie across the beam: where the downstream end of Z leans; of a Z across the beam, which
/// leans to neither side, its line and where the downstream end of X leans, for the line alone fits a crystal turned round too.
pub(super) fn lean_words(crystal: &Crystal) -> Vec<String> {
    let placement = crystal.placement();
    let axis = |n: usize| {
        let Lab(v) = placement.to_lab(Mount(placement.dielectric_axes().column(n).into_owned()));
        if v.z < -1e-9 { -v } else { v }
    };
    let leans = |name: &str, v: Vector3<f64>| {
        let across = Vector3::new(v.x, v.y, 0.0);
        let oblique = across.norm() > 0.01 && v.z > 0.01;
        oblique.then(|| {
            format!(
                "the end of {name} that points downstream leans {}, looking along the beam",
                side_words(across)
            )
        })
    };
    let z = axis(2);
    if z.z > 0.01 {
        return leans("Z", z).into_iter().collect();
    }
    let plane = z.y.atan2(z.x).to_degrees().rem_euclid(180.0);
    let mut all = vec![format!(
        "Z lies across the beam, in the plane at {} deg from +x towards +y",
        fixed(if plane > 179.95 { 0.0 } else { plane }, 1)
    )];
    all.extend(leans("X", axis(0)).map(|words| {
        format!(
            "{words}: with X on the other side the crystal is turned round, which the line of Z does not show"
        )
    }));
    all
}

/// Towards which side a direction across the beam points: "to the left (+x)", for somebody who looks along the beam.
pub(super) fn side_words(v: Vector3<f64>) -> String {
    let sideways = v.x.abs() > 0.02 * v.norm();
    let upright = v.y.abs() > 0.02 * v.norm();
    let across = if v.x > 0.0 { "to the left (+x)" } else { "to the right (-x)" };
    let along = if v.y > 0.0 { "up (+y)" } else { "down (-y)" };
    match (sideways, upright) {
        (true, true) => format!("{across} and {along}"),
        (true, false) => across.into(),
        (false, true) => along.into(),
        (false, false) => "to neither side".into(),
    }
}
