/*
 * Charge, energy and readbacks: what the converter measured, times the free
 * running clock, with every remainder kept.
 *
 * Charge grows by uA * us = pC. The sum waits in charge_pc and is carried into
 * whole uC when read.
 *
 * Energy grows by uA * uV * us = 1e-18 J, of which 1e12 make a uJ. A product of
 * current and voltage (both below 1e9, so below 2^60) times a time of up to
 * 2^30 us would not fit 64 bits, so its low 32 bits and the rest are summed
 * apart: energy = energy_uj * 1e12 + energy_high * 2^32 + energy_low.
 *
 * Why nothing overflows: a call adds at most 2^30 * 2^30 = 2^60 to charge_pc,
 * 2^32 * 2^30 = 2^62 to energy_low and 2^28 * 2^30 = 2^58 to energy_high; each
 * call that leaves one of them at 2^62 or above carries, after which charge_pc
 * < 1e6, energy_low < 1e12 and energy_high = 0. So before adding each is below
 * 2^62 and after adding below 2^63.
 *
 * charge_uc and energy_uj themselves last beyond any bench's life: at 1000 A a
 * signed 64-bit charge lasts 292 years, at 1 MW the energy as long.
 */
#include "internal.h"

#define CARRY_AT (UINT64_C(1) << 62)
#define PC_IN_UC 1000000u
#define PARTS_IN_UJ UINT64_C(1000000000000)

static void carry(struct sink_core *core)
{
    uint64_t rest;

    core->charge_uc += core->charge_pc / PC_IN_UC;
    core->charge_pc %= PC_IN_UC;

    /* energy_high * 2^32 in two strides of 2^16, each time taking out the whole
     * uJ: a remainder below 1e12 < 2^40 times 2^16 stays below 2^56. */
    core->energy_uj += (core->energy_high / PARTS_IN_UJ) << 32;
    rest = (core->energy_high % PARTS_IN_UJ) << 16;
    core->energy_uj += (rest / PARTS_IN_UJ) << 16;
    rest = (rest % PARTS_IN_UJ) << 16;
    core->energy_uj += rest / PARTS_IN_UJ;
    core->energy_low += rest % PARTS_IN_UJ;
    core->energy_high = 0;

    core->energy_uj += core->energy_low / PARTS_IN_UJ;
    core->energy_low %= PARTS_IN_UJ;
}

static void window_add(struct sink_window *window, uint32_t current, uint32_t voltage,
                       uint64_t elapsed_us)
{
    if (!window->any) {
        window->any = true;
        window->current_sum = 0;
        window->voltage_sum = 0;
        window->time_us = 0;
        window->current_min = current;
        window->current_max = current;
        window->voltage_min = voltage;
        window->voltage_max = voltage;
    }
    window->current_sum += current * elapsed_us;
    window->voltage_sum += voltage * elapsed_us;
    window->time_us += elapsed_us;
    window->current_min = current < window->current_min ? current : window->current_min;
    window->current_max = current > window->current_max ? current : window->current_max;
    window->voltage_min = voltage < window->voltage_min ? voltage : window->voltage_min;
    window->voltage_max = voltage > window->voltage_max ? voltage : window->voltage_max;
}

void sink_counters_add(struct sink_core *core, uint64_t elapsed_us)
{
    uint64_t power = (uint64_t)core->current_ua * core->voltage_uv;

    core->charge_pc += core->current_ua * elapsed_us;
    core->energy_low += (power & UINT32_MAX) * elapsed_us;
    core->energy_high += (power >> 32) * elapsed_us;
    if (((core->charge_pc | core->energy_low | core->energy_high) & ~(CARRY_AT - 1u)) != 0) {
        carry(core);
    }
    /* The longest readback interval is below 2^32 us, a late tick adds at most
     * 2^30: the window's sums stay below 2^30 * 2^33. With readbacks stopped
     * nobody asks for the window. */
    if (core->readback_us != 0) {
        window_add(&core->window, core->current_ua, core->voltage_uv, elapsed_us);
    }
}

void sink_window_restart(struct sink_core *core)
{
    core->window.any = false;
}

/* Weighted by time, to the nearest, so that mean * time is the counted charge. */
static uint32_t mean(uint64_t sum, uint64_t time_us, uint32_t last)
{
    return time_us == 0 ? last : (uint32_t)((sum + time_us / 2u) / time_us);
}

static void write_counters(const struct sink_core *core, uint64_t now_us, struct sink_text *text)
{
    sink_text_begin(text, "c");
    sink_text_unsigned(text, core->readback_number);
    sink_text_unsigned(text, now_us);
    sink_text_unsigned(text, core->charge_uc);
    sink_text_unsigned(text, core->energy_uj);
    sink_text_unsigned(text, core->step_order);
    sink_text_unsigned(text, core->queued);
    sink_text_unsigned(text, core->damaged);
    sink_text_end(text);
}

static uint8_t state(const struct sink_core *core)
{
    if (core->latch != SINK_CAUSE_NONE) {
        return (uint8_t)(16u + core->latch);
    }
    if (!core->on) {
        return 0;
    }
    return core->saturated ? 2 : 1;
}

/* Within the range of its field. */
static int32_t reported_temperature(const struct sink_core *core)
{
    int32_t value = core->sample.temperature_mc;

    if (value < SINK_TEMPERATURE_LEAST) {
        return SINK_TEMPERATURE_LEAST;
    }
    return value > SINK_TEMPERATURE_MOST ? SINK_TEMPERATURE_MOST : value;
}

static void write_readback(const struct sink_core *core, uint64_t now_us, struct sink_text *text)
{
    const struct sink_window *window = &core->window;

    sink_text_begin(text, "r");
    sink_text_unsigned(text, core->readback_number);
    sink_text_unsigned(text, (uint32_t)now_us);
    sink_text_unsigned(text, mean(window->current_sum, window->time_us, core->current_ua));
    sink_text_unsigned(text, window->current_min);
    sink_text_unsigned(text, window->current_max);
    sink_text_unsigned(text, mean(window->voltage_sum, window->time_us, core->voltage_uv));
    sink_text_unsigned(text, window->voltage_min);
    sink_text_unsigned(text, window->voltage_max);
    if (core->sample.sensor == SINK_SENSOR_GOOD) {
        sink_text_signed(text, reported_temperature(core));
    } else {
        sink_text_word(text, core->sample.sensor == SINK_SENSOR_OPEN ? "open" : "short");
    }
    sink_text_unsigned(text, state(core));
    sink_text_end(text);
}

void sink_readback_run(struct sink_core *core, uint64_t now_us)
{
    struct sink_text counters;
    struct sink_text readback;

    if (now_us < core->readback_due_us) {
        return;
    }
    core->readback_due_us += core->readback_us;
    if (core->readback_due_us <= now_us) {
        core->readback_due_us = now_us + core->readback_us;
    }
    core->readback_number = sink_next_number(core->readback_number);
    carry(core);
    write_counters(core, now_us, &counters);
    write_readback(core, now_us, &readback);
    /* Both lines or none. Lost or sent, the next window begins. */
    if (sink_transmit_free(core) >= SINK_ROOM_READBACK + counters.length + readback.length) {
        (void)sink_transmit_put(core, &counters, SINK_ROOM_READBACK);
        (void)sink_transmit_put(core, &readback, SINK_ROOM_READBACK);
    }
    sink_window_restart(core);
}
