//! `picture`: what a screen or camera shows, the crystal in its mount, rings over a turn, the cut over wavelength, the phase
//! between the two histories of a pair.

use std::io::IsTerminal;
use std::path::PathBuf;

use clap::{Args as ClapArgs, ValueEnum};
use twincone::job::setup::{Needs, Setup};
use twincone::matching::{Cones, Want, cones};
use twincone::picture::{
    Axis, Backdrop, Curves, Depth, Drawing, Exposure, GlowError, Light, Optics, Phases, Sampling, Seen,
    Sensor, camera, cut_curve, front, notes, parse_axis, phase, png_size, ring_sweep, side,
};
use twincone::quantity::{Angle, Length};
use twincone::report::{Conventions, darkness};

use super::failure::Failure;
use super::options::ExperimentArgs;
use super::output::{Format, Outcome, OutputArgs};

/// Options of `picture`.
#[derive(Debug, ClapArgs)]
pub struct Args {
    /// What is drawn
    #[arg(long, value_enum, default_value = "camera")]
    view: View,
    /// Width of the camera's field, in mm on the sensor or in degrees [default: what holds all rings]
    #[arg(long, value_name = "SIZE")]
    size: Option<String>,
    /// Pixels along each side of the camera
    #[arg(long, value_name = "N", default_value = "512", value_parser = clap::value_parser!(u32).range(8..=16384))]
    pixels: u32,
    /// Bits per pixel of the PNG
    #[arg(long, value_name = "BITS", default_value = "16", value_parser = ["8", "16"])]
    depth: String,
    /// Focal length of a lens with the sensor in its focal plane [default: a screen]
    #[arg(long, value_name = "LENGTH")]
    focal: Option<Length>,
    /// Turn the camera's picture: 0 or 180
    #[arg(long, value_name = "DEG", default_value = "0", value_parser = ["0", "180"])]
    view_turn: String,
    /// Exchange left and right of the camera's picture
    #[arg(long)]
    mirror: bool,
    /// Wavelengths across the filter [default: as many as the ring's shift asks for]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..))]
    wavelengths: Option<u16>,
    /// Draw the rings over a recorded frame (PNG); --size says how wide it is
    #[arg(long, value_name = "FILE")]
    overlay: Option<PathBuf>,
    /// Where the pump is on the recorded frame, pixels from the upper left corner [default: its middle]
    #[arg(long, value_name = "X,Y", requires = "overlay")]
    pump_at: Option<String>,
    /// Range of the ring sweep: crystal.tilt or crystal.cross_tilt=FROM..TO/POINTS [default: 1 deg either way, the turn that tunes]
    #[arg(long, value_name = "KEY=RANGE", allow_hyphen_values = true)]
    axis: Option<String>,
    /// View phase: which pair of crossings, as `cones` numbers them [default: 1]
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..))]
    pair: Option<u16>,
    #[command(flatten)]
    experiment: ExperimentArgs,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum View {
    /// The far field as a screen or camera shows it
    Camera,
    /// The crystal from the side, in the plane that holds Z
    Side,
    /// The crystal's face from downstream
    Front,
    /// Rings over a range of turns
    RingSweep,
    /// Cut angle against signal wavelength
    Cut,
    /// Phase between the two histories of a pair, over wavelength and over the iris
    Phase,
}

/// The picture.
///
/// # Errors
/// What is missing, wrong or outside a data set's range.
pub fn run(args: &Args, output: &OutputArgs) -> Result<Outcome, Failure> {
    let form = match output.output.as_ref() {
        None => output.format.unwrap_or(Format::Svg),
        Some(_) => output.form_of(".png, .svg or .csv")?,
    };
    let needs = Needs { cut: args.view != View::Cut, ..Needs::ALL };
    let setup = args.experiment.setup(output, needs)?;
    output.on_threads(|| draw(args, &setup, output, form))?
}

