//! Roots of a function of one variable that may not exist everywhere: all of them in a range, each to rounding error.
//!
//! "No root", "several roots" and "not defined there" are different answers, and signs are tested on sign bits.

/// A root of a scan.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Root {
    /// Where.
    pub x: f64,
    /// Whether the function touches zero without changing sign.
    pub tangent: bool,
}

/// Where to look, and how finely.
#[derive(Debug, Clone, Copy)]
pub struct Scan {
    /// Beginning of the range.
    pub from: f64,
    /// End of the range.
    pub to: f64,
    /// Number of intervals between samples.
    pub intervals: usize,
}

/// All roots of `f` in a range, in ascending order. `f` is `None` where it is not defined; the borders of its domain
/// are located, so that a root between the last sample and the border is not missed. Roots closer together than one
/// sampling interval are found where |f| has a minimum there.
#[must_use]
pub fn roots(f: &mut impl FnMut(f64) -> Option<f64>, scan: Scan) -> Vec<Root> {
    let mut found = Vec::new();
    for stretch in stretches(f, scan) {
        for pair in stretch.windows(2) {
            let [(a, fa), (b, fb)] = [pair[0], pair[1]];
            if fa == 0.0 {
                found.push(Root { x: a, tangent: false });
            } else if fb != 0.0 && fa.is_sign_negative() != fb.is_sign_negative() {
                // a jump changes sign without a root: there the value stays large
                let small = 1e-6 * fa.abs().max(fb.abs());
                let root = bracketed(&mut *f, a, b, fa).filter(|x| f(*x).is_some_and(|v| v.abs() <= small));
                found.extend(root.map(|x| Root { x, tangent: false }));
            }
        }
        if let Some((x, 0.0)) = stretch.last().copied() {
            found.push(Root { x, tangent: false });
        }
        for triple in stretch.windows(3) {
            found.extend(near_touch(f, [triple[0], triple[1], triple[2]]));
        }
    }
    found.sort_by(|a, b| a.x.total_cmp(&b.x));
    let width = (scan.to - scan.from).abs();
    found.dedup_by(|a, b| (a.x - b.x).abs() <= 1e-12 * width);
    found
}

/// Samples of `f`, split where it is not defined, with the borders of its domain added.
fn stretches(f: &mut impl FnMut(f64) -> Option<f64>, scan: Scan) -> Vec<Vec<(f64, f64)>> {
    let at = |i: usize| scan.from + (scan.to - scan.from) * i as f64 / scan.intervals as f64;
    let mut all = Vec::new();
    let mut current: Vec<(f64, f64)> = Vec::new();
    let mut before: Option<(f64, bool)> = None;
    for i in 0..=scan.intervals {
        let x = at(i);
        let value = f(x).filter(|v| v.is_finite());
        match (before, value) {
            (Some((outside, false)), Some(_)) => current.extend(border(f, x, outside)),
            (Some((inside, true)), None) => {
                current.extend(border(f, inside, x));
                all.push(std::mem::take(&mut current));
            }
            _ => {}
        }
        if let Some(value) = value
            && current.last().is_none_or(|(last, _)| (last - x).abs() > 0.0)
        {
            current.push((x, value));
        }
        before = Some((x, value.is_some()));
    }
    all.push(current);
    all.retain(|stretch| !stretch.is_empty());
    all
}

/// The last point at which `f` is defined on the way from `inside` to `outside`.
fn border(f: &mut impl FnMut(f64) -> Option<f64>, inside: f64, outside: f64) -> Option<(f64, f64)> {
    let (mut inside, mut outside) = (inside, outside);
    let mut last = None;
    for _ in 0..40 {
        let middle = 0.5 * (inside + outside);
        match f(middle).filter(|v| v.is_finite()) {
            Some(value) => {
                inside = middle;
                last = Some((middle, value));
            }
            None => outside = middle,
        }
    }
    last
}

/// Root between `a` and `b`, where `f` has opposite signs (`fa` is its value at `a`): Illinois steps kept inside a
/// bisection, to rounding error. `None` only where `f` is not defined on the way.
pub(crate) fn bracketed(mut f: impl FnMut(f64) -> Option<f64>, a: f64, b: f64, fa: f64) -> Option<f64> {
    let (mut a, mut fa) = (a, fa);
    let (mut b, mut fb) = (b, f(b)?);
    if fa.is_sign_negative() == fb.is_sign_negative() {
        return None;
    }
    for step in 0..200 {
        if (b - a).abs() <= 2.0 * f64::EPSILON * a.abs().max(b.abs()) || fb == 0.0 {
            break;
        }
        let secant = b - fb * (b - a) / (fb - fa);
        let inside = secant > a.min(b) && secant < a.max(b);
        // every third step halves the bracket, so that a flat function cannot stall it
        let x = if inside && step % 3 != 2 { secant } else { 0.5 * (a + b) };
        let fx = f(x)?;
        if fx.is_sign_negative() == fb.is_sign_negative() {
            fa *= 0.5;
        } else {
            (a, fa) = (b, fb);
        }
        (b, fb) = (x, fx);
    }
    Some(b)
}

