//! Lab, mount and dielectric frames, and the turns between them.
//!
//! - *Lab*: z is the pump's direction in air, y points up, and x completes a right-handed set: standing behind the laser
//!   one has +x on the left.
//! - *Mount* (u, v, w): turns with the crystal. w leaves the exit face at right angles, u points where Z leans, v is
//!   w x u.
//! - *Dielectric* (X, Y, Z): the axes in which the permittivity is diagonal; in uniaxial crystals Z is the optic axis.
//!
//! A vector carries its frame in its type; only [`Cut`] and [`Orientation`] change frames.

use nalgebra::{Matrix3, Rotation3, Unit, Vector3};

use crate::quantity::{Angle, Length, tidy};

/// Components along lab x, y, z.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Lab(pub Vector3<f64>);

/// Components along mount u, v, w.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Mount(pub Vector3<f64>);

/// Components along the dielectric X, Y, Z.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Dielectric(pub Vector3<f64>);

/// Wave-vector components along u and v, which a plane face conserves; rad/m.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Tangential<T = f64> {
    /// Along u.
    pub u: T,
    /// Along v.
    pub v: T,
}

impl<T: std::ops::Sub<Output = T>> std::ops::Sub for Tangential<T> {
    type Output = Self;

    fn sub(self, other: Self) -> Self {
        Self { u: self.u - other.u, v: self.v - other.v }
    }
}

/// A direction in air, in the lab.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Direction(Unit<Vector3<f64>>);

impl Direction {
    /// Along the pump.
    #[must_use]
    pub fn forward() -> Self {
        Self(Vector3::z_axis())
    }

    /// From any vector but zero.
    #[must_use]
    pub fn new(vector: Lab) -> Self {
        Self(Unit::new_normalize(vector.0))
    }

    /// From the horizontal and vertical angle, h = atan2(dx, dz), v = atan2(dy, dz).
    #[must_use]
    pub fn from_angles(h: Angle, v: Angle) -> Self {
        Self::new(Lab(Vector3::new(h.si().tan(), v.si().tan(), 1.0)))
    }

    /// Towards a place on a screen at `distance`, perpendicular to the pump.
    #[must_use]
    pub fn from_screen(x: Length, y: Length, distance: Length) -> Self {
        Self::new(Lab(Vector3::new(x.si(), y.si(), distance.si())))
    }

    /// Unit vector in the lab.
    #[must_use]
    pub fn lab(self) -> Lab {
        Lab(self.0.into_inner())
    }

    /// Horizontal angle atan2(dx, dz) in degrees, positive towards +x.
    #[must_use]
    pub fn h_deg(self) -> f64 {
        self.0.x.atan2(self.0.z).to_degrees()
    }

    /// Vertical angle atan2(dy, dz) in degrees, positive upwards.
    #[must_use]
    pub fn v_deg(self) -> f64 {
        self.0.y.atan2(self.0.z).to_degrees()
    }

    /// Angle from the pump in degrees.
    #[must_use]
    pub fn polar_deg(self) -> f64 {
        self.0.xy().norm().atan2(self.0.z).to_degrees()
    }

    /// Angle about the pump in degrees, from +x towards +y.
    #[must_use]
    pub fn azimuth_deg(self) -> f64 {
        // along the pump there is no azimuth
        if self.0.xy().norm() < 1e-12 { 0.0 } else { self.0.y.atan2(self.0.x).to_degrees() }
    }

    /// Angle to another direction in radians, accurate for small and large angles.
    #[must_use]
    pub fn angle_to(self, other: Self) -> f64 {
        self.0.cross(&other.0).norm().atan2(self.0.dot(&other.0))
    }

    /// Place on a screen at `distance` (m), from where the undeviated pump hits: (x, y) in mm.
    #[must_use]
    pub fn on_screen_mm(self, distance: Length) -> (f64, f64) {
        let scale = distance.si() * 1e3 / self.0.z;
        (self.0.x * scale, self.0.y * scale)
    }
}

/// How a face is cut: polar angle and azimuth of the face normal in the dielectric frame.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Cut {
    /// Between face normal and Z, 0 to 180 deg.
    pub theta: Angle,
    /// Of the normal's projection on the XY plane, from X.
    pub phi: Angle,
}

impl Cut {
    /// Mount axes u, v, w in the dielectric frame.
    ///
    /// u = (-cos t cos p, -cos t sin p, sin t), v = w x u, w = (sin t cos p, sin t sin p, cos t).
    #[must_use]
    pub fn axes(self) -> [Dielectric; 3] {
        let (st, ct) = self.theta.si().sin_cos();
        let (sp, cp) = self.phi.si().sin_cos();
        let w = Vector3::new(st * cp, st * sp, ct);
        let u = Vector3::new(-ct * cp, -ct * sp, st);
        [Dielectric(u), Dielectric(w.cross(&u)), Dielectric(w)]
    }

    /// Matrix whose columns are X, Y, Z in the mount frame.
    #[must_use]
    pub fn dielectric_in_mount(self) -> Matrix3<f64> {
        let [u, v, w] = self.axes();
        Matrix3::from_rows(&[u.0.transpose(), v.0.transpose(), w.0.transpose()])
    }
}

