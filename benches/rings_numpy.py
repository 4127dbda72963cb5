#!/usr/bin/env python3
"""Rings and crossings of a uniaxial crystal against its tilt, with NumPy.

What a careful person would write without twincone, and what `compare.py` measures it against: any uniaxial crystal, cut
and mounted in any way, any wavelengths and any o and e for pump, signal and idler. Without options it is the crystal of
`million_tilts.toml`. The columns and their meaning are those of `twincone run --report rings` and `--report crossings`.

    python3 benches/rings_numpy.py --points 20000 --report rings --out rings.csv
    python3 benches/rings_numpy.py --check rows.csv      # rows of the program, compared one by one
    python3 benches/rings_numpy.py --roll 30 --cross-tilt 2 --check rows.csv

Arrays are tilts by azimuths, in blocks that fit the cache; all derivatives are exact. It is for tilts at which the
rings are there, are not filled and, for crossings, cross twice: it stops at others. One process.
"""

import argparse
import csv
import json
import sys
import time

import numpy as np

SAMPLES = 72
TILTS_DEG = (-1.0, 4.0)
BLOCK = 128

AXIS_STAYS = np.radians(1e-9)
HALF_MAXIMUM = 1.3915573782515102  # sinc^2 is one half
ROUGH, FINE = 1e-3, 1e-7  # last relative step of Newton's method; what is left is about its square

PHI = 2.0 * np.pi * np.arange(SAMPLES) / SAMPLES
COS_PHI, SIN_PHI = np.cos(PHI)[None, :], np.sin(PHI)[None, :]

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


def bbo(um):
    """1/n_o^2 and 1/n_e^2; K. Kato, IEEE J. Quantum Electron. 22, 1013 (1986)."""
    x = um * um
    o = 2.7359 + 0.01878 / (x - 0.01822) - 0.01354 * x
    e = 2.3753 + 0.01224 / (x - 0.01667) - 0.01516 * x
    return 1.0 / o, 1.0 / e


class Sheet:
    """k.M k = k0^2 in the mount's frame: k_w = sqrt(top - q.Q q) - lean.q, where Q and lean follow from M."""

    def __init__(self, eta, polarization, optic_axis, k0):
        self.eta, self.polarization, self.optic_axis, self.k0 = eta, polarization, optic_axis, k0
        o, e = eta
        m = o * np.eye(3) if polarization == "o" else e * np.eye(3) + (o - e) * np.outer(optic_axis, optic_axis)
        self.top = k0 * k0 / m[2, 2]
        self.lean = m[:2, 2] / m[2, 2]
        bowl = m[:2, :2] / m[2, 2] - np.outer(self.lean, self.lean)
        self.uu, self.uv, self.vv = bowl[0, 0], bowl[0, 1], bowl[1, 1]

    def root(self, u, v):
        """The root in k_w and minus its derivatives."""
        along_u, along_v = self.uu * u, self.uv * u
        along_u += self.uv * v
        along_v += self.vv * v
        root = along_u * u
        root += along_v * v
        np.subtract(self.top, root, out=root)
        np.sqrt(root, out=root)
        along_u /= root
        along_v /= root
        return root, along_u, along_v

    def bend(self, u, v):
        """Minus the second derivatives of k_w: uu, uv, vv."""
        root, along_u, along_v = self.root(u, v)
        return np.stack([self.uu + along_u**2, self.uv + along_u * along_v, self.vv + along_v**2]) / root

    def k_w(self, u, v):
        return self.root(u, v)[0] - self.lean[0] * u - self.lean[1] * v

    def field(self, k):
        """Electric field of the wave vector k (mount, first index), of any length."""
        axis, (o, e) = self.optic_axis, self.eta
        across = np.stack([k[i - 2] * axis[i - 1] - k[i - 1] * axis[i - 2] for i in range(3)])
        if self.polarization == "o":
            return across
        displacement = np.cross(across, k, axis=0)
        return o * displacement + (e - o) * np.tensordot(axis, displacement, 1) * axis[:, None, None]


