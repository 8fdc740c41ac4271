"""Periodic steady states of stages with two or four switches, by SciPy's matrix exponential.

two_switch.py           every case again, written to two_switch.json
two_switch.py --check   every case compared with two_switch.json

Class D pairs with dead time, and two stages that share a load without isolation. The equations are modified nodal
analysis with orthogonal projections, as in network.py, written anew for any number of switches: E x' + F x = s u,
x = (node voltages, inductor currents), theta = 2 pi f t, conductances and currents referred to the joint load. Every
integral is taken by the exponential of an augmented matrix: Fourier integrals with p = e^(-jk theta) w as states, powers
with the Kronecker square of the state. Peaks: stationary points of the exponential, bracketed on a fine grid.
"""

import os

for _threads in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_threads, "1")

import json
import platform
import sys
import tomllib
from pathlib import Path

import numpy as np
import scipy
from scipy.linalg import expm
from scipy.optimize import brentq

from network import number, rung_parts

STORE = Path(__file__).with_name("two_switch.json")
AGREEMENT = 1e-9
HARMONICS = 5
TURN = 2 * np.pi


class Circuit:
    """Elements between named nodes. "ground" and rails ("rail0", ...) are held: a rail at its part of the supply."""

    def __init__(self, w, unit):
        self.w, self.unit = w, unit
        self.names, self.rails = {}, {}
        self.capacitors, self.inductors, self.resistors, self.switches, self.chokes = [], [], [], [], []
        self.fresh = 0

    def node(self, name=None):
        if name is None:
            self.fresh += 1
            name = f"n{self.fresh}"
        if name != "ground" and name not in self.rails:
            self.names.setdefault(name, len(self.names))
        return name

    def chain(self, a, b, parts, group):
        at = a
        for place, (kind, value) in enumerate(parts):
            to = b if place + 1 == len(parts) else self.node()
            if kind == "R":
                self.resistors.append((at, to, value, group))
            else:
                (self.capacitors if kind == "C" else self.inductors).append((at, to, value))
            at = to

    def leg(self, doc, name, share):
        """Supply, feed, capacitance and switches of one stage; returns its drain."""
        drain = self.node(name)
        self.capacitors.append((drain, "ground", number(doc["drain"]["capacitance"])))
        switch = doc["switch"]
        closed = number(switch["closed_resistance"])
        opened = number(switch["open_resistance"]) if "open_resistance" in switch else None
        rail = "rail" + name
        if switch.get("arrangement") == "pair":
            self.rails[rail] = share
            self.switches.append((rail, drain, number(switch.get("upper_resistance", closed)), opened))
        elif doc["feed"].get("choke"):
            self.chokes.append((drain, number(doc["feed"].get("resistance", 0.0)), share))
        else:
            self.rails[rail] = share
            parts = [("L", number(doc["feed"]["inductance"]))]
            ohm = number(doc["feed"].get("resistance", 0.0))
            self.chain(rail, drain, ([("R", ohm)] if ohm else []) + parts, "feed")
        self.switches.append((drain, "ground", closed, opened))
        return drain

    def ladder(self, at, low, rungs):
        for rung in rungs:
            (kind, body), = rung.items()
            inductive, capacitive, resistive = rung_parts(body, self.w)
            if kind == "shunt":
                self.chain(at, low, resistive + inductive + capacitive, "ladder")
                continue
            to = self.node()
            if kind == "series":
                self.chain(at, to, capacitive + inductive + resistive, "ladder")
            else:
                for parts in (inductive, capacitive, resistive):
                    if parts:
                        self.chain(at, to, parts, "ladder")
            at = to
        return at

    def load(self, at, low, ohm, reactance):
        if reactance:
            to = self.node()
            self.chain(at, to, [("L", reactance / self.w) if reactance > 0 else ("C", -1 / (self.w * reactance))], "load x")
            at = to
        self.resistors.append((at, low, ohm, "load"))

    def row(self, a, b, size):
        row, held = np.zeros(size), 0.0
        for name, sign in ((a, 1.0), (b, -1.0)):
            if name in self.rails:
                held += sign * self.rails[name]
            elif name != "ground":
                row[self.names[name]] += sign
        return row, held


