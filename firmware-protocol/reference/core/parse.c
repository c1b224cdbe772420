/*
 * A host line taken apart. Either every field is in its place and range, or the
 * line carries a fault and nothing of it may be used but its number.
 */
#include "internal.h"

#include <string.h>

#define FIELDS_MAX 8u

/* The ranges of the protocol's fields (section 8). They are what keeps every
 * product in the core within 64 bits. */
#define VALUE_MOST 999999999
#define VOLTAGE_LEAST (-99999999)
#define RESISTANCE_MOST 2147483647u
#define PERSIST_MOST 60000000u
#define READBACK_MOST 3600000000u
#define SPAN_MOST UINT64_C(2678400000000) /* 31 days */

struct field {
    const char *text;
    size_t length;
};

/* Splits at single spaces. Returns the number of fields, 0 if there are too
 * many, an empty one, or a byte that is not printable ASCII. */
static size_t split(const char *text, size_t length, struct field *fields)
{
    size_t count = 0;
    size_t start = 0;
    size_t i;

    for (i = 0; i <= length; i++) {
        if (i < length && text[i] != ' ') {
            if (text[i] < 0x21 || text[i] > 0x7E) {
                return 0;
            }
            continue;
        }
        if (i == start || count == FIELDS_MAX) {
            return 0;
        }
        fields[count].text = text + start;
        fields[count].length = i - start;
        count++;
        start = i + 1;
    }
    return count;
}

static bool is_word(const struct field *field, const char *word)
{
    return strlen(word) == field->length && memcmp(word, field->text, field->length) == 0;
}

/* A decimal without leading zeros, at most `most`. */
static bool read_unsigned(const struct field *field, uint64_t most, uint64_t *value)
{
    uint64_t total = 0;
    size_t i;

    if (field->length > 20 || (field->length > 1 && field->text[0] == '0')) {
        return false;
    }
    for (i = 0; i < field->length; i++) {
        uint64_t digit;

        if (field->text[i] < '0' || field->text[i] > '9') {
            return false;
        }
        digit = (uint64_t)(field->text[i] - '0');
        if (total > (UINT64_MAX - digit) / 10u) {
            return false;
        }
        total = total * 10u + digit;
    }
    *value = total;
    return total <= most;
}

static bool read_signed(const struct field *field, int64_t least, int64_t most, int64_t *value)
{
    struct field digits = *field;
    uint64_t magnitude;
    bool negative = field->text[0] == '-';

    if (negative) {
        digits.text++;
        digits.length--;
    }
    if (digits.length == 0 || !read_unsigned(&digits, (uint64_t)INT64_MAX, &magnitude)) {
        return false;
    }
    if (negative && magnitude == 0) {
        return false;
    }
    *value = negative ? -(int64_t)magnitude : (int64_t)magnitude;
    return *value >= least && *value <= most;
}

static bool read_u16(const struct field *field, uint16_t *value)
{
    uint64_t wide;

    if (!read_unsigned(field, UINT16_MAX, &wide)) {
        return false;
    }
    *value = (uint16_t)wide;
    return true;
}

static bool read_u32(const struct field *field, uint64_t least, uint64_t most, uint32_t *value)
{
    uint64_t wide;

    if (!read_unsigned(field, most, &wide) || wide < least) {
        return false;
    }
    *value = (uint32_t)wide;
    return true;
}

struct kind_row {
    const char *word;
    enum sink_kind kind;
    uint8_t fields; /* the kind's own word included */
};

static const struct kind_row KINDS[] = {
    {"hello", SINK_KIND_HELLO, 3},       {"clock", SINK_KIND_CLOCK, 2},
    {"off", SINK_KIND_OFF, 2},           {"limit", SINK_KIND_LIMIT, 5},
    {"deadman", SINK_KIND_DEADMAN, 3},   {"readback", SINK_KIND_READBACK, 3},
    {"step", SINK_KIND_STEP, 7},         {"clear", SINK_KIND_CLEAR, 3},
    {"reset", SINK_KIND_RESET, 2},       {"isolator", SINK_KIND_ISOLATOR, 3},
    {"burst", SINK_KIND_BURST, 5},
};

struct limit_row {
    const char *word;
    int64_t least, most;
};

/* In the order of their causes. */
static const struct limit_row LIMITS[SINK_LIMITS] = {
    {"current", 0, VALUE_MOST},
    {"power", 0, VALUE_MOST},
    {"voltage-high", VOLTAGE_LEAST, VALUE_MOST},
    {"voltage-low", VOLTAGE_LEAST, VALUE_MOST},
    {"temperature", SINK_TEMPERATURE_LEAST, SINK_TEMPERATURE_MOST},
    {"excess", 0, VALUE_MOST},
};

