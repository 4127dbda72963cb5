//! The second-order nonlinear tensor d_ijk: completed from published elements by point group, turned into the
//! dielectric frame, contracted with unit electric fields.
//!
//! Relations between elements: J. F. Nye, Physical Properties of Crystals (Oxford, 1957), appendix B, with the factor
//! of 2 that belongs to piezoelectric moduli left out, as is usual in optics (from memory).

use std::collections::BTreeMap;

use nalgebra::{Matrix3, Vector3};

use crate::frame::Dielectric;

/// d_ijk in pm/V in the dielectric frame.
#[derive(Debug, Clone, PartialEq)]
pub struct Tensor {
    elements: [[[f64; 3]; 3]; 3],
}

/// Contracted index 0..6 of the pair (j, k): 11, 22, 33, 23, 13, 12.
const PAIRS: [(usize, usize); 6] = [(0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1)];

/// Elements that the point group lets be, as groups of equal elements: the first is the one usually printed.
/// A leading minus turns the sign.
fn relations(point_group: &str, unique_axis: Option<&str>) -> Option<&'static [&'static [&'static str]]> {
    Some(match (point_group, unique_axis) {
        ("mm2", _) => &[&["d15"], &["d24"], &["d31"], &["d32"], &["d33"]],
        ("3m", _) => &[&["d15", "d24"], &["d22", "-d16", "-d21"], &["d31", "d32"], &["d33"]],
        ("-42m", _) => &[&["d14", "d25"], &["d36"]],
        ("6" | "4", _) => &[&["d15", "d24"], &["d31", "d32"], &["d33"], &["d14", "-d25"]],
        ("6mm" | "4mm", _) => &[&["d15", "d24"], &["d31", "d32"], &["d33"]],
        ("-62m" | "-6m2", _) => &[&["d22", "-d16", "-d21"]],
        ("32", _) => &[&["d11", "-d12", "-d26"], &["d14", "-d25"]],
        ("2", Some("x")) => &[&["d11"], &["d12"], &["d13"], &["d14"], &["d25"], &["d26"], &["d35"], &["d36"]],
        ("2", None | Some("y")) => {
            &[&["d14"], &["d16"], &["d21"], &["d22"], &["d23"], &["d25"], &["d34"], &["d36"]]
        }
        ("2", Some("z")) => &[&["d14"], &["d15"], &["d24"], &["d25"], &["d31"], &["d32"], &["d33"], &["d36"]],
        ("222", _) => &[&["d14"], &["d25"], &["d36"]],
        _ => return None,
    })
}

/// Elements that Kleinman symmetry makes equal.
const KLEINMAN: [&[&str]; 8] = [
    &["d12", "d26"],
    &["d13", "d35"],
    &["d14", "d25", "d36"],
    &["d15", "d31"],
    &["d16", "d21"],
    &["d23", "d34"],
    &["d24", "d32"],
    &["d26", "d12"],
];

/// Point groups with a centre of symmetry: no second-order response at all.
#[must_use]
pub fn is_centrosymmetric(point_group: &str) -> bool {
    ["-1", "2/m", "mmm", "4/m", "4/mmm", "-3", "-3m", "6/m", "6/mmm", "m-3", "m-3m"].contains(&point_group)
}

impl Tensor {
    /// Completes the published elements (pm/V, contracted names `d11`..`d36`) and turns them so that the dielectric
    /// axis X lies along `frame[0]` of the tensor's own axes, Y along `frame[1]`, Z along `frame[2]`.
    ///
    /// # Errors
    /// A sentence that names the element or point group at fault.
    pub fn from_elements(
        elements: &BTreeMap<String, f64>,
        point_group: &str,
        unique_axis: Option<&str>,
        kleinman: bool,
        frame: Matrix3<f64>,
    ) -> Result<Self, String> {
        let groups = relations(point_group, unique_axis).ok_or_else(|| {
            format!("point group `{point_group}` has no second-order response or is not known here")
        })?;
        let mut contracted = Contracted::default();
        for (name, value) in elements {
            contracted.slot(name)?;
            let (group, sign) = groups
                .iter()
                .find_map(|group| sign_in(group, name).map(|sign| (group, sign)))
                .ok_or_else(|| format!("`{name}` is zero in point group {point_group}: remove it"))?;
            for member in *group {
                contracted.set(member, sign * value)?;
            }
        }
        if kleinman {
            contracted.complete(groups)?;
        }
        Ok(Self { elements: contracted.turned(&frame) })
    }

