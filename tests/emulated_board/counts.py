"""Every count of the board's trial file, read by h5py, against the sequence that tools/firmware/README.md states.

Shares nothing with the firmware's C or Tautrail's Rust. Usage: counts.py TRIAL DEVICE
"""

import sys

import h5py
import numpy as np

TICKS_PER_MS, COURSE_MS = 25_000, 10_000
NAMES = {1: ("line", "anchor"), 2: ("encoder", "accel")}
TICKS_PER_SAMPLE = {1: 12_500, 2: 50_000}


def tension_mn(tick):
    ms = tick // TICKS_PER_MS % COURSE_MS
    return np.interp(ms, [0, 1500, 2500, 5000, 6000, COURSE_MS], [0, 0, 300e3, 300e3, 0, 0]).round().astype(np.int64)


def expected(name, tick, index):
    return {
        "line": lambda: 12_000 + 2 * tension_mn(tick) + index * 7 % 16,
        "anchor": lambda: -8_000 + 2 * tension_mn(tick) + index * 5 % 16,
        "encoder": lambda: 40_000 - tension_mn(tick) // 15,
        "accel": lambda: 109 + index * 3 % 4,
    }[name]()


def check(raw, blocks, channel):
    stream, layout = channel.attrs["stream"], channel.attrs["layout"]
    mine = (blocks["stream"] == stream) & (blocks["layout"] == layout)
    first, tick, n = blocks["first_index"][mine], blocks["first_tick"][mine], blocks["n"][mine]
    assert n.sum() == channel.shape[0], (n.sum(), channel.shape)
    assert np.array_equal(tick, first * TICKS_PER_SAMPLE[stream]), "ticks follow indices"
    within = np.arange(n.sum()) - np.repeat(np.cumsum(n) - n, n)
    index = np.repeat(first.astype(np.int64), n) + within
    found = channel[:].astype(np.int64)
    wanted = expected(channel.attrs["channel"], index * TICKS_PER_SAMPLE[stream], index)
    wrong = np.flatnonzero(found != wanted)
    assert wrong.size == 0, f"{channel.name}: {wrong.size} wrong, first {found[wrong[0]]} not {wanted[wrong[0]]}"
    return found.size


with h5py.File(sys.argv[1]) as file:
    raw = next(group for group in file["raw"].values() if group.attrs["device"] == sys.argv[2])
    blocks = {name: column[:] for name, column in raw["blocks"].items()}
    channels = [item for item in raw.values() if isinstance(item, h5py.Dataset)]
    assert {channel.attrs["channel"] for channel in channels} == {"line", "anchor", "encoder", "accel"}
    counts = {channel.name: check(raw, blocks, channel) for channel in channels}
    line = [channel for channel in channels if channel.attrs["channel"] == "line"]
    assert max(channel[:].max() for channel in line) > 600_000, "the hold is in the file"
    print("every count as the firmware makes it:", counts)