static enum sink_answer parse_limit(const struct field *fields, struct sink_host_line *line)
{
    uint8_t i;

    for (i = 0; i < SINK_LIMITS; i++) {
        if (is_word(&fields[2], LIMITS[i].word)) {
            line->which = i;
            if (!read_signed(&fields[3], LIMITS[i].least, LIMITS[i].most, &line->value) ||
                !read_u32(&fields[4], 0, PERSIST_MOST, &line->persist_us)) {
                return SINK_NO_RANGE;
            }
            return SINK_OK;
        }
    }
    return SINK_NO_UNKNOWN;
}

static enum sink_answer parse_step(const struct field *fields, struct sink_host_line *line)
{
    struct sink_step *step = &line->step;
    uint64_t least = 0;
    uint64_t most = VALUE_MOST;

    if (is_word(&fields[2], "current")) {
        step->mode = SINK_MODE_CURRENT;
    } else if (is_word(&fields[2], "power")) {
        step->mode = SINK_MODE_POWER;
    } else if (is_word(&fields[2], "resistance")) {
        step->mode = SINK_MODE_RESISTANCE;
        least = 1;
        most = RESISTANCE_MOST;
    } else {
        return SINK_NO_UNKNOWN;
    }
    step->order = line->number;
    if (!read_unsigned(&fields[3], INT64_MAX, &step->start_us) ||
        !read_u32(&fields[4], least, most, &step->target) ||
        !read_unsigned(&fields[5], SPAN_MOST, &step->ramp_us) ||
        !read_unsigned(&fields[6], SPAN_MOST, &step->hold_us) || step->hold_us == 0) {
        return SINK_NO_RANGE;
    }
    return SINK_OK;
}

static enum sink_answer fault_unless(bool good)
{
    return good ? SINK_OK : SINK_NO_RANGE;
}

static enum sink_answer parse_fields(const struct field *fields, struct sink_host_line *line)
{
    uint16_t flag;

    switch (line->kind) {
    case SINK_KIND_HELLO:
        return fault_unless(read_u32(&fields[2], 1, UINT32_MAX, &line->session));
    case SINK_KIND_LIMIT:
        return parse_limit(fields, line);
    case SINK_KIND_DEADMAN:
        return fault_unless(read_u32(&fields[2], 100000, 10000000, &line->interval_us));
    case SINK_KIND_READBACK:
        return fault_unless(read_u32(&fields[2], 0, READBACK_MOST, &line->interval_us));
    case SINK_KIND_STEP:
        return parse_step(fields, line);
    case SINK_KIND_CLEAR:
        return fault_unless(read_unsigned(&fields[2], INT64_MAX, &line->from_us));
    case SINK_KIND_ISOLATOR:
        if (!read_u16(&fields[2], &flag) || flag > 1) {
            return SINK_NO_RANGE;
        }
        line->closed = flag == 1;
        return SINK_OK;
    case SINK_KIND_BURST:
        return fault_unless(read_unsigned(&fields[2], INT64_MAX, &line->from_us) &&
                            read_u16(&fields[3], &line->before) &&
                            read_u16(&fields[4], &line->after));
    case SINK_KIND_CLOCK:
    case SINK_KIND_OFF:
    case SINK_KIND_RESET:
        return SINK_OK;
    case SINK_KIND_UNKNOWN:
        break;
    }
    return SINK_NO_UNKNOWN;
}

void sink_parse(const char *text, size_t length, struct sink_host_line *line)
{
    struct field fields[FIELDS_MAX];
    size_t count = split(text, length, fields);
    uint8_t own_fields = 0;
    size_t i;

    memset(line, 0, sizeof *line);
    line->kind = SINK_KIND_UNKNOWN;
    line->fault = SINK_NO_UNKNOWN;
    if (count == 0) {
        line->fault = SINK_NO_RANGE;
        return;
    }
    for (i = 0; i < sizeof KINDS / sizeof KINDS[0]; i++) {
        if (is_word(&fields[0], KINDS[i].word)) {
            line->kind = KINDS[i].kind;
            own_fields = KINDS[i].fields;
        }
    }
    if (count < 2 || !read_u16(&fields[1], &line->number)) {
        line->number = 0;
        line->fault = line->kind == SINK_KIND_UNKNOWN ? SINK_NO_UNKNOWN : SINK_NO_RANGE;
        return;
    }
    if (line->kind == SINK_KIND_UNKNOWN) {
        return;
    }
    if (count != own_fields) {
        line->fault = SINK_NO_RANGE;
        return;
    }
    line->fault = parse_fields(fields, line);
    if (line->number == 0 && line->kind > SINK_KIND_OFF) {
        line->fault = SINK_NO_RANGE;
    }
}
