"""Margins of L(s) = C P F H on a grid of models, settings, forms, scan times and PV filters.

P has its exact dead time, F = 1/(1 + Tf s) is the PV filter, H = exp(-s scan/2) the hold as a delay.

  standard  C = Kc (1 + 1/(Ti s) + Td s / (1 + Td s/N))
  series    C = Kc' (1 + 1/(Ti' s)) (1 + Td' s) / (1 + Td' s/N)
  parallel  C = Kp + Ki/s + Kd s / (1 + Kd s/(Kp N))                     N = 0: unfiltered

Writes margins.csv. Definitions:

  stable         no closed-loop pole in the right half plane, by the argument principle (see `unstable_poles`)
  ms, mt         suprema of |1/(1+L)| and |L/(1+L)| over 0 < w < infinity, both ends included
  gain_margin    smallest factor > 1 by which the gain can rise before instability: 1 / the largest |L| < 1
                 where the phase is an odd multiple of -180 degrees; blank where there is none
  phase_margin   smallest lag, over all frequencies where |L| = 1, that brings L to -1: (arg L + 180) mod 360;
                 blank where |L| never crosses 1
  delay_margin   smallest of (that lag in radians) / w over the same frequencies

Unstable loops carry no margins.
"""

import csv
import itertools
import warnings
from pathlib import Path

import control
import numpy as np
from scipy.optimize import brentq, minimize_scalar

HERE = Path(__file__).parent
COLUMNS = (
    "kind,k,tau_s,tau2_s,theta_s,form,p,i,d,n,scan_s,pv_filter_s,"
    "stable,ms,mt,gain_margin,phase_margin_deg,delay_margin_s,note"
).split(",")


