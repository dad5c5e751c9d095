/* Contractions into pulses and segments. The goal of this code: one reading of "ramp, hold, ramp down, trim,
 * opening, pairs", exact for prediction and on a stimulator's steps for everything that is given to a person.
 * Rules: this project's (house chapter, "Trains"). A period belongs to a part of the contraction by the time
 * of its first pulse. */
#include "core/train/contraction.h"

#include "core/muscle/recruitment.h"
#include "core/train/ramp.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { PERIODS_MAX = 10000000, SEGMENT_PULSES_MAX = 65535 };

uint32_t train_period_us(double frequency_pps)
{
    /* a rate such as 10^6/7 is not exact in a double: what is within rounding of a whole period is that
     * period */
    return (uint32_t)ceil(1e6 / frequency_pps * (1 - 1e-12));
}

static uint32_t whole_us(double ms)
{
    return (uint32_t)llround(ms * 1000);
}

/* The grid of a regular contraction: where periods start and how many pulses each has. */
struct grid_course {
    uint64_t anchor_us; /* of the periods after the opening */
    uint32_t period_us, gap_us;
    uint32_t first_pulses, other_pulses;
};

static struct grid_course grid_course(const struct contraction *contraction)
{
    struct grid_course course = {.period_us = train_period_us(contraction->frequency_pps),
                                 .gap_us = whole_us(contraction->opening_gap_ms),
                                 .other_pulses = contraction->pairs ? 2 : 1};
    course.first_pulses =
        contraction->opening > course.other_pulses ? contraction->opening : course.other_pulses;
    /* in a train of pairs a first pair is a pair like the others */
    if (course.first_pulses > course.other_pulses || !contraction->pairs)
        course.anchor_us = (uint64_t)(course.first_pulses - 1) * course.gap_us;
    return course;
}

static uint64_t course_start_us(const struct grid_course *course, uint32_t k)
{
    return k == 0 ? 0 : course->anchor_us + (uint64_t)k * course->period_us;
}

/* Periods that start before `end_us`. */
static uint32_t periods_before(const struct grid_course *course, double end_us)
{
    if (!(end_us > 0)) return 0;
    if (!(end_us > (double)course->anchor_us + course->period_us)) return 1;
    const double more = ceil((end_us - (double)course->anchor_us) / course->period_us - 1e-9);
    return more < PERIODS_MAX ? (uint32_t)more : PERIODS_MAX;
}

struct contraction_periods contraction_count(const struct contraction *contraction)
{
    const struct grid_course course = grid_course(contraction);
    const double up_us = 1000 * contraction->ramp_up.ms, hold_us = up_us + 1000 * contraction->hold_ms;
    const uint32_t up = periods_before(&course, up_us), hold = periods_before(&course, hold_us);
    const uint32_t down = periods_before(&course, hold_us + 1000 * contraction->ramp_down.ms);
    return (struct contraction_periods){.ramp_up = up, .hold = hold - up, .ramp_down = down - hold};
}

double contraction_period_start_ms(const struct contraction *contraction, uint32_t k)
{
    const struct grid_course course = grid_course(contraction);
    return (double)course_start_us(&course, k) / 1000;
}

static double trim_or(double trim, double value)
{
    return isnan(trim) ? value : trim;
}

static enum status check(const struct contraction *contraction, const struct recruitment *recruitment,
                         struct message *why)
{
    const double end_ma = trim_or(contraction->trim_current_ma, contraction->current_ma);
    const enum status status = recruitment_takes_current(recruitment, contraction->current_ma, why);
    if (status != STATUS_OK) return status;
    if (contraction->gaps) return STATUS_OK;
    if (!(contraction->frequency_pps > 0) || !(contraction->frequency_pps <= 1e6))
        return status_fail(why, STATUS_REFUSED, "frequency_pps holds %g, it may hold a number above 0",
                           contraction->frequency_pps);
    if (contraction->opening < 1 || contraction->opening > 3)
        return status_fail(why, STATUS_REFUSED, "an opening has %u pulses, it may have 1 to 3",
                           contraction->opening);
    const struct grid_course course = grid_course(contraction);
    if (course.first_pulses > 1 && (course.gap_us < 1 || course.gap_us >= course.period_us))
        return status_fail(why, STATUS_REFUSED, "a gap of %u us does not fit into a period of %u us",
                           course.gap_us, course.period_us);
    const struct contraction_periods count = contraction_count(contraction);
    if ((uint64_t)count.ramp_up + count.hold + count.ramp_down >= PERIODS_MAX)
        return status_fail(why, STATUS_REFUSED, "a contraction has more than %d periods", (int)PERIODS_MAX);
    return recruitment_takes_current(recruitment, end_ma, why);
}

