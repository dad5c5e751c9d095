/* The project's own checks. The goal of this code: a NaN never passes, and a failure shows all digits. */
#include "support/near.h"

#include "core/status/status.h"
#include <math.h>
#include <stdio.h>

void near_check(double actual, double expected, double absolute, double relative, const char *text, const char *file, int line)
{
    if (isfinite(actual) && isfinite(expected) && fabs(actual - expected) <= absolute + relative * fabs(expected)) return;
    print_error("%s is %.17g, not %.17g (within %g + %g relative)\n", text, actual, expected, absolute, relative);
    _fail(file, line);
}

void between_check(double actual, double low, double high, const char *text, const char *file, int line)
{
    if (actual >= low && actual <= high) return;
    print_error("%s is %.17g, not in %.17g .. %.17g\n", text, actual, low, high);
    _fail(file, line);
}

void status_check(int actual, int expected, const struct message *why, const char *text, const char *file, int line)
{
    if (actual == expected) return;
    print_error("%s gave %d, not %d: %s\n", text, actual, expected, why ? why->text : "");
    _fail(file, line);
}