class Setup:
    """The crystal, the light and how they meet, but for the tilt; angles in degrees, lengths in um."""

    def __init__(self, options, eta=bbo):
        self.cross_tilt, self.roll = options.cross_tilt, options.roll
        self.length, self.screen_mm = options.length_mm * 1e3, options.screen_mm
        theta, phi = np.radians([options.theta, options.phi])
        w = np.array([np.sin(theta) * np.cos(phi), np.sin(theta) * np.sin(phi), np.cos(theta)])
        u = np.array([-np.cos(theta) * np.cos(phi), -np.cos(theta) * np.sin(phi), np.sin(theta)])
        optic_axis = np.array([u[2], np.cross(w, u)[2], w[2]])
        pump, signal = options.pump_nm * 1e-3, options.signal_nm * 1e-3
        um = {"pump": pump, "signal": signal, "idler": 1.0 / (1.0 / pump - 1.0 / signal)}
        self.nm = {photon: length * 1e3 for photon, length in um.items()}
        self.degenerate = abs(um["signal"] / um["idler"] - 1.0) < 1e-9
        self.sheets = {
            photon: {p: Sheet(eta(length), p, optic_axis, 2.0 * np.pi / length) for p in "oe"}
            for photon, length in um.items()
        }
        self.processes = options.processes.split(",")

    def rotations(self, tilt_deg):
        """Mount to lab, as [lab, mount, tilt, 1]: Rz(roll) Ry(tilt) Rx(-cross tilt)."""
        tilt, x, z = np.radians(tilt_deg), np.radians(-self.cross_tilt), np.radians(self.roll)
        c, s, zero, one = np.cos(tilt), np.sin(tilt), np.zeros_like(tilt), np.ones_like(tilt)
        about_y = np.array([[c, zero, s], [zero, one, zero], [-s, zero, c]])
        about_x = np.array([[1.0, 0.0, 0.0], [0.0, np.cos(x), -np.sin(x)], [0.0, np.sin(x), np.cos(x)]])
        about_z = np.array([[np.cos(z), -np.sin(z), 0.0], [np.sin(z), np.cos(z), 0.0], [0.0, 0.0, 1.0]])
        return np.einsum("ij,jkn,kl->iln", about_z, about_y, about_x)[..., None]


def words(process):
    return "{} -> {} + {}".format(*process)


class Mismatch:
    """Delta_k of a process such as eeo at a block of tilts, over the tangential wave vector of one of its photons."""

    def __init__(self, setup, rotation, process, photon="signal"):
        pump, signal, idler = process
        sheets = setup.sheets["pump"][pump], setup.sheets["signal"][signal], setup.sheets["idler"][idler]
        pump, own, twin = sheets if photon == "signal" else (sheets[0], sheets[2], sheets[1])
        self.rotation, self.own, self.twin = rotation, own, twin
        self.pump_u, self.pump_v = pump.k0 * rotation[2, 0], pump.k0 * rotation[2, 1]
        self.lean = own.lean - twin.lean
        self.offset = pump.k_w(self.pump_u, self.pump_v)
        self.offset = self.offset + twin.lean[0] * self.pump_u + twin.lean[1] * self.pump_v

    def at(self, u, v):
        """Delta_k and its gradient."""
        own, own_u, own_v = self.own.root(u, v)
        twin, twin_u, twin_v = self.twin.root(self.pump_u - u, self.pump_v - v)
        own += twin
        value = self.lean[0] * u
        value += self.lean[1] * v
        value += self.offset
        value -= own
        own_u -= twin_u
        own_u += self.lean[0]
        own_v -= twin_v
        own_v += self.lean[1]
        return value, own_u, own_v

    def lowest(self):
        """Where Delta_k is least, by Newton from the photon's share of the pump; its value and second derivatives."""
        share = self.own.k0 / (self.own.k0 + self.twin.k0)
        u, v = share * self.pump_u, share * self.pump_v
        for _ in range(20):
            value, along_u, along_v = self.at(u, v)
            uu, uv, vv = self.own.bend(u, v) + self.twin.bend(self.pump_u - u, self.pump_v - v)
            determinant = uu * vv - uv * uv
            step_u, step_v = (uv * along_v - vv * along_u) / determinant, (uv * along_u - uu * along_v) / determinant
            if max(np.abs(step_u).max(), np.abs(step_v).max()) < 1e-6 * self.own.k0:
                return u, v, value, (uu, uv, vv)
            u, v = u + step_u, v + step_v
        raise SystemExit("not converged")

    def direction(self, u, v):
        """Outside in the lab, of the photon with this tangential wave vector."""
        return outside(self.rotation, self.own.k0, u, v)


