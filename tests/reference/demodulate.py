#!/usr/bin/env python3
"""EVM of symbols of test signals, by an independent demodulator in NumPy.

Makes three signals from a seed, spoils them (filter ripple, a cubic, noise), writes them as the tests read them, and
demodulates them with everything known: the sent points, the instants, the format. A gain (single carrier) or a gain
for each carrier (OFDM) is fitted by numpy.linalg.lstsq, a delay of the single carrier by scipy.optimize; the error
vector magnitude is 100 rms(z / g - s) / rms(s).

    demodulate.py            writes demodulate.json and demodulate/*.npy
    demodulate.py --check    computes all again and compares
"""
import json
import sys
from pathlib import Path

import numpy as np
import scipy
from scipy.interpolate import CubicSpline
from scipy.optimize import minimize_scalar

TABLES = {}
HERE = Path(__file__).resolve().parent
FOLDER = HERE / "demodulate"


def rrc(t, a):
    """Root-raised cosine at t symbols: a cubic spline through the integral of its spectrum, no closed form."""
    if a not in TABLES:
        at = np.arange(-82, 82, 1 / 32)
        TABLES[a] = CubicSpline(at, integral(at, a))
    return TABLES[a](t)


def integral(t, a):
    f = np.linspace(-(1 + a) / 2, (1 + a) / 2, 4001)
    edge = np.abs(f) - (1 - a) / 2
    h = np.where(edge <= 0, 1.0, np.cos(np.pi / 2 * np.clip(edge / a, 0, 1)))
    df = f[1] - f[0]
    w = np.full(f.size, df)
    w[[0, -1]] /= 2
    return np.exp(2j * np.pi * np.outer(t, f)).dot(h * w).real


def qam(order, count, rng):
    side = int(np.sqrt(order))
    levels = 2 * np.arange(side) - side + 1
    points = rng.choice(levels, count) + 1j * rng.choice(levels, count)
    return points / np.sqrt(2 * (order - 1) / 3)


def spoil(x, rng, cubic, noise):
    x = x / np.abs(x).max()
    y = x - cubic * x * np.abs(x) ** 2
    echo = np.r_[np.zeros(2), y[:-2]] * 0.02j
    y = 0.4 * np.exp(0.8j) * (y + echo)
    y += noise * (rng.normal(size=y.size) + 1j * rng.normal(size=y.size))
    return y.astype(np.complex64)


