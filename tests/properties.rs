//! What holds for every crystal: conservation laws, symmetries, limits and round trips, on random crystals.
//!
//! Crystals are random in indices, dispersion, cut and pose; half of them are from the catalogue. A case that finds
//! nothing to look at proves nothing, so every property counts the cases that did ([`every`]). Seeds are fixed.

use std::cell::Cell;
use std::f64::consts::{FRAC_PI_2, PI, TAU};
use std::fmt::Debug;
use std::sync::Arc;

use nalgebra::{Matrix3, Rotation3, Vector2, Vector3};
use proptest::prelude::*;
use proptest::test_runner::{Config, RngAlgorithm, TestRng, TestRunner};
use twincone::frame::{Cut, Direction, Lab, Mount, Orientation, Reversal, Tangential};
use twincone::matching::*;
use twincone::material::{Catalogue, Material, Optic, Principal, Reach};
use twincone::optics::{Crystal, Medium, Sheet, along_direction};
use twincone::quantity::{Angle, Length, SPEED_OF_LIGHT, Wavelength};

// ---------------------------------------------------------------- running

/// Whether a case had anything to show.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Case {
    Shown,
    Void,
}

type Verdict = Result<Case, TestCaseError>;

/// Runs a property on `cases` random values, always the same ones; `least` of them must have had something to show.
fn every<T: Debug>(
    cases: u32,
    least: u32,
    values: &impl Strategy<Value = T>,
    property: impl Fn(T) -> Verdict,
) {
    let config = Config { cases, failure_persistence: None, ..Config::default() };
    let rng = TestRng::deterministic_rng(RngAlgorithm::ChaCha);
    let shown = Cell::new(0);
    let run = TestRunner::new_with_rng(config, rng).run(values, |value| {
        if property(value)? == Case::Shown {
            shown.set(shown.get() + 1);
        }
        Ok(())
    });
    if let Err(why) = run {
        panic!("{why}");
    }
    assert!(shown.get() >= least, "only {} of {cases} cases had anything to show", shown.get());
}

/// Fails the case unless `difference` is at most `limit` (NaN fails).
fn within(difference: f64, limit: f64, what: &str) -> Result<(), TestCaseError> {
    prop_assert!(difference <= limit, "{what}: off by {difference:e}, allowed {limit:e}");
    Ok(())
}

// --------------------------------------------------------------- crystals

/// Indices of a crystal that does not exist: n^2 = c + s/(l^2 - pole) - infrared l^2 on each axis, n given at 0.81 um.
#[derive(Debug, Clone, Copy)]
struct Recipe {
    optic: Optic,
    /// n_o or n_X.
    index: f64,
    /// n_e - n_o, of either sign, or n_Z - n_X.
    birefringence: f64,
    /// (n_Y - n_X)/(n_Z - n_X).
    middle: f64,
    strength: f64,
    pole: f64,
    infrared: f64,
    /// Relative difference of the strength between the outermost axes.
    spread: f64,
}

impl Recipe {
    fn axis(&self, name: &str, share: f64) -> String {
        const UM2: f64 = 0.81 * 0.81;
        let Self { pole, infrared, .. } = *self;
        let n = self.index + self.birefringence * share;
        let strength = self.strength * (1.0 + self.spread * share);
        let constant = n * n - strength / (UM2 - pole) + infrared * UM2;
        format!(
            "{name} = {{ constant = {constant}, resonances = [{{ strength = {strength}, pole_um2 = {pole} }}], \
             powers = [{{ coefficient = -{infrared}, exponent = 2 }}] }}"
        )
    }

    /// As a crystal of its own kind.
    fn material(&self) -> Arc<Material> {
        match self.optic {
            Optic::Uniaxial => made("uniaxial", &[self.axis("o", 0.0), self.axis("e", 1.0)]),
            Optic::Biaxial => {
                made("biaxial", &[self.axis("x", 0.0), self.axis("y", self.middle), self.axis("z", 1.0)])
            }
        }
    }

    /// A uniaxial crystal described as a biaxial one with n_X = n_Y.
    fn as_biaxial(&self) -> Arc<Material> {
        made("biaxial", &[self.axis("x", 0.0), self.axis("y", 0.0), self.axis("z", 1.0)])
    }
}

/// A material from the text of a file.
fn made(optic: &str, axes: &[String]) -> Arc<Material> {
    let text = format!(
        r#"
        id = "random"
        name = "random"
        formula = "none"
        point_group = "{}"
        optic = "{optic}"
        default_dataset = "random"
        [[dataset]]
        id = "random"
        citation = "none"
        known = "from memory"
        range = {{ from = "300 nm", to = "3000 nm" }}
        medium = "not stated"
        [dataset.form]
        kind = "resonances and powers"
        {}
        "#,
        if optic == "uniaxial" { "3m" } else { "mm2" },
        axes.join("\n")
    );
    let mut catalogue = Catalogue::default();
    Arc::new(catalogue.add("random.toml", &text).unwrap_or_else(|e| panic!("{e}")).clone())
}

/// Crystals whose dispersion is that of oxide crystals and whose birefringence can make up for it.
fn recipes(optic: Optic) -> impl Strategy<Value = Recipe> {
    let sign = match optic {
        Optic::Uniaxial => prop_oneof![Just(-1.0), Just(1.0)].boxed(),
        Optic::Biaxial => Just(1.0).boxed(),
    };
    let indices = (1.55..1.95, sign, 0.10..0.18, 0.15..0.85);
    let dispersion = (0.011..0.02, 0.010..0.018, 0.005..0.015, 0.0..0.2);
    (indices, dispersion).prop_map(
        move |((index, sign, size, middle), (strength, pole, infrared, spread))| Recipe {
            optic,
            index,
            birefringence: sign * size,
            middle,
            strength,
            pole,
            infrared,
            spread,
        },
    )
}

