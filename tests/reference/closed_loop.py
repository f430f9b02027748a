"""Responses of the sampled controller in a closed loop, and their metrics.

Writes closed_loop/caseNN.csv (t_s, pv, op: deviations from rest, at the controller's executions) and
closed_loop.csv. Standard form. At execution k (t = k h, h the scan) the PV is read before the new OP acts:

  e_k = sp - pv_k
  P_k = Kc e_k, or -Kc pv_k (P on PV)
  D_k = (Tf D_(k-1) + Kc Td (x_k - x_(k-1))) / (Tf + h), x = e or -pv, Tf = Td/N (0 when N = 0), x_(-1) = 0
  I_k = I_(k-1) + Kc h e_k / Ti
  u_k = P_k + I_k + D_k, clamped to op_low..op_high (deviations from rest)

Anti-windup: where P_k + I_k + D_k lies beyond a clamp and the increment Kc h e_k / Ti points beyond it too,
I_k = I_(k-1) instead, and u_k is formed (and clamped) again with that.
u_k is held until execution k + 1. The process (dead time exact, any fraction of the scan) is at rest before
t = 0 and sees u + load; the set-point step is first seen by execution 0, the load step enters at t = 0.

Metrics, from the samples pv_0..pv_n at the executions (straight lines between them where interpolated):

  overshoot_percent      set point: 100 (max pv - sp)/sp, not below 0; blank for a load step
  rise_time_s            set point: first passage of 90 % less first passage of 10 % of sp, interpolated; blank for a
                         load step, and where 90 % is not reached
  settling_time_s        the time of the last sample outside +/- 2 % of the step (of sp; for a load step, of the load's
                         size), but not less than +/- 0.1 % of span; blank where that is the last sample
  iae                    integral of |sp - pv|, trapezoids, percent seconds
  peak_deviation_percent set point: max |pv - sp| after the first passage of sp (0 where it never passes);
                         load: max |pv|
  op_travel_percent      sum of |u_k - u_(k-1)|, k = 0..n, from the OP at rest

Cross-check: every case without a clamp again as one linear difference equation, built from the discretised process
(state space, matrix exponential, dead time as delayed inputs) and the controller in velocity form.
"""

import csv
from pathlib import Path

import numpy as np
from scipy.linalg import expm

HERE = Path(__file__).parent
COLUMNS = (
    "file,kind,k,tau_s,tau2_s,theta_s,kc,ti_s,td_s,n,p_on,d_on,scan_s,op_low,op_high,"
    "set_point_percent,load_percent,horizon_s,"
    "overshoot_percent,rise_time_s,settling_time_s,iae,peak_deviation_percent,op_travel_percent"
).split(",")
INPUTS = COLUMNS[1:18]


def step_response(kind, k, tau, tau2, after):
    """Exact response to a unit step, `after` seconds after step and dead time."""
    after = np.maximum(after, 0.0)
    if kind == "first-order":
        return -k * np.expm1(-after / tau)
    if kind == "second-order" and tau == tau2:
        return k * (-np.expm1(-after / tau) - after / tau * np.exp(-after / tau))
    if kind == "second-order":
        return k * (tau2 * np.expm1(-after / tau2) - tau * np.expm1(-after / tau)) / (tau - tau2)
    if kind == "integrating":
        return k * after
    return k * (after + tau * np.expm1(-after / tau))


def simulate(c):
    """Superposition of the step responses of every OP move and of the load."""
    h = c["scan_s"]
    count = int(round(c["horizon_s"] / h)) + 1
    t = np.arange(count) * h
    process = (c["kind"], c["k"], c["tau_s"], c["tau2_s"])
    pv = c["load_percent"] * step_response(*process, t - c["theta_s"])
    # Without dead time a move still shows only from the next execution on, as the response starts at zero.
    op = np.zeros(count)
    kc, ti, td = c["kc"], c["ti_s"], c["td_s"] or 0.0
    tf = td / c["n"] if c["n"] else 0.0
    integral = derivative = previous_x = previous_u = 0.0
    held = 0
    for i in range(count):
        error = c["set_point_percent"] - pv[i]
        proportional = kc * (error if c["p_on"] == "error" else -pv[i])
        x = error if c["d_on"] == "error" else -pv[i]
        derivative = (tf * derivative + kc * td * (x - previous_x)) / (tf + h)
        previous_x = x
        increment = kc * h / ti * error
        wanted = proportional + integral + increment + derivative
        beyond = (wanted > c["op_high"] and increment > 0.0) or (wanted < c["op_low"] and increment < 0.0)
        if beyond:
            held += 1
        else:
            integral += increment
        op[i] = np.clip(proportional + integral + derivative, c["op_low"], c["op_high"])
        pv[i:] += (op[i] - previous_u) * step_response(*process, t[i:] - t[i] - c["theta_s"])
        previous_u = op[i]
    return t, pv, op, held


