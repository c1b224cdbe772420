/*
 * The ring of bytes for the host. Lines go in whole or not at all, so that a
 * full ring costs lines and never a damaged one.
 */
#include "internal.h"

size_t sink_transmit_free(const struct sink_core *core)
{
    return SINK_TRANSMIT_BYTES - core->transmit.used;
}

bool sink_transmit_put(struct sink_core *core, const struct sink_text *text, size_t room)
{
    struct sink_transmit *ring = &core->transmit;
    uint32_t at;
    uint8_t i;

    if (text->broken || text->length + room > sink_transmit_free(core)) {
        return false;
    }
    at = ring->head + ring->used;
    if (at >= SINK_TRANSMIT_BYTES) {
        at -= SINK_TRANSMIT_BYTES;
    }
    for (i = 0; i < text->length; i++) {
        ring->bytes[at] = (uint8_t)text->bytes[i];
        at++;
        if (at == SINK_TRANSMIT_BYTES) {
            at = 0;
        }
    }
    ring->used += text->length;
    return true;
}

size_t sink_core_transmit(struct sink_core *core, uint8_t *bytes, size_t capacity)
{
    struct sink_transmit *ring = &core->transmit;
    size_t count = ring->used < capacity ? ring->used : capacity;
    size_t i;

    for (i = 0; i < count; i++) {
        bytes[i] = ring->bytes[ring->head];
        ring->head++;
        if (ring->head == SINK_TRANSMIT_BYTES) {
            ring->head = 0;
        }
    }
    ring->used -= (uint32_t)count;
    return count;
}

size_t sink_core_transmit_waiting(const struct sink_core *core)
{
    return core->transmit.used;
}
