/*
 * Small rather than fast. Compiled without the optimisation that would turn
 * these loops into calls of themselves.
 */
#include "string.h"

void *memmove(void *to, const void *from, size_t length)
{
    unsigned char *target = to;
    const unsigned char *source = from;
    size_t i;

    if (target < source) {
        for (i = 0; i < length; i++) {
            target[i] = source[i];
        }
    } else {
        for (i = length; i > 0; i--) {
            target[i - 1] = source[i - 1];
        }
    }
    return to;
}

void *memcpy(void *to, const void *from, size_t length)
{
    return memmove(to, from, length);
}

void *memset(void *to, int value, size_t length)
{
    unsigned char *target = to;
    size_t i;

    for (i = 0; i < length; i++) {
        target[i] = (unsigned char)value;
    }
    return to;
}

int memcmp(const void *one, const void *other, size_t length)
{
    const unsigned char *left = one;
    const unsigned char *right = other;
    size_t i;

    for (i = 0; i < length; i++) {
        if (left[i] != right[i]) {
            return left[i] < right[i] ? -1 : 1;
        }
    }
    return 0;
}

size_t strlen(const char *text)
{
    size_t length = 0;

    while (text[length] != '\0') {
        length++;
    }
    return length;
}
