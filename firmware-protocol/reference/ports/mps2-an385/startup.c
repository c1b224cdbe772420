/*
 * From reset to main: vectors, memory, and what to do when all else fails.
 */
#include "port.h"
#include "registers.h"

#include <stdint.h>

extern uint32_t stack_top[], data_load[], data_start[], data_end[], bss_start[], bss_end[];

int main(int count, char **arguments);

static void reset_handler(void)
{
    uint32_t *from = data_load;
    uint32_t *to;

    /* The gate is held off by its pull-down until board_start takes it over;
     * nothing here touches it. */
    for (to = data_start; to < data_end; to++) {
        *to = *from;
        from++;
    }
    for (to = bss_start; to < bss_end; to++) {
        *to = 0;
    }
    (void)main(0, 0);
    port_fault();
}

/* The watchdog's first expiry: the loop no longer ticks. Off at once, and let
 * the second expiry reset. */
static void watchdog_handler(void)
{
    port_watchdog_expired();
    for (;;) {
    }
}

static void fault_handler(void)
{
    port_fault();
}

typedef void (*handler)(void);

struct vectors {
    uint32_t *stack;
    handler exceptions[15];
    handler interrupts[2];
};

__attribute__((section(".vectors"), used)) static const struct vectors vectors = {
    stack_top,
    {
        reset_handler,
        watchdog_handler, /* non-maskable interrupt */
        fault_handler,    /* hard fault */
        fault_handler,    /* memory management */
        fault_handler,    /* bus */
        fault_handler,    /* usage */
        0,
        0,
        0,
        0,
        fault_handler, /* supervisor call: never made */
        fault_handler, /* debug */
        0,
        fault_handler, /* pending service: never asked for */
        port_wake,     /* SysTick */
    },
    {
        port_byte_received,
        port_byte_sent,
    },
};
