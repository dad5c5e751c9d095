/* Recruitment, pool, length, velocity and the pulse itself against published and computed values. */
#include "core/muscle/muscle.h"
#include "core/muscle/recruitment.h"
#include "support/muscles.h"
#include "support/near.h"

#include <math.h>
#include <string.h>

/* Force-length exp(-(l-1)^2/0.45): Thelen 2003, second-hand; computed */
static void length_factor_is_thelens(void **state)
{
    (void)state;
    const double length[] = {0.5, 0.8, 0.9, 1, 1.2, 1.4, 1.6};
    const double factor[] = {0.573753, 0.914947, 0.978023, 1, 0.914947, 0.700784, 0.449329};
    for (int i = 0; i < 7; i++) assert_near(muscle_length_factor(length[i]), factor[i], 5e-7, 0);
}

/* L above 0.9 from 80 to 120 % of optimal length, falling beyond: common practice, no source */
static void length_is_best_from_80_to_120_percent(void **state)
{
    (void)state;
    for (double l = 0.8; l <= 1.2001; l += 0.01) assert_true(muscle_length_factor(l) > 0.9);
    for (double l = 1.2; l < 1.8; l += 0.01)
        assert_true(muscle_length_factor(l + 0.01) < muscle_length_factor(l));
    for (double l = 0.8; l > 0.3; l -= 0.01)
        assert_true(muscle_length_factor(l - 0.01) < muscle_length_factor(l));
    assert_true(muscle_length_factor(0.75) < 0.9 && muscle_length_factor(1.25) < 0.9);
}

/* V at -1, -0.5, -0.25, -0.1, 0, 0.1, 0.5: model chapter (Hill's relation in Thelen's 2003 form) */
static void velocity_factor_is_thelens(void **state)
{
    (void)state;
    const double u[] = {-1, -0.5, -0.25, -0.1, 0, 0.1, 0.5};
    const double v[] = {0, 0.166667, 0.375, 0.642857, 1, 1.285714, 1.370370};
    for (int i = 0; i < 7; i++) assert_near(muscle_velocity_factor(u[i]), v[i], 5e-7, 0);
    assert_near(muscle_velocity_factor(-1.5), 0, 0, 0);
}

/* I = b (1 + c/d): twice rheobase at d = chronaxie (Geddes 2004, read); there half of the pool is recruited
 */
static void half_is_recruited_on_the_strength_duration_curve(void **state)
{
    (void)state;
    const struct recruitment law = {
        .law = RECRUITMENT_STRENGTH_DURATION, .rheobase_ma = 22, .chronaxie_us = 180, .spread = 0.25};
    assert_near(recruitment_of(&law, 180, 44), 0.5, 1e-15, 0);
    assert_near(recruitment_of(&law, 360, 33), 0.5, 1e-15, 0);
    /* one spread above in the logarithm: Phi(1) = 0.841344746068543 (Abramowitz and Stegun 26.2, memory) */
    assert_near(recruitment_of(&law, 180, 44 * exp(0.25)), 0.841344746068543, 1e-14, 0);
    assert_near(recruitment_of(&law, 180, 44 * exp(-0.25 * 3.5)), 0, 0, 0); /* 0.00023: below 0.001 */
    assert_near(recruitment_of(&law, 0, 44), 0, 0, 0);
}

static void duration_exponential_follows_its_law(void **state)
{
    (void)state;
    const struct recruitment law = {
        .law = RECRUITMENT_DURATION_EXPONENTIAL, .pd0_us = 130, .pdt_us = 190, .current_ma = 60};
    assert_near(recruitment_of(&law, 130, 60), 0, 0, 0);
    assert_near(recruitment_of(&law, 320, 60), 1 - exp(-1), 1e-15, 0);
    struct message why;
    assert_status(recruitment_takes_current(&law, 60, &why), STATUS_OK, &why);
    assert_status(recruitment_takes_current(&law, 61, &why), STATUS_REFUSED, &why);
    assert_true(strstr(why.text, "61 mA") && strstr(why.text, "60 mA"));
}

static void laws_and_their_inverses_come_back(void **state)
{
    (void)state;
    const struct recruitment laws[] = {
        {.law = RECRUITMENT_STRENGTH_DURATION, .rheobase_ma = 22, .chronaxie_us = 180, .spread = 0.25},
        {.law = RECRUITMENT_DURATION_EXPONENTIAL, .pd0_us = 130, .pdt_us = 190, .current_ma = 60}};
    for (int i = 0; i < 2; i++)
        for (double rho = 0.0011; rho < 0.97; rho += 0.00731)
            assert_near(recruitment_of(&laws[i], recruitment_duration_us(&laws[i], rho, 60), 60), rho, 0,
                        1e-11);
    for (double rho = 0.0011; rho < 0.999; rho += 0.00731)
        assert_near(recruitment_of(&laws[0], 300, recruitment_current_ma(&laws[0], rho, 300)), rho, 0, 1e-11);
    for (double p = 1e-12; p < 0.5; p *= 1.7) {
        assert_near(normal_cdf(normal_inverse(p)), p, 0, 1e-12);
        assert_near(normal_inverse(1 - p), -normal_inverse(p), 1e-4, 1e-4);
    }
    /* quantile of 0.975: 1.959963984540054 (tables, memory) */
    assert_near(normal_inverse(0.975), 1.959963984540054, 1e-13, 0);
    assert_true(isnan(recruitment_duration_us(&laws[0], 0.9999, 20)));
}