/* Settings of period k, unrounded. */
static void exact_settings(const struct contraction *contraction, const struct recruitment *recruitment,
                           const struct contraction_periods *count, uint32_t k, double *duration_us,
                           double *current_ma)
{
    const double end_us = trim_or(contraction->trim_duration_us, contraction->duration_us);
    const double end_ma = trim_or(contraction->trim_current_ma, contraction->current_ma);
    if (k < count->ramp_up) {
        const struct ramp_end end =
            ramp_end_of(recruitment, contraction->duration_us, contraction->current_ma);
        *duration_us = ramp_duration_us(recruitment, &end, contraction->ramp_up.shape, k + 1, count->ramp_up);
        *current_ma = contraction->current_ma;
    } else if (k < count->ramp_up + count->hold) {
        const uint32_t i = k - count->ramp_up;
        const double part = count->hold > 1 ? (double)i / (count->hold - 1.0) : 0;
        *duration_us = contraction->duration_us + part * (end_us - contraction->duration_us);
        *current_ma = contraction->current_ma + part * (end_ma - contraction->current_ma);
    } else {
        const uint32_t i = k - count->ramp_up - count->hold; /* 0 is the strongest */
        const struct ramp_end end = ramp_end_of(recruitment, end_us, end_ma);
        *duration_us = ramp_duration_us(recruitment, &end, contraction->ramp_down.shape, count->ramp_down - i,
                                        count->ramp_down);
        *current_ma = end_ma;
    }
}

static enum status gap_pulses(const struct contraction *contraction, struct train_pulse *pulses,
                              size_t capacity, size_t *count, struct message *why)
{
    uint64_t at_us = 0;
    *count = contraction->gaps + 1;
    if (*count > capacity)
        return status_fail(why, STATUS_REFUSED, "%zu pulses are needed, there is room for %zu", *count,
                           capacity);
    for (size_t i = 0; i < *count; i++) {
        pulses[i] = (struct train_pulse){.time_ms = (double)at_us / 1000,
                                         .duration_us = contraction->duration_us,
                                         .current_ma = contraction->current_ma};
        if (i < contraction->gaps) at_us += whole_us(contraction->gaps_ms[i]);
    }
    return STATUS_OK;
}

enum status contraction_pulses(const struct contraction *contraction, const struct recruitment *recruitment,
                               struct train_pulse *pulses, size_t capacity, size_t *count,
                               struct message *why)
{
    *count = 0;
    const enum status status = check(contraction, recruitment, why);
    if (status != STATUS_OK) return status;
    if (contraction->gaps) return gap_pulses(contraction, pulses, capacity, count, why);
    const struct contraction_periods parts = contraction_count(contraction);
    const struct grid_course course = grid_course(contraction);
    const uint32_t periods = parts.ramp_up + parts.hold + parts.ramp_down;
    if (periods == 0) return status_fail(why, STATUS_REFUSED, "a contraction has neither ramp nor hold");
    *count = course.first_pulses + (size_t)(periods - 1) * course.other_pulses;
    if (*count > capacity)
        return status_fail(why, STATUS_REFUSED, "%zu pulses are needed, there is room for %zu", *count,
                           capacity);
    size_t at = 0;
    for (uint32_t k = 0; k < periods; k++) {
        double duration_us, current_ma;
        exact_settings(contraction, recruitment, &parts, k, &duration_us, &current_ma);
        const uint32_t inside = k == 0 ? course.first_pulses : course.other_pulses;
        for (uint32_t i = 0; i < inside; i++) {
            const uint64_t at_us = course_start_us(&course, k) + (uint64_t)i * course.gap_us;
            pulses[at++] = (struct train_pulse){
                .time_ms = (double)at_us / 1000, .duration_us = duration_us, .current_ma = current_ma};
        }
    }
    return STATUS_OK;
}

/* A document's number in the grid's integers, down to the grid; 0: no pulse. The hair is for decimals that no
 * double holds. */
