/* INVENTED DATA: a winch that draws to 300 N and lets down again, every 10 s. No such launcher exists. */
#ifndef INVENTED_H
#define INVENTED_H

#include <stdint.h>

/* Counts at a tick of the 25 MHz clock, of sample `index`; integers only, so that a test can know every one of them. */
int32_t invented_line(uint64_t tick, uint64_t index);
int32_t invented_anchor(uint64_t tick, uint64_t index);
int32_t invented_encoder(uint64_t tick, uint64_t index);
int32_t invented_accel(uint64_t tick, uint64_t index);

/* Whether the winch holds: the digital input 0. */
int invented_holds(uint64_t tick);

#endif
