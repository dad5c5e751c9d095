/* Ramps. The goal of this code: recruitment (so that force, not current) rises evenly, in few enough straight
 * pieces that a device can hold them, each pulse within half a step of its ideal where that is possible.
 * Method: pieces by the longest-first greedy cover for a given error, the error by bisection. */
#include "core/train/ramp.h"

#include "core/muscle/recruitment.h"

#include <math.h>

#define PI 3.14159265358979323846

double ramp_value(enum ramp_shape shape, unsigned i, unsigned n)
{
    const double u = (double)i / (n + 1.0);
    switch (shape) {
    case RAMP_LINEAR: return u;
    case RAMP_RAISED_COSINE: return 0.5 * (1 - cos(PI * u));
    case RAMP_EXPONENTIAL: return (1 - exp(-3 * u)) / (1 - exp(-3.0));
    }
    return u;
}

struct ramp_end ramp_end_of(const struct recruitment *recruitment, double duration_us, double current_ma)
{
    struct ramp_end end = {.duration_us = duration_us, .current_ma = current_ma};
    if (recruitment->law != RECRUITMENT_FULL) end.rho = recruitment_of(recruitment, duration_us, current_ma);
    return end;
}

double ramp_duration_us(const struct recruitment *recruitment, const struct ramp_end *end,
                        enum ramp_shape shape, unsigned i, unsigned n)
{
    const double u = ramp_value(shape, i, n);
    if (end->rho > 0) {
        const double duration_us = recruitment_duration_us(recruitment, u * end->rho, end->current_ma);
        if (isfinite(duration_us)) return fmin(duration_us, end->duration_us);
    }
    return u * end->duration_us;
}

/* A piece over periods first .. first + count - 1 being fitted. */
struct fit {
    const double *ideal_us;
    uint32_t first, count;
    uint32_t least_us,
        most_us; /* bounds of its values: those of its neighbours, so that the ramp never turns */
    bool falling;
    const struct train_grid *grid;
};

static uint32_t rounded(double value, uint32_t least, uint32_t most)
{
    if (!(value > least)) return least;
    if (value >= most) return most;
    return (uint32_t)(value + 0.5);
}

/* Greatest error of a piece with these ends, as it is expanded; a pulse that is not given is as wrong as it
 * is long. */
static double error_of(const struct fit *fit, uint32_t from, uint32_t to)
{
    double greatest = 0;
    for (uint32_t k = 0; k < fit->count; k++) {
        const uint32_t value = segment_grid_value(segment_value(from, to, k, fit->count),
                                                  fit->grid->duration_from_us, fit->grid->duration_step_us);
        greatest = fmax(greatest, fabs(value - fit->ideal_us[fit->first + k]));
    }
    return greatest;
}

/* Ends of the line that is nearest to the ideal: the secant moved by half of its greatest deviation, up by
 * half a step because values are rounded down to steps. */
static double fit_line(const struct fit *fit, uint32_t *from, uint32_t *to)
{
    const double *y = &fit->ideal_us[fit->first];
    const uint32_t n = fit->count;
    const double half_step = 0.5 * fit->grid->duration_step_us;
    double above = 0, below = 0;
    for (uint32_t k = 1; k + 1 < n; k++) {
        const double off = y[k] - (y[0] * (n - 1 - k) + y[n - 1] * k) / (n - 1);
        above = fmax(above, off);
        below = fmin(below, off);
    }
    const double shift = half_step + 0.5 * (above + below);
    *from = rounded(y[0] + shift, fit->least_us, fit->most_us);
    *to = rounded(y[n - 1] + shift, fit->least_us, fit->most_us);
    if (fit->falling ? *to > *from : *to < *from) *to = *from;
    return error_of(fit, *from, *to);
}

/* Covers the ideal with pieces of at most `allowed` error, each as long as it can be. Returns the pieces
 * needed, RAMP_PIECES_MAX + 1 where that is too many. */
static size_t cover(struct fit fit, uint32_t total, double allowed, uint32_t lengths[RAMP_PIECES_MAX],
                    struct ramp_piece pieces[RAMP_PIECES_MAX])
{
    size_t used = 0;
    for (uint32_t at = 0; at < total;) {
        if (used == RAMP_PIECES_MAX) return RAMP_PIECES_MAX + 1;
        uint32_t good = 1, bad = total - at + 1, from, to;
        fit.first = at;
        for (uint32_t length = 2; good + 1 < bad; length = good * 2 < bad ? good * 2 : (good + bad) / 2) {
            fit.count = length;
            if (fit_line(&fit, &from, &to) <= allowed)
                good = length;
            else
                bad = length;
        }
        fit.count = good;
        if (fit_line(&fit, &from, &to) > allowed && allowed < 1e8) return RAMP_PIECES_MAX + 1;
        lengths[used] = good;
        pieces[used++] = (struct ramp_piece){.from_us = from, .to_us = to};
        if (fit.falling)
            fit.most_us = to;
        else
            fit.least_us = to;
        at += good;
    }
    return used;
}

size_t ramp_pieces(const double *ideal_us, uint32_t count, uint32_t most_us, uint32_t least_us,
                   uint32_t current_ua, uint32_t first_pulses, uint32_t other_pulses,
                   const struct train_grid *grid, struct ramp_piece pieces[RAMP_PIECES_MAX])
{
    struct fit fit = {.ideal_us = ideal_us, .least_us = least_us, .most_us = most_us, .grid = grid};
    uint32_t lengths[RAMP_PIECES_MAX];
    if (count == 0) return 0;
    fit.falling = ideal_us[count - 1] < ideal_us[0];
    double good = 0.5 * grid->duration_step_us +
                  0.5; /* the ideal: half a step, and half a microsecond for whole ones */
    size_t used = cover(fit, count, good, lengths, pieces);
    if (used > RAMP_PIECES_MAX) {
        double bad = good;
        good = most_us + 1.0;
        for (int i = 0; i < 24 && good - bad > 0.05; i++) {
            const double middle = 0.5 * (good + bad);
            if (cover(fit, count, middle, lengths, pieces) > RAMP_PIECES_MAX)
                bad = middle;
            else
                good = middle;
        }
        used = cover(fit, count, good, lengths, pieces);
        if (used > RAMP_PIECES_MAX)
            used = cover(fit, count, 1e9, lengths, pieces); /* one straight line always covers */
    }
    for (size_t i = 0; i < used; i++) {
        pieces[i].pulses = other_pulses * lengths[i] + (i == 0 ? first_pulses - other_pulses : 0);
        pieces[i].from_ua = pieces[i].to_ua = current_ua;
    }
    return used;
}