class Loop:
    """One row: the model, the settings and the open loop they make."""

    def __init__(self, kind, k, tau, tau2, theta, form, p, i, d, n, scan, pv_filter):
        self.inputs = (kind, k, tau, tau2, theta, form, p, i, d, n, scan, pv_filter)
        d = d or 0.0
        self.delay = theta + scan / 2.0
        lags = [value for value in (tau, tau2, pv_filter) if value]
        poles_at_origin = (1 if kind.startswith("integrating") else 0) + (1 if i else 0)
        s = np.polynomial.Polynomial([0.0, 1.0])
        one = np.polynomial.Polynomial([1.0])

        # C = numerator / (denominator s^[integral action]), written out from the equations above.
        if form == "standard":
            derivative_lag = d / n if n else 0.0
            filtered = 1 + derivative_lag * s
            top = p * (filtered * (s + 1.0 / i) + d * s * s) if i else p * (filtered + d * s)
        elif form == "series":
            derivative_lag = d / n if n else 0.0
            top = p * (s + (1.0 / i)) * (1 + d * s) if i else p * (1 + d * s) * one
        else:
            derivative_lag = d / (p * n) if n else 0.0
            top = (p * s + i) * (1 + derivative_lag * s) + d * s * s if i else p * (1 + derivative_lag * s) + d * s
        bottom = one * (1 + derivative_lag * s)
        for lag in lags:
            bottom = bottom * (1 + lag * s)
        self.numerator = k * top * one
        self.denominator = bottom
        self.poles_at_origin = poles_at_origin
        self.zeros = self.numerator.trim().roots()
        self.lags = lags + ([derivative_lag] if derivative_lag else [])
        self.excess = self.denominator.trim().degree() + poles_at_origin - self.numerator.trim().degree()
        assert self.excess >= 0 and np.all(self.zeros.real < 0.0)
        self.limit = 0.0  # |L| as w -> infinity
        if self.excess == 0:
            self.limit = abs(self.numerator.trim().coef[-1] / self.denominator.trim().coef[-1])

    def rational(self, w):
        s = 1j * np.asarray(w, dtype=float)
        return self.numerator(s) / self.denominator(s) / s**self.poles_at_origin

    def response(self, w):
        return self.rational(w) * np.exp(-1j * np.asarray(w) * self.delay)

    def magnitude(self, w):
        return np.abs(self.rational(w))

    def phase(self, w):
        """Phase of L without jumps, from its factors; every zero and lag is in the left half plane."""
        w = np.asarray(w, dtype=float)
        total = -self.poles_at_origin * np.pi / 2.0 - w * self.delay
        for lag in self.lags:
            total = total - np.arctan(w * lag)
        for zero in self.zeros:
            # A complex zero's angle starts at -/+ its own argument; the pair's sum starts at 0.
            total = total + np.arctan2(w - zero.imag, -zero.real)
        return total

    def grid(self):
        """Frequencies dense in magnitude (log) and in phase (linear), far beyond the last crossing."""
        corners = [1.0 / lag for lag in self.lags] + [abs(z) for z in self.zeros]
        if self.delay:
            corners.append(1.0 / self.delay)
        low, high = 1e-5 * min(corners), 100.0 * max(corners)
        while self.excess and self.magnitude(high) > 1e-3:
            high *= 2.0
        if self.excess and self.delay:
            high = max(high, 60.0 / self.delay)
        if not self.excess:
            high = max(high, 200.0 / self.delay) if self.delay else high
        grid = np.geomspace(low, high, int(3000 * np.log10(high / low)))
        if self.delay:
            # The delay's turns are resolved where |L| > 0.01, and the first ten of them always: what lies beyond
            # can neither encircle -1 nor hold the peaks or the largest crossing.
            decided = grid[self.magnitude(grid) > 0.01][-1] if self.excess else high
            turns = min(max(decided, 60.0 / self.delay), high)
            grid = np.union1d(grid, np.linspace(low, turns, int(turns * self.delay / 0.02) + 2))
        return grid

    def unstable_poles(self, grid, response):
        """Right-half-plane zeros of 1 + L by the argument principle.

        With n poles at the origin, passed on the right by a small half circle, and P = 0 open-loop poles in
        the right half plane, Z = n/2 - (change of arg(1 + L) from w = 0+ to infinity) / pi. The grid starts
        at a finite w; what is missing below is the angle from its limit there: 1 + L ~ c/(jw)^n for n > 0,
        arg -n pi/2, and 1 + L(0) > 0 for n = 0. Not strictly proper with dead time (`limit` > 0): the far end
        only circles around 1 when limit < 1, and has roots without number to the right when limit > 1.
        """
        if self.limit and self.delay and self.limit >= 1.0:
            return np.inf
        while True:
            turned = np.abs(np.angle((1.0 + response[1:]) / (1.0 + response[:-1])))
            coarse = np.flatnonzero((turned > 0.3) & (np.diff(grid) > 1e-9 * grid[1:]))
            if not len(coarse):
                break
            # Near the edge of stability 1 + L passes close to 0 and turns fast: halve until it is followed.
            middle = (grid[coarse] + grid[coarse + 1]) / 2.0
            grid = np.insert(grid, coarse + 1, middle)
            response = np.insert(response, coarse + 1, self.response(middle))
        angle = np.unwrap(np.angle(1.0 + response))
        n = self.poles_at_origin
        start = -n * np.pi / 2.0
        angle = angle + 2.0 * np.pi * np.round((start - angle[0]) / (2.0 * np.pi))
        assert abs(angle[0] - start) < 0.2, (angle[0], start)
        far = 0.0 if not self.limit else np.arcsin(min(1.0, self.limit))
        end = 2.0 * np.pi * np.round(angle[-1] / (2.0 * np.pi))
        assert abs(angle[-1] - end) <= far + 0.01
        count = n / 2.0 - (end - start) / np.pi
        assert abs(count - round(count)) < 1e-6 and count > -0.5, count
        return round(count)

    def margins(self):
        grid = self.grid()
        response = self.response(grid)
        if self.unstable_poles(grid, response):
            return None
        sensitivity = lambda w: -abs(1.0 / (1.0 + self.response(w)))
        complementary = lambda w: -abs(self.response(w) / (1.0 + self.response(w)))
        # Both ends: L(0) is the static loop gain (infinite with integral action); at infinity S -> 1, T -> 0.
        static = np.inf if self.poles_at_origin else abs(self.numerator(0.0) / self.denominator(0.0))
        s_ends = [1.0 / (1.0 + static), 1.0]
        t_ends = [1.0 if np.isinf(static) else static / (1.0 + static), 0.0]
        if self.limit:
            # With delay the far end circles at this radius; without, it arrives there at angle 0.
            sign = -1.0 if self.delay else 1.0
            s_ends[1] = 1.0 / (1.0 + sign * self.limit)
            t_ends[1] = self.limit / (1.0 + sign * self.limit)
        ms = max(peak(sensitivity, grid), *s_ends)
        mt = max(peak(complementary, grid), *t_ends)

        notes = []
        if self.limit:
            notes.append("not_strictly_proper")
        crossings = self.phase_crossings(grid)
        below = [m for m in self.magnitude(np.array(crossings)) if m < 1.0] if crossings else []
        gain_margin = 1.0 / max(below) if below else None
        if self.limit and self.delay and (not below or self.limit >= max(below) * (1 - 1e-9)):
            gain_margin = 1.0 / self.limit
            notes.append("gain_margin_at_infinity")

        unity = self.gain_crossings(grid)
        lags = [((self.phase(w) + np.pi) % (2.0 * np.pi), w) for w in unity]
        phase_margin = min((lag for lag, _ in lags), default=None)
        delay_margin = min((lag / w for lag, w in lags), default=None)
        if any(lag > np.pi and 2.0 * np.pi - lag < phase_margin for lag, _ in lags):
            notes.append("lead_side_smaller")
        if len(unity) > 1:
            notes.append("several_gain_crossings")
        if not unity:
            notes.append("no_gain_crossing")
        degrees = None if phase_margin is None else np.degrees(phase_margin)
        return (ms, mt, gain_margin, degrees, delay_margin, " ".join(notes))

    def phase_crossings(self, grid):
        phase = self.phase(grid)
        turn = np.floor((phase + np.pi) / (2.0 * np.pi))
        found = []
        for i in np.flatnonzero(np.diff(turn)):
            target = 2.0 * np.pi * max(turn[i], turn[i + 1]) - np.pi
            found.append(brentq(lambda w: self.phase(w) - target, grid[i], grid[i + 1], xtol=1e-300, rtol=1e-14))
        return found

    def gain_crossings(self, grid):
        above = self.magnitude(grid) > 1.0
        return [
            brentq(lambda w: np.log(self.magnitude(w)), grid[i], grid[i + 1], xtol=1e-300, rtol=1e-14)
            for i in np.flatnonzero(np.diff(above.astype(int)))
        ]


