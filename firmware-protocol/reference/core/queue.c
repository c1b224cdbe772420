/*
 * The queue of steps: in order, each at the first tick at or after its start.
 */
#include "internal.h"

static const struct sink_step *queued_step(const struct sink_core *core, uint16_t place)
{
    return &core->queue[(core->queue_head + place) % SINK_QUEUE_MAX];
}

static bool able(const struct sink_core *core, const struct sink_step *step)
{
    switch (step->mode) {
    case SINK_MODE_POWER:
        return (core->config.abilities & SINK_ABILITY_POWER) != 0;
    case SINK_MODE_RESISTANCE:
        return (core->config.abilities & SINK_ABILITY_RESISTANCE) != 0;
    default:
        return true;
    }
}

static bool within_limits(const struct sink_core *core, const struct sink_step *step)
{
    switch (step->mode) {
    case SINK_MODE_CURRENT:
        return (int64_t)step->target <= core->limits[SINK_CAUSE_CURRENT - 1].value;
    case SINK_MODE_POWER:
        return (int64_t)step->target * 1000000 <= core->limits[SINK_CAUSE_POWER - 1].value;
    default:
        return true;
    }
}

enum sink_answer sink_queue_add(struct sink_core *core, const struct sink_step *step,
                                uint64_t now_us)
{
    struct sink_step added = *step;

    if (!able(core, step)) {
        return SINK_NO_ABILITY;
    }
    if (core->latch != SINK_CAUSE_NONE) {
        return SINK_NO_LATCHED;
    }
    if (core->limits_set != (1u << SINK_LIMITS) - 1u) {
        return SINK_NO_UNREADY;
    }
    if (!within_limits(core, step)) {
        return SINK_NO_LIMIT;
    }
    added.at_once = step->start_us == 0;
    if (added.at_once) {
        added.start_us = now_us;
    } else if (step->start_us < now_us) {
        return SINK_NO_LATE;
    }
    if (core->queued > 0 &&
        added.start_us < queued_step(core, (uint16_t)(core->queued - 1u))->start_us) {
        return SINK_NO_RANGE;
    }
    if (core->queued >= core->config.queue_depth) {
        return SINK_NO_FULL;
    }
    core->queue[(core->queue_head + core->queued) % SINK_QUEUE_MAX] = added;
    core->queued++;
    return SINK_OK;
}

void sink_queue_clear(struct sink_core *core, uint64_t from_us)
{
    /* Starts never decrease along the queue, so what goes is its tail. */
    while (core->queued > 0 &&
           queued_step(core, (uint16_t)(core->queued - 1u))->start_us >= from_us) {
        core->queued--;
    }
}

void sink_queue_off(struct sink_core *core)
{
    core->on = false;
    core->queued = 0;
    core->ramping = false;
    core->unsettled = true;
}

static void begin(struct sink_core *core, uint64_t now_us)
{
    struct sink_step next = *queued_step(core, 0);

    core->queue_head = (uint16_t)((core->queue_head + 1u) % SINK_QUEUE_MAX);
    core->queued--;
    if (next.at_once) {
        next.start_us = now_us;
    }
    /* From where the setpoint is, in the same mode; a current from zero when
     * off. Anything else would start from a number of another unit, or, for a
     * resistance from zero, with a short circuit: from the target itself. */
    if (core->on && core->step.mode == next.mode) {
        core->ramp_from = sink_setpoint_at(core, next.start_us);
    } else if (!core->on && next.mode != SINK_MODE_RESISTANCE) {
        core->ramp_from = 0;
    } else {
        core->ramp_from = next.target;
    }
    core->step = next;
    core->step_order = next.order;
    core->ramping = next.ramp_us != 0 && core->ramp_from != next.target;
    core->on = true;
    core->unsettled = true;
    sink_event_edge(core, now_us, next.order);
}

static uint64_t hold_end(const struct sink_core *core)
{
    uint64_t start = core->step.start_us;

    return core->step.hold_us > SINK_NEVER - start ? SINK_NEVER : start + core->step.hold_us;
}

void sink_queue_run(struct sink_core *core, uint64_t now_us)
{
    while (core->queued > 0 && queued_step(core, 0)->start_us <= now_us) {
        begin(core, now_us);
    }
    if (core->on && core->queued == 0 && now_us >= hold_end(core)) {
        sink_queue_off(core);
        sink_event_end(core, now_us);
    }
}

uint64_t sink_queue_due(const struct sink_core *core)
{
    if (core->queued > 0) {
        return queued_step(core, 0)->start_us;
    }
    return core->on ? hold_end(core) : SINK_NEVER;
}