class Solver:
    """Reduced equations w' = A w + B u in each position of the switches; rows x = X w + Y u."""

    def __init__(self, net):
        self.net = net
        w, unit = net.w, net.unit
        count = len(net.names)
        size = count + len(net.inductors)
        inputs = max(1, len(net.chokes))
        self.inputs = inputs
        E, F0, S = np.zeros((size, size)), np.zeros((size, size)), np.zeros((size, inputs))
        for a, b, farad in net.capacitors:
            r, _ = net.row(a, b, size)
            E += w * farad * unit * np.outer(r, r)
        for a, b, ohm, _ in net.resistors:
            r, held = net.row(a, b, size)
            F0 += unit / ohm * np.outer(r, r)
            S[:, 0] -= unit / ohm * held * r
        for place, (a, b, henry) in enumerate(net.inductors):
            r, held = net.row(a, b, size)
            at = count + place
            E[at, at] = w * henry / unit
            F0[:, at] += r
            F0[at, :] -= r
            S[at, 0] += held
        for place, (drain, _, _) in enumerate(net.chokes):
            S[net.names[drain], place] += 1.0
        self.E, self.F0, self.S0, self.size, self.count = E, F0, S, size, count
        values, vectors = np.linalg.eigh(E)
        real = values > 1e-11 * values[-1]
        self.P, self.N = vectors[:, real] / np.sqrt(values[real]), vectors[:, ~real]
        self.cache = {}
        # The cut-set constraints do not depend on the switches: their nodes have capacitance.
        A22, A21 = self.N.T @ F0 @ self.N, self.N.T @ F0 @ self.P
        self.Q = np.eye(self.P.shape[1])
        if A22.size:
            left, s, _ = np.linalg.svd(A22)
            W = left[:, s < 1e-9 * max(1.0, s.max())]
            if W.shape[1]:
                _, s, vt = np.linalg.svd(W.T @ A21)
                self.Q = vt[int((s > 1e-9 * s.max()).sum()):].T
        self.keep = None

    def position(self, closed):
        """A, B, X, Y and F, S with the switches of `closed` (a tuple of flags)."""
        if closed in self.cache:
            return self.cache[closed]
        net, unit = self.net, self.net.unit
        F, S = self.F0.copy(), self.S0.copy()
        for (a, b, ron, roff), flag in zip(net.switches, closed):
            ohm = ron if flag else roff
            if ohm:
                r, held = net.row(a, b, self.size)
                F += unit / ohm * np.outer(r, r)
                S[:, 0] -= unit / ohm * held * r
        P, N, Q = self.P, self.N, self.Q
        A22, A21 = N.T @ F @ N, N.T @ F @ P
        inverse = np.linalg.pinv(A22, rcond=1e-10) if A22.size else np.zeros((0, 0))
        X = P @ Q - N @ inverse @ A21 @ Q
        Y = N @ inverse @ N.T @ S
        A, B = -Q.T @ P.T @ F @ X, Q.T @ P.T @ (S - F @ Y)
        self.cache[closed] = (A, B, X, Y)
        return self.cache[closed]

    def drop_idle(self, positions):
        both = np.vstack([self.position(c)[0] for c in positions])
        _, s, vt = np.linalg.svd(both)
        keep = vt[: int((s > 1e-11 * s.max()).sum())].T
        for c in positions:
            A, B, X, Y = self.cache[c]
            self.cache[c] = (keep.T @ A @ keep, keep.T @ B, X @ keep, Y)


