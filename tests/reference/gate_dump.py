"""Events of the gate in gate_dump.vcd, read by splitting its text, apart from any parser. With iverilog the dump is made
again from gate_dump.v and held against the stored one. Run with --check, as run.sh does."""

import pathlib
import shutil
import subprocess
import sys
import tempfile

HERE = pathlib.Path(__file__).parent


def events(text, path):
    """(time in ticks, value) of the signal with this path."""
    scopes, codes, now, found = [], {}, 0, []
    for line in text.splitlines():
        words = line.split()
        if not words:
            continue
        if words[0] == "$scope":
            scopes.append(words[2])
        elif words[0] == "$upscope":
            scopes.pop()
        elif words[0] == "$var":
            codes.setdefault(".".join(scopes + [words[4]]), words[3])
        elif words[0][0] == "#":
            now = int(words[0][1:])
        elif words[0][0] in "01xz" and words[0][1:] == codes.get(path):
            found.append((now, words[0][0]))
    return found


def body(text):
    return text[text.index("$timescale"):]


def main():
    stored = (HERE / "gate_dump.vcd").read_text()
    known = [event for event in events(stored, "bench.shaper.gate") if event[1] in "01"]
    print(len(known), known[:3], known[-2:])
    good = len(known) == 32 and known[1] == (550000, "1") and known[-1] == (6050000, "1")
    if shutil.which("iverilog"):
        with tempfile.TemporaryDirectory() as folder:
            subprocess.run(["iverilog", "-g2012", "-o", "gate_dump", str(HERE / "gate_dump.v")], cwd=folder, check=True)
            subprocess.run(["vvp", "gate_dump"], cwd=folder, check=True, stdout=subprocess.DEVNULL)
            good = good and body((pathlib.Path(folder) / "gate_dump.vcd").read_text()) == body(stored)
    else:
        print("iverilog is not here: the dump is not made again")
    if "--check" in sys.argv and not good:
        sys.exit("gate_dump.vcd differs")


if __name__ == "__main__":
    main()
