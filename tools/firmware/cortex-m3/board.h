/* The board: one serial port, a free-running clock, a sample timer, and a number that survives power. */
#ifndef BOARD_H
#define BOARD_H

#include <stddef.h>
#include <stdint.h>

#define BOARD_TICK_RATE_HZ 25000000u

void board_begin(uint32_t wake_every_ticks);

/* Ticks since boot. Must be asked at least once in 171 s, or a wrap of the hardware's 32 bits goes unseen. */
uint64_t board_tick(void);

/* Number of this boot, from memory that survives power. */
uint32_t board_boot_number(void);

/* Hands bytes to the serial port; waits while the port is full. */
void board_send(const uint8_t *bytes, size_t n);

/* Sleeps until the next interrupt. */
void board_sleep(void);

/* What was written before is written, what is read after is read after: between the main loop and interrupts. */
void board_fence(void);

/* Called by the port's interrupt for every byte that came in, with the tick at which it did. Kept in device.c. */
void device_hears(uint8_t byte, uint64_t tick);

void board_uart_received(void);
void board_sample_time(void);

#endif
