//! Waves at a tangential wave vector against the 4x4 matrix of D. W. Berreman, J. Opt. Soc. Am. 62, 502 (1972), worked
//! out to 80 digits by a program that shares no formula with the crate (tests/reference/README.md).

use nalgebra::Vector3;
use serde::Deserialize;
use twincone::frame::{Cut, Tangential};
use twincone::material::{Index, Optic, Principal};
use twincone::optics::{Medium, Polarization, Sheet, Wave};
use twincone::quantity::{Angle, SPEED_OF_LIGHT, Wavelength};

const TABLE: &str = include_str!("reference/berreman.csv");

#[derive(Debug, Clone, Deserialize)]
#[allow(non_snake_case, reason = "names of the table's columns")]
struct Row {
    case: u32,
    kind: String,
    n_x: f64,
    n_y: f64,
    n_z: f64,
    theta_deg: f64,
    phi_deg: f64,
    q_u: f64,
    q_v: f64,
    sheet: String,
    k_w: f64,
    E_u: f64,
    E_v: f64,
    E_w: f64,
    S_u: f64,
    S_v: f64,
    S_w: f64,
    dnx: f64,
    dny: f64,
    dnz: f64,
    group_index_w: f64,
}

/// What distinguishes two waves: relative in `k_w` and `group`, length of the difference in the unit vectors.
#[derive(Debug, Clone, Copy)]
struct Difference {
    k_w: f64,
    field: f64,
    ray: f64,
    group: f64,
}

impl Difference {
    fn within(&self, limit: &Self) -> bool {
        // written so that NaN fails
        self.k_w <= limit.k_w
            && self.field <= limit.field
            && self.ray <= limit.ray
            && self.group <= limit.group
    }
}

impl Row {
    fn all() -> Vec<Self> {
        csv::Reader::from_reader(TABLE.as_bytes())
            .deserialize()
            .collect::<Result<_, _>>()
            .expect("a readable table")
    }

    fn optic(&self) -> Optic {
        match self.kind.as_str() {
            "uniaxial" => Optic::Uniaxial,
            "biaxial" => Optic::Biaxial,
            other => panic!("case {}: kind `{other}`", self.case),
        }
    }

    fn sheet(&self) -> Sheet {
        match self.sheet.as_str() {
            "fast" => Sheet::Fast,
            "slow" => Sheet::Slow,
            other => panic!("case {}: sheet `{other}`", self.case),
        }
    }

    fn medium(&self, optic: Optic) -> Medium {
        let wavelength = Wavelength::metres(1e-6);
        // dn/dlambda = -(dn/dln omega)/lambda; second derivatives play no part
        let index = |n: f64, dn: f64| Index { n, slope: -dn / wavelength.um(), curvature: 0.0 };
        let axes = [index(self.n_x, self.dnx), index(self.n_y, self.dny), index(self.n_z, self.dnz)];
        let cut = Cut { theta: Angle::from_degrees(self.theta_deg), phi: Angle::from_degrees(self.phi_deg) };
        Medium::new(&Principal { wavelength, axes, optic }, cut.dielectric_in_mount())
    }

    fn tangential(&self, medium: &Medium) -> Tangential {
        Tangential { u: self.q_u * medium.k0(), v: self.q_v * medium.k0() }
    }

    fn wave(&self, optic: Optic) -> Wave {
        let medium = self.medium(optic);
        let wave = medium.wave(self.sheet(), self.tangential(&medium));
        wave.unwrap_or_else(|| panic!("case {} {}: no wave", self.case, self.sheet))
    }

    fn difference(&self, wave: &Wave) -> Difference {
        let k0 = self.medium(self.optic()).k0();
        let field = Vector3::new(self.E_u, self.E_v, self.E_w);
        let ray = Vector3::new(self.S_u, self.S_v, self.S_w);
        Difference {
            k_w: (wave.k.0.z / (k0 * self.k_w) - 1.0).abs(),
            // the sign of a field is arbitrary
            field: (wave.field.0 - field).norm().min((wave.field.0 + field).norm()),
            ray: (wave.ray.0 - ray).norm(),
            group: (wave.delay * SPEED_OF_LIGHT / self.group_index_w - 1.0).abs(),
        }
    }

