/*
 * What turns the sink off and latches it: the six limits with their
 * persistence, the sensors, the deadman (sections 3, 4 and 6).
 */
#include "internal.h"

#define BIT(cause) ((uint8_t)(1u << ((cause) - 1)))

/* The order in which causes are named when several cross at one sample: what
 * asks the operator to cut the circuit by hand comes first. */
static const uint8_t RANK[SINK_LIMITS] = {SINK_CAUSE_EXCESS,       SINK_CAUSE_CURRENT,
                                          SINK_CAUSE_POWER,        SINK_CAUSE_VOLTAGE_HIGH,
                                          SINK_CAUSE_VOLTAGE_LOW,  SINK_CAUSE_TEMPERATURE};

/* A limit that is not set can never be crossed. */
static int64_t unset_value(enum sink_cause cause)
{
    return cause == SINK_CAUSE_VOLTAGE_LOW ? INT64_MIN : INT64_MAX;
}

void sink_limits_forget(struct sink_core *core)
{
    uint8_t i;

    for (i = 0; i < SINK_LIMITS; i++) {
        core->limits[i].value = unset_value((enum sink_cause)(i + 1));
        core->limits[i].since_us = 0;
        core->limits[i].persist_us = 0;
    }
    core->limits_set = 0;
    core->limits_crossing = 0;
}

void sink_limits_set(struct sink_core *core, uint8_t which, int64_t value, uint32_t persist_us)
{
    enum sink_cause cause = (enum sink_cause)(which + 1);
    struct sink_limit *limit = &core->limits[which];

    /* Power is compared as uA * uV; UINT32_MAX uW is 4.3e15 pW. */
    limit->value = cause == SINK_CAUSE_POWER ? value * 1000000 : value;
    limit->persist_us = persist_us;
    core->limits_set |= BIT(cause);
    core->limits_crossing &= (uint8_t)~BIT(cause);
}

/* The setpoint that the last sample may answer: just after an edge the larger
 * of the old and the new, so that a loop which needs up to a tick to settle
 * downwards is not taken for one that does not let go. */
static uint32_t answered_setpoint(const struct sink_core *core)
{
    return core->setpoint_ua > core->setpoint_before_ua ? core->setpoint_ua
                                                        : core->setpoint_before_ua;
}

/* The last sample in the unit of a limit's value. */
static inline int64_t measured(const struct sink_core *core, enum sink_cause cause)
{
    switch (cause) {
    case SINK_CAUSE_CURRENT:
        return core->current_ua;
    case SINK_CAUSE_POWER:
        return (int64_t)((uint64_t)core->current_ua * core->voltage_uv);
    case SINK_CAUSE_VOLTAGE_HIGH:
    case SINK_CAUSE_VOLTAGE_LOW:
        return core->voltage_uv;
    case SINK_CAUSE_TEMPERATURE:
        return core->sample.temperature_mc;
    case SINK_CAUSE_EXCESS:
        return (int64_t)core->current_ua - answered_setpoint(core);
    case SINK_CAUSE_NONE:
    case SINK_CAUSE_SENSOR:
    case SINK_CAUSE_DEADMAN:
    case SINK_CAUSE_WATCHDOG:
        break;
    }
    return 0;
}

static inline bool crosses(const struct sink_core *core, enum sink_cause cause, int64_t limit)
{
    int64_t value = measured(core, cause);

    return cause == SINK_CAUSE_VOLTAGE_LOW ? value < limit : value > limit;
}

static inline uint8_t crossed(const struct sink_core *core, enum sink_cause cause)
{
    return crosses(core, cause, core->limits[cause - 1].value) ? BIT(cause) : 0;
}

/* Which limits the last sample crosses, among those judged now. Written out, not
 * looped: this is most of what a steady tick does. */
static uint8_t crossing(const struct sink_core *core)
{
    uint8_t result = 0;

    if (core->on) {
        result |= crossed(core, SINK_CAUSE_CURRENT);
        result |= crossed(core, SINK_CAUSE_POWER);
        result |= crossed(core, SINK_CAUSE_VOLTAGE_HIGH);
        result |= crossed(core, SINK_CAUSE_VOLTAGE_LOW);
    }
    if (core->latch == SINK_CAUSE_NONE && core->sample.sensor == SINK_SENSOR_GOOD) {
        result |= crossed(core, SINK_CAUSE_TEMPERATURE);
    }
    /* A sink that does not let go must be found out whether it should be on,
     * off, or is latched already for a lesser cause. */
    if (core->latch != SINK_CAUSE_EXCESS) {
        result |= crossed(core, SINK_CAUSE_EXCESS);
    }
    return result;
}

/* The VALUE of a trip by a converter at its upper stop: 3 the current's, which
 * asks the operator to cut the circuit by hand, 4 the voltage's; 0 if neither. */
