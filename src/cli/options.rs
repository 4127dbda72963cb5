//! The options that all commands share: most stand for a key of the job.

use std::io::Read;
use std::path::{Path, PathBuf};

use clap::Args;
use twincone::job::resolve;
use twincone::job::setup::{Needs, Setup};
use twincone::job::{Document, template};
use twincone::material::Catalogue;

use super::failure::Failure;
use super::output::{OutputArgs, write_whole};

/// The experiment.
#[derive(Debug, Clone, Default, Args)]
#[command(next_help_heading = "Experiment")]
pub struct ExperimentArgs {
    /// Job file, or - for standard input; the options below override single keys of it
    #[arg(short, long, value_name = "FILE")]
    job: Option<PathBuf>,
    /// Override any key of the job, e.g. --set crystal.2.tilt=0.3deg
    #[arg(long, value_name = "KEY=VALUE")]
    set: Vec<String>,
    /// Write the job that these options amount to
    #[arg(long, value_name = "FILE")]
    write_job: Option<PathBuf>,
    /// Crystal and data set: bbo, bbo:kato-1986, or a material file ./mine.toml
    #[arg(short, long, value_name = "ID[:DATASET]")]
    material: Vec<String>,
    /// Cut: angle between face normal and Z
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    theta: Option<String>,
    /// Cut: azimuth of the face normal from X [default: that of largest d_eff]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    phi: Option<String>,
    /// Solve the cut first: crossing=3deg, half-angle=3deg, separation=6deg, collinear or beamlike
    #[arg(long = "cut", value_name = "TARGET", conflicts_with = "theta")]
    cut_target: Option<String>,
    /// Crystal length along the face normal [default: 1 mm]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    length: Option<String>,
    /// Crystal temperature [default: the data set's own]
    #[arg(long, value_name = "TEMPERATURE", allow_hyphen_values = true)]
    temperature: Option<String>,
    /// Turn that increases theta [default: 0 deg]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    tilt: Option<String>,
    /// Turn that increases phi [default: 0 deg]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    cross_tilt: Option<String>,
    /// Turn about the face normal; 90 deg lets Z lean up [default: 0 deg]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    roll: Option<String>,
    /// Poling period along the face normal [default: none]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    poling: Option<String>,
    /// Pump wavelength in vacuum ("405nm air" converts)
    #[arg(short, long, value_name = "LENGTH", allow_hyphen_values = true)]
    pump: Option<String>,
    /// Pump waist, 1/e^2 radius in the crystal
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    waist: Option<String>,
    /// Pump power
    #[arg(long, value_name = "POWER", allow_hyphen_values = true)]
    power: Option<String>,
    /// Pump linewidth, FWHM
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    linewidth: Option<String>,
    /// Pump pulse duration, FWHM
    #[arg(long, value_name = "TIME", allow_hyphen_values = true, conflicts_with = "linewidth")]
    pulse: Option<String>,
    /// Angle of the pump's field from +x towards +y [default: matched to the crystals]
    #[arg(long, value_name = "ANGLE", allow_hyphen_values = true)]
    pump_polarization: Option<String>,
    /// Interaction: 0, I or II [default: II; I with a half-angle target]
    #[arg(long = "type", value_name = "TYPE")]
    kind: Option<String>,
    /// Polarizations one by one: "e -> o + e", or e:o+e which needs no quotes
    #[arg(long, value_name = "PROCESS", allow_hyphen_values = true, conflicts_with = "kind")]
    process: Option<String>,
    /// Signal wavelength, repeatable [default: degenerate]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    signal: Vec<String>,
    /// Idler wavelength, instead of the signal's
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true, conflicts_with = "signal")]
    idler: Option<String>,
    /// Screen distance [default: 1 m]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    distance: Option<String>,
    /// Iris: full angle seen from the crystal, or diameter at the screen
    #[arg(long, value_name = "SIZE", allow_hyphen_values = true)]
    iris: Option<String>,
    /// Fibre: 1/e^2 mode radius at the crystal
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true, conflicts_with = "iris")]
    fibre: Option<String>,
    /// Filter width, FWHM
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    filter_width: Option<String>,
    /// Filter centre [default: the photon's wavelength]
    #[arg(long, value_name = "LENGTH", allow_hyphen_values = true)]
    filter_centre: Option<String>,
    /// Filter shape: gaussian or rectangular
    #[arg(long, value_name = "SHAPE")]
    filter_shape: Option<String>,
    /// Use data sets outside their range, and mark the result
    #[arg(long)]
    extrapolate: bool,
}

