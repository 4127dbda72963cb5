//! What a fit may change, with what is known of it beforehand.

use crate::job::keys::{Holds, KEYS, KeyPath, Unit};
use crate::job::{Handle, Setup};

/// One unknown. Its numbers are in `unit`.
#[derive(Debug, Clone)]
pub struct Unknown {
    /// Key of the job, such as `crystal.cut.theta`.
    pub name: String,
    what: What,
    /// What of the model it changes.
    pub(super) acts: Acts,
    /// On which crystal, from 0.
    pub(super) crystal: usize,
    /// Unit of its numbers, as a job writes it.
    pub unit: &'static str,
    /// What is known beforehand, or where to begin.
    pub prior: f64,
    /// Standard deviation of that; `None` where nothing is known.
    pub prior_sigma: Option<f64>,
    /// A change that is small and shows.
    pub scale: f64,
}

#[derive(Debug, Clone)]
enum What {
    Key(Handle, Unit),
    Zero,
    Centre(usize),
}

/// What of the model an unknown changes: that of which there are exact derivatives.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Acts {
    Theta,
    Phi,
    Tilt,
    CrossTilt,
    Roll,
    Temperature,
    Poling,
    Pump,
    Distance,
    Zero,
    Centre(usize),
}

impl Acts {
    fn of(key: &str) -> Option<Self> {
        Some(match key {
            "crystal.cut.theta" => Self::Theta,
            "crystal.cut.phi" => Self::Phi,
            "crystal.tilt" => Self::Tilt,
            "crystal.cross_tilt" => Self::CrossTilt,
            "crystal.roll" => Self::Roll,
            "crystal.temperature" => Self::Temperature,
            "crystal.poling" => Self::Poling,
            "pump.wavelength" => Self::Pump,
            "screen.distance" => Self::Distance,
            "stage.zero" => Self::Zero,
            "screen.centre.x" => Self::Centre(0),
            "screen.centre.y" => Self::Centre(1),
            _ => return None,
        })
    }
}

/// What the unknowns set, beside the experiment.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Bearings {
    /// Reading of the tilt's scale at back-reflection against where it is believed to be, degrees.
    pub zero: f64,
    /// Where the undeviated pump hits the screen, against where it is believed to, mm.
    pub centre: [f64; 2],
}

/// Usual limits of each unknown, in its unit: a catalogue's cut, a mount and a screen set by hand, a diode's label.
const USUAL: [(&str, f64); 12] = [
    ("crystal.cut.theta", 0.5),
    ("crystal.cut.phi", 0.5),
    ("stage.zero", 1.0),
    ("crystal.roll", 3.0),
    ("crystal.tilt", 1.0),
    ("crystal.cross_tilt", 1.0),
    ("pump.wavelength", 2.0),
    ("crystal.temperature", 5.0),
    ("screen.distance", 10.0),
    ("screen.centre.x", 5.0),
    ("screen.centre.y", 5.0),
    ("crystal.poling", 0.02),
];

/// Names that are no keys of a job.
const OWN: [&str; 2] = ["screen.centre.x", "screen.centre.y"];

/// The unknowns of a list of names: whole keys, or their last words where those are unique. `priors` are (name, limit in
/// words), such as ("theta", "0.25 deg"), or "none" for no prior; a limit counts as a standard deviation of 1/sqrt 3 of
/// it, that of values that are equally likely up to it.
///
/// # Errors
/// A name that is no unknown, or not a unique one; a prior that is no quantity of that kind.
pub fn unknowns(
    names: &[String],
    priors: &[(String, String)],
    setup: &Setup,
) -> Result<Vec<Unknown>, String> {
    let mut all: Vec<Unknown> = Vec::new();
    for name in names {
        for full in full_names(name)? {
            if all.iter().all(|u| u.name != full) {
                all.push(one(&full, setup)?);
            }
        }
    }
    for (name, limit) in priors {
        for full in full_names(name)? {
            let unknown = all
                .iter_mut()
                .find(|u| u.name == full)
                .ok_or_else(|| format!("--prior {name}: it is not free; add it to --free"))?;
            unknown.prior_sigma = match limit.trim() {
                "none" => None,
                text => Some(unknown.size(text)? / 3f64.sqrt()),
            };
            unknown.scale = unknown.prior_sigma.unwrap_or(unknown.scale);
        }
    }
    Ok(all)
}

fn full_names(name: &str) -> Result<Vec<String>, String> {
    let name = name.trim();
    if name == "centre" || name == "screen.centre" {
        return Ok(OWN.map(String::from).to_vec());
    }
    let all = || USUAL.iter().map(|(key, _)| *key);
    // where the crystals are numbered or named the whole key is needed
    if all().any(|key| key == name) || KeyPath::find(name).is_ok_and(|p| p.item.is_some()) {
        return Ok(vec![name.to_string()]);
    }
    let last: Vec<&str> = all().filter(|key| key.rsplit('.').next() == Some(name)).collect();
    match last.as_slice() {
        [only] => Ok(vec![(*only).to_string()]),
        [] if name == "pump" => Ok(vec!["pump.wavelength".into()]),
        [] if KEYS.iter().any(|key| key.path == name) => Err(format!("`{name}` cannot be fitted")),
        [] => Err(format!(
            "`{name}` is no unknown; there are {}",
            all().map(|key| format!("`{key}`")).collect::<Vec<_>>().join(", ")
        )),
        several => Err(format!("`{name}` is not unique: {}", several.join(", "))),
    }
}

