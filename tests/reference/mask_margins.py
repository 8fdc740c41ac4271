"""Margins of emission masks by brute force, for src/verdict/tests/masks.rs.

Densities are closed formulas on bins; readings integrate them directly, every eighth of a bin.
The limits are typed here from the printed rules, not read from the program's file.
"""

import sys

import numpy as np


def bins(count, step):
    return (np.arange(count) - count // 2) * step


def band_powers(density, step, centres, width):
    """Power of a piecewise constant density from centre - width/2 to centre + width/2."""
    edges = (np.arange(len(density) + 1) - len(density) // 2 - 0.5) * step
    total = np.concatenate([[0.0], np.cumsum(density.astype(np.longdouble) * step)])
    at = lambda hz: np.interp(hz, edges, total.astype(float))
    direct = at(centres + width / 2) - at(centres - width / 2)
    return np.maximum(direct, 0.0)


def report(name, density, step, width, reference_w, segments, origin=0.0):
    for start, stop, limit in segments:
        centres = np.linspace(start, stop, int((stop - start) / step * 8) + 2)
        for side, sign in (("lower", -1.0), ("upper", 1.0)):
            read = 10 * np.log10(band_powers(density, step, sign * centres, width) / reference_w)
            margin = limit(centres) - read
            worst = int(np.argmin(margin))
            print(f"{name} {start:.0f} {side} margin {margin[worst]:.4f} dB at {centres[worst]:.0f} Hz")


print("python", sys.version.split()[0], "numpy", np.__version__)

# 47 CFR 90.210(c), 200 Hz (1 % of 20 kHz), against the power in 20 kHz; 20 Hz bins.
f = bins(8000, 20.0)
d = 1e-3 * 10 ** (-(np.abs(f) / 4e3) ** 1.2) * (1 + 0.5 * np.sin(f / 3e3)) + 1e-9
total = band_powers(d, 20.0, np.array([0.0]), 20e3)[0]
report("C", d, 20.0, 200.0, total, [
    (5e3, 10e3, lambda c: -83 * np.log10(c / 5e3)),
    (10e3, 50e3, lambda c: np.maximum(-29 * np.log10((c / 1e3) ** 2 / 11), -50.0)),
])

# 802.11 OFDM: 100 kHz against the highest 100 kHz within 20 MHz; 25 kHz bins.
f = bins(4000, 25e3)
d = 1e-9 * 10 ** (-np.maximum(np.abs(f) - 8e6, 0.0) / 4e6) * (1 + 0.3 * np.sin(f / 5e6))
centres = np.arange(-10e6, 10e6 + 1, 25e3 / 8)
peak = band_powers(d, 25e3, centres, 100e3).max()
points = ([9e6, 11e6, 20e6, 30e6], [0.0, -20.0, -28.0, -40.0])
report("W", d, 25e3, 100e3, peak, [
    (a, b, lambda c: np.interp(c, *points)) for a, b in zip(points[0], points[0][1:])
])
