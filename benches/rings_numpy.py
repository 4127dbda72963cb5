#!/usr/bin/env python3
"""Rings and crossings of a crossed-cone crystal against its tilt, with NumPy.

What a careful person would write for this one crystal without twincone, and what `compare.py` measures it against:
BBO (kato-1986) at 20 degC, 405 nm to 810 nm twice, type II, theta 42.541 deg, phi 0 deg, 2 mm, screen at 1 m. The
columns and their meaning are those of `twincone run --report rings` and `--report crossings`.

    python3 benches/rings_numpy.py --points 20000 --report rings --out rings.csv
    python3 benches/rings_numpy.py --check rows.csv        # rows of the program, compared one by one

Everything is specialised for speed: Z and the pump lie in the horizontal plane, so both sheets have closed forms with
few terms; wave vectors are in units of the photon's vacuum wavenumber; the meridian's unknown is the sine of the polar
angle, so that no trigonometric function is called inside Newton's method. The mirror symmetry of the rings is not used:
each of the 72 samples is solved for. Blocks of tilts are as large as the cache likes. One process.
"""

import argparse
import contextlib
import csv
import ctypes
import json
import sys
import time

import numpy as np

# glibc hands freed arrays of this size back to the system and faults them in again at every use: tell it to keep them
with contextlib.suppress(AttributeError, OSError, TypeError):
    M_TRIM_THRESHOLD, M_TOP_PAD, M_MMAP_THRESHOLD = -1, -2, -3
    for parameter in (M_TRIM_THRESHOLD, M_TOP_PAD, M_MMAP_THRESHOLD):
        ctypes.CDLL(None).mallopt(parameter, 1 << 26)

PUMP_UM = 0.405
THETA = np.radians(42.541)
LENGTH_UM = 2000.0
SCREEN_MM = 1000.0
SAMPLES = 72
COARSE = 24
TILTS_DEG = (-1.0, 4.0)
BLOCK = {"rings": 256, "crossings": 2048}

AXIS_STAYS = np.radians(1e-9)
HALF_MAXIMUM = 1.3915573782515102  # sinc^2 is one half

RINGS = (
    "point,crystal_tilt_deg,crystal,process,photon,wavelength_nm,polarization,field_azimuth_deg,axis_h_deg,axis_v_deg,"
    "half_angle_deg,half_angle_min_deg,half_angle_max_deg,thickness_deg,internal_half_angle_deg,x_mm,y_mm,radius_mm,"
    "extrapolated,status"
).split(",")
CROSSINGS = (
    "point,crystal_tilt_deg,pair,first_crystal,first_process,second_crystal,second_process,a_wavelength_nm,"
    "b_wavelength_nm,a_h_deg,a_v_deg,a_polar_deg,a_azimuth_deg,a_x_mm,a_y_mm,b_h_deg,b_v_deg,b_polar_deg,b_azimuth_deg,"
    "b_x_mm,b_y_mm,separation_deg,intersection_angle_deg,gap_deg,gap_kind,tilt_to_touch_deg,extrapolated,status"
).split(",")


def impermittivity(um):
    """1/n_o^2 and 1/n_e^2; K. Kato, IEEE J. Quantum Electron. 22, 1013 (1986)."""
    x = um * um
    o = 2.7359 + 0.01878 / (x - 0.01822) - 0.01354 * x
    e = 2.3753 + 0.01224 / (x - 0.01667) - 0.01516 * x
    return 1.0 / o, 1.0 / e


class Ellipsoid:
    """The e sheet k.M k = k0^2 of a crystal whose Z lies in the plane of u and w, at vacuum wavenumber k0.

    k_w = sqrt(zero - uu q_u^2 - vv q_v^2) - lean q_u
    """

    def __init__(self, um, k0):
        o, e = impermittivity(um)
        s, c = np.sin(THETA), np.cos(THETA)
        m_ww = e + (o - e) * c * c
        self.lean = (o - e) * s * c / m_ww
        self.uu = o * e / m_ww**2
        self.vv = e / m_ww
        self.zero = k0 * k0 / m_ww


