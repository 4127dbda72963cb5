//! The caution that opens the bench sheet.

use super::facts::{Facts, mm, nm};
use super::mount::reflection;
use super::page::{Block, Page};
use super::safety::{class, limits};
use crate::pairs::Line;
use crate::report::angles::rounded;

/// Class of the pump, where reflections go, and the usual cautions.
pub(super) fn safety(page: &mut Page, facts: &Facts<'_>) {
    let pump = facts.photons.pump;
    page.heading("Laser safety");
    let standard = "IEC 60825-1:2014, for a continuous collimated beam all of which enters the standard's aperture; limits \
                    from memory, to be checked in the standard";
    let class_text = match (facts.power(), limits(pump)) {
        (Some(power), Some(_)) => format!(
            "A pump of {} mW at {} is class {} ({standard}).",
            rounded(power.mw(), 4),
            nm(pump),
            class(pump, power.si()).map_or("-", super::safety::Class::name)
        ),
        (None, Some(limits)) => {
            let mut told: Vec<String> = Vec::new();
            for (class, limit) in limits {
                if class != super::safety::Class::Two || (400.0..=700.0).contains(&pump.nm()) {
                    told.push(format!("class {} to {} mW", class.name(), three_digits(limit * 1e3)));
                }
            }
            format!("No power is given. At {}: {}, class 4 above ({standard}).", nm(pump), told.join(", "))
        }
        (_, None) => format!(
            "{} is outside the range whose limits are known here (315 nm to 4000 nm): ask the laser safety officer.",
            nm(pump)
        ),
    };
    let pulsed = if matches!(facts.setup.bench.line, Line::Pulse(_)) {
        "The pump is pulsed, so that the class of a continuous beam does not hold: peaks may be worse than the mean power \
         tells. The class on the laser's own label counts, and the laser safety officer decides. "
    } else {
        ""
    };
    let sight = match pump.nm() {
        n if n < 380.0 => "The pump is invisible.",
        n if n < 430.0 => "The pump looks far dimmer than it is: its brightness is no guide.",
        n if n > 700.0 => "The pump is invisible or nearly so.",
        _ => "",
    };
    page.blocks.push(Block::Warning(format!(
        "{pulsed}{class_text} {sight} Local rules and the local laser safety officer decide, not this sheet."
    )));
    let mut lines = Vec::new();
    for (index, crystal) in facts.setup.crystals.iter().enumerate() {
        let (x, y) = reflection(crystal, facts.setup.screen);
        let face = if facts.setup.crystals.len() > 1 {
            format!("crystal {}", index + 1)
        } else {
            "the crystal".into()
        };
        // as `cones` has it: within half a millimetre
        lines.push(if x.hypot(y) <= 0.5 {
            format!(
                "The entrance face of {face} reflects pump light straight back into the laser; it leaves the beam when you tilt."
            )
        } else {
            format!(
                "The entrance face of {face} sends pump light back: {} and {} at {} towards the laser. Block it there; it moves when you tilt.",
                mm(x, 1),
                mm(y, 1),
                facts.setup.screen
            )
        });
    }
    lines
        .push("Dump the transmitted pump behind the crystal. Filters, plates and irises reflect too.".into());
    lines.push("Enclose the beam; keep it below eye level; take off watches and rings; align at the least power that shows it.".into());
    lines.push(format!(
        "Goggles rated for {} do not stop an alignment laser at {}: two wavelengths, two ratings.",
        nm(pump),
        nm(facts.photons.signal)
    ));
    lines.push(
        "The dark widens the pupil: work in dim light of a colour that filters and detectors do not pass."
            .into(),
    );
    page.blocks.push(Block::List(lines));
}

/// A power to three digits, which is more than the limits are known to.
fn three_digits(value: f64) -> String {
    let places = (2.0 - value.log10().floor()).max(0.0);
    rounded(value, places as usize)
}
