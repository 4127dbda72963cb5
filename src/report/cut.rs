//! Report `cut`: which cut to order.

use crate::frame::Dielectric;
use crate::job::Setup;
use crate::matching::{
    ConesError, CutSolution, Design, Find, Opinion, Plane, Process, Shortfall, Status, Target, design,
    unmatched,
};
use crate::material::Optic;
use crate::material::tensor::is_centrosymmetric;
use crate::optics::Crystal;

use super::angles::{fixed, grid, or_dash, prose, rounded};
use super::spread;
use super::table::{Cell, Column, Rows, Table, column};

/// Columns, without the two that end every table.
pub const COLUMNS: [Column; 21] = [
    column("material", "", "crystal id"),
    column("dataset", "", "data set id"),
    column("process", "", "pump -> signal + idler"),
    column("pump_nm", "nm", "vacuum wavelength of the pump"),
    column("signal_nm", "nm", "vacuum wavelength of the signal"),
    column("idler_nm", "nm", "vacuum wavelength of the idler"),
    column("temperature_degc", "degC", "of the crystal"),
    column("theta_deg", "deg", "face normal to Z"),
    column("phi_deg", "deg", "azimuth of the face normal from X"),
    column("plane", "", "principal plane of a biaxial crystal that holds the normal"),
    column("poling_um", "um", "poling period at the reference temperature"),
    column("length_mm", "mm", "crystal length that the acceptances hold for"),
    column("d_eff_pm_per_v", "pm/V", "|d_eff| with unit electric fields at the target directions"),
    column("pump_walkoff_deg", "deg", "wave vector to ray, inside"),
    column("signal_walkoff_deg", "deg", "wave vector to ray, inside"),
    column("idler_walkoff_deg", "deg", "wave vector to ray, inside"),
    column("pair_delay_fs_per_mm", "fs/mm", "group delay of signal minus idler"),
    column("pump_angle_fwhm_deg", "deg", "acceptance: crystal turned about v, outside angle"),
    column("pump_wavelength_fwhm_nm", "nm", "acceptance: frequency ratio and directions fixed"),
    column("signal_fwhm_nm", "nm", "acceptance: pump and signal direction fixed"),
    column("temperature_fwhm_k", "K", "acceptance: all else fixed"),
];

/// One material's answer.
#[derive(Debug, Clone)]
pub struct Attempt {
    /// The crystal that was asked about.
    pub crystal: Crystal,
    /// Solutions, or the status that says why there is none and a sentence about it.
    pub outcome: Result<Vec<CutSolution>, (Status, String)>,
    /// Processes that were asked for and have no solution.
    pub unmatched: Vec<Process>,
}

impl Attempt {
    /// Solves. That there is no solution is an answer.
    ///
    /// # Errors
    /// A wavelength or temperature outside the data set's range; an interaction that does not fit the crystal.
    pub fn of(question: &Design) -> Result<Self, ConesError> {
        let crystal = question.crystal.clone();
        let none = |status: Status, why: &str| Self {
            crystal: crystal.clone(),
            outcome: Err((status, why.into())),
            unmatched: Vec::new(),
        };
        if is_centrosymmetric(crystal.material.file.point_group.get_ref()) {
            let why = "the crystal has a centre of symmetry and gives no pairs";
            return Ok(none(Status::NoNonlinearity, why));
        }
        let found = design(question)?;
        let unmatched = unmatched(question, &found).unwrap_or_default();
        let outcome =
            if found.is_empty() { Err((Status::NoPhaseMatching, String::new())) } else { Ok(found) };
        Ok(Self { crystal, outcome, unmatched })
    }
}

/// Rows of all attempts as a table.
#[must_use]
pub fn table(setup: &Setup, attempts: &[Attempt], by_rank: bool) -> Table {
    let mut table = Table::new("cut", &COLUMNS);
    rows(setup, attempts, by_rank, &mut table);
    table
}

