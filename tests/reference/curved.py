"""Periodic steady state of stages with a curved drain, by shooting with SciPy's Radau at rtol 1e-10.

curved.py                every stage again, written to curved.json
curved.py --check        a seeded part of them again, and one settled from rest, compared with curved.json
curved.py --time FILE    seconds that the shooting takes on one stage file

Capacitance form, not charge: with the fixed part in the network's states w (|w|^2/2 is energy, v = e w),

    (I + e e^T C(v)) w' = A w + B source + e (edge current - switch current - diode current)

solved by the formula for a rank-one change. The diode's corner is a terminal event.
"""

import os

for _threads in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_threads, "1")  # the matrices are tiny

import csv
import io
import json
import platform
import re
import sys
import time
import tomllib
from pathlib import Path

import numpy as np
import scipy
from scipy.integrate import solve_ivp
from scipy.interpolate import PchipInterpolator
from scipy.linalg import expm
from scipy.optimize import brentq

import network
from network import number

HERE = Path(__file__).parent
STORE = HERE / "curved.json"
METHOD, RTOL, ATOL = "Radau", 1e-10, 1e-12   # atol relative to the largest state
PERIODIC = 3e-9                              # relative distance from itself after a period that ends the shooting
HARMONICS = 5
SEED = 40829
CHECKED = 5
CONDUCTING = 8        # further stages whose diode conducts
AGREEMENT = 1e-6


class Curved(network.Stage):
    """The linear network with its drain's extra parts kept aside."""

    def __init__(self, text, tables=None, scale=1.0):
        self.tables = tables or {}
        super().__init__(text)
        self.supply_v *= scale

    def _elements(self, doc):
        drain, switch, driver = doc["drain"], doc["switch"], doc["driver"]
        self.coupling = number(drain.get("gate_coupling", 0.0))
        unit = self.w * self.load_ohm
        self.swing = number(driver.get("swing", 0.0))
        self.gate_charge = float(re.match(r"[-+0-9.eE]+", str(driver.get("gate_charge", 0.0)))[0])
        if "gate_charge" in driver:
            self.gate_charge *= {"nC": 1e-9, "pC": 1e-12}[driver["gate_charge"].split()[1]]
        seconds = {"ps": 1e-12, "ns": 1e-9, "us": 1e-6, "fs": 1e-15}
        edge = lambda key: float(driver[key].split()[0]) * seconds[driver[key].split()[1]] * self.w if key in driver else 0.0
        self.rise, self.fall = edge("rise"), edge("fall")
        self.knee = None
        if "knee" in switch:
            amps = switch["knee"]["current"].split()
            self.knee = (float(amps[0]) * {"A": 1.0, "mA": 1e-3}[amps[1]] * self.load_ohm, float(switch["knee"].get("sharpness", 4.0)))
        self.diode = None
        if "diode" in switch:
            self.diode = (number(switch["diode"]["drop"]), self.load_ohm / number(switch["diode"]["resistance"]))
        self.c = lambda v: 0.0
        if "junction" in drain:
            c0, phi, m = number(drain["junction"]["zero_bias"]) * unit, number(drain["junction"]["potential"]), float(drain["junction"]["grading"])
            at = -phi / 2
            c_at = c0 / 0.5**m
            slope = -m * c0 / phi / 0.5 ** (m + 1)
            self.c = lambda v: c0 / (1 + v / phi) ** m if v > at else c_at + slope * (v - at)
        if "table" in drain:
            rows = list(csv.reader(io.StringIO(self.tables[drain["table"]])))[1:]
            x, y = np.array(rows, dtype=float).T
            curve = PchipInterpolator(x, y * unit)
            self.c = lambda v: float(curve(min(max(v, x[0]), x[-1])))
        doc = dict(doc, drain={"capacitance": number(drain.get("capacitance", 0.0)) + self.coupling})
        return super()._elements(doc)

    def prepare(self):
        """Matrices without any switch, and the segments of a period."""
        self.e = self.drain_row
        self.g_open = self.load_ohm / self.open_ohm if self.open_ohm else 0.0
        self.g_closed = self.load_ohm / self.closed_ohm
        self.bare = self.A["open"] + self.g_open * np.outer(self.e, self.e)
        assert np.allclose(self.bare - self.g_closed * np.outer(self.e, self.e), self.A["closed"], rtol=1e-7, atol=1e-9 * np.abs(self.A["closed"]).max())
        width = 2 * np.pi * self.duty
        cuts = [(0.0, "closed", 0.0), (width, "open", 0.0)]
        if self.coupling:
            charge = self.w * self.coupling * self.load_ohm * self.swing
            up, down = charge / self.rise, -charge / self.fall
            cuts = [(0.0, "closed", up), (self.rise / 2, "closed", 0.0), (width - self.fall / 2, "closed", down),
                    (width, "open", down), (width + self.fall / 2, "open", 0.0), (2 * np.pi - self.rise / 2, "open", up)]
        ends = [c[0] for c in cuts[1:]] + [2 * np.pi]
        self.segments = [(a, b, phase, current) for (a, phase, current), b in zip(cuts, ends)]

    def channel(self, phase, v):
        if phase == "open":
            return self.g_open * v
        if self.knee is None:
            return self.g_closed * v
        limit, k = self.knee
        x = abs(self.g_closed * v / limit)
        return self.g_closed * v * (1 + x**k) ** (-1 / k) if x < 1 else np.sign(v) * limit * (1 + x**-k) ** (-1 / k)

    def diode_current(self, below, v):
        return self.diode[1] * (v + self.diode[0]) if below else 0.0


