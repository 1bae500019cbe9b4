"""Rubber as a cord: force, stored energy and launch speed by quadrature.

argv[1]: JSON (mu, alpha of Ogden's law in MPa, area_m2, free_length_m, elongation, mass_kg, treloar: [[stretch, MPa]...]).
Nominal stress after R. W. Ogden, Proc. R. Soc. Lond. A 326 (1972) 565-584. Prints JSON.
"""

import json
import sys

import numpy as np
from scipy.integrate import quad
from scipy.interpolate import PchipInterpolator

d = json.loads(sys.argv[1])


def ogden_n(e):
    stretch = 1 + e
    stress = sum(m * (stretch ** (a - 1) - stretch ** (-a / 2 - 1)) for m, a in zip(d["mu"], d["alpha"]))
    return d["area_m2"] * 1e6 * stress


stretch, stress = zip(*d["treloar"])
treloar = PchipInterpolator(np.array(stretch) - 1, np.array(stress) * 1e6 * d["area_m2"])


def launch(force):
    energy = quad(force, 0, d["elongation"], epsabs=1e-10, epsrel=1e-12, limit=500)[0] * d["free_length_m"]
    return {"force_n": float(force(d["elongation"])), "energy_j": energy, "speed_mps": float(np.sqrt(2 * energy / d["mass_kg"]))}


places = np.linspace(0, d["elongation"], 13)
print(json.dumps({
    "ogden": launch(ogden_n), "ogden_curve": [float(ogden_n(e)) for e in places],
    "treloar": launch(treloar), "treloar_curve": [float(treloar(e)) for e in places],
}))