fn draw(args: &Args, setup: &Setup, output: &OutputArgs, form: Format) -> Result<Outcome, Failure> {
    let mut warnings = warnings(setup, args.view);
    let unused = args.unused();
    warnings.extend(unused.clone());
    let drawing = match args.view {
        View::Camera => return photograph(args, setup, output, form, warnings),
        View::Side => side(setup, &rings(setup)?),
        View::Front => front(setup, &rings(setup)?),
        View::RingSweep => {
            let dark = darkness(setup, &rings(setup)?);
            ring_sweep(setup, &axis(args, setup)?, dark.as_deref())?
        }
        View::Cut => {
            let curves = Curves::of(setup)?;
            if form == Format::Csv {
                return Ok(OutputArgs::file(curves.csv().into_bytes(), warnings));
            }
            cut_curve(setup, &curves)
        }
        View::Phase => {
            setup.demand_length("picture --view phase")?;
            let phases = Phases::of(setup, args.pair.map(usize::from))?;
            let mut warnings = Conventions::of_pairs(setup).warnings;
            warnings.extend(unused);
            if form == Format::Csv {
                return Ok(OutputArgs::file(phases.csv().into_bytes(), warnings));
            }
            return as_svg(&phase(setup, &phases), form, warnings);
        }
    };
    as_svg(&drawing, form, warnings)
}

impl Args {
    /// Options that the view has no use for, as a warning.
    fn unused(&self) -> Option<String> {
        let camera = self.view == View::Camera;
        let given = [
            ("--size", self.size.is_some() && !camera),
            ("--focal", self.focal.is_some() && !camera),
            ("--view-turn", self.view_turn != "0" && !camera),
            ("--mirror", self.mirror && !camera),
            ("--wavelengths", self.wavelengths.is_some() && !camera),
            ("--overlay", self.overlay.is_some() && !camera),
            ("--axis", self.axis.is_some() && self.view != View::RingSweep),
            ("--pair", self.pair.is_some() && self.view != View::Phase),
        ];
        let names: Vec<&str> = given.iter().filter(|(_, unused)| *unused).map(|(name, _)| *name).collect();
        (!names.is_empty()).then(|| format!("not used by this view: {}", names.join(", ")))
    }
}

fn as_svg(drawing: &Drawing, form: Format, warnings: Vec<String>) -> Result<Outcome, Failure> {
    match form {
        Format::Svg => Ok(OutputArgs::file(drawing.element().into_bytes(), warnings)),
        _ => Err(Failure::usage("this view is a drawing: use --format svg or a file name that ends in .svg")),
    }
}

/// What to know before trusting the picture. Filter and waist are used here, so that they are not missed.
fn warnings(setup: &Setup, view: View) -> Vec<String> {
    let mut conventions = Conventions::of(setup);
    conventions.uses(&["pump.waist", "filter"]);
    if matches!(view, View::Side | View::Front) {
        conventions.uses(&["pump.polarization"]);
    }
    conventions.warnings
}

fn rings(setup: &Setup) -> Result<Cones, Failure> {
    Ok(cones(&setup.crystals, setup.pump(), &setup.signals(), setup.interaction, Want::Both)?)
}

fn photograph(
    args: &Args,
    setup: &Setup,
    output: &OutputArgs,
    form: Format,
    warnings: Vec<String>,
) -> Result<Outcome, Failure> {
    let found = rings(setup)?;
    let sensor = sensor(args, setup, &found)?;
    if let Some(path) = &args.overlay {
        let drawing = overlay(args, setup, &found, &sensor, path)?;
        return as_svg(&drawing, form, warnings);
    }
    let light = Light::of(setup);
    let sampling = Sampling { wavelengths: args.wavelengths.map(usize::from) };
    let exposure = Exposure::new(setup, &light, sensor, sampling)?;
    let picture = exposure.take();
    let encoding =
        |e: png::EncodingError| Failure { status: 4, message: format!("cannot write the picture: {e}") };
    let bytes = match form {
        Format::Png => {
            if output.output.is_none() && std::io::stdout().is_terminal() {
                return Err(Failure::usage(
                    "a PNG is nothing for a terminal: name a file, --output rings.png",
                ));
            }
            let depth = if args.depth == "8" { Depth::Eight } else { Depth::Sixteen };
            picture.png(depth, true).map_err(encoding)?
        }
        Format::Csv => {
            let extrapolated = found.rings.iter().any(|r| r.extrapolated);
            picture.csv(extrapolated).into_bytes()
        }
        Format::Svg => {
            let image = picture.png(Depth::Eight, false).map_err(encoding)?;
            let middle = 0.5 * f64::from(args.pixels);
            let backdrop = Backdrop { png: &image, size: (args.pixels, args.pixels), pump: (middle, middle) };
            let mut lines = notes(setup, &light, &sensor);
            lines.insert(0, "Dark is bright.".into());
            lines.extend(darkness(setup, &found));
            camera(setup, &found, &sensor, backdrop, &lines).element().into_bytes()
        }
        Format::Text | Format::Json | Format::Html => {
            return Err(Failure::usage("a picture has the formats png, svg and csv (the grid of pixels)"));
        }
    };
    Ok(OutputArgs::file(bytes, warnings))
}

