/*
 * Example sketch for hobby boards: two load cells, 100 samples a second, for Tautrail.
 *
 * SPEAK_FRAMES 1: the wire protocol (SPEC.md). Copy tautrail_protocol.h into this folder. Losses are counted, and the
 *                 board's clock is mapped to the host's: prefer it.
 * SPEAK_FRAMES 0: text lines, `microseconds,line,anchor`, after one heading. For a board that must print anyway.
 *
 * Put your converter into read_cell(); as it stands it reads the analogue inputs A0 and A1.
 * This is no safety device. It measures; interlocks are hardware.
 */
#ifndef SPEAK_FRAMES
#define SPEAK_FRAMES 1
#endif

#include <Arduino.h>

#if SPEAK_FRAMES
#include "tautrail_protocol.h"
#endif

static const unsigned long BAUD = 115200;
static const uint32_t TICKS_PER_SAMPLE = 10000; /* a tick is a microsecond */
static const uint8_t N_CELLS = 2;

static int16_t read_cell(uint8_t cell) {
    return (int16_t)analogRead(cell == 0 ? A0 : A1);
}

/* Microseconds since boot in 64 bits; micros() alone starts again every 71 minutes. Call it more often than that. */
static uint64_t ticks() {
    static uint32_t low = 0, turns = 0;
    uint32_t now = micros();
    if (now < low) {
        turns++;
    }
    low = now;
    return (uint64_t)turns << 32 | now;
}

/* When the next sample is due, and which one it is. Samples that came too late to be taken are counted. */
static uint64_t next_tick = 0, next_index = 0;
static uint32_t overruns = 0;

/* True when a sample is due now; `index` and `tick` are then its own. */
static bool sample_due(uint64_t *index, uint64_t *tick) {
    uint64_t now = ticks();
    if (now < next_tick) {
        return false;
    }
    while (now >= next_tick + TICKS_PER_SAMPLE) {
        next_tick += TICKS_PER_SAMPLE;
        next_index++;
        overruns++;
    }
    *index = next_index++;
    *tick = now;
    next_tick += TICKS_PER_SAMPLE;
    return true;
}

#if SPEAK_FRAMES

static const uint8_t SAMPLES_PER_BLOCK = 2;
static const uint8_t SAMPLE_LEN = 2 * N_CELLS;
static const uint32_t SECOND = 1000000;

static const tt_channel CHANNELS[N_CELLS] = {
    {"line", "force", TT_I16, 0.0, 1023.0, 0.0f, 0.0f},
    {"anchor", "force", TT_I16, 0.0, 1023.0, 0.0f, 0.0f},
};
static const tt_stream STREAMS[1] = {{1, TICKS_PER_SAMPLE, CHANNELS, N_CELLS}};
/* Give every board its own device id. A ceramic resonator may be off by 1 %. */
static const tt_describe SELF = {0x0000000000005CA1ULL, "winch-scale", "winch_scale 1.0", 1e6, 10000.0f, STREAMS, 1};

static tt_header control = {0, 0, 0, 1};
static tt_receiver receiver = {};
static uint32_t block_sequence = 0;
static bool running = false;
static uint64_t next_second = 0;

/* The block being filled. */
static uint8_t samples[SAMPLES_PER_BLOCK * SAMPLE_LEN];
static uint8_t n_samples = 0;
static uint64_t first_index = 0, first_tick = 0;

/* Room for the longest frame that this sketch sends, its description. */
static uint8_t out[192];

static void send_control(size_t n) {
    Serial.write(out, n);
    control.sequence++;
}

static void describe() {
    send_control(tt_encode_describe(out, sizeof out, &control, &SELF));
}

static void send_block() {
    tt_header header = control;
    tt_block block = {first_index, first_tick, ticks(), overruns, n_samples, SAMPLE_LEN, samples};
    header.stream = 1;
    header.sequence = block_sequence++;
    n_samples = 0;
    Serial.write(out, tt_encode_block(out, sizeof out, &header, &block));
}

static void answer(const tt_request *request, uint64_t received_tick) {
    switch (request->kind) {
    case TT_START:
        if (!running) {
            running = true;
            next_second = ticks();
            while (next_tick < next_second) { /* what nobody asked for is no overrun */
                next_tick += TICKS_PER_SAMPLE;
                next_index++;
            }
        }
        break;
    case TT_STOP:
        running = false;
        n_samples = 0;
        break;
    case TT_TIME_REQUEST: {
        tt_time_reply reply = {request->token, received_tick, ticks()};
        send_control(tt_encode_time_reply(out, sizeof out, &control, &reply));
        break;
    }
    default: /* describe?; set rate, which this board can't follow: its description says so */
        describe();
        break;
    }
}

/* The boot id: noise of an open input, stirred well (32-bit FNV-1a; from memory). */
static uint32_t noise() {
    uint32_t hash = 2166136261UL;
    for (uint8_t i = 0; i < 64; i++) {
        hash = (hash ^ (uint32_t)analogRead(A5) ^ (uint32_t)micros()) * 16777619UL;
    }
    return hash;
}

void setup() {
    Serial.begin(BAUD);
    control.boot_id = noise();
    describe();
}

void loop() {
    uint64_t index, tick;
    while (Serial.available() > 0) {
        tt_request request;
        if (tt_receive(&receiver, (uint8_t)Serial.read(), &request)) {
            answer(&request, ticks());
        }
    }
    if (!running) {
        ticks();
        return;
    }
    if (ticks() >= next_second) {
        next_second += SECOND;
        describe();
    }
    if (sample_due(&index, &tick)) {
        if (n_samples > 0 && index != first_index + n_samples) {
            send_block(); /* a block holds consecutive samples only */
        }
        if (n_samples == 0) {
            first_index = index;
            first_tick = tick;
        }
        uint8_t *to = samples + n_samples * SAMPLE_LEN;
        for (uint8_t cell = 0; cell < N_CELLS; cell++) {
            to = tt_pack_i16(to, read_cell(cell));
        }
        if (++n_samples == SAMPLES_PER_BLOCK) {
            send_block();
        }
    }
}

#else

void setup() {
    Serial.begin(BAUD);
    Serial.println("us,line,anchor");
    next_tick = ticks();
}

void loop() {
    uint64_t index, tick;
    if (sample_due(&index, &tick)) {
        Serial.print((unsigned long)(uint32_t)tick); /* starts again every 71 minutes: 32 bits of microseconds */
        for (uint8_t cell = 0; cell < N_CELLS; cell++) {
            Serial.print(',');
            Serial.print(read_cell(cell));
        }
        Serial.println();
    }
}

#endif