static int64_t at_stop(const struct sink_core *core)
{
    uint16_t most = (uint16_t)((1u << core->config.sense_bits) - 1u);

    if (core->sample.current_code >= most) {
        return 3;
    }
    return core->sample.voltage_code >= most ? 4 : 0;
}

void sink_limits_trip(struct sink_core *core, enum sink_cause cause, int64_t value,
                      uint64_t now_us)
{
    sink_queue_off(core);
    core->latch = (uint8_t)cause;
    core->latch_limit = cause <= SINK_CAUSE_EXCESS ? core->limits[cause - 1].value : 0;
    /* Where the gate may have lost its say, only the relay can still cut. */
    if (cause == SINK_CAUSE_EXCESS || (cause == SINK_CAUSE_SENSOR && value >= 3)) {
        core->drive.isolator = false;
    }
    sink_event_trip(core, now_us, cause, value);
}

static bool trip_by_sensor(struct sink_core *core, uint64_t now_us)
{
    int64_t value;

    if (core->latch != SINK_CAUSE_NONE) {
        return false;
    }
    if (core->sample.sensor == SINK_SENSOR_OPEN) {
        value = 1;
    } else if (core->sample.sensor != SINK_SENSOR_GOOD) {
        value = 2;
    } else {
        value = core->on ? at_stop(core) : 0;
    }
    if (value == 0) {
        return false;
    }
    sink_limits_trip(core, SINK_CAUSE_SENSOR, value, now_us);
    return true;
}

static bool trip_by_limit(struct sink_core *core, uint64_t now_us)
{
    uint8_t now_crossing = crossing(core);
    uint8_t fresh;
    uint8_t i;

    if (now_crossing == 0) {
        core->limits_crossing = 0;
        return false;
    }
    fresh = (uint8_t)(now_crossing & ~core->limits_crossing);
    core->limits_crossing = now_crossing;
    for (i = 0; i < SINK_LIMITS; i++) {
        if ((fresh & (1u << i)) != 0) {
            core->limits[i].since_us = now_us;
        }
    }
    for (i = 0; i < SINK_LIMITS; i++) {
        enum sink_cause cause = (enum sink_cause)RANK[i];
        const struct sink_limit *limit = &core->limits[cause - 1];

        if ((now_crossing & BIT(cause)) != 0 && now_us - limit->since_us >= limit->persist_us) {
            int64_t value = measured(core, cause);

            sink_limits_trip(core, cause,
                             cause == SINK_CAUSE_POWER ? value / 1000000 : value, now_us);
            return true;
        }
    }
    return false;
}

/* The deadman watches from the first step accepted until off: a host that dies
 * with steps queued must not leave a sink that turns on by itself. */
static bool deadman_armed(const struct sink_core *core)
{
    return core->on || core->queued > 0;
}

static void trip_by_deadman(struct sink_core *core, uint64_t now_us)
{
    if (deadman_armed(core) && now_us - core->heard_us >= core->deadman_us) {
        sink_limits_trip(core, SINK_CAUSE_DEADMAN, (int64_t)(now_us - core->heard_us), now_us);
    }
}

void sink_limits_judge(struct sink_core *core, uint64_t now_us)
{
    if (!trip_by_sensor(core, now_us) && !trip_by_limit(core, now_us)) {
        trip_by_deadman(core, now_us);
    }
}

bool sink_limits_cause_stands(const struct sink_core *core)
{
    enum sink_cause cause = (enum sink_cause)core->latch;
    int64_t limit;

    if (cause == SINK_CAUSE_SENSOR) {
        return core->sample.sensor != SINK_SENSOR_GOOD || at_stop(core) != 0;
    }
    if (cause == SINK_CAUSE_NONE || cause > SINK_CAUSE_EXCESS) {
        return false;
    }
    /* A session that has set no limit yet is judged by the one that tripped. */
    limit = (core->limits_set & BIT(cause)) != 0 ? core->limits[cause - 1].value
                                                 : core->latch_limit;
    if (cause == SINK_CAUSE_TEMPERATURE && core->sample.sensor != SINK_SENSOR_GOOD) {
        return true;
    }
    return crosses(core, cause, limit);
}

uint64_t sink_limits_due(const struct sink_core *core)
{
    uint64_t due = SINK_NEVER;
    uint8_t i;

    for (i = 0; i < SINK_LIMITS; i++) {
        if ((core->limits_crossing & (1u << i)) != 0) {
            uint64_t at = core->limits[i].since_us + core->limits[i].persist_us;

            due = at < due ? at : due;
        }
    }
    if (deadman_armed(core)) {
        uint64_t at = core->heard_us + core->deadman_us;

        due = at < due ? at : due;
    }
    return due;
}
