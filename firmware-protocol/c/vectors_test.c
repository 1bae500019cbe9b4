/*
 * Builds every message of vectors/ with the header, compares byte by byte, and reads the host's requests back.
 * Usage: vectors_test DIRECTORY. The program is a test on a host; the header itself needs none of this.
 */
#include <stdio.h>
#include <stdlib.h>

#include "tautrail_protocol.h"

static int n_failed = 0;
static const char *directory;

static void fail(const char *name, const char *what) {
    fprintf(stderr, "%s: %s\n", name, what);
    n_failed++;
}

/* The bytes of the `frame:` line of a vector. */
static size_t load(const char *name, uint8_t *bytes, size_t room) {
    static char line[8192];
    char path[1024];
    size_t n = 0;
    FILE *file;
    snprintf(path, sizeof path, "%s/%s.txt", directory, name);
    file = fopen(path, "r");
    if (file == NULL) {
        fail(name, "no such vector");
        return 0;
    }
    while (fgets(line, sizeof line, file) != NULL) {
        if (strncmp(line, "frame: ", 7) == 0) {
            const char *hex = line + 7;
            unsigned value;
            while (n < room && sscanf(hex, "%2x", &value) == 1) {
                bytes[n++] = (uint8_t)value;
                hex += 2;
            }
        }
    }
    fclose(file);
    if (n == 0) {
        fail(name, "no frame in the vector");
    }
    return n;
}

static void check_written(const char *name, const uint8_t *frame, size_t len) {
    uint8_t expected[TT_MAX_FRAME];
    size_t n = load(name, expected, sizeof expected);
    if (len != n || memcmp(frame, expected, n) != 0) {
        fail(name, "differs from the vector");
    }
}

static tt_header header(uint8_t stream, uint32_t sequence) {
    tt_header header = {0, 0, 0x5EED1234u, 3};
    header.stream = stream;
    header.sequence = sequence;
    return header;
}

static void check_describe(void) {
    static const tt_channel tension[2] = {
        {"line", "force", TT_I24, -8388608.0, 8388607.0, 0.00025f, 3300.0f},
        {"anchor", "force", TT_I24, -8388608.0, 8388607.0, 0.00025f, 0.0f},
    };
    static const tt_channel motion[3] = {
        {"encoder", "position", TT_I32, -2147483648.0, 2147483647.0, 0.0f, 0.0f},
        {"accel", "acceleration", TT_I16, -32000.0, 32000.0, 0.0005f, 1000.0f},
        {"bridge", "force", TT_F32, -1.5, 1.5, 0.0f, 0.0f},
    };
    static const tt_stream streams[2] = {{1, 100, tension, 2}, {2, 1000, motion, 3}};
    static const tt_describe describe = {
        0x0123456789ABCDEFu, "winch-node", "tension 1.4.0", 1e6, 50.0f, streams, 2};
    uint8_t out[TT_MAX_FRAME];
    tt_header h = header(0, 1);
    check_written("describe", out, tt_encode_describe(out, sizeof out, &h, &describe));
}

static void check_blocks(void) {
    uint8_t samples[800], out[TT_MAX_FRAME], *to = samples;
    tt_block block = {5000000000u, 500000000000u, 500000000321u, 7, 3, 6, samples};
    tt_block long_runs = {0, 1, 2, 0, 200, 4, samples};
    tt_header h = header(1, 4294967295u);
    size_t i, len;
    to = tt_pack_i24(to, -1);
    to = tt_pack_i24(to, 8388607);
    to = tt_pack_i24(to, 0);
    to = tt_pack_i24(to, -8388608);
    to = tt_pack_i24(to, 256);
    to = tt_pack_i24(to, 65537);
    len = tt_encode_block(out, sizeof out, &h, &block);
    check_written("block", out, len);
    if (tt_encode_block(out, len - 1u, &h, &block) != 0u) {
        fail("block", "written into a buffer that is too small");
    }
    to = samples;
    for (i = 0; i < 200; i++) {
        to = tt_pack_i32(to, i == 100 ? 0 : 0x01010101);
    }
    h = header(2, 0);
    check_written("block-long-runs", out, tt_encode_block(out, sizeof out, &h, &long_runs));
    memset(samples, 1, sizeof samples);
    samples[1] = 0;
    long_runs.n_samples = 63;
    h = header(2, 0);
    check_written("block-full-run-at-end", out, tt_encode_block(out, sizeof out, &h, &long_runs));
    long_runs.n_samples = 600;
    if (tt_encode_block(out, sizeof out, &h, &long_runs) != 0u) {
        fail("block", "written although it is longer than the protocol allows");
    }
}

