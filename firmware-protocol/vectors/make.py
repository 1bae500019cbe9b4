"""Writes the test vectors beside it, from SPEC.md alone and with nothing but Python's standard library.

It shares no line with the Rust crate or the C header; both are tested against what it writes.
Run it after a change of SPEC.md: python3 firmware-protocol/vectors/make.py [DIRECTORY]
"""

import pathlib
import struct
import sys

HERE = pathlib.Path(sys.argv[1] if len(sys.argv) > 1 else __file__).resolve()
HERE = HERE if HERE.is_dir() else HERE.parent


def crc32c(data):
    register = 0xFFFFFFFF
    for byte in data:
        register ^= byte
        for _ in range(8):
            register = (register >> 1) ^ (0x82F63B78 if register & 1 else 0)
    return register ^ 0xFFFFFFFF


def cobs(data):
    runs, run = [], bytearray()
    ended_full = False
    for byte in data:
        ended_full = False
        if byte == 0:
            runs.append(bytes([len(run) + 1]) + run)
            run = bytearray()
            continue
        run.append(byte)
        if len(run) == 254:
            runs.append(b"\xff" + run)
            run, ended_full = bytearray(), True
    if not ended_full:
        runs.append(bytes([len(run) + 1]) + run)
    return b"".join(runs)


def string(text):
    encoded = text.encode()
    return bytes([len(encoded)]) + encoded


def record(body):
    return struct.pack("<H", len(body)) + body


def channel(name, quantity, encoding, low, high, delay_s, bandwidth_hz, more=b""):
    return record(
        string(name) + string(quantity) + struct.pack("<Bddff", encoding, low, high, delay_s, bandwidth_hz) + more
    )


def stream(number, ticks_per_sample, channels, more=b""):
    return record(struct.pack("<BIB", number, ticks_per_sample, len(channels)) + b"".join(channels) + more)


def describe(device_id, name, firmware, tick_rate_hz, tolerance_ppm, streams, more=b""):
    head = struct.pack("<Q", device_id) + string(name) + string(firmware)
    return head + struct.pack("<dfB", tick_rate_hz, tolerance_ppm, len(streams)) + b"".join(streams) + more


def block(first_index, tick, sent_tick, overruns, n, sample_len, samples, more=b""):
    return struct.pack("<QQQIHH", first_index, tick, sent_tick, overruns, n, sample_len) + samples + more


def i24(value):
    return struct.pack("<i", value)[:3]


def frame_of(kind, payload, stream=0, sequence=0, boot_id=0, description_id=0, version=1):
    header = struct.pack("<BBBBIIH", version, kind, 0, stream, sequence, boot_id, description_id)
    return header + payload + struct.pack("<I", crc32c(header + payload))


def write(name, what, kind, payload, stream=0, sequence=0, boot_id=0, description_id=0, version=1):
    decoded = frame_of(kind, payload, stream, sequence, boot_id, description_id, version)
    frame = b"\0" + cobs(decoded) + b"\0"
    lines = [f"# {line}" for line in what]
    lines.append(f"# stream {stream}, sequence {sequence}, boot id {boot_id:#x}, description id {description_id}")
    lines += [f"decoded: {decoded.hex()}", f"frame: {frame.hex()}"]
    (HERE / f"{name}.txt").write_text("\n".join(lines) + "\n")


def write_wire(name, what, decoded, frame):
    """A file of which the wire is not just the stuffed sequence between two delimiters."""
    lines = [f"# {line}" for line in what]
    lines += [f"decoded: {one.hex()}" for one in decoded] + [f"frame: {frame.hex()}"]
    (HERE / f"{name}.txt").write_text("\n".join(lines) + "\n")


