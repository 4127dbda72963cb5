#!/usr/bin/env python3
"""Reference plane-wave eigenmodes of anisotropic slabs from the 4x4 matrix.

Source
    D. W. Berreman, "Optics in stratified and anisotropic media: 4x4-matrix
    formulation", J. Opt. Soc. Am. 62, 502-510 (1972).
    No Fresnel or Booker equation is used to get the modes: the 4x4 matrix is
    built and its eigenvalues and eigenvectors are taken numerically.

Run
    python3 berreman.py          (Python 3.11 or later, needs mpmath)
    Writes berreman.csv next to this script, but only if every self-check
    passes; prints the largest self-check errors and the input sensitivity.

Units and conventions
    Fields go as exp(i(k.r - omega t)).  Wave vectors are in units of
    k0 = omega/c; H is scaled by the vacuum impedance, so k x E = H and
    k x H = -eps E.  Angles are in degrees.  The medium is lossless,
    non-magnetic, not optically active.
    Mount frame (u, v, w), w = face normal, in the principal frame X, Y, Z,
    with t = theta and p = phi:
        w = (sin t cos p, sin t sin p, cos t)
        u = (-cos t cos p, -cos t sin p, sin t)
        v = w x u                            (so u x v = w, and v_Z = 0)
    eps(mount) = M diag(n_x^2, n_y^2, n_z^2) M^T, rows of M = u, v, w.
    For a uniaxial crystal the optic axis is Z: n_x = n_y = n_o, n_z = n_e.
    Input columns are exact decimals here; a double differs by one rounding.

Columns of berreman.csv (two rows per case, 20 significant digits)
    case                 1..220: 1-100 random uniaxial, 101-200 random biaxial,
                         201-220 hard cases (see hard_cases below)
    kind                 uniaxial | biaxial
    n_x, n_y, n_z        principal indices
    theta_deg, phi_deg   cut angles
    q_u, q_v             tangential wave vector / k0
    sheet                fast = smaller k_w, slow = larger k_w
    k_w                  normal wave vector / k0 of the mode with S_w > 0
    E_u, E_v, E_w        unit real electric field; the overall sign is free,
                         here the component largest in size is positive
    S_u, S_v, S_w        unit ray direction, E x H normalised
    dnx, dny, dnz        dispersion d n_i / d ln(omega)
    group_index_w        d(k_w k0)/d(k0) with the physical tangential wave
                         vector held fixed and n_i -> n_i + dn_i d ln(omega);
                         equals (slab group delay) c / thickness at fixed q.
                         Central difference on the same eigenvalue code.
"""

import csv
import math
import os
import random
import sys

from mpmath import mp, mpf, mpc, matrix

# 80 digits carry the finite differences at a step of 1e-20.  Close to an optic
# axis the third derivative of k_w is so large (about 1e8) that a step of 1e-12
# would leave an error of order 1e-17, too much for 20 printed digits.
mp.dps = 80
STEP = mpf(10) ** -20
ZERO = mpf(10) ** -40         # smaller vector components are printed as 0
DIGITS = 20
SEED = 19720502

COLUMNS = ["case", "kind", "n_x", "n_y", "n_z", "theta_deg", "phi_deg",
           "q_u", "q_v", "sheet", "k_w", "E_u", "E_v", "E_w",
           "S_u", "S_v", "S_w", "dnx", "dny", "dnz", "group_index_w"]


# ---------------------------------------------------------------- vectors

def dot(a, b):
    return sum((x * y for x, y in zip(a, b)), mpf(0))


def cross(a, b):
    return [a[1] * b[2] - a[2] * b[1],
            a[2] * b[0] - a[0] * b[2],
            a[0] * b[1] - a[1] * b[0]]


def norm(a):
    return mp.sqrt(dot(a, a))


def unit(a):
    n = norm(a)
    return [x / n for x in a]


def mount(theta, phi):
    """Rows u, v, w in the principal frame; angles in radians."""
    st, ct, sp, cp = mp.sin(theta), mp.cos(theta), mp.sin(phi), mp.cos(phi)
    w = [st * cp, st * sp, ct]
    u = [-ct * cp, -ct * sp, st]
    return [u, cross(w, u), w]


# ------------------------------------------------------------ 4x4 matrix

