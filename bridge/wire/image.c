/* Images. The goal of this code: host and device hash the same octets, so that the device accepts only pulses
 * under the root that was armed, in order, holding one hash. Chain: h_n = 0, h_(i-1) = BLAKE2b-128(s_i ||
 * h_i). Freestanding. */
#include "bridge/wire/image.h"

#include "bridge/wire/octets.h"
#include "core/digest/blake2b.h"

size_t image_header_encode(const struct image_header *header, uint8_t *out)
{
    size_t at = 0;
    at = octets_put(out, at, header->format, 1);
    at = octets_put(out, at, header->kind, 1);
    at = octets_put(out, at, header->signoff, 1);
    at = octets_put(out, at, header->channels, 1);
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) at = octets_put(out, at, header->channel[i], 1);
    at = octets_put(out, at, header->common_period_us, 4);
    at = octets_put(out, at, header->cadence_from_rpm_x10, 2);
    at = octets_put(out, at, header->cadence_to_rpm_x10, 2);
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) at = octets_put(out, at, header->force_cap_mn[i], 4);
    at = octets_put(out, at, header->ease_step_thousandths, 4);
    at = octets_put(out, at, header->person_digest, 8);
    return octets_put(out, at, header->pulses, 8);
}

bool image_header_decode(const uint8_t *in, size_t size, struct image_header *header)
{
    size_t at = 0;
    unsigned seen = 0;
    if (size != IMAGE_HEADER_OCTETS) return false;
    memset(header, 0, sizeof *header);
    header->format = (uint8_t)octets_take(in, &at, 1);
    header->kind = (uint8_t)octets_take(in, &at, 1);
    header->signoff = (uint8_t)octets_take(in, &at, 1);
    header->channels = (uint8_t)octets_take(in, &at, 1);
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) header->channel[i] = (uint8_t)octets_take(in, &at, 1);
    header->common_period_us = (uint32_t)octets_take(in, &at, 4);
    header->cadence_from_rpm_x10 = (uint16_t)octets_take(in, &at, 2);
    header->cadence_to_rpm_x10 = (uint16_t)octets_take(in, &at, 2);
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++)
        header->force_cap_mn[i] = (uint32_t)octets_take(in, &at, 4);
    header->ease_step_thousandths = (uint32_t)octets_take(in, &at, 4);
    header->person_digest = octets_take(in, &at, 8);
    header->pulses = octets_take(in, &at, 8);
    if (header->format != 1 || header->kind < IMAGE_TIMED || header->kind > IMAGE_HELD) return false;
    if (header->signoff != SIGNOFF_CLINICAL && header->signoff != SIGNOFF_REHEARSAL) return false;
    if (header->channels < 1 || header->channels > IMAGE_CHANNELS_MAX || header->ease_step_thousandths > 1000)
        return false;
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) {
        const unsigned channel = header->channel[i];
        if (i >= header->channels ? channel != 0
                                  : channel < 1 || channel > IMAGE_CHANNELS_MAX || (seen & 1u << channel))
            return false;
        seen |= 1u << channel;
    }
    return true;
}

size_t image_limits_encode(const struct dose_limits *limits, uint8_t channel, uint8_t *out)
{
    const uint32_t first[] = {
        limits->current_ua,   limits->duration_us,   limits->charge_pc,  limits->rms_ua,   limits->rate,
        limits->gap_us,       limits->energy_uj,     limits->voltage_mv, limits->load_ohm, limits->net_dc_na,
        limits->mismatch_ppm, limits->interphase_us, limits->recovery_us};
    const uint32_t second[] = {limits->duty_permille, limits->first_pc, limits->slew_pc_per_ms,
                               limits->slew_memory_ms, limits->step_pc};
    size_t at = octets_put(out, 0, channel, 1);
    for (unsigned i = 0; i < sizeof first / sizeof first[0]; i++) at = octets_put(out, at, first[i], 4);
    at = octets_put(out, at, limits->on_us, 8);
    for (unsigned i = 0; i < sizeof second / sizeof second[0]; i++) at = octets_put(out, at, second[i], 4);
    at = octets_put(out, at, limits->session_us, 8);
    at = octets_put(out, at, limits->session_pulses, 8);
    return octets_put(out, at, limits->session_charge_pc, 8);
}

