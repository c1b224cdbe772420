/*
 * Beginning, and the port's own off.
 */
#include "internal.h"

#include <string.h>

static bool between(uint32_t value, uint32_t least, uint32_t most)
{
    return value >= least && value <= most;
}

/* The ranges keep every line within its 96 bytes and every product within 64
 * bits; the proofs stand where the products are. */
static bool valid(const struct sink_core_config *config)
{
    bool burst = (config->abilities & SINK_ABILITY_BURST) != 0;

    return between(config->tick_us, 10, 100000) &&
           between(config->queue_depth, 16, SINK_QUEUE_MAX) &&
           config->fastest_readback_us >= config->tick_us &&
           config->burst_samples <= SINK_BURST_MAX && burst == (config->burst_samples != 0) &&
           config->abilities <= 15 && between(config->drive_bits, 6, 16) &&
           between(config->drive_full_scale_uv, 1, 99999999) && config->drive_span <= 1 &&
           between(config->sense_resistor_uohm, 1, 1000000000) &&
           between(config->sense_bits, 6, 16) &&
           between(config->sense_current_ua, 1, 999999999) &&
           between(config->sense_voltage_uv, 1, 999999999);
}

bool sink_core_init(struct sink_core *core, const struct sink_core_config *config,
                    enum sink_reset reset)
{
    memset(core, 0, sizeof *core);
    core->config = *config;
    core->reset = reset;
    core->expected = 1;
    core->deadman_us = 2000000;
    core->readback_due_us = SINK_NEVER;
    core->unsettled = true;
    sink_limits_forget(core);
    if (!valid(config)) {
        return false;
    }
    core->drive_steps = (1u << config->drive_bits) - config->drive_span;
    if (reset == SINK_RESET_WATCHDOG) {
        sink_limits_trip(core, SINK_CAUSE_WATCHDOG, 0, 0);
    }
    return true;
}

void sink_core_off(struct sink_core *core)
{
    sink_queue_off(core);
    sink_burst_give_up(core);
}

size_t sink_core_size(void)
{
    return sizeof(struct sink_core);
}