def outside(rotation, k0, u, v):
    u, v = u / k0, v / k0
    return to_lab(rotation, u, v, np.sqrt(1.0 - u * u - v * v))


def to_lab(rotation, u, v, w):
    return rotation[:, 0] * u + rotation[:, 1] * v + rotation[:, 2] * w


class Meridians:
    """Directions about an axis (lab) by azimuth: wave vectors q = A cos psi + B sin psi."""

    def __init__(self, mismatch, axis, cos_phi, sin_phi):
        self.mismatch, self.axis, self.cos_phi, self.sin_phi = mismatch, axis, cos_phi, sin_phi
        first = -axis[0] * axis
        first[0] += 1.0
        self.first = first / np.sqrt((first * first).sum(axis=0))
        self.second = np.cross(axis, self.first, axis=0)
        k0, rotation = mismatch.own.k0, mismatch.rotation
        on = [[k0 * (rotation[:, j] * a).sum(axis=0) for a in (axis, self.first, self.second)] for j in (0, 1)]
        (self.axis_u, first_u, second_u), (self.axis_v, first_v, second_v) = on
        self.out_u, self.out_v = self.outward(first_u, second_u), self.outward(first_v, second_v)
        self.parts = first_u, second_u, first_v, second_v

    def outward(self, first, second):
        along = first * self.cos_phi
        along += second * self.sin_phi
        return along

    def sideways(self):
        """B turned by 90 deg: its derivative with respect to the azimuth."""
        first_u, second_u, first_v, second_v = self.parts
        return second_u * self.cos_phi - first_u * self.sin_phi, second_v * self.cos_phi - first_v * self.sin_phi

    def tangential(self, s, c):
        u, v = self.out_u * s, self.out_v * s
        u += self.axis_u * c
        v += self.axis_v * c
        return u, v

    def lab(self, s, c):
        x, y = s * self.cos_phi, s * self.sin_phi
        return [self.axis[i] * c + self.first[i] * x + self.second[i] * y for i in range(3)]

    def at(self, s):
        """Delta_k, its change with psi, and its gradient at sin psi = s; cos psi as well."""
        c = s * s
        np.subtract(1.0, c, out=c)
        np.sqrt(c, out=c)
        value, along_u, along_v = self.mismatch.at(*self.tangential(s, c))
        slope, change = self.out_u * c, self.out_v * c
        slope -= self.axis_u * s
        change -= self.axis_v * s
        slope *= along_u
        change *= along_v
        slope += change
        return value, slope, c, along_u, along_v

    def solve(self, s, level=0.0, tolerance=FINE):
        """sin psi where Delta_k = level, by Newton."""
        for _ in range(20):
            step, slope, c, _, _ = self.at(s)
            if level:
                step -= level
            step /= slope
            step *= c  # d sin psi = cos psi d psi
            s = s - step
            if max(step.max(), -step.min()) < tolerance * s.min():
                return s
        raise SystemExit("not converged")


def trace(mismatch, tolerance):
    """A ring about where Delta_k is least; near there Delta_k is quadratic in the radius."""
    u, v, least, (uu, uv, vv) = mismatch.lowest()
    if not (least < 0.0).all():
        raise SystemExit("no ring at some tilt")
    meridians = Meridians(mismatch, mismatch.direction(u, v), COS_PHI, SIN_PHI)
    out_u, out_v = meridians.out_u, meridians.out_v
    curvature = uu * out_u**2 + 2.0 * uv * out_u * out_v + vv * out_v**2
    return meridians, meridians.solve(np.sqrt(-2.0 * least / curvature), tolerance=tolerance)


