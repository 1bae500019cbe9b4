// As much of a hobby board as the example sketch uses, on a host: the test compiles the sketch with it and runs it.
// Time is invented: it begins shortly before micros() starts again, and every look at it takes 40 microseconds.
#ifndef SHIM_ARDUINO_H
#define SHIM_ARDUINO_H

#include <cstddef>
#include <cstdint>
#include <cstdio>

static const int A0 = 14, A1 = 15, A5 = 19;

inline uint64_t &shim_us() {
    static uint64_t us = 0xFFF00000u;
    return us;
}

inline uint32_t micros() {
    return static_cast<uint32_t>(shim_us() += 40);
}

inline int analogRead(int pin) {
    shim_us() += 100; // a conversion takes that long
    return pin == A0 ? 400 : pin == A1 ? 500 : static_cast<int>(shim_us() % 7);
}

struct ShimSerial {
    int peeked = EOF;

    void begin(unsigned long) {}
    int available() {
        if (peeked == EOF) {
            peeked = std::getchar();
        }
        return peeked == EOF ? 0 : 1;
    }
    int read() {
        int byte = available() ? peeked : -1;
        peeked = EOF;
        return byte;
    }
    size_t write(const uint8_t *bytes, size_t n) { return std::fwrite(bytes, 1, n, stdout); }
    void print(char c) { std::putchar(c); }
    void print(int value) { std::printf("%d", value); }
    void print(unsigned long value) { std::printf("%lu", value); }
    void println() { std::fputs("\r\n", stdout); }
    void println(const char *text) {
        std::fputs(text, stdout);
        println();
    }
};

static ShimSerial Serial;

#endif
