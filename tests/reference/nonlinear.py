"""Random class-E stages whose device capacitance depends on the drain voltage, integrated
with scipy to their periodic steady state.

Independent of the engine: plain right-hand sides with v' = i / C(v), an adaptive integrator
with event detection, Newton on the period map with a finite-difference Jacobian.

Even numbers have a junction capacitance, odd ones a curve through points (the monotone cubic
of scipy's PchipInterpolator, constant beyond either end). The device holds 30 to 90 % of the
energy-equivalent capacitance over 0 to 3.6 times the supply, in every fourth stage all of it
(then no shunt capacitor is fitted).

switch_peak_a is the largest current through the on-resistance alone, the spike of a hard
turn-on included; switch_w is all the heat in the on-resistance, turn-on included. diode_w is
the heat in the body diode, its threshold included.

A throw of the dice whose Newton iteration does not close, or whose steady state is not
stable, is passed over: the same number is thrown again with the next attempt.

    python nonlinear.py            writes nonlinear.json
    python nonlinear.py --check N  recomputes the first N and compares with the stored file
"""

import json
import math
import random
import sys
from bisect import bisect_right
from pathlib import Path

import numpy as np
from scipy.integrate import quad, solve_ivp
from scipy.interpolate import PchipInterpolator

SEED = 20261202
COUNT = 100
FILE = Path(__file__).with_name("nonlinear.json")
RTOL, ATOL = 1e-12, 1e-14
ORDERS = 5


def pieces(c, v_unit=1.0, c_unit=1.0):
    """C(v) of a capacitance object over v / v_unit in units of c_unit, as the voltages where
    the law changes and the smooth functions between them, each usable a little beyond."""
    if c["kind"] == "constant":
        value = c["c_f"] / c_unit
        return [], [lambda v: value]
    if c["kind"] == "junction":
        c0, vb, m = c["cj0_f"] / c_unit, c["built_in_v"] / v_unit, c["grading"]
        edge = -vb / 2
        at_edge = c0 * 0.5 ** -m
        steep = -m * at_edge / (vb * 0.5)
        return [edge], [
            lambda v: at_edge + steep * (v - edge),
            lambda v: c0 * max(1 + v / vb, 0.1) ** -m,
        ]
    vs = [v / v_unit for v in c["v"]]
    cs = [x / c_unit for x in c["c_f"]]

    def cubic(v0, k3, k2, k1, k0):
        return lambda v: ((k3 * (v - v0) + k2) * (v - v0) + k1) * (v - v0) + k0

    inner = [cubic(v0, *k) for v0, k in zip(vs, PchipInterpolator(vs, cs).c.T.tolist())]
    return vs, [lambda v: cs[0]] + inner + [lambda v: cs[-1]]


def equivalent(c, top):
    """The constant capacitance that stores the same energy at the voltage `top`."""
    knots, parts = pieces(c)
    edges = [0.0] + [v for v in knots if 0 < v < top] + [top]
    return 2 / top**2 * sum(
        quad(lambda v: parts[bisect_right(knots, lo)](v) * v, lo, hi, limit=200, epsabs=0, epsrel=1e-10)[0]
        for lo, hi in zip(edges, edges[1:])
    )


