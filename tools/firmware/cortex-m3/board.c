/*
 * Registers: Arm Cortex-M System Design Kit Technical Reference Manual (DDI 0479), chapter 4 (timer, UART); their places:
 * Arm application note AN385. On another board only this file, startup.c and the linker script change.
 */
#include "board.h"

#define REGISTER(address) (*(volatile uint32_t *)(address))

#define TIMER0 0x40000000u /* the clock: counts down from 2^32 - 1 */
#define TIMER1 0x40001000u /* wakes the main loop */
#define TIMER_CTRL 0x0u
#define TIMER_VALUE 0x4u
#define TIMER_RELOAD 0x8u
#define TIMER_INTCLEAR 0xCu
#define TIMER_ENABLE 1u
#define TIMER_INTERRUPT 8u

#define UART0 0x40004000u
#define UART_DATA 0x0u
#define UART_STATE 0x4u
#define UART_CTRL 0x8u
#define UART_INTCLEAR 0xCu
#define UART_BAUDDIV 0x10u
#define STATE_TX_FULL 1u
#define STATE_RX_FULL 2u
#define CTRL_TX 1u
#define CTRL_RX 2u
#define CTRL_RX_INTERRUPT 8u
#define INTERRUPT_RX 2u

#define NVIC_ENABLE 0xE000E100u
#define IRQ_UART0_RX 0u
#define IRQ_TIMER1 9u

#define BAUD 921600u

/* The last bytes of data memory, which the linker script leaves alone, stand for a counter in an EEPROM: the emulator
 * puts another number there at each start. A board of yours counts up its own. */
#define BOOT_NUMBER 0x203FFFF0u

static uint32_t tick_low, tick_high;

void board_begin(uint32_t wake_every_ticks) {
    REGISTER(TIMER0 + TIMER_RELOAD) = 0xFFFFFFFFu;
    REGISTER(TIMER0 + TIMER_VALUE) = 0xFFFFFFFFu;
    REGISTER(TIMER0 + TIMER_CTRL) = TIMER_ENABLE;
    REGISTER(TIMER1 + TIMER_RELOAD) = wake_every_ticks - 1u;
    REGISTER(TIMER1 + TIMER_VALUE) = wake_every_ticks - 1u;
    REGISTER(TIMER1 + TIMER_CTRL) = TIMER_ENABLE | TIMER_INTERRUPT;
    REGISTER(UART0 + UART_BAUDDIV) = BOARD_TICK_RATE_HZ / BAUD;
    REGISTER(UART0 + UART_CTRL) = CTRL_TX | CTRL_RX | CTRL_RX_INTERRUPT;
    REGISTER(NVIC_ENABLE) = 1u << IRQ_UART0_RX | 1u << IRQ_TIMER1;
}

/* Called by the main loop and by interrupts, so the two halves of the count change together. */
uint64_t board_tick(void) {
    uint32_t masked, low, high;
    __asm volatile("mrs %0, primask\n cpsid i" : "=r"(masked)::"memory");
    low = 0xFFFFFFFFu - REGISTER(TIMER0 + TIMER_VALUE);
    if (low < tick_low) {
        tick_high++;
    }
    tick_low = low;
    high = tick_high;
    __asm volatile("msr primask, %0" ::"r"(masked) : "memory");
    return (uint64_t)high << 32 | low;
}

uint32_t board_boot_number(void) {
    return REGISTER(BOOT_NUMBER);
}

void board_send(const uint8_t *bytes, size_t n) {
    size_t i;
    for (i = 0; i < n; i++) {
        while (REGISTER(UART0 + UART_STATE) & STATE_TX_FULL) {
        }
        REGISTER(UART0 + UART_DATA) = bytes[i];
    }
}

void board_sleep(void) {
    __asm volatile("wfi" ::: "memory");
}

void board_fence(void) {
    __asm volatile("dmb" ::: "memory");
}

void board_uart_received(void) {
    REGISTER(UART0 + UART_INTCLEAR) = INTERRUPT_RX;
    while (REGISTER(UART0 + UART_STATE) & STATE_RX_FULL) {
        device_hears((uint8_t)REGISTER(UART0 + UART_DATA), board_tick());
    }
}

/* Nothing but waking the main loop, which looks at the clock. */
void board_sample_time(void) {
    REGISTER(TIMER1 + TIMER_INTCLEAR) = 1u;
}
