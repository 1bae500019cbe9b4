"""Opens a trial with h5py, pandas and xarray, no code of Tautrail's, and plots tension and acceleration.

Usage: plot_trial.py trial-….h5 picture.png
Needs: h5py, pandas, xarray, matplotlib (tools/oracles/requirements.txt pins the versions that this was tried with).
"""

import sys

import h5py
import matplotlib

matplotlib.use("Agg")  # no display needed
import matplotlib.pyplot as plt
import pandas as pd
import xarray as xr


def signal(group):
    """A signal of the trial as a labelled array: values over time, with units and uncertainties as attributes."""
    value = group[group.attrs["signal"]]
    (axis,) = group.attrs["axes"]
    attributes = {name: group.attrs[name] for name in group.attrs if name not in ("signal", "axes", "NX_class")}
    return xr.DataArray(
        value[:], dims="time", coords={"time": ("time", group[axis][:], {"units": group[axis].attrs["units"]})},
        name=attributes["name"], attrs={**attributes, "units": value.attrs["units"]},
    )


def results(file):
    """All derived numbers as a table."""
    rows = [
        {"name": d.attrs["name"], "value": d[()], "u": d.attrs["standard_uncertainty"], "unit": d.attrs["units"]}
        for d in file["result"].values()
        if isinstance(d, h5py.Dataset) and "standard_uncertainty" in d.attrs
    ]
    return pd.DataFrame(rows).set_index("name")


with h5py.File(sys.argv[1]) as file:
    signals = [signal(group) for group in file["signals"].values() if isinstance(group, h5py.Group)]
    table = results(file)
    instants = pd.DataFrame({"time": file["result/instants/time"][:], "name": file["result/instants/name"].asstr()[:]})
    title = f"{file.attrs['rig']} {file.attrs['trial_id']}: {file['result'].attrs['outcome']}"

by_role = {s.attrs["role"]: s for s in signals if s.attrs["origin"] == "measured"}
tension = by_role["release_line_tension"]
acceleration = next(s for s in signals if s.attrs["origin"] == "derived" and s.attrs["units"] == "m/s^2")
release = instants.set_index("name").loc["release", "time"]

figure, (above, below) = plt.subplots(2, 1, figsize=(9, 6), layout="constrained")
tension.plot(ax=above)
acceleration.sel(time=slice(release - 0.05, release + 0.6)).plot(ax=below)
above.set_ylabel(f"tension / {tension.attrs['units']}")
below.set_ylabel(f"acceleration / {acceleration.attrs['units']}")
for axes in (above, below):
    axes.set_xlabel("time / s")
    axes.axvline(release, linestyle="--", color="black", linewidth=0.8)
above.set_title(title)
figure.savefig(sys.argv[2], dpi=100)

print(title)
print(f"{tension.name}: {tension.sizes['time']} samples, greatest {float(tension.max()):.1f} {tension.attrs['units']}")
print(f"{acceleration.name}: greatest {float(acceleration.max()):.1f} {acceleration.attrs['units']}")
print(table.loc[["launch_speed", "hold_tension"]].to_string())
