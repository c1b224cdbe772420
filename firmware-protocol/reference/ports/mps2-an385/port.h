/*
 * What startup and board of this port know of each other.
 */
#ifndef PORT_H
#define PORT_H

/* Interrupts. */
void port_wake(void);
void port_byte_received(void);
void port_byte_sent(void);

/* The gate off, the watchdog's mark left in memory; the caller then waits. */
void port_watchdog_expired(void);

/* The gate off, then a reset that will be stated as `software`. Never returns. */
void port_fault(void);

#endif