/// Rows of all attempts: solutions first, as they come or by falling |d_eff|, then those that have none.
pub fn rows(setup: &Setup, attempts: &[Attempt], by_rank: bool, out: &mut impl Rows) {
    let solved = attempts.iter().filter_map(|a| a.outcome.as_ref().ok()).flatten();
    for s in if by_rank { ranked(attempts) } else { solved.collect() } {
        out.push(&row(s), s.extrapolated, s.status);
    }
    for attempt in attempts {
        let status = attempt.outcome.as_ref().map_or_else(|(status, _)| *status, |_| Status::NoPhaseMatching);
        for process in &attempt.unmatched {
            out.push(&unsolved(setup, &attempt.crystal, Some(*process)), false, status);
        }
        if attempt.outcome.is_err() && attempt.unmatched.is_empty() {
            out.push(&unsolved(setup, &attempt.crystal, None), false, status);
        }
    }
}

fn row(s: &CutSolution) -> Vec<Cell> {
    let walkoff = |pick: fn(&crate::matching::Pairing) -> f64| {
        s.pairing.as_ref().map(pick).map_or(Cell::Empty, |a| Cell::degrees(a.to_degrees()))
    };
    let per_mm = s.pairing.as_ref().map(|p| p.delay() * 1e12);
    vec![
        s.crystal.material.id.as_str().into(),
        s.crystal.set().id.as_str().into(),
        s.process.to_string().into(),
        s.photons.pump.nm().into(),
        s.photons.signal.nm().into(),
        s.photons.idler.nm().into(),
        s.crystal.temperature.degc().into(),
        s.crystal.cut.theta.degrees().into(),
        s.crystal.cut.phi.degrees().into(),
        s.plane.name().into(),
        s.crystal.poling.map(|p| p.um()).into(),
        s.crystal.length.mm().into(),
        s.d_eff.into(),
        walkoff(|p| p.pump.walkoff()),
        walkoff(|p| p.signal.walkoff()),
        walkoff(|p| p.idler.walkoff()),
        per_mm.into(),
        s.acceptance.pump_angle.map(f64::to_degrees).into(),
        s.acceptance.pump_wavelength.map(|w| w * 1e9).into(),
        s.acceptance.signal.map(|w| w * 1e9).into(),
        s.acceptance.temperature.into(),
    ]
}

fn unsolved(setup: &Setup, crystal: &Crystal, process: Option<Process>) -> Vec<Cell> {
    let photons = setup.photons();
    let mut cells = vec![
        crystal.material.id.as_str().into(),
        crystal.set().id.as_str().into(),
        process.map_or(Cell::Empty, |p| p.to_string().into()),
        photons.pump.nm().into(),
        photons.signal.nm().into(),
        photons.idler.nm().into(),
        crystal.temperature.degc().into(),
    ];
    cells.resize(COLUMNS.len(), Cell::Empty);
    cells[11] = crystal.length.mm().into();
    cells
}

/// The wanted emission in words.
#[must_use]
pub fn target_words(target: Target) -> String {
    let degrees = |a: f64| format!("{} deg", rounded(a.to_degrees(), 4));
    match target {
        Target::Collinear => "pairs along the pump".into(),
        Target::HalfAngle(a) => format!("a cone of half angle {} outside", degrees(a)),
        Target::Crossing(a) => format!("cones that cross {} from the pump outside", degrees(a)),
        Target::Separation(a) => format!("crossings {} apart outside", degrees(a)),
        Target::Beamlike => "a cone shrunk to a beam".into(),
        Target::Touching => "cones that touch".into(),
    }
}

/// The first lines of every text: the question in words.
#[must_use]
pub fn heading(setup: &Setup, target: Target) -> String {
    let photons = setup.photons();
    format!(
        "{} -> {} + {}, {}, {}",
        nm(photons.pump.nm()),
        nm(photons.signal.nm()),
        nm(photons.idler.nm()),
        setup.interaction,
        target_words(target)
    )
}

