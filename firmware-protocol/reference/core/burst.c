/*
 * Capture around an edge. The memory is a ring that always holds the latest
 * samples, so that those before the edge are there when it comes; it stands
 * still only while a capture is being sent.
 */
#include "internal.h"

/* Pairs a line holds at most. */
#define PAIRS 4u
/* Bytes of one pair at most: two values of up to nine digits, two spaces. */
#define PAIR_BYTES 20u
/* Checksum with its space, and the line end. */
#define TAIL_BYTES 6u

enum sink_answer sink_burst_arm(struct sink_core *core, uint64_t at_us, uint16_t before,
                                uint16_t after, uint64_t now_us)
{
    struct sink_burst *burst = &core->burst;
    uint32_t samples = (uint32_t)before + after;

    if ((core->config.abilities & SINK_ABILITY_BURST) == 0) {
        return SINK_NO_ABILITY;
    }
    if (samples == 0 || samples > core->config.burst_samples) {
        return SINK_NO_RANGE;
    }
    if (burst->phase != SINK_BURST_IDLE) {
        return SINK_NO_FULL;
    }
    if (at_us < now_us) {
        return SINK_NO_LATE;
    }
    burst->phase = SINK_BURST_ARMED;
    burst->at_us = at_us;
    burst->before = before;
    burst->after = after;
    return SINK_OK;
}

void sink_burst_give_up(struct sink_core *core)
{
    if (core->burst.phase == SINK_BURST_SENDING) {
        core->burst.filled = 0;
    }
    core->burst.phase = SINK_BURST_IDLE;
}

static void push(struct sink_core *core)
{
    struct sink_burst *burst = &core->burst;

    burst->current[burst->head] = core->sample.current_code;
    burst->voltage[burst->head] = core->sample.voltage_code;
    burst->head++;
    if (burst->head == core->config.burst_samples) {
        burst->head = 0;
    }
    if (burst->filled < core->config.burst_samples) {
        burst->filled++;
    }
}

/* The first sample at or after AT has come: from here on, `after` samples. */
static void start_taking(struct sink_burst *burst)
{
    /* Soon after power-up, or after the last capture, there may be fewer
     * samples before than asked for; the indexes of the rest stay the same. */
    uint16_t before = burst->filled < burst->before ? burst->filled : burst->before;

    burst->next = (uint16_t)(burst->before - before);
    burst->total = (uint16_t)(burst->before + burst->after);
    burst->wanted = burst->after;
    burst->phase = SINK_BURST_TAKING;
}

void sink_burst_sample(struct sink_core *core, uint64_t now_us, uint32_t times)
{
    struct sink_burst *burst = &core->burst;
    uint32_t i;

    if (core->config.burst_samples == 0 || burst->phase == SINK_BURST_SENDING) {
        return;
    }
    if (burst->phase == SINK_BURST_ARMED && now_us >= burst->at_us) {
        start_taking(burst);
    }
    if (burst->phase != SINK_BURST_TAKING) {
        for (i = 0; i < times && i < core->config.burst_samples; i++) {
            push(core);
        }
        return;
    }
    if (burst->wanted > 0) {
        push(core);
        burst->wanted--;
    }
    if (burst->wanted == 0) {
        burst->phase = SINK_BURST_SENDING;
        burst->number = sink_next_number(burst->number);
    }
}

/* Where in the ring the capture's sample `index` lies: the last of the capture
 * is the last that was pushed. */
static uint16_t place(const struct sink_core *core, uint16_t index)
{
    uint16_t size = core->config.burst_samples;
    uint16_t back = (uint16_t)(core->burst.total - index);

    return (uint16_t)((core->burst.head + size - back) % size);
}

static void put_nominal(struct sink_text *text, uint16_t code, uint32_t full_scale, uint8_t bits)
{
    sink_text_unsigned(text, sink_nominal(code, full_scale, bits));
}

void sink_burst_send(struct sink_core *core)
{
    struct sink_burst *burst = &core->burst;
    const struct sink_core_config *config = &core->config;
    struct sink_text text;
    uint8_t pairs;

    /* One line at a time, and only when nothing else waits: orders come first. */
    if (burst->phase != SINK_BURST_SENDING || core->transmit.used != 0) {
        return;
    }
    sink_text_begin(&text, "b");
    sink_text_unsigned(&text, burst->number);
    if (burst->next >= burst->total) {
        sink_text_word(&text, "done");
        sink_burst_give_up(core);
    } else {
        sink_text_unsigned(&text, burst->next);
        for (pairs = 0; pairs < PAIRS && burst->next < burst->total; pairs++) {
            uint16_t at = place(core, burst->next);

            if (text.length + PAIR_BYTES + TAIL_BYTES > SINK_LINE_BYTES) {
                break;
            }
            put_nominal(&text, burst->current[at], config->sense_current_ua, config->sense_bits);
            put_nominal(&text, burst->voltage[at], config->sense_voltage_uv, config->sense_bits);
            burst->next++;
        }
    }
    sink_text_end(&text);
    (void)sink_transmit_put(core, &text, SINK_ROOM_ANSWER);
}