def intervals(spans):
    """[(closed flags, from, to)] of one period for [(closing, width)]."""
    edges = sorted({round(e % TURN, 15) for c, w in spans for e in (c, c + w)})
    edges = [e for i, e in enumerate(edges) if i == 0 or e - edges[i - 1] > 1e-12]
    if TURN - edges[-1] + edges[0] < 1e-12:
        edges.pop()
    result = []
    for a, b in zip(edges, edges[1:] + [edges[0] + TURN]):
        middle = 0.5 * (a + b)
        result.append((tuple((middle - c) % TURN < w for c, w in spans), a, b))
    return result


def orbit(net, spans, supply_v):
    solver = Solver(net)
    plan = intervals(spans)
    solver.drop_idle(sorted({c for c, _, _ in plan}))
    n, m, unit = solver.position(plan[0][0])[0].shape[0], solver.inputs, net.unit
    # The whole period as an affine map, with the integral of the state beside it.
    total = np.eye(n + m)
    means = np.zeros((len(net.chokes), n + m))
    for closed, a, b in plan:
        A, B, X, Y = solver.position(closed)
        G = np.zeros((2 * n + m, 2 * n + m))
        G[:n, :n], G[:n, n:n + m], G[n + m:, :n] = A, B, np.eye(n)
        step = expm(G * (b - a))
        for k, (drain, _, _) in enumerate(net.chokes):
            at = net.names[drain]
            means[k] += (X[at] @ step[n + m:, :n + m] + np.concatenate([np.zeros(n), Y[at] * (b - a)])) @ total / TURN
        total = np.vstack([step[:n, :n + m] @ total, np.hstack([np.zeros((m, n)), np.eye(m)])])
    starts = np.linalg.solve(np.eye(n) - total[:n, :n], total[:n, n:])
    full = np.vstack([starts, np.eye(m)])
    source = np.ones(1)
    if net.chokes:
        ohms = np.diag([r / unit for _, r, _ in net.chokes])
        source = np.linalg.solve(means @ full + ohms, np.array([s for _, _, s in net.chokes]))
    z = full @ source
    first = z.copy()
    load = next(i for i, r in enumerate(net.resistors) if r[3] == "load")
    fourier = np.zeros(HARMONICS, complex)
    powers = np.zeros(len(net.resistors))
    switch_w = np.zeros(len(net.switches))
    supply = 0.0
    peaks = np.full(len(net.switches), -np.inf)
    lows = np.full(len(net.switches), np.inf)
    currents = np.full(len(net.switches), -np.inf)
    closing = [None] * len(net.switches)
    for place, (closed, a, b) in enumerate(plan):
        A, B, X, Y = solver.position(closed)
        G = np.zeros((n + m, n + m))
        G[:n, :n], G[:n, n:] = A, B
        rows = []          # over (w, u): resistor voltages, then switch voltages
        for p, q, *_ in [*net.resistors, *net.switches]:
            r, held = net.row(p, q, solver.size)
            whole = np.concatenate([r @ X, r @ Y])
            if not net.chokes:
                whole[n] += held
            rows.append(whole)
        rows = np.array(rows)
        # Fourier integrals: p = e^(-jk theta) z, Q' = load row . p.
        for k in range(1, HARMONICS + 1):
            H = np.zeros((n + m + 1, n + m + 1), complex)
            H[:n + m, :n + m] = G - 1j * k * np.eye(n + m)
            H[n + m, :n + m] = rows[load]
            fourier[k - 1] += (expm(H * (b - a)) @ np.concatenate([np.exp(-1j * k * a) * z, [0]]))[-1]
        # Second moments: (z (x) z)' = (G (+) G) z (x) z, from the last halving up to keep the matrix small.
        size = (n + m) ** 2
        K = np.zeros((2 * size, 2 * size))
        K[:size, :size] = np.kron(G, np.eye(n + m)) + np.kron(np.eye(n + m), G)
        K[size:, :size] = np.eye(size)
        moment = (expm(K * (b - a))[size:, :size] @ np.kron(z, z)).reshape(n + m, n + m)
        volts2 = np.einsum("ri,ij,rj->r", rows, moment, rows)
        powers += volts2[:len(net.resistors)] / np.array([r[2] for r in net.resistors])
        for s, (_, _, ron, roff) in enumerate(net.switches):
            ohm = ron if closed[s] else roff
            if ohm:
                switch_w[s] += volts2[len(net.resistors) + s] / ohm
        # Supply: rails deliver what flows out of them; chokes their current.
        G2 = np.zeros((2 * (n + m), 2 * (n + m)))
        G2[:n + m, :n + m], G2[n + m:, :n + m] = G, np.eye(n + m)
        integral = (expm(G2 * (b - a)) @ np.concatenate([z, np.zeros(n + m)]))[n + m:]
        for rail, share in net.rails.items():
            current = np.zeros(n + m)
            for i, (p, q, ohm, _) in enumerate(net.resistors):
                current += ((p == rail) - (q == rail)) * rows[i] * unit / ohm
            for i, (p, q, ron, roff) in enumerate(net.switches):
                ohm = ron if closed[i] else roff
                if ohm:
                    current += ((p == rail) - (q == rail)) * rows[len(net.resistors) + i] * unit / ohm
            for i, (p, q, _) in enumerate(net.inductors):
                r = np.zeros(solver.size)
                r[solver.count + i] = 1.0
                current += ((p == rail) - (q == rail)) * np.concatenate([r @ X, r @ Y])
            supply += share * current @ integral
        for (_, _, share), amps in zip(net.chokes, source):
            supply += share * amps * (b - a)
        # Extremes of every switch voltage.
        grid = 4000
        step = expm(G * ((b - a) / grid))
        track = [z]
        for _ in range(grid):
            track.append(step @ track[-1])
        track = np.array(track)
        for s, (_, _, ron, _) in enumerate(net.switches):
            row = rows[len(net.resistors) + s]
            values, slopes = track @ row, track @ (row @ G)
            found = list(values[[0, -1]])
            for i in np.flatnonzero(slopes[:-1] * slopes[1:] < 0):
                h = (b - a) / grid
                at = brentq(lambda t: (row @ G) @ expm(G * t) @ track[i], 0, h, xtol=1e-15)
                found.append(row @ expm(G * at) @ track[i])
            peaks[s], lows[s] = max(peaks[s], max(found)), min(lows[s], min(found))
            if closed[s]:
                currents[s] = max(currents[s], max(found) / ron)
        z = expm(G * (b - a)) @ z
        following = plan[(place + 1) % len(plan)][0]
        for s in range(len(net.switches)):
            if following[s] and not closed[s]:
                row = rows[len(net.resistors) + s]
                closing[s] = (supply_v * row @ z, supply_v * net.w * row @ G @ z)
    scale_w = supply_v**2 / TURN
    phasors = fourier / np.pi * supply_v
    groups = lambda name: float(sum(p for p, r in zip(powers, net.resistors) if r[3] == name) * scale_w)
    feed_w = groups("feed") + sum(r * (i * supply_v / unit) ** 2 for (_, r, _), i in zip(net.chokes, source))
    supply_w = supply * supply_v**2 / TURN / unit
    lost = feed_w + groups("ladder") + groups("load") + scale_w * switch_w.sum()
    return {
        "output_v": {"re": phasors[0].real, "im": phasors[0].imag},
        "harmonics_dbc": [20 * np.log10(abs(p) / abs(phasors[0])) for p in phasors[1:]],
        "supply_w": supply_w,
        "load_w": groups("load"),
        "feed_w": float(feed_w),
        "ladder_w": groups("ladder"),
        "switch_w": [float(x) for x in scale_w * switch_w],
        "peak_v": [float(supply_v * x) for x in peaks],
        "min_v": [float(supply_v * x) for x in lows],
        "peak_a": [float(supply_v * x) for x in currents],
        "closing_v": [None if c is None else float(c[0]) for c in closing],
        "closing_slope_v_per_s": [None if c is None else float(c[1]) for c in closing],
        "energy_residual": float((supply_w - lost) / max(abs(supply_w), lost)),
        "period_residual": float(np.linalg.norm(z - first) / np.linalg.norm(first)),
        "states": n,
    }


