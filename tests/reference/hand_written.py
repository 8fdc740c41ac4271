"""Four stages of orbits.json with state equations written out by hand, settled from rest with LSODA.

Neither the network reduction nor the integrator nor the period map of orbits.py is used here.
There is nothing to store: the figures are held against orbits.json.

hand_written.py --check
"""

import json
import sys
import tomllib
from pathlib import Path

import numpy as np
from scipy.integrate import solve_ivp

from network import number

STORE = Path(__file__).with_name("orbits.json")
RTOL, ATOL = 1e-12, 1e-14    # at 1 V or 1 A of source
SETTLED = 1e-10              # relative change from period to period
AGREEMENT = 1e-7             # relative


def values(text):
    """The stage's numbers: frequency, switch, ... and the rungs' bodies in order."""
    doc = tomllib.loads(text)
    top = {
        "w": 2 * np.pi * number(doc["frequency"]), "V": number(doc["supply"]["voltage"]), "d": doc["driver"]["duty"],
        "Ron": number(doc["switch"]["closed_resistance"]), "Goff": 0.0, "C": number(doc["drain"]["capacitance"]),
        "Rf": number(doc["feed"].get("resistance", 0)), "R": number(doc["load"]["resistance"]),
    }
    if "open_resistance" in doc["switch"]:
        top["Goff"] = 1 / number(doc["switch"]["open_resistance"])
    if "inductance" in doc["feed"]:
        top["Lf"] = number(doc["feed"]["inductance"])
    rungs = [{k: number(v) for k, v in body.items()} for rung in doc["load"]["ladder"] for body in rung.values()]
    return top, rungs


def plain(top, rungs):
    """Feed inductor; series C with Q, series L. States v, feed current, load current, capacitor voltage."""
    C, Lf, Rf, R, V = top["C"], top["Lf"], top["Rf"], top["R"], 1.0
    Cs, L = rungs[0]["capacitance"], rungs[1]["inductance"]
    Rc = 1 / (top["w"] * Cs * rungs[0]["q"])

    def slopes(G, y):
        v, feed, i, vc = y
        return [(feed - i - G * v) / C, (V - Rf * feed - v) / Lf, (v - vc - (R + Rc) * i) / L, i / Cs]

    return 4, slopes, lambda y: R * y[2], lambda y: y[1]


def matched(top, rungs):
    """Choke; series C, two coils in a row, shunt C with Q across the load."""
    C, R = top["C"], top["R"]
    Cs, L, Cp = rungs[0]["capacitance"], rungs[1]["inductance"] + rungs[2]["inductance"], rungs[3]["capacitance"]
    Rp = 1 / (top["w"] * Cp * rungs[3]["q"])

    def output(y):
        return (y[1] + y[3] / Rp) / (1 / R + 1 / Rp)

    def slopes(G, y):
        v, i, vc, vp = y
        at = output(y)
        return [(1.0 - i - G * v) / C, (v - vc - at) / L, i / Cs, (at - vp) / Rp / Cp]

    return 4, slopes, output, None


def tee(top, rungs):
    """Feed inductor without resistance; series C with Q, then a tee of coils: the shunt coil's current is the
    difference of the other two, its voltage vn follows from the three coils' equations."""
    C, Lf, R = top["C"], top["Lf"], top["R"]
    Cs, L1, L2, L3 = rungs[0]["capacitance"], rungs[1]["inductance"], rungs[2]["inductance"], rungs[3]["inductance"]
    Rc = 1 / (top["w"] * Cs * rungs[0]["q"])

    def slopes(G, y):
        v, feed, vc, i1, i3 = y
        a, b = v - vc - Rc * i1, R * i3
        vn = (a / L1 + b / L3) / (1 / L1 + 1 / L2 + 1 / L3)
        return [(feed - i1 - G * v) / C, (1.0 - v) / Lf, i1 / Cs, (a - vn) / L1, (vn - b) / L3]

    return 5, slopes, lambda y: R * y[4], lambda y: y[1]


def tank(top, rungs):
    """Choke; tank with coil Q and a parallel resistance, series C, series L with Q."""
    C, R, w = top["C"], top["R"], top["w"]
    Lt, Ct, Rt = rungs[0]["inductance"], rungs[0]["capacitance"], rungs[0]["resistance"]
    Rl = w * Lt / rungs[0]["q"]
    Cs, L = rungs[1]["capacitance"], rungs[2]["inductance"]
    total = R + w * L / rungs[2]["q"]

    def slopes(G, y):
        v, i, vc, vt, it = y
        return [(1.0 - i - G * v) / C, (v - vt - vc - total * i) / L, i / Cs, (i - it - vt / Rt) / Ct, (vt - Rl * it) / Lt]

    return 5, slopes, lambda y: R * y[1], None


CASES = {"02_plain": plain, "15_matched": matched, "43_inductor_tee": tee, "27_third_tank": tank}


def orbit(text, build):
    """(output phasor, supply current, closing voltage)."""
    top, rungs = values(text)
    count, slopes, output, feed = build(top, rungs)
    w, half = top["w"], np.pi * top["d"]

    def period(y, sums):
        for G, a, b in ((1 / top["Ron"], -half, half), (top["Goff"], half, 2 * np.pi - half)):
            def slope(theta, y):
                core = np.array(slopes(G, y[:count])) / w
                if not sums:
                    return core
                out = output(y[:count])
                return np.append(core, [out * np.cos(theta), out * np.sin(theta), feed(y[:count]) if feed else y[0]])

            y = solve_ivp(slope, (a, b), y, method="LSODA", rtol=RTOL, atol=ATOL).y[:, -1]
        return y

    state, change = np.zeros(count), np.inf
    while change > SETTLED:
        after = period(state, False)
        change = (np.abs(after - state) / np.abs(after).max()).max() if np.isfinite(after).all() else -np.inf
        state = after
    end = period(np.append(state, np.zeros(3)), True)
    mean = end[-1] / (2 * np.pi)
    source = top["V"] if feed else top["V"] / (mean + top["Rf"])   # choke: mean drain voltage = V - I Rf
    return source * (end[-3] - 1j * end[-2]) / np.pi, source * mean if feed else source, source * end[0]


def main():
    if "--check" not in sys.argv[1:]:
        print(__doc__)
        return 2
    stored = {s["name"]: s for s in json.loads(STORE.read_text())["stages"]}
    fine = True
    for name, build in CASES.items():
        figures = stored[name]["results"]
        phasor, supply_a, closing_v = orbit(stored[name]["toml"], build)
        known = complex(figures["output_v"]["re"], figures["output_v"]["im"])
        errors = [abs(phasor - known) / abs(known), abs(supply_a / figures["supply_a"] - 1),
                  abs(closing_v - figures["closing_v"]) / figures["switch_peak_v"]]
        near = all(e <= AGREEMENT for e in errors)
        fine &= near
        print(f"hand_written: {name} phasor {errors[0]:.1e}, supply current {errors[1]:.1e}, closing voltage {errors[2]:.1e}: "
              f"{'agree' if near else 'DO NOT AGREE'}")
    return 0 if fine else 1


if __name__ == "__main__":
    sys.exit(main())
