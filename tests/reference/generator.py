"""Seeded random stages as TOML text: sensible values around a class E design, spread well off nominal."""

import numpy as np

PREFIXES = [(1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "u"), (1e-9, "n"), (1e-12, "p"), (1e-15, "f")]


def text(value, unit, digits=4):
    """`value` with a prefix, rounded to `digits` significant digits."""
    size = abs(value)
    scale, prefix = next(((s, p) for s, p in PREFIXES if size >= s), PREFIXES[-1])
    return f'"{value / scale:.{digits}g} {prefix}{unit}"'


def inductance(henry):
    return f"inductance = {text(henry, 'H')}"


def capacitance(farad):
    return f"capacitance = {text(farad, 'F')}"


class Draw:
    """One random stage: carrier, duty, core resistance and the pieces its ladders are made of."""

    def __init__(self, rng):
        self.rng = rng
        self.f = 10 ** rng.uniform(5, np.log10(2.4e9))
        self.w = 2 * np.pi * float(f"{self.f:.4g}")
        self.v = rng.choice([1.2, 3.3, 5.0, 6.0, 12.0, 28.0, 48.0])
        self.duty = round(rng.uniform(0.25, 0.75), 3)
        self.r = 10 ** rng.uniform(0.3, 1.6)
        self.loaded_q = rng.uniform(2.0, 12.0)
        self.choke = rng.random() < 0.4
        self.rungs = []
        self.load = self.r
        self.reactance = None

    def q(self, low=25, high=300):
        return f", q = {int(self.rng.uniform(low, high))}" if self.rng.random() < 0.6 else ""

    def add(self, kind, body):
        self.rungs.append(f"[[load.ladder]]\n{kind} = {{ {body} }}")

    def series_l(self, ohm):
        self.add("series", inductance(ohm / self.w) + self.q())

    def series_c(self, ohm):
        self.add("series", capacitance(1 / (self.w * ohm)) + self.q(200, 900))

    def shunt_l(self, ohm):
        self.add("shunt", inductance(ohm / self.w) + self.q())

    def shunt_c(self, ohm):
        self.add("shunt", capacitance(1 / (self.w * ohm)) + self.q(200, 900))

    def excess(self):
        return self.r * (self.rng.uniform(0.3, 1.7) if self.choke else self.rng.uniform(-0.2, 1.3))

    def core(self, joined=False):
        """Series resonator with an excess reactance."""
        xl = self.loaded_q * self.r
        xc = max(xl - self.excess(), 0.3 * xl)
        if joined:
            body = f"{inductance(xl / self.w)}, {capacitance(1 / (self.w * xc))}, q = {int(self.rng.uniform(30, 200))}"
            if self.rng.random() < 0.5:
                body += f", capacitor_q = {int(self.rng.uniform(200, 900))}"
            self.add("series", body)
        elif self.rng.random() < 0.5:
            self.series_l(xl)
            self.series_c(xc)
        else:
            self.series_c(xc)
            self.series_l(xl)

    def low_pass_match(self, to=50.0):
        """Series L, shunt C up to a higher load resistance."""
        to = max(to, 1.5 * self.r)
        m = np.sqrt(to / self.r - 1)
        self.series_l(self.r * m)
        self.shunt_c(to / m)
        self.load = to

    def trap(self, harmonic, ohm):
        """Series trap to ground, resonant near a harmonic; `ohm` its inductive reactance at the carrier."""
        at = harmonic * self.rng.uniform(0.95, 1.05)
        body = f"{inductance(ohm / self.w)}, {capacitance(1 / (self.w * ohm * at * at))}"
        self.add("shunt", body + self.q())

    def tank(self, harmonic, ohm):
        """Parallel resonator in the through path near a harmonic."""
        at = harmonic * self.rng.uniform(0.95, 1.05)
        body = f"{inductance(ohm / self.w)}, {capacitance(1 / (self.w * ohm * at * at))}" + self.q()
        if self.rng.random() < 0.4:
            body += f", resistance = {text(ohm * self.rng.uniform(20, 200), 'ohm', 3)}"
        self.add("tank", body)

    def finish(self, title):
        rng, w, r = self.rng, self.w, self.r
        ron = r * 10 ** rng.uniform(-2.0, -0.5)
        c = rng.uniform(0.08, 0.3) if self.choke else rng.uniform(0.3, 1.0)
        lines = [f'title = "{title}"', f"frequency = {text(self.f, 'Hz')}", "", "[supply]", f'voltage = "{self.v:g} V"', "",
                 "[switch]", f"closed_resistance = {text(ron, 'ohm', 3)}"]
        if rng.random() < 0.5:
            lines.append(f"open_resistance = {text(r * 10 ** rng.uniform(1.5, 4), 'ohm', 3)}")
        lines += ["", "[drain]", capacitance(c / (w * r)), "", "[driver]", f"duty = {self.duty:g}", 'anchor = "centre"', "", "[feed]"]
        if self.choke:
            lines.append("choke = true")
        else:
            lines.append(inductance(r * 10 ** rng.uniform(-0.3, 0.8) / w))
        if rng.random() < 0.7:
            lines.append(f"resistance = {text(r * 10 ** rng.uniform(-3, -1), 'ohm', 3)}")
        lines += ["", "[load]", f"resistance = {text(self.load, 'ohm')}"]
        if self.reactance is not None:
            lines.append(f"reactance = {text(self.reactance, 'ohm', 3)}")
        return "\n".join(lines + self.rungs) + "\n"


