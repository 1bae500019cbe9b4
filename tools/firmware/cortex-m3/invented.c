#include "invented.h"

#define TICKS_PER_MS 25000u
#define COURSE_MS 10000u
#define RISES_MS 1500u
#define HOLDS_MS 2500u
#define FALLS_MS 5000u
#define SLACK_MS 6000u
#define PULL_N 300u
#define RAMP_MS 1000u

/* Tension at this time of the course, in millinewtons. */
static uint32_t tension_mn(uint32_t ms) {
    if (ms < RISES_MS || ms >= SLACK_MS) {
        return 0;
    }
    if (ms < HOLDS_MS) {
        return (ms - RISES_MS) * (PULL_N * 1000u / RAMP_MS);
    }
    return ms < FALLS_MS ? PULL_N * 1000u : (SLACK_MS - ms) * (PULL_N * 1000u / RAMP_MS);
}

static uint32_t course_ms(uint64_t tick) {
    return (uint32_t)(tick / TICKS_PER_MS % COURSE_MS);
}

/* A cell gives 2 counts for a millinewton; the last four bits are a pattern of the index, so that no two neighbours can
 * be exchanged unseen. */
int32_t invented_line(uint64_t tick, uint64_t index) {
    return 12000 + (int32_t)(2u * tension_mn(course_ms(tick))) + (int32_t)(index * 7u % 16u);
}

int32_t invented_anchor(uint64_t tick, uint64_t index) {
    return -8000 + (int32_t)(2u * tension_mn(course_ms(tick))) + (int32_t)(index * 5u % 16u);
}

/* Tenths of a millimetre from the release point: 4 m where the cords come taut, 2 m at full pull. */
int32_t invented_encoder(uint64_t tick, uint64_t index) {
    (void)index;
    return 40000 - (int32_t)(tension_mn(course_ms(tick)) / 15u);
}

/* At rest on a rail inclined by 6 degrees. */
int32_t invented_accel(uint64_t tick, uint64_t index) {
    (void)tick;
    return 109 + (int32_t)(index * 3u % 4u);
}

int invented_holds(uint64_t tick) {
    uint32_t ms = course_ms(tick);
    return ms >= HOLDS_MS && ms < FALLS_MS;
}