def peak(negated, grid):
    """Supremum on the grid's range: every local peak near the top is refined."""
    values = -negated(grid)
    top = np.max(values)
    inner = (values[1:-1] >= values[:-2]) & (values[1:-1] >= values[2:]) & (values[1:-1] > 0.999 * top)
    best = top
    for i in np.flatnonzero(inner) + 1:
        found = minimize_scalar(
            negated, bounds=(grid[i - 1], grid[i + 1]), method="bounded", options={"xatol": 1e-10 * grid[i]}
        )
        best = max(best, -found.fun)
    return best


def models():
    # kind, k, tau, tau2, theta
    yield from [
        ("first-order", 1.0, 10.0, None, 2.0),
        ("first-order", 2.0, 100.0, None, 5.0),
        ("first-order", 0.5, 5.0, None, 20.0),
        ("first-order", 1.0, 5.0, None, 120.0),
        ("first-order", 1.5, 30.0, None, 0.0),
        ("second-order", 1.0, 20.0, 2.0, 1.0),
        ("second-order", 2.0, 60.0, 30.0, 10.0),
        ("second-order", 0.8, 4.0, 3.0, 25.0),
        ("second-order", 1.0, 10.0, 8.0, 0.0),
        ("second-order", 1.2, 12.0, 12.0, 6.0),
        ("integrating", 0.05, None, None, 4.0),
        ("integrating", 0.002, None, None, 30.0),
        ("integrating", 0.01, None, None, 0.0),
        ("integrating-lag", 0.05, 5.0, None, 4.0),
        ("integrating-lag", 0.01, 20.0, None, 1.0),
        ("integrating-lag", 0.02, 10.0, None, 0.0),
    ]


def base_settings(kind, k, tau, tau2, theta):
    """A plain starting point (SIMC with tau_c = theta, or a tenth of the lags where there is no dead time)."""
    lags = (tau or 0.0) + (tau2 or 0.0)
    wait = theta + (tau2 or 0.0) / 2.0 + (tau or 0.0) / 2.0 * kind.endswith("lag")
    wait = max(wait, 0.1 * lags, 0.5 / k * 0.05 if kind == "integrating" else 0.0)
    if kind.startswith("integrating"):
        return 0.5 / (k * wait), 8.0 * wait, 0.6 * wait
    lead = tau + (tau2 or 0.0) / 2.0 + (theta / 3.0 if theta > tau else 0.0)
    return 0.5 * lead / (k * wait), min(lead, 8.0 * wait), 0.4 * min(wait, lags)