/// Half a turn given to a crystal before it is mounted.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Reversal {
    /// Mounted as drawn.
    #[default]
    None,
    /// About the beam: Z leans to the other side.
    AboutBeam,
    /// About the vertical: other face first.
    AboutVertical,
    /// About the horizontal: other face first, upside down.
    AboutHorizontal,
}

impl Reversal {
    /// The half turn as a matrix in the mount frame.
    fn matrix(self) -> Matrix3<f64> {
        let diagonal = match self {
            Self::None => Vector3::new(1.0, 1.0, 1.0),
            Self::AboutBeam => Vector3::new(-1.0, -1.0, 1.0),
            Self::AboutVertical => Vector3::new(-1.0, 1.0, -1.0),
            Self::AboutHorizontal => Vector3::new(1.0, -1.0, -1.0),
        };
        Matrix3::from_diagonal(&diagonal)
    }
}

/// How a mount stands in the lab.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Orientation {
    /// About v; positive increases the effective theta.
    pub tilt: Angle,
    /// About u; positive increases the effective phi where sin theta > 0.
    pub cross_tilt: Angle,
    /// About w; 90 deg lets Z lean up instead of towards +x.
    pub roll: Angle,
    /// Turn of the common mount about lab x, after everything above.
    pub about_x: Angle,
    /// Turn of the common mount about lab y, last of all.
    pub about_y: Angle,
}

impl Orientation {
    /// Active rotation mount -> lab: Ry(about_y) Rx(about_x) Rz(roll) Ry(tilt) Rx(-cross_tilt).
    #[must_use]
    pub fn rotation(&self) -> Rotation3<f64> {
        let about = |axis: Unit<Vector3<f64>>, angle: f64| Rotation3::from_axis_angle(&axis, angle);
        about(Vector3::y_axis(), self.about_y.si())
            * about(Vector3::x_axis(), self.about_x.si())
            * about(Vector3::z_axis(), self.roll.si())
            * about(Vector3::y_axis(), self.tilt.si())
            * about(Vector3::x_axis(), -self.cross_tilt.si())
    }
}

/// Lab axes about which a mount turns, right-handed, when one of its angles grows.
#[derive(Debug, Clone, Copy)]
pub struct TurningAxes {
    /// Of `tilt`.
    pub tilt: Vector3<f64>,
    /// Of `cross_tilt`.
    pub cross_tilt: Vector3<f64>,
    /// Of `roll`.
    pub roll: Vector3<f64>,
}

impl Orientation {
    /// The axes of tilt, cross tilt and roll: each carried along by the rotations that follow it in [`Self::rotation`].
    #[must_use]
    pub fn turning_axes(&self) -> TurningAxes {
        let common = Self { about_x: self.about_x, about_y: self.about_y, ..Self::default() };
        let rolled = Self { roll: self.roll, ..common };
        let tilted = Self { tilt: self.tilt, ..rolled };
        TurningAxes {
            tilt: rolled.rotation() * Vector3::y(),
            cross_tilt: tilted.rotation() * -Vector3::x(),
            roll: common.rotation() * Vector3::z(),
        }
    }
}

/// Mount axes about which the dielectric axes turn, right-handed, when an angle of the cut grows.
#[derive(Debug, Clone, Copy)]
pub struct CutAxes {
    /// Of `theta`.
    pub theta: Vector3<f64>,
    /// Of `phi`.
    pub phi: Vector3<f64>,
}

impl Placement {
    /// The axes of theta and phi: du/d theta = w and dw/d theta = -u turn everything about v as it stands in the mount;
    /// the face turns about Z by phi, and so Z's surroundings turn back as seen from the face.
    #[must_use]
    pub fn cut_axes(&self, reversal: Reversal) -> CutAxes {
        CutAxes { theta: reversal.matrix() * Vector3::y(), phi: -self.mount_from_dielectric.column(2) }
    }
}

/// Where a crystal's dielectric axes and its mount are, worked out: turns vectors between the three frames.
#[derive(Debug, Clone, Copy)]
pub struct Placement {
    lab_from_mount: Rotation3<f64>,
    mount_from_dielectric: Matrix3<f64>,
}

impl Placement {
    /// A crystal of this cut, turned round or not, in a mount that stands so.
    #[must_use]
    pub fn new(cut: Cut, reversal: Reversal, orientation: &Orientation) -> Self {
        Self {
            lab_from_mount: orientation.rotation(),
            mount_from_dielectric: reversal.matrix() * cut.dielectric_in_mount(),
        }
    }

    /// Columns X, Y, Z in the mount frame.
    #[must_use]
    pub fn dielectric_axes(&self) -> Matrix3<f64> {
        self.mount_from_dielectric
    }

    /// Lab components of the mount's u and v: what a face conserves of a lab vector.
    #[must_use]
    pub fn face_axes(&self) -> [Vector3<f64>; 2] {
        [self.lab_from_mount * Vector3::x(), self.lab_from_mount * Vector3::y()]
    }

