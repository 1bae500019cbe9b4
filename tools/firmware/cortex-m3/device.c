#include "device.h"

#include <stdbool.h>

#include "board.h"
#include "invented.h"
#include "tautrail_protocol.h"

#define N_STREAMS 2u
#define MAX_CHANNELS 2u
#define SECOND_TICKS BOARD_TICK_RATE_HZ
#define BLOCK_TICKS (BOARD_TICK_RATE_HZ / 100u) /* a block every 10 ms */
#define MAX_SAMPLES 100u                        /* in a block: 10 ms at the fastest rate */
#define FIFO_SAMPLES 1024u                      /* what the converter keeps for us; older ones are lost */
#define FASTEST_TICKS (BOARD_TICK_RATE_HZ / 10000u)
#define SLOWEST_TICKS BOARD_TICK_RATE_HZ
#define N_REQUESTS 8u

typedef int32_t (*source)(uint64_t tick, uint64_t index);

/* A stream at work. Sample `next_index` is taken at `next_tick`. */
typedef struct {
    source sources[MAX_CHANNELS];
    uint64_t next_index;
    uint64_t next_tick;
    uint32_t sequence;
    uint32_t overruns;
} work;

typedef struct {
    tt_request request;
    uint64_t received_tick;
} heard;

static const tt_channel tension[] = {
    {"line", "force", TT_I24, -8388608.0, 8388607.0, 0.0f, 0.0f},
    {"anchor", "force", TT_I24, -8388608.0, 8388607.0, 0.0f, 0.0f},
};
static const tt_channel motion[] = {
    {"encoder", "position", TT_I32, -2147483648.0, 2147483647.0, 0.0f, 0.0f},
    {"accel", "acceleration", TT_I16, -32000.0, 32000.0, 0.0f, 0.0f},
};
/* 2000 and 500 samples a second. */
static tt_stream streams[N_STREAMS] = {
    {1, BOARD_TICK_RATE_HZ / 2000u, tension, 2},
    {2, BOARD_TICK_RATE_HZ / 500u, motion, 2},
};
static work works[N_STREAMS] = {
    {{invented_line, invented_anchor}, 0, 0, 0, 0},
    {{invented_encoder, invented_accel}, 0, 0, 0, 0},
};
static const tt_describe self = {
    0x0000AD385C0FFEE1u,  "bench-node", "cortex-m3 example 1.0 (invented data)",
    BOARD_TICK_RATE_HZ, 50.0f,        streams,
    N_STREAMS};

static tt_header control; /* of stream 0: boot id and description id are the same in every stream */
static bool running;
static bool holding;
static uint64_t next_second;
static uint8_t out[TT_MAX_FRAME];

/* What interrupts heard and the main loop has not answered yet; where it is full the host asks again. */
static heard requests[N_REQUESTS];
static volatile uint32_t n_heard, n_answered;

void device_hears(uint8_t byte, uint64_t tick) {
    static tt_receiver receiver;
    tt_request request;
    if (tt_receive(&receiver, byte, &request) && n_heard - n_answered < N_REQUESTS) {
        requests[n_heard % N_REQUESTS].request = request;
        requests[n_heard % N_REQUESTS].received_tick = tick;
        board_fence();
        n_heard++;
    }
}

/* ---- control messages ---------------------------------------------------------------------------------------- */

static void send_control(size_t n) {
    board_send(out, n);
    control.sequence++;
}

static void describe(void) {
    send_control(tt_encode_describe(out, sizeof out, &control, &self));
}

static void tell(const char *text) {
    send_control(tt_encode_text(out, sizeof out, &control, text));
}

static void tell_status(void) {
    const uint32_t not_measured = 0x7FC00000u;
    tt_status status = {0, 0.0f, 0.0f, 0.0f, 0};
    uint32_t i;
    memcpy(&status.temperature_c, &not_measured, sizeof not_measured);
    memcpy(&status.supply_v, &not_measured, sizeof not_measured);
    memcpy(&status.excitation_v, &not_measured, sizeof not_measured);
    status.tick = board_tick();
    for (i = 0; i < N_STREAMS; i++) {
        status.overruns += works[i].overruns;
    }
    send_control(tt_encode_status(out, sizeof out, &control, &status));
}

static void tell_time(uint32_t token, uint64_t received_tick) {
    tt_time_reply reply;
    reply.token = token;
    reply.received_tick = received_tick;
    reply.sent_tick = board_tick();
    send_control(tt_encode_time_reply(out, sizeof out, &control, &reply));
}

/* ---- samples ------------------------------------------------------------------------------------------------- */

static uint16_t sample_len(const tt_stream *stream) {
    static const uint8_t widths[] = {0, 2, 3, 4, 4};
    uint16_t len = 0;
    uint8_t i;
    for (i = 0; i < stream->n_channels; i++) {
        len = (uint16_t)(len + widths[stream->channels[i].encoding]);
    }
    return len;
}

/* How many samples the converter holds. */
static uint64_t waiting(const work *at, const tt_stream *stream, uint64_t now) {
    return now < at->next_tick ? 0 : (now - at->next_tick) / stream->ticks_per_sample + 1u;
}

