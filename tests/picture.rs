//! The picture of frames and signs, sentence by sentence, for a crystal cut at theta = 30 deg.

use std::sync::Arc;

use approx::assert_abs_diff_eq;
use nalgebra::{Matrix3, Vector3};
use twincone::frame::{Dielectric, Direction, Lab, Mount, Reversal};
use twincone::matching::{Cones, Emission, Interaction, Photons, Want, cones};
use twincone::material::Catalogue;
use twincone::optics::{Crystal, Polarization};
use twincone::quantity::{Angle, Length, Wavelength};

/// Negative uniaxial, face normal 30 deg from Z: type II pairs of a 700 nm pump.
fn crystal(phi: f64) -> Crystal {
    let bbo = Arc::new(Catalogue::default().get("bbo").expect("a compiled-in crystal"));
    Crystal::new(bbo, None).expect("the default data set").with_cut(30.0, phi)
}

fn tilted(degrees: f64) -> Crystal {
    let mut crystal = crystal(70.0);
    crystal.orientation.tilt = Angle::from_degrees(degrees);
    crystal
}

fn cross_tilted(degrees: f64) -> Crystal {
    let mut crystal = crystal(70.0);
    crystal.orientation.cross_tilt = Angle::from_degrees(degrees);
    crystal
}

fn rolled(degrees: f64) -> Crystal {
    let mut crystal = crystal(70.0);
    crystal.orientation.roll = Angle::from_degrees(degrees);
    crystal
}

fn reversed(reversal: Reversal) -> Crystal {
    Crystal { reversal, ..crystal(70.0) }
}

/// Where Z points in the lab; an axis has no head, so the end that points downstream.
fn z_axis(crystal: &Crystal) -> Vector3<f64> {
    let placement = crystal.placement();
    let Lab(z) = placement.to_lab(Mount(placement.dielectric_axes() * Vector3::z()));
    if z.z < 0.0 { -z } else { z }
}

/// The face normal in the lab.
fn face_normal(crystal: &Crystal) -> Vector3<f64> {
    crystal.placement().to_lab(Mount(Vector3::z())).0
}

/// Wave vector of the pump inside the crystal, in the mount frame.
fn pump_wave(crystal: &Crystal) -> Vector3<f64> {
    let photons = Photons::new(pump(), pump().doubled()).expect("longer than the pump");
    let emission = Emission::of(crystal, photons).expect("indices");
    let roles = emission.roles(Interaction::Two).expect("roles")[0];
    emission.pairing(roles, Direction::forward()).expect("waves").pump.k.0
}

/// Angle to Z and azimuth from X, in degrees, of that wave vector.
fn pump_inside(crystal: &Crystal) -> [f64; 2] {
    let Dielectric(k) = crystal.placement().to_dielectric(Mount(pump_wave(crystal)));
    [k.xy().norm().atan2(k.z).to_degrees(), k.y.atan2(k.x).to_degrees()]
}

fn pump() -> Wavelength {
    Wavelength::from_nm(700.0)
}

fn light(crystal: Crystal) -> Cones {
    cones(&[crystal], pump(), &[pump().doubled()], Interaction::Two, Want::Both).expect("indices")
}

/// Horizontal and vertical angle of the axis of the ring of this polarization.
fn ring_axis(crystal: Crystal, polarization: Polarization) -> [f64; 2] {
    let found = light(crystal);
    let row = found.rings.iter().find(|r| r.polarization == polarization).expect("a row");
    let axis = row.ring.as_ref().expect("a ring").axis;
    [axis.h_deg(), axis.v_deg()]
}

#[test]
fn the_lab() {
    let [x, y, z] = [Vector3::x(), Vector3::y(), Vector3::z()];
    // The lab is right-handed: x turns into y about z.
    assert_eq!(Matrix3::from_columns(&[x, y, z]).determinant(), 1.0);
    // z runs along the pump.
    assert_eq!(Direction::forward().lab().0, z);
    // h grows towards +x.
    assert!(Direction::new(Lab(z + 0.1 * x)).h_deg() > 0.0);
    // v grows upwards, towards +y.
    assert!(Direction::new(Lab(z + 0.1 * y)).v_deg() > 0.0);
    // Looking along the beam with y up, your right hand is at z x y, which is -x; so +x is on the left.
    assert_eq!(z.cross(&y), -x);
    // Azimuth runs from +x towards +y.
    assert_eq!(Direction::new(Lab(z + 0.1 * y)).azimuth_deg(), 90.0);
}