def plane(x, y, z):
    """Slopes over x and y of the plane that fits points best; (-alpha, -beta, 1) is the eigenvector of their covariance
    with the smallest eigenvalue, here by inverse iteration, which converges at once since that eigenvalue is small."""
    x, y, z = (a - a.mean(axis=1, keepdims=True) for a in (x, y, z))
    pairs = (x, x), (x, y), (y, y), (x, z), (y, z), (z, z)
    xx, xy, yy, xz, yz, zz = (np.einsum("ij,ij->i", a, b)[:, None] for a, b in pairs)
    least = 0.0
    for _ in range(4):
        a, b = xx - least, yy - least
        determinant = a * b - xy * xy
        alpha, beta = (b * xz - xy * yz) / determinant, (a * yz - xy * xz) / determinant
        least = zz - alpha * xz - beta * yz
    return alpha, beta


def centred(meridians, s):
    """Samples taken again about the axis of the cone that fits best, until the axis stays."""
    before = np.inf
    for _ in range(20):
        c = np.sqrt(1.0 - s * s)
        x, y = s * meridians.cos_phi, s * meridians.sin_phi
        alpha, beta = plane(x, y, s * s / (-1.0 - c))
        moved = np.hypot(alpha, beta).max()
        if moved < AXIS_STAYS:
            return meridians, s
        axis = meridians.axis - alpha * meridians.first - beta * meridians.second
        axis /= np.sqrt((axis * axis).sum(axis=0))
        again = Meridians(meridians.mismatch, axis, meridians.cos_phi, meridians.sin_phi)
        shift = meridians.axis - axis
        towards = again.outward((again.first * shift).sum(axis=0), (again.second * shift).sum(axis=0))
        meridians, s = again, again.solve(s + c * towards, tolerance=ROUGH if moved > 1e-6 else FINE)
    raise SystemExit("not converged")


def turning(meridians, s, slope, along_u, along_v):
    """d psi/d phi along the ring, where Delta_k stays zero."""
    side_u, side_v = meridians.sideways()
    side_u *= along_u
    side_v *= along_v
    side_u += side_v
    side_u *= s
    side_u /= slope
    return np.negative(side_u, out=side_u)


def extremes(meridians, s, turns):
    """Least and largest stationary value of psi(phi): every one between samples where the slope psi' changes sign."""
    spacing = 2.0 * np.pi / SAMPLES
    after = np.roll(turns, -1, axis=1)
    change = (turns < 0.0) != (after < 0.0)
    # all tilts have as many places as the one with the most: a tilt with fewer has some of its samples among them
    j = np.argsort(~change, axis=1, kind="stable")[:, : change.sum(axis=1).max()]
    here, after, change, s = (np.take_along_axis(a, j, axis=1) for a in (turns, after, change, s))
    phi, value, bend = PHI[j], np.arcsin(s), np.where(change, (after - here) / spacing, np.inf)
    for _ in range(20):
        # psi' is nearly linear: up to where it vanishes psi grows by half of psi' times the move
        move = np.clip(-here / bend, -spacing, spacing)
        gain = 0.5 * here * move
        if np.abs(gain).max() < 1e-13:
            value += gain
            return value.min(axis=1, keepdims=True), value.max(axis=1, keepdims=True)
        phi = phi + move
        local = Meridians(meridians.mismatch, meridians.axis, np.cos(phi), np.sin(phi))
        s = local.solve(np.sin(value + gain))
        _, slope, _, along_u, along_v = local.at(s)
        value, here = np.arcsin(s), turning(local, s, slope, along_u, along_v)
    raise SystemExit("not converged")


