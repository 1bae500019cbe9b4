/* The C header's receiver, for the fuzz target `requests`. */
#include "tautrail_protocol.h"

typedef struct {
    uint8_t kind;
    uint8_t stream;
    uint32_t token;
    uint32_t ticks_per_sample;
} request;

size_t longest_request(void) {
    return TT_MAX_REQUEST;
}

size_t requests_in(const uint8_t *bytes, size_t len, request *found, size_t room) {
    tt_receiver receiver = {{0}, 0, 0, false, false, false};
    tt_request heard;
    size_t i, n = 0;
    for (i = 0; i < len; i++) {
        if (tt_receive(&receiver, bytes[i], &heard)) {
            if (n < room) {
                found[n].kind = heard.kind;
                found[n].stream = heard.stream;
                found[n].token = heard.token;
                found[n].ticks_per_sample = heard.ticks_per_sample;
            }
            n++;
        }
    }
    return n;
}
