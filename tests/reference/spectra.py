#!/usr/bin/env python3
"""Spectra, windows and error figures of one made-up stream by SciPy and NumPy, for tests/spectra.rs.

    python3 tests/reference/spectra.py            writes spectra.json beside this file
    python3 tests/reference/spectra.py --check    computes again and compares with spectra.json

The stream is made of integers and plain additions, so that the Rust test makes the same one: see `stream`.
"""

import json
import math
import pathlib
import sys

import numpy as np
import scipy
from scipy import signal

RATE_HZ = 48e3
LOAD_OHM = 50.0
SAMPLES = 20_000
FILE = pathlib.Path(__file__).with_suffix(".json")


def stream():
    """Coloured noise 40 dB above white noise, and a tone; a 64-bit linear congruence (Knuth) draws."""
    state = 1

    def draw():
        nonlocal state
        state = (state * 6364136223846793005 + 1442695040888963407) % 2**64
        return (state >> 11) * 2.0**-53 - 0.5

    out = np.empty(SAMPLES, complex)
    slow_i = slow_q = 0.0
    for n in range(SAMPLES):
        slow_i = 0.9 * slow_i + draw()
        slow_q = 0.9 * slow_q + draw()
        phase = 2.0 * math.pi * ((n * 777) % 6000) / 6000.0
        out[n] = complex(
            slow_i + 0.01 * draw() + 0.3 * math.cos(phase),
            slow_q + 0.01 * draw() + 0.3 * math.sin(phase),
        )
    return out


def windows(length):
    heinzel = [1.0, 1.942604, 1.340318, 0.440811, 0.043097]
    return {
        "hann": signal.windows.hann(length, sym=False),
        "blackman_harris": signal.windows.blackmanharris(length, sym=False),
        "flat_top": signal.windows.general_cosine(length, heinzel, sym=False),
        "kaiser_8.6": signal.windows.kaiser(length, 8.6, sym=False),
    }


def occupied(density, bin_hz, fraction):
    """Edges where the running sum, linear within a bin, leaves half of the rest outside."""
    edges = (np.arange(len(density) + 1) - len(density) // 2 - 0.5) * bin_hz
    running = np.concatenate([[0.0], np.cumsum(density)])
    running /= running[-1]
    rest = (1.0 - fraction) / 2.0
    return [float(np.interp(level, running, edges)) for level in (rest, 1.0 - rest)]


def results():
    x = stream()
    spectra = []
    for length, overlap in ((250, 0.5), (256, 0.75)):
        for name, window in windows(length).items():
            how = dict(window=window, nperseg=length, noverlap=round(length * overlap),
                       detrend=False, return_onesided=False, scaling="density")
            _, mean = signal.welch(x, RATE_HZ, **how)
            _, _, each = signal.spectrogram(x, RATE_HZ, mode="psd", **how)
            mean = np.fft.fftshift(mean) / (2 * LOAD_OHM)
            peak = np.fft.fftshift(each.max(axis=1)) / (2 * LOAD_OHM)
            spectra.append({
                "window": name, "length": length, "overlap": overlap,
                "enbw_hz": float(RATE_HZ * np.sum(window**2) / np.sum(window) ** 2),
                "mean_w_per_hz": mean.tolist(), "peak_w_per_hz": peak.tolist(),
                "occupied_hz": occupied(mean, RATE_HZ / length, 0.99),
            })
    y = (0.3 - 0.4j) * x * (1.0 - 0.02 * np.abs(x) ** 2)
    # The meter has no full filter support for 128 samples at each end.
    inner_x, inner_y = x[128:-128], y[128:-128]
    gain = np.vdot(inner_x, inner_y) / np.vdot(inner_x, inner_x).real
    rest = inner_y / gain - inner_x
    square = np.abs(x) ** 2
    return {
        "versions": {"python": sys.version.split()[0], "numpy": np.__version__, "scipy": scipy.__version__},
        "rate_hz": RATE_HZ, "load_ohm": LOAD_OHM, "samples": SAMPLES,
        "first": [[v.real, v.imag] for v in x[:2].tolist()], "last": [x[-1].real, x[-1].imag],
        "windows": {name: window.tolist() for name, window in windows(20).items()},
        "spectra": spectra,
        "cubic": {
            "gain": [gain.real, gain.imag],
            "evm_percent": float(100 * np.linalg.norm(rest) / np.linalg.norm(inner_x)),
        },
        "envelope": {
            "mean_w": float(square.mean() / (2 * LOAD_OHM)),
            "papr_db": float(10 * np.log10(square.max() / square.mean())),
            "quantiles_db": [
                [p, float(10 * np.log10(np.quantile(square, 1 - p) / square.mean()))]
                for p in (0.9, 0.5, 0.1, 0.01, 0.001)
            ],
        },
    }


def difference(a, b, where=""):
    """Largest relative difference of the numbers in two trees; other leaves must be equal."""
    if isinstance(a, dict):
        if a.keys() != b.keys():
            raise SystemExit(f"{where}: keys differ")
        return max((difference(a[k], b[k], f"{where}.{k}") for k in a if k != "versions"), default=0.0)
    if isinstance(a, list):
        if len(a) != len(b):
            raise SystemExit(f"{where}: lengths differ")
        return max((difference(p, q, f"{where}[{i}]") for i, (p, q) in enumerate(zip(a, b))), default=0.0)
    if isinstance(a, float):
        return abs(a - b) / max(abs(a), abs(b), 1e-9)
    if a != b:
        raise SystemExit(f"{where}: {a} is not {b}")
    return 0.0


def main():
    new = results()
    if "--check" not in sys.argv[1:]:
        FILE.write_text(json.dumps(new, indent=None, separators=(",", ":")) + "\n")
        print(f"{FILE}: {FILE.stat().st_size} bytes")
        return
    old = json.loads(FILE.read_text())
    worst = difference(old, new)
    print(f"stored with {old['versions']}, computed with {new['versions']}: largest relative difference {worst:.1e}")
    if worst > 1e-6:
        raise SystemExit("the stored numbers do not come from this script")


if __name__ == "__main__":
    main()