def rows():
    forms = [
        ("standard", "PI", 0), ("standard", "PID", 5), ("standard", "PID", 10), ("standard", "PID", 0),
        ("series", "PI", 0), ("series", "PID", 5), ("series", "PID", 10), ("series", "PID", 0),
        ("parallel", "PI", 0), ("parallel", "PID", 5), ("parallel", "PID", 10), ("parallel", "PID", 0),
    ]  # fmt: skip
    factors = itertools.cycle((0.4, 1.0, 1.7, 2.6, 4.0))
    integral_shares = itertools.cycle((1.0, 0.6, 1.6, 1.0, 0.35, 2.5, 0.8))
    scans = itertools.cycle((0.0, 0.05, 0.4))
    filters = itertools.cycle((0.0, 0.0, 0.3, 0.1))
    for model in models():
        kc, ti, td = base_settings(*model)
        kind, k, tau, tau2, theta = model
        for (form, letters, n), turn in itertools.product(forms, range(2)):
            gain, time = kc * next(factors), ti * next(integral_shares)
            unit = theta if theta else td
            scan, pv_filter = next(scans) * unit, next(filters) * unit
            if theta == 0.0 and turn == 0:
                scan = 0.0  # rows that a rational transfer function describes exactly
            derivative = td if letters == "PID" else None
            one_lag = kind in ("first-order", "integrating")
            if derivative and n == 0 and one_lag and not pv_filter:
                pv_filter = 0.2 * unit  # else L does not fall off; those rows are chosen below
            p, i, d = gain, time, derivative
            if form == "parallel":
                i, d = gain / time, gain * derivative if derivative else None
            yield (*model, form, *rounded(p, i, d), n, *rounded(scan, pv_filter))
    yield from hand_picked()


def rounded(*values):
    return [None if v is None else float(f"{v:.5g}") for v in values]


def hand_picked():
    first, second = ("first-order", 1.0, 10.0, None, 2.0), ("second-order", 1.0, 20.0, 2.0, 1.0)
    # Published robustness of SIMC at tau_c = theta, to be recognised in the table.
    yield ("first-order", 1.0, 10.0, None, 1.0, "standard", 5.0, 10.0, None, 0, 0.0, 0.0)
    yield ("integrating", 1.0, None, None, 1.0, "standard", 0.5, 8.0, None, 0, 0.0, 0.0)
    # Not strictly proper: unfiltered derivative on one lag.
    yield (*first, "standard", 2.5, 10.0, 0.8, 0, 0.0, 0.0)
    yield (*first, "standard", 1.5, 10.0, 4.0, 0, 0.5, 0.0)
    yield (*first, "series", 2.0, 10.0, 6.0, 0, 0.0, 0.0)  # |L| -> 1.2: unstable by the fast modes alone
    yield ("integrating", 0.05, None, None, 4.0, "standard", 2.0, 40.0, 2.0, 0, 0.0, 0.0)
    yield ("first-order", 1.5, 30.0, None, 0.0, "standard", 4.0, 20.0, 4.0, 0, 0.0, 0.0)
    yield (*first, "standard", 0.3, 60.0, 25.0, 0, 0.0, 0.0)  # |L| rises to 0.75: Ms and gain margin at infinity
    # |L| crosses 1 three times; in the last of these the least phase to spare is at the first crossing and the
    # least delay to spare at the third.
    yield ("first-order", 1.5, 30.0, None, 0.0, "standard", 0.5, 200.0, 100.0, 10, 1.0, 0.0)
    yield ("first-order", 1.5, 30.0, None, 1.0, "standard", 0.5, 300.0, 80.0, 5, 0.5, 0.0)
    yield ("first-order", 1.5, 30.0, None, 1.0, "standard", 0.3, 10.0, 100.0, 10, 0.5, 0.0)
    # Without integral action, and too weak to cross |L| = 1.
    yield (*first, "standard", 3.0, None, None, 0, 0.0, 0.0)
    yield (*first, "standard", 0.6, None, None, 0, 0.0, 0.0)
    yield (*second, "standard", 8.0, None, 2.0, 10, 0.2, 0.0)
    yield (*second, "series", 8.0, None, 2.0, 10, 0.2, 0.5)
    yield (*second, "parallel", 8.0, None, 16.0, 10, 0.2, 0.0)
    yield ("integrating", 0.05, None, None, 4.0, "standard", 3.0, None, None, 0, 1.0, 0.0)
    # Conditionally stable: two integrators and a long lag, stable only between two gains.
    yield ("integrating-lag", 0.05, 20.0, None, 1.0, "standard", 0.02, 10.0, 30.0, 10, 0.0, 0.0)
    yield ("integrating-lag", 0.05, 20.0, None, 1.0, "standard", 1.0, 20.0, 20.0, 10, 0.0, 0.0)
    yield ("integrating-lag", 0.05, 20.0, None, 1.0, "standard", 3.0, 20.0, 20.0, 10, 0.0, 0.0)
    yield ("integrating", 0.05, None, None, 4.0, "standard", 2.0, 3.0, None, 0, 0.0, 0.0)  # Ti too short
    # Close to the edge of stability, on both sides.
    for gain in (1.99 * np.pi / 2.0 / 2.0, 2.01 * np.pi / 2.0 / 2.0):
        yield ("first-order", 1.0, 10.0, None, 10.0, "standard", float(f"{gain:.6g}"), 10.0, None, 0, 0.0, 0.0)