def flow(stage, phase, below, current, source, w):
    v = stage.e @ w
    rate = stage.bare @ w + stage.B["open"] * source + stage.e * (current - stage.channel(phase, v) - stage.diode_current(below, v))
    c = stage.c(v)
    return rate - stage.e * (c / (1 + (stage.e @ stage.e) * c)) * (stage.e @ rate)


def integrate(stage, start, source, extra=None, scale=1.0, keep=None, rtol=RTOL, method=METHOD):
    """One period. `extra(phase, below, current, theta, w)` is integrated along; `keep` takes each piece."""
    n = stage.states
    size = 0 if extra is None else len(extra("closed", False, 0.0, 0.0, start))
    y = np.concatenate([start, np.zeros(size)])
    below = bool(stage.diode) and stage.e @ start < -stage.diode[0]
    conductions = int(below)
    for a, b, phase, current in stage.segments:
        at = a
        while at < b - 1e-14:
            def fun(t, y, phase=phase, below=below, current=current):
                rate = flow(stage, phase, below, current, source, y[:n])
                return rate if extra is None else np.concatenate([rate, extra(phase, below, current, t, y[:n])])

            def jac(t, y, fun=fun):
                base = fun(t, y)
                J = np.zeros((n + size, n + size))
                for k in range(n):
                    step = 1e-7 * max(abs(y[k]), 1e-3 * scale)
                    moved = y.copy()
                    moved[k] += step
                    J[:, k] = (fun(t, moved) - base) / step
                return J

            events = None
            if stage.diode:
                event = lambda t, y: stage.e @ y[:n] + stage.diode[0]
                event.terminal, event.direction = True, 1.0 if below else -1.0
                events = [event]
            done = solve_ivp(fun, (at, b), y, method=method, rtol=rtol, atol=ATOL * scale, jac=jac if method == METHOD else None, events=events, dense_output=keep is not None)
            if not done.success and done.status != 1:
                raise RuntimeError(done.message)
            if keep is not None:
                keep.append((phase, below, current, done))
            y, at = done.y[:, -1], done.t[-1]
            if done.status == 1:
                below = not below
                conductions += below
    return y, conductions


