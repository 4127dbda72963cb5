//! The order sheet: what the maker of a crystal must know.

use super::facts::{Facts, deg, lean_words, nm, plain_deg, same_order};
use super::mount::which;
use super::page::{Block, Page};
use super::trouble::missing;
use crate::frame::{Direction, Orientation};
use crate::job::Setup;
use crate::matching::{ConesError, Design, Find, Pairing, Photons, Target, design, opinions};
use crate::material::Optic;
use crate::optics::Crystal;
use crate::quantity::{Angle, Length, Temperature, Wavelength};
use crate::report::angles::{fixed, rounded};

/// The sheet of every crystal of the experiment.
///
/// # Errors
/// Indices that are not to be had.
pub fn order(setup: &Setup) -> Result<Page, ConesError> {
    let facts = Facts::of(setup)?;
    let name = setup.title.as_deref().unwrap_or("pair source");
    let mut page = Page { title: format!("Order sheet: crystal for {name}"), ..Page::default() };
    let mut groups: Vec<Vec<usize>> = Vec::new();
    for (index, crystal) in setup.crystals.iter().enumerate() {
        let same = |group: &&mut Vec<usize>| same_order(&setup.crystals[group[0]], crystal);
        match groups.iter_mut().find(same) {
            Some(group) => group.push(index),
            None => groups.push(vec![index]),
        }
    }
    for group in &groups {
        if setup.crystals.len() > 1 {
            let names: Vec<String> = group.iter().map(|index| which(setup, *index)).collect();
            let pieces =
                if group.len() == 1 { "one piece".into() } else { format!("{} equal pieces", group.len()) };
            page.heading(&format!("For {}: {pieces}", names.join(" and ")));
        }
        one(&mut page, &facts, group);
    }
    if setup.crystals.len() > 1 {
        page.text(
            "Order crystals that work together from one boule and one polishing run, with the difference of their lengths \
             limited (for example to 10 um), and ask for the measured cut of each (common practice).",
        );
    }
    Ok(page)
}

/// Crystals that are the same piece.
fn one(page: &mut Page, facts: &Facts<'_>, group: &[usize]) {
    let crystal = &facts.setup.crystals[group[0]];
    let pairing = facts.pairing(crystal, signal_direction(facts, crystal));
    let mut items = vec![row2("quantity", group.len().to_string())];
    items.extend(specification(facts, crystal, pairing.as_ref()));
    page.table(&["item", "specification"], items);
    drawings(page, facts.setup, crystal);
    page.heading("What an error costs");
    error_costs(page, facts, crystal);
    if crystal.poling.is_some() {
        page.heading("How sure the period is");
        page.text(period_spread(facts, crystal));
    } else {
        page.heading("How sure the cut is");
        page.text(spread(facts, crystal));
    }
    page.heading("Size, faces and coatings");
    page.table(&["item", "value", "why"], body(facts, crystal, pairing.as_ref()));
    page.heading("Orientation mark");
    page.blocks.push(Block::List(mark(crystal)));
    page.heading("Questions for the maker");
    page.blocks.push(Block::List(questions(crystal)));
    if !crystal.material.file.note.is_empty() {
        page.heading("Good to know");
        let notes = crystal.material.file.note.iter().map(|n| format!("{} ({})", n.text, n.known)).collect();
        page.blocks.push(Block::List(notes));
    }
}

/// Where the signal goes at the working point: at the upper crossing, or on its ring straight up from the axis.
fn signal_direction(facts: &Facts<'_>, crystal: &Crystal) -> Direction {
    let watched = facts.watched(crystal);
    let found = watched.and_then(|w| {
        let emission = crate::matching::Emission::of(crystal, facts.photons).ok()?;
        w.target().direction(&emission, facts.roles(crystal)?)
    });
    found.unwrap_or_else(Direction::forward)
}

