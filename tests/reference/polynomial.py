#!/usr/bin/env python3
"""Least squares and memory polynomials by NumPy, for tests/predistortion.rs.

Writes polynomial.json; with --check computes everything again and compares.
The input is a sum of complex tones at fixed irrational frequencies, so that Rust makes the same samples.
"""
import json
import pathlib
import platform
import sys

import numpy

HERE = pathlib.Path(__file__).parent
STORED = HERE / "polynomial.json"
SAMPLES = 3000
TONES = [(0.31, 0.0417), (0.23, -0.0291), (0.17, 0.1013), (0.12, -0.0839), (0.09, 0.0057)]


def signal():
    n = numpy.arange(SAMPLES)
    return sum(a * numpy.exp(2j * numpy.pi * f * n) for a, f in TONES)


def lagged(x, lag):
    """x(n - lag), zero before the start."""
    return numpy.concatenate([numpy.zeros(lag, complex), x[: len(x) - lag]]) if lag else x


def matrix(x, terms):
    """Columns x(n - s) |x(n - e)|^p for the terms (s, e, p), rows whose lags all exist."""
    reach = max(max(s, e) for s, e, p in terms)
    columns = [lagged(x, s) * numpy.abs(lagged(x, e)) ** p for s, e, p in terms]
    return numpy.stack(columns, axis=1)[reach:], reach


def pair(z):
    return [float(z.real), float(z.imag)]


def system(name, terms, output, x):
    a, reach = matrix(x, terms)
    c, _, rank, _ = numpy.linalg.lstsq(a, output[reach:], rcond=None)
    scaled = a / numpy.linalg.norm(a, axis=0)
    residual = numpy.linalg.norm(a @ c - output[reach:]) ** 2
    return {
        "name": name,
        "terms": [list(term) for term in terms],
        "coefficients": [pair(z) for z in c],
        "rank": int(rank),
        "condition": float(numpy.linalg.cond(scaled)),
        "residual_square": float(residual),
    }


def compute():
    x = signal()
    # An amplifier with memory, known coefficients, no noise: recovered by the same terms.
    truth_terms = [(m, m, p) for m in range(3) for p in (0, 1, 2, 3, 4)]
    truth = numpy.array([
        1.0513 + 0.0904j, -0.0680 + 0.0023j, -0.0542 - 0.2900j, 0.0289 + 0.0217j, 0.0657 + 0.0583j,
        0.0031 - 0.0089j, 0.0129 - 0.0064j, -0.0621 - 0.0932j, 0.0127 + 0.0412j, -0.0190 + 0.0318j,
        -0.0092 + 0.0037j, 0.0221 + 0.0101j, -0.0059 - 0.0188j, 0.0311 - 0.0102j, -0.0147 + 0.0077j,
    ])
    lags = [lagged(x, s) * numpy.abs(lagged(x, e)) ** p for s, e, p in truth_terms]
    output = sum(c * column for c, column in zip(truth, lags))
    # A harder output, with terms that the fit does not hold: its residual is not zero.
    bent = output * numpy.exp(0.3j * numpy.abs(x) ** 2) / numpy.sqrt(1 + numpy.abs(x) ** 2)
    cross = [(s, s, p) for s in (1, 2) for p in range(4)]
    cross += [(s, e, p) for s in (1, 2) for e in (s + 1, s - 1) for p in (1, 2, 3)]
    return {
        "python": platform.python_version(),
        "numpy": numpy.__version__,
        "samples": SAMPLES,
        "tones": TONES,
        "truth": {"terms": [list(t) for t in truth_terms], "coefficients": [pair(z) for z in truth]},
        "output": [pair(z) for z in output[:40]],
        "systems": [
            system("memory, exact", truth_terms, output, x),
            system("memory, with a rest", [(m, m, p) for m in range(4) for p in range(5)], bent, x),
            system("cross, with a rest", cross, bent, x),
        ],
    }


def differs(a, b, path=""):
    if isinstance(a, dict):
        return next((d for k in a if (d := differs(a[k], b.get(k), f"{path}.{k}"))), None)
    if isinstance(a, (list, tuple)):
        if len(a) != len(b):
            return path
        return next((d for i, (p, q) in enumerate(zip(a, b)) if (d := differs(p, q, f"{path}[{i}]"))), None)
    if isinstance(a, float):
        tolerance = 1e-6 if "condition" in path else 1e-9
        return None if abs(a - b) <= tolerance * max(1.0, abs(a)) else f"{path}: {a} {b}"
    if path in (".python", ".numpy"):
        return None
    return None if a == b else f"{path}: {a} {b}"


if __name__ == "__main__":
    result = json.loads(json.dumps(compute()))
    if "--check" in sys.argv:
        found = differs(result, json.loads(STORED.read_text()))
        if found:
            sys.exit(f"polynomial.json differs at {found}")
        print("polynomial.json agrees")
    else:
        STORED.write_text(json.dumps(result, indent=1) + "\n")
