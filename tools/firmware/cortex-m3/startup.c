/* From reset to main: vectors, memory, and the memory functions that a compiler may call. */
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include "board.h"

extern uint32_t data_start, data_end, data_in_code, bss_start, bss_end, stack_top;

int main(void);
void reset(void);
void *memset(void *to, int value, size_t n);

void *memcpy(void *to, const void *from, size_t n) {
    unsigned char *out = to;
    const unsigned char *in = from;
    while (n-- > 0) {
        *out++ = *in++;
    }
    return to;
}

void *memset(void *to, int value, size_t n) {
    unsigned char *out = to;
    while (n-- > 0) {
        *out++ = (unsigned char)value;
    }
    return to;
}

void reset(void) {
    memcpy(&data_start, &data_in_code, (size_t)((char *)&data_end - (char *)&data_start));
    memset(&bss_start, 0, (size_t)((char *)&bss_end - (char *)&bss_start));
    main();
    for (;;) {
    }
}

/* A fault stands still: the host sees a silent device, not one that sends nonsense. */
static void stand_still(void) {
    for (;;) {
    }
}

typedef void (*handler)(void);

/* Armv7-M Architecture Reference Manual, B1.5.3: stack, reset, 14 system exceptions, then the interrupts. Interrupt
 * numbers of this image: Arm application note AN385. */
__attribute__((section(".vectors"), used)) static const handler vectors[16 + 16] = {
    [0] = (handler)(void *)&stack_top,
    [1] = reset,
    [2] = stand_still,
    [3] = stand_still,
    [4] = stand_still,
    [5] = stand_still,
    [6] = stand_still,
    [16 + 0] = board_uart_received,
    [16 + 9] = board_sample_time,
};
