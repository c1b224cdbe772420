/*
 * The sink as a process: a pseudo-terminal or an inherited descriptor for its
 * port, CLOCK_MONOTONIC for its clock, an invented source in front of it.
 *
 * It prints the pseudo-terminal's path on a line of its own and then serves
 * until it is killed; with an inherited descriptor, until that is closed.
 */
#define _XOPEN_SOURCE 700

#include "board.h"
#include "model.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/select.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

/* `left` of the bench `weir`: 3 A over 0.1 ohm, 12-bit converters. Invented. */
static struct sink_core_config config = {
    .serial = 1,
    .tick_us = 1000,
    .queue_depth = 16,
    .fastest_readback_us = 20000,
    .burst_samples = 128,
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
static enum sink_reset reset = SINK_RESET_POWER;
static struct timespec started;
static int port = -1;

/* Bytes the descriptor would not take yet. */
static uint8_t unsent[256];
static size_t unsent_length;

static const char USAGE[] =
    "usage: sink-posix [--source cell|supply|none] [--serial N] [--isolator]\n"
    "                  [--reset power|pin|watchdog|software|unknown] [--fd N]\n"
    "A current sink on a pseudo-terminal, whose path is printed; with --fd, on a\n"
    "descriptor that was inherited. The source is a model with invented figures.\n";

static void fail(const char *what, const char *word)
{
    fprintf(stderr, "sink-posix: %s: %s\n%s", what, word, USAGE);
    exit(2);
}

static int one_of(const char *option, const char *word, const char *const *words, int count)
{
    int i;

    for (i = 0; i < count; i++) {
        if (strcmp(word, words[i]) == 0) {
            return i;
        }
    }
    fail(option, word);
    return 0;
}

static unsigned long number(const char *option, const char *word, unsigned long most)
{
    char *end;
    unsigned long value;

    errno = 0;
    value = strtoul(word, &end, 10);
    if (errno != 0 || end == word || *end != '\0' || value > most) {
        fail(option, word);
    }
    return value;
}

static enum model_source read_arguments(int count, char **arguments)
{
    static const char *const sources[] = {"none", "cell", "supply"};
    static const char *const resets[] = {"power", "pin", "watchdog", "software", "unknown"};
    enum model_source source = MODEL_CELL;
    int i;

    for (i = 1; i < count; i++) {
        const char *option = arguments[i];
        const char *word = i + 1 < count ? arguments[i + 1] : "(nothing)";

        if (strcmp(option, "--isolator") == 0) {
            config.abilities |= SINK_ABILITY_ISOLATOR;
            continue;
        }
        if (strcmp(option, "--source") == 0) {
            source = (enum model_source)one_of(option, word, sources, 3);
        } else if (strcmp(option, "--reset") == 0) {
            reset = (enum sink_reset)one_of(option, word, resets, 5);
        } else if (strcmp(option, "--serial") == 0) {
            config.serial = (uint32_t)number(option, word, UINT32_MAX);
        } else if (strcmp(option, "--fd") == 0) {
            port = (int)number(option, word, 1023);
        } else {
            fail("unknown option", option);
        }
        i++;
    }
    return source;
}

/* Opens a pseudo-terminal as a raw line. Its far side is kept open here too, so
 * that the sink outlives a host that closes it, as a real port does. */
static void open_terminal(void)
{
    struct termios line;
    const char *path;
    int far_side;

    port = posix_openpt(O_RDWR | O_NOCTTY);
    if (port < 0 || grantpt(port) != 0 || unlockpt(port) != 0) {
        fail("cannot open a pseudo-terminal", strerror(errno));
    }
    path = ptsname(port);
    far_side = path == NULL ? -1 : open(path, O_RDWR | O_NOCTTY);
    if (far_side < 0 || tcgetattr(far_side, &line) != 0) {
        fail("cannot open the pseudo-terminal's far side", strerror(errno));
    }
    line.c_iflag &= (tcflag_t)~(BRKINT | ICRNL | IGNBRK | IGNCR | INLCR | INPCK | ISTRIP | IXON |
                                IXOFF | PARMRK);
    line.c_oflag &= (tcflag_t)~OPOST;
    line.c_lflag &= (tcflag_t)~(ECHO | ECHONL | ICANON | IEXTEN | ISIG);
    line.c_cflag = (line.c_cflag & (tcflag_t)~(CSIZE | PARENB)) | CS8;
    if (tcsetattr(far_side, TCSANOW, &line) != 0) {
        fail("cannot make the pseudo-terminal raw", strerror(errno));
    }
    printf("%s\n", path);
    fflush(stdout);
}

void board_start(int count, char **arguments)
{
    enum model_source source = read_arguments(count, arguments);

    model_start(&model, &config, source);
    clock_gettime(CLOCK_MONOTONIC, &started);
    if (port < 0) {
        open_terminal();
    }
    if (fcntl(port, F_SETFL, fcntl(port, F_GETFL) | O_NONBLOCK) < 0) {
        fail("cannot use the descriptor", strerror(errno));
    }
}

const struct sink_core_config *board_config(void)
{
    return &config;
}

enum sink_reset board_reset_reason(void)
{
    return reset;
}

uint64_t board_now_us(void)
{
    struct timespec now;

    clock_gettime(CLOCK_MONOTONIC, &now);
    return (uint64_t)((int64_t)(now.tv_sec - started.tv_sec) * 1000000 +
                      (now.tv_nsec - started.tv_nsec) / 1000);
}

size_t board_receive(uint8_t *bytes, size_t capacity)
{
    ssize_t count = read(port, bytes, capacity);

    if (count == 0) {
        /* Nobody can ever speak again: an inherited descriptor was closed. */
        exit(0);
    }
    return count > 0 ? (size_t)count : 0;
}

static void push_unsent(void)
{
    ssize_t count;

    if (unsent_length == 0) {
        return;
    }
    count = write(port, unsent, unsent_length);
    if (count > 0) {
        unsent_length -= (size_t)count;
        memmove(unsent, unsent + count, unsent_length);
    }
}

size_t board_send_room(void)
{
    push_unsent();
    return sizeof unsent - unsent_length;
}

void board_send(const uint8_t *bytes, size_t length)
{
    memcpy(unsent + unsent_length, bytes, length);
    unsent_length += length;
    push_unsent();
}

void board_sample(struct sink_core_sample *sample)
{
    model_sample(&model, board_now_us(), sample);
}

void board_drive(const struct sink_core_drive *drive)
{
    model_drive(&model, drive);
}

void board_feed_watchdog(void)
{
    /* A process that hangs can be killed; it drives no current that outlives it. */
}

void board_wait(uint64_t due_us)
{
    uint64_t now_us = board_now_us();
    struct timespec rest = {0, 0};
    fd_set readable;

    if (due_us > now_us) {
        rest.tv_sec = (time_t)((due_us - now_us) / 1000000u);
        rest.tv_nsec = (long)((due_us - now_us) % 1000000u) * 1000;
    }
    FD_ZERO(&readable);
    FD_SET(port, &readable);
    (void)pselect(port + 1, &readable, NULL, NULL, &rest, NULL);
}
