//! A plane-parallel plate as polarization optics: what it does to a plane wave of a given direction outside.

use nalgebra::{Complex, Matrix2, Matrix3, Rotation3, Vector2, Vector3};

use super::state::Amplitude;
use crate::frame::{Dielectric, Placement, Tangential};
use crate::material::MaterialError;
use crate::optics::{Crystal, Medium, Sheet, Wave};
use crate::quantity::Wavelength;

/// A crystal or plate as it stands in the lab.
#[derive(Debug, Clone)]
pub struct Slab {
    pub crystal: Crystal,
    /// Columns u, v, w in the lab.
    pub mount: Matrix3<f64>,
    /// Columns X, Y, Z in the mount frame.
    pub axes: Matrix3<f64>,
    /// Along w, m.
    pub length: f64,
    /// Whether H and V are exchanged before and behind it.
    pub exchanged: bool,
}

/// A plane wave outside: its transverse basis is H = lab x made perpendicular to the direction, V = direction x H.
#[derive(Debug, Clone, Copy)]
pub struct Ray {
    /// Vacuum wavenumber, rad/m.
    pub k0: f64,
    /// Unit direction, lab.
    pub d: Vector3<f64>,
    pub h: Vector3<f64>,
    pub v: Vector3<f64>,
}

impl Ray {
    pub fn new(k0: f64, d: Vector3<f64>) -> Self {
        // a direction along x itself lies outside every search region
        let h = (Vector3::x() - d * d.x).try_normalize(1e-9).unwrap_or_else(Vector3::z);
        Self { k0, d, h, v: d.cross(&h) }
    }

    /// e^(i k.r) for a displacement in air, m.
    pub fn phase(&self, displacement: &Vector3<f64>) -> Amplitude {
        Complex::cis(self.k0 * self.d.dot(displacement))
    }

    /// The unit transverse part of a field, in H and V.
    pub fn transverse(&self, field: &Vector3<f64>) -> Vector2<f64> {
        let across = Vector2::new(self.h.dot(field), self.v.dot(field));
        across.try_normalize(1e-9).unwrap_or(Vector2::x())
    }
}

impl Slab {
    /// A crystal in the lab.
    pub fn new(crystal: &Crystal) -> Self {
        let rotation = crystal.orientation.rotation();
        Self::in_frame(crystal, &Matrix3::identity(), &rotation)
    }

    /// A plate whose mount refers to the frame with the given columns in the lab.
    pub fn in_arm(plate: &Crystal, arm: &Ray) -> Self {
        let frame = Matrix3::from_columns(&[arm.h, arm.v, arm.d]);
        Self::in_frame(plate, &frame, &plate.orientation.rotation())
    }

    fn in_frame(crystal: &Crystal, frame: &Matrix3<f64>, rotation: &Rotation3<f64>) -> Self {
        let placement = Placement::new(crystal.cut, crystal.reversal, &crystal.orientation);
        Self {
            crystal: crystal.clone(),
            mount: frame * rotation.matrix(),
            axes: placement.dielectric_axes(),
            length: crystal.hot_length().si(),
            exchanged: false,
        }
    }

    /// Face normal, lab.
    pub fn normal(&self) -> Vector3<f64> {
        self.mount.column(2).into_owned()
    }

    pub fn medium(&self, wavelength: Wavelength) -> Result<Medium, MaterialError> {
        Ok(Medium::new(&self.crystal.principal(wavelength)?, self.axes))
    }

    /// What the faces conserve of a lab wave vector, rad/m.
    pub fn tangential(&self, k: &Vector3<f64>) -> Tangential {
        Tangential { u: self.mount.column(0).dot(k), v: self.mount.column(1).dot(k) }
    }

    /// Direction outside of a wave of this tangential wave vector; `None` where it is totally reflected.
    pub fn outside(&self, q: Tangential, k0: f64) -> Option<Vector3<f64>> {
        let (u, v) = (q.u / k0, q.v / k0);
        let w2 = 1.0 - u * u - v * v;
        (w2 > 0.0).then(|| self.mount * Vector3::new(u, v, w2.sqrt()))
    }

    /// The wave of one sheet that a ray outside becomes.
    pub fn wave(&self, medium: &Medium, sheet: Sheet, ray: &Ray) -> Option<Wave> {
        medium.wave(sheet, self.tangential(&(ray.d * ray.k0)))
    }

    /// A wave's unit field in the lab.
    pub fn field(&self, wave: &Wave) -> Vector3<f64> {
        self.mount * wave.field.0
    }

    /// A wave's unit field along the dielectric axes.
    pub fn dielectric(&self, wave: &Wave) -> Dielectric {
        Dielectric(self.axes.tr_mul(&wave.field.0))
    }

    /// Fast and slow wave, with their transverse unit fields as columns.
    pub fn modes(&self, medium: &Medium, ray: &Ray) -> Option<Modes> {
        let q = self.tangential(&(ray.d * ray.k0));
        let (fast, slow) = (medium.wave(Sheet::Fast, q)?, medium.wave(Sheet::Slow, q)?);
        let [f, s] = [&fast, &slow].map(|wave| ray.transverse(&self.field(wave)));
        Some(Modes { k_w: [fast.k.0.z, slow.k.0.z], fields: Matrix2::from_columns(&[f, s]) })
    }

    /// Transverse field behind the slab, straight across, for that before it; Fresnel factors are 1.
    pub fn transfer(&self, medium: &Medium, ray: &Ray) -> Option<Matrix2<Amplitude>> {
        self.modes(medium, ray)?.transfer(self.length)
    }
}

/// The two waves of a slab.
#[derive(Debug, Clone, Copy)]
pub struct Modes {
    /// Normal components of the wave vectors, fast and slow, rad/m.
    pub k_w: [f64; 2],
    /// Transverse unit fields as columns.
    pub fields: Matrix2<f64>,
}

impl Modes {
    /// T diag(e^(i k_w L)) T^-1 with the modes' transverse fields as columns of T: both coherently.
    pub fn transfer(&self, length: f64) -> Option<Matrix2<Amplitude>> {
        let inverse = self.fields.try_inverse()?.map(Complex::from);
        let [fast, slow] = self.k_w.map(|k| Complex::cis(k * length));
        let diagonal = Matrix2::from_diagonal(&Vector2::new(fast, slow));
        Some(self.fields.map(Complex::from) * diagonal * inverse)
    }
}
