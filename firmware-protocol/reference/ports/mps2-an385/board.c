/*
 * The sink on an MPS2 board with the AN385 image, real or emulated.
 *
 * The board has neither the converters nor the gate: where a real sink writes
 * its DAC and reads its ADC, this one talks to the compiled-in model. All else
 * is as a real sink does it: bytes by interrupt, time from a free counter, a
 * timer only to wake up, a watchdog that only the tick keeps quiet.
 */
#include "board.h"
#include "model.h"
#include "port.h"
#include "registers.h"

#ifndef MODEL_SOURCE
#define MODEL_SOURCE MODEL_CELL
#endif

/* The watchdog bites twice this long after the last tick, 200 ms in all. An
 * emulator's clock goes on while a busy machine lets its processor wait, so there
 * it may have to be longer. */
#ifndef WATCHDOG_CLOCKS
#define WATCHDOG_CLOCKS (CLOCK_HZ / 10u)
#endif

/* `left` of the bench `weir`: 3 A over 0.1 ohm, 12-bit converters. Invented. */
static const struct sink_core_config config = {
    .serial = 385,
    .tick_us = 1000,
    .queue_depth = 16,
    .fastest_readback_us = 20000,
    .burst_samples = SINK_BURST_MAX,
    .abilities = SINK_ABILITY_POWER | SINK_ABILITY_RESISTANCE | SINK_ABILITY_BURST,
    .drive_bits = 12,
    .drive_full_scale_uv = 409600,
    .drive_span = 0,
    .sense_resistor_uohm = 100000,
    .sense_bits = 12,
    .sense_current_ua = 4096000,
    .sense_voltage_uv = 20480000,
};

static struct model model;

/* ---- why it started ---- */

/* This word outlives a reset and not a loss of power, after which it holds
 * anything. So a board without a register for the reason can tell reasons apart. */
#define MARK_RUNNING 0x52554E31u
#define MARK_WATCHDOG 0x57444F31u
#define MARK_SOFTWARE 0x53575231u
__attribute__((section(".noinit"))) static volatile uint32_t mark;

static enum sink_reset reason;

static void find_reason(void)
{
    switch (mark) {
    case MARK_WATCHDOG:
        reason = SINK_RESET_WATCHDOG;
        break;
    case MARK_SOFTWARE:
        reason = SINK_RESET_SOFTWARE;
        break;
    case MARK_RUNNING:
        reason = SINK_RESET_PIN;
        break;
    default:
        reason = SINK_RESET_POWER;
        break;
    }
    mark = MARK_RUNNING;
}

enum sink_reset board_reset_reason(void)
{
    return reason;
}

static void all_off(void)
{
    static const struct sink_core_drive off = {0, false, false};

    model_drive(&model, &off);
}

void port_watchdog_expired(void)
{
    all_off();
    mark = MARK_WATCHDOG;
}

void port_fault(void)
{
    all_off();
    mark = MARK_SOFTWARE;
    RESET_CONTROL = RESET_REQUEST;
    for (;;) {
    }
}

/* ---- bytes: each ring has one writer and one reader, so no lock ---- */

#define RECEIVE_BYTES 512u
#define SEND_BYTES 128u

static volatile uint8_t received[RECEIVE_BYTES];
static volatile uint32_t received_head, received_tail;
static volatile uint8_t sending[SEND_BYTES];
static volatile uint32_t sending_head, sending_tail;

void port_byte_received(void)
{
    UART_INTERRUPTS = UART_CLEAR_RECEIVE;
    while ((UART_STATE & UART_STATE_RECEIVE_FULL) != 0) {
        uint8_t byte = (uint8_t)UART_DATA;

        /* A byte without room is lost like one on the line; the checksum finds
         * out. */
        if (received_head - received_tail < RECEIVE_BYTES) {
            received[received_head % RECEIVE_BYTES] = byte;
            received_head++;
        }
    }
}

size_t board_receive(uint8_t *bytes, size_t capacity)
{
    size_t count = 0;

    while (count < capacity && received_tail != received_head) {
        bytes[count] = received[received_tail % RECEIVE_BYTES];
        received_tail++;
        count++;
    }
    return count;
}

static void send_next(void)
{
    while (sending_tail != sending_head && (UART_STATE & UART_STATE_TRANSMIT_FULL) == 0) {
        UART_DATA = sending[sending_tail % SEND_BYTES];
        sending_tail++;
    }
}

void port_byte_sent(void)
{
    UART_INTERRUPTS = UART_CLEAR_TRANSMIT;
    send_next();
}

size_t board_send_room(void)
{
    return SEND_BYTES - (sending_head - sending_tail);
}

