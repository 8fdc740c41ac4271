"""Periodic steady state of random linear stages, integrated with SciPy.

orbits.py           every stage again, written to orbits.json
orbits.py --check   every stage by shooting and a seeded part by settling, compared with orbits.json
"""

import os

for _threads in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_threads, "1")  # the matrices are tiny

import json
import platform
import sys
import time
from pathlib import Path

import numpy as np
import scipy

import generator
import network
import period

STORE = Path(__file__).with_name("orbits.json")
SEED = 20771
SUBSET_SEED = 5
CHECK_SECONDS = 30.0  # no further stage is settled after that
AGREEMENT = 1e-7     # --check against the stored figures, relative to the scale of each figure
STIFFEST = 2000.0    # fastest rate allowed, per radian of the carrier: keeps an explicit method affordable
LEAST_EFFICIENCY = 0.15  # a draw below it is drawn again: nobody would build it


def usable(text):
    """Whether a draw can be integrated in reasonable time, and delivers something worth comparing."""
    stage = network.Stage(text)
    rate = max(np.abs(np.linalg.eigvals(A)).max() for A in stage.A.values())
    if rate > STIFFEST or stage.states > 10:
        return False
    figures, _ = period.results(stage, settle=False)
    return figures["efficiency"] > LEAST_EFFICIENCY


def solve(name, text):
    stage = network.Stage(text)
    figures, note = period.results(stage)
    return {"name": name, "frequency_hz": stage.frequency_hz, "supply_v": stage.supply_v, "duty": stage.duty, "states": stage.states, "idle_modes": stage.idle_modes, **note, "toml": text, "results": figures}


def scales(stage):
    """What an error of each figure is relative to: its own size, or for parts of a whole the whole."""
    figures = stage["results"]
    volts = np.hypot(figures["output_v"]["re"], figures["output_v"]["im"])
    turns = 2 * np.pi * stage["frequency_hz"]
    return {
        "output_v": volts,
        "harmonics_v": volts,
        "harmonics_dbc": 20 / np.log(10) * 10 ** (-np.array(figures["harmonics_dbc"]) / 20),
        "load_w": figures["supply_w"],
        "losses_w": figures["supply_w"],
        "closing_v": figures["switch_peak_v"],
        "closing_slope_v_per_s": max(abs(figures["closing_slope_v_per_s"]), figures["switch_peak_v"] * turns),
        "energy_residual": 1.0,
    }


def flat(value):
    if isinstance(value, dict):
        return [x for v in value.values() for x in flat(v)]
    if isinstance(value, list):
        return [x for v in value for x in flat(v)]
    return [value]


def worst(now, stage):
    """Largest difference of figures from a stored stage over its scale, and the figure's name."""
    scale, out = scales(stage), (0.0, "")
    for key, value in stage["results"].items():
        a, b = np.array(flat(now[key])), np.array(flat(value))
        error = float((np.abs(a - b) / scale.get(key, np.abs(b))).max())
        out = max(out, (error if np.isfinite(error) else np.inf, key))
    return out


def check():
    """Every stage by shooting, then as many by settling as time allows, in a seeded order."""
    stored = json.loads(STORE.read_text())["stages"]
    begin = time.perf_counter()
    order = np.random.default_rng(SUBSET_SEED).permutation(len(stored))
    fine, counts = True, {False: 0, True: 0}
    for settle in (False, True):
        for place in order:
            if settle and time.perf_counter() - begin > CHECK_SECONDS:
                break
            stage = stored[place]
            figures, _ = period.results(network.Stage(stage["toml"]), settle)
            error, key = worst(figures, stage)
            counts[settle] += 1
            if not error <= AGREEMENT:
                fine = False
                print(f"orbits: {stage['name']} {key} differs by {error:.2e}, allowed {AGREEMENT:.0e}")
    print(f"orbits: of {len(stored)} stages {counts[False]} recomputed by shooting, {counts[True]} settled: "
          f"{'agree' if fine else 'DO NOT AGREE'} at {AGREEMENT:.0e}")
    return 0 if fine and counts[False] else 1


def write():
    out = []
    for name, text in generator.stages(SEED, usable):
        begin = time.perf_counter()
        stage = solve(name, text)
        out.append(stage)
        f = stage["results"]
        print(f"{name:40s} n={stage['states']:2d} {'settled in %4d' % stage['periods'] if 'periods' in stage else 'shooting       '} rho={stage['spectral_radius']:.4f} "
              f"eff={f['efficiency']:.4f} P={f['output_w']:.4g} balance={f['energy_residual']:.1e} "
              f"period={stage['period_residual']:.1e} {stage.get('distance_to_shooting', 0):.1e} {time.perf_counter() - begin:.1f}s", flush=True)
    document = {
        "tools": {"python": platform.python_version(), "numpy": np.__version__, "scipy": scipy.__version__},
        "integration": {"method": period.METHOD, "rtol": period.RTOL, "atol": period.ATOL, "settled": period.SETTLED, "longest_settling_periods": period.LONGEST_SETTLING},
        "seed": SEED,
        "stages": out,
    }
    STORE.write_text(json.dumps(document, indent=1) + "\n")
    return 0


if __name__ == "__main__":
    sys.exit(check() if "--check" in sys.argv[1:] else write())
