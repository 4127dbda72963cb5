"""The camera picture of benches/camera.rs in vectorised NumPy: same crystal, wavelengths, pixels and formulas.

    python3 benches/camera_numpy.py PIXELS WAVELENGTHS THREADS IMAGE

prints the seconds that the exposure took (imports, and writing IMAGE as raw float64, not counted). Blocks of rows that
fit the cache, invariants hoisted, results written into buffers that are used again; THREADS blocks at a time, since
NumPy lets go of the interpreter's lock. |d_eff| is the same everywhere here.
"""

import sys
import time
from concurrent.futures import ThreadPoolExecutor

import numpy as np

PUMP, FILTER = 0.405, 0.010  # um; rectangular filter
THETA, TILT = np.radians(42.54), np.radians(0.4)
LENGTH = 2000.0  # um
FIELD, SCALE = 0.3, 1.0  # m
ROWS = 16


def eta_o(l):
    return 1.0 / (2.7359 + 0.01878 / (l * l - 0.01822) - 0.01354 * l * l)


def eta_e(l):
    return 1.0 / (2.3753 + 0.01224 / (l * l - 0.01667) - 0.01516 * l * l)


class Quadric:
    """k.M k = k0^2, M = eta_e + a a (eta_o - eta_e) for e, eta_o for o; the larger root for k_w."""

    def __init__(self, kind, wavelength):
        self.k0 = 2 * np.pi / wavelength
        a = np.array([np.sin(THETA), 0.0, np.cos(THETA)])
        o, e = eta_o(wavelength), eta_e(wavelength)
        self.m = np.eye(3) * o if kind == "o" else np.eye(3) * e + np.outer(a, a) * (o - e)
        self.kind = kind

    def k_w(self, u, v, out, tmp):
        m = self.m
        if self.kind == "o":
            # sqrt(k0^2/eta - u^2 - v^2)
            np.multiply(u, u, out=out)
            np.multiply(v, v, out=tmp)
            out += tmp
            np.subtract(self.k0**2 / m[0, 0], out, out=out)
            return np.sqrt(out, out=out)
        # v stands across the plane of Z, so M_uv = M_vw = 0
        b0, b2 = m[0, 2] / m[2, 2], m[0, 0] / m[2, 2]
        # k_w = -b0 u + sqrt(b0^2 u^2 - (b2 u^2 + M_vv/M_ww v^2) + k0^2/M_ww)
        np.multiply(u, u, out=out)
        out *= b0 * b0 - b2
        np.multiply(v, v, out=tmp)
        tmp *= m[1, 1] / m[2, 2]
        out -= tmp
        out += self.k0**2 / m[2, 2]
        np.sqrt(out, out=out)
        np.multiply(u, b0, out=tmp)
        out -= tmp
        return out


def waves(count):
    """(k_p, q_p, signal, idler, weight) of each wavelength and process."""
    centre = 2 * PUMP
    offsets = FILTER * ((np.arange(count) + 0.5) / count - 0.5)
    share = 1 / (centre + offsets) ** 2
    share /= share.sum()
    pump = Quadric("e", PUMP)
    qp = (-pump.k0 * np.sin(TILT), 0.0)
    one = lambda x: np.array([x])
    kp = pump.k_w(one(qp[0]), one(qp[1]), np.empty(1), np.empty(1))[0]
    for wavelength, part in zip(centre + offsets, share):
        idler = 1 / (1 / PUMP - 1 / wavelength)
        weight = part * PUMP**2 / (wavelength * idler) * (PUMP / wavelength) ** 2
        for s, i in (("e", "o"), ("o", "e")):
            yield kp, qp, Quadric(s, wavelength), Quadric(i, idler), weight


def block(first, pixels, all_waves, image):
    rows = min(ROWS, pixels - first)
    pitch = FIELD / pixels
    x = (np.arange(-1, pixels + 1) + 0.5 - pixels / 2) * pitch
    y = (pixels / 2 - np.arange(first - 1, first + rows + 1) - 0.5)[:, None] * pitch
    r = np.sqrt(x * x + y * y + SCALE * SCALE)
    # lab components of u and v for a tilt about v; w is the face normal
    du = (x * np.cos(TILT) - SCALE * np.sin(TILT)) / r
    dv = (y + 0 * x) / r
    dw = (x * np.sin(TILT) + SCALE * np.cos(TILT)) / r
    total = np.zeros_like(r)
    u, v, ks, phase, tmp = (np.empty_like(r) for _ in range(5))
    for kp, qp, signal, idler, weight in all_waves:
        np.multiply(du, signal.k0, out=u)
        np.multiply(dv, signal.k0, out=v)
        signal.k_w(u, v, ks, tmp)
        np.subtract(qp[0], u, out=u)
        np.subtract(qp[1], v, out=v)
        idler.k_w(u, v, phase, tmp)
        phase += ks
        np.subtract(kp, phase, out=phase)
        phase *= 0.5 * LENGTH
        np.sin(phase, out=tmp)
        tmp /= phase
        tmp *= tmp
        tmp *= weight
        total += tmp
    total *= dw * (SCALE / r) ** 3
    # mean over a pixel: f + h^2/24 (f_xx + f_yy)
    middle = total[1:-1, 1:-1]
    around = total[:-2, 1:-1] + total[2:, 1:-1] + total[1:-1, :-2] + total[1:-1, 2:]
    image[first : first + rows] = middle + (around - 4 * middle) / 24


def main():
    pixels, count, threads = (int(a) for a in sys.argv[1:4])
    image = np.empty((pixels, pixels))
    start = time.perf_counter()
    all_waves = list(waves(count))
    with ThreadPoolExecutor(threads) as pool:
        list(pool.map(lambda first: block(first, pixels, all_waves, image), range(0, pixels, ROWS)))
    print(time.perf_counter() - start)
    image.tofile(sys.argv[4])


main()