PUMP = Ellipsoid(PUMP_UM, 2.0)
PHOTON = Ellipsoid(2 * PUMP_UM, 1.0)
SPHERE = 1.0 / impermittivity(2 * PUMP_UM)[0]


class Mount:
    """A block of tilts: where the pump goes in the crystal, and the lab's frame seen from the mount.

    u = (cos t, 0, -sin t), v = (0, 1, 0), w = (sin t, 0, cos t) in the lab.
    """

    def __init__(self, tilt):
        self.sin, self.cos = np.sin(tilt), np.cos(tilt)
        self.pump = -2.0 * self.sin  # q_u of the pump; its q_v is zero
        flow = np.sqrt(PUMP.zero - PUMP.uu * self.pump**2)
        self.k_pump = flow - PUMP.lean * self.pump

    def lab(self, u, v, w):
        return u * self.cos + w * self.sin, v, w * self.cos - u * self.sin

    def columns(self):
        """For arrays of tilts by azimuths."""
        other = object.__new__(Mount)
        for name, value in vars(self).items():
            setattr(other, name, value[:, None])
        return other


def mismatch(mount, u, v, photon):
    """Delta_k and its gradient at the tangential wave vector (u, v) of a photon of this polarization (e or o)."""
    twin_u = mount.pump - u
    e_u, o_u = (u, twin_u) if photon == "e" else (twin_u, u)
    vv = v * v
    flow_o = o_u * o_u
    flow_o += vv
    np.subtract(SPHERE, flow_o, out=flow_o)
    np.sqrt(flow_o, out=flow_o)
    vv *= PHOTON.vv
    flow_e = e_u * e_u
    flow_e *= PHOTON.uu
    flow_e += vv
    np.subtract(PHOTON.zero, flow_e, out=flow_e)
    np.sqrt(flow_e, out=flow_e)
    value = e_u * PHOTON.lean
    value -= flow_e
    value -= flow_o
    value += mount.k_pump
    np.divide(1.0, flow_e, out=flow_e)
    np.divide(1.0, flow_o, out=flow_o)
    along_u = e_u * flow_e
    along_u *= PHOTON.uu
    along_u += PHOTON.lean
    along_u -= o_u * flow_o
    if photon == "o":
        np.negative(along_u, out=along_u)
    along_v = flow_e
    along_v *= PHOTON.vv
    along_v += flow_o
    along_v *= v
    return value, along_u, along_v


def curvatures(mount, u, photon):
    """Second derivatives of Delta_k, uu and vv, at v = 0 (uv vanishes there)."""
    twin_u = mount.pump - u
    e_u, o_u = (u, twin_u) if photon == "e" else (twin_u, u)
    flow_e = np.sqrt(PHOTON.zero - PHOTON.uu * e_u * e_u)
    flow_o = np.sqrt(SPHERE - o_u * o_u)
    return PHOTON.uu * PHOTON.zero / flow_e**3 + SPHERE / flow_o**3, PHOTON.vv / flow_e + 1.0 / flow_o


def middle(mount, photon):
    """q_u, Delta_k and its curvatures where Delta_k is least; by symmetry q_v is zero."""
    u = 0.5 * mount.pump
    for _ in range(20):
        step = mismatch(mount, u, np.zeros_like(u), photon)[1] / curvatures(mount, u, photon)[0]
        u = u - step
        if np.abs(step).max() < 1e-9:
            break
    return u, mismatch(mount, u, np.zeros_like(u), photon)[0], curvatures(mount, u, photon)