def make(number, attempt=0):
    dice = random.Random((SEED * 1000 + number) * 100 + attempt)
    log = lambda a, b: math.exp(dice.uniform(math.log(a), math.log(b)))
    f = log(200e3, 2.5e9)
    w = 2 * math.pi * f
    r = log(1.0, 50.0)
    built_in = dice.uniform(0.4, 1.2)
    v = built_in * log(5.0, 150.0)
    q = dice.uniform(2.2, 15.0)
    elastance = max(q - dice.uniform(0.65, 1.65), 0.2)
    load = r * log(0.4, 2.5)
    whole = 0.1836 * dice.uniform(0.7, 1.4) / (w * r)
    share = 1.0 if number % 8 in (2, 5) else dice.uniform(0.3, 0.9)
    if number % 2 == 0:
        capacitance = {"kind": "junction", "cj0_f": 1.0, "built_in_v": built_in, "grading": dice.uniform(0.2, 0.7)}
        capacitance["cj0_f"] = share * whole / equivalent(capacitance, 3.6 * v)
    else:
        count = dice.randint(4, 9)
        gaps = [dice.uniform(0.3, 1.7) * 1.5**k for k in range(count - 1)]
        reach = dice.uniform(3.5, 5.0) * v / sum(gaps)
        vs, cs = [0.0], [1.0]
        for k, gap in enumerate(gaps):
            vs.append(vs[-1] + gap * reach)
            cs.append(cs[-1] * dice.uniform(0.55, 0.95))
        capacitance = {"kind": "points", "v": vs, "c_f": cs}
        scale = share * whole / equivalent(capacitance, 3.6 * v)
        capacitance["c_f"] = [c * scale for c in cs]
    shunt = (1 - share) * whole
    esr = dice.choice([0.0, dice.uniform(0.0015, 0.01)]) / (w * shunt) if shunt else 0.0
    return {
        "evenfall": 1,
        "brief": {"carrier_hz": f, "supply_v": v, "load": {"r_ohm": load}},
        "device": {
            "on_resistance_ohm": r * log(0.005, 0.1),
            "capacitance": capacitance,
            "diode": {"forward_v": dice.uniform(0.4, 1.0), "slope_ohm": r * dice.uniform(0.002, 0.05)},
        },
        "stage": {"duty": dice.uniform(0.38, 0.58), "loaded_q": q},
        "fitted": {
            "feed": {"l_h": log(1.0, 40.0) * r / w, "esr_ohm": r * dice.uniform(0.0, 0.02)},
            "shunt": {"c_f": shunt, "esr_ohm": esr},
            "series_coil": {"l_h": q * r / w, "esr_ohm": r * dice.uniform(0.0, 0.1)},
            "series_capacitor": {"c_f": 1.0 / (w * r * elastance), "esr_ohm": r * dice.uniform(0.0, 0.01)},
            "drain_load": {"r_ohm": load, "x_ohm": 0.0},
        },
    }


class Stage:
    """The stage in normalised variables: w = 1, V = 1, the load = 1.

    State: drain voltage, feed current, series capacitor's voltage, series current, and where
    the shunt capacitor has a resistance also the voltage of its plates."""

    def __init__(self, d):
        fit, dev = d["fitted"], d["device"]
        self.w = w = 2 * math.pi * d["brief"]["carrier_hz"]
        self.v = d["brief"]["supply_v"]
        self.r = z = fit["drain_load"]["r_ohm"]
        self.opens = 2 * math.pi * d["stage"]["duty"]
        self.knots, self.parts = pieces(dev["capacitance"], self.v, 1 / (w * z))
        self.l1, self.r1 = w * fit["feed"]["l_h"] / z, fit["feed"]["esr_ohm"] / z
        self.c1, self.rc1 = w * fit["shunt"]["c_f"] * z, fit["shunt"]["esr_ohm"] / z
        self.l2, self.r2 = w * fit["series_coil"]["l_h"] / z, fit["series_coil"]["esr_ohm"] / z
        self.c2, self.rc2 = w * fit["series_capacitor"]["c_f"] * z, fit["series_capacitor"]["esr_ohm"] / z
        self.ron = dev["on_resistance_ohm"] / z
        self.vf, self.rd = dev["diode"]["forward_v"] / self.v, dev["diode"]["slope_ohm"] / z
        self.lossy = self.c1 > 0 and self.rc1 > 0
        self.size = 5 if self.lossy else 4

    def start(self):
        return np.array([0.0, 0.5, 1.0, 0.0, 0.0][: self.size])

    def slope(self, x, on, diode, cd):
        """Rate of the drain voltage."""
        v = x[0]
        i = x[1] - x[3]
        if on:
            i -= v / self.ron
        if diode:
            i -= (v + self.vf) / self.rd
        if self.lossy:
            return (i - (v - x[4]) / self.rc1) / cd(v)
        return i / (cd(v) + self.c1)

    def rhs(self, x, on, diode, cd):
        v, i1, vc, i2 = x[:4]
        state = [
            self.slope(x, on, diode, cd),
            (1 - self.r1 * i1 - v) / self.l1,
            i2 / self.c2,
            (v - vc - (self.r2 + self.rc2 + 1) * i2) / self.l2,
        ]
        if self.lossy:
            state.append((v - x[4]) / self.rc1 / self.c1)
        return state

    def integrals(self, t, x, on, diode):
        v, i1, vc, i2 = x[:4]
        out = [
            i1,
            i2 * i2,
            i1 * i1,
            v * v / self.ron if on else 0.0,
            v * (v + self.vf) / self.rd if diode else 0.0,
            (v - x[4]) ** 2 / self.rc1 if self.lossy else 0.0,
        ]
        for k in range(1, ORDERS + 1):
            out += [i2 * math.cos(k * t), i2 * math.sin(k * t)]
        return out

    def period(self, x0, record=None):
        """One period from x0; with a record also the integrals and the drain's extremes."""
        x = np.array(x0) if record is None else np.concatenate([x0, np.zeros(6 + 2 * ORDERS)])
        x = self.stretch(0.0, self.opens, x, True, record)
        return self.stretch(self.opens, 2 * math.pi, x, False, record)

    def stretch(self, t, end, x, on, record):
        diode = bool(x[0] < -self.vf)
        part = bisect_right(self.knots, x[0])
        while t < end - 1e-13:
            cd = self.parts[part]
            if record is None:
                f = lambda t, y: self.rhs(y.tolist(), on, diode, cd)
            else:
                def f(t, y):
                    x = y.tolist()
                    return self.rhs(x, on, diode, cd) + self.integrals(t, x, on, diode)
            sign = -1.0 if diode else 1.0
            above = self.knots[part] if part < len(self.knots) else math.inf
            below = self.knots[part - 1] if part > 0 else -math.inf
            s, hit = leg(f, t, end, x, [
                lambda t, y: sign * (y[0] + self.vf),
                lambda t, y: min(above - y[0], 1e9),
                lambda t, y: min(y[0] - below, 1e9),
            ], [] if record is None else [lambda t, y: self.slope(y.tolist(), on, diode, cd)])
            if record is not None:
                seen = [s.y[0, 0], s.y[0, -1]] + [y[0] for y in s.y_events[-1]]
                record.append((on, diode, seen, cd))
            t, x = s.t[-1], s.y[:, -1]
            if hit == 0:
                diode = not diode
            elif hit is not None:
                part += 1 if hit == 1 else -1
        return x


