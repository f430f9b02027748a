"""Responses of the continuous closed loop: every form of the controller, with derivative filter and PV filter.

Writes continuous/caseNN.csv (t_s, pv: deviation from rest, each second) and continuous.csv.

  u = C (r - F y) + load, y = P u; C as in margins.py, derivative on error; F = 1/(1 + Tf s)

Controller, filter and process are state spaces made from their transfer functions by scipy and stepped by matrix
exponentials over STEP_S, inputs held in between, dead time as delayed inputs. Each case is computed a second time with
half the step; they agree within 0.1 % of the step made, so what a sampled controller of as short a scan answers has to
agree with it within 0.5 %.
"""

import csv
from pathlib import Path

import numpy as np
from scipy.linalg import expm
from scipy.signal import tf2ss

HERE = Path(__file__).parent
STEP_S = 0.005
COLUMNS = (
    "file,kind,k,tau_s,tau2_s,theta_s,form,p,i,d,n,scan_s,pv_filter_s,set_point_percent,load_percent"
).split(",")


def controller(form, p, i, d, n):
    s = np.poly1d([1.0, 0.0])
    if form == "standard":
        lag = d / n * s + 1
        return p * ((i * s + 1) * lag + i * d * s * s), i * s * lag
    if form == "series":
        return p * (i * s + 1) * (d * s + 1), i * s * (d / n * s + 1)
    lag = d / (p * n) * s + 1
    return (p * s + i) * lag + d * s * s, s * lag


def process(kind, k, tau, tau2):
    s = np.poly1d([1.0, 0.0])
    one = np.poly1d([1.0])
    below = {
        "first-order": lambda: tau * s + 1,
        "second-order": lambda: (tau * s + 1) * (tau2 * s + 1),
        "integrating": lambda: s,
        "integrating-lag": lambda: s * (tau * s + 1),
    }[kind]()
    return k * one, below


class Stepped:
    """A transfer function stepped over a held input."""

    def __init__(self, transfer, step):
        top, bottom = (np.atleast_1d(part.coeffs) for part in transfer)
        a, b, self.c, self.d = tf2ss(top, bottom)
        size = a.shape[0]
        block = np.zeros((size + 1, size + 1))
        block[:size, :size], block[:size, size:] = a * step, b * step
        both = expm(block)
        self.a, self.b = both[:size, :size], both[:size, size]
        self.state = np.zeros(size)

    def output(self, value):
        return float((self.c @ self.state + self.d[:, 0] * value)[0])

    def advance(self, value):
        self.state = self.a @ self.state + self.b * value


def simulate(c, seconds, step):
    plant = Stepped(process(c["kind"], c["k"], c["tau_s"], c["tau2_s"]), step)
    control = Stepped(controller(c["form"], c["p"], c["i"], c["d"], c["n"]), step)
    one, s = np.poly1d([1.0]), np.poly1d([1.0, 0.0])
    lag = Stepped((one, c["pv_filter_s"] * s + 1), step) if c["pv_filter_s"] else None
    waiting = [0.0] * round(c["theta_s"] / step)
    each = round(1.0 / step)
    pv = []
    for k in range(seconds * each + 1):
        y = plant.output(0.0)
        if k % each == 0:
            pv.append(y)
        seen = lag.output(y) if lag else y
        error = c["set_point_percent"] - seen
        u = control.output(error) + c["load_percent"]
        control.advance(error)
        if lag:
            lag.advance(y)
        waiting.append(u)
        plant.advance(waiting.pop(0))
    return np.array(pv)


def cases():
    models = [
        ("first-order", 1.2, 30.0, None, 4.0),
        ("second-order", 1.0, 25.0, 9.0, 3.0),
        ("integrating", 0.04, None, None, 4.0),
        ("integrating-lag", 0.03, 8.0, None, 3.0),
    ]
    forms = [
        ("standard", 1.4, 30.0, 3.0, 8),
        ("series", 1.1, 26.0, 4.0, 10),
        ("parallel", 1.3, 0.035, 4.0, 8),
    ]
    for number, model in enumerate(models):
        for place, form in enumerate(forms):
            pv_filter = 1.5 if (number + place) % 2 else 0.0
            step = (5.0, 0.0) if (number + 2 * place) % 3 else (0.0, 5.0)
            yield dict(zip(COLUMNS[1:], (*model, *form, STEP_S, pv_filter, *step)))


def cell(value):
    return "" if value is None else value if isinstance(value, str) else repr(value)


def main():
    (HERE / "continuous").mkdir(exist_ok=True)
    table = []
    for number, c in enumerate(cases(), 1):
        pv = simulate(c, 200, STEP_S)
        finer = simulate(c, 200, STEP_S / 2)
        difference = np.max(np.abs(pv - finer)) / 5.0
        assert difference < 1e-3, difference
        assert np.max(np.abs(finer)) < 20.0
        name = f"case{number:02d}.csv"
        with open(HERE / "continuous" / name, "w", newline="") as file:
            writer = csv.writer(file, lineterminator="\n")
            writer.writerow(["t_s", "pv"])
            writer.writerows([t, repr(float(v))] for t, v in enumerate(finer))
        table.append([name, *(cell(c[key]) for key in COLUMNS[1:])])
        print(f"{name}  {c['kind']:16} {c['form']:9} off by {100 * difference:.4f} % with twice the step")
    with open(HERE / "continuous.csv", "w", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(COLUMNS)
        writer.writerows(table)


if __name__ == "__main__":
    main()