#[derive(Debug, Clone, Copy)]
enum Substance {
    Made(Recipe),
    Listed(&'static str),
}

/// Compiled-in crystals and pumps (nm) for which they match degenerate pairs of type I or II.
const LISTED: [(Optic, &str, f64, f64); 8] = [
    (Optic::Uniaxial, "bbo", 360.0, 530.0),
    (Optic::Uniaxial, "kdp", 490.0, 550.0),
    (Optic::Uniaxial, "clbo", 420.0, 500.0),
    (Optic::Uniaxial, "liio3", 420.0, 550.0),
    (Optic::Biaxial, "lbo", 500.0, 560.0),
    (Optic::Biaxial, "bibo", 400.0, 520.0),
    (Optic::Biaxial, "ktp", 540.0, 700.0),
    (Optic::Biaxial, "kta", 580.0, 700.0),
];

/// A substance and a pump wavelength in nm.
fn pumped(optic: Optic) -> impl Strategy<Value = (Substance, f64)> {
    let listed: Vec<_> = LISTED.into_iter().filter(|(kind, ..)| *kind == optic).collect();
    let listed = (prop::sample::select(listed), 0.0..1.0)
        .prop_map(|((_, id, from, to), at)| (Substance::Listed(id), from + (to - from) * at));
    prop_oneof![(recipes(optic).prop_map(Substance::Made), 380.0..450.0), listed]
}

/// An experiment before the crystal's theta is known: that is chosen so that there is a ring to look at.
#[derive(Debug, Clone)]
struct Setup {
    substance: Substance,
    pump_nm: f64,
    /// Of the pump's energy that the signal has.
    share: f64,
    interaction: Interaction,
    phi_deg: f64,
    orientation: Orientation,
    /// Rough half angle of the ring, outside.
    half_angle_deg: f64,
    /// Which of several cuts is taken.
    pick: prop::sample::Index,
}

fn orientations() -> impl Strategy<Value = Orientation> {
    let turn = || (-3.0..3.0).prop_map(Angle::from_degrees);
    (turn(), turn(), (-180.0..180.0).prop_map(Angle::from_degrees), turn(), turn()).prop_map(
        |(tilt, cross_tilt, roll, about_x, about_y)| Orientation { tilt, cross_tilt, roll, about_x, about_y },
    )
}

fn setups_of(optic: Optic, interactions: &'static [Interaction]) -> impl Strategy<Value = Setup> {
    let share = prop_oneof![Just(0.5), 0.485..0.515];
    let rest = (prop::sample::select(interactions), 0.0..360.0, orientations(), 1.5..9.0);
    (pumped(optic), share, rest, any::<prop::sample::Index>()).prop_map(
        |((substance, pump_nm), share, (interaction, phi_deg, orientation, half_angle_deg), pick)| Setup {
            substance,
            pump_nm,
            share,
            interaction,
            phi_deg,
            orientation,
            half_angle_deg,
            pick,
        },
    )
}

const BOTH: &[Interaction] = &[Interaction::One, Interaction::Two];
const CROSSED: &[Interaction] = &[Interaction::Two];

fn setups(interactions: &'static [Interaction]) -> impl Strategy<Value = Setup> {
    prop_oneof![setups_of(Optic::Uniaxial, interactions), setups_of(Optic::Biaxial, interactions)]
}

impl Setup {
    fn upright(self) -> Self {
        Self { orientation: Orientation::default(), ..self }
    }

    fn crystal(&self) -> Crystal {
        let material = match self.substance {
            Substance::Made(recipe) => recipe.material(),
            Substance::Listed(id) => Arc::new(Catalogue::default().get(id).expect("a compiled-in crystal")),
        };
        let crystal = Crystal::new(material, None).expect("a default data set");
        // type II needs longer signals than some data sets cover
        let crystal = Crystal { reach: Reach::Extrapolate, ..crystal };
        Crystal { orientation: self.orientation, ..crystal.with_cut(0.0, self.phi_deg) }
    }

    fn photons(&self) -> Photons {
        let pump = Wavelength::from_nm(self.pump_nm);
        Photons::new(pump, Wavelength::from_nm(self.pump_nm / self.share)).expect("longer than the pump")
    }

    /// The source with theta such that pairs along the pump lie inside a ring of about the wanted size. Where the
    /// crystal's own phi has no such theta: in the XZ plane, which holds the optic axes, or the XY plane.
    fn source(&self) -> Option<Source> {
        let (crystal, photons) = (self.crystal(), self.photons());
        let triplet = Triplet::new(&crystal, &photons).expect("indices");
        let emission = Emission::new(&crystal, photons, &triplet);
        let roles = emission.roles(self.interaction).expect("roles")[0];
        let depth = self.depth();
        let phi = crystal.cut.phi;
        let planes: [&dyn Fn(f64) -> Cut; 3] = [
            &|x| Cut { theta: Angle::radians(x), phi },
            &|x| Cut { theta: Angle::radians(x), phi: Angle::default() },
            &|x| Cut { theta: Angle::radians(FRAC_PI_2), phi: Angle::radians(x) },
        ];
        let cuts = planes.iter().find_map(|cut| {
            let mut excess = |x: f64| {
                let crystal = Crystal { cut: cut(x), ..crystal.clone() };
                let mismatch = Emission::new(&crystal, photons, &triplet).mismatch(roles)?;
                mismatch.at(mismatch.tangential(Direction::forward())).map(|at| at.value + depth)
            };
            let found = roots(&mut excess, Scan { from: 0.0, to: PI, intervals: 90 });
            (!found.is_empty()).then(|| found.iter().map(|root| cut(root.x)).collect::<Vec<_>>())
        })?;
        let cut = *self.pick.get(&cuts);
        Some(Source { crystal: Crystal { cut, ..crystal }, photons, interaction: self.interaction, roles })
    }
}

/// Poled biaxial crystals cut near an optic axis.
#[derive(Debug, Clone)]
struct Poled {
    setup: Setup,
    /// Which of the eight assignments of polarizations is used.
    roles: usize,
    /// Between the face normal and the optic axis.
    off_deg: f64,
}

fn poled() -> impl Strategy<Value = Poled> {
    (setups_of(Optic::Biaxial, &[Interaction::Any]), 0..8usize, 0.0..10.0)
        .prop_map(|(setup, roles, off_deg)| Poled { setup, roles, off_deg })
}

impl Poled {
    /// The source with the period such that Delta_k < 0 for pairs along the pump, which lie inside a ring of about the
    /// wanted size; `None` where no period does that.
    fn source(&self) -> Option<Source> {
        let Self { setup, roles, off_deg } = self;
        let (crystal, photons) = (setup.crystal(), setup.photons());
        let triplet = Triplet::new(&crystal, &photons).expect("indices");
        let [x, y, z] = triplet.signal.axes.map(|index| index.n.powi(-2));
        // tan^2 V = (1/n_X^2 - 1/n_Y^2)/(1/n_Y^2 - 1/n_Z^2), V from Z towards X
        let v_deg = ((x - y) / (y - z)).sqrt().atan().to_degrees();
        let (sin, cos) = setup.phi_deg.to_radians().sin_cos();
        let crystal = crystal.with_cut(v_deg + off_deg * cos, off_deg * sin / v_deg.to_radians().sin());
        let emission = Emission::new(&crystal, photons, &triplet);
        let roles = emission.roles(Interaction::Any).expect("roles")[*roles];
        let bare = emission.mismatch(roles)?;
        let dispersion = bare.at(bare.tangential(Direction::forward()))?.value;
        let poling = Some(Length::metres(TAU / (dispersion + setup.depth()).abs()));
        let crystal = Crystal { poling, ..crystal };
        let source = Source { crystal, photons, interaction: Interaction::Any, roles };
        // not where the grating has the other sign, which is settled at normal incidence
        let mismatch = source.emission().mismatch(roles)?;
        let along_pump = mismatch.at(mismatch.tangential(Direction::forward()))?;
        (along_pump.value < 0.0).then_some(source)
    }
}

impl Setup {
    /// How far Delta_k is below zero in the middle of a ring of the wanted size, rad/m.
    fn depth(&self) -> f64 {
        let photons = self.photons();
        let (ks, ki) = (photons.signal.wavenumber(), photons.idler.wavenumber());
        let q = ks * self.half_angle_deg.to_radians().sin();
        // Delta_k = Delta_0 + (q^2/2)(1/k_s + 1/k_i) with an index of about 1.7
        0.5 * q * q * (1.0 / ks + 1.0 / ki) / 1.7
    }
}

/// A crystal that emits pairs.
#[derive(Debug, Clone)]
struct Source {
    crystal: Crystal,
    photons: Photons,
    interaction: Interaction,
    roles: Roles,
}

impl Source {
    fn emission(&self) -> Emission {
        Emission::of(&self.crystal, self.photons).expect("indices")
    }

