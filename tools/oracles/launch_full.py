"""A full-featured launch, derived apart from the program: Hamilton's equations in momenta, SciPy's DOP853 at rtol 1e-12.

T = m (x' + X')^2/2 + mu x'^2/2 + M X'^2/2, p = dT/dx', P = dT/dX'; dp/dt and dP/dt are the generalised forces. The simple
wave after release is used in its integrated form: the strain at the shuttle is a function of the speed at which the end has
come in, from d(strain)/d(speed) = -1/c(strain). Splines are SciPy's PchipInterpolator.

argv[1]: JSON with the launch's numbers. Prints JSON: events (name, t, x, v, ground v) and the kinematic peak.
"""

import json
import math
import sys

import numpy as np
from scipy.integrate import solve_ivp
from scipy.interpolate import PchipInterpolator
from scipy.optimize import minimize_scalar

RTOL, ATOL = 1e-12, 1e-13
d = json.loads(sys.argv[1])
G_ALONG = d["gravity"] * math.sin(d["incline"])
G_ACROSS = d["gravity"] * math.cos(d["incline"])


def spline(points):
    x, y = zip(*points)
    return PchipInterpolator(x, y, extrapolate=True)


class Cords:
    def __init__(self, c):
        self.__dict__.update(c)
        self.unloading, self.loading = spline(c["unloading"]), spline(c["loading"])
        self.slope = self.unloading.derivative()
        self.held = self.ratio * (self.zero_mark - d["start"]) / self.free_length
        self.gap = c["held_gap"]
        self.mu = self.count * self.mass * self.ratio**2 / 3

        def c_of(strain):
            slope = self.slope(strain) + self.gap / self.width * np.exp((strain - self.held) / self.width)
            return np.sqrt(slope * self.free_length / self.mass)

        self.transit = self.free_length / c_of(self.held)
        self.by_speed = solve_ivp(
            lambda w, e: -1 / c_of(e), [0, 25], [self.held], method="DOP853", rtol=1e-13, atol=1e-14, dense_output=True
        ).sol

    def tension(self, e):
        return self.unloading(e) + self.gap * np.exp((e - self.held) / self.width)

    def pull(self, x, v, phase):
        if phase == "slack":
            return 0.0
        e = self.by_speed(self.ratio * v)[0] if phase == "wave" else self.ratio * (self.zero_mark - x) / self.free_length
        return float(self.count * self.ratio * self.tension(e))


cords = [Cords(c) for c in d["cords"]]
thrust, along_x = spline(d["thrust"]), spline(d["along_x"])


class State:
    on = True
    braking = False
    phases = ["wave"] * len(cords)


def masses(s):
    m = d["shuttle"] + (d["payload"] if s.on else 0)
    mu = sum(c.mu for c, p in zip(cords, s.phases) if p == "even")
    return m, mu


def momenta(s, v, V):
    m, mu = masses(s)
    return m * (v + V) + mu * v, m * (v + V) + d["rail_mass"] * V


def speeds(s, p, P):
    m, mu = masses(s)
    matrix = np.array([[m + mu, m], [m, m + d["rail_mass"]]])
    return np.linalg.solve(matrix, [p, P])


def forces(s, x, X, v, V):
    m, _ = masses(s)
    air = v + V + d["wind"]
    dynamic = 0.5 * d["density"] * air * abs(air)
    pull = sum(c.pull(x, v, p) for c, p in zip(cords, s.phases))
    across = max(0.0, m * G_ACROSS - (dynamic * d["lift_area"] if s.on else 0))
    loss = d["friction"] + d["load_coefficient"] * across + d["pull_coefficient"] * pull
    loss += d["viscous"] * abs(v) + float(along_x(x))
    if s.braking:
        loss += d["brake"][0] + d["brake"][1] * max(0.0, x - d["brake_from"]) + d["brake"][2] * abs(v)
    drag_payload = dynamic * d["payload_area"] if s.on else 0.0
    push = float(thrust(air)) if s.on else 0.0
    outside = push - drag_payload - dynamic * d["shuttle_area"] - m * G_ALONG
    return pull - loss + outside, outside - d["rail_stiffness"] * X - d["rail_damping"] * V, drag_payload - push


def rates(s, t, y):
    x, X, p, P = y
    v, V = speeds(s, p, P)
    q, Q, _ = forces(s, x, X, v, V)
    return [v, V, q, Q]


def ground_acceleration(s, y):
    x, X, p, P = y
    v, V = speeds(s, p, P)
    q, Q, _ = forces(s, x, X, v, V)
    return float(sum(speeds(s, q, Q)))


def contact(s, y):
    x, X, p, P = y
    v, V = speeds(s, p, P)
    return d["payload"] * (ground_acceleration(s, y) + G_ALONG) + forces(s, x, X, v, V)[2]


def run():
    s, t = State(), 0.0
    y = np.array([d["start"], -(d["shuttle"] + d["payload"]) * G_ALONG / d["rail_stiffness"], 0.0, 0.0])
    events, peak = [], -math.inf
    while True:
        candidates = []
        for i, c in enumerate(cords):
            if s.phases[i] == "wave":
                candidates.append((("wave over", i), lambda t, y, c=c: t - 2 * c.transit))
            if s.phases[i] == "even":
                candidates.append((("slack", i), lambda t, y, c=c: y[0] - c.zero_mark))
        if s.on:
            candidates.append((("separation", 0), lambda t, y: contact(s, y)))
        if not s.braking:
            candidates.append((("brake", 0), lambda t, y: y[0] - d["brake_from"]))
        candidates.append((("rest", 0), lambda t, y: speeds(s, y[2], y[3])[0] if t > 1e-3 else 1.0))
        for _, f in candidates:
            f.terminal = True
        course = solve_ivp(
            lambda t, y: rates(s, t, y), [t, 10], y, method="DOP853", rtol=RTOL, atol=ATOL, dense_output=True,
            events=[f for _, f in candidates],
        )
        name = next(n for (n, _), found in zip(candidates, course.t_events) if len(found))
        if s.on:
            grid = np.linspace(t, course.t[-1], 400)
            values = [ground_acceleration(s, course.sol(q)) for q in grid]
            best = int(np.argmax(values))
            peak = max(peak, values[best])
            low, high = grid[max(0, best - 1)], grid[min(len(grid) - 1, best + 1)]
            found = minimize_scalar(
                lambda q: -ground_acceleration(s, course.sol(q)), bounds=(low, high), method="bounded",
                options={"xatol": 1e-12},
            )
            peak = max(peak, -found.fun)
        t, y = course.t[-1], course.y[:, -1]
        v, V = speeds(s, y[2], y[3])
        events.append([f"{name[0]} {name[1]}", t, y[0], v, v + V])
        if name[0] == "wave over":
            s.phases[name[1]] = "even"
        elif name[0] == "slack":
            s.phases[name[1]] = "slack"
        elif name[0] == "separation":
            s.on = False
        elif name[0] == "brake":
            s.braking = True
        else:
            break
        y[2], y[3] = momenta(s, v, V)
    print(json.dumps({"events": events, "peak": peak}))


State.phases = list(State.phases)
run()