def plain(d):
    d.core()


def joined(d):
    d.core(joined=True)


def inductive_load(d):
    d.core()
    d.reactance = d.r * d.rng.uniform(0.1, 1.0)


def capacitive_load(d):
    d.core(joined=d.rng.random() < 0.5)
    d.reactance = -d.r * d.rng.uniform(0.1, 1.0)


def matched(d):
    d.core()
    d.low_pass_match()


def pi_filter(d):
    d.core(joined=True)
    d.low_pass_match()
    d.series_l(d.load * d.rng.uniform(0.5, 1.2))
    d.shunt_c(d.load * d.rng.uniform(0.8, 2.0))


def trapped(d):
    d.series_l(d.r * d.rng.uniform(0.5, 1.5))
    d.trap(2, d.r * d.rng.uniform(0.5, 2.0))
    d.core()


def drain_trap(d):
    d.trap(d.rng.choice([2, 3]), d.r * d.rng.uniform(0.5, 2.0))
    d.core()


def third_tank(d):
    d.tank(d.rng.choice([2, 3]), d.r * d.rng.uniform(0.3, 1.0))
    d.core()


def high_pass(d):
    d.core()
    if d.rng.random() < 0.5:  # capacitors with nothing but a coil between them
        d.series_c(d.r * d.rng.uniform(0.3, 1.2))
        d.shunt_l(d.load * d.rng.uniform(0.8, 2.5))
    else:
        d.shunt_l(d.load * d.rng.uniform(0.8, 2.5))
        d.series_c(d.r * d.rng.uniform(0.3, 1.2))


def damped(d):
    d.core(joined=True)
    d.add("shunt", f"resistance = {text(d.r * d.rng.uniform(3, 20), 'ohm', 3)}, {capacitance(d.rng.uniform(0.2, 1.0) / (d.w * d.r))}")
    d.series_l(d.r * d.rng.uniform(0.4, 1.5))


def long_chain(d):
    d.loaded_q = min(d.loaded_q, 6.0)
    d.core()
    d.trap(3, d.r * d.rng.uniform(0.5, 2.0))
    d.low_pass_match()
    d.series_l(d.load * d.rng.uniform(0.5, 1.2))
    d.shunt_c(d.load * d.rng.uniform(0.8, 2.0))


def longest(d):
    long_chain(d)
    d.reactance = d.load * d.rng.uniform(0.1, 0.5)