    fn with(&self, change: impl FnOnce(&mut Crystal)) -> Self {
        let mut changed = self.clone();
        change(&mut changed.crystal);
        changed
    }

    fn traced(&self, roles: Roles) -> Option<(Mismatch, Vec<Ring>)> {
        let emission = self.emission();
        let mismatch = emission.mismatch(roles)?;
        let found = rings(&mismatch, emission.length).ok()?;
        Some((mismatch, found))
    }

    /// Rings of the signal.
    fn rings(&self) -> Vec<Ring> {
        self.traced(self.roles).map_or_else(Vec::new, |(_, rings)| rings)
    }

    /// As [`Self::traced`], by what crossings need of the rings.
    fn curves(&self, roles: Roles) -> Option<(Mismatch, Vec<Curve>)> {
        let mismatch = self.emission().mismatch(roles)?;
        let found = curves(&mismatch).ok()?;
        Some((mismatch, found))
    }

    /// Crossings of the signal's rings in the process and in the one with the photons exchanged.
    fn crossings(&self) -> Vec<Crossing> {
        let (Some((mismatch, first)), Some((other, _))) =
            (self.curves(self.roles), self.curves(self.roles.exchanged()))
        else {
            return Vec::new();
        };
        let met = first.iter().flat_map(|curve| meet(Traced { mismatch: &mismatch, curve }, &other));
        met.filter(|(_, how)| *how == Meeting::Cross).map(|(crossing, _)| crossing).collect()
    }

    fn pattern(&self) -> Pattern {
        let twist = self.interaction == Interaction::Two;
        Pattern {
            rings: self.rings().iter().map(|ring| (ring.axis, ring.half_angle)).collect(),
            crossings: if twist {
                self.crossings().iter().map(|crossing| crossing.direction).collect()
            } else {
                Vec::new()
            },
        }
    }

    fn cones(&self) -> Cones {
        let crystals = std::slice::from_ref(&self.crystal);
        cones(crystals, self.photons.pump, &[self.photons.signal], self.interaction, Want::Both)
            .expect("cones")
    }
}

/// Where the light goes.
#[derive(Debug, Clone)]
struct Pattern {
    rings: Vec<(Direction, f64)>,
    crossings: Vec<Direction>,
}

impl Pattern {
    fn is_empty(&self) -> bool {
        self.rings.is_empty()
    }

    /// Every direction d replaced by `turn` d.
    fn turned(&self, turn: &Matrix3<f64>) -> Self {
        let apply = |d: Direction| Direction::new(Lab(turn * d.lab().0));
        Self {
            rings: self.rings.iter().map(|(axis, half)| (apply(*axis), *half)).collect(),
            crossings: self.crossings.iter().map(|d| apply(*d)).collect(),
        }
    }

    /// Fails unless both have the same rings and crossings to `limit` degrees, in any order.
    fn same_as(&self, other: &Self, limit: f64) -> Result<(), TestCaseError> {
        prop_assert_eq!(self.rings.len(), other.rings.len(), "number of rings");
        for (axis, half) in &self.rings {
            let off = |(a, h): &(Direction, f64)| axis.angle_to(*a).max((half - h).abs()).to_degrees();
            within(least(other.rings.iter().map(off)), limit, "axis or half angle")?;
        }
        prop_assert_eq!(self.crossings.len(), other.crossings.len(), "number of crossings");
        for d in &self.crossings {
            within(least(other.crossings.iter().map(|o| d.angle_to(*o).to_degrees())), limit, "crossing")?;
        }
        Ok(())
    }
}

/// Whether the face normal lies in the XY plane, where phi tunes and theta does not.
fn in_xy_plane(crystal: &Crystal) -> bool {
    (crystal.cut.theta.degrees() - 90.0).abs() < 1e-9
}

fn least(values: impl Iterator<Item = f64>) -> f64 {
    values.fold(f64::INFINITY, f64::min)
}

fn mirror(x: f64, y: f64) -> Matrix3<f64> {
    Matrix3::from_diagonal(&Vector3::new(x, y, 1.0))
}

// ----------------------------------------------------------- conservation

/// Tangential wave vector of a photon in the lab, in units of the pump's wavenumber, from its direction outside.
fn across_face(
    direction: Direction,
    wavelength: Wavelength,
    pump: Wavelength,
    normal: &Vector3<f64>,
) -> Vector3<f64> {
    let k = direction.lab().0 * (pump.si() / wavelength.si());
    k - normal * normal.dot(&k)
}

/// Energy and the momentum along the face go from the pump into the pair: to 1e-12 of the pump's.
fn conserved(source: &Source, signal: Direction, idler: Direction) -> Result<(), TestCaseError> {
    let Photons { pump, signal: s, idler: i } = source.photons;
    let energy = pump.si() / s.si() + pump.si() / i.si() - 1.0;
    within(energy.abs(), 1e-12, "energy")?;
    let Lab(normal) = source.crystal.placement().to_lab(Mount(Vector3::z()));
    let momentum = |d, w| across_face(d, w, pump, &normal);
    let missing = momentum(signal, s) + momentum(idler, i) - momentum(Direction::forward(), pump);
    within(missing.norm(), 1e-12, "tangential momentum")
}

#[test]
fn energy_and_tangential_momentum_are_conserved_on_rings() {
    every(200, 190, &setups(BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        for signal in rings.iter().flat_map(|ring| (0..SAMPLES).map(|j| ring.curve.direction(j))) {
            let idler = mismatch.partner(signal);
            prop_assert!(idler.is_some(), "a partner that cannot leave");
            conserved(&source, signal, idler.expect("just tested"))?;
        }
        Ok(Case::Shown)
    });
}

#[test]
fn energy_and_tangential_momentum_are_conserved_at_crossings() {
    every(150, 135, &setups(CROSSED), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let crossings = source.crossings();
        for crossing in &crossings {
            conserved(&source, crossing.direction, crossing.partner.expect("a partner that can leave"))?;
        }
        Ok(if crossings.is_empty() { Case::Void } else { Case::Shown })
    });
}

// ------------------------------------------------------------------ rings

#[test]
fn ring_points_are_phase_matched() {
    every(200, 190, &setups(BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        for ring in &rings {
            matched(&source, &mismatch, ring)?;
        }
        Ok(Case::Shown)
    });
}

/// |Delta_k| L is negligible at the samples and between them.
fn matched(source: &Source, mismatch: &Mismatch, ring: &Ring) -> Result<(), TestCaseError> {
    let emission = source.emission();
    let grating = emission.grating_sign(source.roles).map_or(0.0, |sign| sign * emission.grating);
    let grating = Vector3::z() * grating;
    let between = (0..SAMPLES).map(|j| TAU * (j as f64 + 0.37) / SAMPLES as f64);
    let between = between.map(|phi| ring.curve.at(mismatch, phi).expect("a point at every azimuth"));
    for direction in (0..SAMPLES).map(|j| ring.curve.direction(j)).chain(between) {
        let pair = emission.pairing(source.roles, direction).expect("three waves");
        let left = pair.pump.k.0 - pair.signal.k.0 - pair.idler.k.0 - grating;
        // radians over the length of 1 mm; sinc^2 then differs from 1 by less than 1e-18
        within(left.norm() * emission.length, 1e-9, "Delta_k L, rad")?;
    }
    Ok(())
}

