/*
 * The tick: count what was measured, judge it, then act.
 */
#include "internal.h"

static void take_sample(struct sink_core *core, const struct sink_core_sample *sample)
{
    const struct sink_core_config *config = &core->config;
    uint16_t most = (uint16_t)((1u << config->sense_bits) - 1u);

    core->sample = *sample;
    /* A code the converter cannot give counts as its stop. */
    if (core->sample.current_code > most) {
        core->sample.current_code = most;
    }
    if (core->sample.voltage_code > most) {
        core->sample.voltage_code = most;
    }
    core->current_ua =
        sink_nominal(core->sample.current_code, config->sense_current_ua, config->sense_bits);
    core->voltage_uv =
        sink_nominal(core->sample.voltage_code, config->sense_voltage_uv, config->sense_bits);
}

static uint64_t elapsed_since_last(const struct sink_core *core, uint64_t now_us)
{
    uint64_t elapsed;

    if (!core->ticked || now_us <= core->last_us) {
        return 0;
    }
    elapsed = now_us - core->last_us;
    return elapsed < SINK_TICK_GAP_US_MAX ? elapsed : SINK_TICK_GAP_US_MAX;
}

void sink_core_tick(struct sink_core *core, uint64_t now_us,
                    const struct sink_core_sample *sample, struct sink_core_drive *drive)
{
    take_sample(core, sample);
    sink_counters_add(core, elapsed_since_last(core, now_us));
    core->last_us = now_us;
    core->ticked = true;
    sink_burst_sample(core, now_us, 1);

    sink_limits_judge(core, now_us);
    /* A tick that owes the answer to an off puts out zero, whatever has been
     * queued since: the answer says so. */
    if (core->off_pending == 0) {
        sink_queue_run(core, now_us);
    }
    sink_regulate(core, now_us);
    core->unsettled = false;
    *drive = core->drive;

    if (core->off_pending != 0) {
        sink_session_answer_offs(core);
    }
    sink_readback_run(core, now_us);
    sink_burst_send(core);
}

uint32_t sink_core_quiet_ticks(const struct sink_core *core)
{
    uint64_t due = core->readback_due_us;
    uint64_t at;
    uint64_t ticks;

    /* Whatever moves from tick to tick is not quiet; nor is a setpoint whose last
     * edge the next sample may still be judged by (limits.c, regulate.c). */
    if (!core->ticked || core->unsettled || core->off_pending != 0 || core->ramping ||
        core->still < 2 ||
        core->burst.phase == SINK_BURST_TAKING || core->burst.phase == SINK_BURST_SENDING) {
        return 0;
    }
    at = sink_limits_due(core);
    due = at < due ? at : due;
    at = sink_queue_due(core);
    due = at < due ? at : due;
    if (core->burst.phase == SINK_BURST_ARMED && core->burst.at_us < due) {
        due = core->burst.at_us;
    }
    if (due <= core->last_us) {
        return 0;
    }
    ticks = (due - core->last_us - 1u) / core->config.tick_us;
    return ticks < UINT32_MAX ? (uint32_t)ticks : UINT32_MAX;
}

/* Counts `ticks` quiet ticks with the last sample, at once. */
static void skip(struct sink_core *core, uint32_t ticks)
{
    uint64_t elapsed = (uint64_t)ticks * core->config.tick_us;

    sink_counters_add(core, elapsed);
    core->last_us += elapsed;
    sink_burst_sample(core, core->last_us, ticks);
}

void sink_core_tick_same(struct sink_core *core, uint64_t first_us, uint32_t ticks,
                         const struct sink_core_sample *sample, struct sink_core_drive *drive)
{
    const uint32_t skip_max = (uint32_t)SINK_TICK_GAP_US_MAX / core->config.tick_us;
    uint64_t now_us = first_us;
    uint32_t left = ticks;

    *drive = core->drive;
    while (left > 0) {
        uint32_t quiet;

        sink_core_tick(core, now_us, sample, drive);
        left--;
        quiet = sink_core_quiet_ticks(core);
        quiet = quiet < left ? quiet : left;
        quiet = quiet < skip_max ? quiet : skip_max;
        if (quiet > 0) {
            skip(core, quiet);
            left -= quiet;
        }
        now_us = core->last_us + core->config.tick_us;
    }
}