def linear_start(stage):
    """The periodic state with the capacitance that the drain has at the supply."""
    c = stage.c(stage.supply_v)
    share = np.eye(stage.states) - np.outer(stage.e, stage.e) * (c / (1 + (stage.e @ stage.e) * c))
    n = stage.states
    M, width = np.eye(n + 1), 2 * np.pi * stage.duty
    for phase, length in (("closed", width), ("open", 2 * np.pi - width)):
        G = np.zeros((n + 1, n + 1))
        G[:n, :n], G[:n, n] = share @ stage.A[phase], share @ stage.B["open"]
        M = expm(G * length) @ M
    unit = np.linalg.solve(np.eye(n) - M[:n, :n], M[:n, n])
    if not stage.choke:
        return unit * stage.supply_v, stage.supply_v
    # Any current of the right size: the mean voltage is corrected by the shooting.
    guess = stage.supply_v / stage.load_ohm * 0.5 * stage.load_ohm
    return unit * guess, guess


def shoot(stage):
    """Newton's method with a Jacobian by differences. SciPy's LSODA brings the state near, Radau ends it."""
    state, source = linear_start(stage)
    n, choke = stage.states, stage.choke
    area = (lambda *a: np.array([stage.e @ a[4]])) if choke else None
    jacobian, last, method = None, np.inf, "LSODA"
    for attempt in range(40):
        scale = max(np.abs(state).max(), 1e-9 * stage.supply_v)

        def residual(z, method):
            y, _ = integrate(stage, z[:n], z[n] if choke else stage.supply_v, area, scale, method=method)
            gap = y[:n] - z[:n]
            if choke:
                gap = np.append(gap, y[n] / (2 * np.pi) + z[n] * stage.feed_ohm / stage.load_ohm - stage.supply_v)
            return gap

        z = np.append(state, source) if choke else state
        gap = residual(z, method)
        size = np.abs(gap).max() / scale
        if size < PERIODIC:
            if method == METHOD:
                return state, source, size
            method = METHOD
            continue
        if method != METHOD and (jacobian is None or size > 0.01 * last):
            step = 1e-5 * scale
            jacobian = np.column_stack([(residual(z + step * unit, method) - gap) / step for unit in np.eye(len(z))])
        last = size
        z = z - np.linalg.solve(jacobian, gap)
        state = z[:n]
        source = z[n] if choke else stage.supply_v
    raise RuntimeError(f"does not converge: {size:.1e}")


