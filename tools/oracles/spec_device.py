"""A device on a pty, written from firmware-protocol/SPEC.md alone: it shares nothing with the Rust crate or the C header.

INVENTED DATA. It measures a pull to 200 N, a hold and a let-down, once, from its start on: `line` and `anchor` (i24) at
1 kHz, `encoder` (f32) and `accel` (i32) at 100 Hz. Prints the path of its port, plays until its standard input is closed,
then prints what it sent, as JSON: {stream: [[sequence, first index, samples, checksum], …]}.
Usage: spec_device.py; needs nothing but Python's standard library.
"""

import json
import os
import select
import struct
import sys
import time
import tty

US = 1_000_000  # ticks are microseconds
DESCRIBE, BLOCK, EDGE, STATUS, TIME_REPLY, TEXT = range(1, 7)
DESCRIBE_REQUEST, START, STOP, TIME_REQUEST, SET_RATE = range(0x81, 0x86)
I16, I24, I32, F32 = range(1, 5)


# ---- section 2: frames ----


def crc32c(data):
    register = 0xFFFFFFFF
    for byte in data:
        register ^= byte
        for _ in range(8):
            register = (register >> 1) ^ (0x82F63B78 if register & 1 else 0)
    return register ^ 0xFFFFFFFF


def stuff(sequence):
    out, run, full = bytearray(), bytearray(), False
    for byte in sequence:
        full = False
        if byte == 0:
            out += bytes([len(run) + 1]) + run
            run = bytearray()
            continue
        run.append(byte)
        if len(run) == 254:
            out += b"\xff" + run
            run, full = bytearray(), True
    if not full:
        out += bytes([len(run) + 1]) + run
    return bytes(out)


def unstuff(stuffed):
    """The sequence, or None where a run ends behind the end."""
    out, at = bytearray(), 0
    while at < len(stuffed):
        code = stuffed[at]
        if at + code > len(stuffed):
            return None
        out += stuffed[at + 1 : at + code]
        at += code
        if code < 255 and at < len(stuffed):
            out.append(0)
    return bytes(out)


# ---- section 3: payloads ----


def string(text):
    encoded = text.encode()
    return bytes([len(encoded)]) + encoded


def record(body):
    return struct.pack("<H", len(body)) + body


def channel(name, quantity, encoding, low, high):
    return record(string(name) + string(quantity) + struct.pack("<Bddff", encoding, low, high, 0.0, 0.0))


def pack(encoding, value):
    if encoding == F32:
        return struct.pack("<f", value)
    width = {I16: 2, I24: 3, I32: 4}[encoding]
    return value.to_bytes(width, "little", signed=True)


def tension_n(s):
    """Slack for 0.5 s, up to 200 N in 0.5 s, held for 1.5 s, down in 0.5 s."""
    for begin, end, low, high in [(0.5, 1.0, 0, 200), (1.0, 2.5, 200, 200), (2.5, 3.0, 200, 0)]:
        if begin <= s < end:
            return low + (high - low) * (s - begin) / (end - begin)
    return 0.0


class Stream:
    def __init__(self, number, ticks_per_sample, per_block, channels):
        self.number, self.ticks_per_sample, self.per_block, self.channels = number, ticks_per_sample, per_block, channels
        self.sequence, self.next_index, self.sent = 0, 0, []

    def description(self):
        channels = [channel(name, quantity, encoding, *limits) for name, quantity, encoding, limits, _ in self.channels]
        head = struct.pack("<BIB", self.number, self.ticks_per_sample, len(channels))
        return record(head + b"".join(channels))

    def sample(self, index, s):
        return b"".join(pack(encoding, value(index, s)) for _, _, encoding, _, value in self.channels)


# ---- section 4: what a device does ----


