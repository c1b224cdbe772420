/*
 * A source and a front end for boards without converters, in integers. All
 * figures are invented: they make a sink that behaves, not a cell that exists.
 */
#ifndef MODEL_H
#define MODEL_H

#include "core.h"

enum model_source {
    MODEL_NONE,  /* nothing connected */
    MODEL_CELL,  /* a lithium-ion cell of 3.2 Ah: 4.1 V to 3.0 V, 60 mohm */
    MODEL_SUPPLY /* a 3.3 V supply, 20 mohm, that gives up at 700 mA */
};

struct model {
    const struct sink_core_config *config;
    enum model_source source;
    struct sink_core_drive drive;
    uint64_t last_us;
    uint64_t drawn_uc;     /* charge taken from the source */
    uint32_t drawn_pc;     /* and its part below one uC */
    int32_t temperature_mc;
    int32_t heat;          /* part of the temperature below 1/1000 degree, in 1/65536 */
};

void model_start(struct model *model, const struct sink_core_config *config,
                 enum model_source source);
void model_drive(struct model *model, const struct sink_core_drive *drive);
/* What the converters read at this time, with the drive last put out. */
void model_sample(struct model *model, uint64_t now_us, struct sink_core_sample *sample);

#endif