fn nm(value: f64) -> String {
    format!("{} nm", rounded(value, 3))
}

/// For people, one material: each solution with what an order needs.
#[must_use]
pub fn text(setup: &Setup, target: Target, find: Find, attempts: &[Attempt]) -> String {
    let mut out = heading(setup, target);
    out.push('\n');
    for attempt in attempts {
        match &attempt.outcome {
            Ok(solutions) => {
                solutions.iter().for_each(|s| out.push_str(&prose(&solution_text(s, find))));
                for process in &attempt.unmatched {
                    out.push_str(&format!(
                        "
{}: no solution for {process}
",
                        attempt.crystal.material.id
                    ));
                }
            }
            Err((_, why)) => out.push_str(&prose(&format!("\n{}: {why}\n", attempt.crystal.material.id))),
        }
    }
    out
}

fn solution_text(s: &CutSolution, find: Find) -> String {
    let crystal = &s.crystal;
    let place = s.plane.name().map_or(String::new(), |plane| format!(" ({plane} plane)"));
    let found = match find {
        Find::Theta | Find::Phi => String::new(),
        Find::Poling => format!(", period {} um", or_dash(crystal.poling.map(|p| p.um()), 4)),
        Find::Temperature => format!(", temperature {} degC", fixed(crystal.temperature.degc(), 2)),
        Find::Pump => format!(", pump {} nm", fixed(s.photons.pump.nm(), 3)),
    };
    let mut out = format!(
        "\n{}:{}  {}  theta {} deg, phi {} deg{place}{found}\n",
        crystal.material.id,
        crystal.set().id,
        s.process,
        fixed(crystal.cut.theta.degrees(), 3),
        rounded(crystal.cut.phi.degrees(), 3),
    );
    let mut detail = |label: &str, value: String| out.push_str(&format!("  {label:<22}{value}\n"));
    let poled =
        if crystal.poling.is_some() { " (of the bulk: a first-order grating leaves 2/pi of it)" } else { "" };
    detail("|d_eff|", s.d_eff.map_or_else(|| "not known".into(), |d| format!("{} pm/V{poled}", fixed(d, 3))));
    if let (Some(p), Optic::Biaxial) = (&s.pairing, crystal.material.file.optic) {
        // fast and slow change places with the plane: the field says which light is meant
        let placement = crystal.placement();
        let fields = [&p.pump, &p.signal, &p.idler].map(|w| along(placement.to_dielectric(w.field)));
        detail("electric fields", format!("pump {}, signal {}, idler {}", fields[0], fields[1], fields[2]));
    }
    if let Some(p) = &s.pairing {
        let walkoff = [&p.pump, &p.signal, &p.idler].map(|w| fixed(w.walkoff().to_degrees(), 2));
        detail(
            "walk-off inside",
            format!("pump {}, signal {}, idler {} deg", walkoff[0], walkoff[1], walkoff[2]),
        );
        detail("pair delay", format!("{} fs/mm (signal minus idler)", fixed(p.delay() * 1e12, 1)));
    }
    let a = &s.acceptance;
    detail(
        &format!("FWHM at {} mm", rounded(crystal.length.mm(), 3)),
        format!(
            "crystal turned {} deg (outside); pump {} nm with both photons following; signal {} nm; temperature {}",
            or_dash(a.pump_angle.map(f64::to_degrees), 3),
            or_dash(a.pump_wavelength.map(|w| w * 1e9), 3),
            or_dash(a.signal.map(|w| w * 1e9), 2),
            a.temperature.map_or_else(|| "not known".into(), |t| format!("{} K", fixed(t, 1)))
        ),
    );
    if let Some(sign) = s.grating_sign {
        let sense = if sign > 0.0 { "+" } else { "-" };
        detail(
            "grating",
            format!(
                "its vector enters the mismatch with sign {sense}; period stated at {}",
                crystal.reference_temperature
            ),
        );
    }
    if s.status != Status::Ok {
        detail("status", s.status.to_string());
    }
    if let Some(convention) =
        crystal.material.file.nonlinearity.as_ref().and_then(|n| n.get_ref().convention.as_ref())
    {
        detail("phi convention", convention.clone());
    }
    if let Some((phi, text)) = crystal.material.other_phi(crystal.cut.phi) {
        detail("", format!("{text}: there this cut is phi {} deg", rounded(phi.degrees(), 3)));
    }
    out
}