impl ExperimentArgs {
    /// (option, key, value) of the options that set one key each.
    fn overrides(&self) -> [(&'static str, &'static str, &Option<String>); 23] {
        [
            ("--theta", "crystal.cut.theta", &self.theta),
            ("--phi", "crystal.cut.phi", &self.phi),
            ("--length", "crystal.length", &self.length),
            ("--temperature", "crystal.temperature", &self.temperature),
            ("--tilt", "crystal.tilt", &self.tilt),
            ("--cross-tilt", "crystal.cross_tilt", &self.cross_tilt),
            ("--roll", "crystal.roll", &self.roll),
            ("--poling", "crystal.poling", &self.poling),
            ("--pump", "pump.wavelength", &self.pump),
            ("--waist", "pump.waist", &self.waist),
            ("--power", "pump.power", &self.power),
            ("--linewidth", "pump.linewidth", &self.linewidth),
            ("--pulse", "pump.pulse", &self.pulse),
            ("--pump-polarization", "pump.polarization.angle", &self.pump_polarization),
            ("--type", "emission.type", &self.kind),
            ("--process", "emission.process", &self.process),
            ("--idler", "emission.idler", &self.idler),
            ("--distance", "screen.distance", &self.distance),
            ("--iris", "collection.*.iris", &self.iris),
            ("--fibre", "collection.*.fibre", &self.fibre),
            ("--filter-width", "filter.*.width", &self.filter_width),
            ("--filter-centre", "filter.*.centre", &self.filter_centre),
            ("--filter-shape", "filter.*.shape", &self.filter_shape),
        ]
    }

    /// Job file and options as one document.
    ///
    /// # Errors
    /// A job file that cannot be read, or options that do not fit together.
    pub fn document(&self) -> Result<Document, Failure> {
        self.document_of(None)
    }

    /// As [`Self::document`], where the job file may have been named without --job.
    ///
    /// # Errors
    /// A job file that cannot be read, or options that do not fit together.
    pub fn document_of(&self, job: Option<&Path>) -> Result<Document, Failure> {
        let mut document = match job.or(self.job.as_deref()) {
            Some(path) => Document::from_file(&name_of(path), &read_text(path)?),
            None => Document::default(),
        };
        if let [material] = self.material.as_slice() {
            document.set("--material", "crystal.material", material);
        }
        for (option, key, value) in self.overrides() {
            if let Some(value) = value {
                let key = if value == "matched" { key.trim_end_matches(".angle") } else { key };
                document.set(option, key, value);
            }
        }
        if !self.signal.is_empty() {
            document.set_list("--signal", "emission.signal", &self.signal);
        }
        if let Some(target) = &self.cut_target {
            set_target(&mut document, target)?;
        }
        if self.extrapolate {
            document.set_raw("--extrapolate", "crystal.*.extrapolate", "true");
        }
        for assignment in &self.set {
            let (key, value) = assignment.split_once('=').ok_or_else(|| {
                Failure::usage(format!(
                    "--set {assignment}: write KEY=VALUE, for example --set crystal.tilt=0.5deg"
                ))
            })?;
            document.set_raw(&format!("--set {assignment}"), key.trim(), value.trim());
        }
        attach_curves(&mut document, job.or(self.job.as_deref()))?;
        Ok(document)
    }

    /// Whether a job file was named.
    pub fn has_job(&self) -> bool {
        self.job.is_some()
    }

    /// Whether a target was typed as --cut.
    pub fn names_target(&self) -> bool {
        self.cut_target.is_some()
    }

    /// Whether theta was typed, rather than taken from a job file.
    pub fn names_theta(&self) -> bool {
        self.theta.is_some()
    }

    /// One experiment per material: those named by --material, or all there are, or the job's own.
    ///
    /// # Errors
    /// What is missing or wrong in files and options; a job with several crystals, of which one is to be named.
    pub fn setups(&self, output: &OutputArgs, needs: Needs, all: bool) -> Result<Vec<Setup>, Failure> {
        let document = self.document()?;
        let mut catalogue = catalogue(output, &document)?;
        if all && !self.material.is_empty() {
            return Err(Failure::usage("--material and --all-materials exclude each other; leave one out"));
        }
        let listed: Vec<String> =
            if all { catalogue.ids().map(String::from).collect() } else { self.material.clone() };
        if listed.len() < 2 {
            let setup = resolve(&document, &catalogue, needs)?;
            if setup.crystals.len() > 1 {
                return Err(Failure::usage(
                    "the job has several crystals; this command looks at one: describe that one alone",
                ));
            }
            return Ok(vec![setup]);
        }
        if self.write_job.is_some() {
            return Err(Failure::usage("--write-job writes one crystal's job; name one --material"));
        }
        let mut setups = Vec::with_capacity(listed.len());
        for material in listed {
            add_file(&mut catalogue, &material)?;
            let mut document = document.clone();
            document.set("--material", "crystal.material", &material);
            setups.push(resolve(&document, &catalogue, needs)?);
        }
        Ok(setups)
    }