class Meridians:
    """Directions about an axis a (lab) by azimuth, 0 towards +x: their components along u and v of the mount."""

    def __init__(self, mount, axis, cos_phi, sin_phi):
        x, y, z = axis
        first = 1.0 / np.sqrt(1.0 - x * x)
        self.first = np.stack([(1.0 - x * x) * first, -x * y * first, -x * z * first])
        self.second = np.stack([np.zeros_like(x), z * first, -y * first])  # a x first
        self.axis = axis
        self.cos_phi, self.sin_phi = cos_phi, sin_phi
        self.turn(mount)

    def turn(self, mount):
        def u(a):
            return (a[0] * mount.cos - a[2] * mount.sin)[:, None]

        self.axis_u, self.axis_v = u(self.axis), self.axis[1][:, None]
        self.out_u = u(self.first) * self.cos_phi + u(self.second) * self.sin_phi
        self.out_v = self.first[1][:, None] * self.cos_phi + self.second[1][:, None] * self.sin_phi

    def outward(self, vector):
        """Component of a lab vector (one for each tilt) along the outward direction of each azimuth."""
        first, second = (self.first * vector).sum(0)[:, None], (self.second * vector).sum(0)[:, None]
        return first * self.cos_phi + second * self.sin_phi

    def lab(self, s):
        c = np.sqrt(1.0 - s * s)
        x, y = s * self.cos_phi, s * self.sin_phi
        return [
            self.axis[i][:, None] * c + self.first[i][:, None] * x + self.second[i][:, None] * y for i in range(3)
        ]


def along(mount, meridians, s, photon):
    """Delta_k and its change with the polar angle psi, at sin psi = s; cos psi and the gradient as well."""
    c = s * s
    np.subtract(1.0, c, out=c)
    np.sqrt(c, out=c)
    m = meridians

    def component(axis, out):
        at, change = out * s, out * c
        at += axis * c
        change -= axis * s
        return at, change

    (u, d_u), (v, d_v) = component(m.axis_u, m.out_u), component(m.axis_v, m.out_v)
    value, along_u, along_v = mismatch(mount, u, v, photon)
    d_u *= along_u
    d_v *= along_v
    d_u += d_v
    return value, d_u, c, along_u, along_v


def solve(mount, meridians, s, photon, level=0.0, tolerance=1e-7):
    """sin psi where Delta_k = level. After a step below the tolerance the next one would be below rounding."""
    for _ in range(20):
        step, slope, c, _, _ = along(mount, meridians, s, photon)
        if level:
            step -= level
        step /= slope
        step *= c  # d sin psi = cos psi d psi
        s = s - step
        if max(step.max(), -step.min()) < tolerance * s.min():
            return s
    raise SystemExit("not converged")


def tilted_plane(xx, xy, yy, xz, yz, zz):
    """Slopes (alpha, beta) over x and y of the plane that fits points best, from their covariances.

    (-alpha, -beta, 1) is the eigenvector with the smallest eigenvalue, by inverse iteration, which converges at once
    since that eigenvalue is small.
    """
    least = 0.0
    for _ in range(4):
        a, b = xx - least, yy - least
        determinant = a * b - xy * xy
        alpha, beta = (b * xz - xy * yz) / determinant, (a * yz - xy * xz) / determinant
        least = zz - alpha * xz - beta * yz
    return alpha, beta


def plane_about(meridians, s, c):
    """The plane through the samples of a ring, over the two directions across its axis; sums over azimuth as products
    with cosines and sines."""
    n = s.shape[1]
    cos_phi, sin_phi = meridians.cos_phi[0], meridians.sin_phi[0]
    first = np.stack([cos_phi, sin_phi], axis=1) / n
    second = np.stack([cos_phi * cos_phi, cos_phi * sin_phi, sin_phi * sin_phi], axis=1) / n
    height = c - 1.0
    (x, y), (xx, xy, yy) = (s @ first).T, ((s * s) @ second).T
    (xz, yz), z, zz = ((s * height) @ first).T, height.mean(axis=1), np.einsum("ij,ij->i", height, height) / n
    return tilted_plane(xx - x * x, xy - x * y, yy - y * y, xz - x * z, yz - y * z, zz - z * z)


def plane_through(x, y, z):
    """The plane through any points."""
    x, y, z = (a - a.mean(axis=1, keepdims=True) for a in (x, y, z))
    pairs = (x, x), (x, y), (y, y), (x, z), (y, z), (z, z)
    return tilted_plane(*(np.einsum("ij,ij->i", a, b) / a.shape[1] for a, b in pairs))