/// A field's direction by the dielectric axis it lies along, or its components.
fn along(field: Dielectric) -> String {
    let axes = ["X", "Y", "Z"];
    match field.0.iter().position(|component| component.abs() > 0.9999) {
        Some(axis) => format!("along {}", axes[axis]),
        None => {
            let [x, y, z] = [field.0.x, field.0.y, field.0.z].map(|c| rounded(c, 2));
            format!("({x}, {y}, {z})")
        }
    }
}

/// For people, many materials: what can do it, best first, and in a word why the others cannot.
#[must_use]
pub fn ranking(setup: &Setup, target: Target, attempts: &[Attempt]) -> String {
    let solved: Vec<&CutSolution> =
        ranked(attempts).into_iter().filter(|s| s.status != Status::NoNonlinearity).collect();
    let rows: Vec<Vec<String>> = solved
        .iter()
        .map(|s| {
            vec![
                format!("{}:{}", s.crystal.material.id, s.crystal.set().id),
                s.process.to_string(),
                fixed(s.crystal.cut.theta.degrees(), 3),
                rounded(s.crystal.cut.phi.degrees(), 3),
                s.plane.name().unwrap_or("-").into(),
                or_dash(s.d_eff, 3),
                or_dash(s.pairing.as_ref().map(|p| p.pump.walkoff().to_degrees()), 2),
                or_dash(s.pairing.as_ref().map(|p| p.delay() * 1e12), 1),
                s.status.to_string(),
            ]
        })
        .collect();
    let header = [
        "crystal",
        "process",
        "theta",
        "phi",
        "plane",
        "d_eff pm/V",
        "pump walk-off",
        "delay fs/mm",
        "status",
    ];
    let mut out = format!("{}\n\n{}", heading(setup, target), grid(&header, &rows));
    out.push('\n');
    let dark = ranked(attempts).into_iter().filter(|s| s.status == Status::NoNonlinearity);
    let named: Vec<String> = dark
        .map(|s| {
            format!(
                "{}{}",
                s.crystal.material.id,
                s.plane.name().map_or(String::new(), |p| format!(" ({p})"))
            )
        })
        .collect();
    if !named.is_empty() {
        let line = format!("phase matched but forbidden by symmetry: {}\n", named.join(", "));
        out.push_str(&prose(&line));
    }
    for status in
        [Status::NoPhaseMatching, Status::NoNonlinearity, Status::OutOfRange, Status::Opaque, Status::Invalid]
    {
        let fails = |a: &&Attempt| match &a.outcome {
            Ok(_) => false,
            Err((why, _)) => *why == status,
        };
        let ids: Vec<&str> = attempts.iter().filter(fails).map(|a| a.crystal.material.id.as_str()).collect();
        if !ids.is_empty() {
            let line = format!("{}: {}\n", status.to_string().replace('_', " "), ids.join(", "));
            out.push_str(&prose(&line));
        }
    }
    out
}

/// Solutions of all attempts, largest |d_eff| first; those that symmetry forbids last.
fn ranked(attempts: &[Attempt]) -> Vec<&CutSolution> {
    let mut all: Vec<&CutSolution> =
        attempts.iter().filter_map(|a| a.outcome.as_ref().ok()).flatten().collect();
    all.sort_by(|a, b| b.d_eff.unwrap_or(0.0).total_cmp(&a.d_eff.unwrap_or(0.0)));
    all.sort_by_key(|s| s.status == Status::NoNonlinearity);
    all
}

