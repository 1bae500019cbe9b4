/* What the protocol's header needs of the C library, for a toolchain that comes without one. */
#ifndef FREESTANDING_STRING_H
#define FREESTANDING_STRING_H

#include <stddef.h>

void *memcpy(void *to, const void *from, size_t n);

#endif