def odd_ones(boot, full):
    """Frames beside the usual: in succession, with a spare code, and those that must be refused."""
    edge = frame_of(3, struct.pack("<BBQ", 2, 1, 1_000_000), sequence=7, **boot)
    status = frame_of(4, struct.pack("<QffII", 123_456_789, 21.5, 5.125, 0x7FC00000, 12), sequence=8, **boot)
    between = {"two-frames": b"\0\0", "two-frames-one-delimiter": b"\0"}
    for name, delimiters in between.items():
        what = [f"The edge and the status, with {len(delimiters)} delimiter(s) between them: both are to be read."]
        write_wire(name, what, [edge, status], b"\0" + cobs(edge) + delimiters + cobs(status) + b"\0")
    what = ["As block-full-run-at-end, with one more code 01 at its end: the same block."]
    write_wire("block-with-spare-code", what, [full], b"\0" + cobs(full) + b"\1\0")
    damaged = edge[:-1] + bytes([edge[-1] ^ 1])
    write_wire("refused-checksum", ["The edge, one bit of its checksum damaged."], [damaged], b"\0" + cobs(damaged) + b"\0")
    stuffed = bytearray(cobs(edge))
    last = 0
    while last + stuffed[last] < len(stuffed):
        last += stuffed[last]
    stuffed[last] += 1
    what = ["The edge, its last code one too great: it reaches beyond the end."]
    write_wire("refused-stuffing", what, [], b"\0" + bytes(stuffed) + b"\0")
    cut = frame_of(3, struct.pack("<BBQ", 2, 1, 1_000_000)[:-1], sequence=7, **boot)
    write_wire("refused-cut-payload", ["An edge without the last byte of its tick."], [cut], b"\0" + cobs(cut) + b"\0")
    odd = frame_of(3, struct.pack("<BBQ", 2, 2, 1_000_000), sequence=7, **boot)
    write_wire("refused-direction", ["An edge with direction 2."], [odd], b"\0" + cobs(odd) + b"\0")
    cut = frame_of(0x84, struct.pack("<I", 0xDEADBEEF)[:-1], sequence=3)
    what = ["From the host: a time request without the last byte of its token."]
    write_wire("refused-cut-request", what, [cut], b"\0" + cobs(cut) + b"\0")


