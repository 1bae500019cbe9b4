"""Losses from speeds at places, fitted by SciPy alone: equations of motion in time by solve_ivp, scipy.optimize.least_squares.

The cords have no mass (waves and their share of the moving mass are checked by launch_full.py and launch_chain.py). Residuals:
(modelled − measured speed)/u at each place, then (value − prior)/u of each loss, then each trial's pull in its own u. The
difference step is stated: 1e-3 of each loss, a tenth of u of each pull; SciPy's default of 1.5e-8 is below the noise of
solve_ivp, whose interpolant does not know the knots of the cords' curve; short steps (`max_step`) keep that small.

argv[1]: JSON with trials and priors. Prints JSON: values, deviations, seconds of the fit (best of `rounds`).
"""

import json
import math
import sys
import time

import numpy as np
from scipy.integrate import solve_ivp
from scipy.interpolate import PchipInterpolator
from scipy.optimize import least_squares

d = json.loads(sys.argv[1])
RTOL, ATOL, STEP, OWN = d["rtol"], d["atol"], 1e-3, 100.0
TERMS = ["friction", "viscous", "shuttle_drag_area", "cord_lag"]
prior = np.array([d["prior"][name][0] for name in TERMS])
u_prior = np.array([d["prior"][name][1] for name in TERMS])
size = np.array([d["size"][name] for name in TERMS])


class Trial:
    def __init__(self, t):
        self.__dict__.update(t)
        self.e, self.f = map(np.array, zip(*t["curve"]))
        self.fresh = PchipInterpolator(self.e, self.f)
        self.held = (self.zero - self.start) / self.free_length
        self.places, self.v, self.u = np.array(t["places"]), np.array(t["measured"]), t["u"]

    def speeds(self, losses, pull):
        friction, viscous, area, lag = losses
        part = self.f / self.fresh(self.held)
        cord = PchipInterpolator(self.e, self.f * (1 - lag * (1 - part) / (part + 0.03)))
        # The same polynomial by hand: PchipInterpolator's own call costs a solver most of its time.
        c, knots = cord.c, cord.x.tolist()
        pieces = [tuple(c[:, i]) for i in range(c.shape[1])]
        factor = self.count * (1 + self.u_pull * pull)
        drag = 0.5 * self.density * (area + self.payload_area)
        weight = self.mass * self.gravity * math.sin(self.incline)
        from bisect import bisect_right

        def rates(t, y):
            x, v = y
            e = (self.zero - x) / self.free_length
            i = min(max(bisect_right(knots, e) - 1, 0), len(pieces) - 1)
            q = e - knots[i]
            a, b, g, h = pieces[i]
            tension = ((a * q + b) * q + g) * q + h if e > 0 else 0.0
            air = v + self.wind
            loss = friction + viscous * v + drag * air * abs(air) + weight
            return (v, (factor * tension - loss) / self.mass)

        def there(t, y):
            return y[0] - self.places[-1]

        there.terminal = True
        course = solve_ivp(
            rates, [0, 5], [self.start, 0.0], method="DOP853", rtol=RTOL, atol=ATOL, events=there, dense_output=True,
            max_step=d["max_step"],
        )
        grid = np.linspace(0, course.t[-1], 400)
        at = np.interp(self.places, course.sol(grid)[0], grid)
        for _ in range(4):
            x, v = course.sol(at)
            at = at - (x - self.places) / v
        return course.sol(at)[1]


trials = [Trial(t) for t in d["trials"]]
n_own = len(trials) if d["own_pull"] else 0


def residuals(q):
    losses, own = q[:4] * size, (OWN * (q[4:] - 1) if n_own else np.zeros(len(trials)))
    rows = [(t.speeds(losses, z) - t.v) / t.u / math.sqrt(d["inflation"]) for t, z in zip(trials, own)]
    return np.concatenate(rows + [(losses - prior) / u_prior] + ([own] if n_own else []))


start = np.concatenate([np.maximum(prior, 0.1 * size) / size, np.ones(n_own)])
times = []
for _ in range(d["rounds"]):
    begin = time.perf_counter()
    found = least_squares(residuals, start, method=d["method"], jac=d["jac"], diff_step=STEP, xtol=1e-12, ftol=1e-12, gtol=1e-12)
    times.append(time.perf_counter() - begin)
covariance = np.linalg.inv(found.jac.T @ found.jac)
print(json.dumps({
    "values": list(found.x[:4] * size), "deviations": list(np.sqrt(np.diag(covariance))[:4] * size),
    "own": list(OWN * (found.x[4:] - 1)), "seconds": min(times), "evaluations": int(found.nfev), "objective": 2 * found.cost,
}))
