"""Output-error fits of simulated open-loop step tests.

Writes fits/caseNN.csv (t_s, op, pv) and fits.csv (the truth and the least-squares fit of each case).

Model: pv(t) = bias + response of the process to (op - op[0]), the logged OP held from each sample to
the next and delayed by exactly theta. No drift term. Least squares over all samples.
Standard errors: s^2 (J'J)^-1 at the optimum, s^2 = rss / (n - parameters), the bias counted.
"""

import csv
from pathlib import Path

import numpy as np
from scipy.optimize import least_squares

HERE = Path(__file__).parent
PARAMETERS = {
    "first-order": ("gain", "tau_s", "theta_s", "bias"),
    "second-order": ("gain", "tau_s", "tau2_s", "theta_s", "bias"),
    "integrating": ("gain", "theta_s", "bias"),
    "integrating-lag": ("gain", "tau_s", "theta_s", "bias"),
}
NAMES = ("gain", "tau_s", "tau2_s", "theta_s", "bias")
STARTS = 20
COMPLEX_STEP = 1e-30


def step_response(kind, lags, elapsed):
    """Response of the unit-gain process to a unit step, `elapsed` seconds after step and dead time.

    Works for complex `elapsed` and lags too, so that derivatives can be taken by a complex step.
    """
    after = np.where(elapsed.real > 0.0, elapsed, 0.0)
    if kind == "first-order":
        return 1.0 - np.exp(-after / lags[0])
    if kind == "second-order":
        a, b = lags
        return 1.0 - (a * np.exp(-after / a) - b * np.exp(-after / b)) / (a - b)
    if kind == "integrating":
        return after
    return after - lags[0] * (1.0 - np.exp(-after / lags[0]))


def unit_response(kind, lags, theta, t, op):
    """Response of the unit-gain process to the held OP, as a deviation from its first value."""
    moved = np.flatnonzero(np.diff(op)) + 1
    total = np.zeros(len(t), dtype=np.result_type(type(theta), *[type(lag) for lag in lags], float))
    for j in moved:
        total = total + (op[j] - op[j - 1]) * step_response(kind, lags, (t - t[j]) - theta)
    return total


def predict(kind, p, t, op):
    gain, lags, theta, bias = p[0], p[1:-2], p[-2], p[-1]
    return bias + gain * unit_response(kind, tuple(lags), theta, t, op)


def jacobian(kind, p, t, op):
    columns = []
    for i in range(len(p)):
        shifted = np.asarray(p, dtype=complex)
        shifted[i] += 1j * COMPLEX_STEP
        columns.append(predict(kind, shifted, t, op).imag / COMPLEX_STEP)
    return np.array(columns).T


def descend(kind, start, bounds, t, op, pv):
    scale = np.maximum(np.abs(start), 1e-3)
    return least_squares(
        lambda p: predict(kind, p, t, op) - pv,
        start,
        jac=lambda p: jacobian(kind, p, t, op),
        bounds=bounds,
        x_scale=scale,
        xtol=1e-15,
        ftol=1e-15,
        gtol=1e-15,
        max_nfev=2000,
    )


def kinks(t, op):
    """Dead times at which a sample passes a delayed move: the sum of squares is smooth between them."""
    moved = np.flatnonzero(np.diff(op)) + 1
    delays = np.unique(np.concatenate([t - t[j] for j in moved]))
    return np.concatenate([[0.0], delays[delays > 0.0]])


