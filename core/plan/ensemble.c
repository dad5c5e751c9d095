/* Draws of a muscle's parameters. The goal of this code: the spread of what a person's muscle may do, from
 * few draws and the same ones every time. Method: Richtmyer's sequence (1951): point i has coordinates
 * frac(shift_j + i sqrt(p_j)), p_j the j-th prime, shifts from the seed (splitmix64, Steele et al. 2014);
 * through the inverse normal distribution, then the Cholesky factor of the covariance of the logarithms. */
#include "core/plan/ensemble.h"
#include "core/muscle/recruitment.h"

#include <assert.h>
#include <math.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>

static const struct {
    const char *key;
    size_t offset;
} parameter_table[] = {
#define PARAMETER(key, member)                                                                               \
    {                                                                                                        \
        key, offsetof(struct muscle_parameters, member)                                                      \
    }
    PARAMETER("A_rest_n_per_ms", A_rest_n_per_ms),
    PARAMETER("Km_rest", Km_rest),
    PARAMETER("R0", R0),
    PARAMETER("R0_above_Km", R0_above_Km),
    PARAMETER("tau1_rest_ms", tau1_rest_ms),
    PARAMETER("tau2_ms", tau2_ms),
    PARAMETER("tau_c_ms", tau_c_ms),
    PARAMETER("alpha_A_per_ms2", alpha_A_per_ms2),
    PARAMETER("alpha_Km_per_ms_n", alpha_Km_per_ms_n),
    PARAMETER("alpha_tau1_per_n", alpha_tau1_per_n),
    PARAMETER("tau_fat_ms", tau_fat_ms),
    PARAMETER("beta_A_per_pulse", beta_A_per_pulse),
    PARAMETER("rheobase_ma", recruitment.rheobase_ma),
    PARAMETER("chronaxie_us", recruitment.chronaxie_us),
    PARAMETER("spread", recruitment.spread),
    PARAMETER("pd0_us", recruitment.pd0_us),
    PARAMETER("pdt_us", recruitment.pdt_us),
    PARAMETER("gain", potentiation_gain),
    PARAMETER("rise_ms", potentiation_rise_ms),
    PARAMETER("decay_ms", potentiation_decay_ms),
    PARAMETER("factor", length_factor),
    PARAMETER("relative", length_relative),
    PARAMETER("slope_Km", slope_Km),
    PARAMETER("slope_tau1", slope_tau1),
    PARAMETER("slope_tau_c", slope_tau_c),
    PARAMETER("tone_n", tone_n),
    PARAMETER("delay_ms", delay_ms),
#undef PARAMETER
};

static const unsigned primes[UNCERTAINTY_MAX] = {2,  3,  5,  7,   11,  13,  17,  19,  23,  29, 31,
                                                 37, 41, 43, 47,  53,  59,  61,  67,  71,  73, 79,
                                                 83, 89, 97, 101, 103, 107, 109, 113, 127, 131};

static uint64_t splitmix64(uint64_t *state)
{
    uint64_t z = (*state += 0x9e3779b97f4a7c15u);
    z = (z ^ (z >> 30)) * 0xbf58476d1ce4e5b9u;
    z = (z ^ (z >> 27)) * 0x94d049bb133111ebu;
    return z ^ (z >> 31);
}

bool ensemble_known(const struct profile_muscle *muscle)
{
    return muscle->uncertainties > 0;
}

static enum status find_parameter(const char *key, size_t *offset, struct message *why)
{
    for (size_t i = 0; i < sizeof parameter_table / sizeof *parameter_table; i++)
        if (strcmp(parameter_table[i].key, key) == 0) {
            *offset = parameter_table[i].offset;
            return STATUS_OK;
        }
    return status_fail(why, STATUS_REFUSED, "uncertainty: %s is no parameter of a muscle", key);
}

/* Lower factor of the covariance, row by row. A parameter that is certain (variance 0) has a row of zeros. */
static enum status cholesky(const struct profile_muscle *muscle, double *lower, struct message *why)
{
    const size_t n = muscle->uncertainties;
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j <= i; j++) {
            double sum = 0.0;
            if (muscle->covariance)
                sum = muscle->covariance[i * n + j];
            else if (i == j)
                sum = muscle->uncertainty[i].relative_sd * muscle->uncertainty[i].relative_sd;
            const double whole = sum;
            for (size_t k = 0; k < j; k++) sum -= lower[i * n + k] * lower[j * n + k];
            if (i != j) {
                lower[i * n + j] = lower[j * n + j] > 0.0 ? sum / lower[j * n + j] : 0.0;
                continue;
            }
            if (!(sum >= -1e-9 * fabs(whole)))
                return status_fail(why, STATUS_REFUSED, "the covariance of %s is not positive at %s",
                                   muscle->name, muscle->uncertainty[i].key);
            lower[i * n + i] = sum > 0.0 ? sqrt(sum) : 0.0;
        }
    return STATUS_OK;
}

enum status ensemble_draw(const struct profile_muscle *muscle, unsigned draws, uint64_t seed,
                          struct muscle_parameters *to, struct message *why)
{
    const size_t n = muscle->uncertainties;
    if (n > UNCERTAINTY_MAX)
        return status_fail(why, STATUS_REFUSED, "more than %d uncertain parameters", (int)UNCERTAINTY_MAX);
    size_t offset[UNCERTAINTY_MAX] = {0};
    double shift[UNCERTAINTY_MAX] = {0}, normal[UNCERTAINTY_MAX] = {0};
    static_assert(sizeof(double[UNCERTAINTY_MAX][UNCERTAINTY_MAX]) < 16384, "the factor stands on the stack");
    double lower[UNCERTAINTY_MAX * UNCERTAINTY_MAX] = {0};
    enum status status = cholesky(muscle, lower, why);
    uint64_t state = seed;
    for (size_t j = 0; j < n && status == STATUS_OK; j++) {
        status = find_parameter(muscle->uncertainty[j].key, &offset[j], why);
        shift[j] = (double)(splitmix64(&state) >> 11) * 0x1p-53;
    }
    for (unsigned d = 0; d < draws && status == STATUS_OK; d++) {
        to[d] = muscle->parameters;
        for (size_t j = 0; j < n; j++) {
            const double whole = shift[j] + (double)(d + 1) * sqrt((double)primes[j]);
            normal[j] = normal_inverse(fmin(fmax(whole - floor(whole), 0x1p-40), 1.0 - 0x1p-40));
        }
        for (size_t i = 0; i < n; i++) {
            double log_factor = 0.0;
            for (size_t j = 0; j <= i; j++) log_factor += lower[i * n + j] * normal[j];
            double value;
            memcpy(&value, (char *)&to[d] + offset[i], sizeof value);
            value *= exp(log_factor);
            memcpy((char *)&to[d] + offset[i], &value, sizeof value);
        }
    }
    return status;
}

static int ascending(const void *a, const void *b)
{
    const double left = *(const double *)a, right = *(const double *)b;
    return (left > right) - (left < right);
}

double ensemble_quantile(double *values, size_t n, double share)
{
    if (n == 0) return (double)NAN;
    qsort(values, n, sizeof *values, ascending);
    const double at = share * (double)(n - 1);
    const size_t below = (size_t)floor(at);
    if (below + 1 >= n) return values[n - 1];
    return values[below] + (at - (double)below) * (values[below + 1] - values[below]);
}