def circle(x, y):
    """Centre and radius of the circle with the least sum of squared distances, by Newton from the mean."""
    cx, cy = x.mean(axis=1, keepdims=True), y.mean(axis=1, keepdims=True)
    for _ in range(20):
        ex, ey = x - cx, y - cy
        distance = np.sqrt(ex * ex + ey * ey)
        ex /= distance
        ey /= distance
        # residual distance - radius; the radius is eliminated, its best value is the mean distance
        ax, ay, radius = (a.mean(axis=1, keepdims=True) for a in (ex, ey, distance))
        bend_x, bend_y = ex / distance, ey / distance
        pairs = (ey, bend_y), (ex, bend_y), (ex, bend_x), (ex, distance), (ey, distance)
        xx, xy, yy, bx, by = (np.einsum("ij,ij->i", a, b)[:, None] / x.shape[1] for a, b in pairs)
        xx, xy, yy = 1.0 - radius * xx - ax * ax, radius * xy - ax * ay, 1.0 - radius * yy - ay * ay
        bx, by = bx - ax * radius, by - ay * radius
        determinant = xx * yy - xy * xy
        step_x, step_y = (yy * bx - xy * by) / determinant, (xx * by - xy * bx) / determinant
        cx, cy = cx + step_x, cy + step_y
        radius = radius - ax * step_x - ay * step_y
        # what is left is the square of this
        if max(np.abs(step_x).max(), np.abs(step_y).max()) < 1e-7:
            return cx, cy, radius
    raise SystemExit("not converged")


def internal_half_angle(u, v, w):
    """Half angle of the cone that fits the wave vectors (u, v, w) best."""
    size = np.sqrt(u * u + v * v + w * w)
    u, v, w = u / size, v / size, w / size
    alpha, beta = plane(u, v, w)
    length = np.sqrt(1.0 + alpha**2 + beta**2)
    # 1 - cos = |d - a|^2/2
    squared = (u + alpha / length) ** 2 + (v + beta / length) ** 2 + (w - 1.0 / length) ** 2
    return 2.0 * np.arcsin(0.5 * np.sqrt(squared.mean(axis=1, keepdims=True)))


def field_azimuth_deg(meridians):
    """Of the photon at the ring's axis, outside."""
    mismatch, axis = meridians.mismatch, meridians.axis
    u, v = meridians.axis_u, meridians.axis_v
    field = to_lab(mismatch.rotation, *mismatch.own.field(np.stack([u, v, mismatch.own.k_w(u, v)])))
    field = field - axis * (axis * field).sum(axis=0)
    azimuth = np.degrees(np.arctan2(field[1], field[0])) % 180.0
    return np.where(np.abs(azimuth - 90.0) > 90.0 - 1e-9, 0.0, azimuth)


def ring(setup, mismatch):
    """One ring at each tilt of a block: the numbers of its row, and whether all partners leave the crystal."""
    meridians, s = centred(*trace(mismatch, ROUGH))
    _, slope, c, along_u, along_v = meridians.at(s)
    least, largest = extremes(meridians, s, turning(meridians, s, slope, along_u, along_v))

    # Delta_k L/2 = +-1.39, first as if Delta_k were quadratic in psi
    level = 2.0 * HALF_MAXIMUM / setup.length
    if not (meridians.mismatch.at(meridians.axis_u, meridians.axis_v)[0] < -level).all():
        raise SystemExit("a filled ring at some tilt")
    part = (2.0 * level) * s * c / slope
    inner, outer = (meridians.solve(np.sqrt(s * s + sign * part), sign * level) for sign in (-1.0, 1.0))
    thickness = (np.arcsin(outer) - np.arcsin(inner)).mean(axis=1, keepdims=True)

    u, v = meridians.tangential(s, c)
    x, y, z = meridians.lab(s, c)
    centre_x, centre_y, radius = circle(x / z, y / z)
    ax, ay, az = meridians.axis
    half_angle = 2.0 * np.arcsin(np.sqrt(0.5 * (s * s / (1.0 + c)).mean(axis=1, keepdims=True)))
    internal = internal_half_angle(u, v, mismatch.own.k_w(u, v))
    angles = [np.arctan2(ax, az), np.arctan2(ay, az), half_angle, least, largest, thickness, internal]
    lengths = [centre_x * setup.screen_mm, centre_y * setup.screen_mm, radius * setup.screen_mm]
    numbers = [field_azimuth_deg(meridians), *map(np.degrees, angles), *lengths]
    twin_u, twin_v = mismatch.pump_u - u, mismatch.pump_v - v
    leave = (twin_u * twin_u + twin_v * twin_v < mismatch.twin.k0**2).all(axis=1)
    return np.concatenate(numbers, axis=1), leave


