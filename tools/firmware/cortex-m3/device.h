/* A device as SPEC.md, section 4, wants it: what it says, and when. */
#ifndef DEVICE_H
#define DEVICE_H

#include <stdint.h>

/* Describes itself, then waits for start. */
void device_begin(uint32_t boot_id);

/* Answers what was asked and sends what is due. Called whenever the board wakes. */
void device_turn(void);

#endif