def leg(f, t, end, x, guards, turnings=(), max_step=0.1):
    """Integrates until `end` or until one of the guards falls through zero. Returns the
    solution and the number of the guard. `turnings` mark extremes, as the last events. The
    states at events are integrated again from the step before, not read off the interpolant."""
    events = []
    for g in guards:
        def event(t, y, g=g):
            return g(t, y)
        event.terminal, event.direction = True, -1
        events.append(event)
    for g in turnings:
        events.append(lambda t, y, g=g: g(t, y))
    s = solve_ivp(f, (t, end), x, method="DOP853", rtol=RTOL, atol=ATOL, events=events, max_step=max_step)
    if s.status < 0:
        raise ArithmeticError(s.message)
    hit = None
    if s.status == 1:
        hit = next(k for k in range(len(guards)) if len(s.t_events[k]))
        s.y[:, -1] = again(s, f, s.t[-1])
    for k in range(len(guards), len(events)):
        s.y_events[k] = [again(s, f, t) for t in s.t_events[k]]
    return s, hit


def again(s, f, t):
    """The state at t, integrated from the step before it."""
    k = max(int(np.searchsorted(s.t, t)) - 1, 0)
    if t <= s.t[k]:
        return s.y[:, k]
    return solve_ivp(f, (s.t[k], t), s.y[:, k], method="DOP853", rtol=RTOL, atol=ATOL).y[:, -1]


def close(period, x, warm=4, rounds=40, tolerance=3e-12):
    """Newton on the period map. Rank-one updates keep the Jacobian current; it is taken anew
    by differences where the residual falls too slowly. Returns the state and the largest
    multiplier."""
    for _ in range(warm):
        x = period(x)
    n = len(x)

    def differences(x, y):
        h = 1e-6
        return np.column_stack([(period(x + h * e) - y) / h for e in np.eye(n)])

    y = period(x)
    res, jac, fresh = y - x, None, False
    for _ in range(rounds):
        size = np.max(np.abs(res))
        if size < tolerance:
            break
        if jac is None:
            jac, fresh = differences(x, y), True
        step = np.linalg.solve(np.eye(n) - jac, res)
        part = 1.0
        while True:
            x_new = x + part * step
            y_new = period(x_new)
            res_new = y_new - x_new
            if np.max(np.abs(res_new)) < size or part < 0.1:
                break
            part *= 0.4
        dx = x_new - x
        if np.max(np.abs(res_new)) > (0.15 if size > 1e-9 else 0.9) * size:
            if fresh and size < 1e-10:
                if np.max(np.abs(res_new)) < size:
                    x, y, res = x_new, y_new, res_new
                break
            jac, fresh = None, False
        else:
            jac = jac + np.outer(y_new - y - jac @ dx, dx) / (dx @ dx)
            fresh = False
        x, y, res = x_new, y_new, res_new
    if np.max(np.abs(res)) > 1e-9:
        raise ArithmeticError("the period does not close")
    largest = lambda jac: float(np.max(np.abs(np.linalg.eigvals(jac))))
    if jac is None or largest(jac) > 0.9:
        jac = differences(x, y)
    return x, largest(jac)