def berreman(eps, q):
    """Delta with k_z psi = Delta psi, psi = (E_x, H_y, E_y, -H_x), k = (q, 0, k_z).

    From the z components of Maxwell's equations
        eps_z. E = -q H_y   ->  E_z = -(q H_y + eps_zx E_x + eps_zy E_y)/eps_zz
        H_z = q E_y
    and from the other four
        k_z E_x = H_y + q E_z            k_z H_y    = D_x
        k_z E_y = -H_x                   k_z (-H_x) = D_y - q H_z
    """
    zx, zy, zz = eps[2][0], eps[2][1], eps[2][2]
    ez = [-zx / zz, -q / zz, -zy / zz, mpf(0)]    # E_z as a row acting on psi
    d = matrix(4, 4)
    for j in range(4):
        d[0, j] = q * ez[j]
        d[1, j] = eps[0][2] * ez[j]
        d[3, j] = eps[1][2] * ez[j]
    d[0, 1] += 1
    d[1, 0] += eps[0][0]
    d[1, 2] += eps[0][1]
    d[2, 3] += 1
    d[3, 0] += eps[1][0]
    d[3, 2] += eps[1][1] - q * q
    return d, ez


def modes(n, theta, phi, qu, qv):
    """The two forward modes, fast first.  Each is a dict k_w, E, H, S (u, v, w)."""
    rows = mount(theta, phi)
    q = mp.sqrt(qu * qu + qv * qv)
    c, s = (qu / q, qv / q) if q != 0 else (mpf(1), mpf(0))
    # Lab frame turned about w so that the tangential wave vector lies on x.
    u, v, w = rows
    lab = [[c * a + s * b for a, b in zip(u, v)],
           [-s * a + c * b for a, b in zip(u, v)],
           w]
    eps = [[sum(lab[i][k] * n[k] ** 2 * lab[j][k] for k in range(3))
            for j in range(3)] for i in range(3)]
    delta, ezrow = berreman(eps, q)
    values, vectors = mp.eig(delta)

    forward = []
    for j in range(4):
        assert abs(mp.im(values[j])) < ZERO, "evanescent mode"
        col = [vectors[i, j] for i in range(4)]
        big = max(col, key=abs)
        col = [mpc(x) / big for x in col]                # take out the phase
        assert max(abs(x.imag) for x in col) < ZERO, "mode is not linear"
        ex, hy, ey, mhx = [x.real for x in col]
        ez = dot(ezrow, [ex, hy, ey, mhx])
        e, h = [ex, ey, ez], [-mhx, hy, q * ey]
        if e[0] * h[1] - e[1] * h[0] <= 0:               # energy flow S_w
            continue
        back = lambda a: [c * a[0] - s * a[1], s * a[0] + c * a[1], a[2]]
        e, h = back(e), back(h)
        size = norm(e)
        if max(e, key=abs) < 0:
            size = -size
        e, h = [x / size for x in e], [x / size for x in h]
        forward.append(dict(k_w=mp.re(values[j]), E=e, H=h, S=unit(cross(e, h))))
    assert len(forward) == 2, "expected two forward modes"
    return sorted(forward, key=lambda m: m["k_w"])


def group_indices(n, dn, theta, phi, qu, qv):
    """d(k0 k_w)/d k0 of both sheets at k0 = 1, physical tangential q fixed."""
    def kw(k0):
        ni = [a + b * mp.log(k0) for a, b in zip(n, dn)]
        return [k0 * m["k_w"] for m in modes(ni, theta, phi, qu / k0, qv / k0)]
    hi, lo = kw(1 + STEP), kw(1 - STEP)
    return [(a - b) / (2 * STEP) for a, b in zip(hi, lo)]


# ----------------------------------------------------------------- cases

def text(x, digits=6):
    return f"{x:.{digits}f}"


def random_dn(rng, kind):
    d = [text(rng.uniform(0.0, 0.05)) for _ in range(3)]
    if kind == "uniaxial":
        d[1] = d[0]
    return d


def random_q(rng):
    size, angle = 0.95 * math.sqrt(rng.random()), rng.uniform(0, 2 * math.pi)
    return [text(size * math.cos(angle)), text(size * math.sin(angle))]


def random_cases(rng):
    out = []
    for i in range(100):
        sign = 1 if i % 2 == 0 else -1
        while True:
            no = rng.uniform(1.45, 2.6)
            ne = no + sign * rng.uniform(0.001, 0.25)
            if 1.45 <= ne <= 2.6:
                break
        n = [text(no), text(no), text(ne)]
        out.append(("uniaxial", n, text(rng.uniform(0, 180)),
                    text(rng.uniform(0, 360)), *random_q(rng),
                    random_dn(rng, "uniaxial")))
    for i in range(100):
        nx = rng.uniform(1.45, 2.2)
        ny = nx + rng.uniform(0.005, 0.2)
        nz = ny + rng.uniform(0.005, 0.2)
        out.append(("biaxial", [text(nx), text(ny), text(nz)],
                    text(rng.uniform(0, 180)), text(rng.uniform(0, 360)),
                    *random_q(rng), random_dn(rng, "biaxial")))
    return out


