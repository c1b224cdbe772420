/*
 * What a port supplies: a handful of functions, and the figures of its front
 * end. main.c is the same on every board and calls nothing else.
 *
 * All are called from one context only, the main loop's. PORTING.md tells how
 * to write them, and what to mind before power goes on.
 */
#ifndef BOARD_H
#define BOARD_H

#include "core.h"

/* The figures the sink describes itself with. */
const struct sink_core_config *board_config(void);

/* First of all: the gate off, the converter that sets at zero, the isolator
 * open; then clock, port, converters, watchdog. On a board with an operating
 * system, arguments are there; elsewhere count is 0. */
void board_start(int count, char **arguments);

/* Why the processor last started. Asked once, after board_start. */
enum sink_reset board_reset_reason(void);

/* Time since power-up in us, 64 bits, from a counter that runs freely: never
 * from counting interrupts, which can be lost. Never goes back. */
uint64_t board_now_us(void);

/* Takes up to capacity bytes that came from the host; returns how many. */
size_t board_receive(uint8_t *bytes, size_t capacity);

/* How many bytes board_send would take now. */
size_t board_send_room(void);

/* Sends bytes to the host, at most as many as there was room for. */
void board_send(const uint8_t *bytes, size_t length);

/* Converts current, voltage and temperature now. */
void board_sample(struct sink_core_sample *sample);

/* Puts the drive out: gate and converter first, then the isolator. When the
 * gate goes off, it goes before the converter; when it comes on, after. */
void board_drive(const struct sink_core_drive *drive);

/* Called once a tick, from nowhere else: a loop that no longer ticks must not
 * keep the watchdog quiet. */
void board_feed_watchdog(void);

/* May sleep until due_us, or until a byte came; may also return earlier. */
void board_wait(uint64_t due_us);

#endif