fn specification(facts: &Facts<'_>, crystal: &Crystal, pairing: Option<&Pairing>) -> Vec<Vec<String>> {
    let file = &crystal.material.file;
    let photons = facts.photons;
    let process = facts.roles(crystal).and_then(|roles| {
        let emission = crate::matching::Emission::of(crystal, photons).ok()?;
        Some(emission.process(roles).to_string())
    });
    let o = &crystal.orientation;
    let incidence = if o.tilt.si() == 0.0 && o.cross_tilt.si() == 0.0 {
        "pump at normal incidence".to_string()
    } else {
        format!(
            "used with the crystal tilted by {} (cross tilt {}) from normal incidence",
            deg(o.tilt.si(), 3),
            deg(o.cross_tilt.si(), 3)
        )
    };
    let axis =
        if file.optic == Optic::Uniaxial { "optic axis Z" } else { "dielectric axis Z (n_X < n_Y < n_Z)" };
    let mut phi =
        format!("{} deg, azimuth of the face normal from X about Z", fixed(crystal.cut.phi.degrees(), 2));
    if let Some(convention) = file.nonlinearity.as_ref().and_then(|n| n.get_ref().convention.as_ref()) {
        phi.push_str(&format!("; convention: {convention}"));
    }
    if let Some((other, text)) = crystal.material.other_phi(crystal.cut.phi) {
        phi.push_str(&format!("; in the {text}, the same cut is phi {} deg", rounded(other.degrees(), 2)));
    }
    if facts.tunes_by_phi(crystal) {
        phi.push_str("; phi decides the phase matching here: tolerance +-0.25 deg, and the measured value on the certificate");
    } else {
        phi.push_str(". In any case: phi for largest |d_eff| of the process above");
    }
    let mut rows = vec![
        row2(
            "material",
            format!(
                "{} ({}), single crystal, point group {}",
                file.name,
                file.formula,
                file.point_group.get_ref()
            ),
        ),
        row2(
            "process",
            format!(
                "spontaneous parametric down-conversion, {}{}: {} -> {} + {}, {incidence}",
                facts.setup.interaction,
                process.map_or(String::new(), |p| format!(" ({p})")),
                nm(photons.pump),
                nm(photons.signal),
                nm(photons.idler)
            ),
        ),
        row2(
            "theta",
            format!(
                "{} deg between the face normal (not the face) and the {axis}; tolerance +-0.25 deg, and the measured value on the certificate",
                fixed(crystal.cut.theta.degrees(), 2)
            ),
        ),
        row2("phi", phi),
        row2("length", format!("{}, tolerance +-0.1 mm (common practice)", crystal.length)),
    ];
    if let Some(poling) = crystal.poling {
        rows.push(row2(
            "poling period",
            format!(
                "{} um along the face normal at {}",
                rounded(poling.um(), 4),
                crystal.reference_temperature
            ),
        ));
    }
    rows.push(row2("temperature in use", crystal.temperature.to_string()));
    let tensor = crystal.material.tensor.as_ref();
    if let Some((p, t)) = pairing.zip(tensor)
        && let Ok(emission) = crate::matching::Emission::of(crystal, photons)
    {
        rows.push(row2(
            "|d_eff| expected",
            format!(
                "{} pm/V at the working point{}",
                fixed(p.d_eff(&emission, t), 3),
                if crystal.poling.is_some() {
                    " (of the bulk: a first-order grating leaves 2/pi of it)"
                } else {
                    ""
                }
            ),
        ));
    }
    rows
}

fn row2(item: &str, value: String) -> Vec<String> {
    vec![item.into(), value]
}

/// The crystal as it is ordered: upright, not turned round.
fn drawings(page: &mut Page, setup: &Setup, crystal: &Crystal) {
    let upright = Crystal {
        orientation: Orientation::default(),
        reversal: crate::frame::Reversal::None,
        ..crystal.clone()
    };
    let alone = Setup { crystals: vec![upright], ..setup.clone() };
    let none = crate::matching::Cones::default();
    page.blocks.push(Block::Figure(
        crate::picture::side(&alone, &none),
        "twincone picture --view side --job job.toml".into(),
    ));
    page.blocks.push(Block::Figure(
        crate::picture::front(&alone, &none),
        "twincone picture --view front --job job.toml".into(),
    ));
    page.text(
        "The drawings show the crystal as cut and before tilting: from the side the face normal, the axis Z and the angle theta \
         between them, in the plane that holds both; from the exit face the axes X, Y and Z as they lie across the beam.",
    );
}