fn overlay(
    args: &Args,
    setup: &Setup,
    found: &Cones,
    sensor: &Sensor,
    path: &PathBuf,
) -> Result<Drawing, Failure> {
    if args.size.is_none() {
        return Err(Failure::usage(
            "--overlay needs --size, the width of the frame in mm on the sensor or in degrees",
        ));
    }
    let shown = path.display().to_string();
    let png = std::fs::read(path).map_err(|e| Failure::file("read", &shown, &e))?;
    let size = png_size(&png).ok_or_else(|| Failure::usage(format!("{shown} is no PNG image")))?;
    let pump = match &args.pump_at {
        None => (0.5 * f64::from(size.0), 0.5 * f64::from(size.1)),
        Some(text) => {
            let numbers = text
                .split_once(',')
                .and_then(|(x, y)| Some((x.trim().parse().ok()?, y.trim().parse().ok()?)));
            numbers.ok_or_else(|| Failure::usage("--pump-at: write X,Y in pixels, for example 640,512"))?
        }
    };
    let light = Light::default();
    let mut lines = notes(setup, &light, sensor);
    lines.extend(darkness(setup, found));
    Ok(camera(setup, found, sensor, Backdrop { png: &png, size, pump }, &lines))
}

fn sensor(args: &Args, setup: &Setup, found: &Cones) -> Result<Sensor, Failure> {
    let optics = args.focal.map_or(Optics::Screen(setup.screen), Optics::Lens);
    let scale = optics.scale().si();
    if scale <= 0.0 {
        return Err(Failure::usage("the focal length must be above 0"));
    }
    let field = match &args.size {
        None => Sensor::field_for(found, optics).si(),
        Some(text) => match (text.parse::<Angle>(), text.parse::<Length>()) {
            (Ok(angle), _) if angle.degrees() < 150.0 => optics.field(angle).si(),
            (_, Ok(length)) => length.si(),
            (Ok(_), Err(_)) => return Err(Failure::usage("--size: a field of 150 deg or more is too wide")),
            (Err(_), Err(e)) => {
                return Err(Failure::usage(format!("--size: {e}, or of an angle such as 10deg")));
            }
        },
    };
    if field <= 0.0 {
        return Err(Failure::usage("--size must be above 0"));
    }
    let seen = Seen { turned: args.view_turn == "180", mirrored: args.mirror };
    Ok(Sensor { optics, field: Length::metres(field), pixels: args.pixels as usize, seen })
}

fn axis(args: &Args, setup: &Setup) -> Result<Axis, Failure> {
    match &args.axis {
        Some(text) => {
            let axis = parse_axis(text).map_err(Failure::usage)?;
            let count = setup.crystals.len();
            if axis.crystal.is_some_and(|n| n >= count) {
                let many = if count == 1 { "1 crystal".into() } else { format!("{count} crystals") };
                return Err(Failure::usage(format!("--axis {text}: the job has {many}")));
            }
            Ok(axis)
        }
        None => Ok(Axis::around(setup)),
    }
}

impl From<GlowError> for Failure {
    fn from(error: GlowError) -> Self {
        match error {
            GlowError::Material(error) => error.into(),
            GlowError::Description(message) => Self::usage(message),
        }
    }
}