def fit(kind, t, op, pv, seed):
    rng = np.random.default_rng(seed)
    length = t[-1] - t[0]
    free = len(PARAMETERS[kind])
    lower, upper = np.full(free, -np.inf), np.full(free, np.inf)
    lower[1:-1] = 1e-6 * length
    upper[1:-1] = 10.0 * length
    lower[-2], upper[-2] = 0.0, 0.5 * length

    found = []
    for _ in range(STARTS):
        lags = np.sort(np.exp(rng.uniform(np.log(0.005), np.log(0.5), free - 3)))[::-1] * length
        theta = rng.uniform(0.0, 0.2) * length
        basis = np.column_stack([unit_response(kind, tuple(lags), theta, t, op), np.ones(len(t))])
        gain, bias = np.linalg.lstsq(basis, pv)[0]
        start = np.array([gain, *lags, theta, bias])
        found.append(descend(kind, start, (lower, upper), t, op, pv))
    best = min(found, key=lambda result: result.cost)

    # The dead time makes corners where it passes a sample. Each smooth piece near the best is searched
    # by itself, so that the optimum is exact and does not depend on which piece a start fell into.
    edges = kinks(t, op)
    middle = np.searchsorted(edges, best.x[-2])
    candidates = [best]
    for i in range(max(0, middle - 6), min(len(edges) - 1, middle + 6)):
        low, high = lower.copy(), upper.copy()
        low[-2], high[-2] = edges[i], edges[i + 1]
        start = best.x.copy()
        start[-2] = np.clip(best.x[-2], *np.interp([0.05, 0.95], [0, 1], edges[i : i + 2]))
        candidates.append(descend(kind, start, (low, high), t, op, pv))
    best = min(candidates, key=lambda result: result.cost)

    p = best.x
    if kind == "second-order" and p[1] < p[2]:
        p = p[[0, 2, 1, 3, 4]]
    # Gauss-Newton to the last digit, within the smooth piece.
    for _ in range(8):
        step = np.linalg.lstsq(jacobian(kind, p, t, op), pv - predict(kind, p, t, op))[0]
        p = p + step
    residual = pv - predict(kind, p, t, op)
    rss = residual @ residual
    assert rss <= 2.0 * best.cost * (1 + 1e-12), (rss, 2 * best.cost)
    j = jacobian(kind, p, t, op)
    covariance = rss / (len(t) - free) * np.linalg.inv(j.T @ j)
    if p[-2] > 0.0:
        piece = edges[max(0, np.searchsorted(edges, p[-2]) - 1) :][:2]
        clearance = np.min(np.abs(p[-2] - piece)) / np.diff(piece)[0]
        assert clearance > 0.01, f"optimum in a corner ({clearance}), where no Jacobian exists: choose another seed"
    basins = sum(result.cost < best.cost * 1.01 for result in found)
    return p, rss, np.sqrt(np.diag(covariance)), np.linalg.norm(j.T @ residual), basins


def sample_times(sampling, interval, count, rng):
    if sampling == "regular":
        return np.arange(count) * interval
    if sampling == "jittered":
        jitter = rng.uniform(-0.3, 0.3, count)
        jitter[0] = 0.0
        return np.round((np.arange(count) + jitter) * interval, 3)
    raise AssertionError(sampling)


def noise(colour, sd, count, rng):
    if colour == "white":
        return sd * rng.standard_normal(count)
    series = np.empty(count)
    series[0] = sd * rng.standard_normal()
    for i in range(1, count):
        series[i] = 0.9 * series[i - 1] + sd * np.sqrt(1 - 0.81) * rng.standard_normal()
    return series


def simulate(case, rng):
    """A log whose OP moves fall on samples, so that the held logged OP is the real one."""
    kind, truth = case["kind"], case["truth"]
    irregular = case["sampling"] == "exception"
    # An exception-reporting historian looks often and stores seldom.
    interval = case["interval"] / 2.0 if irregular else case["interval"]
    count = 2 * case["count"] if irregular else case["count"]
    t = sample_times("regular" if irregular else case["sampling"], interval, count, rng)
    op = np.full(len(t), case["op"])
    for share, move in case["moves"]:
        op[int(share * len(t)) :] += move
    pv = predict(kind, np.array(truth), t, op) + noise(case["noise"], case["sd"], len(t), rng)
    if irregular:
        kept = [0]
        for i in range(1, len(t)):
            reported = abs(pv[i] - pv[kept[-1]]) > case["sd"]
            if reported or op[i] != op[i - 1] or t[i] - t[kept[-1]] > 4 * interval:
                kept.append(i)
        t, op, pv = t[kept], op[kept], pv[kept]
    return t, op, pv