static struct muscle made(const struct muscle_parameters *p)
{
    struct muscle muscle;
    struct message why;
    assert_status(muscle_init(&muscle, p, &why), STATUS_OK, &why);
    return muscle;
}

/* share proportional to 50^q, theta to 3^-(q-1/2), f to 10^(q-1/2), the latter two with share-weighted mean 1
 * (model chapter, "Pool") */
static void a_pool_keeps_the_whole_muscles_numbers(void **state)
{
    (void)state;
    struct muscle_parameters p = muscle_composed();
    for (int reversed = 0; reversed < 2; reversed++) {
        p.pool_order = reversed ? POOL_REVERSED : POOL_SIZE;
        const struct muscle m = made(&p);
        double share = 0, slower = 0, fatigue = 0;
        for (unsigned k = 0; k < 8; k++) {
            share += m.pool.share[k];
            slower += m.pool.share[k] * m.pool.slower[k];
            fatigue += m.pool.share[k] * m.pool.fatigue[k];
        }
        assert_near(share, 1, 1e-14, 0);
        assert_near(slower, 1, 1e-14, 0);
        assert_near(fatigue, 1, 1e-14, 0);
        const unsigned small = reversed ? 7 : 0, large = reversed ? 0 : 7;
        assert_near(m.pool.share[large] / m.pool.share[small], 50, 0, 1e-13);
        assert_near(m.pool.slower[small] / m.pool.slower[large], 3, 0, 1e-13);
        assert_near(m.pool.fatigue[large] / m.pool.fatigue[small], 10, 0, 1e-13);
    }
    struct message why;
    struct muscle refused;
    p.tiers = 1;
    assert_status(muscle_init(&refused, &p, &why), STATUS_REFUSED, &why);
}

/* w'_k = clamp((rho - sum before)/s_k, 0, 1); a tier with 0 is not touched, and keeps its weight */
static void tiers_are_recruited_in_order_and_untouched_ones_keep_their_weight(void **state)
{
    (void)state;
    struct muscle_parameters p = muscle_published();
    p.tiers = 4;
    const struct muscle m = made(&p);
    struct muscle_state s;
    muscle_rest(&m, &s);
    muscle_pulse(&m, &s, 0.6, 0);
    const double first[] = {1, 1, 0.4, 0};
    for (unsigned k = 0; k < 4; k++) assert_near(s.w[s.lane[k]], first[k], 1e-12, 0);
    muscle_pulse(&m, &s, 0.3, 10);
    const double second[] = {1, 0.2, 0.4, 0};
    for (unsigned k = 0; k < 4; k++) assert_near(s.w[s.lane[k]], second[k], 1e-12, 0);
    assert_near(s.S[s.lane[2]], 1, 0, 0); /* one pulse touched it */
    assert_near(s.S[s.lane[3]], 0, 0, 0);
    double share = 0;
    for (unsigned i = 0; i < s.lanes; i++) share += s.share[i];
    assert_near(share, 1, 1e-14, 0);
    struct muscle_state before = s;
    muscle_pulse(&m, &s, 0, 20);
    assert_memory_equal(&before, &s, sizeof s);
}

/* R at gaps 5/10/30 ms: 1.11136851 1.08673388 1.03190761 (computed, R0 1.143, tau_c 20) */
static void summation_has_the_published_gains(void **state)
{
    (void)state;
    const double gap[] = {5, 10, 30}, R[] = {1.11136851, 1.08673388, 1.03190761};
    const struct muscle_parameters p = muscle_untiring();
    const struct muscle m = made(&p);
    for (int i = 0; i < 3; i++) {
        struct muscle_state s;
        muscle_rest(&m, &s);
        muscle_pulse(&m, &s, 1, 0);
        muscle_pulse(&m, &s, 1,
                     gap[i]); /* S itself is not carried on here: only what the pulse adds is looked at */
        assert_near(s.S[0] - 1, R[i], 5e-9, 0);
    }
}

