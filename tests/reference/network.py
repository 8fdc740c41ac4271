"""Network equations of a switching stage, element by element.

The stage text (TOML) becomes a list of elements between nodes. Modified nodal analysis gives

    E x' + F x = s,      x = (node voltages, inductor currents)

with E symmetric and positive semidefinite (capacitances, inductances) and F the sum of a positive
semidefinite part (conductances) and a skew part (inductor incidence). Time is scaled to
theta = 2 pi f t, currents to the load resistance. E is singular (nodes without capacitance), and where
only inductors meet at a node the equations are of index two. Both are reduced by orthogonal
projections, without choosing a tree or a set of state variables:

    u   coordinates in the range of E, scaled so that |u|^2 / 2 is the stored energy
    z   coordinates in the kernel of E, from the algebraic rows
    W   kernel of the algebraic block: its rows are constraints on u (inductor cut-sets), the
        matching part of z is their multiplier and does no work on the constrained states

Result: w' = A w + B (source), resistor voltages = S w + T (source), for the closed and the open switch.
"""

import re
import tomllib

import numpy as np

PREFIX = {"f": 1e-15, "p": 1e-12, "n": 1e-9, "u": 1e-6, "m": 1e-3, "": 1.0, "k": 1e3, "M": 1e6, "G": 1e9}
TEXT = re.compile(r"^\s*([-+0-9.eE]+)\s*([fpnumkMG]?)(Hz|V|ohm|H|F)?\s*$")


def number(value):
    """SI number of a bare number or of a text with a unit."""
    if not isinstance(value, str):
        return float(value)
    found = TEXT.match(value)
    if not found:
        raise ValueError(f"not a number with a unit: {value!r}")
    return float(found[1]) * PREFIX[found[2]]


class Elements:
    """Elements between nodes; node 0 is ground, node "supply" is held at the supply voltage."""

    def __init__(self):
        self.nodes = {}
        self.resistors, self.capacitors, self.inductors = [], [], []
        self.fresh = 0

    def node(self, name=None):
        """A named node, or a new one."""
        if name in ("ground", "supply"):
            return name
        if name is None:
            self.fresh += 1
            name = f"inner{self.fresh}"
        self.nodes.setdefault(name, len(self.nodes))
        return name

    def resistor(self, a, b, ohm, group):
        self.resistors.append((a, b, ohm, group))

    def capacitor(self, a, b, farad):
        self.capacitors.append((a, b, farad))

    def inductor(self, a, b, henry):
        self.inductors.append((a, b, henry))

    def chain(self, a, b, parts):
        """Elements one after another from `a` to `b`: parts are (kind, value)."""
        at = a
        for place, (kind, value) in enumerate(parts):
            to = b if place + 1 == len(parts) else self.node()
            if kind == "R":
                self.resistor(at, to, value, "ladder")
            elif kind == "C":
                self.capacitor(at, to, value)
            else:
                self.inductor(at, to, value)
            at = to


def rung_parts(rung, w):
    """Inductive, capacitive and resistive parts of one rung, finite Q as series resistance at the carrier."""
    allowed = {"inductance", "capacitance", "resistance", "q", "capacitor_q"}
    if set(rung) - allowed:
        raise ValueError(f"unknown keys in rung {rung}")
    has_l, has_c = "inductance" in rung, "capacitance" in rung
    inductive, capacitive, resistive = [], [], []
    if has_l:
        henry = number(rung["inductance"])
        inductive.append(("L", henry))
        if "q" in rung:
            inductive.append(("R", w * henry / number(rung["q"])))
    if has_c:
        farad = number(rung["capacitance"])
        capacitive.append(("C", farad))
        quality = rung.get("capacitor_q", None if has_l else rung.get("q"))
        if quality is not None:
            capacitive.append(("R", 1.0 / (w * farad * number(quality))))
    if "resistance" in rung:
        resistive.append(("R", number(rung["resistance"])))
    return inductive, capacitive, resistive