def detailed(d):
    """Resistances given outright, capacitor Q in a tank, a damped trap, an element of each key."""
    rng, w, r = d.rng, d.w, d.r
    xl = d.loaded_q * r
    d.add("series", f"{inductance(xl / w)}, resistance = {text(r * rng.uniform(0.01, 0.1), 'ohm', 3)}")
    d.add("series", f"{capacitance(1 / (w * (xl - d.excess())))}, resistance = {text(r * rng.uniform(0.005, 0.05), 'ohm', 3)}")
    ohm, at = r * rng.uniform(0.3, 0.8), rng.uniform(1.9, 3.1)
    body = f"{inductance(ohm / w)}, {capacitance(1 / (w * ohm * at * at))}"
    d.add("tank", f"{body}, q = {int(rng.uniform(20, 90))}, capacitor_q = {int(rng.uniform(100, 600))}")
    ohm, at = r * rng.uniform(0.5, 2.0), rng.uniform(1.9, 3.1)
    body = f"{inductance(ohm / w)}, {capacitance(1 / (w * ohm * at * at))}"
    d.add("shunt", f"{body}, q = {int(rng.uniform(20, 90))}, resistance = {text(r * rng.uniform(0.02, 0.3), 'ohm', 3)}")
    d.reactance = r * rng.choice([-1.0, 1.0]) * rng.uniform(0.1, 0.5)


def inductors_around_shunt_resistor(d):
    d.core(joined=True)
    d.series_l(d.r)
    d.add("shunt", f"resistance = {text(d.r * d.rng.uniform(2, 10), 'ohm', 3)}")
    d.series_l(d.r * d.rng.uniform(0.3, 1.0))


def shunt_capacitor_at_drain(d):
    d.add("shunt", capacitance(d.rng.uniform(0.05, 0.3) / (d.w * d.r)))
    d.core()


def shunt_capacitors_together(d):
    d.core()
    d.series_l(d.r)
    for _ in range(2):
        d.add("shunt", capacitance(d.rng.uniform(0.1, 0.6) / (d.w * d.r)))


def inductor_tee(d):
    d.series_c(d.r * d.rng.uniform(1.5, 4.0))
    for kind in ("series", "shunt", "series"):
        d.add(kind, inductance(d.r * d.rng.uniform(0.8, 2.5) / d.w))


def inductors_in_a_row(d):
    d.core()
    d.add("series", inductance(d.r * d.rng.uniform(0.2, 1.0) / d.w))
    d.add("series", inductance(d.r * d.rng.uniform(0.2, 1.0) / d.w))
    d.reactance = d.r * 0.3


def series_capacitor_at_drain(d):
    d.add("series", capacitance(d.rng.uniform(0.3, 1.0) / (d.w * d.r)))
    if d.rng.random() < 0.5:
        d.series_l(d.r * d.rng.uniform(1.5, 3.5))


def resistive(d):
    pass


KINDS = [plain, joined, inductive_load, capacitive_load, matched, pi_filter, trapped, drain_trap, third_tank, high_pass, damped, long_chain]
DEGENERATE = [inductors_around_shunt_resistor, shunt_capacitor_at_drain, shunt_capacitors_together, inductor_tee,
              inductors_in_a_row, series_capacitor_at_drain, resistive]


def stages(seed, usable):
    """(name, text) of every stage; a draw that `usable(text)` refuses is drawn again."""
    rng = np.random.default_rng(seed)
    plan = [(kind, None) for kind in KINDS for _ in range(3)]
    plan += [(kind, choke) for kind in DEGENERATE for choke in (False, True)]
    plan += [(detailed, choke) for choke in (False, True, False, True)]
    plan += [(longest, False), (longest, False)]
    out = []
    for place, (kind, choke) in enumerate(plan):
        name = f"{place + 1:02d}_{kind.__name__}"
        while True:
            draw = Draw(rng)
            if choke is not None:
                draw.choke = choke
            kind(draw)
            body = draw.finish(kind.__name__.replace("_", " "))
            if usable(body):
                break
        out.append((name, body))
    return out