/// A direction that is more than matched (Delta_k < 0) lies within a ring. Rings about an optic axis of a poled
/// biaxial crystal are the hard ones: there the fast sheet has a peak that is not smooth.
#[test]
fn rings_about_optic_axes_of_poled_crystals_are_found() {
    every(300, 290, &poled(), |poled| {
        let Some(source) = poled.source() else { return Ok(Case::Void) };
        let emission = source.emission();
        let mismatch = emission.mismatch(source.roles).expect("a pump");
        match rings(&mismatch, emission.length) {
            Ok(rings) => rings.iter().try_for_each(|ring| matched(&source, &mismatch, ring))?,
            Err(fault) => {
                prop_assert!(false, "pairs along the pump are more than matched, but: {}", fault.status)
            }
        }
        Ok(Case::Shown)
    });
}

/// Mean distance between the points at which sinc^2(Delta_k L/2) is one half, wherever there are such points inside.
#[test]
fn thickness_is_the_width_at_half_maximum() {
    // sinc^2(x) = 1/2
    const HALF_MAXIMUM: f64 = 1.391_557_378_251_51;
    every(400, 385, &(setups(BOTH), 1.0..20.0), |(setup, length_mm)| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let source = source.with(|crystal| crystal.length = Length::metres(length_mm * 1e-3));
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        let edge = 2.0 * HALF_MAXIMUM / source.crystal.length.si();
        let value = |d: Direction| mismatch.at(mismatch.tangential(d)).expect("a pair inside").value;
        let mut case = Case::Void;
        for ring in rings.iter().filter(|ring| value(ring.axis) < -edge) {
            let width = |j: usize| {
                let to = |level: f64| radius_at(ring, j, |d| value(d) - level);
                to(edge) - to(-edge)
            };
            let mean = (0..SAMPLES).map(width).sum::<f64>() / SAMPLES as f64;
            let thickness = ring.thickness;
            prop_assert!(thickness.is_some(), "no thickness though the inside is dark");
            within((thickness.expect("just tested") - mean).abs().to_degrees(), 1e-9, "thickness, deg")?;
            case = Case::Shown;
        }
        Ok(case)
    });
}

/// Angle from the axis, towards sample `j`, at which an increasing function is zero: by bisection to rounding error.
fn radius_at(ring: &Ring, j: usize, value: impl Fn(Direction) -> f64) -> f64 {
    let axis = ring.axis.lab().0;
    let sample = ring.curve.direction(j).lab().0;
    let outward = (sample - axis * axis.dot(&sample)).normalize();
    let at = |psi: f64| value(Direction::new(Lab(axis * psi.cos() + outward * psi.sin())));
    let (mut low, mut high) = (0.0, 2.0 * ring.largest);
    assert!(at(low) < 0.0 && at(high) > 0.0, "no zero within twice the ring");
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if at(middle) < 0.0 { low = middle } else { high = middle }
    }
    0.5 * (low + high)
}

#[test]
fn rings_are_closed_curves_about_the_axis_that_fits_best() {
    every(200, 190, &setups(BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some((mismatch, rings)) = source.traced(source.roles) else { return Ok(Case::Void) };
        for ring in &rings {
            closed(ring, &mismatch)?;
            fits_best(ring)?;
            bounded(ring, &mismatch)?;
        }
        Ok(Case::Shown)
    });
}

/// Samples go round the axis once in equal steps and end where they began.
fn closed(ring: &Ring, mismatch: &Mismatch) -> Result<(), TestCaseError> {
    let axis = ring.axis.lab().0;
    for j in 0..SAMPLES {
        let (a, b) = (ring.curve.direction(j), ring.curve.direction(j + 1));
        let across = |d: Direction| d.lab().0 - axis * axis.dot(&d.lab().0);
        let (p, r) = (across(a), across(b));
        let step = p.cross(&r).dot(&axis).atan2(p.dot(&r)).to_degrees();
        within((step - 360.0 / SAMPLES as f64).abs(), 1e-9, "step in azimuth, deg")?;
        // 5 deg of azimuth change the radius by a fraction of itself
        within((p.norm() - r.norm()).abs() / ring.half_angle.sin(), 0.1, "jump of the radius")?;
    }
    let ends = [0.0, TAU].map(|phi| ring.curve.at(mismatch, phi).expect("a point"));
    within(ends[0].angle_to(ends[1]), 1e-12, "gap between the ends")
}

/// No other circular cone has a smaller sum of (d.a - cos alpha)^2.
fn fits_best(ring: &Ring) -> Result<(), TestCaseError> {
    let samples: Vec<Vector3<f64>> = (0..SAMPLES).map(|j| ring.curve.direction(j).lab().0).collect();
    let misfit = |axis: &Vector3<f64>, alpha: f64| {
        samples.iter().map(|d| (d.dot(axis) - alpha.cos()).powi(2)).sum::<f64>()
    };
    let axis = ring.axis.lab().0;
    let best = misfit(&axis, ring.half_angle);
    let first = axis.cross(&Vector3::y()).normalize();
    for turn in [first, -first, axis.cross(&first), -axis.cross(&first)] {
        let other = Rotation3::new(turn * 1e-4) * axis;
        prop_assert!(misfit(&other, ring.half_angle) > best, "a better axis");
    }
    for change in [-1e-4, 1e-4] {
        prop_assert!(misfit(&axis, ring.half_angle + change) > best, "a better half angle");
    }
    best_circle(ring)
}

/// Nor has another circle on the screen a smaller sum of squared distances.
fn best_circle(ring: &Ring) -> Result<(), TestCaseError> {
    let on_screen = |j: usize| {
        let Lab(d) = ring.curve.direction(j).lab();
        Vector2::new(d.x / d.z, d.y / d.z)
    };
    let misfit = |centre: Vector2<f64>, radius: f64| {
        (0..SAMPLES).map(|j| ((on_screen(j) - centre).norm() - radius).powi(2)).sum::<f64>()
    };
    let (centre, radius) = ring.circle();
    let best = misfit(centre, radius);
    for [x, y, r] in [[1e-4, 0.0, 0.0], [0.0, 1e-4, 0.0], [0.0, 0.0, 1e-4]] {
        for sign in [-1.0, 1.0] {
            let other = misfit(centre + Vector2::new(x, y) * sign, radius + sign * r);
            prop_assert!(other > best, "a better circle");
        }
    }
    Ok(())
}

