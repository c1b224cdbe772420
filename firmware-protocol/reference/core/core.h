/*
 * The logic of a current sink's firmware: bytes in, bytes out; a converter
 * sample in, a converter code out. Version 1 of the line protocol, whose
 * binding text is firmware-protocol/PROTOCOL.md ("section" below means there).
 *
 * What holds throughout:
 * - No hardware access, no heap, no recursion, no floating point, no stored
 *   settings. All state is in struct sink_core, which the caller owns.
 * - Every loop is bounded by a constant or by an argument.
 * - The times handed in never go back, over all the functions together.
 * - Nothing here may be called while another call on the same core is running:
 *   call from one context, and hand interrupts' bytes over in a buffer.
 * - Doubt means off.
 *
 * What it deliberately does not do: calibration (all values are nominal),
 * converting a temperature sensor's reading, filtering, keeping a watchdog.
 * Those are the port's or the host's.
 *
 * A port's loop, in full:
 *     sink_core_receive(&core, bytes, length, now);   whenever bytes came
 *     sink_core_tick(&core, now, &sample, &drive);    every tick_us
 *     ... put drive out at once ...
 *     length = sink_core_transmit(&core, buffer, sizeof buffer);
 */
#ifndef SINK_CORE_H
#define SINK_CORE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

/* The version of the protocol spoken, and of this firmware
 * (major * 10000 + minor * 100 + patch). */
#define SINK_PROTOCOL 1u
#define SINK_FIRMWARE 10000u

/* Longest line, line end included (section 1). */
#define SINK_LINE_BYTES 96u

/* Memory, to be chosen when compiling. */
#ifndef SINK_QUEUE_MAX
#define SINK_QUEUE_MAX 16u /* steps, at least 16 */
#endif
#ifndef SINK_BURST_MAX
#define SINK_BURST_MAX 128u /* samples of one capture */
#endif
#ifndef SINK_TRANSMIT_BYTES
#define SINK_TRANSMIT_BYTES 1280u /* answers, events and readbacks under way */
#endif

/* Answers kept for repetition (section 2). */
#define SINK_ANSWERS 16u

/* Why the processor last started. */
enum sink_reset {
    SINK_RESET_POWER,
    SINK_RESET_PIN,
    SINK_RESET_WATCHDOG, /* the core starts latched with this cause */
    SINK_RESET_SOFTWARE,
    SINK_RESET_UNKNOWN
};

/* Abilities of section 5, to be summed. */
#define SINK_ABILITY_POWER 1u
#define SINK_ABILITY_RESISTANCE 2u
#define SINK_ABILITY_BURST 4u
#define SINK_ABILITY_ISOLATOR 8u

/* What the sink is: the figures of its description (section 5). */
struct sink_core_config {
    uint32_t serial;
    uint32_t tick_us;             /* 10 to 100000: time between samples */
    uint16_t queue_depth;         /* 16 to SINK_QUEUE_MAX */
    uint32_t fastest_readback_us; /* at least tick_us */
    uint16_t burst_samples;       /* 0 to SINK_BURST_MAX; 0 without the ability */
    uint8_t abilities;            /* sum of SINK_ABILITY_... */
    uint8_t drive_bits;           /* 6 to 16: the converter that sets */
    uint32_t drive_full_scale_uv; /* 1 to 99999999 */
    uint8_t drive_span;           /* 0: code is FS / 2^bits; 1: FS / (2^bits - 1) */
    uint32_t sense_resistor_uohm; /* 1 to 1000000000 */
    uint8_t sense_bits;           /* 6 to 16: the converter that reads */
    uint32_t sense_current_ua;    /* 1 to 999999999: at full scale, code 2^bits */
    uint32_t sense_voltage_uv;    /* likewise */
};

/* The temperature sensor's word. */
enum sink_sensor { SINK_SENSOR_GOOD, SINK_SENSOR_OPEN, SINK_SENSOR_SHORT };

/* One sample, taken just before the call of sink_core_tick. It measures the
 * interval that just ended: charge grows by current * (now - last tick).
 * Nominal value = (code * full scale + 2^(bits - 1)) / 2^bits, rounded down:
 * that is, rounded to the nearest, halves up. */
struct sink_core_sample {
    uint16_t current_code;
    uint16_t voltage_code;
    int32_t temperature_mc; /* thousandths of a degree Celsius; if GOOD */
    uint8_t sensor;         /* enum sink_sensor */
};

/* What the port must put out at once after each tick. */
struct sink_core_drive {
    uint16_t code;  /* 0 whenever the gate is off */
    bool gate;      /* true: the op-amp may drive the gate */
    bool isolator;  /* true: relay closed */
};

/* What a latch was caused by (section 4). */
enum sink_cause {
    SINK_CAUSE_NONE = 0,
    SINK_CAUSE_CURRENT = 1,
    SINK_CAUSE_POWER = 2,
    SINK_CAUSE_VOLTAGE_HIGH = 3,
    SINK_CAUSE_VOLTAGE_LOW = 4,
    SINK_CAUSE_TEMPERATURE = 5,
    SINK_CAUSE_EXCESS = 6,
    SINK_CAUSE_SENSOR = 7,
    SINK_CAUSE_DEADMAN = 8,
    SINK_CAUSE_WATCHDOG = 9
};

/* ---- State. Its fields are the core's own; a port only makes room for it. ---- */

/* The six limits have the numbers of their causes, less one. */
#define SINK_LIMITS 6u

struct sink_limit {
    int64_t value;       /* unit by kind; power here in pW, to compare without dividing */
    uint64_t since_us;   /* time of the first crossing sample, if crossing */
    uint32_t persist_us;
};

enum sink_mode { SINK_MODE_CURRENT, SINK_MODE_POWER, SINK_MODE_RESISTANCE };

