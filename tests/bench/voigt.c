/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Voigt kernel by itself, for counting its instructions.
 * usage: bench_voigt RUNG core|middle|far POINTS
 * One node, value and all derivatives. The points are where the asked series serves: |z| below 5, 10 to 20, or 30 to
 * 100. Prints the rung that ran. */
#include "bench.h"
#include "numeric/voigt.h"

#include <math.h>

int main(int argc, char **argv)
{
    size_t n = argc == 4 ? strtoul(argv[3], NULL, 10) : 0;
    double low = 0, high = 5;
    if (n < 2) {
        fprintf(stderr, "usage: bench_voigt RUNG core|middle|far POINTS\n");
        return 2;
    }
    if (strcmp(argv[2], "middle") == 0)
        low = 10, high = 20;
    else if (strcmp(argv[2], "far") == 0)
        low = 30, high = 100;
    double *x = bench_take(5 * n, sizeof *x), gauss = 0.1, unit = gauss / (2 * sqrt(log(2)));
    for (size_t i = 0; i < n; i++)
        x[i] = unit * (low + (high - low) * (double)i / (double)(n - 1));
    lw_voigt_node node = {.weight = 1};
    lw_voigt_sums sums = {.value = x + n, .d_position = x + 2 * n, .d_variance = x + 3 * n, .d_lorentz = x + 4 * n};
    const lw_voigt_kernel *kernel = lw_voigt_kernel_for(bench_rung(argv[1]));
    double began = bench_now();
    kernel->sum(n, x, &node, 1, gauss * gauss, 0.05, 0, &sums);
    printf("{\"rung\": \"%s\", \"seconds\": %.9g, \"sum\": %.17g}\n", kernel->rung, bench_now() - began, x[n] + x[5 * n - 1]);
    free(x);
    return 0;
}