/// Least and largest radius bound the curve between samples too, and are reached.
fn bounded(ring: &Ring, mismatch: &Mismatch) -> Result<(), TestCaseError> {
    const FINE: usize = 360;
    let radius = |n: usize| {
        let point = ring.curve.at(mismatch, TAU * n as f64 / FINE as f64).expect("a point at every azimuth");
        point.angle_to(ring.axis)
    };
    let (mut low, mut high) = (f64::INFINITY, 0.0_f64);
    for psi in (0..FINE).map(radius) {
        (low, high) = (low.min(psi), high.max(psi));
    }
    within(ring.least - low, 1e-12, "a point inside the least radius")?;
    within(high - ring.largest, 1e-12, "a point outside the largest radius")?;
    // half a step of 1 deg from an extremum of a radius that varies by its own size at most a few times round
    within((low - ring.least).max(ring.largest - high), 2e-3 * ring.half_angle, "an extreme not reached")
}

// -------------------------------------------------------------- exchange

#[test]
fn exchanging_signal_and_idler_maps_a_crossing_to_its_partner() {
    every(60, 50, &(setups(CROSSED), 0.485..0.499), |(setup, share)| {
        let Some(source) = (Setup { share, ..setup }).source() else { return Ok(Case::Void) };
        if source.crossings().is_empty() {
            return Ok(Case::Void);
        }
        let other = Source { photons: source.photons.exchanged(), ..source.clone() };
        let pairs = |cones: &Cones| -> Vec<[Direction; 2]> {
            let crossings = cones.crossings.iter().filter_map(|row| row.crossing);
            crossings.map(|c| [c.direction, c.partner.expect("a partner")]).collect()
        };
        let (cones, others) = (source.cones(), other.cones());
        all_rings(&cones).same_as(&all_rings(&others), 1e-9)?;
        let (here, there) = (pairs(&cones), pairs(&others));
        prop_assert_eq!(here.len(), there.len(), "number of crossings");
        for [a, b] in &here {
            let off = |[c, d]: &[Direction; 2]| a.angle_to(*d).max(b.angle_to(*c)).to_degrees();
            within(least(there.iter().map(off)), 1e-9, "crossing and partner, deg")?;
        }
        Ok(Case::Shown)
    });
}

/// Rings of both photons.
fn all_rings(cones: &Cones) -> Pattern {
    let rings = cones.rings.iter().filter_map(|row| row.ring.as_ref().ok());
    Pattern { rings: rings.map(|ring| (ring.axis, ring.half_angle)).collect(), crossings: Vec::new() }
}

// --------------------------------------------------------------- crossings

/// Crossings are where the other process changes sign along a ring, and which ring comes first does not matter.
#[test]
fn rings_cross_where_the_other_mismatch_changes_sign() {
    // shifts of the cut in degrees, so that some pairs of rings part
    every(150, 135, &(setups(CROSSED), -1.5..1.5), |(setup, shift_deg)| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let source = source.with(|crystal| {
            let theta = crystal.cut.theta.si() + f64::to_radians(shift_deg);
            crystal.cut.theta = Angle::radians(theta);
        });
        let (Some((m1, ones)), Some((m2, twos))) =
            (source.curves(source.roles), source.curves(source.roles.exchanged()))
        else {
            return Ok(Case::Void);
        };
        let one = Traced { mismatch: &m1, curve: &ones[0] };
        let two = Traced { mismatch: &m2, curve: &twos[0] };
        let (here, there) = (meet(one, &m2), meet(two, &m1));
        let changes = sign_changes(one, &m2);
        prop_assert_eq!(changes, sign_changes(two, &m1), "sign changes along either ring");
        prop_assert_eq!((here.len(), there.len()), (changes, changes), "crossings and sign changes");
        let pattern = |met: &[(Crossing, Meeting)]| Pattern {
            rings: Vec::new(),
            crossings: met.iter().map(|(crossing, _)| crossing.direction).collect(),
        };
        pattern(&here).same_as(&pattern(&there), 1e-9)?;
        for (crossing, _) in &here {
            // differences of a step of 1e-5 are right to some 1e-9 of the gradient
            let angle = angle_on_screen(crossing.direction, &m1, &m2);
            within((crossing.angle - angle).abs(), 1e-7, "angle on the screen, rad")?;
        }
        if here.is_empty() {
            let [Miss::By(a), Miss::By(b)] =
                [miss(one, two), miss(two, one)].map(|miss| miss.expect("curves that can be followed"))
            else {
                return Err(TestCaseError::fail("rings that touch where none changes sign"));
            };
            prop_assert_eq!(a.kind, b.kind, "which way they miss");
            within((a.gap - b.gap).abs().to_degrees(), 1e-9, "gap, deg")?;
        }
        Ok(Case::Shown)
    });
}

/// Angle between the curves of two mismatches on a screen, 0 to pi/2: that between their gradients.
fn angle_on_screen(direction: Direction, one: &Mismatch, two: &Mismatch) -> f64 {
    const STEP: f64 = 1e-5;
    let Lab(d) = direction.lab();
    let gradient = |mismatch: &Mismatch| {
        let value = |x: f64, y: f64| {
            let beside = Direction::new(Lab(Vector3::new(d.x / d.z + x, d.y / d.z + y, 1.0)));
            mismatch.at(mismatch.tangential(beside)).expect("a pair beside").value
        };
        Vector2::new(value(STEP, 0.0) - value(-STEP, 0.0), value(0.0, STEP) - value(0.0, -STEP)).normalize()
    };
    let (a, b) = (gradient(one), gradient(two));
    a.perp(&b).abs().atan2(a.dot(&b).abs())
}

/// Of the other mismatch along a ring, at 1 deg of azimuth.
fn sign_changes(ring: Traced<'_>, other: &Mismatch) -> usize {
    const FINE: usize = 360;
    let inside = |n: usize| {
        let phi = TAU * n as f64 / FINE as f64;
        let point = ring.curve.at(ring.mismatch, phi).expect("a point at every azimuth");
        other.at(other.tangential(point)).is_some_and(|at| at.value < 0.0)
    };
    let inside: Vec<bool> = (0..FINE).map(inside).collect();
    (0..FINE).filter(|n| inside[*n] != inside[(n + 1) % FINE]).count()
}

// ---------------------------------------------------------------- symmetry