/// A crystal or a pump that is not as planned.
struct Fault {
    words: String,
    crystal: Crystal,
    photons: Photons,
    /// Whether the mount or the oven may mend it.
    mended: bool,
}

/// What each error does to the angle that is watched; where there is no ring, to what is missing for one.
fn error_costs(page: &mut Page, facts: &Facts<'_>, crystal: &Crystal) {
    let Some(watched) = facts.watched(crystal) else {
        page.text(
            "There is no ring at this setting, so each line says what the best direction misses, or the ring that begins.",
        );
        let rows = faults(facts, crystal).into_iter().map(|fault| {
            let seen = missing(facts, &fault.crystal, fault.photons);
            vec![fault.words, seen.unwrap_or_else(|_| "beyond the range of the refractive indices".into())]
        });
        let rows = rows.collect();
        page.table(&["error", "what comes of it"], rows);
        return;
    };
    let heats = crystal.poling.is_some() && crystal.set().has_thermo_optics();
    page.text(format!(
        "Computed for {} nominally {}, on a screen at {}. The last column is the turn of the mount (outside){} that brings the \
         angle back.",
        watched.name(),
        plain_deg(watched.angle, 3),
        facts.setup.screen,
        if heats { ", or the temperature of the crystal," } else { "" }
    ));
    let rows = faults(facts, crystal).into_iter().map(|fault| {
        let angle = watched.of(&facts.measure(&fault.crystal, fault.photons));
        let turn = fault.mended.then(|| facts.repair(&fault.crystal, watched)).flatten();
        let heat = (fault.mended && heats).then(|| facts.heat(&fault.crystal, watched)).flatten();
        let mends = [turn.map(|turn| deg(turn, 2)), heat.map(|t| format!("{} degC", fixed(t, 1)))];
        let mends: Vec<String> = mends.into_iter().flatten().collect();
        cost(facts, fault.words, watched.angle, angle, &mends.join(" or "))
    });
    let rows = rows.collect();
    let last = if heats { "turn or temperature that repairs it" } else { "turn that repairs it" };
    page.table(&["error", "angle becomes", "shift on the screen", last], rows);
}

fn faults(facts: &Facts<'_>, crystal: &Crystal) -> Vec<Fault> {
    let photons = facts.photons;
    let mut all = Vec::new();
    let mut with = |words: String, change: &dyn Fn(&mut Crystal)| {
        let mut changed = crystal.clone();
        change(&mut changed);
        all.push(Fault { words, crystal: changed, photons, mended: true });
    };
    for off in [0.1, -0.1, 0.25, -0.25, 0.5, -0.5] {
        with(format!("theta {off:+} deg"), &|c| {
            c.cut.theta = Angle::radians(c.cut.theta.si() + f64::to_radians(off))
        });
    }
    for off in [0.5, -0.5] {
        let change = |c: &mut Crystal| c.cut.phi = Angle::radians(c.cut.phi.si() + f64::to_radians(off));
        let mut changed = crystal.clone();
        change(&mut changed);
        let rate = relative_rate(facts, crystal, &changed)
            .map_or(String::new(), |r| format!(" (pair rate x {})", fixed(r, 3)));
        with(format!("phi {off:+} deg{rate}"), &change);
    }
    if let Some(period) = crystal.poling {
        for off in [0.05, -0.05] {
            with(format!("period {off:+} um"), &|c| {
                c.poling = Some(Length::metres(period.si() + off * 1e-6))
            });
        }
        if crystal.set().has_thermo_optics() {
            for off in [1.0, -1.0, 5.0, -5.0] {
                with(format!("temperature {off:+} K (your oven, not the maker's)"), &|c| {
                    c.temperature = Temperature::celsius(c.temperature.degc() + off);
                });
            }
        }
    }
    for off in [1.0, -1.0] {
        let pump = Wavelength::from_nm(photons.pump.nm() + off);
        let signal = facts.setup.signals.for_pump(pump)[0];
        let Some(photons) = Photons::new(pump, signal) else { continue };
        let words = format!("pump {off:+} nm (your laser, not the maker's)");
        all.push(Fault { words, crystal: crystal.clone(), photons, mended: false });
    }
    all
}

