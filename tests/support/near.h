/* Checks that cmocka lacks: doubles without a cast to float, failing on NaN and infinity; typed integers. */
#ifndef PULSEWRIGHT_TESTS_SUPPORT_NEAR_H
#define PULSEWRIGHT_TESTS_SUPPORT_NEAR_H
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

/* |actual - expected| <= absolute + relative |expected|; fails on NaN and infinity. */
#define assert_near(actual, expected, absolute, relative)                                                    \
    near_check((actual), (expected), (absolute), (relative), #actual, __FILE__, __LINE__)
void near_check(double actual, double expected, double absolute, double relative, const char *text, const char *file, int line);
/* low <= actual <= high, doubles; fails on NaN. */
#define assert_between(actual, low, high) between_check((actual), (low), (high), #actual, __FILE__, __LINE__)
void between_check(double actual, double low, double high, const char *text, const char *file, int line);
/* Status and message: prints the message where the status is another. */
#define assert_status(actual, expected, why) status_check((int)(actual), (int)(expected), (why), #actual, __FILE__, __LINE__)
struct message;
void status_check(int actual, int expected, const struct message *why, const char *text, const char *file, int line);

#endif