static uint32_t on_grid(double value, uint32_t from, uint32_t step)
{
    if (!(value > 0)) return 0;
    return segment_grid_value(value < 4e9 ? (uint32_t)(value + 1e-6) : UINT32_MAX, from, step);
}

/* Hold settings on the grid: [0] at its start, [1] at its end. */
struct hold_settings {
    uint32_t duration_us[2], current_ua[2];
};

static struct hold_settings hold_settings(const struct contraction *contraction,
                                          const struct train_grid *grid)
{
    const double us[2] = {contraction->duration_us,
                          trim_or(contraction->trim_duration_us, contraction->duration_us)};
    const double ma[2] = {contraction->current_ma,
                          trim_or(contraction->trim_current_ma, contraction->current_ma)};
    struct hold_settings hold;
    for (int i = 0; i < 2; i++) {
        hold.duration_us[i] = on_grid(us[i], grid->duration_from_us, grid->duration_step_us);
        hold.current_ua[i] = on_grid(1000 * ma[i], grid->current_from_ua, grid->current_step_ua);
    }
    return hold;
}

/* One ramp: ideal durations of the pulses that are given, then their pieces. */
static enum status compile_ramp(const struct contraction *contraction, const struct recruitment *recruitment,
                                const struct train_grid *grid, bool down, struct ramp *ramp,
                                struct message *why)
{
    const struct grid_course course = grid_course(contraction);
    const struct contraction_periods parts = contraction_count(contraction);
    const uint32_t n = down ? parts.ramp_down : parts.ramp_up;
    const struct hold_settings hold = hold_settings(contraction, grid);
    const uint32_t hold_us = hold.duration_us[down], current_ua = hold.current_ua[down];
    ramp->pieces = 0;
    if (n == 0 || hold_us == 0 || current_ua == 0) return STATUS_OK;
    double *ideal_us = malloc(n * sizeof *ideal_us);
    if (!ideal_us) return status_fail(why, STATUS_INTERNAL, "out of memory");
    const struct ramp_end end = ramp_end_of(recruitment, hold_us, current_ua / 1000.0);
    uint32_t given = 0, skipped = 0;
    for (uint32_t i = 1; i <= n; i++) {
        const uint32_t place = down ? n + 1 - i : i;
        const double ideal = ramp_duration_us(recruitment, &end, ramp->shape, place, n);
        if (on_grid(ideal, grid->duration_from_us, grid->duration_step_us) == 0)
            skipped++;
        else
            ideal_us[given++] = ideal;
    }
    /* the opening is the first period; a ramp down opens where there is nothing before it */
    const bool opens = down ? parts.ramp_up == 0 && parts.hold == 0 : skipped == 0;
    const uint32_t first = opens ? course.first_pulses : course.other_pulses;
    const uint32_t least = grid->duration_from_us > 0 ? grid->duration_from_us : 1;
    ramp->pieces = ramp_pieces(ideal_us, given, hold_us, least, current_ua, first, course.other_pulses, grid,
                               ramp->piece);
    free(ideal_us);
    return STATUS_OK;
}

enum status contraction_compile_ramps(struct contraction *contraction, const struct recruitment *recruitment,
                                      const struct train_grid *grid, struct message *why)
{
    struct ramp up = contraction->ramp_up, down = contraction->ramp_down;
    enum status status = check(contraction, recruitment, why);
    if (status != STATUS_OK) return status;
    if (contraction->gaps) return STATUS_OK;
    status = compile_ramp(contraction, recruitment, grid, false, &up, why);
    if (status == STATUS_OK) status = compile_ramp(contraction, recruitment, grid, true, &down, why);
    if (status != STATUS_OK) return status;
    contraction->ramp_up = up;
    contraction->ramp_down = down;
    return STATUS_OK;
}

/* Periods that a ramp's pieces stand for. */
static uint32_t piece_periods(const struct ramp *ramp, const struct grid_course *course, bool opens)
{
    uint32_t pulses = 0;
    for (size_t i = 0; i < ramp->pieces; i++) pulses += ramp->piece[i].pulses;
    if (pulses == 0) return 0;
    if (opens) pulses -= course->first_pulses - course->other_pulses;
    return pulses / course->other_pulses;
}

