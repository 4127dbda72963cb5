"""What the line of the pump alone leaves of the visibility of two crossed type I crystals, and what 421 fs per mm are.

BBO (K. Kato, IEEE J. Quantum Electron. 22, 1013 (1986), from memory), 405 nm, two crystals of 0.5 mm in contact, theta 29.237 deg,
the second turned by 90 deg, pairs at 3 deg. Shares no code with the crate. `python3 pump_line.py` prints pump_line.txt.

Phase of the pair born in the first crystal minus that born in the second: both pumps and both photons pass half of the crystal
they are born in; the first pair then passes the second crystal as e, the second pair's pump passed the first crystal as o.
"""

import numpy as np

C = 2.99792458e8
THETA, LENGTH, POLAR = np.radians(29.237), 0.5e-3, np.radians(3.0)
PUMP = 2 * np.pi * C / 405e-9
FIRST, SECOND = (np.sin(THETA), 0.0, np.cos(THETA)), (0.0, np.sin(THETA), np.cos(THETA))


def indices(omega):
    s = (2e6 * np.pi * C / omega) ** 2
    return (
        np.sqrt(2.7359 + 0.01878 / (s - 0.01822) - 0.01354 * s),
        np.sqrt(2.3753 + 0.01224 / (s - 0.01667) - 0.01516 * s),
    )


def ordinary(omega, qx, qy):
    return np.sqrt((indices(omega)[0] * omega / C) ** 2 - qx**2 - qy**2)


def extraordinary(omega, qx, qy, axis):
    """Larger root kz of (1/no^2 - 1/ne^2) (k.axis)^2 + k^2/ne^2 = (omega/c)^2."""
    no, ne = indices(omega)
    d, t = no**-2 - ne**-2, qx * axis[0] + qy * axis[1]
    a, b = d * axis[2] ** 2 + ne**-2, 2 * d * t * axis[2]
    c = d * t**2 + (qx**2 + qy**2) / ne**2 - (omega / C) ** 2
    return (-b + np.sqrt(b * b - 4 * a * c)) / (2 * a)


def relative(pump, a, q, azimuth, length=LENGTH):
    """Phase between the histories and both sinc factors; photon a has (a, q), its partner (pump - a, -q)."""
    qx, qy = q * np.cos(azimuth), q * np.sin(azimuth)
    b = pump - a
    o = ordinary(a, qx, qy) + ordinary(b, -qx, -qy)
    e = extraordinary(a, qx, qy, SECOND) + extraordinary(b, -qx, -qy, SECOND)
    first, second = (extraordinary(pump, 0, 0, axis) for axis in (FIRST, SECOND))
    phase = ((first + o) / 2 + e - ordinary(pump, 0, 0) - (second + o) / 2) * length
    return phase, np.sinc((first - o) * length / 2 / np.pi), np.sinc((second - o) * length / 2 / np.pi)


def wave_vector(kind, a, polar):
    return (a if kind == "directions" else PUMP / 2) / C * np.sin(polar)


def visibility(nm, kind, polar, weighed, in_wavelength, azimuth=np.pi / 2):
    x = np.linspace(-4, 4, 8001)
    gauss = np.exp(-4 * np.log(2) * x**2)
    line = 405e-9 + x * nm * 1e-9
    pump = 2 * np.pi * C / line if in_wavelength else PUMP * (1 + x * nm / 405)
    phase, first, second = relative(pump, pump / 2, wave_vector(kind, pump / 2, polar), azimuth)
    if not weighed:
        first = second = 1.0
    norm = np.sum(gauss * (first**2 + second**2) / 2)
    return abs(np.sum(gauss * first * second * np.exp(1j * phase))) / norm


def offset(kind, polar, azimuth=np.pi / 2):
    step = 1e10
    pump = PUMP + np.array([-step, step])
    phase = relative(pump, pump / 2, wave_vector(kind, pump / 2, polar), azimuth, 1e-3)[0]
    return (phase[1] - phase[0]) / (2 * step) * 1e15


print("polar,stands,fs_per_mm,weighed_with_sinc,gaussian_in,0.1 nm,0.3 nm,0.6 nm,1.0 nm")
for polar, kind in ((0.0, "directions"), (POLAR, "directions"), (POLAR, "wave_vectors")):
    for weighed in (False, True):
        # along the pump no pair of this cut is matched: there is nothing to weigh
        if weighed and polar == 0.0:
            continue
        for in_wavelength in (False, True):
            row = [visibility(nm, kind, polar, weighed, in_wavelength) for nm in (0.1, 0.3, 0.6, 1.0)]
            print(
                f"{np.degrees(polar):.0f},{kind},{offset(kind, polar):.1f},{'yes' if weighed else 'no'},"
                f"{'wavelength' if in_wavelength else 'frequency'}," + ",".join(f"{v:.4f}" for v in row)
            )