bool image_limits_decode(const uint8_t *in, size_t size, struct dose_limits *limits, uint8_t *channel)
{
    size_t at = 0;
    if (size != IMAGE_LIMITS_OCTETS) return false;
    *channel = (uint8_t)octets_take(in, &at, 1);
    uint32_t *const first[] = {&limits->current_ua, &limits->duration_us,  &limits->charge_pc,
                               &limits->rms_ua,     &limits->rate,         &limits->gap_us,
                               &limits->energy_uj,  &limits->voltage_mv,   &limits->load_ohm,
                               &limits->net_dc_na,  &limits->mismatch_ppm, &limits->interphase_us,
                               &limits->recovery_us};
    uint32_t *const second[] = {&limits->duty_permille, &limits->first_pc, &limits->slew_pc_per_ms,
                                &limits->slew_memory_ms, &limits->step_pc};
    for (unsigned i = 0; i < sizeof first / sizeof first[0]; i++)
        *first[i] = (uint32_t)octets_take(in, &at, 4);
    limits->on_us = octets_take(in, &at, 8);
    for (unsigned i = 0; i < sizeof second / sizeof second[0]; i++)
        *second[i] = (uint32_t)octets_take(in, &at, 4);
    limits->session_us = octets_take(in, &at, 8);
    limits->session_pulses = octets_take(in, &at, 8);
    limits->session_charge_pc = octets_take(in, &at, 8);
    /* a figure that is not stated is zero, and a zero limit lets nothing through: such a message is refused
     */
    return *channel >= 1 && *channel <= IMAGE_CHANNELS_MAX && limits->current_ua && limits->duration_us &&
           limits->charge_pc && limits->rms_ua && limits->rate && limits->gap_us && limits->energy_uj &&
           limits->voltage_mv && limits->net_dc_na && limits->on_us && limits->duty_permille &&
           limits->first_pc && limits->slew_pc_per_ms && limits->slew_memory_ms && limits->step_pc &&
           limits->session_us && limits->session_pulses && limits->session_charge_pc;
}

size_t image_identity_encode(const struct image_identity *identity, uint8_t *out)
{
    size_t at = IMAGE_NAME_SIZE;
    memcpy(out, identity->unit, IMAGE_NAME_SIZE);
    at = octets_put(out, at, identity->channels, 1);
    at = octets_put(out, at, identity->capacitor_balanced, 1);
    at = octets_put(out, at, identity->independent, 1);
    at = octets_put(out, at, identity->current_from_ua, 4);
    at = octets_put(out, at, identity->current_to_ua, 4);
    at = octets_put(out, at, identity->current_step_ua, 4);
    at = octets_put(out, at, identity->duration_from_us, 2);
    at = octets_put(out, at, identity->duration_to_us, 2);
    at = octets_put(out, at, identity->duration_step_us, 2);
    at = octets_put(out, at, identity->interphase_us, 2);
    at = octets_put(out, at, identity->recovery_us, 4);
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) at = octets_put(out, at, identity->return_group[i], 1);
    return at;
}

bool image_identity_decode(const uint8_t *in, size_t size, struct image_identity *identity)
{
    size_t at = IMAGE_NAME_SIZE;
    if (size != IMAGE_IDENTITY_OCTETS) return false;
    memcpy(identity->unit, in, IMAGE_NAME_SIZE);
    identity->channels = (uint8_t)octets_take(in, &at, 1);
    identity->capacitor_balanced = (uint8_t)octets_take(in, &at, 1);
    identity->independent = (uint8_t)octets_take(in, &at, 1);
    identity->current_from_ua = (uint32_t)octets_take(in, &at, 4);
    identity->current_to_ua = (uint32_t)octets_take(in, &at, 4);
    identity->current_step_ua = (uint32_t)octets_take(in, &at, 4);
    identity->duration_from_us = (uint16_t)octets_take(in, &at, 2);
    identity->duration_to_us = (uint16_t)octets_take(in, &at, 2);
    identity->duration_step_us = (uint16_t)octets_take(in, &at, 2);
    identity->interphase_us = (uint16_t)octets_take(in, &at, 2);
    identity->recovery_us = (uint32_t)octets_take(in, &at, 4);
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++)
        identity->return_group[i] = (uint8_t)octets_take(in, &at, 1);
    return identity->unit[IMAGE_NAME_SIZE - 1] == '\0' && identity->channels >= 1 &&
           identity->channels <= IMAGE_CHANNELS_MAX && identity->capacitor_balanced <= 1 &&
           identity->independent <= 1;
}

size_t image_segment_encode(const struct image_segment *segment, uint8_t *out)
{
    const struct segment *s = &segment->segment;
    size_t at = octets_put(out, 0, segment->index, 4);
    at = octets_put(out, at, s->channel, 1);
    at = octets_put(out, at, (uint64_t)segment->clock | (uint64_t)s->pattern << 4, 1);
    at = octets_put(out, at, s->start_us, 8);
    at = octets_put(out, at, s->count, 2);
    at = octets_put(out, at, s->period_us, 4);
    at = octets_put(out, at, s->opening, 1);
    at = octets_put(out, at, s->opening_gap_us, 2);
    at = octets_put(out, at, s->duration_from_us, 2);
    at = octets_put(out, at, s->duration_to_us, 2);
    at = octets_put(out, at, s->current_from_ua, 4);
    return octets_put(out, at, s->current_to_ua, 4);
}

