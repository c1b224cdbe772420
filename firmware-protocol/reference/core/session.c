/*
 * Asks and orders: numbers, answers, and executing at most once (section 2).
 */
#include "internal.h"

#include <string.h>

uint16_t sink_next_number(uint16_t number)
{
    return number == UINT16_MAX ? 1u : (uint16_t)(number + 1u);
}

static void put_answer(struct sink_core *core, uint16_t number, enum sink_answer answer)
{
    static const char *const words[] = {"",     "session", "unknown", "range", "limit", "unready",
                                        "full", "late",    "latched", "cause", "ability", "gap"};
    struct sink_text text;

    sink_text_begin(&text, answer == SINK_OK ? "ok" : "no");
    sink_text_unsigned(&text, number);
    if (answer != SINK_OK) {
        sink_text_word(&text, words[answer]);
    }
    if (answer == SINK_NO_GAP) {
        sink_text_unsigned(&text, core->expected);
    }
    sink_text_end(&text);
    (void)sink_transmit_put(core, &text, SINK_ROOM_ANSWER);
}

/* ---- asks ---- */

static void put_off_done(struct sink_core *core, uint16_t token)
{
    struct sink_text text;

    sink_text_begin(&text, "ok");
    sink_text_unsigned(&text, token);
    sink_text_word(&text, "off");
    sink_text_end(&text);
    (void)sink_transmit_put(core, &text, SINK_ROOM_ANSWER);
}

void sink_session_answer_offs(struct sink_core *core)
{
    uint8_t i;

    for (i = 0; i < core->off_pending; i++) {
        put_off_done(core, core->off_tokens[i]);
    }
    core->off_pending = 0;
}

static void ask_off(struct sink_core *core, uint16_t token)
{
    const uint8_t most = sizeof core->off_tokens / sizeof core->off_tokens[0];

    sink_core_off(core);
    /* The answer says that the converter is at zero, which the port only does
     * after the next tick. More offs within one tick than can be kept go
     * without an answer of their own; the current is off all the same. */
    if (!core->drive.gate && core->drive.code == 0) {
        put_off_done(core, token);
    } else if (core->off_pending < most) {
        core->off_tokens[core->off_pending] = token;
        core->off_pending++;
    }
}

static void ask_clock(struct sink_core *core, uint16_t token, uint64_t now_us)
{
    struct sink_text text;

    sink_text_begin(&text, "clock");
    sink_text_unsigned(&text, token);
    sink_text_unsigned(&text, now_us);
    sink_text_end(&text);
    (void)sink_transmit_put(core, &text, SINK_ROOM_ANSWER);
}

static void begin_description(struct sink_text *text, const char *kind, uint16_t token)
{
    sink_text_begin(text, kind);
    sink_text_unsigned(text, token);
}

static void end_description(struct sink_core *core, struct sink_text *text)
{
    sink_text_end(text);
    (void)sink_transmit_put(core, text, SINK_ROOM_ANSWER);
}

static void describe(struct sink_core *core, uint16_t token, uint64_t now_us)
{
    static const char *const resets[] = {"power", "pin", "watchdog", "software", "unknown"};
    const struct sink_core_config *config = &core->config;
    struct sink_text text;

    begin_description(&text, "about", token);
    sink_text_unsigned(&text, SINK_PROTOCOL);
    sink_text_unsigned(&text, SINK_FIRMWARE);
    sink_text_unsigned(&text, config->serial);
    sink_text_word(&text, resets[core->reset]);
    end_description(core, &text);

    begin_description(&text, "front", token);
    sink_text_unsigned(&text, config->tick_us);
    sink_text_unsigned(&text, config->queue_depth);
    sink_text_unsigned(&text, config->fastest_readback_us);
    sink_text_unsigned(&text, config->burst_samples);
    sink_text_unsigned(&text, config->abilities);
    end_description(core, &text);

    begin_description(&text, "drive", token);
    sink_text_unsigned(&text, config->drive_bits);
    sink_text_unsigned(&text, config->drive_full_scale_uv);
    sink_text_unsigned(&text, config->drive_span);
    sink_text_unsigned(&text, config->sense_resistor_uohm);
    end_description(core, &text);

    begin_description(&text, "sense", token);
    sink_text_unsigned(&text, config->sense_bits);
    sink_text_unsigned(&text, config->sense_current_ua);
    sink_text_unsigned(&text, config->sense_voltage_uv);
    end_description(core, &text);

    begin_description(&text, "ready", token);
    sink_text_unsigned(&text, core->session);
    sink_text_unsigned(&text, now_us);
    end_description(core, &text);
}

static void ask_hello(struct sink_core *core, const struct sink_host_line *line, uint64_t now_us)
{
    /* A repeated hello whose session has used no number changes nothing: its
     * description may have been lost. */
    if (core->session != line->session || core->answered != 0) {
        sink_core_off(core);
        sink_limits_forget(core);
        core->session = line->session;
        core->expected = 1;
        core->answered = 0;
        core->step_order = 0;
        core->deadman_us = 2000000;
        core->readback_us = 0;
        core->readback_due_us = SINK_NEVER;
    }
    /* All five lines or none: half a description would look like a fault. */
    if (sink_transmit_free(core) >= SINK_ROOM_DESCRIPTION) {
        describe(core, line->number, now_us);
    }
}