static void skip(work *at, const tt_stream *stream, uint64_t n) {
    at->next_index += n;
    at->next_tick += n * stream->ticks_per_sample;
}

static void send_block(work *at, const tt_stream *stream, uint16_t n_samples) {
    static uint8_t samples[MAX_SAMPLES * MAX_CHANNELS * 4u];
    tt_header header = control;
    tt_block block = {0, 0, 0, 0, 0, 0, samples};
    uint8_t *to = samples, channel;
    uint16_t i;
    block.first_index = at->next_index;
    block.tick = at->next_tick;
    for (i = 0; i < n_samples; i++) {
        for (channel = 0; channel < stream->n_channels; channel++) {
            int32_t counts = at->sources[channel](at->next_tick, at->next_index);
            switch (stream->channels[channel].encoding) {
            case TT_I16:
                to = tt_pack_i16(to, (int16_t)counts);
                break;
            case TT_I24:
                to = tt_pack_i24(to, counts);
                break;
            default:
                to = tt_pack_i32(to, counts);
                break;
            }
        }
        skip(at, stream, 1);
    }
    block.overruns = at->overruns;
    block.n_samples = n_samples;
    block.sample_len = sample_len(stream);
    block.sent_tick = board_tick();
    header.stream = stream->id;
    header.sequence = at->sequence++;
    board_send(out, tt_encode_block(out, sizeof out, &header, &block));
}

/* Sends whole blocks of 10 ms; what the converter could not keep is counted, and the index tells where. */
static void send_samples(work *at, const tt_stream *stream) {
    uint64_t n = waiting(at, stream, board_tick());
    uint32_t per_block = BLOCK_TICKS / stream->ticks_per_sample;
    per_block = per_block == 0u ? 1u : per_block;
    if (n > FIFO_SAMPLES) {
        at->overruns += (uint32_t)(n - FIFO_SAMPLES);
        skip(at, stream, n - FIFO_SAMPLES);
        n = FIFO_SAMPLES;
    }
    for (; n >= per_block; n -= per_block) {
        send_block(at, stream, (uint16_t)per_block);
    }
}

/* Samples from now on; those that nobody asked for are not overruns. */
static void start(void) {
    uint32_t i;
    if (running) {
        return;
    }
    running = true;
    next_second = board_tick();
    for (i = 0; i < N_STREAMS; i++) {
        skip(&works[i], &streams[i], waiting(&works[i], &streams[i], board_tick()));
    }
}

/* Everything sampled so far, also less than a block; forgotten where nobody asked for it. */
static void flush(work *at, const tt_stream *stream) {
    uint64_t n = waiting(at, stream, board_tick());
    if (!running) {
        skip(at, stream, n);
        return;
    }
    while (n > 0u) {
        uint16_t n_samples = n < MAX_SAMPLES ? (uint16_t)n : (uint16_t)MAX_SAMPLES;
        send_block(at, stream, n_samples);
        n -= n_samples;
    }
}

/* Follows where the converter can; says in any case what came of it. What was sampled at the old rate goes first. */
static void set_rate(uint8_t id, uint32_t ticks_per_sample) {
    bool possible = ticks_per_sample >= FASTEST_TICKS && ticks_per_sample <= SLOWEST_TICKS;
    uint32_t i;
    for (i = 0; i < N_STREAMS; i++) {
        if (streams[i].id == id && possible && ticks_per_sample != streams[i].ticks_per_sample) {
            flush(&works[i], &streams[i]);
            streams[i].ticks_per_sample = ticks_per_sample;
            control.description_id++;
        }
    }
    describe();
}

/* ---- the device ---------------------------------------------------------------------------------------------- */

static void answer(const heard *asked) {
    switch (asked->request.kind) {
    case TT_DESCRIBE_REQUEST:
        describe();
        break;
    case TT_START:
        start();
        break;
    case TT_STOP:
        running = false;
        break;
    case TT_TIME_REQUEST:
        tell_time(asked->request.token, asked->received_tick);
        break;
    case TT_SET_RATE:
        set_rate(asked->request.stream, asked->request.ticks_per_sample);
        break;
    default:
        break;
    }
}

static void watch_hook(void) {
    uint64_t now = board_tick();
    bool holds = invented_holds(now) != 0;
    tt_edge edge = {0, false, 0};
    if (holds != holding) {
        holding = holds;
        edge.rising = holds;
        edge.tick = now;
        send_control(tt_encode_edge(out, sizeof out, &control, &edge));
    }
}

void device_begin(uint32_t boot_id) {
    control.boot_id = boot_id;
    control.description_id = 1;
    describe();
    tell("example firmware, all data INVENTED; waiting for start");
}

void device_turn(void) {
    uint32_t i;
    while (n_answered != n_heard) {
        heard asked;
        board_fence();
        asked = requests[n_answered % N_REQUESTS];
        board_fence();
        n_answered++;
        answer(&asked);
    }
    if (!running) {
        return;
    }
    if (board_tick() >= next_second) {
        next_second += SECOND_TICKS;
        describe();
        tell_status();
    }
    watch_hook();
    for (i = 0; i < N_STREAMS; i++) {
        send_samples(&works[i], &streams[i]);
    }
}