def figures(stage, state, source):
    n, unit = stage.states, stage.load_ohm
    load = stage.resistor_groups.index("load")
    S, T = stage.resistor_rows, stage.resistor_held * source
    orders = np.arange(1, HARMONICS + 1)
    begin = np.pi * stage.duty
    feed, held = (stage.feed_row, stage.feed_held * source) if not stage.choke else (np.zeros(n), source)

    def extra(phase, below, current, theta, w):
        v = stage.e @ w
        r = S @ w + T
        angle = orders * (theta - begin)
        channel, diode = stage.channel(phase, v), stage.diode_current(below, v)
        return np.concatenate([r[load] * np.cos(angle), r[load] * np.sin(angle),
                               [feed @ w + held, channel * v * (phase == "closed"), channel * v * (phase == "open"), diode * v, current * v], r * r])

    scale = np.abs(state).max()
    pieces = []
    end, conductions = integrate(stage, state, source, extra, scale, pieces)
    means = end[n:] / (2 * np.pi)
    phasors = 2 * (means[:HARMONICS] - 1j * means[HARMONICS : 2 * HARMONICS])
    rest = means[2 * HARMONICS :]
    supply_a = rest[0] / unit
    squares = rest[5:] / stage.resistor_ohms
    group = {g: float(sum(p for p, name in zip(squares, stage.resistor_groups) if name == g)) for g in ("feed", "ladder", "load")}
    if stage.choke:
        group["feed"] = float(supply_a**2 * stage.feed_ohm)
    output_w = abs(phasors[0]) ** 2 / (2 * unit)

    volts, amps, at = [], [], {}
    for phase, below, current, done in pieces:
        grid = np.unique(np.concatenate([np.linspace(a, b, 9) for a, b in zip(done.t[:-1], done.t[1:])]))
        v = stage.e @ done.sol(grid)[:n]
        spots = list(v[[0, -1]])
        for i in range(1, len(grid) - 1):
            if (v[i] - v[i - 1]) * (v[i + 1] - v[i]) <= 0:
                slope = lambda t: stage.e @ flow(stage, phase, below, current, source, done.sol(t)[:n])
                a, b = grid[i - 1], grid[i + 1]
                if slope(a) * slope(b) < 0:
                    spots.append(stage.e @ done.sol(brentq(slope, a, b, xtol=1e-13))[:n])
        volts += spots
        amps += [(stage.channel(phase, x) + stage.diode_current(bool(stage.diode) and x < -stage.diode[0], x)) / unit for x in spots]
        at[done.t[0]] = stage.e @ done.y[:n, 0]
    nearest = lambda angle: at[min(at, key=lambda t: abs(t - angle))]
    delivered = rest[4] / unit
    gate_w = stage.gate_charge * stage.swing * stage.frequency_hz
    rail_w = 0.0
    if stage.coupling:
        charge = stage.coupling * (stage.swing - nearest(2 * np.pi * stage.duty - stage.fall / 2) + nearest(2 * np.pi - stage.rise / 2))
        rail_w = stage.swing * charge * stage.frequency_hz
    w = end[:n]
    phase, below, current, _ = pieces[-1]
    supply_w = supply_a * stage.supply_v
    driver_w = gate_w + rail_w
    losses = {"closed_switch": rest[1] / unit, "open_switch": rest[2] / unit, "diode": rest[3] / unit, "feed": group["feed"],
              "ladder": group["ladder"], "harmonics": group["load"] - output_w, "driver": driver_w - delivered}
    return {
        "output_v": {"re": phasors[0].real, "im": phasors[0].imag},
        "output_w": output_w,
        "supply_a": supply_a,
        "supply_w": supply_w,
        "driver_w": driver_w,
        "efficiency": output_w / (supply_w + driver_w),
        "losses_w": losses,
        "harmonics_v": [{"re": p.real, "im": p.imag} for p in phasors[1:]],
        "switch_peak_v": max(volts),
        "switch_min_v": min(volts),
        "switch_peak_a": max(amps),
        "switch_min_a": min(amps),
        "closing_v": stage.e @ w,
        "closing_slope_v_per_s": stage.w * (stage.e @ flow(stage, phase, below, current, source, w)),
        "conductions": conductions,
        "energy_residual": (supply_w + driver_w - output_w - sum(losses.values())) / max(supply_w + delivered, abs(supply_w)),
    }


def plain(value):
    if isinstance(value, dict):
        return {k: plain(v) for k, v in value.items()}
    if isinstance(value, list):
        return [plain(v) for v in value]
    return int(value) if isinstance(value, (int, np.integer)) else float(value)


def solve(entry):
    stage = Curved(entry["toml"], entry.get("tables"))
    stage.prepare()
    state, source, size = shoot(stage)
    return plain(figures(stage, state, source)), float(size)


def settled(entry, most=400):
    """Period after period from rest until nothing changes any more; only without a choke."""
    stage = Curved(entry["toml"], entry.get("tables"))
    stage.prepare()
    state = np.zeros(stage.states)
    scale = stage.supply_v
    for periods in range(1, most):
        after, _ = integrate(stage, state, stage.supply_v, None, scale, method="LSODA")
        change = np.abs(after - state).max() / np.abs(after).max()
        state, scale = after, np.abs(after).max()
        if change < 3e-9:
            break
    else:
        raise RuntimeError("does not settle")
    return plain(figures(stage, state, stage.supply_v)), periods