static void check_others(void) {
    uint8_t out[TT_MAX_FRAME];
    tt_edge edge = {2, true, 1000000};
    tt_status status = {123456789, 21.5f, 5.125f, 0.0f, 12};
    tt_time_reply reply = {0xDEADBEEFu, 1099511627776u, 1099511627800u};
    const uint32_t not_measured = 0x7FC00000u;
    tt_header h = header(0, 7);
    memcpy(&status.excitation_v, &not_measured, sizeof not_measured);
    check_written("edge", out, tt_encode_edge(out, sizeof out, &h, &edge));
    h = header(0, 8);
    check_written("status", out, tt_encode_status(out, sizeof out, &h, &status));
    h = header(0, 9);
    check_written("time-reply", out, tt_encode_time_reply(out, sizeof out, &h, &reply));
    h = header(0, 10);
    check_written("text", out, tt_encode_text(out, sizeof out, &h, "excitation 4.98 V, 20 \xC2\xB0" "C"));
}

/* How many requests come out of the bytes; the last one is left in `request`. */
static int receive(const uint8_t *bytes, size_t len, tt_request *request) {
    tt_receiver receiver = {0};
    int n = 0;
    size_t i;
    for (i = 0; i < len; i++) {
        n += tt_receive(&receiver, bytes[i], request) ? 1 : 0;
    }
    return n;
}

static void check_read(const char *name, uint8_t kind, uint32_t token, uint8_t stream, uint32_t ticks_per_sample) {
    uint8_t bytes[2 * TT_MAX_FRAME];
    tt_request request;
    size_t len = load(name, bytes, TT_MAX_FRAME), i;
    int bit;
    if (receive(bytes, len, &request) != 1 || request.kind != kind || request.token != token ||
        request.stream != stream || request.ticks_per_sample != ticks_per_sample) {
        fail(name, "is not read as what it says");
    }
    memcpy(bytes + len, bytes, len);
    for (i = 1; i < len - 1u; i++) {
        for (bit = 0; bit < 8; bit++) {
            bytes[i] ^= (uint8_t)(1u << bit);
            if (receive(bytes, 2u * len, &request) != 1) {
                fail(name, "damaged: accepted, or the next frame lost");
            }
            bytes[i] ^= (uint8_t)(1u << bit);
        }
    }
}

/* A device's own frames, long ones among them, are no requests; the one after them is read. */
static void check_ignored(void) {
    static const char *const names[] = {"describe", "block", "block-long-runs", "unknown-kind", "other-version",
        "two-frames", "two-frames-one-delimiter", "block-with-spare-code", "refused-checksum", "refused-stuffing",
        "refused-cut-payload", "refused-direction", "refused-cut-request"};
    uint8_t bytes[2 * TT_MAX_FRAME];
    tt_request request;
    size_t i;
    for (i = 0; i < sizeof names / sizeof names[0]; i++) {
        size_t len = load(names[i], bytes, TT_MAX_FRAME);
        len += load("stop", bytes + len, TT_MAX_FRAME);
        if (receive(bytes, len, &request) != 1 || request.kind != TT_STOP) {
            fail(names[i], "is taken for a request, or hides the next one");
        }
    }
}

int main(int argc, char **argv) {
    if (argc != 2) {
        fprintf(stderr, "usage: vectors_test DIRECTORY\n");
        return 2;
    }
    directory = argv[1];
    check_describe();
    check_blocks();
    check_others();
    check_read("describe-request", TT_DESCRIBE_REQUEST, 0, 0, 0);
    check_read("start", TT_START, 0, 0, 0);
    check_read("stop", TT_STOP, 0, 0, 0);
    check_read("time-request", TT_TIME_REQUEST, 0xDEADBEEFu, 0, 0);
    check_read("time-request-with-fields-to-come", TT_TIME_REQUEST, 0xDEADBEEFu, 0, 0);
    check_read("set-rate", TT_SET_RATE, 0, 1, 50);
    check_ignored();
    return n_failed == 0 ? EXIT_SUCCESS : EXIT_FAILURE;
}