def hard_cases(rng):
    """Chosen cases.  The position of the optic axes is used only to aim."""
    out = []

    def add(n, theta, phi, qu=0.0, qv=0.0):
        kind = "uniaxial" if n[0] == n[1] else "biaxial"
        out.append((kind, list(n), text(theta, 9), text(phi, 9),
                    text(qu, 9), text(qv, 9), random_dn(rng, kind)))

    def binormal(n):
        """Angle of the optic axes from Z in the XZ plane, degrees."""
        x, y, z = map(float, n)
        return math.degrees(math.atan2(z * math.sqrt(y * y - x * x),
                                       x * math.sqrt(z * z - y * y)))

    def aim(n, theta, phi, angle, du, dv):
        """q for a wave normal off the axis (angle from Z) by about hypot(du, dv)."""
        a, t, p = map(math.radians, (angle, theta, phi))
        ax = (math.sin(a), 0.0, math.cos(a))
        u = (-math.cos(t) * math.cos(p), -math.cos(t) * math.sin(p), math.sin(t))
        v = (math.sin(p), -math.cos(p), 0.0)
        au, av = (sum(i * j for i, j in zip(ax, b)) for b in (u, v))
        assert math.hypot(au, av) * float(n[1]) < 0.95
        return float(n[1]) * (au + du), float(n[1]) * (av + dv)

    deg = math.degrees
    pos = ("1.543000", "1.543000", "1.552000")
    neg = ("1.658000", "1.658000", "1.486000")
    bia = ("1.770000", "1.780000", "1.862000")
    bib = ("1.530000", "1.650000", "1.700000")

    # 201-205: q = 0, principal axes in the face
    add(pos, 90, 0)
    add(neg, 90, 37.5)
    add(bia, 90, 0)
    add(bia, 90, 90)
    add(bib, 0, 0)
    # 206-208: uniaxial, q = 0, near the axis
    add(pos, deg(1e-3), 0)
    add(neg, deg(1e-5), 25)
    add(neg, 180 - deg(1e-3), 140)
    # 209-210: uniaxial, oblique, near the axis
    add(neg, 24, 70, *aim(neg, 24, 70, 0, 0.6e-3, 0.8e-3))
    add(pos, 17, 205, *aim(pos, 17, 205, 0, -0.8e-5, 0.6e-5))
    # 211-214: biaxial, q = 0, near an axis
    va, vb = binormal(bia), binormal(bib)
    add(bia, va + deg(1e-3), 0)
    add(bib, vb, deg(1e-3 / math.sin(math.radians(vb))))
    add(bib, vb + deg(1e-5), 0)
    add(bia, va, 180 - deg(1e-5 / math.sin(math.radians(va))))
    # 215-216: biaxial, oblique, near an axis
    add(bia, va + 15, 12, *aim(bia, va + 15, 12, va, 0.6e-3, -0.8e-3))
    add(bib, vb - 18, 9, *aim(bib, vb - 18, 9, vb, 0.8e-5, 0.6e-5))
    # 217-220: birefringence 1e-6
    add(("1.650000", "1.650000", "1.650001"), 52, 33, 0.31, -0.47)
    add(("1.650001", "1.650001", "1.650000"), 90, 60)
    add(("1.650000", "1.650001", "1.650002"), 71, 118, -0.42, 0.25)
    add(("1.650000", "1.650001", "1.650003"), 40, 55)
    return out


# ------------------------------------------------------------ self-checks

class Worst(dict):
    def see(self, name, value, case):
        value = abs(value)
        if name not in self or value > self[name][0]:
            self[name] = (value, case)