/// Lines about the other data sets: one for each solution that symmetry allows.
#[must_use]
pub fn spread_lines(find: Find, own: &[CutSolution], opinions: &[Opinion<Vec<CutSolution>>]) -> Vec<String> {
    let allowed = own.iter().filter(|s| s.status != Status::NoNonlinearity);
    // mirror images of one another have the same spread
    let upright = allowed.filter(|s| s.crystal.cut.theta.degrees() <= 90.0 || own.len() == 1);
    upright
        .map(|this| {
            let number = |all: &[CutSolution]| {
                // of several solutions, the one of the same process and plane that is nearest
                let alike = all.iter().filter(|s| s.process == this.process && s.plane == this.plane);
                let away = |v: &f64| (v - sought(this, find)).abs();
                alike.map(|s| sought(s, find)).min_by(|a, b| away(a).total_cmp(&away(b)))
            };
            let what = sought_words(this, find);
            spread::line(&what, Some(sought(this, find)), &spread::numbers(opinions, |all| number(all)), 3)
        })
        .collect()
}

fn sought_words(s: &CutSolution, find: Find) -> String {
    let place = s.plane.name().map_or(String::new(), |plane| format!(" in the {plane} plane"));
    match find {
        Find::Theta if s.plane == Plane::Xy => "phi in the XY plane in deg".into(),
        Find::Theta => format!("theta{place} in deg"),
        Find::Phi => "phi in deg".into(),
        Find::Poling => format!("the period of {} in um", s.process),
        Find::Temperature => "the temperature in degC".into(),
        Find::Pump => "the pump in nm".into(),
    }
}

fn sought(s: &CutSolution, find: Find) -> f64 {
    match find {
        Find::Theta if s.plane == Plane::Xy => s.crystal.cut.phi.degrees(),
        Find::Theta => s.crystal.cut.theta.degrees(),
        Find::Phi => s.crystal.cut.phi.degrees(),
        Find::Poling => s.crystal.poling.map_or(f64::NAN, |p| p.um()),
        Find::Temperature => s.crystal.temperature.degc(),
        Find::Pump => s.photons.pump.nm(),
    }
}

/// Why there is no solution, and what would match.
#[must_use]
pub fn no_solution(
    setup: &Setup,
    find: Find,
    target: Target,
    shortfall: Option<Shortfall>,
    alternatives: &[String],
) -> String {
    let what = match find {
        Find::Theta | Find::Phi => "cut",
        Find::Poling => "poling period from 0.5 um up",
        Find::Temperature => "temperature from -50 degC to 300 degC",
        Find::Pump => "pump from half to twice this one",
    };
    let mut text = format!("no {what} gives {} in {}", target_words(target), setup.interaction);
    match (shortfall, target) {
        (Some(s), Target::Collinear) => text.push_str(&format!(
            "; the nearest collinear mismatch is {} rad/mm at theta {} deg, phi {} deg",
            fixed(s.mismatch * 1e-3, 2),
            fixed(s.cut.theta.degrees(), 1),
            rounded(s.cut.phi.degrees(), 1)
        )),
        (Some(s), _) => text.push_str(&format!(
            "; pairs along the pump are {} at theta {} deg, phi {} deg, and the rings grow from there",
            if s.mismatch < 5e4 { "matched" } else { "nearest to matching" },
            fixed(s.cut.theta.degrees(), 1),
            rounded(s.cut.phi.degrees(), 1)
        )),
        (None, _) => {}
    }
    if alternatives.is_empty() {
        text.push_str("; no other type matches either");
    } else {
        text.push_str(&format!("; {} would match", alternatives.join(", ")));
    }
    text
}