def quoted(value, unit, digits=4):
    from generator import text
    return text(value, unit, digits)


def bank():
    """Stages of the linear bank with curved drains, cycling through what may be curved."""
    rng = np.random.default_rng(SEED)
    linear = [s for s in json.loads((HERE / "orbits.json").read_text())["stages"] if s["states"] <= 8 and s["spectral_radius"] < 0.995]
    kinds = ["junction", "table", "diode", "junction diode", "coupling", "knee junction", "junction coupling", "junction diode coupling knee", "table diode", "low coupling junction", "diode coupling", "junction diode"]
    conducting = ["diode", "junction diode", "diode coupling", "table diode", "knee diode"]
    for place in range(70):
        base = linear[(place * 7) % len(linear)]
        kind = kinds[place % len(kinds)] if place < 26 else conducting[place % len(conducting)]
        doc = tomllib.loads(base["toml"])
        f, volts, duty = base["frequency_hz"], base["supply_v"], base["duty"]
        c = number(doc["drain"]["capacitance"]) * (1.0 if place < 26 else 0.3)   # less capacitance: further below ground
        ron = number(doc["switch"]["closed_resistance"])
        drain, switch, driver, tables = [], [], [], {}
        share = rng.uniform(0.1, 0.5)
        phi = rng.uniform(0.5, 1.0)
        if "junction" in kind:
            m = round(rng.uniform(0.3, 0.7), 3)
            drain += [f"capacitance = {quoted(c * share, 'F')}",
                      f"junction = {{ zero_bias = {quoted(c * (1 - share) * (1 + volts / phi) ** m, 'F')}, potential = \"{phi:.3f} V\", grading = {m} }}"]
        elif "table" in kind:
            name = "coss.csv"
            v = np.concatenate([[0.0], np.geomspace(0.3, 6 * volts, 11)])
            values = c * ((1 + v / phi) ** -0.5 * (1 + volts / phi) ** 0.5 * (1 - share) + share * (1 + 0.1 * rng.uniform(size=12)))
            values = np.minimum.accumulate(values)
            tables[name] = "voltage_v,capacitance_f\n" + "".join(f"{a:.4g},{b:.5g}\n" for a, b in zip(v, values))
            drain += [f"capacitance = {quoted(c * 0.1, 'F')}", f'table = "{name}"']
        else:
            drain += [f"capacitance = {quoted(c, 'F')}"]
        if "diode" in kind:
            switch.append(f"diode = {{ drop = \"{rng.uniform(0.3, 0.9):.3f} V\", resistance = {quoted(ron * rng.uniform(0.5, 3.0), 'ohm', 3)} }}")
        if "knee" in kind:
            amps = base["results"]["switch_peak_a"] * rng.uniform(0.3, 0.9)
            switch.append(f"knee = {{ current = {quoted(amps, 'A')}, sharpness = {rng.uniform(2, 6):.2f} }}")
        if "coupling" in kind:
            edges = [rng.uniform(0.02, 0.15) * min(duty, 1 - duty) / f for _ in range(2)]
            unit = next(u for u in (1e-6, 1e-9, 1e-12) if edges[0] > 3 * u or u == 1e-12)
            name = {1e-6: "us", 1e-9: "ns", 1e-12: "ps"}[unit]
            drain.append(f"gate_coupling = {quoted(c * rng.uniform(0.03, 0.15), 'F')}")
            driver += [f'swing = "{rng.choice([3.3, 5.0, 10.0])} V"', f'rise = "{edges[0] / unit:.4g} {name}"', f'fall = "{edges[1] / unit:.4g} {name}"',
                       f'gate_charge = "{c * 1e9 * rng.uniform(0.5, 3):.4g} nC"']
        if "low" in kind:
            volts *= 0.05
        out = re.sub(r"(\[drain\]\n)capacitance.*", lambda m: m[1] + "\n".join(drain), base["toml"])
        out = re.sub(r"(\[switch\]\n)", lambda m: m[1] + "\n".join(switch) + ("\n" if switch else ""), out)
        out = re.sub(r"(\[driver\]\n)", lambda m: m[1] + "\n".join(driver) + ("\n" if driver else ""), out)
        out = re.sub(r'voltage = ".*"', f'voltage = "{volts:.6g} V"', out)
        name = f"{kind} on {base['name']}" if place < 26 else f"conducting: {kind} on {base['name']}"
        yield {"name": name, "toml": out, "tables": tables}


