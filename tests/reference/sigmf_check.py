#!/usr/bin/env python3
"""Holds recordings that the program writes against the validator of the SigMF community (PyPI: sigmf).

    sigmf_check.py [--check]     needs the built program (QUIETEDGE, else ../../target/{release,debug}/quietedge)

Exit 0: valid, or skipped (said so); 1: not valid.
"""
import os
import subprocess
import sys
import tempfile
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


def skip(why):
    print(f"SigMF check skipped: {why}")
    sys.exit(0)


def program():
    places = [os.environ.get("QUIETEDGE"), ROOT / "target/release/quietedge", ROOT / "target/debug/quietedge"]
    for place in places:
        if place and Path(place).exists():
            return str(place)
    skip("the program is not built")


try:
    import sigmf
except ImportError:
    done = subprocess.run([sys.executable, "-m", "pip", "install", "--quiet", "sigmf"], capture_output=True)
    if done.returncode != 0:
        skip("the validator cannot be installed here")
    try:
        import sigmf
    except ImportError:
        skip("the validator cannot be loaded")

import numpy as np

with tempfile.TemporaryDirectory() as folder:
    for numbers in ["float32", "int16"]:
        meta = Path(folder) / f"{numbers}.sigmf-meta"
        subprocess.run(
            [program(), "signal", "-q", "two-tone", "--spacing", "1 kHz", "--rate", "64 kHz", "--samples", "640",
             "--numbers", numbers, "--out", str(meta)],
            check=True, stdout=subprocess.DEVNULL)
        recording = sigmf.sigmffile.fromfile(str(meta))
        recording.validate()
        samples = recording.read_samples()
        assert len(samples) == 640 and np.isclose(np.abs(samples).max(), 1.0, atol=1e-4), numbers
        assert recording.get_global_field("core:sample_rate") == 64000
        print(f"{numbers}: valid, {len(samples)} samples")