    /// The experiment.
    ///
    /// # Errors
    /// What is missing or wrong in files and options.
    pub fn setup(&self, output: &OutputArgs, needs: Needs) -> Result<Setup, Failure> {
        if self.material.len() > 1 {
            return Err(Failure::usage(
                "--material is given more than once; this command looks at one crystal",
            ));
        }
        let document = self.document()?;
        let setup = resolve(&document, &catalogue(output, &document)?, needs)?;
        self.write_job(&setup)?;
        Ok(setup)
    }

    /// Writes the job file where --write-job asks for one.
    ///
    /// # Errors
    /// A file that cannot be written.
    pub fn write_job(&self, setup: &Setup) -> Result<(), Failure> {
        let Some(path) = &self.write_job else { return Ok(()) };
        write_whole(path, template(setup).as_bytes())
            .map_err(|e| Failure::file("write", &path.display().to_string(), &e))
    }
}

/// Reads the files with curves that a document names, from the folder of its job file.
///
/// # Errors
/// A file that cannot be read.
pub fn attach_curves(document: &mut Document, job: Option<&Path>) -> Result<(), Failure> {
    let folder = job.and_then(Path::parent).unwrap_or(Path::new(""));
    let names: Vec<String> = document.describe()?.curves().into_iter().map(String::from).collect();
    for name in names {
        if document.attachment(&name).is_none() {
            document.attach(&name, &read_text(&folder.join(&name))?);
        }
    }
    Ok(())
}

/// `crossing=3deg` or `collinear`.
fn set_target(document: &mut Document, target: &str) -> Result<(), Failure> {
    match target.split_once('=') {
        Some((kind @ ("crossing" | "half-angle" | "separation"), angle)) => {
            document.set("--cut", &format!("crystal.cut.{kind}"), angle.trim());
            Ok(())
        }
        None if matches!(target, "collinear" | "beamlike") => {
            document.set_raw("--cut", &format!("crystal.cut.{target}"), "true");
            Ok(())
        }
        _ => Err(Failure::usage(format!(
            "--cut {target}: write crossing=3deg, half-angle=3deg, separation=6deg, collinear or beamlike"
        ))),
    }
}

/// The compiled-in materials, those of --materials, and the files that the document names.
///
/// # Errors
/// A file that cannot be read or is no material.
pub fn catalogue(output: &OutputArgs, document: &Document) -> Result<Catalogue, Failure> {
    let mut catalogue = Catalogue::default();
    if let Some(dir) = &output.materials {
        let shown = dir.display().to_string();
        let entries = std::fs::read_dir(dir).map_err(|e| Failure::file("read", &shown, &e))?;
        let mut files: Vec<PathBuf> = entries.filter_map(|e| Some(e.ok()?.path())).collect();
        files.retain(|f| f.extension().is_some_and(|e| e == "toml"));
        files.sort();
        for file in files {
            catalogue.add(&file.display().to_string(), &read_text(&file)?)?;
        }
    }
    for material in document.describe()?.materials() {
        add_file(&mut catalogue, material)?;
    }
    Ok(catalogue)
}

/// Adds the material file that `material` names by its path, if it does.
///
/// # Errors
/// A file that cannot be read or is no material.
pub fn add_file(catalogue: &mut Catalogue, material: &str) -> Result<(), Failure> {
    let path = material.split_once(".toml").map(|(stem, _)| format!("{stem}.toml"));
    let Some(path) = path else { return Ok(()) };
    catalogue.add_or_replace(&path, &read_text(Path::new(&path))?)?;
    Ok(())
}

/// A file's text, or standard input for `-`.
///
/// # Errors
/// A file that cannot be read.
pub fn read_text(path: &Path) -> Result<String, Failure> {
    let shown = name_of(path);
    if path.as_os_str() == "-" {
        let mut text = String::new();
        std::io::stdin().read_to_string(&mut text).map_err(|e| Failure::file("read", &shown, &e))?;
        return Ok(text);
    }
    std::fs::read_to_string(path).map_err(|e| Failure::file("read", &shown, &e))
}

pub fn name_of(path: &std::path::Path) -> String {
    if path.as_os_str() == "-" { "standard input".into() } else { path.display().to_string() }
}