    /// What double precision allows. One rounding is 1.1e-16; some ten of them add up in k_w and, where fast and slow
    /// are well apart, in everything else.
    fn limit(&self) -> Difference {
        let plain = Difference { k_w: 1e-14, field: 5e-14, ray: 1e-14, group: 1e-14 };
        match self.case {
            1..=205 | 217 | 218 => plain,
            // 1e-3 rad from an optic axis: roundings in wave vector and axis turn the field by 1e3 times their size;
            // the ray follows it round the cone of conical refraction, 0.03 to 0.1 rad wide, and the group index
            // with it
            206 | 208 | 209 | 211 | 212 | 215 => {
                Difference { field: 1e-12, ray: 5e-14, group: 5e-14, ..plain }
            }
            // 1e-5 rad from an optic axis: a hundred times that
            207 | 210 | 213 | 214 | 216 => Difference { field: 1e-10, ray: 5e-12, group: 5e-12, ..plain },
            // birefringence 1e-6: the place of two optic axes, sin^2 V = (alpha - beta)/(alpha - gamma), is known to
            // 1.1e-16/1e-6 only, and the fields no better; rays hardly depend on it, group indices by the difference
            // of dispersion, up to 0.05
            219 | 220 => Difference { field: 1e-10, group: 1e-12, ..plain },
            other => panic!("case {other} has no tolerance"),
        }
    }
}

fn check(optic_of: impl Fn(&Row) -> Optic, rows: &[Row]) {
    for row in rows {
        let (difference, limit) = (row.difference(&row.wave(optic_of(row))), row.limit());
        assert!(difference.within(&limit), "case {} {}: {difference:?}", row.case, row.sheet);
    }
}

fn uniaxial() -> Vec<Row> {
    let rows: Vec<Row> = Row::all().into_iter().filter(|r| r.optic() == Optic::Uniaxial).collect();
    assert!(rows.len() >= 200, "{} rows", rows.len());
    rows
}

#[test]
fn waves_of_every_case_agree() {
    let rows = Row::all();
    assert_eq!(rows.len(), 440);
    check(Row::optic, &rows);
}

#[test]
fn uniaxial_crystals_solved_as_biaxial_ones_agree() {
    check(|_| Optic::Biaxial, &uniaxial());
}

/// Both code paths see the same rounded inputs, so they may differ less than either from the table.
#[test]
fn both_ways_to_solve_a_uniaxial_crystal_agree() {
    for row in uniaxial() {
        let (one, two) = (row.wave(Optic::Uniaxial), row.wave(Optic::Biaxial));
        let k_w = (one.k.0.z / two.k.0.z - 1.0).abs();
        let delay = (one.delay / two.delay - 1.0).abs();
        let ray = (one.ray.0 - two.ray.0).norm();
        // some ten roundings each, near the axis too: there the sheets touch as smooth surfaces
        assert!(k_w <= 2e-15 && delay <= 2e-15 && ray <= 2e-15, "case {}: {k_w} {delay} {ray}", row.case);
        let field = (one.field.0 - two.field.0).norm().min((one.field.0 + two.field.0).norm());
        // the field turns about the axis with the wave vector: `limit` counts the roundings near it
        assert!(field <= row.limit().field, "case {}: {field}", row.case);
    }
}

/// o: k = n_o k0 whatever the direction, the field across the optic axis, no walk-off.
#[test]
fn ordinary_waves_of_uniaxial_crystals_are_spherical() {
    for row in uniaxial() {
        let medium = row.medium(Optic::Uniaxial);
        let sheet = medium.sheet(Polarization::Ordinary).expect("o is a wave of uniaxial crystals");
        let ordinary = if row.n_x < row.n_z { Sheet::Fast } else { Sheet::Slow };
        assert_eq!(sheet, ordinary, "case {}", row.case);
        let wave = medium.wave(sheet, row.tangential(&medium)).expect("a wave");
        // one rounding each in k_w^2, the root and the comparison
        let length = wave.k.0.norm() / (row.n_x * medium.k0()) - 1.0;
        assert!(length.abs() <= 1e-15, "case {}: {length}", row.case);
        assert!(wave.walkoff() <= 1e-15, "case {}: {}", row.case, wave.walkoff());
        let optic_axis = row.cut_axis();
        assert!(wave.field.0.dot(&optic_axis).abs() <= 1e-15, "case {}", row.case);
    }
}

/// No case lies on an optic axis, the nearest are 1e-5 rad off.
#[test]
fn waves_off_the_optic_axes_are_not_marked() {
    assert!(Row::all().iter().all(|row| !row.wave(row.optic()).on_optic_axis));
}

impl Row {
    /// Z in the mount frame: (sin theta, 0, cos theta).
    fn cut_axis(&self) -> Vector3<f64> {
        let (sin, cos) = self.theta_deg.to_radians().sin_cos();
        Vector3::new(sin, 0.0, cos)
    }
}