struct sink_step {
    uint64_t start_us;
    uint64_t ramp_us;
    uint64_t hold_us;
    uint32_t target; /* uA, uW or uohm */
    uint16_t order;
    uint8_t mode;
    bool at_once;    /* start_us is the time of the order; it begins with the next tick */
};

/* Samples since the last readback pair. Sums are value * us. */
struct sink_window {
    uint64_t current_sum;
    uint64_t voltage_sum;
    uint64_t time_us;
    uint32_t current_min, current_max;
    uint32_t voltage_min, voltage_max;
    bool any;
};

struct sink_burst {
    uint64_t at_us;
    uint16_t current[SINK_BURST_MAX];
    uint16_t voltage[SINK_BURST_MAX];
    uint16_t head;   /* where the next sample goes */
    uint16_t filled; /* samples held */
    uint16_t before, after;
    uint16_t wanted; /* samples still to take */
    uint16_t next;   /* next sample to send, from the oldest of the capture */
    uint16_t total;  /* samples of the capture */
    uint16_t number;
    uint8_t phase;
};

struct sink_transmit {
    uint8_t bytes[SINK_TRANSMIT_BYTES];
    uint32_t head; /* next byte to hand out */
    uint32_t used;
};

struct sink_core {
    struct sink_core_config config;
    enum sink_reset reset;
    uint32_t drive_steps; /* codes over the full scale: 2^bits or 2^bits - 1 */

    uint64_t last_us;       /* time of the last tick */
    bool ticked;            /* there has been one */
    bool unsettled;         /* something changed since the last tick */
    uint32_t current_ua;    /* the last sample */
    uint32_t voltage_uv;
    struct sink_core_sample sample;

    uint64_t charge_uc, charge_pc; /* whole, and not yet carried: see counters.c */
    uint64_t energy_uj, energy_low, energy_high;
    struct sink_window window;

    /* Session. */
    uint32_t session; /* 0: none begun */
    uint16_t expected;
    uint8_t answers[SINK_ANSWERS];
    uint8_t answered;
    uint64_t heard_us; /* last valid host line */
    uint32_t deadman_us;
    uint32_t readback_us;
    uint64_t readback_due_us;
    uint16_t readback_number, event_number;
    uint16_t damaged;
    uint16_t off_tokens[4];
    uint8_t off_pending;

    /* Line being received. */
    char line[SINK_LINE_BYTES];
    uint8_t line_length;
    bool line_damaged;  /* too long, or a byte that is not printable */
    bool line_returned; /* a carriage return came last */
    struct sink_transmit transmit;

    struct sink_limit limits[SINK_LIMITS];
    uint8_t limits_set;      /* one bit a limit */
    uint8_t limits_crossing; /* likewise */
    uint8_t latch; /* enum sink_cause */
    int64_t latch_limit;

    /* Steps. */
    struct sink_step queue[SINK_QUEUE_MAX];
    uint16_t queue_head, queued;
    bool on; /* a step is in progress, a rest included */
    struct sink_step step;
    uint32_t ramp_from;
    bool ramping;
    uint16_t step_order;
    uint32_t setpoint_ua; /* asked of the converter at the last tick */
    uint32_t setpoint_before_ua; /* and at the one before */
    uint8_t still; /* ticks for which the setpoint has not changed, up to 2 */
    bool at_stop;   /* the converter that sets can go no higher */
    bool saturated; /* on, and out of headroom */
    struct sink_core_drive drive;

    struct sink_burst burst;
};

/* ---- Functions. ---- */

/* Makes the core ready: off, isolator open, no session. Time is 0 at power-up.
 * Returns false if the configuration is outside the ranges above; the core must
 * then not be used, and the port stay off. */
bool sink_core_init(struct sink_core *core, const struct sink_core_config *config,
                    enum sink_reset reset);

/* Takes bytes from the host, in pieces of any size, and acts on every line end
 * among them. now_us is the sink's time, 64 bits, in us since power-up. */
void sink_core_receive(struct sink_core *core, const uint8_t *bytes, size_t length,
                       uint64_t now_us);

/* Hands out up to capacity bytes for the host; returns how many. */
size_t sink_core_transmit(struct sink_core *core, uint8_t *bytes, size_t capacity);

/* Bytes waiting to be handed out. */
size_t sink_core_transmit_waiting(const struct sink_core *core);

/* One tick. The sample was taken just before the call and measures the interval
 * that just ended; the setpoint it answers is the one of the tick before. The
 * first call after init only sets the clock going: no interval has ended.
 * Ticks must not be more than SINK_TICK_GAP_US_MAX apart; a longer gap counts
 * as that much. */
void sink_core_tick(struct sink_core *core, uint64_t now_us,
                    const struct sink_core_sample *sample, struct sink_core_drive *drive);
#define SINK_TICK_GAP_US_MAX (UINT64_C(1) << 30)

/* Exactly what `ticks` calls of sink_core_tick do, at first_us, first_us +
 * tick_us, ..., with the same sample and nothing received or transmitted in
 * between. drive is that of the last. Quick while nothing changes. */
void sink_core_tick_same(struct sink_core *core, uint64_t first_us, uint32_t ticks,
                         const struct sink_core_sample *sample, struct sink_core_drive *drive);

/* How many further ticks, tick_us apart and with the last tick's sample, would
 * neither change the drive nor put a byte out: until then the core only counts. */
uint32_t sink_core_quiet_ticks(const struct sink_core *core);

/* Off by the port's own decision (a panic button): as the host's `off`, without
 * an answer. Takes effect with the next tick. */
void sink_core_off(struct sink_core *core);

/* The size of struct sink_core, for those who cannot see it. */
size_t sink_core_size(void);

#ifdef __cplusplus
}
#endif

#endif