    /// Lab components of a mount vector.
    #[must_use]
    pub fn to_lab(&self, vector: Mount) -> Lab {
        Lab(self.lab_from_mount * vector.0)
    }

    /// Mount components of a lab vector.
    #[must_use]
    pub fn to_mount(&self, vector: Lab) -> Mount {
        Mount(self.lab_from_mount.inverse_transform_vector(&vector.0))
    }

    /// Dielectric components of a mount vector.
    #[must_use]
    pub fn to_dielectric(&self, vector: Mount) -> Dielectric {
        Dielectric(self.mount_from_dielectric.tr_mul(&vector.0))
    }
}

/// Angle in degrees folded into [0, 360), free of conversion noise.
#[must_use]
pub fn full_circle_deg(radians: f64) -> f64 {
    let degrees = tidy(radians.to_degrees()).rem_euclid(360.0);
    if degrees >= 360.0 { 0.0 } else { degrees }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn place(theta: f64, phi: f64, orientation: &Orientation) -> Placement {
        let cut = Cut { theta: Angle::from_degrees(theta), phi: Angle::from_degrees(phi) };
        Placement::new(cut, Reversal::None, orientation)
    }

    fn pump_in_crystal(placement: &Placement) -> (f64, f64) {
        let d = placement.to_dielectric(placement.to_mount(Lab(Vector3::z()))).0;
        (d.z.acos().to_degrees(), full_circle_deg(d.y.atan2(d.x)))
    }

    /// The picture of the README, in words: Z leans towards +x (left of who looks along the beam).
    #[test]
    fn untilted_z_leans_towards_plus_x() {
        let placement = place(30.0, 70.0, &Orientation::default());
        let z = placement.to_lab(Mount(placement.dielectric_axes() * Vector3::z())).0;
        assert_abs_diff_eq!(z, Vector3::new(0.5, 0.0, 3f64.sqrt() / 2.0), epsilon = 1e-15);
    }

    #[test]
    fn roll_of_a_quarter_turn_lets_z_lean_up() {
        let rolled = Orientation { roll: Angle::from_degrees(90.0), ..Default::default() };
        let placement = place(30.0, 70.0, &rolled);
        let z = placement.to_lab(Mount(placement.dielectric_axes() * Vector3::z())).0;
        assert_abs_diff_eq!(z, Vector3::new(0.0, 0.5, 3f64.sqrt() / 2.0), epsilon = 1e-15);
    }

    #[test]
    fn positive_tilt_adds_to_theta_and_cross_tilt_to_phi() {
        let tilted = Orientation { tilt: Angle::from_degrees(2.0), ..Default::default() };
        let (theta, phi) = pump_in_crystal(&place(30.0, 70.0, &tilted));
        assert_abs_diff_eq!(theta, 32.0, epsilon = 1e-12);
        assert_abs_diff_eq!(phi, 70.0, epsilon = 1e-12);
        let crossed = Orientation { cross_tilt: Angle::from_degrees(2.0), ..Default::default() };
        let (theta, phi) = pump_in_crystal(&place(90.0, 70.0, &crossed));
        assert_abs_diff_eq!(theta, 90.0, epsilon = 1e-12);
        assert_abs_diff_eq!(phi, 72.0, epsilon = 1e-12);
    }

    #[test]
    fn turning_round_about_the_axis_across_the_z_plane_changes_nothing() {
        let cut = Cut { theta: Angle::from_degrees(30.0), phi: Angle::from_degrees(0.0) };
        let z = |reversal| {
            Placement::new(cut, reversal, &Orientation::default()).dielectric_axes() * Vector3::z()
        };
        // an axis has no head: compare up to sign
        assert_abs_diff_eq!(z(Reversal::AboutVertical), -z(Reversal::None), epsilon = 1e-15);
        assert_abs_diff_eq!(z(Reversal::AboutBeam).x, -z(Reversal::None).x, epsilon = 1e-15);
        assert_abs_diff_eq!(z(Reversal::AboutHorizontal), -z(Reversal::AboutBeam), epsilon = 1e-15);
    }

    #[test]
    fn screen_and_angles_agree() {
        let d = Direction::from_angles(Angle::from_degrees(3.0), Angle::from_degrees(-2.0));
        assert_abs_diff_eq!(d.h_deg(), 3.0, epsilon = 1e-13);
        assert_abs_diff_eq!(d.v_deg(), -2.0, epsilon = 1e-13);
        let (x, y) = d.on_screen_mm(Length::metres(1.0));
        let back =
            Direction::from_screen(Length::metres(x * 1e-3), Length::metres(y * 1e-3), Length::metres(1.0));
        assert_abs_diff_eq!(back.angle_to(d), 0.0, epsilon = 1e-15);
    }

    #[test]
    fn the_mount_is_right_handed_at_every_cut() {
        for theta in [0.0, 12.0, 90.0, 151.7, 180.0] {
            let m = place(theta, 33.0, &Orientation::default()).dielectric_axes();
            assert_abs_diff_eq!(m.determinant(), 1.0, epsilon = 1e-14);
        }
    }
}