class Stage:
    """Numbers of a stage text, its elements and its reduced equations."""

    def __init__(self, text):
        doc = tomllib.loads(text)
        self.frequency_hz = number(doc["frequency"])
        self.w = 2 * np.pi * self.frequency_hz
        self.supply_v = number(doc["supply"]["voltage"])
        self.duty = number(doc["driver"]["duty"])
        if doc["driver"].get("anchor", "centre") != "centre":
            raise ValueError("only the anchor `centre` is covered here")
        self.closed_ohm = number(doc["switch"]["closed_resistance"])
        self.open_ohm = number(doc["switch"]["open_resistance"]) if "open_resistance" in doc["switch"] else None
        self.choke = bool(doc["feed"].get("choke", False))
        self.feed_ohm = number(doc["feed"].get("resistance", 0.0))
        self.load_ohm = number(doc["load"]["resistance"])
        self.elements = self._elements(doc)
        self._reduce()

    def _elements(self, doc):
        net, w = Elements(), self.w
        drain = net.node("drain")
        net.capacitor(drain, "ground", number(doc["drain"]["capacitance"]))
        if not self.choke:
            at = "supply"
            if self.feed_ohm > 0:
                at = net.node()
                net.resistor("supply", at, self.feed_ohm, "feed")
            net.inductor(at, drain, number(doc["feed"]["inductance"]))
        at = drain
        for rung in doc["load"].get("ladder", []):
            (kind, body), = rung.items()
            inductive, capacitive, resistive = rung_parts(body, w)
            if kind == "shunt":
                net.chain(at, "ground", resistive + inductive + capacitive)
            elif kind == "series":
                to = net.node()
                net.chain(at, to, capacitive + inductive + resistive)
                at = to
            elif kind == "tank":
                to = net.node()
                for parts in (inductive, capacitive, resistive):
                    if parts:
                        net.chain(at, to, parts)
                at = to
            else:
                raise ValueError(f"unknown rung {kind}")
        reactance = number(doc["load"].get("reactance", 0.0))
        if reactance != 0:
            to = net.node()
            part = ("L", reactance / w) if reactance > 0 else ("C", 1.0 / (w * -reactance))
            net.chain(at, to, [part])
            at = to
        net.resistor(at, "ground", self.load_ohm, "load")
        return net

    def _reduce(self):
        net, w, unit = self.elements, self.w, self.load_ohm
        count = len(net.nodes)
        size = count + len(net.inductors)
        E, F = np.zeros((size, size)), np.zeros((size, size))
        supply = np.zeros(size)
        rows = []
        for a, b, farad in net.capacitors:
            row = self._row(a, b, size)[0]
            E += w * farad * unit * np.outer(row, row)
        for a, b, ohm, _ in net.resistors:
            row, held = self._row(a, b, size)
            F += unit / ohm * np.outer(row, row)
            supply -= unit / ohm * held * row
            rows.append((row, held))
        for place, (a, b, henry) in enumerate(net.inductors):
            row, held = self._row(a, b, size)
            at = count + place
            E[at, at] = w * henry / unit
            F[:, at] += row
            F[at, :] -= row
            supply[at] += held
        drain = np.zeros(size)
        drain[net.nodes["drain"]] = 1.0
        choke = drain.copy()  # a current of one (volt per load resistance) into the drain
        source = choke if self.choke else supply

        values, vectors = np.linalg.eigh(E)
        real = values > 1e-11 * values[-1]
        P = vectors[:, real] / np.sqrt(values[real])
        N = vectors[:, ~real]
        if np.abs(drain @ N).max(initial=0.0) > 1e-9:
            raise ValueError("the drain needs a capacitance")
        A22 = N.T @ F @ N
        A21 = N.T @ F @ P
        left, s, _ = np.linalg.svd(A22) if A22.size else (np.zeros((0, 0)), np.zeros(0), None)
        W = left[:, s < 1e-9 * max(1.0, s.max(initial=1.0))]
        if np.abs(W.T @ (N.T @ source)).max(initial=0.0) > 1e-9:
            raise ValueError("a source drives an inductor cut-set")
        Q = np.eye(P.shape[1])
        if W.shape[1]:
            _, s, vt = np.linalg.svd(W.T @ A21)
            Q = vt[int((s > 1e-9 * s.max()).sum()):].T
        inverse = np.linalg.pinv(A22, rcond=1e-10) if A22.size else np.zeros((0, 0))
        X = P @ Q - N @ inverse @ A21 @ Q          # x = X w + Y source
        Y = N @ inverse @ N.T @ source
        self.A, self.B = {}, {}
        ohms = {"closed": self.closed_ohm, "open": self.open_ohm}
        for phase, ohm in ohms.items():
            total = F + (unit / ohm * np.outer(drain, drain) if ohm else 0.0)
            self.A[phase] = -Q.T @ P.T @ total @ X
            self.B[phase] = Q.T @ P.T @ (source - total @ Y)
        X = self._without_idle_modes(X)
        self.states = X.shape[1]
        self.drain_row = drain @ X                 # the drain voltage has no direct source term
        assert abs(drain @ Y) < 1e-9
        self.resistor_rows = np.array([r @ X for r, _ in rows])
        self.resistor_held = np.array([r @ Y + (0.0 if self.choke else held) for r, held in rows])
        self.resistor_ohms = np.array([ohm for _, _, ohm, _ in net.resistors])
        self.resistor_groups = [group for _, _, _, group in net.resistors]
        if not self.choke:                         # the feed current: the first inductor
            self.feed_row, self.feed_held = X[count], Y[count]

    def _without_idle_modes(self, X):
        """Drop modes that no phase moves and no source drives: charge trapped between capacitors in
        series, current circulating in a loop of inductors. From rest they stay at zero, and they are
        orthogonal to the rest because A is a semidefinite part plus a skew part."""
        both = np.vstack([self.A["closed"], self.A["open"]])
        _, s, vt = np.linalg.svd(both)
        keep = vt[: int((s > 1e-11 * s.max()).sum())].T
        idle = vt[keep.shape[1]:]
        self.idle_modes = len(idle)
        if len(idle) and np.abs(idle @ self.B["closed"]).max() > 1e-9:
            raise ValueError("the supply drives a loop without resistance")
        for phase in self.A:
            self.A[phase] = keep.T @ self.A[phase] @ keep
            self.B[phase] = keep.T @ self.B[phase]
        return X @ keep

    def _row(self, a, b, size):
        """Voltage from a to b as a row over x, and its part held by a supply of one volt."""
        row, held = np.zeros(size), 0.0
        for name, sign in ((a, 1.0), (b, -1.0)):
            if name == "supply":
                held += sign
            elif name != "ground":
                row[self.elements.nodes[name]] += sign
        return row, held
