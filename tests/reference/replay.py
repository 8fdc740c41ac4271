"""A switching stage of four states integrated through 200 carrier cycles by SciPy, from rest.

The state equations are written out by hand. The supply steps and ramps, the drive's phase ramps, so that every
edge moves; edges and knots of the supply end an integration. The envelope of a cycle is 2/T times the integral of
load voltage times exp(-j 2 pi f t), carried as two further states, energies as three more.

replay.py            writes replay.json
replay.py --check    recomputes and compares with replay.json
replay.py --time     cycles a second, envelope only, at relative tolerances 1e-6 and 1e-11
"""

import json
import sys
import time
from pathlib import Path

import numpy as np
import scipy
from scipy.integrate import solve_ivp

STORE = Path(__file__).with_name("replay.json")
CYCLES = 200
F = 169.4e6
W = 2 * np.pi * F
RON, C, LF, RF, R = 0.18, 47e-12, 8.2e-9, 50e-3, 7.0
L, CS = 33e-9, 30e-12
RL = W * L / 80
CLOSING, WIDTH = -np.pi / 2, np.pi    # duty 0.5, centred


def supply(n):
    """Volts at the start and the end of cycle `n`."""
    ramp = lambda at: 6 - 4 * min(max((at - 100) / 40, 0), 1)
    return (4.0, 4.0) if n < 60 else (ramp(n), ramp(n + 1))


def phase(n):
    """Radians at the start of cycle `n`, and the change within it."""
    at = lambda k: 0.8 * min(max((k - 80) / 100, 0), 1) - 2.5 * min(max((k - 150) / 10, 0), 1)
    return at(n), at(n + 1) - at(n)


def run(rtol, cycles, full=True):
    y = np.zeros(4)
    rows = []
    for n in range(cycles):
        (u0, u1), (p0, dp) = supply(n), phase(n)
        pace = 1 + dp / (2 * np.pi)
        # Edges in this cycle, as carrier angles from its start.
        cuts = [0.0, 2 * np.pi]
        for edge in (CLOSING, CLOSING + WIDTH):
            for turn in range(-3, 4):
                at = (edge + 2 * np.pi * turn - p0) / pace
                if 0 < at < 2 * np.pi:
                    cuts.append(at)
        cuts.sort()
        sums = np.zeros(5)
        for a, b in zip(cuts[:-1], cuts[1:]):
            middle = (p0 + pace * 0.5 * (a + b) - CLOSING) % (2 * np.pi)
            g = 1 / RON if middle < WIDTH else 0.0

            def slopes(th, z):
                v, feed, i, vc = z[:4]
                u = u0 + (u1 - u0) * th / (2 * np.pi)
                d = [(feed - i - g * v) / C / W, (u - RF * feed - v) / LF / W,
                     (v - vc - (R + RL) * i) / L / W, i / CS / W]
                load = R * i / np.pi
                d += [load * np.cos(th), -load * np.sin(th)]
                if full:
                    d += [u * feed / W, R * i * i / W, (g * v * v + RF * feed**2 + RL * i * i) / W]
                return d

            size = 9 if full else 6
            start = np.concatenate([y, np.zeros(size - 4)])
            scale = np.array([1, 1, 1, 1, 1, 1] + [1 / W] * (size - 6))
            got = solve_ivp(slopes, (a, b), start, method="DOP853", rtol=rtol, atol=rtol * scale)
            y = got.y[:4, -1]
            sums[:size - 4] += got.y[4:, -1]
        rows.append(list(sums))
    stored = 0.5 * (C * y[0]**2 + LF * y[1]**2 + L * y[2]**2 + CS * y[3]**2)
    return {"rows": rows, "stored_j": stored}


def main():
    if "--time" in sys.argv:
        for rtol in (1e-6, 1e-11):
            start = time.process_time()
            run(rtol, 40, full=False)
            print(f"rtol {rtol:.0e}: {40 / (time.process_time() - start):.1f} cycles/s")
        return 0
    found = run(1e-11, CYCLES)
    if "--check" in sys.argv:
        kept = json.loads(STORE.read_text())
        a, b = np.array(found["rows"]), np.array(kept["rows"])
        worst = (np.abs(a - b) / np.abs(b).max(axis=0)).max()
        print(f"largest difference {worst:.1e} of each column's largest value")
        return 0 if worst < 1e-8 else 1
    found["versions"] = {"python": sys.version.split()[0], "numpy": np.__version__, "scipy": scipy.__version__}
    found["columns"] = ["re_v", "im_v", "supply_j", "load_j", "losses_j"]
    STORE.write_text(json.dumps(found, indent=1) + "\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