/* Whether the opening itself is given: the whole ramp up is, or there is none. */
static bool opening_given(const struct contraction *contraction, const struct grid_course *course)
{
    const struct contraction_periods count = contraction_count(contraction);
    if (count.ramp_up == 0) return true;
    uint32_t pulses = 0;
    for (size_t i = 0; i < contraction->ramp_up.pieces; i++) pulses += contraction->ramp_up.piece[i].pulses;
    return pulses == course->first_pulses + (count.ramp_up - 1) * course->other_pulses;
}

double contraction_skipped_ms(const struct contraction *contraction, const struct train_grid *grid)
{
    if (!grid || contraction->gaps) return 0;
    const struct grid_course course = grid_course(contraction);
    const uint32_t up = contraction_count(contraction).ramp_up;
    if (opening_given(contraction, &course)) return 0;
    return (double)course_start_us(&course, up - piece_periods(&contraction->ramp_up, &course, false)) / 1000;
}

/* Segments being made. */
struct making {
    const struct contraction *contraction;
    const struct grid_course *course;
    uint64_t origin_us; /* of the contraction's grid */
    uint8_t channel;
    struct segment *segments;
    size_t capacity, count;
    uint32_t next_period;
};

static enum status add_segment(struct making *making, uint32_t pulses, uint32_t from_us, uint32_t to_us,
                               uint32_t from_ua, uint32_t to_ua, struct message *why)
{
    const struct grid_course *course = making->course;
    const bool opens = making->next_period == 0;
    const uint32_t first = opens ? course->first_pulses : course->other_pulses;
    if (pulses == 0) return STATUS_OK;
    if (pulses > SEGMENT_PULSES_MAX || from_us > UINT16_MAX || to_us > UINT16_MAX ||
        course->gap_us > UINT16_MAX)
        return status_fail(why, STATUS_REFUSED,
                           "%u pulses of %u to %u us with gaps of %u us do not fit into one segment", pulses,
                           from_us, to_us, course->gap_us);
    if (making->count == making->capacity)
        return status_fail(why, STATUS_REFUSED, "more than %zu segments are needed", making->capacity);
    making->segments[making->count++] =
        (struct segment){.start_us = making->origin_us + course_start_us(course, making->next_period),
                         .period_us = course->period_us,
                         .current_from_ua = from_ua,
                         .current_to_ua = to_ua,
                         .count = (uint16_t)pulses,
                         .opening_gap_us = (uint16_t)(course->first_pulses > 1 ? course->gap_us : 0),
                         .duration_from_us = (uint16_t)from_us,
                         .duration_to_us = (uint16_t)to_us,
                         .channel = making->channel,
                         .pattern = making->contraction->pairs ? SEGMENT_PAIRS : SEGMENT_SINGLES,
                         .opening = (uint8_t)(opens ? making->contraction->opening : 1)};
    making->next_period += pulses <= first ? 1 : 1 + (pulses - first) / course->other_pulses;
    return STATUS_OK;
}

static enum status add_ramp(struct making *making, const struct ramp *ramp, struct message *why)
{
    for (size_t i = 0; i < ramp->pieces; i++) {
        const struct ramp_piece *piece = &ramp->piece[i];
        const enum status status = add_segment(making, piece->pulses, piece->from_us, piece->to_us,
                                               piece->from_ua, piece->to_ua, why);
        if (status != STATUS_OK) return status;
    }
    return STATUS_OK;
}

/* Time of the last pulse that the segments give; false where they give none. */
static bool last_given(const struct segment *segments, size_t count, const struct train_grid *grid,
                       uint64_t *last_us)
{
    bool any = false;
    for (size_t i = count; i-- > 0 && !any;) {
        struct segment_cursor cursor;
        struct pulse pulse;
        segment_begin(&cursor, &segments[i], grid);
        while (segment_next(&cursor, &pulse)) {
            *last_us = pulse.at_us;
            any = true;
        }
    }
    return any;
}

