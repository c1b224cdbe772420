/*
 * What the core's files know of each other. Nothing here is for ports.
 */
#ifndef SINK_INTERNAL_H
#define SINK_INTERNAL_H

#include "core.h"

#define SINK_NEVER UINT64_MAX

/* Thousandths of a degree that a line can carry (section 8). */
#define SINK_TEMPERATURE_LEAST (-99999)
#define SINK_TEMPERATURE_MOST 999999

/* Nominal value of a code: (code * full scale + half) / 2^bits, rounded down.
 * 2^16 * 2^30 fits 64 bits, and the result 32. */
static inline uint32_t sink_nominal(uint16_t code, uint32_t full_scale, uint8_t bits)
{
    return (uint32_t)(((uint64_t)code * full_scale + (UINT64_C(1) << (bits - 1))) >> bits);
}

/* ---- text.c: checksums, and lines on their way out ---- */

uint16_t sink_crc(const char *bytes, size_t length);

/* A line being written. Overfull lines become `broken` and are not sent. */
struct sink_text {
    char bytes[SINK_LINE_BYTES];
    uint8_t length;
    bool broken;
};

void sink_text_begin(struct sink_text *text, const char *kind);
void sink_text_word(struct sink_text *text, const char *word);
void sink_text_unsigned(struct sink_text *text, uint64_t value);
void sink_text_signed(struct sink_text *text, int64_t value);
/* Adds checksum and line end. */
void sink_text_end(struct sink_text *text);

/* ---- transmit.c: the ring of bytes for the host ---- */

/* Room left free by each class of line, so that the more important still fit
 * (section 7): a readback leaves room for an event and a description, an event
 * for a description, an answer for none. */
#define SINK_ROOM_ANSWER 0u
#define SINK_ROOM_DESCRIPTION (5u * SINK_LINE_BYTES)
#define SINK_ROOM_EVENT SINK_ROOM_DESCRIPTION
#define SINK_ROOM_READBACK (SINK_ROOM_DESCRIPTION + SINK_LINE_BYTES)

size_t sink_transmit_free(const struct sink_core *core);
/* Puts a whole line, if `length + room` bytes are free; else nothing. */
bool sink_transmit_put(struct sink_core *core, const struct sink_text *text, size_t room);

/* ---- parse.c: a line into what it orders ---- */

enum sink_kind {
    SINK_KIND_HELLO,
    SINK_KIND_CLOCK,
    SINK_KIND_OFF,
    SINK_KIND_LIMIT,
    SINK_KIND_DEADMAN,
    SINK_KIND_READBACK,
    SINK_KIND_STEP,
    SINK_KIND_CLEAR,
    SINK_KIND_RESET,
    SINK_KIND_ISOLATOR,
    SINK_KIND_BURST,
    SINK_KIND_UNKNOWN
};

/* Answers to an order, as cached. */
enum sink_answer {
    SINK_OK,
    SINK_NO_SESSION,
    SINK_NO_UNKNOWN,
    SINK_NO_RANGE,
    SINK_NO_LIMIT,
    SINK_NO_UNREADY,
    SINK_NO_FULL,
    SINK_NO_LATE,
    SINK_NO_LATCHED,
    SINK_NO_CAUSE,
    SINK_NO_ABILITY,
    SINK_NO_GAP
};

/* A host line, taken apart. */
struct sink_host_line {
    enum sink_kind kind;
    enum sink_answer fault; /* SINK_OK, SINK_NO_UNKNOWN or SINK_NO_RANGE */
    uint16_t number;        /* token or order number; 0 if it cannot be read */
    uint32_t session;
    uint8_t which;          /* limit index */
    int64_t value;
    uint32_t persist_us;
    uint32_t interval_us;
    struct sink_step step;
    uint64_t from_us;       /* clear; burst's AT */
    uint16_t before, after;
    bool closed;
};

/* Takes the text apart (checksum already off). Always fills *line. */
void sink_parse(const char *text, size_t length, struct sink_host_line *line);

/* ---- session.c: asks and orders ---- */

/* A complete line whose checksum was right. */
void sink_session_line(struct sink_core *core, const struct sink_host_line *line, uint64_t now_us);
/* Answers the offs that waited for the converter to be at zero. */
void sink_session_answer_offs(struct sink_core *core);
/* The next of the counters that run from 1 to 65535 and wrap to 1. */
uint16_t sink_next_number(uint16_t number);

/* ---- queue.c: steps ---- */

enum sink_answer sink_queue_add(struct sink_core *core, const struct sink_step *step,
                                uint64_t now_us);
void sink_queue_clear(struct sink_core *core, uint64_t from_us);
/* Begins the steps that are due and ends the last when its hold is over. */
void sink_queue_run(struct sink_core *core, uint64_t now_us);
/* When the queue would next do something of itself. */
uint64_t sink_queue_due(const struct sink_core *core);
/* Off: no step in progress, none queued. Leaves latch and capture alone. */
void sink_queue_off(struct sink_core *core);

/* ---- limits.c: what turns off and latches ---- */

/* Judges the last sample; may trip. */
void sink_limits_judge(struct sink_core *core, uint64_t now_us);
void sink_limits_forget(struct sink_core *core);
void sink_limits_set(struct sink_core *core, uint8_t which, int64_t value, uint32_t persist_us);
void sink_limits_trip(struct sink_core *core, enum sink_cause cause, int64_t value,
                      uint64_t now_us);
/* Whether what caused the latch still shows in the last sample. */
bool sink_limits_cause_stands(const struct sink_core *core);
/* When a crossing or the deadman would next trip, if nothing changes. */
uint64_t sink_limits_due(const struct sink_core *core);

/* ---- counters.c: charge, energy, readbacks ---- */

/* Counts the last sample over elapsed_us (at most SINK_TICK_GAP_US_MAX). */
void sink_counters_add(struct sink_core *core, uint64_t elapsed_us);
void sink_window_restart(struct sink_core *core);
/* Sends the readback pair if it is due. */
void sink_readback_run(struct sink_core *core, uint64_t now_us);

/* ---- regulate.c: from the step in progress to a converter code ---- */

/* The setpoint of the step in progress at a time, in the unit of its mode. */
uint32_t sink_setpoint_at(const struct sink_core *core, uint64_t now_us);
/* Works out setpoint, code, gate and whether the loop follows. */
void sink_regulate(struct sink_core *core, uint64_t now_us);

/* ---- burst.c: capture around an edge ---- */

enum sink_burst_phase { SINK_BURST_IDLE, SINK_BURST_ARMED, SINK_BURST_TAKING, SINK_BURST_SENDING };

enum sink_answer sink_burst_arm(struct sink_core *core, uint64_t at_us, uint16_t before,
                                uint16_t after, uint64_t now_us);
/* Takes the last sample `times` times over, all before the capture's AT unless
 * times is 1. */
void sink_burst_sample(struct sink_core *core, uint64_t now_us, uint32_t times);
/* Sends a piece if nothing else waits. */
void sink_burst_send(struct sink_core *core);
void sink_burst_give_up(struct sink_core *core);

/* ---- events.c: edge, end, trip ---- */

void sink_event_edge(struct sink_core *core, uint64_t now_us, uint16_t order);
void sink_event_end(struct sink_core *core, uint64_t now_us);
void sink_event_trip(struct sink_core *core, uint64_t now_us, enum sink_cause cause,
                     int64_t value);

#endif
