"""Cords as a chain of masses: what a released heavy cord really does at the shuttle, by Newton's law for every mass.

argv[1]: JSON (curve of one cord, count, free_length, mass, stretch, carried, resistance, segments).
Prints JSON: release acceleration, greatest speed of the carried mass, time and place of it, and the tension of all cords at
their anchor at even times until then.
"""

import json
import sys

import numpy as np
from scipy.integrate import solve_ivp
from scipy.interpolate import PchipInterpolator

d = json.loads(sys.argv[1])
n = d["segments"]
strain, tension = zip(*d["curve"])
spline = PchipInterpolator(strain, tension)
free = np.full(n + 1, d["free_length"] / n)
free[0] = free[-1] = d["free_length"] / n / 2
mass = d["mass"] / n


def pull(e):
    return np.where(e > 0, spline(np.clip(e, 0, strain[-1])), 0.0)


def accelerations(y):
    places = np.concatenate(([0.0], y[:n], [d["free_length"] + d["stretch"] - y[2 * n]]))
    t = pull(np.diff(places) / free - 1)
    return np.diff(t) / mass, (d["count"] * t[-1] - d["resistance"]) / d["carried"], d["count"] * t[0]


def rates(t, y):
    inner, tip, _ = accelerations(y)
    return np.concatenate((y[n : 2 * n], inner, [y[2 * n + 1], tip]))


held = d["stretch"] / d["free_length"]
start = np.concatenate((np.cumsum(free[:-1]) * (1 + held), np.zeros(n), [0.0, 0.0]))
done = lambda t, y: accelerations(y)[1]
done.terminal, done.direction = True, -1
course = solve_ivp(rates, [0, 5], start, method="DOP853", rtol=1e-8, atol=1e-10, events=done, dense_output=True)
times = np.linspace(0, course.t[-1], 101)
print(json.dumps({
    "acceleration": float(accelerations(start)[1]),
    "speed": float(course.y[2 * n + 1].max()),
    "time": float(course.t[-1]),
    "x": float(course.y[2 * n, -1]),
    "anchor": [[float(t), float(accelerations(course.sol(t))[2])] for t in times],
}))
