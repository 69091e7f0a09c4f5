"""Random lossy ladders, coupled pairs among them, as scattering parameters by scikit-rf.

Independent of the engine: every element is a two-port of its own and the ladder is their
cascade; no nodal equations.

    python ladders.py            writes ladders.json
    python ladders.py --check N  recomputes the first N and compares with the stored file
"""

import json
import math
import random
import sys
from pathlib import Path

import numpy as np
import skrf

SEED = 20261202
COUNT = 50
FILE = Path(__file__).with_name("ladders.json")
PLACES = ["series", "shunt"]
KINDS = ["resistor", "coil", "capacitor", "series_trap", "parallel_trap"]


def make(number):
    dice = random.Random(SEED * 1000 + number)
    log = lambda a, b: math.exp(dice.uniform(math.log(a), math.log(b)))
    f = log(200e3, 2.5e9)
    w = 2 * math.pi * f
    r = log(5.0, 200.0)

    def coil():
        x = r * log(0.1, 10.0)
        return {"henry": x / w, "ohm": x / log(20.0, 500.0)}

    def capacitor():
        x = r * log(0.1, 10.0)
        return {"farad": 1 / (w * x), "ohm": x / log(50.0, 2000.0)}

    elements = []
    place = dice.choice(PLACES)
    for _ in range(dice.randint(2, 8)):
        kind = dice.choice(KINDS)
        element = {"kind": kind, "place": place}
        if kind == "resistor":
            # Not so much loss that nothing is left to compare.
            element["ohm"] = r * (log(0.01, 0.3) if place == "series" else log(3.0, 100.0))
        if kind != "resistor" and kind != "capacitor":
            element["coil"] = coil()
        if kind != "resistor" and kind != "coil":
            element["capacitor"] = capacitor()
        elements.append(element)
        place = PLACES[1 - PLACES.index(place)]
    # Every second one has a coupled pair somewhere, either way round.
    if number % 2 == 1:
        first, second = coil(), coil()
        k = dice.uniform(0.05, 0.99) * dice.choice([1, -1])
        pair = {
            "kind": "pair",
            "first": first,
            "second": second,
            "mutual_henry": k * math.sqrt(first["henry"] * second["henry"]),
        }
        elements.insert(dice.randint(0, len(elements)), pair)
    return {
        "frequencies_hz": [f * m for m in (0.5, 1.0, 3.0)],
        "reference_ohm": [r * log(0.3, 3.0), r * log(0.3, 3.0)],
        "elements": elements,
    }


def solve(d):
    band = skrf.Frequency.from_f(d["frequencies_hz"], unit="hz")
    line = skrf.media.DefinedGammaZ0(band, z0=50)
    w = 2 * np.pi * band.f

    def coil(part):
        return line.inductor(part["henry"]) ** line.resistor(part["ohm"])

    def capacitor(part):
        return line.capacitor(part["farad"]) ** line.resistor(part["ohm"])

    def parallel(a, b):
        return skrf.Network(frequency=band, s=skrf.network.y2s(a.y + b.y, 50), z0=50)

    def two_port(e):
        if e["kind"] == "pair":
            a, b = e["first"], e["second"]
            z = np.zeros((len(w), 2, 2), complex)
            z[:, 0, 0] = a["ohm"] + 1j * w * a["henry"]
            z[:, 1, 1] = b["ohm"] + 1j * w * b["henry"]
            z[:, 0, 1] = z[:, 1, 0] = 1j * w * e["mutual_henry"]
            return skrf.Network(frequency=band, s=skrf.network.z2s(z, 50), z0=50)
        in_line = {
            "resistor": lambda: line.resistor(e["ohm"]),
            "coil": lambda: coil(e["coil"]),
            "capacitor": lambda: capacitor(e["capacitor"]),
            "series_trap": lambda: coil(e["coil"]) ** capacitor(e["capacitor"]),
            "parallel_trap": lambda: parallel(coil(e["coil"]), capacitor(e["capacitor"])),
        }[e["kind"]]()
        return in_line if e["place"] == "series" else line.shunt(in_line ** line.short())

    whole = line.thru()
    for element in d["elements"]:
        whole = whole ** two_port(element)
    whole.renormalize(d["reference_ohm"])
    # Per frequency s11, s12, s21, s22, each real and imaginary.
    return [[x for c in s.reshape(4) for x in (float(c.real), float(c.imag))] for s in whole.s]


def main():
    if len(sys.argv) == 3 and sys.argv[1] == "--check":
        stored = json.loads(FILE.read_text())
        for number in range(int(sys.argv[2])):
            ladder = make(number)
            if ladder != stored[number]["ladder"]:
                sys.exit(f"ladder {number} is another ladder")
            gap = np.max(np.abs(np.array(solve(ladder)) - np.array(stored[number]["s"])))
            if not gap <= 1e-11:
                sys.exit(f"ladder {number}: off by {gap:.1e}")
        print(f"{sys.argv[2]} ladders recomputed, all as stored")
        return
    rows = [{"ladder": d, "s": solve(d)} for d in map(make, range(COUNT))]
    FILE.write_text(json.dumps(rows, indent=0))
    print(len(rows), "ladders written")


if __name__ == "__main__":
    main()