def centred(mount, columns, meridians, s, photon):
    """Samples taken again about the axis of the cone that fits best, until the axis stays."""
    cos_phi, sin_phi = meridians.cos_phi, meridians.sin_phi
    for _ in range(20):
        c = np.sqrt(1.0 - s * s)
        alpha, beta = plane_about(meridians, s, c)
        if np.hypot(alpha, beta).max() < AXIS_STAYS:
            return meridians, s
        axis = meridians.axis - alpha * meridians.first - beta * meridians.second
        axis = axis / np.sqrt((axis * axis).sum(0))
        shift = meridians.axis - axis
        meridians = Meridians(mount, axis, cos_phi, sin_phi)
        s = solve(columns, meridians, s + c * meridians.outward(shift), photon)
    raise SystemExit("not converged")


def radius_slope(s, slope, along_u, along_v, d_phi_u, d_phi_v):
    """d psi/d phi along the ring, where Delta_k stays zero; d_phi is the outward direction turned by 90 deg."""
    return -s * (along_u * d_phi_u + along_v * d_phi_v) / slope


def extremes(mount, meridians, psi, slopes, photon):
    """Least and largest stationary value of psi(phi): from the samples next to them to where the slope vanishes."""
    rows = np.arange(len(psi))[:, None]
    j = np.stack([psi.argmin(axis=1), psi.argmax(axis=1)], axis=1)
    step = 2.0 * np.pi / SAMPLES
    before, here, after = (slopes[rows, (j + k) % SAMPLES] for k in (-1, 0, 1))
    phi, value, bend = j * step, psi[rows, j], (after - before) / (2.0 * step)
    columns = mount.columns()
    for _ in range(2):
        move = -here / bend
        phi = phi + move
        local = Meridians(mount, meridians.axis, np.cos(phi), np.sin(phi))
        s = solve(columns, local, np.sin(value + 0.5 * here * move), photon)
        value = np.arcsin(s)
        _, slope, _, along_u, along_v = along(columns, local, s, photon)
        turned = Meridians(mount, meridians.axis, -np.sin(phi), np.cos(phi))
        here = radius_slope(s, slope, along_u, along_v, turned.out_u, turned.out_v)
    return value[:, 0], value[:, 1]


def circle(x, y):
    """Centre and radius of the circle with the least sum of squared distances: Gauss-Newton from the mean."""
    n = x.shape[1]
    cx, cy = x.mean(axis=1), y.mean(axis=1)
    for _ in range(50):
        ex, ey = x - cx[:, None], y - cy[:, None]
        distance = ex * ex
        distance += ey * ey
        np.sqrt(distance, out=distance)
        ex /= distance
        ey /= distance
        # residual distance - radius; the radius is eliminated, its best value is the mean distance
        ax, ay, radius = ex.mean(axis=1), ey.mean(axis=1), distance.mean(axis=1)
        xx, xy, bx, by = (
            np.einsum("ij,ij->i", a, b) / n for a, b in ((ex, ex), (ex, ey), (ex, distance), (ey, distance))
        )
        xx, xy, yy = xx - ax * ax, xy - ax * ay, 1.0 - xx - ay * ay
        bx, by = bx - ax * radius, by - ay * radius
        determinant = xx * yy - xy * xy
        step_x, step_y = (yy * bx - xy * by) / determinant, (xx * by - xy * bx) / determinant
        cx, cy = cx + step_x, cy + step_y
        radius -= ax * step_x + ay * step_y
        if max(np.abs(step_x).max(), np.abs(step_y).max()) < 1e-12:
            break
    return cx, cy, radius


def cone_angle(squared_distance):
    """From |d - a|^2 of the samples: 1 - cos alpha is half their mean, accurate for narrow cones."""
    return 2.0 * np.arcsin(0.5 * np.sqrt(squared_distance.mean(axis=1)))


