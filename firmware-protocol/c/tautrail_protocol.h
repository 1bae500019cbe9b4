/*
 * Tautrail wire protocol, version 1, for firmware: one C99 header, no heap, nothing of the C library but memcpy.
 * SPEC.md says what everything means; this header only packs it.
 *
 * Sending: fill in a struct, call the tt_encode_* function with a buffer, write the bytes it counts to the port.
 * 0 means that the frame did not fit the buffer or the protocol; nothing of use is in the buffer then.
 * TT_MAX_FRAME bytes hold any frame, tt_frame_room(payload bytes) the frame of a known payload.
 *
 * Receiving: give every byte from the port to tt_receive(); it says when a whole, undamaged request has come.
 *
 * Big and little-endian processors both work; float must be IEEE 754 binary32, double binary64 (or, on boards whose
 * double is a float, see tt_put_f64).
 */
#ifndef TAUTRAIL_PROTOCOL_H
#define TAUTRAIL_PROTOCOL_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h> /* memcpy */

#ifdef __cplusplus
extern "C" {
#endif

#define TT_VERSION 1u
#define TT_HEADER_LEN 14u
#define TT_CHECKSUM_LEN 4u
#define TT_MAX_DECODED 2048u
#define TT_MAX_FRAME 2060u

enum tt_kind {
    TT_DESCRIBE = 0x01,
    TT_BLOCK = 0x02,
    TT_EDGE = 0x03,
    TT_STATUS = 0x04,
    TT_TIME_REPLY = 0x05,
    TT_TEXT = 0x06,
    TT_DESCRIBE_REQUEST = 0x81,
    TT_START = 0x82,
    TT_STOP = 0x83,
    TT_TIME_REQUEST = 0x84,
    TT_SET_RATE = 0x85
};

enum tt_encoding { TT_I16 = 1, TT_I24 = 2, TT_I32 = 3, TT_F32 = 4 };

/* What stands in every header apart from version, kind and flags. Keep one sequence for each stream. */
typedef struct {
    uint8_t stream; /* of a block; 0 for everything else */
    uint32_t sequence;
    uint32_t boot_id;
    uint16_t description_id;
} tt_header;

typedef struct {
    const char *name;
    const char *quantity;
    uint8_t encoding;    /* enum tt_encoding */
    double nominal_min;  /* counts */
    double nominal_max;  /* counts */
    float group_delay_s; /* 0 if there is none */
    float bandwidth_hz;  /* 0 if it is not known */
} tt_channel;

typedef struct {
    uint8_t id; /* 1 to 255 */
    uint32_t ticks_per_sample;
    const tt_channel *channels;
    uint8_t n_channels;
} tt_stream;

typedef struct {
    uint64_t device_id;
    const char *name;
    const char *firmware;
    double tick_rate_hz;
    float tick_tolerance_ppm;
    const tt_stream *streams;
    uint8_t n_streams;
} tt_describe;

typedef struct {
    uint64_t first_index;
    uint64_t tick;      /* of the first sample */
    uint64_t sent_tick; /* when the block is handed to the port */
    uint32_t overruns;
    uint16_t n_samples;
    uint16_t sample_len;    /* bytes of one sample of all channels */
    const uint8_t *samples; /* n_samples * sample_len bytes, packed little-endian: tt_pack_* */
} tt_block;

typedef struct {
    uint8_t input;
    bool rising;
    uint64_t tick;
} tt_edge;

typedef struct {
    uint64_t tick;
    float temperature_c; /* NaN where not measured */
    float supply_v;
    float excitation_v;
    uint32_t overruns;
} tt_status;

typedef struct {
    uint32_t token; /* the request's */
    uint64_t received_tick;
    uint64_t sent_tick;
} tt_time_reply;

/* ---- samples ---------------------------------------------------------------------------------------------------- */

/* Each writes one value at `to` and returns where the next one belongs. */
static inline uint8_t *tt_pack_i16(uint8_t *to, int16_t value) {
    uint16_t bits = (uint16_t)value;
    to[0] = (uint8_t)bits;
    to[1] = (uint8_t)(bits >> 8);
    return to + 2;
}

static inline uint8_t *tt_pack_i24(uint8_t *to, int32_t value) {
    uint32_t bits = (uint32_t)value;
    to[0] = (uint8_t)bits;
    to[1] = (uint8_t)(bits >> 8);
    to[2] = (uint8_t)(bits >> 16);
    return to + 3;
}

static inline uint8_t *tt_pack_i32(uint8_t *to, int32_t value) {
    uint32_t bits = (uint32_t)value;
    to[0] = (uint8_t)bits;
    to[1] = (uint8_t)(bits >> 8);
    to[2] = (uint8_t)(bits >> 16);
    to[3] = (uint8_t)(bits >> 24);
    return to + 4;
}

static inline uint8_t *tt_pack_f32(uint8_t *to, float value) {
    int32_t bits;
    memcpy(&bits, &value, sizeof bits);
    return tt_pack_i32(to, bits);
}

/* ---- checksum --------------------------------------------------------------------------------------------------- */

#define TT_CRC_START 0xFFFFFFFFu

/* One byte more of CRC-32C, half a byte at a time: 64 bytes of table. Invert the result at the end. */
static inline uint32_t tt_crc_byte(uint32_t crc, uint8_t byte) {
    static const uint32_t table[16] = {
        0x00000000u, 0x105EC76Fu, 0x20BD8EDEu, 0x30E349B1u, 0x417B1DBCu, 0x5125DAD3u, 0x61C69362u, 0x7198540Du,
        0x82F63B78u, 0x92A8FC17u, 0xA24BB5A6u, 0xB21572C9u, 0xC38D26C4u, 0xD3D3E1ABu, 0xE330A81Au, 0xF36E6F75u};
    crc ^= byte;
    crc = (crc >> 4) ^ table[crc & 15u];
    return (crc >> 4) ^ table[crc & 15u];
}

/* ---- frames, out ------------------------------------------------------------------------------------------------ */

/* Room for a frame with a payload of this many bytes. */
static inline size_t tt_frame_room(size_t payload_len) {
    size_t decoded = TT_HEADER_LEN + payload_len + TT_CHECKSUM_LEN;
    return decoded + decoded / 254u + 3u;
}

/* A frame being written: stuffed and summed byte by byte. */
typedef struct {
    uint8_t *out;
    size_t room;
    size_t code_at; /* where the open run's code byte belongs */
    size_t decoded;
    uint32_t crc;
    uint8_t run;
    bool failed;
} tt_writer;

static inline void tt_put_out(tt_writer *w, size_t at, uint8_t byte) {
    if (at < w->room) {
        w->out[at] = byte;
    } else {
        w->failed = true;
    }
}

static inline void tt_close_run(tt_writer *w) {
    tt_put_out(w, w->code_at, (uint8_t)(w->run + 1u));
    w->code_at += (size_t)w->run + 1u;
    w->run = 0;
}

static inline void tt_put_stuffed(tt_writer *w, uint8_t byte) {
    if (w->run == 254u) {
        tt_close_run(w);
    }
    if (byte == 0u) {
        tt_close_run(w);
    } else {
        w->run++;
        tt_put_out(w, w->code_at + w->run, byte);
    }
}

static inline void tt_put_u8(tt_writer *w, uint8_t value) {
    w->decoded++;
    w->crc = tt_crc_byte(w->crc, value);
    tt_put_stuffed(w, value);
}

static inline void tt_put_u16(tt_writer *w, uint16_t value) {
    tt_put_u8(w, (uint8_t)value);
    tt_put_u8(w, (uint8_t)(value >> 8));
}

static inline void tt_put_u32(tt_writer *w, uint32_t value) {
    tt_put_u16(w, (uint16_t)value);
    tt_put_u16(w, (uint16_t)(value >> 16));
}

static inline void tt_put_u64(tt_writer *w, uint64_t value) {
    tt_put_u32(w, (uint32_t)value);
    tt_put_u32(w, (uint32_t)(value >> 32));
}

static inline void tt_put_f32(tt_writer *w, float value) {
    uint32_t bits;
    memcpy(&bits, &value, sizeof bits);
    tt_put_u32(w, bits);
}

/* Where double has 4 bytes (8-bit boards), its value is widened bit by bit; numbers too small for that become 0. */
static inline void tt_put_f64(tt_writer *w, double value) {
    if (sizeof value == sizeof(uint64_t)) {
        uint64_t bits = 0;
        memcpy(&bits, &value, sizeof value);
        tt_put_u64(w, bits);
    } else {
        float narrow = (float)value;
        uint32_t bits, exponent;
        uint64_t wide;
        memcpy(&bits, &narrow, sizeof bits);
        exponent = (bits >> 23) & 0xFFu;
        wide = (uint64_t)(bits & 0x80000000u) << 32;
        if (exponent == 0xFFu) {
            wide |= (uint64_t)0x7FFu << 52 | (uint64_t)(bits & 0x7FFFFFu) << 29;
        } else if (exponent != 0u) {
            wide |= (uint64_t)(exponent + 896u) << 52 | (uint64_t)(bits & 0x7FFFFFu) << 29;
        }
        tt_put_u64(w, wide);
    }
}

/* Bytes of a string, closing zero apart; over 255 it does not fit the protocol. */
static inline size_t tt_string_len(const char *text) {
    size_t len = 0;
    while (text[len] != '\0' && len < 256u) {
        len++;
    }
    return len;
}

static inline void tt_put_string(tt_writer *w, const char *text) {
    size_t len = tt_string_len(text), i;
    if (len > 255u) {
        w->failed = true;
        return;
    }
    tt_put_u8(w, (uint8_t)len);
    for (i = 0; i < len; i++) {
        tt_put_u8(w, (uint8_t)text[i]);
    }
}

static inline void tt_begin(tt_writer *w, uint8_t *out, size_t room, const tt_header *header, uint8_t kind) {
    w->out = out;
    w->room = room;
    w->code_at = 1;
    w->decoded = 0;
    w->crc = TT_CRC_START;
    w->run = 0;
    w->failed = false;
    tt_put_out(w, 0, 0);
    tt_put_u8(w, TT_VERSION);
    tt_put_u8(w, kind);
    tt_put_u8(w, 0);
    tt_put_u8(w, header->stream);
    tt_put_u32(w, header->sequence);
    tt_put_u32(w, header->boot_id);
    tt_put_u16(w, header->description_id);
}

/* Adds checksum and delimiter; returns the frame's length, or 0. */
static inline size_t tt_end(tt_writer *w) {
    uint32_t crc = ~w->crc;
    size_t end;
    tt_put_u32(w, crc);
    end = w->code_at + w->run + 1u;
    tt_close_run(w);
    tt_put_out(w, end, 0);
    return w->failed || w->decoded > TT_MAX_DECODED ? 0 : end + 1u;
}

static inline size_t tt_channel_len(const tt_channel *channel) {
    return 27u + tt_string_len(channel->name) + tt_string_len(channel->quantity);
}

static inline void tt_put_channel(tt_writer *w, const tt_channel *channel) {
    tt_put_u16(w, (uint16_t)tt_channel_len(channel));
    tt_put_string(w, channel->name);
    tt_put_string(w, channel->quantity);
    tt_put_u8(w, channel->encoding);
    tt_put_f64(w, channel->nominal_min);
    tt_put_f64(w, channel->nominal_max);
    tt_put_f32(w, channel->group_delay_s);
    tt_put_f32(w, channel->bandwidth_hz);
}

static inline void tt_put_stream(tt_writer *w, const tt_stream *stream) {
    size_t len = 6u;
    uint8_t i;
    for (i = 0; i < stream->n_channels; i++) {
        len += 2u + tt_channel_len(&stream->channels[i]);
    }
    if (len > TT_MAX_DECODED) {
        w->failed = true;
        return;
    }
    tt_put_u16(w, (uint16_t)len);
    tt_put_u8(w, stream->id);
    tt_put_u32(w, stream->ticks_per_sample);
    tt_put_u8(w, stream->n_channels);
    for (i = 0; i < stream->n_channels; i++) {
        tt_put_channel(w, &stream->channels[i]);
    }
}

static inline size_t tt_encode_describe(uint8_t *out, size_t room, const tt_header *header, const tt_describe *describe) {
    tt_writer w;
    uint8_t i;
    tt_begin(&w, out, room, header, TT_DESCRIBE);
    tt_put_u64(&w, describe->device_id);
    tt_put_string(&w, describe->name);
    tt_put_string(&w, describe->firmware);
    tt_put_f64(&w, describe->tick_rate_hz);
    tt_put_f32(&w, describe->tick_tolerance_ppm);
    tt_put_u8(&w, describe->n_streams);
    for (i = 0; i < describe->n_streams; i++) {
        tt_put_stream(&w, &describe->streams[i]);
    }
    return tt_end(&w);
}

static inline size_t tt_encode_block(uint8_t *out, size_t room, const tt_header *header, const tt_block *block) {
    tt_writer w;
    size_t len = (size_t)block->n_samples * block->sample_len, i;
    if (block->sample_len != 0u && len / block->sample_len != block->n_samples) {
        return 0; /* size_t has 16 bits here */
    }
    if (len > TT_MAX_DECODED) {
        return 0;
    }
    tt_begin(&w, out, room, header, TT_BLOCK);
    tt_put_u64(&w, block->first_index);
    tt_put_u64(&w, block->tick);
    tt_put_u64(&w, block->sent_tick);
    tt_put_u32(&w, block->overruns);
    tt_put_u16(&w, block->n_samples);
    tt_put_u16(&w, block->sample_len);
    for (i = 0; i < len; i++) {
        tt_put_u8(&w, block->samples[i]);
    }
    return tt_end(&w);
}

static inline size_t tt_encode_edge(uint8_t *out, size_t room, const tt_header *header, const tt_edge *edge) {
    tt_writer w;
    tt_begin(&w, out, room, header, TT_EDGE);
    tt_put_u8(&w, edge->input);
    tt_put_u8(&w, edge->rising ? 1u : 0u);
    tt_put_u64(&w, edge->tick);
    return tt_end(&w);
}

static inline size_t tt_encode_status(uint8_t *out, size_t room, const tt_header *header, const tt_status *status) {
    tt_writer w;
    tt_begin(&w, out, room, header, TT_STATUS);
    tt_put_u64(&w, status->tick);
    tt_put_f32(&w, status->temperature_c);
    tt_put_f32(&w, status->supply_v);
    tt_put_f32(&w, status->excitation_v);
    tt_put_u32(&w, status->overruns);
    return tt_end(&w);
}

static inline size_t tt_encode_time_reply(uint8_t *out, size_t room, const tt_header *header,
                                          const tt_time_reply *reply) {
    tt_writer w;
    tt_begin(&w, out, room, header, TT_TIME_REPLY);
    tt_put_u32(&w, reply->token);
    tt_put_u64(&w, reply->received_tick);
    tt_put_u64(&w, reply->sent_tick);
    return tt_end(&w);
}

/* A line for people: UTF-8, at most 255 bytes. */
static inline size_t tt_encode_text(uint8_t *out, size_t room, const tt_header *header, const char *text) {
    tt_writer w;
    tt_begin(&w, out, room, header, TT_TEXT);
    tt_put_string(&w, text);
    return tt_end(&w);
}

/* ---- frames, in ------------------------------------------------------------------------------------------------- */

/* The longest request this header keeps, later versions' trailing fields included; longer ones are ignored. */
#ifndef TT_MAX_REQUEST
#define TT_MAX_REQUEST 64u
#endif

/* What the host asks. */
typedef struct {
    uint8_t kind;              /* TT_DESCRIBE_REQUEST … TT_SET_RATE */
    uint32_t token;            /* of TT_TIME_REQUEST */
    uint8_t stream;            /* of TT_SET_RATE */
    uint32_t ticks_per_sample; /* of TT_SET_RATE */
} tt_request;

/* Set to zero before the first byte: tt_receiver r = {0}; */
typedef struct {
    uint8_t decoded[TT_MAX_REQUEST];
    size_t len;
    uint8_t run;       /* bytes of the open run still to come */
    bool zero_follows; /* when the open run is over */
    bool in_frame;
    bool too_long;
} tt_receiver;

static inline uint32_t tt_get_u32(const uint8_t *from) {
    return (uint32_t)from[0] | (uint32_t)from[1] << 8 | (uint32_t)from[2] << 16 | (uint32_t)from[3] << 24;
}

static inline void tt_keep(tt_receiver *r, uint8_t byte) {
    if (r->len < TT_MAX_REQUEST) {
        r->decoded[r->len++] = byte;
    } else {
        r->too_long = true;
    }
}

/* Reads what was collected; false when it is damaged or nothing that this version knows. */
static inline bool tt_parse_request(const uint8_t *decoded, size_t len, tt_request *request) {
    const uint8_t *payload = decoded + TT_HEADER_LEN;
    size_t payload_len, i;
    uint32_t crc = TT_CRC_START;
    if (len < TT_HEADER_LEN + TT_CHECKSUM_LEN) {
        return false;
    }
    payload_len = len - TT_HEADER_LEN - TT_CHECKSUM_LEN;
    for (i = 0; i < len - TT_CHECKSUM_LEN; i++) {
        crc = tt_crc_byte(crc, decoded[i]);
    }
    if ((crc ^ 0xFFFFFFFFu) != tt_get_u32(decoded + len - TT_CHECKSUM_LEN) || decoded[0] != TT_VERSION) {
        return false;
    }
    request->kind = decoded[1];
    request->token = 0;
    request->stream = 0;
    request->ticks_per_sample = 0;
    switch (decoded[1]) {
    case TT_DESCRIBE_REQUEST:
    case TT_START:
    case TT_STOP:
        return true;
    case TT_TIME_REQUEST:
        if (payload_len < 4u) {
            return false;
        }
        request->token = tt_get_u32(payload);
        return true;
    case TT_SET_RATE:
        if (payload_len < 5u) {
            return false;
        }
        request->stream = payload[0];
        request->ticks_per_sample = tt_get_u32(payload + 1);
        return true;
    default:
        return false;
    }
}

/* Takes one byte from the port; true when it completes a request, which is then in `request`. */
static inline bool tt_receive(tt_receiver *r, uint8_t byte, tt_request *request) {
    if (byte == 0u) {
        bool whole = r->in_frame && r->run == 0u && !r->too_long;
        size_t len = r->len;
        r->len = 0;
        r->run = 0;
        r->zero_follows = false;
        r->in_frame = false;
        r->too_long = false;
        return whole && tt_parse_request(r->decoded, len, request);
    }
    if (r->run > 0u) {
        r->run--;
        tt_keep(r, byte);
        return false;
    }
    if (r->zero_follows) {
        tt_keep(r, 0);
    }
    r->in_frame = true;
    r->run = (uint8_t)(byte - 1u);
    r->zero_follows = byte != 255u;
    return false;
}

#ifdef __cplusplus
}
#endif

#endif