/* R0 = Km + 1.04 (read, Kesar 2008): at rest 1.143 with Km 0.103 */
static void R0_above_Km_takes_the_Km_of_now(void **state)
{
    (void)state;
    struct muscle_parameters p = muscle_untiring();
    p.R0 = (double)NAN;
    p.R0_above_Km = 1.04;
    const struct muscle m = made(&p);
    struct muscle_state s;
    muscle_rest(&m, &s);
    muscle_pulse(&m, &s, 1, 0);
    s.Km[0] = 0.203;
    muscle_pulse(&m, &s, 1, 20);
    assert_near(s.S[0] - 1, 1 + 0.243 * exp(-1), 1e-14, 0);
}

static void activation_of_a_pulse_costs_beta(void **state)
{
    (void)state;
    struct muscle_parameters p = muscle_published();
    p.beta_A_per_pulse = 4e-4;
    const struct muscle m = made(&p);
    struct muscle_state s;
    muscle_rest(&m, &s);
    muscle_pulse(&m, &s, 0.5, 0);
    assert_near(s.A[0], 3.009 * (1 - 4e-4 * 0.5), 1e-14, 0);
}

static void remaining_force_is_one_at_rest_and_means_fatigue_alone(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_composed();
    const struct muscle m = made(&p);
    struct muscle_state s;
    muscle_rest(&m, &s);
    assert_near(muscle_force_remaining(&m, &s, 20), 1, 1e-14, 0);
    for (unsigned i = 0; i < s.lanes; i++) s.P[i] = 0.7; /* potentiation does not count */
    assert_near(muscle_force_remaining(&m, &s, 50), 1, 1e-14, 0);
    for (unsigned i = 0; i < s.lanes; i++) s.A[i] *= 0.8;
    assert_near(muscle_force_remaining(&m, &s, 50), 0.8, 1e-14, 0);
    assert_near(muscle_capacity(&m, &s), 0.8, 1e-14, 0);
    /* one plain tier by hand: f 20 pps, R = 1 + 0.143 e^-2.5, Cbar = R 20 0.02, x = Cbar/(Km + Cbar) */
    const struct muscle_parameters plain = muscle_published();
    const struct muscle one = made(&plain);
    muscle_rest(&one, &s);
    s.Km[0] = 0.2;
    s.tau1[0] = 80;
    const double C = (1 + 0.143 * exp(-2.5)) * 0.4, x = C / (0.2 + C), x0 = C / (0.103 + C);
    assert_near(muscle_force_remaining(&one, &s, 20), x * (80 + 60 * x) / (x0 * (50.957 + 60 * x0)), 1e-13,
                0);
}

static void slopes_move_parameters_with_length(void **state)
{
    (void)state;
    struct muscle_parameters p = muscle_published();
    p.length_reference_mm = 40;
    p.slope_Km = 0.3;
    p.slope_tau1 = -0.2;
    const struct muscle_parameters at = muscle_at_length(&p, 45);
    assert_near(at.Km_rest, 0.103 * exp(0.15), 0, 1e-15);
    assert_near(at.tau1_rest_ms, 50.957 * exp(-0.1), 0, 1e-15);
    assert_near(at.tau_c_ms, 20, 0, 0);
}

static void unusable_parameters_are_refused_by_name(void **state)
{
    (void)state;
    struct message why;
    struct muscle m;
    struct muscle_parameters p = muscle_published();
    p.alpha_A_per_ms2 = 0; /* a profile with alpha_tau1 but no alpha_A is refused (model chapter) */
    assert_status(muscle_init(&m, &p, &why), STATUS_REFUSED, &why);
    assert_non_null(strstr(why.text, "alpha_tau1_per_n"));
    p = muscle_published();
    p.alpha_A_per_ms2 = 1e-7;
    assert_status(muscle_init(&m, &p, &why), STATUS_REFUSED, &why);
    assert_non_null(strstr(why.text, "alpha_A_per_ms2"));
    p = muscle_published();
    p.Km_rest = (double)NAN;
    assert_status(muscle_init(&m, &p, &why), STATUS_REFUSED, &why);
    assert_non_null(strstr(why.text, "Km_rest"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(length_factor_is_thelens),
        cmocka_unit_test(length_is_best_from_80_to_120_percent),
        cmocka_unit_test(velocity_factor_is_thelens),
        cmocka_unit_test(half_is_recruited_on_the_strength_duration_curve),
        cmocka_unit_test(duration_exponential_follows_its_law),
        cmocka_unit_test(laws_and_their_inverses_come_back),
        cmocka_unit_test(a_pool_keeps_the_whole_muscles_numbers),
        cmocka_unit_test(tiers_are_recruited_in_order_and_untouched_ones_keep_their_weight),
        cmocka_unit_test(summation_has_the_published_gains),
        cmocka_unit_test(R0_above_Km_takes_the_Km_of_now),
        cmocka_unit_test(activation_of_a_pulse_costs_beta),
        cmocka_unit_test(remaining_force_is_one_at_rest_and_means_fatigue_alone),
        cmocka_unit_test(slopes_move_parameters_with_length),
        cmocka_unit_test(unusable_parameters_are_refused_by_name),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