#[test]
fn the_cut() {
    let normal_in_crystal = crystal(70.0).placement().to_dielectric(Mount(Vector3::z())).0;
    // theta is the angle between the face normal and Z.
    assert_abs_diff_eq!(normal_in_crystal.z.acos().to_degrees(), 30.0, epsilon = 1e-12);
    // phi is the azimuth of the normal from X.
    assert_abs_diff_eq!(normal_in_crystal.y.atan2(normal_in_crystal.x).to_degrees(), 70.0, epsilon = 1e-12);
    // At roll 0 Z leans by theta towards +x, to the left looking along the beam, and neither up nor down.
    assert_abs_diff_eq!(z_axis(&crystal(70.0)), Vector3::new(0.5, 0.0, 0.75_f64.sqrt()), epsilon = 1e-15);
    // At roll 90 deg Z leans up.
    assert_abs_diff_eq!(z_axis(&rolled(90.0)), Vector3::new(0.0, 0.5, 0.75_f64.sqrt()), epsilon = 1e-15);
}

#[test]
fn the_turns() {
    let [theta, phi] = pump_inside(&crystal(70.0));
    // Positive tilt turns the face normal towards +x,
    assert!(face_normal(&tilted(2.0)).x > 0.0);
    // and increases theta inside,
    assert!(pump_inside(&tilted(2.0))[0] > theta + 1.0);
    // as negative tilt decreases it.
    assert!(pump_inside(&tilted(-2.0))[0] < theta - 1.0);
    // Tilt leaves phi inside alone.
    assert_abs_diff_eq!(pump_inside(&tilted(2.0))[1], phi, epsilon = 1e-9);
    // Positive cross tilt increases phi inside.
    assert!(pump_inside(&cross_tilted(2.0))[1] > phi + 1.0);
    // Inside the turn is smaller, by refraction: sin(tilt) = n sin(change of theta), n the index that the pump sees.
    let n = pump_wave(&tilted(2.0)).norm() / pump().wavenumber();
    let change = (2f64.to_radians().sin() / n).asin().to_degrees();
    assert_abs_diff_eq!(pump_inside(&tilted(2.0))[0], theta + change, epsilon = 1e-9);
}

#[test]
fn the_rings() {
    use Polarization::{Extraordinary, Ordinary};
    let [h, v] = ring_axis(crystal(70.0), Extraordinary);
    // The e ring lies on the side Z leans to, +x,
    assert!(h > 1.0);
    // level with the pump.
    assert_abs_diff_eq!(v, 0.0, epsilon = 1e-9);
    // The o ring lies on the other side.
    assert!(ring_axis(crystal(70.0), Ordinary)[0] < -1.0);
    // At roll 90 deg the e ring lies up, +y.
    assert_abs_diff_eq!(ring_axis(rolled(90.0), Extraordinary)[1], h, epsilon = 1e-9);
    // At roll 180 deg it lies at -x.
    assert_abs_diff_eq!(ring_axis(rolled(180.0), Extraordinary)[0], -h, epsilon = 1e-9);
    // The light of the e ring is polarized horizontally, in the plane of Z and the pump,
    let azimuth = |n: usize| light(crystal(70.0)).rings[n].field_azimuth.expect("a field");
    assert_abs_diff_eq!(azimuth(0), 0.0, epsilon = 1e-6);
    // that of the o ring vertically.
    assert_abs_diff_eq!(azimuth(1), 90.0, epsilon = 1e-6);
    // The rings cross above and below the pump.
    let found = light(crystal(70.0));
    let pair = found.crossings[0].crossing.expect("a crossing");
    assert_abs_diff_eq!(pair.direction.h_deg(), 0.0, epsilon = 1e-6);
    // Of the two, a is the upper.
    assert!(pair.direction.v_deg() > 1.0);
}

#[test]
fn a_crystal_put_in_the_other_way_round() {
    let [h, _] = ring_axis(crystal(70.0), Polarization::Extraordinary);
    let e_ring = |reversal| ring_axis(reversed(reversal), Polarization::Extraordinary)[0];
    // Turned half round about the beam, its e ring changes sides.
    assert_abs_diff_eq!(e_ring(Reversal::AboutBeam), -h, epsilon = 1e-9);
    // Turned half round about the vertical, other face first, it stays where it was: an axis has no head.
    assert_abs_diff_eq!(e_ring(Reversal::AboutVertical), h, epsilon = 1e-9);
    // About the horizontal it changes sides.
    assert_abs_diff_eq!(e_ring(Reversal::AboutHorizontal), -h, epsilon = 1e-9);
    // About the beam, positive tilt now decreases theta inside.
    let tilted = Crystal { reversal: Reversal::AboutBeam, ..tilted(2.0) };
    assert!(pump_inside(&tilted)[0] < 30.0 - 1.0);
}

#[test]
fn the_screen() {
    let distance = Length::metres(0.8);
    let d = Direction::from_angles(Angle::from_degrees(3.0), Angle::from_degrees(-2.0));
    let (x, y) = d.on_screen_mm(distance);
    // x mm on the screen is the distance times tan h,
    assert_abs_diff_eq!(x, 800.0 * 3f64.to_radians().tan(), epsilon = 1e-9);
    // y mm the distance times tan v,
    assert_abs_diff_eq!(y, -800.0 * 2f64.to_radians().tan(), epsilon = 1e-9);
    // from where the undeviated pump hits.
    assert_eq!(Direction::forward().on_screen_mm(distance), (0.0, 0.0));
}
