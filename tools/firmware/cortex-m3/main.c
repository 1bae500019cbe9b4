/* Example firmware of Tautrail's wire protocol for a Cortex-M3 board. What it measures is INVENTED. See ../README.md. */
#include "board.h"
#include "device.h"

#define WAKE_EVERY_TICKS (BOARD_TICK_RATE_HZ / 1000u)

int main(void) {
    board_begin(WAKE_EVERY_TICKS);
    device_begin(board_boot_number());
    for (;;) {
        device_turn();
        board_sleep();
    }
}