def main():
    assert crc32c(b"123456789") == 0xE3069283  # RFC 3720 B.4's polynomial; the catalogue's check value
    boot = {"boot_id": 0x5EED1234, "description_id": 3}
    tension = [
        channel("line", "force", 2, -8388608.0, 8388607.0, 0.00025, 3300.0),
        channel("anchor", "force", 2, -8388608.0, 8388607.0, 0.00025, 0.0),
    ]
    motion = [
        channel("encoder", "position", 3, -2147483648.0, 2147483647.0, 0.0, 0.0),
        channel("accel", "acceleration", 1, -32000.0, 32000.0, 0.0005, 1000.0),
        channel("bridge", "force", 4, -1.5, 1.5, 0.0, 0.0),
    ]
    streams = [stream(1, 100, tension), stream(2, 1000, motion)]
    identity = (0x0123456789ABCDEF, "winch-node", "tension 1.4.0", 1e6, 50.0)
    write(
        "describe",
        [
            "Device 0x0123456789abcdef, name winch-node, firmware `tension 1.4.0`, 1 MHz ticks within 50 ppm.",
            "Stream 1, 100 ticks a sample: line and anchor, force, i24, full range, delay 0.00025 s, bandwidth 3300 Hz",
            "and unknown. Stream 2, 1000 ticks a sample: encoder, position, i32, full range, no delay, unknown; accel,",
            "acceleration, i16, -32000 to 32000, 0.0005 s, 1000 Hz; bridge, force, f32, -1.5 to 1.5, no delay, unknown.",
        ],
        1, describe(*identity, streams), sequence=1, **boot,
    )
    later = channel("anchor", "force", 2, -8388608.0, 8388607.0, 0.00025, 0.0, b"new")
    write(
        "describe-with-fields-to-come",
        ["As describe, but stream 1 alone, with fields of a later version after channel, stream and payload:",
         "to be read as if they were not there."],
        1, describe(*identity, [stream(1, 100, [tension[0], later], b"\7\0")], b"later"), sequence=1, **boot,
    )
    samples = i24(-1) + i24(8388607) + i24(0) + i24(-8388608) + i24(256) + i24(65537)
    write(
        "block",
        ["First index 5000000000, its tick 500000000000, handed to the port at tick 500000000321, 7 overruns;",
         "3 samples of 2 channels, i24: (-1, 8388607), (0, -8388608), (256, 65537)."],
        2, block(5_000_000_000, 500_000_000_000, 500_000_000_321, 7, 3, 6, samples), stream=1, sequence=4294967295,
        **boot,
    )
    write(
        "block-with-fields-to-come",
        ["As block, followed by four bytes of a later version: to be read as if they were not there."],
        2, block(5_000_000_000, 500_000_000_000, 500_000_000_321, 7, 3, 6, samples, b"\1\2\3\4"), stream=1,
        sequence=4294967295, **boot,
    )
    write(
        "block-long-runs",
        ["First index 0, tick 1, sent at tick 2, no overruns; 200 samples of one i32 channel: 0x01010101 each, but",
         "sample 100 is 0. Runs of more than 254 bytes without a zero."],
        2, block(0, 1, 2, 0, 200, 4, b"\1" * 400 + b"\0" * 4 + b"\1" * 396), stream=2, sequence=0, **boot,
    )
    # 250 bytes of samples and four of checksum without a zero: the first sequence number that makes them so.
    samples = b"\1\0" + b"\1" * 250
    full = (block(0, 1, 2, 0, 63, 4, samples), {"stream": 2, **boot})
    sequence = next(n for n in range(100) if 0 not in frame_of(2, full[0], sequence=n, **full[1])[-4:])
    write(
        "block-full-run-at-end",
        ["First index 0, tick 1, sent at tick 2, no overruns; 63 samples of one i32 channel: 0x01010001, then",
         "0x01010101. The last run is 254 bytes long, checksum included: no code follows it, or one more code 01."],
        2, full[0], sequence=sequence, **full[1],
    )
    odd_ones(boot, frame_of(2, full[0], sequence=sequence, **full[1]))
    write("edge", ["Input 2 rises at tick 1000000."], 3, struct.pack("<BBQ", 2, 1, 1_000_000), sequence=7, **boot)
    write(
        "status",
        ["At tick 123456789: 21.5 degrees Celsius, supply 5.125 V, excitation not measured (the NaN 7fc00000),",
         "12 overruns."],
        4, struct.pack("<QffII", 123_456_789, 21.5, 5.125, 0x7FC00000, 12), sequence=8, **boot,
    )
    write(
        "time-reply", ["Token 0xdeadbeef, received at tick 1099511627776, sent at tick 1099511627800."],
        5, struct.pack("<IQQ", 0xDEADBEEF, 1 << 40, (1 << 40) + 24), sequence=9, **boot,
    )
    write("text", ["`excitation 4.98 V, 20 °C` in UTF-8."], 6, string("excitation 4.98 V, 20 °C"), sequence=10, **boot)
    write("unknown-kind", ["Kind 0x40, payload 00 01 02: to be skipped."], 0x40, b"\0\1\2", sequence=11, **boot)
    write("describe-request", ["From the host."], 0x81, b"")
    write("start", ["From the host."], 0x82, b"", sequence=1)
    write("stop", ["From the host."], 0x83, b"", sequence=2)
    write("time-request", ["From the host, token 0xdeadbeef."], 0x84, struct.pack("<I", 0xDEADBEEF), sequence=3)
    write(
        "time-request-with-fields-to-come", ["As time-request, followed by three bytes of a later version."],
        0x84, struct.pack("<I", 0xDEADBEEF) + b"\1\0\2", sequence=3,
    )
    write("other-version", ["A start of protocol version 2: to be refused, or ignored."], 0x82, b"", sequence=1, version=2)
    write("set-rate", ["From the host: stream 1, 50 ticks a sample."], 0x85, struct.pack("<BI", 1, 50), sequence=4)


main()