def cell(value):
    if value is None or isinstance(value, str):
        return value or ""
    return repr(value if isinstance(value, int) else float(value))


def cross_check(loop, found):
    """The same margins from python-control, for loops without delay."""
    top, bottom = loop.numerator.coef[::-1], loop.denominator.coef[::-1]
    transfer = control.tf(top, np.concatenate([bottom, np.zeros(loop.poles_at_origin)]))
    poles = control.feedback(transfer, 1).poles()
    assert (np.max(poles.real) < 0.0) == (found is not None), (loop.inputs, poles)
    if found is None:
        return 0.0
    gm, pm, sm, wpc, wgc, wms = control.stability_margins(transfer)
    differences = [abs(1.0 / sm / found[0] - 1.0)] if np.isfinite(sm) and sm < 1 - 1e-9 else [abs(found[0] - 1.0)]
    # A disk margin of skew -1 is the reciprocal of the peak of |T|, on the frequencies it is given.
    grid = loop.grid()
    around = grid[np.argmax(np.abs(loop.rational(grid) / (1.0 + loop.rational(grid))))]
    fine = np.union1d(np.geomspace(grid[0], grid[-1], 2000), np.geomspace(around / 1.01, around * 1.01, 20001))
    differences.append(abs(1.0 / control.disk_margins(transfer, fine, skew=-1.0)[0] / found[1] - 1.0))
    rising, _, _, _, _, _ = control.stability_margins(transfer, returnall=True)
    rising = [g for g in np.atleast_1d(rising) if g > 1.0 and np.isfinite(g)]
    assert bool(rising) == (found[2] is not None), (loop.inputs, rising, found)
    if rising:
        differences.append(abs(min(rising) / found[2] - 1.0))
    if found[3] is not None and "lead_side_smaller" not in found[5]:
        differences.append(abs(abs(pm) / found[3] - 1.0))
    return max(differences)


def pade_check(loop, found):
    """Stability again, from the closed-loop poles with the delay replaced by a Pade approximation."""
    top, bottom = loop.numerator.coef[::-1], loop.denominator.coef[::-1]
    bottom = np.concatenate([bottom, np.zeros(loop.poles_at_origin)])
    # In units of the delay, so that the coefficients stay of moderate size.
    top = top / loop.delay ** np.arange(len(top) - 1, -1, -1)
    bottom = bottom / loop.delay ** np.arange(len(bottom) - 1, -1, -1)
    pade_top, pade_bottom = control.pade(1.0, 8)
    poles = np.roots(np.polyadd(np.polymul(bottom, pade_bottom), np.polymul(top, pade_top)))
    return (np.max(poles.real) < 0.0) == (found is not None)


def main():
    warnings.simplefilter("ignore", UserWarning)
    table, checked, worst, pade_rows, pade_misses = [], 0, 0.0, 0, 0
    tally = {}
    for row in rows():
        loop = Loop(*row)
        found = loop.margins()
        if not loop.delay and not loop.limit:
            checked += 1
            worst = max(worst, cross_check(loop, found))
        if loop.delay and not loop.limit:
            pade_rows += 1
            if not pade_check(loop, found):
                pade_misses += 1
                print("Pade disagrees on stability:", row, found)
        key = (row[0], "unstable" if found is None else "Ms<=1.8" if found[0] <= 1.8 else "Ms>1.8")
        tally[key] = tally.get(key, 0) + 1
        if found is None:
            note = "not_strictly_proper" if loop.limit else ""
            found = (None, None, None, None, None, note)
            stable = "false"
        else:
            stable = "true"
        table.append([cell(v) for v in (*row, stable, *found)])
    with open(HERE / "margins.csv", "w", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(COLUMNS)
        writer.writerows(table)
    assert checked >= 20 and worst < 1e-7 and pade_misses == 0
    print(len(table), "rows;", tally)
    print(f"python-control on {checked} rows without delay: largest relative difference {worst:.1e}")
    print(f"stability by closed-loop poles with a Pade delay of order 8: {pade_rows} rows, {pade_misses} differ")


if __name__ == "__main__":
    main()