/// |d_eff|^2 of a changed crystal over that of the planned one.
fn relative_rate(facts: &Facts<'_>, planned: &Crystal, changed: &Crystal) -> Option<f64> {
    let tensor = planned.material.tensor.as_ref()?;
    let direction = signal_direction(facts, planned);
    let d_eff = |crystal: &Crystal| {
        let emission = crate::matching::Emission::of(crystal, facts.photons).ok()?;
        Some(facts.pairing(crystal, direction)?.d_eff(&emission, tensor))
    };
    Some((d_eff(changed)? / d_eff(planned)?).powi(2)).filter(|r| r.is_finite())
}

fn cost(facts: &Facts<'_>, error: String, nominal: f64, angle: Option<f64>, repair: &str) -> Vec<String> {
    let shift = |a: f64| {
        let off = facts.setup.screen.mm() * (a.tan() - nominal.tan());
        super::facts::mm(off, 1)
    };
    vec![
        error,
        angle.map_or("no ring or no crossing".into(), |a| plain_deg(a, 3)),
        angle.map_or("-".into(), shift),
        if repair.is_empty() { "-".into() } else { repair.into() },
    ]
}

/// The period that each data set would give for the angle that is watched; without a ring, for pairs along the pump.
fn period_spread(facts: &Facts<'_>, crystal: &Crystal) -> String {
    let now = crystal.poling.map_or(f64::NAN, |p| p.um());
    let ask = |crystal: &Crystal, target: Target| {
        let question = Design {
            crystal: crystal.clone(),
            photons: facts.photons,
            fixed_signal: facts.setup.signals.fixed(),
            interaction: facts.setup.interaction,
            target,
            find: Find::Poling,
            phi_given: true,
        };
        let all = design(&question).unwrap_or_default();
        let away = |p: &f64| (p - now).abs();
        let periods = all.iter().filter_map(|s| s.crystal.poling.map(|p| p.um()));
        periods.min_by(|a, b| away(a).total_cmp(&away(b)))
    };
    let watched = facts.watched(crystal).filter(|w| ask(crystal, w.target()).is_some());
    let target = watched.map_or(Target::Collinear, super::facts::Watched::target);
    let what =
        watched.map_or("pairs along the pump".into(), |w| format!("{} {}", w.name(), plain_deg(w.angle, 3)));
    let words = |period: Option<f64>| period.map_or("none".into(), |p| format!("{} um", fixed(p, 3)));
    let others = opinions(crystal, &facts.photons, |other| ask(other, target));
    let told: Vec<String> = others
        .iter()
        .filter_map(|o| Some(format!("{} {}", o.dataset, words(*o.answer.as_ref().ok()?))))
        .collect();
    let others = if told.is_empty() {
        "no other set covers these wavelengths, so nothing says how sure it is".into()
    } else {
        format!("others: {}", told.join(", "))
    };
    format!(
        "For {what} at {} the published refractive indices give these periods: {} {}; {others}. Where they differ by more than the \
         oven mends (see the lines of period and temperature above), order several periods side by side on one piece.",
        crystal.temperature,
        crystal.set().id,
        words(ask(crystal, target))
    )
}