/// Two roots, or one that touches, around a local minimum of |f| among three samples of equal sign.
fn near_touch(f: &mut impl FnMut(f64) -> Option<f64>, samples: [(f64, f64); 3]) -> Vec<Root> {
    let [(a, fa), (b, fb), (c, fc)] = samples;
    let sign = fb.signum();
    let same = fa.signum() == sign && fc.signum() == sign;
    if !same || fb == 0.0 || fb.abs() > fa.abs() || fb.abs() > fc.abs() {
        return Vec::new();
    }
    // the parabola through the samples tells whether its vertex comes anywhere near zero
    let (left, right) = (b - a, c - b);
    let bend = ((fc - fb) / right - (fb - fa) / left) / (left + right);
    let tilt = (fc - fb) / right - bend * right;
    let vertex = fb - tilt * tilt / (4.0 * bend);
    if bend * sign <= 0.0 || vertex * sign > 0.5 * fb.abs() {
        return Vec::new();
    }
    // golden section on sign * f, which is positive at the ends
    let golden = 0.5 * (5f64.sqrt() - 1.0);
    let (mut low, mut high) = (a, c);
    let (mut best, mut lowest) = (b, fb.abs());
    for _ in 0..80 {
        let (x1, x2) = (high - golden * (high - low), low + golden * (high - low));
        let (Some(f1), Some(f2)) = (f(x1), f(x2)) else { return Vec::new() };
        let (f1, f2) = (sign * f1, sign * f2);
        for (x, value) in [(x1, f1), (x2, f2)] {
            if value < lowest {
                (best, lowest) = (x, value);
            }
        }
        if lowest < 0.0 {
            let left = bracketed(&mut *f, a, best, fa);
            let right = bracketed(&mut *f, c, best, fc);
            return left.into_iter().chain(right).map(|x| Root { x, tangent: false }).collect();
        }
        if f1 < f2 { high = x2 } else { low = x1 }
    }
    let touches = lowest <= 1e-13 * fa.abs().max(fc.abs());
    if touches { vec![Root { x: best, tangent: true }] } else { Vec::new() }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn find(mut f: impl FnMut(f64) -> Option<f64>, from: f64, to: f64, intervals: usize) -> Vec<f64> {
        roots(&mut f, Scan { from, to, intervals }).into_iter().map(|r| r.x).collect()
    }

    #[test]
    fn several_roots_come_in_order() {
        let found = find(|x| Some((x - 1.0) * (x - 2.0) * (x - 5.0)), 0.0, 10.0, 7);
        assert_eq!(found.len(), 3);
        for (root, expected) in found.iter().zip([1.0, 2.0, 5.0]) {
            assert_abs_diff_eq!(*root, expected, epsilon = 1e-14);
        }
    }

    #[test]
    fn roots_on_samples_and_ends_count_once() {
        assert_eq!(find(|x| Some(x * (x - 1.0) * (x - 2.0)), 0.0, 2.0, 4), [0.0, 1.0, 2.0]);
    }

    #[test]
    fn two_roots_inside_one_interval_are_found() {
        let found = find(|x| Some((x - 0.50) * (x - 0.52)), 0.0, 1.1, 10);
        assert_eq!(found.len(), 2, "{found:?}");
    }

    #[test]
    fn a_touching_root_is_marked() {
        let mut f = |x: f64| Some((x - 0.537).powi(2));
        let found = roots(&mut f, Scan { from: 0.0, to: 1.0, intervals: 10 });
        assert_eq!(found.len(), 1);
        assert!(found[0].tangent);
        assert_abs_diff_eq!(found[0].x, 0.537, epsilon = 1e-7);
    }

    #[test]
    fn a_root_just_inside_the_border_of_the_domain_is_found() {
        // defined above 0.301 only, root at 0.302, samples at 0.3 and 0.4
        let found = find(|x| (x > 0.301).then_some(x - 0.302), 0.0, 1.0, 10);
        assert_eq!(found.len(), 1);
        assert_abs_diff_eq!(found[0], 0.302, epsilon = 1e-14);
    }

    #[test]
    fn nothing_is_found_where_there_is_nothing() {
        assert!(find(|x| Some(x * x + 1.0), -3.0, 3.0, 10).is_empty());
        assert!(find(|_| None, -3.0, 3.0, 10).is_empty());
        assert!(find(|_| Some(f64::NAN), -3.0, 3.0, 10).is_empty());
        // a pole changes sign without a root: the value there is not small
        assert!(find(|x| (x.abs() > 1e-3).then_some(1.0 / x), -1.0, 1.0, 9).is_empty());
        assert!(find(|x| Some(1.0 / x), -1.0, 1.0, 9).is_empty());
        // so does a jump
        assert!(find(|x| Some(if x < 0.123 { -1.0 } else { 1.0 }), -1.0, 1.0, 9).is_empty());
    }

    #[test]
    fn tiny_and_huge_values_do_not_disturb_the_sign_test() {
        assert_abs_diff_eq!(find(|x| Some((x - 0.3) * 1e-300), 0.0, 1.0, 4)[0], 0.3, epsilon = 1e-14);
        assert_abs_diff_eq!(find(|x| Some((x - 0.3) * 1e300), 0.0, 1.0, 4)[0], 0.3, epsilon = 1e-14);
    }
}
