"""The fits of identify.rs on the same data with numpy and scipy (tests/reference/requirements.txt), on one core.

The response and its derivatives are those of tests/reference/fits.py; each fit descends from several starts
with the tolerances that scipy comes with. What the program does beside (verdicts, intervals, the choice of
the kind, drift) is left out here.

    OMP_NUM_THREADS=1 python tests/bench/identify_scipy.py [tests]
"""

import os
import sys
import time
from pathlib import Path

os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).resolve().parent.parent / "reference"))

import numpy as np
from scipy.optimize import least_squares

from fits import PARAMETERS, jacobian, predict, unit_response

KINDS = ("first-order", "second-order", "integrating", "integrating-lag")
LAGS = {"first-order": 1, "second-order": 2, "integrating": 0, "integrating-lag": 1}
STARTS = 4


def noise(seed, kept, samples):
    """The generator of identify.rs."""
    state, value, series = seed, 0.0, np.empty(samples)
    new = (1.0 - kept * kept) ** 0.5
    for k in range(samples):
        total = 0.0
        for _ in range(4):
            state = (state * 1664525 + 1013904223) % 4294967296
            total += state / 4294967296.0
        value = kept * value + new * (total - 2.0) * 3.0**0.5
        series[k] = value
    return series


def log(kind, gain, lags, theta, moves, samples, seed):
    t = np.arange(samples, dtype=float)
    op = np.zeros(samples)
    for at, value in moves:
        op[at:] = value
    pv = 50.0 + gain * unit_response(kind, lags[: LAGS[kind]], theta, t, op) + 0.1 * noise(seed, 0.5, samples)
    return t, op, pv


def long_test(kind):
    gain = 0.002 if kind.startswith("integrating") else 1.3
    moves = [(12000 * (k + 1), (5.0, 0.0, -5.0, 0.0)[k % 4]) for k in range(7)]
    return log(kind, gain, (400.0, 120.0), 60.0, moves, 100_000, 1)


def typical_test(number):
    kind, part = KINDS[number % 4], number % 100 / 100.0
    gain = 0.002 + 0.002 * part if kind.startswith("integrating") else 0.5 + part
    lags = (60.0 + 60.0 * part, 20.0 + 20.0 * part)
    moves = [(600, 5.0), (1600, -5.0), (2600, 0.0)]
    return log(kind, gain, lags, 10.0 + 30.0 * part, moves, 3600, number)


def fit(kind, t, op, pv):
    length = t[-1] - t[0]
    free = len(PARAMETERS[kind])
    lower, upper = np.full(free, -np.inf), np.full(free, np.inf)
    lower[1:-1], upper[1:-1] = 1e-6 * length, 10.0 * length
    lower[-2], upper[-2] = 0.0, 0.5 * length
    best = None
    for share in np.geomspace(0.005, 0.2, STARTS):
        lags = tuple(share * length / (1 + k) for k in range(LAGS[kind]))
        theta = share * length / 3.0
        basis = np.column_stack([unit_response(kind, lags, theta, t, op), np.ones(len(t))])
        gain, bias = np.linalg.lstsq(basis, pv)[0]
        start = np.array([gain, *lags, theta, bias])
        found = least_squares(
            lambda p: predict(kind, p, t, op) - pv,
            start,
            jac=lambda p: jacobian(kind, p, t, op),
            bounds=(lower, upper),
            x_scale=np.maximum(np.abs(start), 1e-3),
        )
        if best is None or found.cost < best.cost:
            best = found
    return best


def main():
    for kind in KINDS:
        data = long_test(kind)
        begin = time.process_time()
        fit(kind, *data)
        print(f"100,000 samples, {kind}: {time.process_time() - begin:.2f} s")
    tests = int(sys.argv[1]) if len(sys.argv) > 1 else 4
    spent = 0.0
    for number in range(tests):
        t, op, pv = typical_test(number)
        begin = time.process_time()
        # Every kind over the whole test and over each step, from its quiet stretch to the next move.
        for first, last in ((0, 3600), (400, 1600), (1267, 2600), (2267, 3600)):
            for kind in KINDS:
                fit(kind, t[first:last], op[first:last], pv[first:last])
        spent += time.process_time() - begin
    print(f"{tests} typical tests: {spent:.2f} s; 2,000 of them at this rate: {2000 * spent / tests:.0f} s")


if __name__ == "__main__":
    main()