/// The cut that each data set would give for the same geometry at normal incidence.
fn spread(facts: &Facts<'_>, crystal: &Crystal) -> String {
    let upright = Crystal { orientation: Orientation::default(), ..crystal.clone() };
    let Some(watched) = facts.watched(&upright).or_else(|| facts.watched(crystal)) else {
        return "There is no ring at the working point, so the data sets are not compared.".into();
    };
    let find = if facts.tunes_by_phi(&upright) { Find::Phi } else { Find::Theta };
    let sought = |crystal: &Crystal| match find {
        Find::Phi => crystal.cut.phi.si(),
        _ => crystal.cut.theta.si(),
    };
    let ask = |crystal: &Crystal| {
        let question = Design {
            crystal: crystal.clone(),
            photons: facts.photons,
            fixed_signal: facts.setup.signals.fixed(),
            interaction: facts.setup.interaction,
            target: watched.target(),
            find,
            phi_given: true,
        };
        let all = design(&question).unwrap_or_default();
        let wanted = sought(crystal);
        let away = |t: &f64| (t - wanted).abs();
        all.iter().map(|s| sought(&s.crystal)).min_by(|a, b| away(a).total_cmp(&away(b)))
    };
    let own = ask(&upright);
    let others = opinions(&upright, &facts.photons, ask);
    let told: Vec<String> = others
        .iter()
        .filter_map(|o| {
            let angle = o.answer.as_ref().ok()?;
            Some(angle.map_or(format!("{} none", o.dataset), |t| {
                format!("{} {} deg", o.dataset, fixed(t.to_degrees(), 3))
            }))
        })
        .collect();
    let tilted =
        own.filter(|t| (t - sought(crystal)).abs() > f64::to_radians(5e-3)).map_or(String::new(), |_| {
            let o = &crystal.orientation;
            format!(
                " The cut ordered above, {} deg, is another one: it is used at tilt {}, cross tilt {}.",
                fixed(sought(crystal).to_degrees(), 2),
                deg(o.tilt.si(), 3),
                deg(o.cross_tilt.si(), 3)
            )
        });
    let own = own.map_or("none".into(), |t| format!("{} deg", fixed(t.to_degrees(), 3)));
    let others = if told.is_empty() {
        "no other set covers these wavelengths, so nothing says how sure it is".into()
    } else {
        format!("others: {}", told.join(", "))
    };
    format!(
        "For {} {} at normal incidence the published refractive indices give these cuts ({}): {} {own}; {others}. Order a cut \
         from which tilting reaches the whole range.{tilted}",
        watched.name(),
        plain_deg(watched.angle, 3),
        if find == Find::Phi { "phi" } else { "theta" },
        crystal.set().id
    )
}

fn body(facts: &Facts<'_>, crystal: &Crystal, pairing: Option<&Pairing>) -> Vec<Vec<String>> {
    let mut rows = vec![aperture(facts, crystal, pairing)];
    let row = |item: &str, value: &str, why: &str| vec![item.into(), value.into(), why.into()];
    rows.push(row("clear aperture", "central 80 % of the faces", "common practice"));
    rows.push(row("flatness", "lambda/8 at 633 nm", "common practice; the wavelength must be stated"));
    let index = pairing.map(|p| p.signal.k.0.norm() / facts.photons.signal.wavenumber());
    let steer = index.map(|n| {
        let wedge = 20f64.to_radians() / 3600.0;
        format!(
            "common practice; such a wedge steers the photons by {} mm on the screen",
            fixed((n - 1.0) * wedge * facts.setup.screen.mm(), 2)
        )
    });
    rows.push(vec![
        "parallelism".into(),
        "20 arcsec".into(),
        steer.unwrap_or_else(|| "common practice".into()),
    ]);
    rows.push(row("perpendicularity", "5 arcmin", "common practice"));
    rows.push(row(
        "surface quality",
        "scratch-dig 10-5 where the pump is strong, else 20-10",
        "common practice",
    ));
    rows.push(coating(facts, crystal, pairing));
    rows.push(row(
        "damage",
        "state your pump's power, pulse length and beam size",
        "the maker warrants against these",
    ));
    rows
}

/// Beam, walk-off, tilt and cone within the clear aperture.
fn aperture(facts: &Facts<'_>, crystal: &Crystal, pairing: Option<&Pairing>) -> Vec<String> {
    let length = crystal.length.mm();
    let walkoff = pairing.map_or(0.0, |p| length * p.pump.walkoff().tan());
    let inside = facts.cones.rings.iter().filter_map(|r| r.ring.as_ref().ok()).map(|r| r.internal_half_angle);
    let cone = 2.0 * length * inside.fold(0.0, f64::max).tan();
    match facts.waist() {
        Some(waist) => {
            let beam = 6.0 * waist.mm();
            let tilt = crystal.orientation.tilt.si().cos();
            let needed = (beam / tilt + walkoff + cone) / 0.8;
            let size = (needed * 2.0).ceil() / 2.0;
            vec![
                "width x height".into(),
                format!(
                    "at least {s} mm x {s} mm, +-0.1 mm; usual stock is 5 mm x 5 mm",
                    s = rounded(size, 1)
                ),
                format!(
                    "three beam diameters {} mm, pump walk-off {} mm, cone {} mm, within 80 %",
                    fixed(beam, 2),
                    fixed(walkoff, 2),
                    fixed(cone, 2)
                ),
            ]
        }
        None => vec![
            "width x height".into(),
            "5 mm x 5 mm, +-0.1 mm (give the pump's waist to have it computed)".into(),
            format!(
                "pump walk-off {} mm, cone {} mm, and three beam diameters within 80 %",
                fixed(walkoff, 2),
                fixed(cone, 2)
            ),
        ],
    }
}