def stage_spans(doc, w, ahead):
    """(closing, width) of the switches of one stage, its drive `ahead` by an angle."""
    driver = doc.get("driver", {})
    width = TURN * number(driver.get("duty", 0.5))
    start = -0.5 * width - ahead
    if doc["switch"].get("arrangement") != "pair":
        return [(start, width)]
    dead = driver.get("dead_time", 0.0)
    dead = w * number(dead.removesuffix("s") if isinstance(dead, str) else dead)
    return [(start + dead / 2, width - dead), (start + width + dead / 2, TURN - width - dead)]


def one(text):
    doc = tomllib.loads(text)
    w, ohm = TURN * number(doc["frequency"]), number(doc["load"]["resistance"])
    net = Circuit(w, ohm)
    end = net.ladder(net.leg(doc, "a", 1.0), "ground", doc["load"].get("ladder", []))
    net.load(end, "ground", ohm, number(doc["load"].get("reactance", 0.0)))
    return orbit(net, stage_spans(doc, w, 0.0), number(doc["supply"]["voltage"]))


def joined(text, joint, angle_deg):
    """Two of the stage into one load, at plus and minus the angle."""
    doc = tomllib.loads(text)
    w, own = TURN * number(doc["frequency"]), number(doc["load"]["resistance"])
    floating = joint["joint"] == "floating"
    ohm = joint.get("load_ohm", own * (2.0 if floating else 0.5))
    net = Circuit(w, ohm)
    rungs = doc["load"].get("ladder", [])
    count = joint.get("branch_rungs", len(rungs))
    gain = 10 ** (-joint.get("gain_db", 0.0) / 20)
    angle, off = np.radians(angle_deg), np.radians(joint.get("phase_deg", 0.0))
    ends, spans = [], []
    for name, share, ahead in (("a", 1.0, angle), ("b", gain, -angle + off + (np.pi if floating else 0.0))):
        at = net.leg(doc, name, share)
        after = joint.get("after", count)
        at = net.ladder(at, "ground", rungs[:after])
        if "reactance_ohm" in joint:
            x = joint["reactance_ohm"]
            part = ("C", 1 / (w * x)) if name == "a" else ("L", x / w)
            loss = [("R", x / joint["q"])] if "q" in joint else []
            net.chain(at, "ground", [part] + loss, "ladder")
        ends.append(net.ladder(at, "ground", rungs[after:count]))
        spans += stage_spans(doc, w, ahead)
    first, second = ends
    if floating:
        low = second
    else:
        # One node: the second branch's end becomes the first one's.
        net.capacitors, net.inductors = ([tuple(first if x == second else x for x in e) for e in part] for part in (net.capacitors, net.inductors))
        net.resistors = [tuple(first if x == second else x for x in e) for e in net.resistors]
        del net.names[second]
        net.names = {name: i for i, name in enumerate(net.names)}
        low = "ground"
    end = net.ladder(first, low, rungs[count:])
    net.load(end, low, ohm, number(doc["load"].get("reactance", 0.0)) * ohm / own)
    return orbit(net, spans, number(doc["supply"]["voltage"]))


