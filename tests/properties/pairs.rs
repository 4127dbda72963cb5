//! Laws of the collected state.

use std::sync::Arc;

use nalgebra::{Complex, Matrix2, Rotation3, Vector3};
use twincone::frame::{Cut, Direction, Lab};
use twincone::matching::{Interaction, Want, cones};
use twincone::material::Catalogue;
use twincone::optics::Crystal;
use twincone::pairs::*;
use twincone::quantity::{Angle, Length, Wavelength};

fn bbo(theta: f64, phi: f64, length_mm: f64, roll: f64) -> Crystal {
    let material = Arc::new(Catalogue::default().get("bbo").expect("bbo"));
    let mut crystal = Crystal::new(material, Some("kato-1986")).expect("kato-1986");
    crystal.cut = Cut { theta: Angle::from_degrees(theta), phi: Angle::from_degrees(phi) };
    crystal.length = Length::metres(length_mm * 1e-3);
    crystal.orientation.roll = Angle::from_degrees(roll);
    crystal
}

/// A source with its bench.
#[derive(Clone)]
struct Source {
    crystals: Vec<Crystal>,
    interaction: Interaction,
    bench: Bench,
    pair: Pair,
}

impl Source {
    fn new(crystals: Vec<Crystal>, interaction: Interaction, bench: Bench) -> Self {
        let pump = Wavelength::from_nm(405.0);
        let signals = [Wavelength::from_nm(790.0)];
        let found = cones(&crystals, pump, &signals, interaction, Want::Crossings).expect("cones");
        let pair = found.crossings.iter().find_map(|row| Pair::at(row, pump)).expect("a crossing");
        Self { crystals, interaction, bench, pair }
    }

    fn stack(&self) -> Stack {
        Stack::new(&self.crystals, &self.bench, &self.pair, self.interaction).expect("a stack")
    }

    fn collected(&self, wanted: f64) -> Estimate {
        let stack = self.stack();
        Mixture::new(&stack, &self.bench, Vary::ALL).estimate(wanted).expect("a state")
    }

    fn in_histories(&self, lab: &DensityMatrix) -> DensityMatrix {
        let basis = self.stack().history_basis().expect("a basis");
        lab.in_basis(&basis.a, &basis.b)
    }
}

fn filters(width_nm: f64) -> [Vec<Filter>; 2] {
    let filter = Filter { shape: Shape::Gaussian, width: Length::metres(width_nm * 1e-9), centre: None };
    [vec![filter.clone()], vec![filter]]
}

fn irises(a: f64, b: f64) -> [Collection; 2] {
    [a, b].map(|full| Collection { opening: Opening::Iris(Angle::from_degrees(full)), direction: None })
}

/// A crystal with plates, and two crystals with a broad pump: both with a pump between their axes.
fn sources() -> Vec<Source> {
    let polarization =
        PumpPolarization::Given { angle: Angle::from_degrees(30.0), phase: Angle::from_degrees(25.0) };
    let plate = |length, roll| bbo(50.0, 0.0, length, roll);
    let compensators = vec![
        Compensator::new(Place::A, plate(0.4, 70.0)),
        Compensator::new(Place::B, plate(0.3, 110.0)),
        Compensator::new(Place::Pump, plate(0.2, 20.0)),
    ];
    let base = Bench { filters: filters(4.0), polarization, compensators, ..Default::default() };
    let line = Line::Width(Length::metres(0.3e-9));
    let gaps = vec![Length::default(), Length::metres(50e-6)];
    let pair = vec![bbo(29.3, 90.0, 0.5, 0.0), bbo(29.3, 90.0, 0.6, 85.0)];
    vec![
        Source::new(vec![bbo(42.7, 0.0, 1.0, 12.0)], Interaction::Two, base.clone()),
        Source::new(pair, Interaction::One, Bench { line, gaps, ..base }),
    ]
}

