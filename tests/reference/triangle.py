"""Collinear type II pairs without filters behind plates of the crystal's own cut: the triangle with all dispersion.

BBO (K. Kato, IEEE J. Quantum Electron. 22, 1013 (1986), from memory), 405 nm, 1 mm, theta 41.787 deg, phi 0, pairs along the pump, one
plate of the same cut turned by 90 deg in each arm. Band: what the data set covers (0.22 to 1.06 um) of 20 nulls of the sinc.
Shares no code with the crate. `python3 triangle.py` prints triangle.txt: the visibility for each length of the plates; what the
triangle 1 - |1 - 2 tau/(D L)| says with Delta_k linear in frequency over 20 nulls.
"""

import numpy as np

C = 2.99792458e8
THETA, LENGTH = np.radians(41.787), 1e-3
PUMP = 2 * np.pi * C / 405e-9


def indices(omega):
    s = (2e6 * np.pi * C / omega) ** 2
    no = np.sqrt(2.7359 + 0.01878 / (s - 0.01822) - 0.01354 * s)
    ne = np.sqrt(2.3753 + 0.01224 / (s - 0.01667) - 0.01516 * s)
    return no, (np.cos(THETA) ** 2 / no**2 + np.sin(THETA) ** 2 / ne**2) ** -0.5, ne


def k(omega, kind):
    return indices(omega)["oe".index(kind)] * omega / C


def lean(omega):
    """Angle between the field of e and the face: that of walk-off, tan = n^2/2 (1/ne^2 - 1/no^2) sin 2 theta."""
    no, n, ne = indices(omega)
    return np.arctan(0.5 * n**2 * (ne**-2 - no**-2) * np.sin(2 * THETA))


def amplitude(a, kinds, plate):
    """Of the history with these polarizations (a, b); behind the plates, which exchange o and e."""
    waves = [(a, kinds[0]), (PUMP - a, kinds[1])]
    sum_k = sum(k(w, kind) for w, kind in waves)
    pump = k(PUMP, "e")
    # d_eff = d22 cos(theta + rho_p) cos(theta + rho_e) for phi = 0; d31 and d33 do not act there
    e = next(w for w, kind in waves if kind == "e")
    d = np.cos(THETA + lean(PUMP)) * np.cos(THETA + lean(e))
    behind = sum(k(w, "o" if kind == "e" else "e") for w, kind in waves)
    phase = (pump + sum_k) * LENGTH / 2 + behind * plate
    return d * np.sinc((pump - sum_k) * LENGTH / 2 / np.pi) * np.exp(1j * phase)


def coherence(one, two, weights):
    norm = np.sum(weights * (abs(one) ** 2 + abs(two) ** 2)) / 2
    return abs(np.sum(weights * one * np.conj(two))) / norm


nodes, weights = np.polynomial.legendre.leggauss(4000)
low, high = 2 * np.pi * C / 1.06e-6, PUMP - 2 * np.pi * C / 1.06e-6
dispersive = low + (high - low) * (nodes + 1) / 2
step = PUMP * 1e-7
delay = [(k(PUMP / 2 + step, kind) - k(PUMP / 2 - step, kind)) / (2 * step) for kind in "oe"]
span = abs(delay[0] - delay[1]) * LENGTH
linear = 20 * 2 * np.pi / span * nodes

print("plate_mm,visibility,triangle,linear_20_nulls")
for plate_mm in np.arange(0, 1.01, 0.1):
    full = [amplitude(dispersive, kinds, plate_mm * 1e-3) for kinds in ("eo", "oe")]
    share = plate_mm * 1e-3 / LENGTH
    weight = weights * np.sinc(span * linear / 2 / np.pi) ** 2
    rubin = abs(np.sum(weight * np.exp(1j * span * linear * (1 - 2 * share)))) / np.sum(weight)
    print(f"{plate_mm:.1f},{coherence(*full, weights):.4f},{1 - abs(1 - 2 * share):.4f},{rubin:.4f}")