/// R = ((n - 1)/(n + 1))^2 at each wavelength: Fresnel, normal incidence.
fn coating(facts: &Facts<'_>, crystal: &Crystal, pairing: Option<&Pairing>) -> Vec<String> {
    let photons = facts.photons;
    let mut wavelengths = vec![nm(photons.pump), nm(photons.signal)];
    if !photons.degenerate() {
        wavelengths.push(nm(photons.idler));
    }
    let largest = facts
        .cones
        .rings
        .iter()
        .filter_map(|r| r.ring.as_ref().ok())
        .fold(0.0, |m: f64, ring| m.max(ring.axis.polar_deg() + ring.largest.to_degrees()));
    let incidence = (largest + crystal.orientation.tilt.degrees().abs()).ceil();
    let angles = if incidence == 0.0 {
        "normal incidence".to_string()
    } else {
        format!("angles of incidence 0 to {incidence} deg")
    };
    let loss = |wave: Option<f64>, w: Wavelength| {
        wave.map(|k| {
            let n = k / w.wavenumber();
            format!("{} % at {}", fixed(100.0 * ((n - 1.0) / (n + 1.0)).powi(2), 1), nm(w))
        })
    };
    let bare: Vec<String> = [
        loss(pairing.map(|p| p.pump.k.0.norm()), photons.pump),
        loss(pairing.map(|p| p.signal.k.0.norm()), photons.signal),
    ]
    .into_iter()
    .flatten()
    .collect();
    vec![
        "coating".into(),
        format!(
            "antireflection on both faces for {}, {angles}; ask for the curve",
            wavelengths.join(" and ")
        ),
        format!("each bare face reflects {}", bare.join(", ")),
    ]
}

fn mark(crystal: &Crystal) -> Vec<String> {
    let upright = Crystal { orientation: Orientation::default(), ..crystal.clone() };
    let leans = lean_words(&upright);
    let by_x = leans.iter().any(|words| words.contains("end of X"));
    let mut lines = vec![
        "Mark on a side face, parallel to the plane of Z and the face normal: a line along the projection of Z, and an arrow from the input to the output face.".into(),
        format!(
            "Say which face is the input, and to which side the end of {} that points to the output leans{}.",
            if by_x { "X" } else { "Z" },
            if by_x { ": mark it too, for the line of Z and the arrow fit two mountings that are not alike" } else { "" }
        ),
    ];
    lines.extend(leans.iter().map(|words| format!("As this job mounts it at roll 0, {words}.")));
    lines
}

fn questions(crystal: &Crystal) -> Vec<String> {
    let mut all: Vec<String> = [
        "Which theta and phi were measured, how, and with which error?",
        "From where is theta counted: from the face normal? Which choice of axes does phi belong to?",
        "Which side face carries the mark, what does it show, and which way does Z lean?",
        "Which refractive indices did you compute the angle with?",
        "Is there a coating, on which faces, and what does it reflect at each wavelength?",
        "How are the crystals packed and cleaned, and what must not touch them?",
    ]
    .map(String::from)
    .into();
    if crystal.poling.is_some() {
        all.push("At which temperature is the poling period stated, and what is its duty cycle?".into());
    }
    if crystal.length < Length::metres(6e-4) {
        all.push(
            "Does a crystal this thin need a carrier, and does it change the coating or the wedge?".into(),
        );
    }
    all
}