#[test]
fn roll_turns_the_pattern_rigidly() {
    every(120, 115, &(setups(BOTH), -180.0..180.0), |(mut setup, roll_deg)| {
        // the mount's own turns come after the roll
        (setup.orientation.about_x, setup.orientation.about_y) = Default::default();
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let before = source.pattern();
        let rolled = source.with(|crystal| {
            let roll = crystal.orientation.roll.si() + f64::to_radians(roll_deg);
            crystal.orientation.roll = Angle::radians(roll);
        });
        let turn = Rotation3::from_axis_angle(&Vector3::z_axis(), f64::to_radians(roll_deg));
        rolled.pattern().same_as(&before.turned(turn.matrix()), 1e-9)?;
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn patterns_of_uniaxial_crystals_tilted_in_the_plane_of_the_axis_are_mirror_symmetric() {
    every(120, 115, &(setups_of(Optic::Uniaxial, BOTH), -5.0..5.0), |(setup, tilt_deg)| {
        let upright = setup.upright();
        let tilt = Angle::from_degrees(tilt_deg);
        let tilted = Setup { orientation: Orientation { tilt, ..Orientation::default() }, ..upright.clone() };
        let mut case = Case::Void;
        for source in [upright.source(), tilted.source()].into_iter().flatten() {
            let pattern = source.pattern();
            pattern.same_as(&pattern.turned(&mirror(1.0, -1.0)), 1e-9)?;
            for (axis, _) in &pattern.rings {
                within(axis.v_deg().abs(), 1e-9, "axis off the plane, deg")?;
                case = Case::Shown;
            }
        }
        Ok(case)
    });
}

/// Of the uniaxial crystal; of the biaxial one cut in a principal plane, where the axis across that plane counts.
#[test]
fn reversal_about_the_axis_across_the_plane_of_z_changes_nothing() {
    every(120, 115, &setups(BOTH), |mut setup| {
        setup.phi_deg = 90.0 * (setup.phi_deg / 90.0).floor();
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let uniaxial = source.crystal.material.file.optic == Optic::Uniaxial;
        // across the XY plane is Z, which is u in such a cut
        let across = if in_xy_plane(&source.crystal) && !uniaxial {
            Reversal::AboutHorizontal
        } else {
            Reversal::AboutVertical
        };
        let before = source.pattern();
        source.with(|crystal| crystal.reversal = across).pattern().same_as(&before, 1e-9)?;
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn reversal_about_the_beam_turns_the_pattern_by_half_a_turn() {
    every(120, 115, &setups(BOTH), |mut setup| {
        (setup.orientation.about_x, setup.orientation.about_y) = Default::default();
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let before = source.pattern();
        // half a turn of crystal and tilts is half a turn of everything
        let reversed = source.with(|crystal| {
            crystal.reversal = Reversal::AboutBeam;
            crystal.orientation.tilt = Angle::radians(-crystal.orientation.tilt.si());
            crystal.orientation.cross_tilt = Angle::radians(-crystal.orientation.cross_tilt.si());
        });
        reversed.pattern().same_as(&before.turned(&mirror(-1.0, -1.0)), 1e-9)?;
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn reversal_about_the_beam_mirrors_the_pattern_of_an_untilted_uniaxial_crystal() {
    every(120, 115, &setups_of(Optic::Uniaxial, BOTH), |setup| {
        let Some(source) = setup.upright().source() else { return Ok(Case::Void) };
        let before = source.pattern();
        let mirrored = before.turned(&mirror(-1.0, 1.0));
        for reversal in [Reversal::AboutBeam, Reversal::AboutHorizontal] {
            source.with(|crystal| crystal.reversal = reversal).pattern().same_as(&mirrored, 1e-9)?;
        }
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

// ------------------------------------------------------------------ limits

#[test]
fn biaxial_crystals_with_two_equal_indices_are_uniaxial() {
    let made = (recipes(Optic::Uniaxial), setups_of(Optic::Uniaxial, BOTH), 380.0..450.0);
    every(120, 115, &made, |(recipe, setup, pump_nm)| {
        let setup = Setup { substance: Substance::Made(recipe), pump_nm, ..setup };
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        // both are asked by sheet: o and e have no meaning in the biaxial one
        let biaxial = source.with(|crystal| crystal.material = recipe.as_biaxial());
        let before = source.pattern();
        biaxial.pattern().same_as(&before, 1e-9)?;
        Ok(if before.is_empty() { Case::Void } else { Case::Shown })
    });
}

/// As above through the whole of `cones`, where the order of rows may differ with the names of the sheets.
#[test]
fn cones_of_biaxial_crystals_with_two_equal_indices_are_those_of_uniaxial_ones() {
    let made = (recipes(Optic::Uniaxial), setups_of(Optic::Uniaxial, CROSSED));
    every(40, 38, &made, |(recipe, setup)| {
        let setup = Setup { substance: Substance::Made(recipe), pump_nm: 405.0, share: 0.5, ..setup };
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let biaxial = source.with(|crystal| crystal.material = recipe.as_biaxial());
        let pattern = |cones: &Cones| Pattern {
            // a degenerate pair is listed once, by either of its photons
            crossings: cones
                .crossings
                .iter()
                .filter_map(|row| row.crossing)
                .flat_map(|c| [c.direction, c.partner.expect("a partner")])
                .collect(),
            ..all_rings(cones)
        };
        let (one, two) = (pattern(&source.cones()), pattern(&biaxial.cones()));
        one.same_as(&two, 1e-9)?;
        Ok(if one.rings.len() == 2 && one.crossings.len() == 2 { Case::Shown } else { Case::Void })
    });
}

// ------------------------------------------------------------------- waves

/// A plane wave in a random crystal.
#[derive(Debug, Clone, Copy)]
struct Probe {
    recipe: Recipe,
    cut: Cut,
    um: f64,
    /// Tangential wave vector over the vacuum wavenumber.
    q: [f64; 2],
    sheet: Sheet,
}

fn probes() -> impl Strategy<Value = Probe> {
    prop_oneof![probes_of(Optic::Uniaxial), probes_of(Optic::Biaxial)]
}

fn probes_of(optic: Optic) -> impl Strategy<Value = Probe> {
    let cut = (0.0..180.0, 0.0..360.0)
        .prop_map(|(t, p)| Cut { theta: Angle::from_degrees(t), phi: Angle::from_degrees(p) });
    let q = (0.0..0.95f64, 0.0..TAU).prop_map(|(size, angle)| [size * angle.cos(), size * angle.sin()]);
    let sheet = prop_oneof![Just(Sheet::Fast), Just(Sheet::Slow)];
    (recipes(optic), cut, 0.4..1.6, q, sheet).prop_map(|(recipe, cut, um, q, sheet)| Probe {
        recipe,
        cut,
        um,
        q,
        sheet,
    })
}

impl Probe {
    fn crystal(&self) -> Crystal {
        let crystal = Crystal::new(self.recipe.material(), None).expect("a data set");
        Crystal { cut: self.cut, ..crystal }
    }

    fn wavelength(&self) -> Wavelength {
        Wavelength::metres(self.um * 1e-6)
    }

    fn principal(&self) -> Principal {
        self.crystal().principal(self.wavelength()).expect("indices")
    }

    fn medium(&self) -> Medium {
        Medium::new(&self.principal(), self.cut.dielectric_in_mount())
    }

    fn tangential(&self) -> Tangential {
        let k0 = self.wavelength().wavenumber();
        Tangential { u: k0 * self.q[0], v: k0 * self.q[1] }
    }
}

#[test]
fn waves_obey_maxwells_equations() {
    every(1000, 1000, &probes(), |probe| {
        let medium = probe.medium();
        let wave = medium.wave(probe.sheet, probe.tangential()).expect("a wave");
        let turn = probe.cut.dielectric_in_mount();
        let squares = probe.principal().axes.map(|index| index.n * index.n);
        let eps = turn * Matrix3::from_diagonal(&Vector3::from(squares)) * turn.transpose();
        let (k, e) = (wave.k.0 / medium.k0(), wave.field.0);
        // k x (k x E) + eps E = 0, in units of k0; some ten roundings of terms up to n^2 = 4
        let h = k.cross(&e);
        within((k.cross(&h) + eps * e).norm(), 2e-14, "wave equation")?;
        within((wave.ray.0 - e.cross(&h).normalize()).norm(), 1e-12, "ray and energy flow")?;
        prop_assert!(wave.ray.0.z > 0.0, "energy flows backwards");
        Ok(Case::Shown)
    });
}

#[test]
fn axes_of_biaxial_crystals_may_be_named_in_any_order() {
    let orders = prop::sample::select(vec![[0, 2, 1], [1, 0, 2], [1, 2, 0], [2, 0, 1], [2, 1, 0]]);
    every(300, 300, &(probes_of(Optic::Biaxial), orders), |(probe, order)| {
        let (principal, turn) = (probe.principal(), probe.cut.dielectric_in_mount());
        let renamed = Principal { axes: order.map(|n: usize| principal.axes[n]), ..principal };
        let columns = order.map(|n| turn.column(n).into_owned());
        let other = Medium::new(&renamed, Matrix3::from_columns(&columns));
        let wave = |medium: &Medium| medium.wave(probe.sheet, probe.tangential()).expect("a wave");
        let (one, two) = (wave(&probe.medium()), wave(&other));
        within((one.k.0 - two.k.0).norm() / one.k.0.norm(), 1e-15, "wave vector")?;
        within(one.ray.0.cross(&two.ray.0).norm(), 1e-12, "ray")?;
        within(one.field.0.cross(&two.field.0).norm(), 1e-12, "field")?;
        within((one.delay / two.delay - 1.0).abs(), 1e-12, "delay")?;
        Ok(Case::Shown)
    });
}

// ------------------------------------------------------------- derivatives

/// A central difference and how far it may be off: twice the step shows the error of the step, rounding adds its own.
struct Difference {
    value: f64,
    error: f64,
}

/// Of `f` at 0 with the step `h`; `size` is that of f, for rounding. `None` where f does not exist.
fn difference(f: impl Fn(f64) -> Option<f64>, h: f64, size: f64) -> Option<Difference> {
    let slope = |h: f64| Some((f(h)? - f(-h)?) / (2.0 * h));
    let (value, coarse) = (slope(h)?, slope(2.0 * h)?);
    // D(h) = f' + h^2 f'''/6 + ..., so D(2h) - D(h) is three times the error, left as a margin for higher terms
    Some(Difference { value, error: (coarse - value).abs() + 8.0 * f64::EPSILON * size / h })
}

/// Fails unless `exact` is the derivative; void where the difference is too rough to tell.
fn derivative(exact: f64, difference: Option<Difference>, fine: f64, what: &str) -> Verdict {
    let Some(Difference { value, error }) = difference else { return Ok(Case::Void) };
    within((exact - value).abs(), error, what)?;
    Ok(if error < fine { Case::Shown } else { Case::Void })
}

/// All must hold; shown if all are.
fn all(verdicts: impl IntoIterator<Item = Verdict>) -> Verdict {
    let mut case = Case::Shown;
    for verdict in verdicts {
        if verdict? == Case::Void {
            case = Case::Void;
        }
    }
    Ok(case)
}

#[test]
fn slopes_and_curvatures_of_the_dispersion_surface_are_its_derivatives() {
    const STEP: f64 = 1e-4;
    every(1000, 980, &probes(), |probe| {
        let medium = probe.medium();
        let (surface, k0, q) = (medium.surface(probe.sheet), medium.k0(), probe.tangential());
        let normal = surface.normal(q).expect("a wave");
        let bend = surface.curvature(q, &normal);
        let moved = |u: f64, v: f64| surface.normal(Tangential { u: q.u + u * k0, v: q.v + v * k0 });
        let k_w = |u, v| moved(u, v).map(|n| n.k_w / k0);
        let slope = |u, v, i: usize| moved(u, v).map(|n| n.slope[i]);
        let check = |exact, f: &dyn Fn(f64) -> Option<f64>, what| {
            derivative(exact, difference(f, STEP, 2.0), 1e-6, what)
        };
        all([
            check(normal.slope[0], &|x| k_w(x, 0.0), "dk_w/dq_u"),
            check(normal.slope[1], &|x| k_w(0.0, x), "dk_w/dq_v"),
            check(bend.uu * k0, &|x| slope(x, 0.0, 0), "d2k_w/dq_u2"),
            check(bend.uv * k0, &|x| slope(x, 0.0, 1), "d2k_w/dq_u dq_v"),
            check(bend.uv * k0, &|x| slope(0.0, x, 0), "d2k_w/dq_v dq_u"),
            check(bend.vv * k0, &|x| slope(0.0, x, 1), "d2k_w/dq_v2"),
        ])
    });
}

/// Wavelength at which the frequency is (1 + x) times that of `wavelength`.
fn detuned(wavelength: Wavelength, x: f64) -> Wavelength {
    Wavelength::metres(wavelength.si() / (1.0 + x))
}

#[test]
fn delays_are_derivatives_with_respect_to_frequency() {
    const STEP: f64 = 1e-4;
    every(500, 480, &probes(), |probe| {
        let (crystal, q) = (probe.crystal(), probe.tangential());
        let wave = probe.medium().wave(probe.sheet, q).expect("a wave");
        let k0 = probe.wavelength().wavenumber();
        // k_w/k0 at the detuned frequency and the same q
        let k_w = |x: f64| {
            let principal = crystal.principal(detuned(probe.wavelength(), x)).ok()?;
            let medium = Medium::new(&principal, probe.cut.dielectric_in_mount());
            Some(medium.surface(probe.sheet).normal(q)?.k_w / k0)
        };
        derivative(wave.delay * SPEED_OF_LIGHT, difference(k_w, STEP, 2.0), 1e-6, "group index along w")
    });
}

#[test]
fn group_index_and_dispersion_are_derivatives_with_respect_to_frequency() {
    const STEP: f64 = 1e-4;
    every(500, 480, &probes(), |probe| {
        let crystal = probe.crystal();
        let direction = probe.cut.axes()[2].0;
        let which = usize::from(probe.sheet == Sheet::Slow);
        let at = |x: f64| {
            let principal = crystal.principal(detuned(probe.wavelength(), x)).ok()?;
            Some(along_direction(&principal, direction)[which].1)
        };
        let here = at(0.0).expect("indices");
        let omega = probe.wavelength().angular_frequency();
        let index = |x: f64| at(x).map(|along| along.n * (1.0 + x));
        let group = |x: f64| at(x).map(|along| along.group_index);
        all([
            derivative(here.group_index, difference(index, STEP, 2.0), 1e-6, "group index"),
            derivative(
                here.dispersion * SPEED_OF_LIGHT * omega,
                difference(group, STEP, 2.0),
                1e-6,
                "dispersion",
            ),
        ])
    });
}

#[test]
fn slopes_of_the_mismatch_are_its_derivatives() {
    const STEP: f64 = 1e-4;
    let directions = (0.0..20.0f64, 0.0..TAU);
    every(300, 285, &(setups(BOTH), directions), |(setup, (polar_deg, azimuth))| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let Some(mismatch) = source.emission().mismatch(source.roles) else { return Ok(Case::Void) };
        let (sin, cos) = polar_deg.to_radians().sin_cos();
        let direction = Vector3::new(sin * azimuth.cos(), sin * azimuth.sin(), cos);
        let (q, k0) =
            (mismatch.tangential(Direction::new(Lab(direction))), source.photons.signal.wavenumber());
        let Some(here) = mismatch.at(q) else { return Ok(Case::Void) };
        let value = |u: f64, v: f64| {
            mismatch.at(Tangential { u: q.u + u * k0, v: q.v + v * k0 }).map(|sample| sample.value / k0)
        };
        // the pump's wave vector, some four times the signal's k0, is part of the value
        all([
            derivative(here.slope[0], difference(|x| value(x, 0.0), STEP, 4.0), 1e-6, "along u"),
            derivative(here.slope[1], difference(|x| value(0.0, x), STEP, 4.0), 1e-6, "along v"),
        ])
    });
}

// ------------------------------------------------------------- round trips

/// The cuts that bring a target about, in the plane in which the setup has a ring.
fn cuts(setup: &Setup, target: Target) -> Vec<CutSolution> {
    let Some(Source { crystal, photons, interaction, .. }) = setup.source() else { return Vec::new() };
    let find = if in_xy_plane(&crystal) { Find::Phi } else { Find::Theta };
    let question =
        Design { crystal, photons, fixed_signal: None, interaction, target, find, phi_given: true };
    design(&question).expect("a design")
}

/// The emission of a solution, in its crystal.
fn emitted(solution: &CutSolution, interaction: Interaction) -> Cones {
    let photons = solution.photons;
    cones(std::slice::from_ref(&solution.crystal), photons.pump, &[photons.signal], interaction, Want::Both)
        .expect("cones")
}

#[test]
fn cuts_for_a_half_angle_give_it_back() {
    every(24, 22, &setups(BOTH), |setup| {
        let wanted = setup.half_angle_deg;
        let found = cuts(&setup, Target::HalfAngle(wanted.to_radians()));
        for solution in &found {
            let cones = emitted(solution, setup.interaction);
            let signal =
                |row: &&RingRow| row.photon == Landing::Signal && row.polarization == solution.process.signal;
            let halves = cones.rings.iter().filter(signal).filter_map(|row| row.ring.as_ref().ok());
            let off = halves.map(|ring| (ring.half_angle.to_degrees() - wanted).abs());
            within(least(off), 1e-9, "half angle, deg")?;
        }
        Ok(if found.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn cuts_for_a_crossing_or_a_separation_give_it_back() {
    every(16, 14, &(setups(CROSSED), any::<bool>()), |(setup, full)| {
        let wanted = setup.half_angle_deg.to_radians();
        let found =
            cuts(&setup, if full { Target::Separation(2.0 * wanted) } else { Target::Crossing(wanted) });
        for solution in &found {
            let cones = emitted(solution, setup.interaction);
            let met: Vec<Crossing> = cones.crossings.iter().filter_map(|row| row.crossing).collect();
            let both = |c: &Crossing| [c.direction, c.partner.expect("a partner")];
            let angle = |c: &Crossing| {
                let [a, b] = both(c);
                let pump = Direction::forward();
                match (full, solution.photons.degenerate()) {
                    (true, _) => 0.5 * a.angle_to(b),
                    // a degenerate pair is one row, its partner the other crossing of the same photon
                    (false, true) => 0.5 * (a.angle_to(pump) + b.angle_to(pump)),
                    (false, false) => a.angle_to(pump),
                }
            };
            let mean = met.iter().map(angle).sum::<f64>() / met.len() as f64;
            within((mean - wanted).abs().to_degrees(), 1e-9, "crossing or half the separation, deg")?;
        }
        Ok(if found.is_empty() { Case::Void } else { Case::Shown })
    });
}

/// A beamlike cut is the border between a small ring and none.
#[test]
fn cuts_for_beamlike_emission_are_where_the_ring_vanishes() {
    const STEP_DEG: f64 = 1e-4;
    every(40, 38, &setups(BOTH), |setup| {
        let found = cuts(&setup, Target::Beamlike);
        for solution in &found {
            let beside = |step_deg: f64| {
                let mut crystal = solution.crystal.clone();
                let angle = if in_xy_plane(&crystal) { &mut crystal.cut.phi } else { &mut crystal.cut.theta };
                *angle = Angle::radians(angle.si() + step_deg.to_radians());
                let (photons, interaction, roles) = (solution.photons, setup.interaction, solution.roles);
                Source { crystal, photons, interaction, roles }.rings()
            };
            let counts = [beside(-STEP_DEG), beside(STEP_DEG)];
            let [none, one] =
                if counts[0].is_empty() { [&counts[0], &counts[1]] } else { [&counts[1], &counts[0]] };
            prop_assert_eq!((none.len(), one.len()), (0, 1), "rings on either side");
            // psi^2 grows with the turn, as by 3 deg for some 0.7 deg
            within(one[0].half_angle.to_degrees(), 0.3, "half angle beside the border, deg")?;
        }
        Ok(if found.is_empty() { Case::Void } else { Case::Shown })
    });
}

/// Exactly at the border the ring is its own centre, whatever the sign that rounding leaves of Delta_k there.
#[test]
fn cuts_for_collinear_type_one_and_beamlike_emission_have_a_point_for_a_ring() {
    every(60, 57, &setups_of(Optic::Uniaxial, BOTH), |setup| {
        let beamlike = setup.interaction == Interaction::Two;
        let setup = Setup { share: 0.5, ..setup };
        let found = cuts(&setup, if beamlike { Target::Beamlike } else { Target::Collinear });
        for solution in &found {
            let crystal = Crystal { orientation: Orientation::default(), ..solution.crystal.clone() };
            let (photons, interaction, roles) = (solution.photons, setup.interaction, solution.roles);
            let rings = Source { crystal, photons, interaction, roles }.rings();
            prop_assert_eq!(rings.len(), 1, "one ring, of no size");
            within(rings[0].half_angle.to_degrees(), 1e-4, "half angle, deg")?;
        }
        Ok(if found.is_empty() { Case::Void } else { Case::Shown })
    });
}

#[test]
fn tilts_for_a_half_angle_give_it_back() {
    every(24, 22, &setups_of(Optic::Uniaxial, BOTH), |setup| {
        let Some(source) = setup.source() else { return Ok(Case::Void) };
        let wanted = setup.half_angle_deg.to_radians();
        let question = Tuning {
            crystal: source.crystal.clone(),
            photons: source.photons,
            fixed_signal: None,
            interaction: setup.interaction,
            target: Target::HalfAngle(wanted),
            actuator: Some(Actuator::Tilt),
        };
        let turns = tune(&question).expect("indices").turns;
        for turn in &turns {
            let measured = turn.measure.half_angle.expect("a ring");
            within((measured - wanted).abs().to_degrees(), 1e-9, "half angle, deg")?;
            let mut tilted = source.with(|crystal| crystal.orientation.tilt = Angle::radians(turn.setting));
            let process = Interaction::Explicit(turn.process);
            tilted.roles = tilted.emission().roles(process).expect("o and e")[0];
            within((tilted.rings()[0].half_angle - measured).abs(), 0.0, "the same crystal")?;
        }
        Ok(if turns.is_empty() { Case::Void } else { Case::Shown })
    });
}
