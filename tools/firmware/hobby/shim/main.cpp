// Runs a sketch for five invented seconds. What the host says is on standard input, what the board says on standard output.
#include SKETCH

int main() {
    const uint64_t end_us = shim_us() + 5000000;
    setup();
    while (shim_us() < end_us) {
        loop();
        micros();
    }
    return 0;
}