/// Largest difference of two density matrices.
fn apart(one: &DensityMatrix, two: &DensityMatrix) -> f64 {
    (one.0 - two.0).camax()
}

#[test]
fn a_state_is_hermitian_positive_and_of_trace_one() {
    for source in sources() {
        for collection in [[Collection::default(); 2], irises(0.3, 0.2)] {
            let bench = Bench { collection, ..source.bench.clone() };
            let rho = Source { bench, ..source.clone() }.collected(1e-3).lab;
            assert!((rho.0 - rho.0.adjoint()).camax() < 1e-15);
            assert!((rho.0.trace().re - 1.0).abs() < 1e-12);
            assert!(rho.least_eigenvalue() > -1e-12, "{}", rho.least_eigenvalue());
            let (c, s) = (rho.concurrence(), rho.chsh_max());
            // S of any state lies between its concurrence's bounds (F. Verstraete, M. M. Wolf, Phys. Rev. Lett. 89,
            // 170401 (2002), from memory)
            assert!(s >= 8f64.sqrt() * c - 1e-9 && s <= 2.0 * (1.0 + c * c).sqrt() + 1e-9, "{s} {c}");
        }
    }
}

/// H and V of a direction.
fn frame(d: Vector3<f64>) -> [Vector3<f64>; 2] {
    let h = (Vector3::x() - d * d.x).normalize();
    [h, d.cross(&h)]
}

/// Angle about the rolled arm from its own H to the rolled H.
fn twist(d: Direction, roll: &Rotation3<f64>) -> f64 {
    let Lab(d) = d.lab();
    let [h, v] = frame(roll * d);
    let rolled = roll * frame(d)[0];
    rolled.dot(&v).atan2(rolled.dot(&h))
}

#[test]
fn rolling_everything_turns_the_lab_state_and_nothing_else() {
    for source in sources() {
        let before = source.collected(1e-4).lab;
        for degrees in [17.0, 90.0, 143.0] {
            let roll = Rotation3::from_axis_angle(&Vector3::z_axis(), f64::to_radians(degrees));
            let turned = |d: Direction| Direction::new(Lab(roll * d.lab().0));
            let twists = [twist(source.pair.a, &roll), twist(source.pair.b, &roll)];
            let mut rolled = source.clone();
            rolled.pair.a = turned(source.pair.a);
            rolled.pair.b = turned(source.pair.b);
            let by = |crystal: &mut Crystal, angle: f64| {
                crystal.orientation.roll = Angle::radians(crystal.orientation.roll.si() + angle);
            };
            rolled.crystals.iter_mut().for_each(|crystal| by(crystal, degrees.to_radians()));
            for c in &mut rolled.bench.compensators {
                let angle = match c.place {
                    Place::A => twists[0],
                    Place::B => twists[1],
                    _ => degrees.to_radians(),
                };
                by(&mut c.plate, angle);
            }
            // an elliptical pump: in x, y the plate before the crystals is turned with them, and so is the light
            let PumpPolarization::Given { angle, phase } = source.bench.polarization else { continue };
            rolled.bench.polarization = roll_ellipse(angle.si(), phase.si(), degrees.to_radians());
            let after = rolled.collected(1e-4).lab;
            let rotation = |t: f64| Matrix2::new(t.cos(), t.sin(), -t.sin(), t.cos()).map(Complex::from);
            let (a, b) = (rotation(twists[0]), rotation(twists[1]));
            let difference = apart(&before.in_basis(&a, &b), &after);
            // H and V of directions beside the arm's own do not turn by quite the same angle
            assert!(difference < 2e-5, "{degrees}: {difference}");
            let (one, two) = (source.in_histories(&before), rolled.in_histories(&after));
            // basis vectors keep their directions, not their signs
            assert!((one.0.map(|x| x.norm()) - two.0.map(|x| x.norm())).amax() < 2e-5);
            assert!((one.concurrence() - two.concurrence()).abs() < 2e-5);
            assert!((one.chsh_max() - two.chsh_max()).abs() < 2e-5);
        }
    }
}

