"""Random class-E stages as built, integrated with scipy to their periodic steady state.

Independent of the engine: plain right-hand sides, an adaptive integrator with event
detection, Newton on the period map with a finite-difference Jacobian. No matrix exponential.

    python stages.py            writes stages.json
    python stages.py --check N  recomputes the first N and compares with the stored file
"""

import json
import math
import random
import sys
from pathlib import Path

import numpy as np
from scipy.integrate import solve_ivp

SEED = 20261201
COUNT = 300
FILE = Path(__file__).with_name("stages.json")
RTOL, ATOL = 2e-12, 2e-14


def make(number):
    dice = random.Random(SEED * 1000 + number)
    log = lambda a, b: math.exp(dice.uniform(math.log(a), math.log(b)))
    f = log(200e3, 2.5e9)
    w = 2 * math.pi * f
    r = log(1.0, 50.0)
    v = log(3.0, 100.0)
    q = dice.uniform(2.2, 15.0)
    elastance = max(q - dice.uniform(0.65, 1.65), 0.2)
    load = r * log(0.4, 2.5)
    design = {
        "evenfall": 1,
        "brief": {"carrier_hz": f, "supply_v": v, "load": {"r_ohm": load}},
        "device": {
            "on_resistance_ohm": r * log(0.005, 0.1),
            "diode": {"forward_v": dice.uniform(0.4, 1.0), "slope_ohm": r * dice.uniform(0.002, 0.05)},
        },
        "stage": {"duty": dice.uniform(0.38, 0.58), "loaded_q": q},
        "fitted": {
            "feed": {"l_h": log(1.0, 40.0) * r / w, "esr_ohm": r * dice.uniform(0.0, 0.02)},
            "shunt": {"c_f": 0.1836 * dice.uniform(0.7, 1.4) / (w * r), "esr_ohm": dice.choice([0.0, r * dice.uniform(0.001, 0.01)])},
            "series_coil": {"l_h": q * r / w, "esr_ohm": r * dice.uniform(0.0, 0.1)},
            "series_capacitor": {"c_f": 1.0 / (w * r * elastance), "esr_ohm": r * dice.uniform(0.0, 0.01)},
            "drain_load": {"r_ohm": load, "x_ohm": 0.0},
        },
    }
    # Every second stage's switch current takes a while to fall at turn-off.
    if number % 2 == 1:
        design["device"]["fall_time_s"] = dice.uniform(0.02, 0.5) / w
    return design


class Stage:
    """The stage in normalised variables: w = 1, V = 1, the load's nominal current scale."""

    def __init__(self, d):
        fit, dev = d["fitted"], d["device"]
        w = 2 * math.pi * d["brief"]["carrier_hz"]
        self.v = d["brief"]["supply_v"]
        self.r = fit["drain_load"]["r_ohm"]
        z = self.r
        self.duty = d["stage"]["duty"]
        self.l1, self.r1 = w * fit["feed"]["l_h"] / z, fit["feed"]["esr_ohm"] / z
        self.c1, self.rc1 = w * fit["shunt"]["c_f"] * z, fit["shunt"]["esr_ohm"] / z
        self.l2, self.r2 = w * fit["series_coil"]["l_h"] / z, fit["series_coil"]["esr_ohm"] / z
        self.c2, self.rc2 = w * fit["series_capacitor"]["c_f"] * z, fit["series_capacitor"]["esr_ohm"] / z
        self.ron = dev["on_resistance_ohm"] / z
        self.fall = w * dev.get("fall_time_s", 0.0)
        self.vf, self.rd = dev["diode"]["forward_v"] / self.v, dev["diode"]["slope_ohm"] / z

    def drain(self, x, on, diode, tail=0.0):
        """Drain voltage from the drain node's current sum; `tail` is the current that a
        switch still carries while it opens."""
        net = x[1] - x[3] - tail
        g = (1 / self.ron if on else 0.0) + (1 / self.rd if diode else 0.0)
        bias = -self.vf / self.rd if diode else 0.0
        if self.rc1 > 0:
            return (net + x[0] / self.rc1 + bias) / (g + 1 / self.rc1)
        return x[0]

    def rhs(self, t, x, on, diode, tail):
        falling = tail(t)
        vd = self.drain(x, on, diode, falling)
        i_sw = vd / self.ron if on else falling
        i_d = (vd + self.vf) / self.rd if diode else 0.0
        ic = x[1] - x[3] - i_sw - i_d
        i2 = x[3]
        state = [
            ic / self.c1,
            (1 - self.r1 * x[1] - vd) / self.l1,
            i2 / self.c2,
            (vd - x[2] - (self.r2 + self.rc2 + 1) * i2) / self.l2,
        ]
        if len(x) == 4:
            return state
        return state + [
            x[1],
            i2 * i2,
            i2 * math.cos(t), i2 * math.sin(t),
            i2 * math.cos(2 * t), i2 * math.sin(2 * t),
            i2 * math.cos(3 * t), i2 * math.sin(3 * t),
            i2 * math.cos(4 * t), i2 * math.sin(4 * t),
            self.r1 * x[1] ** 2 + self.rc1 * ic ** 2 + (self.r2 + self.rc2) * i2 ** 2 + i_sw * vd + i_d * vd,
        ]

    def period(self, x0, record=None):
        """One period from x0; with a record also the integrals and the drain's extremes."""
        x = np.array(x0) if record is None else np.concatenate([x0, np.zeros(11)])
        none = lambda t: 0.0
        opens = 2 * math.pi * self.duty
        x = self.stretch(0.0, opens, x, True, none, record)
        if self.fall > 0:
            at_opening = self.drain(x, True, self.drain(x, True, False) < -self.vf) / self.ron
            tail = lambda t: at_opening * (1 - (t - opens) / self.fall)
            x = self.stretch(opens, opens + self.fall, x, False, tail, record)
        return self.stretch(opens + self.fall, 2 * math.pi, x, False, none, record)

    def stretch(self, t, end, x, on, tail, record):
        diode = self.drain(x, on, False, tail(t)) < -self.vf
        while t < end - 1e-13:
            def guard(t, y, diode=diode):
                vd = self.drain(y, on, diode, tail(t))
                return -(vd + self.vf) if diode else vd + self.vf
            guard.terminal, guard.direction = True, -1

            def slope(t, y, diode=diode):
                d = np.array(self.rhs(t, y.tolist(), on, diode, tail))
                h = 1e-6
                return self.drain(y + h * d, on, diode, tail(t + h)) - self.drain(y - h * d, on, diode, tail(t - h))
            slope.terminal = False
            f = lambda t, y, diode=diode: self.rhs(t, y.tolist(), on, diode, tail)
            events = [guard] if record is None else [guard, slope]
            s = solve_ivp(f, (t, end), x, method="DOP853", rtol=RTOL, atol=ATOL, events=events)
            if record is not None:
                seen = list(zip((s.t[0], s.t[-1]), (s.y[:, 0], s.y[:, -1]))) + list(zip(s.t_events[1], s.y_events[1]))
                record.append(([self.drain(y, on, diode, tail(t)) for t, y in seen], diode))
            t, x = s.t[-1], s.y[:, -1]
            if s.status == 1:
                diode = not diode
        return x