/* Is a pulse segment one that the expansion can play without running over itself? */
static bool segment_is_sound(const struct segment *s)
{
    const uint32_t inside = s->pattern == SEGMENT_PAIRS && s->opening < 2 ? 1u : s->opening - 1u;
    if (s->channel < 1 || s->channel > IMAGE_CHANNELS_MAX || s->count < 1 || s->opening < 1 || s->opening > 3)
        return false;
    if (s->duration_from_us > 1000 || s->duration_to_us > 1000 || s->current_from_ua > 1u << 18 ||
        s->current_to_ua > 1u << 18)
        return false;
    if (s->start_us > UINT64_MAX / 4) return false;
    if (inside > 0 && (s->opening_gap_us == 0 || (uint64_t)s->opening_gap_us * inside >=
                                                     s->period_us + (uint64_t)s->opening_gap_us * 2))
        return false;
    return s->period_us > 0 || s->count == 1;
}

bool image_segment_decode(const uint8_t *in, size_t size, struct image_segment *segment)
{
    struct segment *s = &segment->segment;
    size_t at = 0;
    if (size != IMAGE_SEGMENT_OCTETS) return false;
    memset(segment, 0, sizeof *segment);
    segment->index = (uint32_t)octets_take(in, &at, 4);
    s->channel = (uint8_t)octets_take(in, &at, 1);
    const uint8_t clock = (uint8_t)octets_take(in, &at, 1);
    s->start_us = octets_take(in, &at, 8);
    s->count = (uint16_t)octets_take(in, &at, 2);
    s->period_us = (uint32_t)octets_take(in, &at, 4);
    s->opening = (uint8_t)octets_take(in, &at, 1);
    s->opening_gap_us = (uint16_t)octets_take(in, &at, 2);
    s->duration_from_us = (uint16_t)octets_take(in, &at, 2);
    s->duration_to_us = (uint16_t)octets_take(in, &at, 2);
    s->current_from_ua = (uint32_t)octets_take(in, &at, 4);
    s->current_to_ua = (uint32_t)octets_take(in, &at, 4);
    segment->clock = clock & 0x0F;
    s->pattern = clock >> 4;
    if (segment->index < 1 || segment->index > IMAGE_SEGMENTS_MAX || segment->clock > SEGMENT_END ||
        s->pattern > SEGMENT_PAIRS)
        return false;
    if (segment->clock == SEGMENT_END)
        return s->count == 0 && s->channel == 0 && s->start_us <= UINT64_MAX / 4;
    return segment_is_sound(s);
}

void image_link(const uint8_t *segment_octets, size_t size, const uint8_t next[IMAGE_LINK_SIZE],
                uint8_t link[IMAGE_LINK_SIZE])
{
    struct blake2b hash;
    blake2b_begin(&hash, IMAGE_LINK_SIZE);
    blake2b_add(&hash, segment_octets, size);
    blake2b_add(&hash, next, IMAGE_LINK_SIZE);
    blake2b_end(&hash, link);
}

void image_root(const struct image_header *header, const struct dose_limits *limits,
                const struct image_identity *identity, uint32_t n, const uint8_t h0[IMAGE_LINK_SIZE],
                uint8_t root[IMAGE_ROOT_SIZE])
{
    uint8_t octets[IMAGE_LIMITS_OCTETS];
    _Static_assert(IMAGE_LIMITS_OCTETS >= IMAGE_HEADER_OCTETS && IMAGE_LIMITS_OCTETS >= IMAGE_IDENTITY_OCTETS,
                   "one buffer for all three");
    struct blake2b hash;
    blake2b_begin(&hash, IMAGE_ROOT_SIZE);
    blake2b_add(&hash, octets, image_header_encode(header, octets));
    for (unsigned i = 0; i < header->channels; i++)
        blake2b_add(&hash, octets, image_limits_encode(&limits[i], header->channel[i], octets));
    blake2b_add(&hash, octets, image_identity_encode(identity, octets));
    blake2b_add(&hash, octets, octets_put(octets, 0, n, 4));
    blake2b_add(&hash, h0, IMAGE_LINK_SIZE);
    blake2b_end(&hash, root);
}

void image_seal(struct image *image)
{
    uint8_t next[IMAGE_LINK_SIZE] = {0}, octets[IMAGE_SEGMENT_OCTETS];
    for (uint32_t i = image->n; i-- > 0;) {
        image->segments[i].index = i + 1;
        memcpy(image->segments[i].link, next, sizeof next);
        image_link(octets, image_segment_encode(&image->segments[i], octets), image->segments[i].link, next);
    }
    memcpy(image->h0, next, sizeof next);
    image_root(&image->header, image->limits, &image->identity, image->n, image->h0, image->root);
}
