"""How long the full-featured launch takes here: SciPy's solve_ivp (RK45, rtol 1e-8) for one, and a NumPy march with fixed
steps (RK4, 2 ms) over 1,000 parameter sets at once. Same equations as launch_full.py, written for speed: accelerations
solved in place, splines read from fine tables.

argv[1]: JSON with the launch's numbers. Prints JSON: seconds for each (best of several), and launch speeds.
"""

import json
import math
import sys
import time

import numpy as np
from scipy.integrate import solve_ivp
from scipy.interpolate import PchipInterpolator

d = json.loads(sys.argv[1])
G_ALONG = d["gravity"] * math.sin(d["incline"])
G_ACROSS = d["gravity"] * math.cos(d["incline"])
M = d["rail_mass"]


def table(points, low, high):
    x, y = zip(*points)
    grid = np.linspace(low, high, 2001)
    return grid, PchipInterpolator(x, y, extrapolate=True)(grid)


thrust, along_x = table(d["thrust"], 0, 40), table(d["along_x"], 0, 7)


class Cords:
    def __init__(self, c):
        self.ratio, self.length, self.zero = c["ratio"], c["free_length"], c["zero_mark"]
        self.factor = c["count"] * c["ratio"]
        self.mu = c["count"] * c["mass"] * c["ratio"] ** 2 / 3
        spline = PchipInterpolator(*zip(*c["unloading"]))
        held = self.ratio * (self.zero - d["start"]) / self.length
        grid = np.linspace(0, held, 2001)
        gap = c["held_gap"] * np.exp((grid - held) / c["width"])
        self.grid, self.tension = grid, spline(grid) + gap
        speed = np.sqrt((spline(grid, 1) + gap / c["width"]) * self.length / c["mass"])
        gained = np.concatenate(([0], np.cumsum(0.5 * (speed[1:] + speed[:-1]) * np.diff(grid))))
        self.by_speed = (gained[-1] - gained)[::-1], self.tension[::-1]
        self.until = 2 * self.length / speed[-1]

    def pull(self, t, x, v):
        if t < self.until:
            return self.factor * np.interp(self.ratio * v, *self.by_speed), 0.0
        e = self.ratio * (self.zero - x) / self.length
        return self.factor * np.interp(e, self.grid, self.tension, left=0.0), self.mu * (e > 0)


cords = [Cords(c) for c in d["cords"]]
m = d["shuttle"] + d["payload"]


def rates(t, y, friction=d["friction"], force=1.0):
    x, X, v, V = y
    air = v + V + d["wind"]
    dynamic = 0.5 * d["density"] * air * abs(air)
    pull, mu = 0.0, 0.0
    for c in cords:
        p, k = c.pull(t, x, v)
        pull, mu = pull + force * p, mu + k
    across = np.maximum(0.0, m * G_ACROSS - dynamic * d["lift_area"])
    loss = friction + d["load_coefficient"] * across + d["pull_coefficient"] * pull + d["viscous"] * abs(v)
    loss = loss + np.interp(x, *along_x)
    drag = dynamic * (d["payload_area"] + d["shuttle_area"])
    outside = np.interp(air, *thrust) - drag - m * G_ALONG
    q = pull - loss + outside
    Q = outside - d["rail_stiffness"] * X - d["rail_damping"] * V
    det = (m + mu) * (m + M) - m * m
    return v, V, (q * (m + M) - m * Q) / det, ((m + mu) * Q - m * q) / det


def contact(t, y):
    *_, a, A = rates(t, y)
    air = y[2] + y[3] + d["wind"]
    drag = 0.5 * d["density"] * air * abs(air) * d["payload_area"]
    return d["payload"] * (a + A + G_ALONG) + drag - np.interp(air, *thrust)


contact.terminal = True
start = np.array([d["start"], -m * G_ALONG / d["rail_stiffness"], 0.0, 0.0])


def best(f, n):
    times = []
    for _ in range(n):
        begin = time.perf_counter()
        result = f()
        times.append(time.perf_counter() - begin)
    return min(times), result


one_s, one = best(lambda: solve_ivp(rates, [0, 2], start, method="RK45", rtol=1e-8, atol=1e-10, events=contact), 7)

exact = solve_ivp(rates, [0, 2], start, method="DOP853", rtol=1e-12, atol=1e-13, events=contact, max_step=2e-3)

n = 1000
rng = np.random.default_rng(1)
friction = d["friction"] + rng.normal(0, 1, n)
force = 1 + rng.normal(0, 0.01, n)


def march():
    h, t = 2e-3, 0.0
    y = np.repeat(start[:, None], n, axis=1)
    f = lambda t, y: np.array(rates(t, y, friction, force))
    while t < one.t[-1]:
        k1 = f(t, y)
        k2 = f(t + h / 2, y + h / 2 * k1)
        k3 = f(t + h / 2, y + h / 2 * k2)
        k4 = f(t + h, y + h * k3)
        y = y + h / 6 * (k1 + 2 * k2 + 2 * k3 + k4)
        t += h
    return y


many_s, many = best(march, 5)
print(json.dumps({
    "solve_ivp_s": one_s, "evaluations": int(one.nfev), "march_s_per_launch": many_s / n,
    "speed": float(one.y[2, -1] + one.y[3, -1]), "exact_speed": float(exact.y[2, -1] + exact.y[3, -1]), "march_mean_speed": float(np.mean(many[2] + many[3])),
}))
