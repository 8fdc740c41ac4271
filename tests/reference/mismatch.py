"""A class E stage over the angle of its load's reflection coefficient: equations of network.py, integrated with SciPy.

mismatch.py           written to mismatch.json
mismatch.py --check   recomputed and compared with mismatch.json

The load is Z = R (1 + g)/(1 - g) at the carrier; its reactance is one element, which harmonics meet as it is.
"""

import os

for _threads in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_threads, "1")

import cmath
import json
import math
import platform
import sys
from pathlib import Path

import numpy as np
import scipy

import network
import period

STORE = Path(__file__).with_name("mismatch.json")
AGREEMENT = 1e-7  # --check, relative to the size of each figure
REFERENCE_OHM = 50.0
VSWRS = (2.0, 6.0)
POINTS = 12

STAGE = """title = "Mismatched"
frequency = "100 MHz"

[supply]
voltage = "6 V"

[switch]
closed_resistance = "0.3 ohm"
open_resistance = "20 kohm"

[drain]
capacitance = "109 pF"

[driver]
duty = 0.5

[feed]
inductance = "11.65 nH"
resistance = "50 mohm"

[load]
resistance = "50 ohm"
[[load.ladder]]
series = { inductance = "100 nH", q = 90 }
[[load.ladder]]
series = { capacitance = "36 pF" }
[[load.ladder]]
shunt = { capacitance = "64 pF" }
"""


def at(vswr, angle_deg):
    gamma = cmath.rect((vswr - 1) / (vswr + 1), math.radians(angle_deg))
    load = REFERENCE_OHM * (1 + gamma) / (1 - gamma)
    reactance = load.imag if abs(load.imag) > 1e-9 else 0.0
    text = STAGE.replace('resistance = "50 ohm"', f"resistance = {load.real!r}\nreactance = {reactance!r}")
    figures, _ = period.results(network.Stage(text), settle=False)
    keep = ("output_v", "output_w", "supply_w", "efficiency", "switch_peak_v", "switch_peak_a", "closing_v")
    return {"vswr": vswr, "angle_deg": angle_deg, "load_ohm": [load.real, load.imag], **{key: figures[key] for key in keep}}


def compute():
    return [at(vswr, 360.0 * k / POINTS) for vswr in VSWRS for k in range(POINTS)]


def flat(value):
    if isinstance(value, dict):
        return [x for v in value.values() for x in flat(v)]
    return flat(dict(enumerate(value))) if isinstance(value, list) else [value]


def check():
    worst = 0.0
    for then, now in zip(json.loads(STORE.read_text())["points"], compute(), strict=True):
        for key, value in then.items():
            a, b = np.array(flat(value)), np.array(flat(now[key]))
            size = then["switch_peak_v"] if key == "closing_v" else np.abs(a).max() or 1.0
            worst = max(worst, float(np.abs(a - b).max() / size))
    print(f"mismatch: {len(VSWRS) * POINTS} loads recomputed, worst difference {worst:.1e}, allowed {AGREEMENT:.0e}")
    return 0 if worst <= AGREEMENT else 1


def write():
    tools = {"python": platform.python_version(), "numpy": np.__version__, "scipy": scipy.__version__}
    document = {"tools": tools, "toml": STAGE, "reference_ohm": REFERENCE_OHM, "points": compute()}
    STORE.write_text(json.dumps(document, indent=1) + "\n")
    return 0


if __name__ == "__main__":
    sys.exit(check() if "--check" in sys.argv[1:] else write())
