"""A second computation that shares nothing with the engine: single shooting with SciPy's integrator.

Equations are written anew from examples/README.md. Van der Pol: x'' = mu (1 - x^2) x' - x.
Usage: witness.py FOLDER with levelling.results, wing.results and vanderpol.results in it.
"""

import csv
import pathlib
import sys

import numpy as np
from scipy.integrate import solve_ivp

FOLDER = pathlib.Path(sys.argv[1])
# DOP853 in double precision at this tolerance keeps some twelve digits of a period.
TOLERANCE = dict(method="DOP853", rtol=1e-13, atol=1e-14)


def events(name):
    with open(FOLDER / f"{name}.results" / "thresholds.csv", newline="") as file:
        return {row["event"]: row for row in csv.DictReader(file)}


def levelling(u, gain):
    h, v, c = u
    mass, d, k, a, b, lag = 25.0, 0.1215, 0.77, 1.525, 0.1875, 1.28
    rates = [v, -1000 / mass * (d * v + k * h + a * h**2 + b * h**3 + c), (gain * h - c) / lag]
    slope = -1000 / mass * (k + 2 * a * h + 3 * b * h**2)
    jacobian = [[0, 1, 0], [slope, -1000 / mass * d, -1000 / mass], [gain / lag, 0, -1 / lag]]
    return np.array(rates), np.array(jacobian)


def van_der_pol(u, mu):
    x, y = u
    return np.array([y, mu * (1 - x * x) * y - x]), np.array([[0, 1], [-2 * mu * x * y - 1, mu * (1 - x * x)]])


def once_round(field, u, period, p):
    """End point and matrix of the variational equation over one period."""
    n = len(u)

    def rates(_, z):
        f, j = field(z[:n], p)
        return np.concatenate([f, (j @ z[n:].reshape(n, n)).ravel()])

    end = solve_ivp(rates, (0, period), np.concatenate([u, np.eye(n).ravel()]), **TOLERANCE).y[:, -1]
    return end[:n], end[n:].reshape(n, n)


def cycle(field, u, period, p):
    """Newton for starting point and period, the correction normal to the flow. Returns also the matrix."""
    n = len(u)
    for _ in range(30):
        end, matrix = once_round(field, u, period, p)
        flow = field(u, p)[0]
        system = np.zeros((n + 1, n + 1))
        system[:n, :n], system[:n, n], system[n, :n] = matrix - np.eye(n), field(end, p)[0], flow
        step = np.linalg.solve(system, np.append(u - end, 0.0))
        u, period = u + step[:n], period + step[n]
        if np.abs(step).max() < 1e-12 * max(1.0, np.abs(u).max()):
            break
    return u, period, once_round(field, u, period, p)[1]


def settled(field, u, p, time, section, turns):
    """A point on the attractor and a guess of its period: upward crossings of zero by one state, one after another."""
    crossing = lambda _, z: z[section]
    crossing.direction = 1
    rates = lambda _, z: field(z, p)[0]
    run = solve_ivp(rates, (0, time), u, events=crossing, method="DOP853", rtol=1e-10, atol=1e-12)
    times = run.t_events[0]
    return run.y_events[0][-1 - turns], times[-1] - times[-1 - turns]


def doubling(guess, turns, start):
    """Secant on det(M + 1) = 0."""
    u, period = settled(levelling, [0.5, 0.0, 0.0], start, 400.0, 0, turns)
    values = []
    # From the settled start to the threshold in small steps, so that Newton stays on the branch.
    path = list(np.linspace(start, guess, 12)[:-1]) + [guess - 1e-3, guess - 5e-4]
    for p in path:
        u, period, matrix = cycle(levelling, u, period, p)
        values.append((p, np.linalg.det(matrix + np.eye(3))))
    for _ in range(12):
        (p0, d0), (p1, d1) = values[-2:]
        p2 = p1 - d1 * (p1 - p0) / (d1 - d0)
        u, period, matrix = cycle(levelling, u, period, p2)
        values.append((p2, np.linalg.det(matrix + np.eye(3))))
        if abs(p2 - p1) < 1e-12:
            break
    return values[-1][0], period


def compare(what, found, expected, tolerance):
    good = abs(found - expected) <= tolerance
    print(f"{'passed' if good else 'FAILED'}  {what}: armilla {found:.15g}, shooting {expected:.15g}, allowed {tolerance:.0e}")
    return good


def main():
    good = True
    table = events("vanderpol")
    for event, mu in (("a/start1", 1.0), ("a/target1", 2.0)):
        u, period = settled(van_der_pol, [2.0, 0.0], mu, 100.0, 1, 1)
        _, period, _ = cycle(van_der_pol, u, period, mu)
        good &= compare(f"van der Pol, mu = {mu}, period", float(table[event]["period"]), period, 1e-10)
    table = events("levelling")
    for event, turns, start in (("a/doubling1", 1, 8.8), ("a.doubling1/doubling1", 2, 10.4)):
        row = table[event]
        value, period = doubling(float(row["value"]), turns, start)
        good &= compare(f"levelling, {event}, gain", float(row["value"]), value, 1e-9)
        good &= compare(f"levelling, {event}, period", float(row["period"]), period, 1e-9)
    sys.exit(0 if good else 1)


main()