def internal_half_angle(u, v, w):
    """Half angle of the cone that fits the unit vectors along (u, v, w) best."""
    size = np.sqrt(u * u + v * v + w * w)
    u, v, w = u / size, v / size, w / size
    alpha, beta = plane_through(u, v, w)
    length = np.sqrt(1.0 + alpha**2 + beta**2)
    a, b, c = (-alpha / length)[:, None], (-beta / length)[:, None], (1.0 / length)[:, None]
    return cone_angle((u - a) ** 2 + (v - b) ** 2 + (w - c) ** 2)


PHI = 2.0 * np.pi * np.arange(SAMPLES) / SAMPLES
COS_PHI, SIN_PHI = np.cos(PHI)[None, :], np.sin(PHI)[None, :]


def first_trace(mount, columns, photon, cos_phi, sin_phi, tolerance):
    """The ring about the direction where Delta_k is least, from the ellipse that its curvatures describe."""
    u, least, (bend_u, bend_v) = middle(mount, photon)
    if not (least < 0.0).all():
        raise SystemExit("some tilt gives no ring: this script is for tilts that do")
    axis = np.stack(mount.lab(u, np.zeros_like(u), np.sqrt(1.0 - u * u)))
    meridians = Meridians(mount, axis, cos_phi, sin_phi)
    curvature = bend_u[:, None] * meridians.out_u**2 + bend_v[:, None] * meridians.out_v**2
    return meridians, solve(columns, meridians, np.sqrt(-2.0 * least[:, None] / curvature), photon, 0.0, tolerance)


def ring(mount, photon):
    """One ring at each tilt of a block: the numbers of its row, in the order of the columns."""
    columns = mount.columns()
    # samples that will be taken again need only be good enough for an axis
    meridians, s = first_trace(mount, columns, photon, COS_PHI, SIN_PHI, 1e-4)
    meridians, s = centred(mount, columns, meridians, s, photon)

    _, slope, c, along_u, along_v = along(columns, meridians, s, photon)
    psi = np.arcsin(s)
    half_angle = cone_angle(s * s + (1.0 - c) ** 2)
    turned = Meridians(mount, meridians.axis, -SIN_PHI, COS_PHI)
    slopes = radius_slope(s, slope, along_u, along_v, turned.out_u, turned.out_v)
    least, largest = extremes(mount, meridians, psi, slopes, photon)

    # Delta_k L/2 = +-1.39, first as if Delta_k were quadratic in psi
    level = 2.0 * HALF_MAXIMUM / (LENGTH_UM * 2.0 * np.pi / (2.0 * PUMP_UM))
    slope_s = slope / c
    outer = solve(columns, meridians, np.sqrt(s * s + 2.0 * s * level / slope_s), photon, level)
    inner = solve(columns, meridians, np.sqrt(s * s - 2.0 * s * level / slope_s), photon, -level)
    thickness = (np.arcsin(outer) - np.arcsin(inner)).mean(axis=1)

    u, v = meridians.axis_u * c + meridians.out_u * s, meridians.axis_v * c + meridians.out_v * s
    if photon == "e":
        w = np.sqrt(PHOTON.zero - PHOTON.uu * u * u - PHOTON.vv * v * v) - PHOTON.lean * u
    else:
        w = np.sqrt(SPHERE - u * u - v * v)
    x, y, z = meridians.lab(s)
    centre_x, centre_y, radius = circle(x / z, y / z)
    ax, ay, az = meridians.axis
    return [
        np.degrees(np.arctan2(ax, az)),
        np.degrees(np.arctan2(ay, az)),
        np.degrees(half_angle),
        np.degrees(least),
        np.degrees(largest),
        np.degrees(thickness),
        np.degrees(internal_half_angle(u, v, w)),
        centre_x * SCREEN_MM,
        centre_y * SCREEN_MM,
        radius * SCREEN_MM,
    ]