def pair_stage(frequency, supply, switch, drain, driver, load, ladder):
    lines = [f'frequency = "{frequency}"', f'supply = {{ voltage = "{supply}" }}', f'switch = {{ arrangement = "pair", {switch} }}',
             f'drain = {{ capacitance = "{drain}" }}', f"driver = {{ {driver} }}", "[load]", *load.split("; ")]
    for rung in ladder:
        lines += ["[[load.ladder]]", rung]
    return "\n".join(lines) + "\n"


SERIES = 'series = { inductance = "2.2 uH", q = 90, capacitance = "1.1 nF", capacitor_q = 800 }'
PAIRS = {
    "half": pair_stage("3.3 MHz", "24 V", 'closed_resistance = "0.2 ohm"', "180 pF", 'duty = 0.5, dead_time = "6 ns"', 'resistance = "9 ohm"', [SERIES]),
    "inductive, soft": pair_stage("3.3 MHz", "24 V", 'closed_resistance = "0.15 ohm"', "220 pF", 'duty = 0.5, dead_time = "10 ns"', 'resistance = "9 ohm"; reactance = "7 ohm"', [SERIES]),
    "unlike switches, narrow": pair_stage("3.3 MHz", "24 V", 'closed_resistance = "0.1 ohm", upper_resistance = "0.35 ohm", open_resistance = "40 kohm"', "150 pF", 'duty = 0.23, dead_time = "5 ns"', 'resistance = "12 ohm"', [SERIES]),
    "no dead time": pair_stage("3.3 MHz", "24 V", 'closed_resistance = "0.3 ohm"', "300 pF", "duty = 0.4, dead_time = 0", 'resistance = "9 ohm"', [SERIES]),
    "shunt match": pair_stage("13.56 MHz", "40 V", 'closed_resistance = "0.4 ohm", open_resistance = "100 kohm"', "60 pF", 'duty = 0.45, dead_time = "3 ns"', 'resistance = "50 ohm"', ['series = { inductance = "680 nH", q = 120, capacitance = "330 pF" }', 'shunt = { capacitance = "200 pF", q = 500 }']),
    "tank filter": pair_stage("1 MHz", "12 V", 'closed_resistance = "0.08 ohm", upper_resistance = "0.16 ohm"', "500 pF", 'duty = 0.35, dead_time = "25 ns"', 'resistance = "5 ohm"; reactance = "-2 ohm"', ['series = { inductance = "3.9 uH", q = 60 }', 'series = { capacitance = "8.2 nF" }', 'tank = { inductance = "100 nH", capacitance = "25 nF", resistance = "300 ohm" }', 'shunt = { inductance = "10 uH", q = 50 }']),
    "long dead time": pair_stage("3.3 MHz", "24 V", 'closed_resistance = "0.2 ohm"', "400 pF", 'duty = 0.5, dead_time = "60 ns"', 'resistance = "9 ohm"; reactance = "10 ohm"', [SERIES]),
    "no ladder": pair_stage("500 kHz", "5 V", 'closed_resistance = "0.5 ohm", open_resistance = "10 kohm"', "2 nF", 'duty = 0.3, dead_time = "30 ns"', 'resistance = "40 ohm"', []),
}

