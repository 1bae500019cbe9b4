"""A mass behind a gas cylinder that a vessel feeds through a valve, by SciPy's Radau (implicit, order 5).

Derived apart from the program: masses of gas in both volumes and the cylinder's internal energy are integrated (first law of
an open system with the polytropic exponent n in place of the ratio of specific heats: dU = h dm - p dV, U = p V/(n - 1), h = n/(n - 1) R T).

argv[1]: JSON. Prints JSON: time and speed at the end of the piston's stroke.
"""

import json
import sys

import numpy as np
from scipy.integrate import solve_ivp

d = json.loads(sys.argv[1])
R, KAPPA, LAMINAR = 287.05287, 1.4, 0.98
n, p0, T0, V = d["exponent"], d["charged"], d["temperature"], d["vessel"]
m0 = p0 * V / (R * T0)


def flow(area, p1, T1, p2):
    r = max(p2 / p1, (2 / (KAPPA + 1)) ** (KAPPA / (KAPPA - 1)))
    bent = min(r, LAMINAR)
    psi = np.sqrt(2 * KAPPA / (KAPPA - 1) * (bent ** (2 / KAPPA) - bent ** ((KAPPA + 1) / KAPPA)))
    return area * p1 / np.sqrt(R * T1) * psi * ((1 - r) / (1 - LAMINAR) if r > LAMINAR else 1)


def rates(t, y):
    x, v, lost, energy = y
    m = m0 - lost
    p1, T1 = p0 * (m / m0) ** n, T0 * (m / m0) ** (n - 1)
    volume = d["dead"] + d["piston"] * x
    p2 = (n - 1) * energy / volume
    valve = d["valve"] * (min(1, t / d["opening"]) if d["opening"] > 0 else 1)
    area = 1 / np.sqrt(1 / valve**2 + 1 / d["line"] ** 2) if valve > 0 else 0
    out, T = (flow(area, p1, T1, p2), T1) if p1 >= p2 else (-flow(area, p2, T0, p1), T0)
    force = d["piston"] * (p2 - d["ambient"])
    return [v, force / d["mass"], out, n / (n - 1) * R * T * out - p2 * d["piston"] * v]


end = lambda t, y: y[0] - d["stroke"]
end.terminal = True
start = [0, 0, 0, d["ambient"] * d["dead"] / (n - 1)]
first = solve_ivp(rates, [0, d["opening"]], start, method="Radau", rtol=1e-10, atol=1e-12, events=end)
assert first.status == 0, "the piston reaches its end before the valve is open"
rest = solve_ivp(rates, [d["opening"], 5], first.y[:, -1], method="Radau", rtol=1e-10, atol=1e-12, events=end)
print(json.dumps({"time": rest.t[-1], "speed": rest.y[1, -1]}))
