"""Decodes a trial's range of a journal by its documented format (journal FORMAT.md, protocol SPEC) and compares every
count, block and clock-free number with the sealed trial file. Written without the Rust; h5py and numpy only.

usage: decode_journal.py JOURNAL_SEGMENT... TRIAL.h5
"""
import json, struct, sys
import h5py, numpy as np

TABLE = []
for n in range(256):
    for _ in range(8):
        n = (n >> 1) ^ (0x82F63B78 if n & 1 else 0)
    TABLE.append(n)


def crc32c(data):
    crc = 0xFFFFFFFF
    for byte in data:
        crc = (crc >> 8) ^ TABLE[(crc ^ byte) & 0xFF]
    return crc ^ 0xFFFFFFFF


def records(data):
    at = 0
    while at + 28 <= len(data):
        length, kind, _, device, seq, host_ns = struct.unpack_from("<IBBHQq", data, at)
        yield seq, host_ns, device, kind, data[at + 24 : at + 24 + length]
        at += 28 + length


def uncobs(stuffed):
    out, at = bytearray(), 0
    while at < len(stuffed):
        code = stuffed[at]
        out += stuffed[at + 1 : at + code]
        at += code
        if code < 255 and at < len(stuffed):
            out.append(0)
    return bytes(out)


def unpack(samples, kinds):
    sizes = {"i16": 2, "i24": 3, "i32": 4}
    rows = np.frombuffer(samples, "u1").reshape(-1, sum(sizes[k] for k in kinds)).astype("i8")
    out, at = [], 0
    for kind in kinds:
        size = sizes[kind]
        value = sum(rows[:, at + k] << (8 * k) for k in range(size))
        out.append(np.where(value >= 1 << (8 * size - 1), value - (1 << (8 * size)), value).astype("i4"))
        at += size
    return out


# The page's "Reading": segments in order of their number, each begins with its opening (kind 1, no number of its own); a
# number not above the last one taken is a repetition.
journal, openings = [], []
for path in sorted(sys.argv[1:-1]):
    for record in records(open(path, "rb").read()):
        if record[3] == 1:
            openings.append(json.loads(record[4]))
        elif not journal or record[0] > journal[-1][0]:
            journal.append(record)
trial = h5py.File(sys.argv[-1])
first, last = trial.attrs["first_seq"], trial.attrs["last_seq"]
names = [d["name"] for d in openings[0]["devices"]]
n_compared = 0
for index, name in enumerate(names):
    group = trial["raw"][name]
    channels = [(c, group[c].attrs["encoding"]) for c in group if isinstance(group[c], h5py.Dataset)]
    described = json.loads(group["descriptions/0000"].asstr()[()])["streams"][0]["channels"]
    kinds = [c["encoding"] for c in described]
    blocks, counts, stream = [], [[] for _ in kinds], b""
    for seq, host_ns, device, kind, payload in journal:
        if kind != 3 or device != index or seq > last:
            continue
        *frames, stream = (stream + payload).split(b"\0")
        for frame in frames:
            raw = uncobs(frame)
            if seq < first or len(raw) < 18 or raw[1] != 2:
                continue
            crc = struct.unpack("<I", raw[-4:])[0]
            if crc != crc32c(raw[:-4]):
                continue
            sequence, boot = struct.unpack_from("<II", raw, 4)
            first_index, tick, sent_tick, overruns, n, _ = struct.unpack_from("<QQQIHH", raw, 14)
            blocks.append((first_index, tick, sent_tick, host_ns, boot, sequence, n, overruns, crc, raw[3]))
            for place, values in enumerate(unpack(raw[46:-4], kinds)):
                counts[place].append(values)
    columns = ["first_index", "first_tick", "sent_tick", "host_time", "boot_id", "seq", "n", "overruns", "crc", "stream"]
    for place, column in enumerate(columns):
        expected = np.array([block[place] for block in blocks])
        assert np.array_equal(group["blocks"][column][:], expected), (name, column)
    for place, channel in enumerate(described):
        found = group[channel["name"]][:]
        assert np.array_equal(found, np.concatenate(counts[place])), (name, channel["name"])
        n_compared += len(found)
print(n_compared)
