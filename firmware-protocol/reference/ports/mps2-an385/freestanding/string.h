/*
 * The five functions of string.h that the core uses, for a toolchain without a
 * C library.
 */
#ifndef FREESTANDING_STRING_H
#define FREESTANDING_STRING_H

#include <stddef.h>

void *memcpy(void *to, const void *from, size_t length);
void *memmove(void *to, const void *from, size_t length);
void *memset(void *to, int value, size_t length);
int memcmp(const void *one, const void *other, size_t length);
size_t strlen(const char *text);

#endif