def single_carrier(order, a, sps, delay, cubic, noise, seed):
    """Symbols through a filter that is 80 symbols long to each side, sampled sps times a symbol, `delay` samples late."""
    rng = np.random.default_rng(seed)
    count, span = 700, 80
    s = qam(order, count, rng)
    length = int((count + 2 * span) * sps)
    x = np.zeros(length, complex)
    for k in range(count):
        middle = (span + k) * sps + delay
        n = np.arange(int(np.ceil(middle - span * sps)), int(np.floor(middle + span * sps)) + 1)
        n = n[(n >= 0) & (n < length)]
        x[n] += s[k] * rrc((n - middle) / sps, a)
    y = spoil(x, rng, cubic, noise)
    # Cut where the first and the last symbol stand: no stretch without symbols is left.
    cut = int(span * sps)
    y = y[cut:length - cut]
    length = y.size
    # Symbols that a filter of this length sees whole.
    half = int(np.ceil(np.clip(16 / a, 32, 160) * sps))
    offset = span * sps + delay - cut
    first = int(np.ceil((half - offset) / sps))
    total = int((length - 2 * half - 2) // sps) - 1
    indices = np.arange(first, first + total)

    def received(shift):
        z = np.empty(indices.size, complex)
        for i, k in enumerate(indices):
            middle = k * sps + offset + shift
            n = np.arange(int(np.ceil(middle - half)), int(np.floor(middle + half)) + 1)
            n = n[(n >= 0) & (n < length)]
            z[i] = y[n].dot(rrc((n - middle) / sps, a)) / sps
        return z

    def error(shift):
        z = received(shift)
        g = np.linalg.lstsq(s[indices][:, None], z, rcond=None)[0][0]
        e = z / g - s[indices]
        return np.sqrt(np.mean(np.abs(e) ** 2) / np.mean(np.abs(s[indices]) ** 2)), e

    best = minimize_scalar(lambda shift: error(shift)[0], bounds=(-0.5, 0.5), method="bounded", options={"xatol": 1e-5})
    value, e = error(best.x)
    return y, {
        "evm_percent": 100 * value,
        "evm_peak_percent": 100 * np.abs(e).max() / np.sqrt(np.mean(np.abs(s[indices]) ** 2)),
        "symbols": int(indices.size),
    }


def ofdm(order, size, carriers, prefix, over, cubic, noise, seed):
    """Rectangular symbols, carriers beside an empty middle; the window starts half a prefix early."""
    rng = np.random.default_rng(seed)
    symbols = 60
    k = np.r_[np.arange(-(carriers // 2), 0), np.arange(1, carriers // 2 + 1)]
    s = qam(order, symbols * carriers, rng).reshape(symbols, carriers)
    useful, guard = size * over, prefix * over
    t = np.arange(-guard, useful)
    x = (s @ np.exp(2j * np.pi * np.outer(k, t) / useful)).ravel()
    y = spoil(x, rng, cubic, noise)
    rows = y.reshape(symbols, guard + useful)[:, guard - guard // 2: guard - guard // 2 + useful]
    z = rows @ np.exp(-2j * np.pi * np.outer(np.arange(useful) - guard // 2, k) / useful) / useful
    e = np.empty_like(z)
    for c in range(carriers):
        g = np.linalg.lstsq(s[:, c][:, None], z[:, c], rcond=None)[0][0]
        e[:, c] = z[:, c] / g - s[:, c]
    mean = np.mean(np.abs(s) ** 2)
    return y, {
        "evm_percent": 100 * np.sqrt(np.mean(np.abs(e) ** 2) / mean),
        "evm_peak_percent": 100 * np.abs(e).max() / np.sqrt(mean),
        "evm_p95_percent": 100 * np.sort(np.abs(e).ravel())[int(np.ceil(0.95 * e.size)) - 1] / np.sqrt(mean),
        "symbols": symbols,
        "per_carrier_percent": list(100 * np.sqrt(np.mean(np.abs(e) ** 2, axis=0) / mean)),
    }


CASES = {
    "qpsk": (lambda: single_carrier(4, 0.35, 4.0, 0.37, 0.1, 0.002, 11)),
    "qam16": (lambda: single_carrier(16, 0.22, 5.3, 1.21, 0.1, 0.002, 12)),
    "qam64": (lambda: ofdm(64, 64, 52, 16, 4, 0.05, 0.0005, 13)),
}


def main():
    stored = HERE / "demodulate.json"
    check = "--check" in sys.argv[1:]
    before = json.loads(stored.read_text()) if check else None
    document = {"numpy": np.__version__, "scipy": scipy.__version__, "cases": {}}
    failed = False
    for name, make in CASES.items():
        samples, figures = make()
        document["cases"][name] = figures
        if check:
            kept = np.load(FOLDER / f"{name}.npy")
            if not np.allclose(kept, samples, rtol=0, atol=1e-6):
                print(f"{name}: the samples differ")
                failed = True
            if abs(before["cases"][name]["evm_percent"] - figures["evm_percent"]) > 1e-4:
                print(f"{name}: {before['cases'][name]['evm_percent']} stored, {figures['evm_percent']} now")
                failed = True
        else:
            FOLDER.mkdir(exist_ok=True)
            np.save(FOLDER / f"{name}.npy", samples)
        print(name, {key: value for key, value in figures.items() if not isinstance(value, list)})
    if not check:
        stored.write_text(json.dumps(document, indent=1) + "\n")
    sys.exit(failed)


if __name__ == "__main__":
    main()