FEED = """frequency = "169.4 MHz"
supply = { voltage = "6 V" }
switch = { closed_resistance = "0.12 ohm", open_resistance = "50 kohm" }
drain = { capacitance = "75 pF" }
driver = { duty = 0.5 }
feed = { inductance = "6.8 nH", resistance = "50 mohm" }
[load]
resistance = "50 ohm"
[[load.ladder]]
series = { inductance = "47 nH", q = 80 }
[[load.ladder]]
series = { capacitance = "30 pF", q = 400 }
[[load.ladder]]
shunt = { capacitance = "47 pF", q = 400 }
"""
CHOKE = """frequency = "2 MHz"
supply = { voltage = "12 V" }
switch = { closed_resistance = "0.1 ohm" }
drain = { capacitance = "1.35 nF" }
driver = { duty = 0.5 }
feed = { choke = true, resistance = "0.1 ohm" }
[load]
resistance = "10 ohm"
[[load.ladder]]
series = { inductance = "4.9 uH", q = 150, capacitance = "1.6 nF" }
"""
TEE = """frequency = "2 MHz"
supply = { voltage = "12 V" }
switch = { arrangement = "pair", closed_resistance = "0.2 ohm" }
drain = { capacitance = "100 pF" }
driver = { duty = 0.5, dead_time = "4 ns" }
[load]
resistance = "20 ohm"
[[load.ladder]]
series = { inductance = "4 uH", q = 150, capacitance = "1.5831434944115277 nF" }
[[load.ladder]]
series = { inductance = "1.5915494309189535 uH" }
[[load.ladder]]
shunt = { capacitance = "3.978873577297384 nF" }
[[load.ladder]]
series = { inductance = "1.5915494309189535 uH" }
"""


