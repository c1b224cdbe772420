/*
 * Edge, end and trip: what the sink says of its own accord.
 */
#include "internal.h"

static void begin_event(struct sink_core *core, struct sink_text *text, const char *kind,
                        uint64_t now_us)
{
    /* The number is used up even if the line finds no room: the gap tells. */
    core->event_number = sink_next_number(core->event_number);
    sink_text_begin(text, kind);
    sink_text_unsigned(text, core->event_number);
    sink_text_unsigned(text, now_us);
}

static void end_event(struct sink_core *core, struct sink_text *text)
{
    sink_text_end(text);
    (void)sink_transmit_put(core, text, SINK_ROOM_EVENT);
}

void sink_event_edge(struct sink_core *core, uint64_t now_us, uint16_t order)
{
    struct sink_text text;

    begin_event(core, &text, "edge", now_us);
    sink_text_unsigned(&text, order);
    end_event(core, &text);
}

void sink_event_end(struct sink_core *core, uint64_t now_us)
{
    struct sink_text text;

    begin_event(core, &text, "end", now_us);
    end_event(core, &text);
}

void sink_event_trip(struct sink_core *core, uint64_t now_us, enum sink_cause cause,
                     int64_t value)
{
    static const char *const words[] = {"none",        "current", "power",  "voltage-high",
                                        "voltage-low", "temperature", "excess", "sensor",
                                        "deadman",     "watchdog"};
    struct sink_text text;

    begin_event(core, &text, "trip", now_us);
    sink_text_word(&text, words[cause]);
    sink_text_signed(&text, value);
    end_event(core, &text);
}