class Device:
    def __init__(self, port):
        self.port, self.booted_ns = port, time.monotonic_ns()
        self.boot_id, self.description_id, self.sequence = int.from_bytes(os.urandom(4), "little"), 1, 0
        self.started_tick, self.next_second = None, 0
        self.heard, self.waiting = b"", b""
        i24, i32 = (-(1 << 23), (1 << 23) - 1), (-(1 << 31), (1 << 31) - 1)
        force = lambda zero: lambda index, s: zero + int(2000 * tension_n(s)) + index % 8
        self.streams = [
            Stream(1, 1000, 10, [
                ("line", "force", I24, i24, force(12_000)), ("anchor", "force", I24, i24, force(-8_000)),
            ]),
            Stream(2, 10_000, 1, [
                ("encoder", "position", F32, (-1e9, 1e9), lambda index, s: 40_000 - 50 * tension_n(s)),
                ("accel", "acceleration", I32, i32, lambda index, s: 109 + index % 2),
            ]),
        ]
        self.describe()

    def tick(self):
        return (time.monotonic_ns() - self.booted_ns) // 1000

    def send(self, kind, payload, stream=0, sequence=0):
        header = struct.pack(
            "<BBBBIIH", 1, kind, 0, stream, sequence & 0xFFFFFFFF, self.boot_id, self.description_id
        )
        checksum = crc32c(header + payload)
        self.waiting += b"\0" + stuff(header + payload + struct.pack("<I", checksum)) + b"\0"
        self.flush()
        return checksum

    def flush(self):
        try:
            self.waiting = self.waiting[os.write(self.port, self.waiting) :]
        except BlockingIOError:
            pass

    def control(self, kind, payload):
        self.send(kind, payload, sequence=self.sequence)
        self.sequence += 1

    def describe(self):
        head = struct.pack("<Q", 0x5BEC) + string("spec-node") + string("spec_device.py (invented data)")
        streams = b"".join(stream.description() for stream in self.streams)
        self.control(DESCRIBE, head + struct.pack("<dfB", US, 200.0, len(self.streams)) + streams)

    def hear(self, data):
        received = self.tick()
        *frames, self.heard = (self.heard + data).split(b"\0")
        for stuffed in frames:
            frame = unstuff(stuffed)
            if frame is None or len(frame) < 18 or frame[0] != 1:
                continue
            if crc32c(frame[:-4]) == struct.unpack("<I", frame[-4:])[0]:
                self.answer(frame[1], frame[14:-4], received)

    def answer(self, kind, payload, received):
        if kind in (DESCRIBE_REQUEST, SET_RATE):
            self.describe()  # it follows no other rate: the old description says so
        elif kind == TIME_REQUEST and len(payload) >= 4:
            self.control(TIME_REPLY, payload[:4] + struct.pack("<QQ", received, self.tick()))
        elif kind == START and self.started_tick is None:
            self.started_tick = self.next_second = self.tick()
            for stream in self.streams:
                stream.next_index = self.started_tick // stream.ticks_per_sample + 1
        elif kind == STOP:
            self.started_tick = None

    def play(self):
        if self.started_tick is None:
            return
        if self.tick() >= self.next_second:
            self.next_second += US
            self.describe()
            nan = float("nan")
            self.control(STATUS, struct.pack("<QfffI", self.tick(), 20.0, nan, nan, 0))
        for stream in self.streams:
            while (stream.next_index + stream.per_block - 1) * stream.ticks_per_sample <= self.tick():
                self.send_block(stream)

    def send_block(self, stream):
        first = stream.next_index
        ticks = [index * stream.ticks_per_sample for index in range(first, first + stream.per_block)]
        samples = [
            stream.sample(first + at, (tick - self.started_tick) / US) for at, tick in enumerate(ticks)
        ]
        payload = struct.pack("<QQQIHH", first, ticks[0], self.tick(), 0, len(samples), len(samples[0]))
        checksum = self.send(BLOCK, payload + b"".join(samples), stream.number, stream.sequence)
        stream.sent.append([stream.sequence, first, len(samples), checksum])
        stream.sequence += 1
        stream.next_index += stream.per_block


def main():
    port, far_end = os.openpty()
    tty.setraw(far_end)
    os.set_blocking(port, False)
    print(os.ttyname(far_end), flush=True)
    device = Device(port)
    while True:
        readable, _, _ = select.select([port, sys.stdin], [], [], 0.002)
        if sys.stdin in readable:
            break
        if port in readable:
            device.hear(os.read(port, 4096))
        device.flush()
        device.play()
    print(json.dumps({stream.number: stream.sent for stream in device.streams}))


main()