def state_space(kind, k, tau, tau2):
    if kind == "first-order":
        return np.array([[-1 / tau]]), np.array([k / tau]), np.array([1.0])
    if kind == "second-order":
        return np.array([[-1 / tau, 0], [1 / tau2, -1 / tau2]]), np.array([k / tau, 0.0]), np.array([0.0, 1.0])
    if kind == "integrating":
        return np.array([[0.0]]), np.array([k]), np.array([1.0])
    return np.array([[-1 / tau, 0], [1.0, 0.0]]), np.array([k / tau, 0.0]), np.array([0.0, 1.0])


def held_input(a, b, length):
    """State transition and input effect of an input held for `length` seconds."""
    n = len(b)
    block = np.zeros((n + 1, n + 1))
    block[:n, :n], block[:n, n] = a * length, b * length
    e = expm(block)
    return e[:n, :n], e[:n, n]


def again_as_difference_equation(c):
    h, theta = c["scan_s"], c["theta_s"]
    a, b, out = state_space(c["kind"], c["k"], c["tau_s"], c["tau2_s"])
    whole = int(np.floor(theta / h + 1e-9))
    part = max(theta - whole * h, 0.0)
    phi, _ = held_input(a, b, h)
    _, late = held_input(a, b, h - part)  # the newer input acts for the rest of the scan
    phi_late, early = held_input(a, b, part)
    early = held_input(a, b, h - part)[0] @ early  # the older input acts first
    count = int(round(c["horizon_s"] / h)) + 1
    kc, ti, td = c["kc"], c["ti_s"], c["td_s"] or 0.0
    tf = td / c["n"] if c["n"] else 0.0
    r, load = c["set_point_percent"], c["load_percent"]
    state = np.zeros(len(b))
    u = np.zeros(count + whole + 2)  # u[j + whole + 1] is the OP of execution j
    past_p = past_x = past_x2 = past_move_d = 0.0
    pv = np.empty(count)
    for i in range(count):
        pv[i] = out @ state
        e = r - pv[i]
        p = e if c["p_on"] == "error" else -pv[i]
        x = e if c["d_on"] == "error" else -pv[i]
        # Velocity form; the derivative's own move obeys the differenced filter equation.
        move_d = (tf * past_move_d + kc * td * (x - 2 * past_x + past_x2)) / (tf + h)
        u[i + whole + 1] = u[i + whole] + kc * (p - past_p) + kc * h / ti * e + move_d
        past_p, past_x2, past_x, past_move_d = p, past_x, x, move_d
        newer = u[i + 1] + (load if i >= whole else 0.0)
        older = u[i] + (load if i - 1 >= whole else 0.0)
        state = phi @ state + late * newer + early * older
    return pv, u[whole + 1 : whole + 1 + count]


def metrics(c, t, pv, op):
    r, load = c["set_point_percent"], c["load_percent"]
    overshoot = rise = None
    if r:
        share = pv / r
        overshoot = max(0.0, 100.0 * (np.max(share) - 1.0))
        passages = [first_passage(t, share, level) for level in (0.1, 0.9)]
        rise = None if None in passages else passages[1] - passages[0]
        passed = np.flatnonzero(share >= 1.0)
        peak = np.max(np.abs(pv[passed[0] :] - r)) if len(passed) else 0.0
    else:
        peak = np.max(np.abs(pv))
    band = max(0.02 * abs(r if r else load), 0.1)
    outside = np.flatnonzero(np.abs(pv - r) > band)
    settling = 0.0 if not len(outside) else t[outside[-1]]
    if settling == t[-1]:
        settling = None
    iae = np.trapezoid(np.abs(r - pv), t)
    travel = np.sum(np.abs(np.diff(op, prepend=0.0)))
    # A threshold touched within rounding would make the metric a matter of luck.
    assert np.min(np.abs(np.abs(pv - r) - band)) > 1e-9
    return overshoot, rise, settling, iae, peak, travel


def first_passage(t, share, level):
    above = np.flatnonzero(share >= level)
    if not len(above):
        return None
    i = above[0]
    return t[i - 1] + (level - share[i - 1]) / (share[i] - share[i - 1]) * (t[i] - t[i - 1])