def worst(now, then):
    """Largest difference over the scale of each figure."""
    volts = np.hypot(then["output_v"]["re"], then["output_v"]["im"])
    power = then["supply_w"] + abs(then["driver_w"])
    pairs = [(now["output_v"]["re"], then["output_v"]["re"], volts), (now["output_v"]["im"], then["output_v"]["im"], volts),
             (now["switch_peak_v"], then["switch_peak_v"], 10 * then["switch_peak_v"])]
    pairs += [(now["losses_w"][key], then["losses_w"][key], power) for key in then["losses_w"]]
    return max(abs(a - b) / abs(scale) for a, b, scale in pairs)


def check():
    stored = json.loads(STORE.read_text())["stages"]
    order = np.random.default_rng(5).permutation(len(stored))
    fine = True
    slow = next(s for s in stored if "settled" in s)
    for label, entry in [("shooting", stored[i]) for i in order[:CHECKED]] + [("settling", slow)]:
        now = solve(entry)[0] if label == "shooting" else settled(entry)[0]
        error = worst(now, entry["results"])
        if not error <= AGREEMENT:
            fine = False
            print(f"curved: {entry['name']} by {label} differs by {error:.1e}, allowed {AGREEMENT:.0e}")
    print(f"curved: {CHECKED} of {len(stored)} stages recomputed by shooting, 1 settled: {'agree' if fine else 'DO NOT AGREE'} at {AGREEMENT:.0e}")
    return 0 if fine else 1


def write():
    stages, settle_left, conducting = [], 3, 0
    for entry in bank():
        begin = time.perf_counter()
        extra = entry["name"].startswith("conducting")
        if extra and conducting == CONDUCTING:
            break
        try:
            entry["results"], entry["period_residual"] = solve(entry)
        except (RuntimeError, np.linalg.LinAlgError) as error:
            print(f"{entry['name']}: not in the bank: {error}", flush=True)
            continue
        took = time.perf_counter() - begin
        if extra and not entry["results"]["conductions"]:
            continue
        conducting += extra
        if settle_left and not tomllib.loads(entry["toml"])["feed"].get("choke"):
            try:
                again, periods = settled(entry, 150)
                entry["settled"] = {"periods": periods, "difference": worst(again, entry["results"])}
                settle_left -= 1
            except RuntimeError:
                pass
        stages.append(entry)
        r = entry["results"]
        print(f"{entry['name']:60s} eff={r['efficiency']:.4f} vmin={r['switch_min_v']:.3f} vpk={r['switch_peak_v']:.3f} n={r['conductions']} "
              f"bal={r['energy_residual']:.1e} {entry.get('settled', '')} {took:.1f}s", flush=True)
        document = {"tools": {"python": platform.python_version(), "numpy": np.__version__, "scipy": scipy.__version__},
                    "integration": {"method": METHOD, "rtol": RTOL, "atol": ATOL, "periodic": PERIODIC}, "seed": SEED, "stages": stages}
        STORE.write_text(json.dumps(document, indent=1) + "\n")
    return 0


def timed(name):
    entry = {"toml": (HERE / name).read_text()}
    begin = time.perf_counter()
    solve(entry)
    print(f"{time.perf_counter() - begin:.3f}")
    return 0


if __name__ == "__main__":
    if "--time" in sys.argv:
        sys.exit(timed(sys.argv[sys.argv.index("--time") + 1]))
    sys.exit(check() if "--check" in sys.argv[1:] else write())
