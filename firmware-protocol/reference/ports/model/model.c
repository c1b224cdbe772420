/*
 * The invented sources, solved for the current the sink draws from them.
 */
#include "model.h"

#define AMBIENT_MC 25000
/* Heat sink: 8 K/W, time constant 60 s. */
#define KELVIN_PER_WATT 8u
#define HEAT_TIME_US 60000000u

/* A cell of 3.2 Ah = 11520 C. */
#define CELL_UC UINT64_C(11520000000)
#define CELL_FULL_UV 4100000u
#define CELL_EMPTY_UV 3000000u
#define CELL_MOHM 60u

#define SUPPLY_UV 3300000u
#define SUPPLY_MOHM 20u
#define SUPPLY_LIMIT_UA 700000u

/* What the sink itself adds at least: MOSFET and leads. */
#define PATH_MOHM 50u

void model_start(struct model *model, const struct sink_core_config *config,
                 enum model_source source)
{
    model->config = config;
    model->source = source;
    model->drive.code = 0;
    model->drive.gate = false;
    model->drive.isolator = false;
    model->last_us = 0;
    model->drawn_uc = 0;
    model->drawn_pc = 0;
    model->temperature_mc = AMBIENT_MC;
    model->heat = 0;
}

void model_drive(struct model *model, const struct sink_core_drive *drive)
{
    model->drive = *drive;
}

/* Current that the op-amp regulates to: code * full scale / codes / R. */
static uint32_t wanted_ua(const struct model *model)
{
    const struct sink_core_config *config = model->config;
    uint32_t codes = (1u << config->drive_bits) - config->drive_span;
    uint64_t drop_uv = (uint64_t)model->drive.code * config->drive_full_scale_uv / codes;

    return model->drive.gate ? (uint32_t)(drop_uv * 1000000u / config->sense_resistor_uohm) : 0;
}

static uint32_t open_uv(const struct model *model)
{
    switch (model->source) {
    case MODEL_CELL: {
        uint64_t drawn = model->drawn_uc < CELL_UC ? model->drawn_uc : CELL_UC;

        return CELL_FULL_UV - (uint32_t)(drawn * (CELL_FULL_UV - CELL_EMPTY_UV) / CELL_UC);
    }
    case MODEL_SUPPLY:
        return SUPPLY_UV;
    case MODEL_NONE:
        break;
    }
    return 0;
}

/* Current and voltage at the sink's terminals. */
static void solve(const struct model *model, uint32_t *current_ua, uint32_t *voltage_uv)
{
    uint32_t inner_mohm = model->source == MODEL_SUPPLY ? SUPPLY_MOHM : CELL_MOHM;
    uint32_t sink_mohm = PATH_MOHM + model->config->sense_resistor_uohm / 1000u;
    uint32_t open = open_uv(model);
    uint32_t most = (uint32_t)((uint64_t)open * 1000u / (inner_mohm + sink_mohm));
    uint32_t current = wanted_ua(model);
    bool closed = model->drive.isolator ||
                  (model->config->abilities & SINK_ABILITY_ISOLATOR) == 0;

    if (!closed || open == 0) {
        *current_ua = 0;
        *voltage_uv = closed ? open : 0;
        return;
    }
    current = current < most ? current : most;
    *voltage_uv = open - (uint32_t)((uint64_t)current * inner_mohm / 1000u);
    if (model->source == MODEL_SUPPLY && current > SUPPLY_LIMIT_UA) {
        /* Beyond its limit only the sink's own path is left of the voltage. */
        current = SUPPLY_LIMIT_UA;
        *voltage_uv = (uint32_t)((uint64_t)current * sink_mohm / 1000u);
    }
    *current_ua = current;
}

static void draw_and_heat(struct model *model, uint32_t current_ua, uint32_t voltage_uv,
                          uint64_t elapsed_us)
{
    uint32_t elapsed = elapsed_us < 1000000u ? (uint32_t)elapsed_us : 1000000u;
    uint64_t charge_pc = (uint64_t)current_ua * elapsed + model->drawn_pc;
    uint32_t power_mw = (uint32_t)((uint64_t)current_ua * voltage_uv / 1000000000u);
    int32_t settled_mc = AMBIENT_MC + (int32_t)(power_mw * KELVIN_PER_WATT);
    int64_t moved;

    model->drawn_uc += charge_pc / 1000000u;
    model->drawn_pc = (uint32_t)(charge_pc % 1000000u);
    moved = (int64_t)(settled_mc - model->temperature_mc) * 65536 * (int64_t)elapsed /
                (int64_t)HEAT_TIME_US +
            model->heat;
    model->temperature_mc += (int32_t)(moved / 65536);
    model->heat = (int32_t)(moved % 65536);
}

static uint16_t code(uint32_t value, uint32_t full_scale, uint8_t bits)
{
    uint64_t nearest = (((uint64_t)value << bits) + full_scale / 2u) / full_scale;
    uint32_t most = (1u << bits) - 1u;

    return (uint16_t)(nearest < most ? nearest : most);
}

void model_sample(struct model *model, uint64_t now_us, struct sink_core_sample *sample)
{
    const struct sink_core_config *config = model->config;
    uint32_t current_ua;
    uint32_t voltage_uv;

    solve(model, &current_ua, &voltage_uv);
    draw_and_heat(model, current_ua, voltage_uv, now_us - model->last_us);
    model->last_us = now_us;
    sample->current_code = code(current_ua, config->sense_current_ua, config->sense_bits);
    sample->voltage_code = code(voltage_uv, config->sense_voltage_uv, config->sense_bits);
    sample->temperature_mc = model->temperature_mc;
    sample->sensor = SINK_SENSOR_GOOD;
}
