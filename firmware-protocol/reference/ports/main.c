/*
 * The loop of every port: receive, tick, send, wait.
 */
#include "board.h"

/* As many bytes as are moved at once between port and core. */
#define PIECE_BYTES 64u

static struct sink_core core;

static void receive(void)
{
    uint8_t piece[PIECE_BYTES];
    size_t length = board_receive(piece, sizeof piece);

    if (length > 0) {
        sink_core_receive(&core, piece, length, board_now_us());
    }
}

static void tick(void)
{
    struct sink_core_sample sample;
    struct sink_core_drive drive;

    board_sample(&sample);
    /* The time is read right after the sample: it is what the sample's interval
     * ends with. */
    sink_core_tick(&core, board_now_us(), &sample, &drive);
    board_drive(&drive);
    board_feed_watchdog();
}

static void send(void)
{
    uint8_t piece[PIECE_BYTES];
    size_t room = board_send_room();
    size_t length = sink_core_transmit(&core, piece, room < PIECE_BYTES ? room : PIECE_BYTES);

    if (length > 0) {
        board_send(piece, length);
    }
}

int main(int count, char **arguments)
{
    uint64_t due_us;

    board_start(count, arguments);
    /* A configuration out of range is a mistake in the port. The sink then
     * stays off, and silent, which any host takes for what it is. */
    if (!sink_core_init(&core, board_config(), board_reset_reason())) {
        return 1;
    }
    due_us = board_now_us();
    for (;;) {
        uint64_t now_us;

        receive();
        now_us = board_now_us();
        if (now_us >= due_us) {
            tick();
            due_us += core.config.tick_us;
            /* Ticks that were missed are not made up for: charge is counted by
             * the clock, and a burst of ticks would measure nothing new. */
            if (due_us <= now_us) {
                due_us = now_us + core.config.tick_us;
            }
        }
        send();
        board_wait(due_us);
    }
}