def cases():
    for name, text in PAIRS.items():
        yield {"kind": "pair", "name": name, "toml": text, "results": one(text)}
    floating = {"joint": "floating"}
    wanted = [("class E, feed", FEED, floating, a) for a in (-40, 0, 15, 30, 45, 60, 75, 88, 90, 150)]
    wanted += [("class E, feed, compensated", FEED, {**floating, "reactance_ohm": 120.0, "q": 100.0}, a) for a in (-30, 0, 30, 70)]
    wanted += [("class E, choke", CHOKE, {**floating, "load_ohm": 17.0}, a) for a in (0, 25, 50, 75)]
    wanted += [("class E, choke, unlike branches", CHOKE, {**floating, "gain_db": 0.4, "phase_deg": 3.0}, a) for a in (0, 50, 90)]
    wanted += [("class E, joined behind the series arm", FEED, {**floating, "branch_rungs": 2, "load_ohm": 80.0}, a) for a in (10, 55)]
    wanted += [("class D, tee", TEE, {"joint": "tee"}, a) for a in (0, 35, 80)]
    wanted += [("class D, tee, compensated", TEE, {"joint": "tee", "reactance_ohm": 40.0, "after": 1, "gain_db": 0.2}, a) for a in (20, 65)]
    for name, text, joint, angle in wanted:
        yield {"kind": "joined", "name": f"{name}, {angle} deg", "toml": text, "joint": joint, "angle_deg": angle, "results": joined(text, joint, angle)}


def differences(name, stored, computed):
    """The worst relative disagreement of two sets of results."""
    volts = np.hypot(stored["output_v"]["re"], stored["output_v"]["im"])
    worst = 0.0
    for part in ("re", "im"):
        worst = max(worst, abs(stored["output_v"][part] - computed["output_v"][part]) / max(volts, 1e-9))
    for key in ("supply_w", "load_w", "feed_w", "ladder_w"):
        worst = max(worst, abs(stored[key] - computed[key]) / max(abs(stored["supply_w"]), stored["load_w"]))
    for key in ("peak_v", "min_v", "peak_a"):
        top = max(abs(x) for x in stored[key])
        worst = max(worst, max(abs(a - b) for a, b in zip(stored[key], computed[key])) / top)
    return worst


def main():
    if "--check" in sys.argv:
        stored = json.loads(STORE.read_text())
        computed = list(cases())
        if [c["name"] for c in computed] != [c["name"] for c in stored["cases"]]:
            sys.exit("two_switch.json holds other cases")
        worst = max((differences(c["name"], s["results"], c["results"]), c["name"]) for s, c in zip(stored["cases"], computed))
        print(f"two_switch: {len(computed)} cases agree to {worst[0]:.1e} (worst: {worst[1]})")
        if worst[0] > AGREEMENT:
            sys.exit("two_switch.json disagrees")
        return
    all_cases = list(cases())
    for case in all_cases:
        r = case["results"]
        print(f"{case['name']:45} {r['states']:3} states, balance {r['energy_residual']:8.1e}, period {r['period_residual']:8.1e}, "
              f"load {r['load_w']:9.5f} W, supply {r['supply_w']:9.5f} W")
    tools = {"python": platform.python_version(), "numpy": np.__version__, "scipy": scipy.__version__}
    STORE.write_text(json.dumps({"tools": tools, "cases": all_cases}, indent=1) + "\n")


if __name__ == "__main__":
    main()