def solve(d):
    st = Stage(d)
    x = np.array([0.0, 0.5, 1.0, 0.0])
    for _ in range(3):
        x = st.period(x)
    jac, before = None, np.inf
    for _ in range(30):
        y = st.period(x)
        res = y - x
        size = np.max(np.abs(res))
        if size < 1e-12:
            break
        # The map is affine between changes of the diode's pattern, so one Jacobian serves
        # until the residual stops falling fast.
        if jac is None or size > 0.02 * before:
            h = 1e-4
            jac = np.column_stack([(st.period(x + h * e) - y) / h for e in np.eye(4)])
        before = size
        x = x + np.linalg.solve(np.eye(4) - jac, res)
    record = []
    y = st.period(x, record)
    left = float(np.max(np.abs(y[:4] - x)))
    q = y[4:] / (2 * math.pi)
    v, r = st.v, st.r
    watt = v * v / r
    amp = [2 * math.hypot(q[2 + 2 * k], q[3 + 2 * k]) for k in range(4)]
    supply, total, loss = q[0], q[1], q[10]
    drains = [value for leg in record for value in leg[0]]
    return {
        "supply_power_w": supply * watt,
        "output_power_w": 0.5 * amp[0] ** 2 * watt,
        "total_output_power_w": total * watt,
        "drain_peak_v": max(drains) * v,
        "turn_on_v": record[-1][0][1] * v,
        "harmonics_dbc": [20 * math.log10(a / amp[0]) for a in amp[1:]],
        "diode_intervals": sum(1 for leg in record if leg[1]),
    }, left, abs(supply - total - loss) / supply


def main():
    if len(sys.argv) == 3 and sys.argv[1] == "--check":
        stored = json.loads(FILE.read_text())
        for number in range(int(sys.argv[2])):
            design = make(number)
            if design != stored[number]["design"]:
                sys.exit(f"stage {number} is another design")
            got = checked(number, design)
            want = stored[number]["expect"]
            scales = {key: abs(want[key]) for key in want if key.endswith(("_w", "peak_v"))}
            scales["turn_on_v"] = design["brief"]["supply_v"]
            for key, scale in scales.items():
                if not abs(got[key] - want[key]) <= 1e-7 * scale:
                    sys.exit(f"stage {number} {key}: {got[key]} against {want[key]}")
            if max(abs(a - b) for a, b in zip(got["harmonics_dbc"], want["harmonics_dbc"])) > 1e-6:
                sys.exit(f"stage {number}: harmonics differ")
        print(f"{sys.argv[2]} stages recomputed, all as stored")
        return
    count = int(sys.argv[1]) if len(sys.argv) == 2 else COUNT
    from multiprocessing import Pool
    with Pool(2) as pool:
        rows = pool.map(both, range(count))
    FILE.write_text(json.dumps([{"design": d, "expect": e} for d, e in rows], indent=0))
    print(len(rows), "stages written")


def checked(number, design):
    """The figures, or an end where the period does not close or the powers do not add up."""
    figures, residual, balance = solve(design)
    if residual > 2e-7 or balance > 1e-7:
        raise RuntimeError(f"stage {number}: residual {residual:.1e}, balance {balance:.1e}")
    return figures


def both(number):
    design = make(number)
    return design, checked(number, design)


if __name__ == "__main__":
    main()