    /// d_eff = sum d_ijk p_i s_j t_k in pm/V for unit electric fields of pump, signal and idler.
    #[must_use]
    pub fn contract(&self, pump: Dielectric, signal: Dielectric, idler: Dielectric) -> f64 {
        let t = idler.0;
        let along = |row: &[f64; 3]| row[0] * t.x + row[1] * t.y + row[2] * t.z;
        let plane = |rows: &[[f64; 3]; 3]| (0..3).map(|j| signal.0[j] * along(&rows[j])).sum::<f64>();
        (0..3).map(|i| pump.0[i] * plane(&self.elements[i])).sum()
    }

    /// Largest element by size, pm/V.
    #[must_use]
    pub fn largest(&self) -> f64 {
        self.elements.iter().flatten().flatten().fold(0.0, |largest: f64, d| largest.max(d.abs()))
    }
}

fn sign_in(group: &[&str], name: &str) -> Option<f64> {
    group.iter().find_map(|member| {
        let (sign, bare) = signed(member);
        (bare == name).then_some(sign)
    })
}

fn signed(member: &str) -> (f64, &str) {
    member.strip_prefix('-').map_or((1.0, member), |bare| (-1.0, bare))
}

/// The 3 x 6 contracted matrix while it is being filled.
#[derive(Default)]
struct Contracted([[Option<f64>; 6]; 3]);

impl Contracted {
    fn slot(&mut self, name: &str) -> Result<&mut Option<f64>, String> {
        let digit = |at: usize| name.as_bytes().get(at).map(|b| usize::from(b.wrapping_sub(b'1')));
        match (name.len(), digit(1), digit(2)) {
            (3, Some(i @ 0..3), Some(j @ 0..6)) if name.starts_with('d') => Ok(&mut self.0[i][j]),
            _ => Err(format!("`{name}` is not an element: write d11 to d36")),
        }
    }

    fn set(&mut self, member: &str, value: f64) -> Result<(), String> {
        let (sign, name) = signed(member);
        let slot = self.slot(name)?;
        match *slot {
            Some(old) if (old - sign * value).abs() > 1e-9 * old.abs() => {
                Err(format!("`{name}` is given twice with different values, {old} and {}", sign * value))
            }
            _ => {
                *slot = Some(sign * value);
                Ok(())
            }
        }
    }

    /// Copies values along Kleinman's equalities to elements that are not given, and to their equals by point group.
    fn complete(&mut self, groups: &[&[&str]]) -> Result<(), String> {
        for class in KLEINMAN {
            let mut known = None;
            for name in class {
                known = known.or(*self.slot(name)?);
            }
            let Some(value) = known else { continue };
            for name in class {
                if self.slot(name)?.is_some() {
                    continue;
                }
                let Some((group, sign)) = groups.iter().find_map(|g| sign_in(g, name).map(|s| (g, s))) else {
                    continue;
                };
                for member in *group {
                    self.set(member, sign * value)?;
                }
            }
        }
        Ok(())
    }

