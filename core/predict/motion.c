/* A moving muscle: length and velocity between a motion's samples. The goal of this code: the engine never
 * steps across a corner of the drive, so that its order holds. Length and velocity factors: Thelen 2003
 * (core/muscle). */
#include "core/muscle/muscle.h"
#include "core/predict/engine.h"

#include <math.h>

/* The time within the motion's samples; a motion that is not periodic has ended beyond its last row. */
static double within(const struct motion *motion, double time_ms, double *start_ms)
{
    const double first = motion->time_ms[0], last = motion->time_ms[motion->samples - 1];
    *start_ms = 0;
    if (!motion->periodic || (time_ms >= first && time_ms < last)) return time_ms;
    const double period = last - first;
    *start_ms = floor((time_ms - first) / period) * period;
    return time_ms - *start_ms;
}

/* Last row at or before a time within the samples. */
static size_t row_before(const struct motion *motion, double time_ms)
{
    size_t low = 0, high = motion->samples - 1;
    while (high - low > 1) {
        const size_t middle = (low + high) / 2;
        if (motion->time_ms[middle] <= time_ms)
            low = middle;
        else
            high = middle;
    }
    return low;
}

double motion_factor(const struct motion *motion, double time_ms)
{
    const size_t last = motion->samples - 1;
    double start_ms;
    const double t = within(motion, time_ms, &start_ms);
    /* before its first row and after its last one a motion stands still */
    if (t < motion->time_ms[0]) return muscle_length_factor(motion->relative_length[0]);
    if (t > motion->time_ms[last]) return muscle_length_factor(motion->relative_length[last]);
    const size_t row = row_before(motion, t);
    const double part = (t - motion->time_ms[row]) / (motion->time_ms[row + 1] - motion->time_ms[row]);
    const double length = motion->relative_length[row] +
                          part * (motion->relative_length[row + 1] - motion->relative_length[row]);
    const double velocity = motion->relative_velocity[row] +
                            part * (motion->relative_velocity[row + 1] - motion->relative_velocity[row]);
    return muscle_length_factor(length) * muscle_velocity_factor(velocity);
}

/* Where the velocity crosses `level` between two rows, after t; the row's end where it does not. */
static double crossing(const struct motion *motion, size_t row, double t, double level, double end)
{
    const double from = motion->relative_velocity[row], to = motion->relative_velocity[row + 1];
    if ((from < level) == (to < level)) return end;
    const double span = motion->time_ms[row + 1] - motion->time_ms[row];
    const double at = motion->time_ms[row] + span * (level - from) / (to - from);
    return at > t + 1e-9 && at < end ? at : end;
}

double motion_piece_end_ms(const struct motion *motion, double time_ms)
{
    const size_t last = motion->samples - 1;
    double start_ms;
    const double t = within(motion, time_ms, &start_ms);
    if (t < motion->time_ms[0]) return motion->time_ms[0];
    if (t >= motion->time_ms[last])
        return motion->periodic ? nextafter(time_ms, (double)INFINITY) : (double)INFINITY;
    const size_t row = row_before(motion, t);
    double end = motion->time_ms[row + 1];
    end = crossing(motion, row, t, 0, end);
    end = crossing(motion, row, t, -1, end);
    end += start_ms;
    return end > time_ms ? end : nextafter(time_ms, (double)INFINITY);
}