def crossing(mount):
    """The crossings at each tilt of a block: the numbers of their row, in the order of the columns."""
    columns = mount.columns()
    phi = 2.0 * np.pi * np.arange(COARSE) / COARSE
    meridians, s = first_trace(mount, columns, "e", np.cos(phi)[None, :], np.sin(phi)[None, :], 1e-2)

    # sign changes of the other ring's mismatch along this ring: two of them, one above the pump and one below
    other = along(columns, meridians, s, "o")[0]
    change = (other < 0.0) != (np.roll(other, -1, axis=1) < 0.0)
    if not (change.sum(axis=1) == 2).all() or not (change[:, : COARSE // 2].sum(axis=1) == 1).all():
        raise SystemExit("some tilt has no two crossings: this script is for tilts that do")
    rows = np.arange(len(other))
    j = change.argmax(axis=1)
    k = (j + 1) % COARSE
    share = other[rows, j] / (other[rows, j] - other[rows, k])

    def between(axis, out):
        at = axis * np.sqrt(1.0 - s * s) + out * s
        return at[rows, j] * (1.0 - share) + at[rows, k] * share

    u, v = between(meridians.axis_u, meridians.out_u), between(meridians.axis_v, meridians.out_v)
    for _ in range(20):
        (one, one_u, one_v), (two, two_u, two_v) = (mismatch(mount, u, v, photon) for photon in "eo")
        determinant = one_u * two_v - one_v * two_u
        step_u = (one * two_v - two * one_v) / determinant
        step_v = (two * one_u - one * two_u) / determinant
        u, v = u - step_u, v - step_v
        # the gradients, for the angle, are those before the step
        if max(np.abs(step_u).max(), np.abs(step_v).max()) < 1e-13:
            break

    def direction(u, v):
        return mount.lab(u, v, np.sqrt(1.0 - u * u - v * v))

    def place(x, y, z):
        across = np.hypot(x, y)
        angles = np.arctan2(x, z), np.arctan2(y, z), np.arctan2(across, z), np.arctan2(y, x)
        return [np.degrees(angle) for angle in angles] + [x / z * SCREEN_MM, y / z * SCREEN_MM]

    a, b = direction(u, v), direction(mount.pump - u, -v)
    w = np.sqrt(1.0 - u * u - v * v)

    def tangent(along_u, along_v):
        """On the screen, of the curve through a that stands on this gradient."""
        x, y, z = mount.lab(-along_v, along_u, (along_v * u - along_u * v) / w)
        return x - a[0] * z / a[2], y - a[1] * z / a[2]

    (x1, y1), (x2, y2) = tangent(one_u, one_v), tangent(two_u, two_v)
    apart = np.arctan2(
        np.sqrt(
            (a[1] * b[2] - a[2] * b[1]) ** 2 + (a[2] * b[0] - a[0] * b[2]) ** 2 + (a[0] * b[1] - a[1] * b[0]) ** 2
        ),
        a[0] * b[0] + a[1] * b[1] + a[2] * b[2],
    )
    angle = np.arctan2(np.abs(x1 * y2 - y1 * x2), np.abs(x1 * x2 + y1 * y2))
    return place(*a) + place(*b) + [np.degrees(apart), np.degrees(angle)]


def ring_rows(first, tilt_deg):
    """Rows of a block of tilts, both rings of a tilt one after the other."""
    mount = Mount(np.radians(tilt_deg))
    rings = [np.stack(ring(mount, photon)).tolist() for photon in "eo"]
    points, tilts = range(first, first + len(tilt_deg)), tilt_deg.tolist()
    return [row for both in zip(zip(points, tilts, *rings[0]), zip(points, tilts, *rings[1])) for row in both]


def crossing_rows(first, tilt_deg):
    """Rows of a block of tilts."""
    numbers = np.stack(crossing(Mount(np.radians(tilt_deg)))).tolist()
    return list(zip(range(first, first + len(tilt_deg)), tilt_deg.tolist(), *numbers))


def line(before, numbers, after):
    """A row's format; %r writes the shortest number that reads back exactly."""
    return ",".join(["%d,%r", before, *["%r"] * numbers, after]) + "\n"


RING_LINES = [
    line("1,e -> e + o,signal,810,e,0", 10, "false,ok"),
    line("1,e -> e + o,idler,810,o,90", 10, "false,ok"),
]
CROSSING_LINES = [line("1,1,e -> e + o,1,e -> o + e,810,810", 14, ",,,false,ok")]
REPORTS = {"rings": (RINGS, ring_rows, RING_LINES), "crossings": (CROSSINGS, crossing_rows, CROSSING_LINES)}


def lines(report, first, tilt_deg):
    """The rows of a block as lines of the table."""
    _, rows, formats = REPORTS[report]
    return [formats[i % len(formats)] % row for i, row in enumerate(rows(first, tilt_deg))]


def sweep(report, points, path):
    """Writes the table of a report and says how fast."""
    block = BLOCK[report]
    tilts = np.linspace(*TILTS_DEG, points)
    start = time.perf_counter()
    with open(path, "w", encoding="utf-8") as file:
        file.write(",".join(REPORTS[report][0]) + "\n")
        for first in range(0, points, block):
            file.writelines(lines(report, first, tilts[first : first + block]))
    seconds = time.perf_counter() - start
    return {"report": report, "points": points, "seconds": seconds, "points_per_second": points / seconds}


def check(path):
    """Compares rows of the program with this script's at the same tilts."""
    with open(path, newline="", encoding="utf-8") as file:
        theirs = list(csv.DictReader(file))
    if not theirs:
        raise SystemExit(f"{path}: no rows")
    report = "rings" if "axis_h_deg" in theirs[0] else "crossings"
    header = REPORTS[report][0]
    if list(theirs[0]) != header:
        raise SystemExit(f"{path}: the columns are not those of a sweep of {report} over crystal.tilt")
    tilts = np.array(list(dict.fromkeys(float(row["crystal_tilt_deg"]) for row in theirs)))
    block = BLOCK[report]
    blocks = (lines(report, first, tilts[first : first + block]) for first in range(0, len(tilts), block))
    ours = list(csv.DictReader([",".join(header), *(line for block in blocks for line in block)]))
    if len(ours) != len(theirs):
        raise SystemExit(f"{path}: {len(theirs)} rows, {len(ours)} expected")
    worst = {}
    for mine, their in zip(ours, theirs):
        for name in header[1:]:
            if name.endswith(("_deg", "_mm", "_nm")) and mine[name]:
                worst[name] = max(worst.get(name, 0.0), abs(float(their[name] or "nan") - float(mine[name])))
            elif mine[name] != their[name]:
                raise SystemExit(f"{path}: point {their['point']}, {name}: {their[name]}, here {mine[name]}")
    # an axis may be left up to 1e-9 deg before the place where it stays, on either side; as much on the screen
    wrong = [name for name in worst if not worst[name] <= (4e-8 if name.endswith("_mm") else 2e-9)]
    largest = {unit: max(d for name, d in worst.items() if name.endswith("_" + unit)) for unit in ("deg", "mm")}
    print(json.dumps({"report": report, "rows": len(ours), "largest_difference": largest, "agrees": not wrong}))
    if wrong:
        raise SystemExit(f"{path}: differs in " + ", ".join(f"{name} ({worst[name]:.1e})" for name in wrong))


def main():
    parser = argparse.ArgumentParser(description="Rings and crossings of a tilted crossed-cone crystal, with NumPy.")
    parser.add_argument("--points", type=int, default=20000, help="tilts from -1 deg to 4 deg")
    parser.add_argument("--report", choices=["rings", "crossings", "both"], default="rings")
    parser.add_argument("--out", default="rows.csv", help="the table; with both, crossings go to FILE.crossings.csv")
    parser.add_argument("--check", metavar="FILE", help="compare with a table of the program instead")
    options = parser.parse_args()
    if options.check:
        check(options.check)
        return
    for report in ["rings", "crossings"] if options.report == "both" else [options.report]:
        both = options.report == "both" and report == "crossings"
        print(json.dumps(sweep(report, options.points, options.out + ".crossings.csv" if both else options.out)))
        sys.stdout.flush()


if __name__ == "__main__":
    main()
