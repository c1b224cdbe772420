/*
 * From the step in progress to a converter code.
 */
#include "internal.h"

/* A setpoint counts as not followed when the sample falls short of it by more
 * than an eighth of the setpoint and a 256th of the full scale: wider than the
 * errors of an uncalibrated sink, narrower than a source that gives up. */
#define SHORT_OF_SETPOINT_SHIFT 3
#define SHORT_OF_SCALE_SHIFT 8

uint32_t sink_setpoint_at(const struct sink_core *core, uint64_t now_us)
{
    const struct sink_step *step = &core->step;
    uint64_t elapsed;
    uint64_t whole = step->ramp_us;
    bool rises = step->target > core->ramp_from;
    uint32_t distance = rises ? step->target - core->ramp_from : core->ramp_from - step->target;
    uint32_t moved;

    if (!core->ramping || now_us >= step->start_us + step->ramp_us) {
        return step->target;
    }
    elapsed = now_us > step->start_us ? now_us - step->start_us : 0;
    /* distance * elapsed must fit 64 bits: of ramps beyond 71 minutes the
     * finest microseconds are dropped, which moves the setpoint by less than
     * 2^-31 of the distance. */
    while (whole > UINT32_MAX) {
        whole >>= 1;
        elapsed >>= 1;
    }
    moved = (uint32_t)((uint64_t)distance * elapsed / whole);
    return rises ? core->ramp_from + moved : core->ramp_from - moved;
}

/* The current that the step asks for at this voltage, rounded down; no more
 * than 32 bits. Without any voltage there is nothing to draw from: zero. */
static uint32_t wanted_current(const struct sink_core *core, uint32_t setpoint)
{
    uint64_t current;

    switch (core->step.mode) {
    case SINK_MODE_POWER:
        if (core->voltage_uv == 0) {
            return 0;
        }
        current = (uint64_t)setpoint * 1000000u / core->voltage_uv;
        break;
    case SINK_MODE_RESISTANCE:
        current = setpoint == 0 ? 0 : (uint64_t)core->voltage_uv * 1000000u / setpoint;
        break;
    default:
        current = setpoint;
        break;
    }
    return current > UINT32_MAX ? UINT32_MAX : (uint32_t)current;
}

/* Bounded by the limits as they are now: they may have been lowered after the
 * step was accepted. */
static uint32_t bounded_setpoint(const struct sink_core *core, uint32_t setpoint)
{
    int64_t power = core->limits[SINK_CAUSE_POWER - 1].value / 1000000;

    return core->step.mode == SINK_MODE_POWER && (int64_t)setpoint > power ? (uint32_t)power
                                                                           : setpoint;
}

static uint32_t bounded_current(const struct sink_core *core, uint32_t current)
{
    int64_t most = core->limits[SINK_CAUSE_CURRENT - 1].value;

    return (int64_t)current > most ? (uint32_t)most : current;
}

/* code = I * R * codes / full scale, to the nearest, halves up. With I below
 * 2^32 uA and R below 2^30 uohm, I * R (pV) is below 2^62. Below the full scale
 * below 1e8 uV = 1e14 pV < 2^47, times at most 2^16 codes, it fits again. */
static uint16_t code_for(const struct sink_core *core, uint32_t current, bool *at_stop)
{
    uint64_t drop_pv = (uint64_t)current * core->config.sense_resistor_uohm;
    uint64_t full_pv = (uint64_t)core->config.drive_full_scale_uv * 1000000u;
    uint32_t most = (1u << core->config.drive_bits) - 1u;
    uint64_t code = most;

    if (drop_pv < full_pv) {
        code = (drop_pv * core->drive_steps + full_pv / 2u) / full_pv;
    }
    *at_stop = code >= most;
    return (uint16_t)(code < most ? code : most);
}

static bool falls_short(const struct sink_core *core)
{
    /* Just after an edge the smaller of old and new setpoint is what must have
     * been reached. */
    uint32_t reached = core->setpoint_ua < core->setpoint_before_ua ? core->setpoint_ua
                                                                    : core->setpoint_before_ua;
    uint32_t tolerance = (reached >> SHORT_OF_SETPOINT_SHIFT) +
                         (core->config.sense_current_ua >> SHORT_OF_SCALE_SHIFT);

    return (uint64_t)core->current_ua + tolerance < reached;
}

/* Whether the setpoint is sure to be what it was: nothing began, ended, ramps or
 * was ordered, and no voltage has a say. */
static bool steady(const struct sink_core *core)
{
    return core->still >= 2 && !core->unsettled && !core->ramping &&
           (!core->on || core->step.mode == SINK_MODE_CURRENT);
}

static uint32_t current_at(struct sink_core *core, uint64_t now_us)
{
    uint32_t setpoint = sink_setpoint_at(core, now_us);

    if (now_us >= core->step.start_us + core->step.ramp_us) {
        core->ramping = false;
    }
    return bounded_current(core, wanted_current(core, bounded_setpoint(core, setpoint)));
}

static void put_current(struct sink_core *core, uint32_t current)
{
    bool at_stop = false;

    core->setpoint_before_ua = core->setpoint_ua;
    if (current == core->setpoint_ua) {
        core->still = core->still < 2 ? (uint8_t)(core->still + 1u) : 2;
        return;
    }
    core->still = 0;
    core->setpoint_ua = current;
    core->drive.gate = current != 0;
    core->drive.code = current == 0 ? 0 : code_for(core, current, &at_stop);
    core->at_stop = at_stop;
}

void sink_regulate(struct sink_core *core, uint64_t now_us)
{
    bool short_of = falls_short(core);

    if (!steady(core)) {
        put_current(core, core->on ? current_at(core, now_us) : 0);
    }
    core->saturated = core->on && (core->at_stop || short_of);
}
