/*
 * Feeds the firmware's core from standard input, for the sanitisers to watch.
 *
 * Records: a length (two bytes, least first), so many bytes from the host, then how many ticks
 * pass (one byte) and four bytes that decide what the converters read in them. What the core
 * sends goes to standard output. It ends with status 1 when the core breaks a rule that no input
 * may make it break.
 */
#include "core.h"

#include <stdio.h>

static const struct sink_core_config config = {
    .serial = 1,
    .tick_us = 1000,
    .queue_depth = 16,
    .fastest_readback_us = 20000,
    .burst_samples = 128,
    .abilities = SINK_ABILITY_POWER | SINK_ABILITY_RESISTANCE | SINK_ABILITY_BURST |
                 SINK_ABILITY_ISOLATOR,
    .drive_bits = 12,
    .drive_full_scale_uv = 409600,
    .drive_span = 0,
    .sense_resistor_uohm = 100000,
    .sense_bits = 12,
    .sense_current_ua = 4096000,
    .sense_voltage_uv = 20480000,
};

static struct sink_core core;
static uint64_t now_us;

static int broken(const char *rule)
{
    fprintf(stderr, "broken at %llu us: %s\n", (unsigned long long)now_us, rule);
    return 1;
}

static void transmit(void)
{
    uint8_t bytes[64];
    size_t length;

    while ((length = sink_core_transmit(&core, bytes, sizeof bytes)) > 0) {
        fwrite(bytes, 1, length, stdout);
    }
}

static int tick(const uint8_t *chance)
{
    struct sink_core_sample sample;
    struct sink_core_drive drive;

    sample.current_code = (uint16_t)((chance[0] | (chance[1] << 8)) & 0x1FFF);
    sample.voltage_code = (uint16_t)(chance[2] << 4);
    sample.temperature_mc = chance[3] * 500;
    sample.sensor = chance[3] == 255 ? SINK_SENSOR_OPEN : SINK_SENSOR_GOOD;
    now_us += 1000;
    sink_core_tick(&core, now_us, &sample, &drive);
    if (!drive.gate && drive.code != 0) {
        return broken("a code other than zero with the gate off");
    }
    if (drive.code >= 1u << config.drive_bits) {
        return broken("a code that the converter has not");
    }
    return 0;
}

int main(void)
{
    static uint8_t bytes[65536];
    uint8_t head[2];
    uint8_t tail[5];

    if (!sink_core_init(&core, &config, SINK_RESET_POWER)) {
        return broken("a sound configuration refused");
    }
    while (fread(head, 1, 2, stdin) == 2) {
        size_t length = (size_t)(head[0] | (head[1] << 8));
        unsigned i;

        if (fread(bytes, 1, length, stdin) != length || fread(tail, 1, 5, stdin) != 5) {
            break;
        }
        sink_core_receive(&core, bytes, length, now_us);
        for (i = 0; i < tail[0]; i++) {
            if (tick(tail + 1) != 0) {
                return 1;
            }
        }
        transmit();
    }
    return 0;
}
