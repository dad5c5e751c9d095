/* Plan -> image. The goal of this code: what is checked is what is compiled is what is sent; a value the wire
 * can not carry is refused, never rounded. */
#include "bridge/gate/gate.h"
#include "core/digest/blake2b.h"
#include "core/plan/plan.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static enum status fill_identity(const struct stimulator *stimulator, const char *unit,
                                 enum signoff_kind kind, struct image_identity *identity, struct message *why)
{
    const char *name = unit && unit[0] ? unit : stimulator->unit;
    if (!name[0] && kind == SIGNOFF_REHEARSAL) name = stimulator->name; /* a twin answers to it */
    if (!name[0])
        return status_fail(
            why, STATUS_REFUSED,
            "the stimulator's document names no unit: which very device is this for? (--unit)");
    if (strlen(name) >= IMAGE_NAME_SIZE)
        return status_fail(why, STATUS_REFUSED, "the unit's name \"%s\" is longer than %d characters", name,
                           IMAGE_NAME_SIZE - 1);
    *identity = image_identity_of(stimulator);
    memset(identity->unit, 0, sizeof identity->unit);
    memcpy(identity->unit, name, strlen(name));
    return STATUS_OK;
}

struct image_identity image_identity_of(const struct stimulator *stimulator)
{
    const struct train_grid grid = stimulator_grid(stimulator);
    struct image_identity identity = {
        .channels = (uint8_t)stimulator->channels,
        .capacitor_balanced = stimulator->capacitor_balanced,
        .independent = stimulator->independent,
        .current_from_ua = grid.current_from_ua,
        .current_to_ua = (uint32_t)lround(stimulator->current_ma.to * 1e3),
        .current_step_ua = grid.current_step_ua,
        .duration_from_us = grid.duration_from_us,
        .duration_to_us = (uint16_t)lround(stimulator->duration_us.to),
        .duration_step_us = grid.duration_step_us,
        .interphase_us = (uint16_t)lround(stimulator->interphase_us),
        .recovery_us = stimulator->capacitor_balanced ? (uint32_t)lround(stimulator->recovery_us) : 0};
    (void)snprintf(identity.unit, sizeof identity.unit, "%.31s",
                   stimulator->unit[0] ? stimulator->unit : stimulator->name);
    for (size_t g = 0; g < stimulator->returns; g++)
        for (size_t i = 0; i < stimulator->return_group[g].channels; i++)
            identity.return_group[stimulator->return_group[g].channel[i] - 1] = (uint8_t)(g + 1);
    return identity;
}

static enum status fill_header(const struct plan *plan, enum signoff_kind kind, struct image *image,
                               struct message *why)
{
    uint8_t digest[32];
    if (plan->channels < 1 || plan->channels > IMAGE_CHANNELS_MAX)
        return status_fail(why, STATUS_REFUSED, "a plan may drive 1 to %d channels", IMAGE_CHANNELS_MAX);
    image->header = (struct image_header){.format = 1,
                                          .kind = IMAGE_TIMED,
                                          .signoff = (uint8_t)kind,
                                          .channels = (uint8_t)plan->channels,
                                          .common_period_us = plan->common_period_us};
    for (size_t c = 0; c < plan->channels; c++) {
        const struct plan_channel *channel = &plan->channel[c];
        image->header.channel[c] = (uint8_t)channel->channel;
        image->limits[c] = plan_channel_limits(plan, c);
        if (isnan(channel->force_cap_n)) continue;
        if (channel->force_cap_n > 1e6)
            return status_fail(why, STATUS_REFUSED, "channel %u: a force cap of %g N can not be carried",
                               channel->channel, channel->force_cap_n);
        image->header.force_cap_mn[c] = (uint32_t)floor(channel->force_cap_n * 1e3);
    }
    blake2b(digest, sizeof digest, plan->person, strlen(plan->person));
    for (int i = 8; i-- > 0;) image->header.person_digest = image->header.person_digest << 8 | digest[i];
    return STATUS_OK;
}

/* Pulses that the device will give, and the time of the last: from the same expansion that the device runs.
 */
static uint64_t last_pulse_us(const struct segment *segments, size_t count, const struct train_grid *grid,
                              uint64_t *pulses)
{
    uint64_t last_us = 0;
    for (size_t i = 0; i < count; i++) {
        struct segment_cursor cursor;
        struct pulse pulse;
        segment_begin(&cursor, &segments[i], grid);
        while (segment_next(&cursor, &pulse)) {
            (*pulses)++;
            if (pulse.at_us > last_us) last_us = pulse.at_us;
        }
    }
    return last_us;
}

enum status image_of_plan(const struct plan *plan, const char *unit, enum signoff_kind kind,
                          struct image *image, struct message *why)
{
    enum { END_AFTER_US = 20000 };
    struct segment *segments = NULL;
    size_t count = 0;
    memset(image, 0, sizeof *image);
    enum status status = fill_header(plan, kind, image, why);
    if (status == STATUS_OK) status = fill_identity(&plan->stimulator, unit, kind, &image->identity, why);
    if (status == STATUS_OK) status = plan_segments(plan, &segments, &count, why);
    if (status != STATUS_OK) return status;
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    const uint64_t last_us = last_pulse_us(segments, count, &grid, &image->header.pulses);
    image->segments = calloc(count + 1, sizeof *image->segments);
    if (count == 0 || count >= IMAGE_SEGMENTS_MAX)
        status = status_fail(why, STATUS_REFUSED, "the plan holds %zu segments, an image may hold 1 to %d",
                             count, IMAGE_SEGMENTS_MAX - 1);
    else if (!image->segments)
        status = status_fail(why, STATUS_INTERNAL, "no memory for the image");
    for (size_t i = 0; status == STATUS_OK && i < count; i++) {
        uint8_t octets[IMAGE_SEGMENT_OCTETS];
        struct image_segment back;
        image->segments[i].clock = SEGMENT_TIMED;
        image->segments[i].index = (uint32_t)i + 1;
        image->segments[i].segment = segments[i];
        /* carried exactly, or refused */
        if (!image_segment_decode(octets, image_segment_encode(&image->segments[i], octets), &back) ||
            memcmp(&back.segment, &segments[i], sizeof back.segment) != 0)
            status =
                status_fail(why, STATUS_REFUSED,
                            "segment %zu (channel %u, at %.3f s) holds a value that the wire can not carry",
                            i + 1, segments[i].channel, (double)segments[i].start_us / 1e6);
    }
    free(segments);
    if (status != STATUS_OK) {
        image_free(image);
        return status;
    }
    image->segments[count].clock = SEGMENT_END;
    image->segments[count].segment.start_us = last_us + END_AFTER_US;
    image->n = (uint32_t)count + 1;
    image_seal(image);
    return STATUS_OK;
}

void image_free(struct image *image)
{
    free(image->segments);
    image->segments = NULL;
    image->n = 0;
}