fn one(name: &str, setup: &Setup) -> Result<Unknown, String> {
    let path = KeyPath::find(name).ok();
    let plain = path.as_ref().map_or(name, |p| p.key.path);
    let mut limit = USUAL.iter().find(|(key, _)| *key == plain).map_or(1.0, |(_, limit)| *limit);
    if plain == "screen.distance" {
        // a tape measure and the middle of a crystal
        limit = 0.01 * setup.screen.mm();
    }
    let cannot = || format!("`{name}` cannot be fitted");
    let acts = Acts::of(plain).ok_or_else(cannot)?;
    let mut crystal = 0;
    let (what, unit, prior) = match acts {
        Acts::Zero => {
            let zero = setup.stage.and_then(|s| s.zero).unwrap_or_default();
            (What::Zero, "deg", zero.degrees())
        }
        Acts::Centre(axis) => (What::Centre(axis), "mm", 0.0),
        _ => {
            let path = path.ok_or_else(cannot)?;
            let handle = Handle::of(&path, setup).ok_or_else(|| {
                if plain.starts_with("crystal.") && path.item.is_none() {
                    one_of_several(plain, setup)
                } else {
                    format!("`{name}` cannot be fitted: the job has no such crystal, or its signal hangs on the pump")
                }
            })?;
            crystal = numbered(&path, setup).ok_or_else(cannot)?;
            let (unit, prior) = now(plain, crystal, setup).ok_or_else(cannot)?;
            (What::Key(handle, unit), unit.name(), prior)
        }
    };
    let sigma = limit / 3f64.sqrt();
    Ok(Unknown {
        name: name.into(),
        what,
        acts,
        crystal,
        unit,
        prior,
        prior_sigma: Some(sigma),
        scale: sigma,
    })
}

/// The keys that a bare one could mean where there are several crystals.
fn one_of_several(plain: &str, setup: &Setup) -> String {
    let last = plain.trim_start_matches("crystal.");
    let each = setup.crystals.iter().map(|c| format!("crystal.{}.{last}", c.name));
    format!("the job has several crystals; write {}", each.collect::<Vec<_>>().join(" or "))
}

/// The crystal that a key names, from 0: the first where it names none.
fn numbered(path: &KeyPath, setup: &Setup) -> Option<usize> {
    let Some(item) = path.item.as_deref() else { return Some(0) };
    let number = item.parse::<usize>().ok().map(|n| n.wrapping_sub(1)).filter(|n| *n < setup.crystals.len());
    number.or_else(|| setup.crystals.iter().position(|c| c.name == item))
}

/// Unit and present value of a key.
fn now(plain: &str, crystal: usize, setup: &Setup) -> Option<(Unit, f64)> {
    let crystal = setup.crystals.get(crystal)?;
    let stands = &crystal.orientation;
    Some(match plain {
        "crystal.cut.theta" => (Unit::Deg, crystal.cut.theta.degrees()),
        "crystal.cut.phi" => (Unit::Deg, crystal.cut.phi.degrees()),
        "crystal.roll" => (Unit::Deg, stands.roll.degrees()),
        "crystal.tilt" => (Unit::Deg, stands.tilt.degrees()),
        "crystal.cross_tilt" => (Unit::Deg, stands.cross_tilt.degrees()),
        "pump.wavelength" => (Unit::Nm, setup.pump().nm()),
        "crystal.temperature" => (Unit::DegC, crystal.temperature.degc()),
        "screen.distance" => (Unit::Mm, setup.screen.mm()),
        "crystal.poling" => (Unit::Um, crystal.poling?.um()),
        _ => return None,
    })
}

impl Unknown {
    /// Sets the value.
    ///
    /// # Errors
    /// A value that the key cannot have.
    pub fn set(&self, value: f64, setup: &mut Setup, bearings: &mut Bearings) -> Result<(), String> {
        match &self.what {
            What::Key(handle, unit) => handle.set(setup, value, *unit)?,
            What::Zero => bearings.zero = value,
            What::Centre(axis) => bearings.centre[*axis] = value,
        }
        Ok(())
    }

    /// Whether it is the reading at back-reflection, which a job keeps elsewhere.
    #[must_use]
    pub fn is_zero(&self) -> bool {
        matches!(self.what, What::Zero)
    }

    /// A size in words in the unknown's unit.
    fn size(&self, text: &str) -> Result<f64, String> {
        let fault = |e: String| format!("--prior {}: {e}", self.name);
        let value = match &self.what {
            What::Key(_, Unit::DegC) => {
                let number = text.trim_end_matches("degC").trim_end_matches('K').trim();
                number
                    .parse::<f64>()
                    .map_err(|_| fault(format!("`{text}` is no difference of temperatures")))?
            }
            What::Key(_, Unit::Deg) | What::Zero => Holds::Angle.read(text).map_err(fault)?.0,
            What::Key(_, unit) => Holds::Length(*unit).read(text).map_err(fault)?.0,
            What::Centre(_) => Holds::Length(Unit::Mm).read(text).map_err(fault)?.0,
        };
        if value > 0.0 { Ok(value) } else { Err(fault(format!("a limit must be above 0, not {text}"))) }
    }
}