/// (cos a, e^(ip) sin a) turned by an angle, up to a common phase.
fn roll_ellipse(a: f64, p: f64, turn: f64) -> PumpPolarization {
    let (x, y) = (Complex::from(a.cos()), Complex::from_polar(a.sin(), p));
    let (s, c) = turn.sin_cos();
    let (x, y) = (x * c - y * s, x * s + y * c);
    PumpPolarization::Given {
        angle: Angle::radians(y.norm().atan2(x.norm())),
        phase: Angle::radians(y.arg() - x.arg()),
    }
}

#[test]
fn exchanged_arms_exchange_the_state() {
    for source in sources() {
        let mut source = source;
        source.bench.collection = irises(0.3, 0.2);
        let mut other = source.clone();
        other.pair = source.pair.swapped();
        other.bench.collection.swap(0, 1);
        for c in &mut other.bench.compensators {
            c.place = match c.place {
                Place::A => Place::B,
                Place::B => Place::A,
                same => same,
            };
        }
        if source.interaction == Interaction::Two {
            // with the idler listed as a, the histories are the same two
            assert_eq!(other.stack().histories.len(), source.stack().histories.len());
        }
        let (one, two) = (source.collected(1e-5), other.collected(1e-5));
        // the face of the first history's crystal ties the directions together either way; d^2 q is taken per arm
        let difference = apart(&one.lab.swapped(), &two.lab);
        assert!(
            difference < 1e-5 + one.error + two.error,
            "{difference}, errors {} {}",
            one.error,
            two.error
        );
    }
}

#[test]
fn refined_quadratures_stay_within_the_printed_error() {
    for source in sources() {
        let waist = Some(Length::metres(200e-6));
        for (collection, waist, wanted) in [
            ([Collection::default(); 2], None, 1e-6),
            (irises(0.3, 0.2), None, 1e-5),
            (irises(0.05, 0.05), None, 1e-5),
            (irises(0.2, 0.2), waist, 1e-3),
        ] {
            if waist.is_some() && source.bench.line != Line::Monochromatic {
                continue;
            }
            let bench = Bench { collection, waist, ..source.bench.clone() };
            let source = Source { bench, ..source.clone() };
            let (coarse, fine) = (source.collected(3e-2), source.collected(wanted));
            let (one, two) = (source.in_histories(&coarse.lab), source.in_histories(&fine.lab));
            let change = (one.coherence() - two.coherence()).abs();
            assert!(change <= coarse.error + fine.error, "{change} of {}", coarse.error);
        }
    }
}

#[test]
fn a_crystal_sliced_in_two_makes_the_same_pairs() {
    let tilted = |source: &Source| {
        let mut crystals = source.crystals.clone();
        crystals.iter_mut().for_each(|crystal| crystal.orientation.tilt = Angle::from_degrees(0.4));
        Source::new(crystals, source.interaction, source.bench.clone())
    };
    let upright = sources();
    let tilted: Vec<Source> = upright.iter().take(1).map(tilted).collect();
    for source in upright.into_iter().chain(tilted) {
        let mut sliced = source.clone();
        let first = &source.crystals[0];
        let part =
            |share: f64| Crystal { length: Length::metres(first.length.si() * share), ..first.clone() };
        sliced.crystals = vec![part(0.3), part(0.7)];
        sliced.crystals.extend(source.crystals[1..].iter().cloned());
        sliced.bench.gaps = vec![Length::default(), Length::default(), Length::metres(50e-6)];
        if source.crystals.len() > 1 {
            sliced.pair.second.crystal = 2;
        }
        let difference = apart(&source.collected(1e-5).lab, &sliced.collected(1e-5).lab);
        assert!(difference < 1e-6, "{difference}");
    }
}