/* ---- orders ---- */

static enum sink_answer order_readback(struct sink_core *core, uint32_t interval_us,
                                       uint64_t now_us)
{
    if (interval_us != 0 && interval_us < core->config.fastest_readback_us) {
        return SINK_NO_RANGE;
    }
    core->readback_us = interval_us;
    core->readback_due_us = interval_us == 0 ? SINK_NEVER : now_us + interval_us;
    sink_window_restart(core);
    return SINK_OK;
}

static enum sink_answer order_reset(struct sink_core *core)
{
    if (core->latch != SINK_CAUSE_NONE && sink_limits_cause_stands(core)) {
        return SINK_NO_CAUSE;
    }
    core->latch = SINK_CAUSE_NONE;
    return SINK_OK;
}

static enum sink_answer order_isolator(struct sink_core *core, bool closed)
{
    if ((core->config.abilities & SINK_ABILITY_ISOLATOR) == 0) {
        return SINK_NO_ABILITY;
    }
    if (closed && core->latch != SINK_CAUSE_NONE) {
        return SINK_NO_LATCHED;
    }
    if (!closed) {
        sink_queue_off(core);
    }
    core->drive.isolator = closed;
    return SINK_OK;
}

static enum sink_answer execute(struct sink_core *core, const struct sink_host_line *line,
                                uint64_t now_us)
{
    switch (line->kind) {
    case SINK_KIND_LIMIT:
        sink_limits_set(core, line->which, line->value, line->persist_us);
        return SINK_OK;
    case SINK_KIND_DEADMAN:
        core->deadman_us = line->interval_us;
        return SINK_OK;
    case SINK_KIND_READBACK:
        return order_readback(core, line->interval_us, now_us);
    case SINK_KIND_STEP:
        return sink_queue_add(core, &line->step, now_us);
    case SINK_KIND_CLEAR:
        sink_queue_clear(core, line->from_us);
        return SINK_OK;
    case SINK_KIND_RESET:
        return order_reset(core);
    case SINK_KIND_ISOLATOR:
        return order_isolator(core, line->closed);
    case SINK_KIND_BURST:
        return sink_burst_arm(core, line->from_us, line->before, line->after, now_us);
    case SINK_KIND_HELLO:
    case SINK_KIND_CLOCK:
    case SINK_KIND_OFF:
    case SINK_KIND_UNKNOWN:
        break;
    }
    return SINK_NO_UNKNOWN;
}

/* How many orders ago `number` was, 1 for the last; 0 if it is not among the
 * answers kept. Numbers run from 1 to 65535. */
static uint8_t answer_age(const struct sink_core *core, uint16_t number)
{
    uint32_t age = core->expected >= number ? (uint32_t)core->expected - number
                                            : (uint32_t)core->expected + UINT16_MAX - number;

    return age <= core->answered ? (uint8_t)age : 0;
}

/* The latest answer stands first. */
static void remember(struct sink_core *core, enum sink_answer answer)
{
    memmove(core->answers + 1, core->answers, SINK_ANSWERS - 1u);
    core->answers[0] = (uint8_t)answer;
    if (core->answered < SINK_ANSWERS) {
        core->answered++;
    }
    core->expected = sink_next_number(core->expected);
}

static void take_order(struct sink_core *core, const struct sink_host_line *line, uint64_t now_us)
{
    enum sink_answer answer;
    uint8_t age;

    if (line->number == 0) {
        put_answer(core, 0, line->fault);
        return;
    }
    if (core->session == 0) {
        put_answer(core, line->number, SINK_NO_SESSION);
        return;
    }
    age = answer_age(core, line->number);
    if (age != 0) {
        put_answer(core, line->number, (enum sink_answer)core->answers[age - 1u]);
        return;
    }
    if (line->number != core->expected) {
        put_answer(core, line->number, SINK_NO_GAP);
        return;
    }
    /* An order whose answer has no room is treated as lost on the way: it will
     * be sent again. So nothing is ever executed that cannot be answered. */
    if (sink_transmit_free(core) < SINK_LINE_BYTES) {
        return;
    }
    answer = line->fault == SINK_OK ? execute(core, line, now_us) : line->fault;
    remember(core, answer);
    put_answer(core, line->number, answer);
}

void sink_session_line(struct sink_core *core, const struct sink_host_line *line, uint64_t now_us)
{
    core->unsettled = true;
    if (line->kind > SINK_KIND_OFF) {
        take_order(core, line, now_us);
    } else if (line->fault != SINK_OK) {
        put_answer(core, 0, SINK_NO_RANGE);
    } else if (line->kind == SINK_KIND_HELLO) {
        ask_hello(core, line, now_us);
    } else if (line->kind == SINK_KIND_CLOCK) {
        ask_clock(core, line->number, now_us);
    } else {
        ask_off(core, line->number);
    }
}
