//! Random crystals, experiments and waves, and how a property is run on them.

use nalgebra::{Matrix3, Vector3};
use proptest::prelude::*;
use proptest::test_runner::{Config, RngAlgorithm, TestRng, TestRunner};
use std::cell::Cell;
use std::f64::consts::{FRAC_PI_2, PI, TAU};
use std::fmt::Debug;
use std::sync::Arc;
use twincone::frame::{Cut, Direction, Lab, Orientation};
use twincone::matching::*;
use twincone::material::{Catalogue, Material, Optic, Reach};
use twincone::optics::Crystal;
use twincone::quantity::{Angle, Length, Wavelength};

/// Whether a case had anything to show.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Case {
    Shown,
    Void,
}

pub type Verdict = Result<Case, TestCaseError>;

/// Runs a property on `cases` random values, always the same ones; `least` of them must have had something to show.
pub fn every<T: Debug>(
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
pub fn within(difference: f64, limit: f64, what: &str) -> Result<(), TestCaseError> {
    prop_assert!(difference <= limit, "{what}: off by {difference:e}, allowed {limit:e}");
    Ok(())
}

/// Indices of a crystal that does not exist: n^2 = c + s/(l^2 - pole) - infrared l^2 on each axis, n given at 0.81 um.
#[derive(Debug, Clone, Copy)]
pub struct Recipe {
    pub optic: Optic,
    /// n_o or n_X.
    pub index: f64,
    /// n_e - n_o, of either sign, or n_Z - n_X.
    pub birefringence: f64,
    /// (n_Y - n_X)/(n_Z - n_X).
    pub middle: f64,
    pub strength: f64,
    pub pole: f64,
    pub infrared: f64,
    /// Relative difference of the strength between the outermost axes.
    pub spread: f64,
}

impl Recipe {
    pub fn axis(&self, name: &str, share: f64) -> String {
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
    pub fn material(&self) -> Arc<Material> {
        match self.optic {
            Optic::Uniaxial => made("uniaxial", &[self.axis("o", 0.0), self.axis("e", 1.0)]),
            Optic::Biaxial => {
                made("biaxial", &[self.axis("x", 0.0), self.axis("y", self.middle), self.axis("z", 1.0)])
            }
        }
    }

    /// A uniaxial crystal described as a biaxial one with n_X = n_Y.
    pub fn as_biaxial(&self) -> Arc<Material> {
        made("biaxial", &[self.axis("x", 0.0), self.axis("y", 0.0), self.axis("z", 1.0)])
    }
}

/// A material from the text of a file.
pub fn made(optic: &str, axes: &[String]) -> Arc<Material> {
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
pub fn recipes(optic: Optic) -> impl Strategy<Value = Recipe> {
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
pub enum Substance {
    Made(Recipe),
    Listed(&'static str),
}

/// Compiled-in crystals and pumps (nm) for which they match degenerate pairs of type I or II.
pub const LISTED: [(Optic, &str, f64, f64); 8] = [
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
pub fn pumped(optic: Optic) -> impl Strategy<Value = (Substance, f64)> {
    let listed: Vec<_> = LISTED.into_iter().filter(|(kind, ..)| *kind == optic).collect();
    let listed = (prop::sample::select(listed), 0.0..1.0)
        .prop_map(|((_, id, from, to), at)| (Substance::Listed(id), from + (to - from) * at));
    prop_oneof![(recipes(optic).prop_map(Substance::Made), 380.0..450.0), listed]
}

/// An experiment before the crystal's theta is known: that is chosen so that there is a ring to look at.
#[derive(Debug, Clone)]
pub struct Setup {
    pub substance: Substance,
    pub pump_nm: f64,
    /// Of the pump's energy that the signal has.
    pub share: f64,
    pub interaction: Interaction,
    pub phi_deg: f64,
    pub orientation: Orientation,
    /// Rough half angle of the ring, outside.
    pub half_angle_deg: f64,
    /// Which of several cuts is taken.
    pub pick: prop::sample::Index,
}

pub fn orientations() -> impl Strategy<Value = Orientation> {
    let turn = || (-3.0..3.0).prop_map(Angle::from_degrees);
    (turn(), turn(), (-180.0..180.0).prop_map(Angle::from_degrees), turn(), turn()).prop_map(
        |(tilt, cross_tilt, roll, about_x, about_y)| Orientation { tilt, cross_tilt, roll, about_x, about_y },
    )
}

pub fn setups_of(optic: Optic, interactions: &'static [Interaction]) -> impl Strategy<Value = Setup> {
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

pub const BOTH: &[Interaction] = &[Interaction::One, Interaction::Two];
pub const CROSSED: &[Interaction] = &[Interaction::Two];

pub fn setups(interactions: &'static [Interaction]) -> impl Strategy<Value = Setup> {
    prop_oneof![setups_of(Optic::Uniaxial, interactions), setups_of(Optic::Biaxial, interactions)]
}

impl Setup {
    pub fn upright(self) -> Self {
        Self { orientation: Orientation::default(), ..self }
    }

    pub fn crystal(&self) -> Crystal {
        let material = match self.substance {
            Substance::Made(recipe) => recipe.material(),
            Substance::Listed(id) => Arc::new(Catalogue::default().get(id).expect("a compiled-in crystal")),
        };
        let crystal = Crystal::new(material, None).expect("a default data set");
        // type II needs longer signals than some data sets cover
        let crystal = Crystal { reach: Reach::Extrapolate, ..crystal };
        Crystal { orientation: self.orientation, ..crystal.with_cut(0.0, self.phi_deg) }
    }

    pub fn photons(&self) -> Photons {
        let pump = Wavelength::from_nm(self.pump_nm);
        Photons::new(pump, Wavelength::from_nm(self.pump_nm / self.share)).expect("longer than the pump")
    }

    /// The source with theta such that pairs along the pump lie inside a ring of about the wanted size. Where the
    /// crystal's own phi has no such theta: in the XZ plane, which holds the optic axes, or the XY plane.
    pub fn source(&self) -> Option<Source> {
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
pub struct Poled {
    pub setup: Setup,
    /// Which of the eight assignments of polarizations is used.
    pub roles: usize,
    /// Between the face normal and the optic axis.
    pub off_deg: f64,
}

pub fn poled() -> impl Strategy<Value = Poled> {
    (setups_of(Optic::Biaxial, &[Interaction::Any]), 0..8usize, 0.0..10.0)
        .prop_map(|(setup, roles, off_deg)| Poled { setup, roles, off_deg })
}

impl Poled {
    /// The source with the period such that Delta_k < 0 for pairs along the pump, which lie inside a ring of about the
    /// wanted size; `None` where no period does that.
    pub fn source(&self) -> Option<Source> {
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
    pub fn depth(&self) -> f64 {
        let photons = self.photons();
        let (ks, ki) = (photons.signal.wavenumber(), photons.idler.wavenumber());
        let q = ks * self.half_angle_deg.to_radians().sin();
        // Delta_k = Delta_0 + (q^2/2)(1/k_s + 1/k_i) with an index of about 1.7
        0.5 * q * q * (1.0 / ks + 1.0 / ki) / 1.7
    }
}

/// A crystal that emits pairs.
#[derive(Debug, Clone)]
pub struct Source {
    pub crystal: Crystal,
    pub photons: Photons,
    pub interaction: Interaction,
    pub roles: Roles,
}

impl Source {
    pub fn emission(&self) -> Emission {
        Emission::of(&self.crystal, self.photons).expect("indices")
    }

    pub fn with(&self, change: impl FnOnce(&mut Crystal)) -> Self {
        let mut changed = self.clone();
        change(&mut changed.crystal);
        changed
    }

    pub fn traced(&self, roles: Roles) -> Option<(Mismatch, Vec<Ring>)> {
        let emission = self.emission();
        let mismatch = emission.mismatch(roles)?;
        let found = rings(&mismatch, emission.length).ok()?;
        Some((mismatch, found))
    }

    /// Rings of the signal.
    pub fn rings(&self) -> Vec<Ring> {
        self.traced(self.roles).map_or_else(Vec::new, |(_, rings)| rings)
    }

    /// As [`Self::traced`], by what crossings need of the rings.
    pub fn curves(&self, roles: Roles) -> Option<(Mismatch, Vec<Curve>)> {
        let mismatch = self.emission().mismatch(roles)?;
        let found = curves(&mismatch).ok()?;
        Some((mismatch, found))
    }

    /// Crossings of the signal's rings in the process and in the one with the photons exchanged.
    pub fn crossings(&self) -> Vec<Crossing> {
        let (Some((mismatch, first)), Some((other, _))) =
            (self.curves(self.roles), self.curves(self.roles.exchanged()))
        else {
            return Vec::new();
        };
        let met = first.iter().flat_map(|curve| meet(Traced { mismatch: &mismatch, curve }, &other));
        met.filter(|(_, how)| *how == Meeting::Cross).map(|(crossing, _)| crossing).collect()
    }

    pub fn pattern(&self) -> Pattern {
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

    pub fn cones(&self) -> Cones {
        let crystals = std::slice::from_ref(&self.crystal);
        cones(crystals, self.photons.pump, &[self.photons.signal], self.interaction, Want::Both)
            .expect("cones")
    }
}

/// Where the light goes.
#[derive(Debug, Clone)]
pub struct Pattern {
    pub rings: Vec<(Direction, f64)>,
    pub crossings: Vec<Direction>,
}

impl Pattern {
    pub fn is_empty(&self) -> bool {
        self.rings.is_empty()
    }

    /// Every direction d replaced by `turn` d.
    pub fn turned(&self, turn: &Matrix3<f64>) -> Self {
        let apply = |d: Direction| Direction::new(Lab(turn * d.lab().0));
        Self {
            rings: self.rings.iter().map(|(axis, half)| (apply(*axis), *half)).collect(),
            crossings: self.crossings.iter().map(|d| apply(*d)).collect(),
        }
    }

    /// Fails unless both have the same rings and crossings to `limit` degrees, in any order.
    pub fn same_as(&self, other: &Self, limit: f64) -> Result<(), TestCaseError> {
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
pub fn in_xy_plane(crystal: &Crystal) -> bool {
    (crystal.cut.theta.degrees() - 90.0).abs() < 1e-9
}

pub fn least(values: impl Iterator<Item = f64>) -> f64 {
    values.fold(f64::INFINITY, f64::min)
}

pub fn mirror(x: f64, y: f64) -> Matrix3<f64> {
    Matrix3::from_diagonal(&Vector3::new(x, y, 1.0))
}
