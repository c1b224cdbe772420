/*
 * The registers of the MPS2 board with the AN385 image (Cortex-M3, 25 MHz) that
 * this port uses. Facts from Arm's application note AN385, the CMSDK technical
 * reference manual (DDI 0479) and the Armv7-M architecture (DDI 0403).
 */
#ifndef REGISTERS_H
#define REGISTERS_H

#include <stdint.h>

#define REGISTER(address) (*(volatile uint32_t *)(address))

#define CLOCK_HZ 25000000u
#define CLOCKS_IN_US 25u

/* CMSDK UART 0; receive is interrupt 0, transmit interrupt 1. */
#define UART_DATA REGISTER(0x40004000u)
#define UART_STATE REGISTER(0x40004004u)
#define UART_CONTROL REGISTER(0x40004008u)
#define UART_INTERRUPTS REGISTER(0x4000400Cu)
#define UART_DIVIDER REGISTER(0x40004010u)
#define UART_STATE_TRANSMIT_FULL 1u
#define UART_STATE_RECEIVE_FULL 2u
#define UART_TRANSMIT 1u
#define UART_RECEIVE 2u
#define UART_TRANSMIT_INTERRUPT 4u
#define UART_RECEIVE_INTERRUPT 8u
#define UART_CLEAR_TRANSMIT 1u
#define UART_CLEAR_RECEIVE 2u
#define UART_BAUD 115200u

/* CMSDK UART 1: nothing of the sink's own is on it. */
#define LEDGER_DATA REGISTER(0x40005000u)
#define LEDGER_STATE REGISTER(0x40005004u)
#define LEDGER_CONTROL REGISTER(0x40005008u)
#define LEDGER_DIVIDER REGISTER(0x40005010u)

/* CMSDK watchdog: its first expiry raises the non-maskable interrupt, the
 * second, if the first was not answered, resets. */
#define WATCHDOG_LOAD REGISTER(0x40008000u)
#define WATCHDOG_CONTROL REGISTER(0x40008008u)
#define WATCHDOG_CLEAR REGISTER(0x4000800Cu)
#define WATCHDOG_LOCK REGISTER(0x40008C00u)
#define WATCHDOG_INTERRUPT_ON 1u
#define WATCHDOG_RESET_ON 2u
#define WATCHDOG_UNLOCK 0x1ACCE551u

/* FPGAIO: a counter at the clock's rate that runs freely; wraps every 171.8 s. */
#define FREE_COUNTER REGISTER(0x40028018u)

/* SysTick, interrupt controller. */
#define SYSTICK_CONTROL REGISTER(0xE000E010u)
#define SYSTICK_RELOAD REGISTER(0xE000E014u)
#define SYSTICK_VALUE REGISTER(0xE000E018u)
#define SYSTICK_ON 7u /* counting the processor's clock, with interrupt */
#define INTERRUPTS_ENABLE REGISTER(0xE000E100u)
#define RESET_CONTROL REGISTER(0xE000ED0Cu)
#define RESET_REQUEST 0x05FA0004u

#endif
