/* The engine's accuracy over many draws (seed 20261202, another than the test's): worst errors against CVODE
 * at rtol 1e-10. One line a figure: name value unit target. An argument is the number of draws, else 200. */
#include "support/accuracy.h"

#include <stdio.h>
#include <stdlib.h>

int main(int count, char **words)
{
    struct accuracy worst[2];
    const int failed = accuracy_of_draws(20261202, count > 1 ? atoi(words[1]) : 200, worst);
    for (int exact = 0; exact < 2; exact++) {
        const char *which = exact ? "exact" : "default";
        printf("%s_force_error %.3g of_peak <=%g\n", which, worst[exact].force,
               accuracy_promised[exact].force);
        printf("%s_capacity_error %.3g of_rest <=%g\n", which, worst[exact].capacity,
               accuracy_promised[exact].capacity);
    }
    return failed ? 1 : 0;
}