def place(direction, screen_mm):
    x, y, z = direction
    angles = np.arctan2(x, z), np.arctan2(y, z), np.arctan2(np.hypot(x, y), z), np.arctan2(y, x)
    return [*map(np.degrees, angles), x / z * screen_mm, y / z * screen_mm]


def sign_changes(value):
    """The two places along a ring, from 0 to 72, where a value at its samples changes sign."""
    after = np.roll(value, -1, axis=1)
    change = (value < 0.0) != (after < 0.0)
    if not (change.sum(axis=1) == 2).all():
        raise SystemExit("no two crossings at some tilt")
    j = np.nonzero(change)[1].reshape(-1, 2)
    here, there = (np.take_along_axis(a, j, axis=1) for a in (value, after))
    return j, here / (here - there)


def crossings(setup, one, two):
    """Both crossings at each tilt of a block, [tilt, number, crossing], in the order of the table."""
    (first, s), (second, s_second) = trace(one, FINE), trace(two, FINE)
    u, v = first.tangential(s, np.sqrt(1.0 - s * s))
    j, share = sign_changes(two.at(u, v)[0])
    sign_changes(one.at(*second.tangential(s_second, np.sqrt(1.0 - s_second * s_second)))[0])
    u, v = (
        np.take_along_axis(q, j, axis=1) * (1.0 - share) + np.take_along_axis(q, (j + 1) % SAMPLES, axis=1) * share
        for q in (u, v)
    )
    for _ in range(20):
        (value_1, u_1, v_1), (value_2, u_2, v_2) = one.at(u, v), two.at(u, v)
        determinant = u_1 * v_2 - v_1 * u_2
        step_u, step_v = (value_1 * v_2 - value_2 * v_1) / determinant, (value_2 * u_1 - value_1 * u_2) / determinant
        u, v = u - step_u, v - step_v
        # the gradients, for the angle, are those before the step
        if max(np.abs(step_u).max(), np.abs(step_v).max()) < 1e-13 * one.own.k0:
            break
    else:
        raise SystemExit("not converged")

    a = one.direction(u, v)
    b = outside(one.rotation, one.twin.k0, one.pump_u - u, one.pump_v - v)
    if not np.isfinite(b).all():
        raise SystemExit("total reflection at some tilt")

    def tangent(along_u, along_v):
        """On the screen, of the curve through a that stands on this gradient."""
        x, y, z = np.cross(a, to_lab(one.rotation, along_u, along_v, 0.0), axis=0)
        return x - a[0] * z / a[2], y - a[1] * z / a[2]

    (x_1, y_1), (x_2, y_2) = tangent(u_1, v_1), tangent(u_2, v_2)
    across = np.cross(a, b, axis=0)
    apart = np.arctan2(np.sqrt((across * across).sum(axis=0)), (a * b).sum(axis=0))
    angle = np.arctan2(np.abs(x_1 * y_2 - y_1 * x_2), np.abs(x_1 * x_2 + y_1 * y_2))
    places = place(a, setup.screen_mm) + place(b, setup.screen_mm)
    numbers = np.stack([*places, np.degrees(apart), np.degrees(angle)], axis=1)
    # upper first; at one height the one further to +x
    h, v = numbers[:, 0], numbers[:, 1]
    level = np.abs(v[:, 0] - v[:, 1]) <= 1e-6
    swap = np.where(level, h[:, 0] < h[:, 1], v[:, 0] < v[:, 1])
    numbers[swap] = numbers[swap, :, ::-1]
    return numbers


