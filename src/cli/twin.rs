//! `twin`: a photon goes this way; where is its partner?

use clap::Args as ClapArgs;
use twincone::frame::Direction;
use twincone::job::setup::{Needs, Setup, Signals};
use twincone::matching::{Emission, Photons, opinions, twins};
use twincone::quantity::{Angle, Length, Wavelength};
use twincone::report::twin::{spread_line, table, text};
use twincone::report::{Answer, Conventions, resolved_job};

use super::failure::Failure;
use super::options::ExperimentArgs;
use super::output::{Outcome, OutputArgs};

/// Options of `twin`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// Horizontal and vertical angle, such as 0deg,3deg; or a place on the screen, such as 0mm,52mm
    #[arg(long, value_name = "H,V", allow_hyphen_values = true)]
    direction: String,
    /// Wavelength of the photon [default: the signal's]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    wavelength: Option<String>,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

/// One row per process that can have made the photon.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let mut setup = args.experiment.setup(output, Needs::ALL)?;
    let pump = setup.pump();
    let wavelength: Wavelength = match &args.wavelength {
        Some(text) => text.parse().map_err(|e| Failure::usage(format!("--wavelength: {e}")))?,
        None => setup.only_photons("twin").map_err(Failure::usage)?.signal,
    };
    if wavelength.si() <= 0.0 {
        return Err(Failure::usage(format!("--wavelength: a wavelength must be positive, not {wavelength}")));
    }
    let photons = Photons::new(pump, wavelength).ok_or_else(|| too_short(wavelength, pump))?;
    setup.signals = Signals::At(vec![wavelength]);
    let crystal = setup.only_crystal("twin").map_err(Failure::usage)?.clone();
    let direction = direction(&args.direction, &setup)?;
    let emission = Emission::of(&crystal, photons)?;
    let twins = twins(&crystal, &emission, setup.interaction, direction).map_err(Failure::usage)?;
    let others = opinions(&setup.crystals[0], &photons, |other| {
        let there = Emission::of(other, photons).ok()?;
        Some(there.pairing(twins.first()?.roles, direction)?.phase_matching_factor(there.length))
    });
    let mut conventions = Conventions::of(&setup);
    conventions.warn_of_dim_phi(&setup);
    conventions.lines.insert(0, spread_line(&twins, emission.length, &others));
    let answer = Answer {
        command: "twin",
        tables: vec![table(&setup, &emission, direction, &twins)],
        text: text(&setup, &emission, direction, &twins),
        conventions,
        job: resolved_job(&setup),
        solved: true,
    };
    output.outcome(&answer, None)
}

fn too_short(wavelength: Wavelength, pump: Wavelength) -> Failure {
    Failure::usage(format!("--wavelength: {wavelength} is not longer than the pump, {pump}"))
}

/// Two angles, or two lengths on the screen.
fn direction(text: &str, setup: &Setup) -> Result<Direction, Failure> {
    let bad = |why: &str| {
        Failure::usage(format!(
            "--direction {text}: {why}; write two angles, 0deg,3deg, or two lengths on the screen, 0mm,52mm"
        ))
    };
    let (h, v) = text.split_once(',').ok_or_else(|| bad("there is no comma"))?;
    if let (Ok(x), Ok(y)) = (h.parse::<Length>(), v.parse::<Length>()) {
        return Ok(Direction::from_screen(x, y, setup.screen));
    }
    let angle = |t: &str| t.parse::<Angle>().map_err(|e| bad(&e.to_string()));
    let (h, v) = (angle(h)?, angle(v)?);
    if h.degrees().abs() >= 90.0 || v.degrees().abs() >= 90.0 {
        return Err(bad("the angles must lie within -90 deg to 90 deg"));
    }
    Ok(Direction::from_angles(h, v))
}