void board_send(const uint8_t *bytes, size_t length)
{
    size_t i;

    for (i = 0; i < length; i++) {
        sending[sending_head % SEND_BYTES] = bytes[i];
        sending_head++;
    }
    /* The interrupt sends on; only an idle line must be started, and with the
     * interrupt held off, since it is the ring's reader too. */
    __asm volatile("cpsid i" ::: "memory");
    send_next();
    __asm volatile("cpsie i" ::: "memory");
}

/* ---- time ---- */

void port_wake(void)
{
    /* Having woken the loop is all there is to do. */
}

uint64_t board_now_us(void)
{
    static uint64_t now_us;
    static uint32_t last_clocks, rest_clocks;
    uint32_t clocks = FREE_COUNTER;
    /* Right across the counter's wrap, if asked at least every 171 s: the loop
     * asks at every tick. 171 s plus a rest of 24 clocks fit 32 bits. */
    uint32_t passed = clocks - last_clocks;

    last_clocks = clocks;
    now_us += passed / CLOCKS_IN_US;
    rest_clocks += passed % CLOCKS_IN_US;
    if (rest_clocks >= CLOCKS_IN_US) {
        rest_clocks -= CLOCKS_IN_US;
        now_us++;
    }
    return now_us;
}

void board_wait(uint64_t due_us)
{
    /* With interrupts masked, one that comes between looking and sleeping still
     * ends the sleep. */
    __asm volatile("cpsid i" ::: "memory");
    if (received_tail == received_head && board_now_us() < due_us) {
        __asm volatile("wfi" ::: "memory");
    }
    __asm volatile("cpsie i" ::: "memory");
}

void board_feed_watchdog(void)
{
#ifdef HANG_AFTER_US
    /* For seeing the watchdog at work: a loop that stops ticking. */
    while (board_now_us() >= HANG_AFTER_US) {
    }
#endif
    WATCHDOG_LOCK = WATCHDOG_UNLOCK;
    WATCHDOG_CLEAR = 1;
    WATCHDOG_LOCK = 0;
}

/* ---- the source's own ledger ---- */

#ifdef TELL_LEDGER
/* For tests: any byte on the second port is answered with the charge that the
 * source has given since power-up, in uC, and its part below one, in pC. No
 * sink knows this; it is what a sink's counter is held against. */
static void tell(uint64_t number, uint8_t end)
{
    uint8_t digits[20];
    size_t count = 0;

    do {
        digits[count++] = (uint8_t)('0' + number % 10u);
        number /= 10u;
    } while (number != 0);
    while (count > 0) {
        while ((LEDGER_STATE & UART_STATE_TRANSMIT_FULL) != 0) {
        }
        LEDGER_DATA = digits[--count];
    }
    while ((LEDGER_STATE & UART_STATE_TRANSMIT_FULL) != 0) {
    }
    LEDGER_DATA = end;
}

static void answer_for_ledger(void)
{
    if ((LEDGER_STATE & UART_STATE_RECEIVE_FULL) != 0) {
        (void)LEDGER_DATA;
        tell(model.drawn_uc, ' ');
        tell(model.drawn_pc, '\n');
    }
}

static void open_ledger(void)
{
    LEDGER_DIVIDER = CLOCK_HZ / UART_BAUD;
    LEDGER_CONTROL = UART_TRANSMIT | UART_RECEIVE;
}
#endif

/* ---- front end ---- */

const struct sink_core_config *board_config(void)
{
    return &config;
}

void board_sample(struct sink_core_sample *sample)
{
    model_sample(&model, board_now_us(), sample);
}

void board_drive(const struct sink_core_drive *drive)
{
    model_drive(&model, drive);
#ifdef TELL_LEDGER
    answer_for_ledger();
#endif
}

void board_start(int count, char **arguments)
{
    (void)count;
    (void)arguments;
    all_off();
    find_reason();
    model_start(&model, &config, MODEL_SOURCE);

    WATCHDOG_LOCK = WATCHDOG_UNLOCK;
    WATCHDOG_LOAD = WATCHDOG_CLOCKS;
    WATCHDOG_CONTROL = WATCHDOG_INTERRUPT_ON | WATCHDOG_RESET_ON;
    WATCHDOG_LOCK = 0;

    UART_DIVIDER = CLOCK_HZ / UART_BAUD;
    UART_CONTROL = UART_TRANSMIT | UART_RECEIVE | UART_TRANSMIT_INTERRUPT | UART_RECEIVE_INTERRUPT;
    INTERRUPTS_ENABLE = 3;

#ifdef TELL_LEDGER
    open_ledger();
#endif

    SYSTICK_RELOAD = CLOCK_HZ / 1000u - 1u;
    SYSTICK_VALUE = 0;
    SYSTICK_CONTROL = SYSTICK_ON;
    /* The first look at the counter is the beginning of time. */
    (void)board_now_us();
}