def cases():
    free = (-1000.0, 1000.0)
    # kind, k, tau, tau2, theta, kc, ti, td, n, p_on, d_on, scan, clamp, set point, load, horizon
    yield from [
        ("first-order", 1.0, 10.0, None, 2.0, 2.2, 10.0, None, 0, "error", "pv", 1.0, free, 5.0, 0.0, 80.0),
        ("first-order", 1.0, 10.0, None, 2.0, 2.2, 10.0, None, 0, "error", "pv", 1.0, free, 0.0, 5.0, 80.0),
        ("first-order", 2.0, 30.0, None, 7.3, 0.8, 25.0, None, 0, "pv", "pv", 2.0, free, 5.0, 0.0, 200.0),
        ("first-order", -0.5, 5.0, None, 20.0, -0.55, 11.5, None, 0, "error", "pv", 3.0, free, 5.0, 0.0, 300.0),
        ("first-order", 1.5, 40.0, None, 5.7, 1.2, 30.0, None, 0, "error", "pv", 2.5, (-3.0, 4.0), 5.0, 0.0, 250.0),
        ("first-order", 1.2, 30.0, None, 0.0, 6.0, 10.0, None, 0, "error", "pv", 1.0, free, 5.0, 0.0, 120.0),
        ("second-order", 1.0, 20.0, 8.0, 3.0, 2.6, 22.0, 5.0, 10, "error", "pv", 1.0, free, 5.0, 0.0, 160.0),
        ("second-order", 1.0, 20.0, 8.0, 3.0, 2.6, 22.0, 5.0, 10, "error", "pv", 1.0, free, 0.0, -5.0, 160.0),
        ("second-order", 1.0, 20.0, 8.0, 3.4, 2.0, 22.0, 5.0, 5, "error", "error", 0.8, free, 5.0, 0.0, 160.0),
        ("second-order", 0.8, 60.0, 60.0, 11.0, 2.5, 90.0, 20.0, 8, "pv", "pv", 4.0, free, 5.0, 0.0, 720.0),
        ("second-order", 1.0, 20.0, 8.0, 3.0, 1.6, 24.0, 4.0, 0, "error", "pv", 1.5, free, 5.0, 0.0, 150.0),
        ("integrating", 0.05, None, None, 4.0, 2.2, 32.0, None, 0, "error", "pv", 1.0, free, 5.0, 0.0, 200.0),
        ("integrating", 0.05, None, None, 4.3, 1.8, 32.0, None, 0, "pv", "pv", 1.0, free, 0.0, 5.0, 200.0),
        ("integrating", -0.0023, None, None, 30.0, -5.0, 400.0, 12.0, 10, "error", "pv", 5.0, free, 0.0, 10.0, 2000.0),
        ("integrating-lag", 0.05, 5.0, None, 2.7, 1.6, 45.0, 4.0, 10, "error", "pv", 0.5, free, 5.0, 0.0, 200.0),
        ("integrating-lag", 0.02, 10.0, None, 6.0, 2.0, 90.0, None, 0, "error", "pv", 2.0, free, 0.0, 5.0, 500.0),
        ("integrating-lag", 0.03, 8.0, None, 3.1, 4.0, 40.0, 6.0, 8, "error", "pv", 1.0, (-5.0, 6.0), 6.0, 0.0, 300.0),
        ("first-order", 1.0, 10.0, None, 2.0, 2.2, 10.0, None, 0, "error", "pv", 1.0, (-2.0, 2.0), 0.0, -5.0, 80.0),
    ]  # fmt: skip


def cell(value):
    if value is None or isinstance(value, str):
        return value or ""
    return repr(value if isinstance(value, int) else float(value))


def main():
    (HERE / "closed_loop").mkdir(exist_ok=True)
    table, worst = [], 0.0
    for number, values in enumerate(cases(), 1):
        *left, clamp, set_point, load, horizon = values
        c = dict(zip(INPUTS, (*left, *clamp, set_point, load, horizon)))
        t, pv, op, held = simulate(c)
        linear = abs(clamp[0]) == 1000.0
        if linear:
            assert held == 0 and np.max(np.abs(op)) < 1000.0
            other_pv, other_op = again_as_difference_equation(c)
            difference = max(np.max(np.abs(other_pv - pv)), np.max(np.abs(other_op - op)))
            worst = max(worst, difference)
        else:
            assert held > 0
        found = metrics(c, t, pv, op)
        name = f"case{number:02d}.csv"
        with open(HERE / "closed_loop" / name, "w", newline="") as file:
            writer = csv.writer(file, lineterminator="\n")
            writer.writerow(["t_s", "pv", "op"])
            writer.writerows([cell(v) for v in row] for row in zip(t, pv, op))
        table.append([name, *(cell(c[key]) for key in INPUTS), *(cell(v) for v in found)])
        shown = " ".join("-" if v is None else f"{v:.4g}" for v in found)
        print(f"{name} {c['kind']:16s} {shown}  integral held {held} times, last pv {pv[-1]:.4f}")
    with open(HERE / "closed_loop.csv", "w", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(COLUMNS)
        writer.writerows(table)
    print(f"largest difference from the difference equation: {worst:.1e} percent")


if __name__ == "__main__":
    main()