static enum status gap_segments(const struct contraction *contraction, const struct train_grid *grid,
                                struct making *making, struct message *why)
{
    const struct hold_settings hold = hold_settings(contraction, grid);
    uint64_t at_us = making->origin_us;
    if (hold.duration_us[0] > UINT16_MAX)
        return status_fail(why, STATUS_REFUSED, "a duration of %u us does not fit into a segment",
                           hold.duration_us[0]);
    for (size_t i = 0; i <= contraction->gaps;) {
        /* equal gaps in a row are one segment */
        const uint32_t period_us = i < contraction->gaps ? whole_us(contraction->gaps_ms[i]) : 1;
        size_t run = 1;
        while (i + run <= contraction->gaps && whole_us(contraction->gaps_ms[i + run - 1]) == period_us &&
               run < SEGMENT_PULSES_MAX)
            run++;
        if (making->count == making->capacity)
            return status_fail(why, STATUS_REFUSED, "more than %zu segments are needed", making->capacity);
        /* a run of two that shares its second pulse with a longer run later is still right: the next segment
         * starts after it */
        making->segments[making->count++] =
            (struct segment){.start_us = at_us,
                             .period_us = period_us,
                             .current_from_ua = hold.current_ua[0],
                             .current_to_ua = hold.current_ua[0],
                             .count = (uint16_t)run,
                             .duration_from_us = (uint16_t)hold.duration_us[0],
                             .duration_to_us = (uint16_t)hold.duration_us[0],
                             .channel = making->channel,
                             .pattern = SEGMENT_SINGLES,
                             .opening = 1};
        at_us += (uint64_t)(run - 1) * period_us;
        i += run;
        if (i <= contraction->gaps) at_us += whole_us(contraction->gaps_ms[i - 1]);
    }
    return STATUS_OK;
}

static enum status regular_segments(const struct contraction *contraction, const struct train_grid *grid,
                                    struct making *making, struct message *why)
{
    const struct contraction_periods count = contraction_count(contraction);
    const struct hold_settings hold = hold_settings(contraction, grid);
    const uint32_t up =
        piece_periods(&contraction->ramp_up, making->course, opening_given(contraction, making->course));
    if (up > count.ramp_up)
        return status_fail(why, STATUS_REFUSED, "the pieces of ramp_up have %u periods, its %g ms have %u",
                           up, contraction->ramp_up.ms, count.ramp_up);
    making->next_period = count.ramp_up - up;
    making->origin_us -= course_start_us(making->course, making->next_period);
    enum status status = add_ramp(making, &contraction->ramp_up, why);
    if (status != STATUS_OK) return status;
    const bool opens = making->next_period == 0;
    const uint32_t each = making->course->other_pulses;
    const uint32_t pulses =
        count.hold * each + (opens && count.hold > 0 ? making->course->first_pulses - each : 0);
    status = add_segment(making, pulses, hold.duration_us[0], hold.duration_us[1], hold.current_ua[0],
                         hold.current_ua[1], why);
    if (status != STATUS_OK) return status;
    return add_ramp(making, &contraction->ramp_down, why);
}

enum status contraction_segments(const struct contraction *contraction, const struct train_grid *grid,
                                 uint64_t start_us, uint8_t channel, struct segment *segments,
                                 size_t capacity, size_t *count, uint64_t *last_pulse_us, struct message *why)
{
    *count = 0;
    const struct recruitment any = {.law = RECRUITMENT_FULL};
    enum status status = check(contraction, &any, why);
    if (status != STATUS_OK) return status;
    const struct hold_settings hold = hold_settings(contraction, grid);
    if (hold.duration_us[0] == 0 || hold.current_ua[0] == 0 || hold.duration_us[1] == 0 ||
        hold.current_ua[1] == 0)
        return status_fail(why, STATUS_REFUSED,
                           "%g us at %g mA is below what the stimulator gives (from %u us and %g mA)",
                           contraction->duration_us, contraction->current_ma, grid->duration_from_us,
                           grid->current_from_ua / 1000.0);
    const struct grid_course course = contraction->gaps ? (struct grid_course){0} : grid_course(contraction);
    struct making making = {.contraction = contraction,
                            .course = &course,
                            .origin_us = start_us,
                            .channel = channel,
                            .segments = segments,
                            .capacity = capacity};
    status = contraction->gaps ? gap_segments(contraction, grid, &making, why)
                               : regular_segments(contraction, grid, &making, why);
    if (status != STATUS_OK) return status;
    if (!last_given(segments, making.count, grid, last_pulse_us))
        return status_fail(why, STATUS_REFUSED, "a contraction gives no pulse");
    *count = making.count;
    return STATUS_OK;
}