def cases():
    # (truth: gain, lags, dead time, bias), sampling interval, samples, OP at rest, moves (share of the log, %)
    processes = {
        "first-order": [
            ((1.5, 40.0, 7.3, 52.0), 2.5, 200, 40.0, [(0.12, 4.0)]),
            ((-0.8, 25.0, 3.37, 61.0), 1.0, 320, 55.0, [(0.1, 5.0), (0.55, -8.0)]),
            ((2.2, 90.0, 41.7, 33.0), 6.0, 260, 30.0, [(0.1, 3.0), (0.4, -6.0), (0.7, 4.0)]),
        ],
        "second-order": [
            ((1.1, 60.0, 18.0, 9.1, 45.0), 3.0, 240, 50.0, [(0.1, 5.0), (0.5, -5.0)]),
            ((-2.4, 35.0, 12.0, 2.9, 70.0), 1.5, 300, 35.0, [(0.1, -4.0), (0.38, 7.0), (0.68, -3.0)]),
            ((0.6, 150.0, 40.0, 33.3, 48.0), 8.0, 260, 62.0, [(0.1, 8.0), (0.55, -6.0)]),
        ],
        "integrating": [
            ((0.012, 8.3, 50.0), 4.0, 120, 45.0, [(0.2, 3.0), (0.6, -6.0)]),
            ((-0.004, 21.7, 40.0), 5.0, 200, 50.0, [(0.15, 5.0), (0.45, -10.0), (0.75, 5.0)]),
            ((0.05, 1.43, 62.0), 0.5, 240, 38.0, [(0.25, 2.0)]),
        ],
        "integrating-lag": [
            ((0.01, 20.0, 6.7, 50.0), 3.0, 200, 45.0, [(0.15, 4.0), (0.5, -8.0)]),
            ((-0.02, 9.0, 3.13, 55.0), 1.0, 260, 60.0, [(0.1, 3.0), (0.4, -6.0), (0.7, 3.0)]),
            ((0.003, 70.0, 25.9, 35.0), 10.0, 180, 41.0, [(0.12, 7.0), (0.55, -9.0)]),
        ],
    }
    number = 0
    for kind, list_of_processes in processes.items():
        for place, sampling in enumerate(("regular", "jittered", "exception")):
            for colour in ("white", "ar1"):
                truth, interval, count, op, moves = list_of_processes[(place + (colour == "ar1")) % 3]
                number += 1
                yield {
                    "number": number,
                    "kind": kind,
                    "sampling": sampling,
                    "noise": colour,
                    "truth": truth,
                    "interval": interval,
                    "count": count,
                    "op": op,
                    "moves": moves,
                    "sd": 0.15 if colour == "white" else 0.08,
                }
    # The OP as operators move it: a pulse that comes back, and a key held until the move is made.
    pulse = [(0.15, 9.0), (0.22, -9.0), (0.6, -9.0), (0.67, 9.0)]
    ramp = [(0.12 + 0.012 * k, 0.75) for k in range(8)] + [(0.55 + 0.012 * k, -1.1) for k in range(8)]
    for place, (kind, list_of_processes) in enumerate(processes.items()):
        for shape, moves in (("pulse", pulse), ("ramp", ramp)):
            truth, interval, count, op, _ = list_of_processes[place % 3]
            number += 1
            yield {
                "number": number,
                "kind": kind,
                "sampling": ("regular", "jittered", "exception")[(place + (shape == "ramp")) % 3],
                "noise": "ar1" if shape == "ramp" else "white",
                "truth": truth,
                "interval": interval,
                "count": count,
                "op": op,
                "moves": moves,
                "sd": 0.1 if shape == "pulse" else 0.05,
            }


def cell(value):
    return "" if value is None else repr(float(value))


def by_name(kind, values, default=None):
    known = dict(zip(PARAMETERS[kind], values))
    return [known.get(name, default) for name in NAMES]


def main():
    (HERE / "fits").mkdir(exist_ok=True)
    rows = []
    for case in cases():
        kind = case["kind"]
        t, op, pv = simulate(case, np.random.default_rng(1000 + case["number"]))
        p, rss, errors, gradient, basins = fit(kind, t, op, pv, seed=case["number"])
        name = f"case{case['number']:02d}.csv"
        with open(HERE / "fits" / name, "w", newline="") as file:
            writer = csv.writer(file, lineterminator="\n")
            writer.writerow(["t_s", "op", "pv"])
            writer.writerows([cell(v) for v in row] for row in zip(t, op, pv))
        rows.append(
            [name, kind, case["sampling"], case["noise"], len(t)]
            + [cell(v) for v in by_name(kind, case["truth"])]
            + [cell(v) for v in by_name(kind, p)]
            + [cell(rss)]
            + [cell(v) for v in by_name(kind, errors)]
        )
        pull = (p - np.array(case["truth"])) / errors
        print(
            f"{name} {kind:16s} {case['sampling']:9s} {case['noise']:5s} n={len(t):3d} "
            f"fit {np.array2string(p, precision=5)} (fit - truth)/se {np.array2string(pull, precision=1)} "
            f"|J'r| {gradient:.1e}, {basins} of {STARTS} starts reached it"
        )
    header = ["file", "kind", "sampling", "noise", "samples"]
    header += [f"true_{name}" for name in NAMES] + list(NAMES) + ["rss"] + [f"se_{name}" for name in NAMES]
    with open(HERE / "fits.csv", "w", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(header)
        writer.writerows(rows)


if __name__ == "__main__":
    main()