def solve(d):
    st = Stage(d)
    n = st.size
    x, multiplier = close(st.period, st.start())
    if multiplier > 0.999:
        raise ArithmeticError("the steady state is not stable")
    record = []
    y = st.period(x, record)
    left = float(np.max(np.abs(y[:n] - x)))
    q = y[n:] / (2 * math.pi)
    v, r = st.v, st.r
    watt = v * v / r
    amp = [2 * math.hypot(q[6 + 2 * k], q[7 + 2 * k]) for k in range(ORDERS)]
    drains = [value for leg in record for value in leg[2]]
    closed = [value for leg in record if leg[0] for value in leg[2]]
    before = y[:n].tolist()
    supply, total = q[0], q[1]
    losses = {
        "switch_w": q[3],
        "diode_w": q[4],
        "feed_coil_w": st.r1 * q[2],
        "shunt_capacitor_w": q[5],
        "series_coil_w": st.r2 * q[1],
        "series_capacitor_w": st.rc2 * q[1],
    }
    figures = {
        "supply_power_w": supply * watt,
        "output_power_w": 0.5 * amp[0] ** 2 * watt,
        "total_output_power_w": total * watt,
        "drain_peak_v": max(drains) * v,
        "drain_least_v": min(drains) * v,
        "switch_peak_a": max(closed) / st.ron * v / r,
        "turn_on_v": before[0] * v,
        "turn_on_slope_v_per_s": st.slope(before, False, record[-1][1], record[-1][3]) * v * st.w,
        "harmonics_dbc": [20 * math.log10(a / amp[0]) for a in amp[1:]],
    }
    figures.update((name, float(value * watt)) for name, value in losses.items())
    figures = {k: x if isinstance(x, list) else float(x) for k, x in figures.items()}
    return figures, left, float(abs(supply - total - sum(losses.values())) / supply)


def thrown(number):
    """The first attempt of this number with a clean steady state."""
    for attempt in range(20):
        design = make(number, attempt)
        try:
            figures, residual, balance = solve(design)
        except (ArithmeticError, np.linalg.LinAlgError) as fault:
            print(f"stage {number} attempt {attempt} passed over: {fault}", flush=True)
            continue
        if residual > 1e-8 or balance > 2e-8:
            raise RuntimeError(f"stage {number}: residual {residual:.1e}, balance {balance:.1e}")
        return design, figures, residual, balance
    raise RuntimeError(f"stage {number}: no clean steady state")


def check(count):
    stored = json.loads(FILE.read_text())
    for number in range(count):
        design, got, _, _ = thrown(number)
        if json.loads(json.dumps(design)) != stored[number]["design"]:
            sys.exit(f"stage {number} is another design")
        want = stored[number]["expect"]
        v, z = design["brief"]["supply_v"], design["fitted"]["drain_load"]["r_ohm"]
        w = 2 * math.pi * design["brief"]["carrier_hz"]
        for key, value in want.items():
            if key == "harmonics_dbc":
                same = max(abs(a - b) for a, b in zip(got[key], value)) < 1e-6
            else:
                scale = {"_w": want["supply_power_w"], "_v": v, "_a": v / z, "_s": v * w}[key[-2:]]
                same = abs(got[key] - value) <= 1e-7 * max(scale, abs(value))
            if not same:
                sys.exit(f"stage {number} {key}: {got[key]} against {value}")
    print(f"{count} stages recomputed, all as stored")


def main():
    if len(sys.argv) == 3 and sys.argv[1] == "--check":
        return check(int(sys.argv[2]))
    count = int(sys.argv[1]) if len(sys.argv) == 2 else COUNT
    rows, worst = [], [0.0, 0.0]
    for number in range(count):
        design, figures, residual, balance = thrown(number)
        rows.append({"design": design, "expect": figures})
        worst = [max(worst[0], residual), max(worst[1], balance)]
        print(number, f"{residual:.1e} {balance:.1e}", flush=True)
    FILE.write_text(json.dumps(rows, indent=0))
    print(f"{len(rows)} stages written; worst residual {worst[0]:.1e}, worst power balance {worst[1]:.1e}")


if __name__ == "__main__":
    main()
