/*
 * Checksums, and lines on their way out.
 */
#include "internal.h"

/* CRC-16/IBM-3740, a nibble at a time: sixteen words of table are a fair price
 * on a processor without much flash. */
uint16_t sink_crc(const char *bytes, size_t length)
{
    static const uint16_t table[16] = {
        0x0000, 0x1021, 0x2042, 0x3063, 0x4084, 0x50A5, 0x60C6, 0x70E7,
        0x8108, 0x9129, 0xA14A, 0xB16B, 0xC18C, 0xD1AD, 0xE1CE, 0xF1EF};
    uint16_t crc = 0xFFFF;
    size_t i;

    for (i = 0; i < length; i++) {
        uint8_t byte = (uint8_t)bytes[i];

        crc = (uint16_t)((uint16_t)(crc << 4) ^ table[(crc >> 12) ^ (byte >> 4)]);
        crc = (uint16_t)((uint16_t)(crc << 4) ^ table[(crc >> 12) ^ (byte & 0x0F)]);
    }
    return crc;
}

static void put(struct sink_text *text, char byte)
{
    if (text->length < SINK_LINE_BYTES) {
        text->bytes[text->length] = byte;
        text->length++;
    } else {
        text->broken = true;
    }
}

static void put_word(struct sink_text *text, const char *word)
{
    size_t i;

    for (i = 0; word[i] != '\0' && i < SINK_LINE_BYTES; i++) {
        put(text, word[i]);
    }
}

void sink_text_begin(struct sink_text *text, const char *kind)
{
    text->length = 0;
    text->broken = false;
    put_word(text, kind);
}

void sink_text_word(struct sink_text *text, const char *word)
{
    put(text, ' ');
    put_word(text, word);
}

static void put_digits(struct sink_text *text, uint64_t value)
{
    char digits[20];
    uint8_t count = 0;

    /* Narrow values, which are nearly all, are spared the 64-bit division. */
    while (value > UINT32_MAX && count < sizeof digits) {
        digits[count] = (char)('0' + (char)(value % 10u));
        value /= 10u;
        count++;
    }
    {
        uint32_t rest = (uint32_t)value;

        do {
            digits[count] = (char)('0' + (char)(rest % 10u));
            rest /= 10u;
            count++;
        } while (rest != 0 && count < sizeof digits);
    }
    while (count > 0) {
        count--;
        put(text, digits[count]);
    }
}

void sink_text_unsigned(struct sink_text *text, uint64_t value)
{
    put(text, ' ');
    put_digits(text, value);
}

void sink_text_signed(struct sink_text *text, int64_t value)
{
    put(text, ' ');
    if (value < 0) {
        put(text, '-');
        put_digits(text, (uint64_t)0 - (uint64_t)value);
    } else {
        put_digits(text, (uint64_t)value);
    }
}

void sink_text_end(struct sink_text *text)
{
    static const char hex[] = "0123456789ABCDEF";
    uint16_t crc = sink_crc(text->bytes, text->length);

    put(text, ' ');
    put(text, hex[crc >> 12]);
    put(text, hex[(crc >> 8) & 0x0F]);
    put(text, hex[(crc >> 4) & 0x0F]);
    put(text, hex[crc & 0x0F]);
    put(text, '\n');
}
