/*
 * Bytes from the host, gathered into lines and their checksums judged.
 */
#include "internal.h"

static void count_damaged(struct sink_core *core)
{
    core->damaged++;
}

static int hex_digit(char byte)
{
    if (byte >= '0' && byte <= '9') {
        return byte - '0';
    }
    if (byte >= 'A' && byte <= 'F') {
        return byte - 'A' + 10;
    }
    return -1;
}

/* The length of the text before ` CRC`, or 0 if the line fails its checksum. */
static size_t checked_length(const char *line, size_t length)
{
    size_t text;
    uint16_t crc = 0;
    size_t i;

    if (length < 6 || line[length - 5] != ' ') {
        return 0;
    }
    text = length - 5;
    for (i = text + 1; i < length; i++) {
        int digit = hex_digit(line[i]);

        if (digit < 0) {
            return 0;
        }
        crc = (uint16_t)((uint16_t)(crc << 4) | (uint16_t)digit);
    }
    return crc == sink_crc(line, text) ? text : 0;
}

static void take_line(struct sink_core *core, uint64_t now_us)
{
    struct sink_host_line line;
    size_t text;

    text = core->line_damaged ? 0 : checked_length(core->line, core->line_length);
    if (text == 0) {
        count_damaged(core);
        return;
    }
    sink_parse(core->line, text, &line);
    if (line.fault != SINK_OK) {
        count_damaged(core);
    } else {
        /* Only a whole host line keeps the deadman quiet. The sink's own lines,
         * echoed by a shorted cable, have right checksums too, but not the form
         * of a host line: they must not keep a current on. */
        core->heard_us = now_us;
    }
    sink_session_line(core, &line, now_us);
}

static void gather(struct sink_core *core, uint8_t byte)
{
    /* A return that no line end followed was a byte like any other. */
    if (core->line_returned || byte < 0x20 || byte > 0x7E ||
        core->line_length == SINK_LINE_BYTES - 1u) {
        core->line_damaged = true;
    } else {
        core->line[core->line_length] = (char)byte;
        core->line_length++;
    }
    core->line_returned = false;
}

void sink_core_receive(struct sink_core *core, const uint8_t *bytes, size_t length,
                       uint64_t now_us)
{
    size_t i;

    for (i = 0; i < length; i++) {
        if (bytes[i] == '\r' && !core->line_returned) {
            core->line_returned = true;
        } else if (bytes[i] != '\n') {
            gather(core, bytes[i]);
        } else {
            /* An empty line is no line: a host sends one to end whatever noise
             * stood in the way before it. */
            if (core->line_length != 0 || core->line_damaged) {
                take_line(core, now_us);
            }
            core->line_length = 0;
            core->line_damaged = false;
            core->line_returned = false;
        }
    }
}