def check(worst, case, kind, n, dn, theta, phi, qu, qv, got, groups):
    rows = mount(theta, phi)
    pu = modes(n, theta, phi, qu + STEP, qv), modes(n, theta, phi, qu - STEP, qv)
    pv = modes(n, theta, phi, qu, qv + STEP), modes(n, theta, phi, qu, qv - STEP)
    for i, m in enumerate(got):
        # Maxwell's equations in the principal frame, where eps is diagonal.
        turn = lambda a: [sum(a[r] * rows[r][j] for r in range(3)) for j in range(3)]
        k, e, h = turn([qu, qv, m["k_w"]]), turn(m["E"]), turn(m["H"])
        d = [n[j] ** 2 * e[j] for j in range(3)]
        worst.see("div D = k.eps E", dot(k, d), case)
        worst.see("k x E - H", norm([a - b for a, b in zip(cross(k, e), h)]), case)
        worst.see("k x H + eps E", norm([a + b for a, b in zip(cross(k, h), d)]), case)
        # The ray is normal to the k surface: S || (-dk_w/dq_u, -dk_w/dq_v, 1).
        g = [-(p[0][i]["k_w"] - p[1][i]["k_w"]) / (2 * STEP) for p in (pu, pv)]
        g = unit(g + [mpf(1)])
        worst.see("ray - surface normal", norm([a - b for a, b in zip(g, m["S"])]), case)
        # Energy theorem: group_index_w S_w = energy density.
        w = sum((n[j] ** 2 + 2 * n[j] * dn[j]) * e[j] ** 2 for j in range(3)) + dot(h, h)
        flow = 2 * cross(m["E"], m["H"])[2]
        worst.see("group index - energy/flow", groups[i] - w / flow, case)
    if kind == "uniaxial":
        ko = mp.sqrt(n[0] ** 2 - qu ** 2 - qv ** 2)
        worst.see("o mode k_w - sqrt(n_o^2-q^2)",
                  min(abs(m["k_w"] - ko) for m in got), case)


def sensitivity(worst, case, doubles, got, groups):
    """Change of the outputs when the inputs are rounded to doubles."""
    n, dn, theta, phi, qu, qv = doubles
    near, ng = modes(n, theta, phi, qu, qv), group_indices(n, dn, theta, phi, qu, qv)
    part = "random" if case <= 200 else "hard"
    for a, b, ga, gb in zip(got, near, groups, ng):
        worst.see(part + " k_w", a["k_w"] - b["k_w"], case)
        de = min(norm([x - f * y for x, y in zip(a["E"], b["E"])]) for f in (1, -1))
        worst.see(part + " E", de, case)
        worst.see(part + " S", norm([x - y for x, y in zip(a["S"], b["S"])]), case)
        worst.see(part + " group_index_w", ga - gb, case)


# ------------------------------------------------------------------- main

def show(x):
    return "0.0" if abs(x) < ZERO else mp.nstr(x, DIGITS, strip_zeros=False)


def main():
    rng = random.Random(SEED)
    cases = random_cases(rng) + hard_cases(rng)
    worst, sens, lines = Worst(), Worst(), []
    gap = None
    for case, (kind, n_s, th_s, ph_s, qu_s, qv_s, dn_s) in enumerate(cases, 1):
        assert mp.hypot(mpf(qu_s), mpf(qv_s)) <= mpf("0.950001"), case
        n, dn = [mpf(x) for x in n_s], [mpf(x) for x in dn_s]
        theta, phi = mp.radians(mpf(th_s)), mp.radians(mpf(ph_s))
        qu, qv = mpf(qu_s), mpf(qv_s)
        got = modes(n, theta, phi, qu, qv)
        groups = group_indices(n, dn, theta, phi, qu, qv)
        check(worst, case, kind, n, dn, theta, phi, qu, qv, got, groups)
        f = lambda s: mpf(float(s))
        r = lambda s: mpf(math.radians(float(s)))
        sensitivity(sens, case, ([f(x) for x in n_s], [f(x) for x in dn_s],
                                 r(th_s), r(ph_s), f(qu_s), f(qv_s)), got, groups)
        split = got[1]["k_w"] - got[0]["k_w"]
        if gap is None or split < gap[0]:
            gap = (split, case)
        for sheet, m, g in zip(("fast", "slow"), got, groups):
            lines.append([str(case), kind, *n_s, th_s, ph_s, qu_s, qv_s, sheet,
                          show(m["k_w"]), *map(show, m["E"]), *map(show, m["S"]),
                          *dn_s, show(g)])

    print(f"{len(cases)} cases, {len(lines)} rows")
    print("largest self-check errors (case):")
    for name, (value, case) in worst.items():
        print(f"  {name:30s} {mp.nstr(value, 3):>12s}  ({case})")
    print("largest change when the inputs are rounded to doubles (case):")
    for name, (value, case) in sens.items():
        print(f"  {name:30s} {mp.nstr(value, 3):>12s}  ({case})")
    print(f"smallest k_w split {mp.nstr(gap[0], 3)} ({gap[1]})")

    bad = [name for name, (value, _) in worst.items() if value >= mpf(10) ** -25]
    if bad:
        sys.exit("self-check failed, csv not written: " + ", ".join(bad))
    path = os.path.join(os.path.dirname(os.path.abspath(__file__)), "berreman.csv")
    with open(path, "w", newline="", encoding="ascii") as out:
        table = csv.writer(out, lineterminator="\n")
        table.writerow(COLUMNS)
        table.writerows(lines)


if __name__ == "__main__":
    main()