    /// All 27 elements, with index i along the columns of `frame`.
    fn turned(&self, frame: &Matrix3<f64>) -> [[[f64; 3]; 3]; 3] {
        let mut own = [[[0.0; 3]; 3]; 3];
        for (i, plane) in own.iter_mut().enumerate() {
            for (contracted, (j, k)) in PAIRS.iter().enumerate() {
                let d = self.0[i][contracted].unwrap_or(0.0);
                plane[*j][*k] = d;
                plane[*k][*j] = d;
            }
        }
        let mut turned = [[[0.0; 3]; 3]; 3];
        let axes: [Vector3<f64>; 3] = std::array::from_fn(|a| frame.column(a).into_owned());
        for (a, plane) in turned.iter_mut().enumerate() {
            for (b, row) in plane.iter_mut().enumerate() {
                for (c, out) in row.iter_mut().enumerate() {
                    *out = (0..27)
                        .map(|n| (n / 9, n / 3 % 3, n % 3))
                        .map(|(i, j, k)| own[i][j][k] * axes[a][i] * axes[b][j] * axes[c][k])
                        .sum();
                }
            }
        }
        turned
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn tensor(point_group: &str, elements: &[(&str, f64)], kleinman: bool) -> Result<Tensor, String> {
        let elements = elements.iter().map(|(n, v)| ((*n).to_string(), *v)).collect();
        Tensor::from_elements(&elements, point_group, None, kleinman, Matrix3::identity())
    }

    /// Fields of a uniaxial crystal with walk-off switched off: o along (sin p, -cos p, 0), e across it and k.
    fn fields(theta: f64, phi: f64) -> (Dielectric, Dielectric) {
        let (st, ct) = theta.to_radians().sin_cos();
        let (sp, cp) = phi.to_radians().sin_cos();
        (Dielectric(Vector3::new(sp, -cp, 0.0)), Dielectric(Vector3::new(-ct * cp, -ct * sp, st)))
    }

    /// Closed forms without walk-off: J. E. Midwinter, J. Warner, Br. J. Appl. Phys. 16, 1135 (1965), from memory.
    #[test]
    fn closed_forms_per_point_group() {
        for (theta, phi) in [(22.8, 0.0), (41.0, 17.0), (67.7, 45.0), (80.0, 123.0)] {
            let (st, ct) = f64::to_radians(theta).sin_cos();
            let p = f64::to_radians(phi);
            let (o, e) = fields(theta, phi);
            let bbo = tensor("3m", &[("d22", 2.2), ("d31", 0.04), ("d33", 0.04)], true).expect("3m");
            // ooe: d31 sin t - d22 cos t sin 3p;  eeo: d22 cos^2 t cos 3p
            assert_abs_diff_eq!(
                bbo.contract(e, o, o).abs(),
                (0.04 * st - 2.2 * ct * (3.0 * p).sin()).abs(),
                epsilon = 1e-12
            );
            assert_abs_diff_eq!(
                bbo.contract(e, e, o).abs(),
                (2.2 * ct * ct * (3.0 * p).cos()).abs(),
                epsilon = 1e-12
            );
            let kdp = tensor("-42m", &[("d36", 0.39)], true).expect("-42m");
            // ooe: d36 sin t sin 2p;  eeo: d36 sin 2t cos 2p
            assert_abs_diff_eq!(
                kdp.contract(e, o, o).abs(),
                (0.39 * st * (2.0 * p).sin()).abs(),
                epsilon = 1e-12
            );
            assert_abs_diff_eq!(
                kdp.contract(e, e, o).abs(),
                (0.39 * 2.0 * st * ct * (2.0 * p).cos()).abs(),
                epsilon = 1e-12
            );
            let liio3 = tensor("6", &[("d31", -4.1)], true).expect("6");
            // ooe: d31 sin t;  eeo: 0 with Kleinman symmetry
            assert_abs_diff_eq!(liio3.contract(e, o, o).abs(), 4.1 * st, epsilon = 1e-12);
            assert_abs_diff_eq!(liio3.contract(e, e, o), 0.0, epsilon = 1e-12);
            let cdse = tensor("6mm", &[("d31", -18.0), ("d33", 36.0)], true).expect("6mm");
            // ooe: d31 sin t;  eeo: 0
            assert_abs_diff_eq!(cdse.contract(e, o, o).abs(), 18.0 * st, epsilon = 1e-12);
            assert_abs_diff_eq!(cdse.contract(e, e, o), 0.0, epsilon = 1e-12);
            let gase = tensor("-62m", &[("d22", 54.0)], true).expect("-62m");
            // ooe: d22 cos t sin 3p;  eeo: d22 cos^2 t cos 3p
            assert_abs_diff_eq!(
                gase.contract(e, o, o).abs(),
                (54.0 * ct * (3.0 * p).sin()).abs(),
                epsilon = 1e-12
            );
            assert_abs_diff_eq!(
                gase.contract(e, e, o).abs(),
                (54.0 * ct * ct * (3.0 * p).cos()).abs(),
                epsilon = 1e-12
            );
            let quartz = tensor("32", &[("d11", 0.3)], true).expect("32");
            // ooe: d11 cos t cos 3p;  eeo: d11 cos^2 t sin 3p
            assert_abs_diff_eq!(
                quartz.contract(e, o, o).abs(),
                (0.3 * ct * (3.0 * p).cos()).abs(),
                epsilon = 1e-12
            );
            assert_abs_diff_eq!(
                quartz.contract(e, e, o).abs(),
                (0.3 * ct * ct * (3.0 * p).sin()).abs(),
                epsilon = 1e-12
            );
        }
    }

    /// Principal planes of mm2 with Z polar, without walk-off: V. G. Dmitriev, G. G. Gurzadyan, D. N. Nikogosyan,
    /// Handbook of Nonlinear Optical Crystals (Springer, 1999), table of d_eff, from memory.
    #[test]
    fn closed_forms_in_the_principal_planes_of_mm2() {
        let elements = [("d15", 1.9), ("d24", 3.7), ("d31", 2.2), ("d32", 3.7), ("d33", 14.6)];
        let ktp = tensor("mm2", &elements, false).expect("mm2");
        let [x, y, z] = [Vector3::x(), Vector3::y(), Vector3::z()].map(Dielectric);
        for angle in [12.0f64, 45.0, 71.0] {
            let (s, c) = angle.to_radians().sin_cos();
            // XY plane, normal (cos p, sin p, 0): in-plane field (-sin p, cos p, 0); pump and signal in plane, idler
            // along Z: d15 sin^2 p + d24 cos^2 p
            let in_plane = Dielectric(Vector3::new(-s, c, 0.0));
            assert_abs_diff_eq!(
                ktp.contract(in_plane, in_plane, z),
                1.9 * s * s + 3.7 * c * c,
                epsilon = 1e-12
            );
            // XZ plane, normal (sin t, 0, cos t): in-plane field (-cos t, 0, sin t); pump and signal along Y: d24 sin t
            let in_plane = Dielectric(Vector3::new(-c, 0.0, s));
            assert_abs_diff_eq!(ktp.contract(y, y, in_plane), 3.7 * s, epsilon = 1e-12);
            // YZ plane: pump and signal along X: d15 sin t
            let in_plane = Dielectric(Vector3::new(0.0, -c, s));
            assert_abs_diff_eq!(ktp.contract(x, x, in_plane), 1.9 * s, epsilon = 1e-12);
        }
    }

    #[test]
    fn a_tensor_is_turned_with_its_frame() {
        let elements = BTreeMap::from([("d31".to_string(), 1.0), ("d32".to_string(), 2.0)]);
        // X = x, Y = z, Z = -y: the polar axis z lies along Y
        let frame = Matrix3::from_columns(&[Vector3::x(), Vector3::z(), -Vector3::y()]);
        let turned = Tensor::from_elements(&elements, "mm2", None, true, frame).expect("mm2");
        let [x, y, z] = [Vector3::x(), Vector3::y(), Vector3::z()].map(Dielectric);
        assert_abs_diff_eq!(turned.contract(y, x, x), 1.0);
        assert_abs_diff_eq!(turned.contract(y, z, z), 2.0);
        assert_abs_diff_eq!(turned.contract(x, x, y), 1.0);
    }

    #[test]
    fn forbidden_elements_and_contradictions_are_refused() {
        assert!(tensor("-42m", &[("d33", 1.0)], true).expect_err("forbidden").contains("`d33` is zero"));
        assert!(
            tensor("-3m", &[("d33", 1.0)], true).expect_err("centre").contains("no second-order response")
        );
        let twice = tensor("3m", &[("d31", 1.0), ("d32", 2.0)], true).expect_err("contradiction");
        assert!(twice.contains("given twice"), "{twice}");
        assert!(is_centrosymmetric("-3m") && !is_centrosymmetric("3m"));
    }
}