def ring_rows(setup, rotation):
    """For each row of a tilt: what its line says before the numbers, the numbers, and the statuses."""
    kinds, seen = [], set()
    for process in setup.processes:
        for photon, own, twin in (("signal", *process[1:]), ("idler", process[2], process[1])):
            key = own, twin, setup.degenerate or photon
            if key not in seen:
                seen.add(key)
                numbers, leave = ring(setup, Mismatch(setup, rotation, process, photon))
                before = f"1,{words(process)},{photon},{setup.nm[photon]!r},{own}"
                kinds.append((before, numbers, ["false,ok" if one else "false,total_reflection" for one in leave]))
    return kinds


def crossing_rows(setup, rotation):
    """The same for crossings; of degenerate photons the second is the first with a and b exchanged."""
    one, two = setup.processes
    numbers = crossings(setup, Mismatch(setup, rotation, one), Mismatch(setup, rotation, two))
    names = f"1,{words(one)},1,{words(two)},{setup.nm['signal']!r},{setup.nm['idler']!r}"
    after = [",,,false,ok"] * len(numbers)
    return [(f"{i + 1},{names}", numbers[..., i], after) for i in range(1 if setup.degenerate else 2)]


REPORTS = {"rings": (RINGS, ring_rows), "crossings": (CROSSINGS, crossing_rows)}


def lines(setup, report, tilts):
    """The table of a report, block by block."""
    header, rows = REPORTS[report]
    yield [",".join(header) + "\n"]
    for first in range(0, len(tilts), BLOCK):
        tilt_deg = tilts[first : first + BLOCK]
        kinds = []
        for before, numbers, after in rows(setup, setup.rotations(tilt_deg)):
            # %r writes the shortest number that reads back exactly
            form = ",".join(["%d,%r", before, *["%r"] * numbers.shape[1], "%s"]) + "\n"
            points = range(first, first + len(tilt_deg))
            kinds.append([form % row for row in zip(points, tilt_deg.tolist(), *numbers.T.tolist(), after)])
        yield [line for point in zip(*kinds) for line in point]


def sweep(setup, report, points, path):
    """Writes the table of a report and says how fast."""
    tilts = np.linspace(*TILTS_DEG, points)
    start = time.perf_counter()
    with open(path, "w", encoding="utf-8") as file:
        for block in lines(setup, report, tilts):
            file.writelines(block)
    seconds = time.perf_counter() - start
    return {"report": report, "points": points, "seconds": seconds, "points_per_second": points / seconds}


def check(setup, path):
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
    ours = list(csv.DictReader(line for block in lines(setup, report, tilts) for line in block))
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
    parser = argparse.ArgumentParser(description="Rings and crossings of a tilted uniaxial crystal, with NumPy.")
    parser.add_argument("--points", type=int, default=20000, help="tilts from -1 deg to 4 deg")
    parser.add_argument("--report", choices=["rings", "crossings", "both"], default="rings")
    parser.add_argument("--out", default="rows.csv", help="the table; with both, crossings go to FILE.crossings.csv")
    parser.add_argument("--check", metavar="FILE", help="compare with a table of the program instead")
    numbers = {"theta": 42.541, "phi": 0.0, "cross-tilt": 0.0, "roll": 0.0}
    lengths = {"pump-nm": 405.0, "signal-nm": 810.0, "length-mm": 2.0, "screen-mm": 1000.0}
    for name, default in (numbers | lengths).items():
        parser.add_argument("--" + name, type=float, default=default, help=f"{default:g}" + " deg" * (name in numbers))
    parser.add_argument("--processes", default="eeo,eoe", help="pump, signal, idler: eeo,eoe; crossings are of two")
    options = parser.parse_args()
    setup = Setup(options)
    if options.check:
        check(setup, options.check)
        return
    for report in ["rings", "crossings"] if options.report == "both" else [options.report]:
        both = options.report == "both" and report == "crossings"
        path = options.out + ".crossings.csv" if both else options.out
        print(json.dumps(sweep(setup, report, options.points, path)))
        sys.stdout.flush()


if __name__ == "__main__":
    main()
