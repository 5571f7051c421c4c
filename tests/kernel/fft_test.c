/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fourier transforms of both roads against the sum that defines them, and against each other; the first
 * pair in a fresh process in time. */
#include "check.h"
#include "numeric/fft.h"

#include <stdlib.h>
#include <time.h>

/* Sanitizers slow a program down too much for a bound on time. */
#if defined(__SANITIZE_ADDRESS__)
#define SLOW_BUILD 1
#elif defined(__has_feature)
#define SLOW_BUILD __has_feature(address_sanitizer)
#else
#define SLOW_BUILD 0
#endif

static const double TWO_PI = 6.28318530717958647693;
static lw_engine engine;

#define MOST 2048
static double x[2 * MOST + 2], c[2 * MOST + 4], y[2 * MOST + 4], z[2 * MOST + 4];

static void fill(size_t count)
{
    for (size_t i = 0; i < count; i++)
        x[i] = sin(1.7 * (double)(i * i)) + 0.2 * cos((double)i);
}

/* The defining sum, of n complex numbers, angle reduced exactly. */
static void slow(const double *in, double *out, size_t n, int sign)
{
    for (size_t k = 0; k < n; k++) {
        double re = 0, im = 0;
        for (size_t j = 0; j < n; j++) {
            double angle = sign * TWO_PI * (double)(j * k % n) / (double)n;
            re += in[2 * j] * cos(angle) - in[2 * j + 1] * sin(angle);
            im += in[2 * j] * sin(angle) + in[2 * j + 1] * cos(angle);
        }
        out[2 * k] = re;
        out[2 * k + 1] = im;
    }
}

static void test_sums(lw_fft_use use)
{
    static const size_t lengths[] = {1,  2,  3,  4,   5,   6,   8,   10,  12,  15,  16, 18, 30, 32, 50,
                                     60, 64, 90, 100, 128, 225, 256, 360, 480, 512, 7,  11, 14, 97, 154};
    for (size_t i = 0; i < sizeof lengths / sizeof *lengths; i++) {
        size_t n = lengths[i];
        lw_error err = LW_ERROR_NONE;
        lw_fft *plan = lw_fft_plan(&engine, n, LW_FFT_COMPLEX, use, &err);
        CHECK(plan != NULL && plan == lw_fft_plan(&engine, n, LW_FFT_COMPLEX, use, &err));
        if (plan == NULL)
            return;
        double worst = 0;
        for (int sign = -1; sign <= 1; sign += 2)
            for (size_t shift = 0; shift < 2; shift++) { /* shift 1: arrays that are not aligned */
                fill(2 * n);
                slow(x, y, n, sign);
                memcpy(z + shift, x, 2 * n * sizeof *x);
                lw_fft_complex(plan, z + shift, c + shift, sign < 0);
                for (size_t k = 0; k < 2 * n; k++)
                    worst = fmax(worst, fabs(c[shift + k] - y[k]));
            }
        CHECK_NEAR(worst, 0, 2e-15 * (double)n);
        lw_fft *real = lw_fft_plan(&engine, n, LW_FFT_REAL, use, &err);
        CHECK(real != NULL);
        for (size_t k = 0; k < n; k++) {
            x[2 * k + 1] = 0;
            z[k + 1] = x[2 * k];
        }
        slow(x, y, n, -1);
        lw_fft_forward(real, z + 1, c);
        worst = 0;
        for (size_t k = 0; k < 2 * (n / 2 + 1); k++)
            worst = fmax(worst, fabs(c[k] - y[k]));
        lw_fft_back(real, c, y + 1);
        for (size_t k = 0; k < n; k++)
            worst = fmax(worst, fabs(y[k + 1] / (double)n - x[2 * k]));
        CHECK_NEAR(worst, 0, 2e-15 * (double)n);
        /* cosine series against its definition */
        for (size_t k = 0; k <= n / 2; k++)
            x[k] = 1 / (1.0 + (double)k);
        lw_fft_cosine(real, x, y);
        worst = 0;
        for (size_t j = 0; j < n; j++) {
            double sum = x[0];
            for (size_t k = 1; k <= n / 2; k++)
                sum += (2 * k == n ? 1 : 2) * x[k] * cos(TWO_PI * (double)(j * k % n) / (double)n);
            worst = fmax(worst, fabs(sum - y[j]));
        }
        CHECK_NEAR(worst, 0, 2e-15 * (double)n);
    }
}

static void test_length(void)
{
    CHECK(lw_fft_length(0) == 2 && lw_fft_length(1) == 2 && lw_fft_length(2) == 2 && lw_fft_length(3) == 4);
    CHECK(lw_fft_length(7) == 8 && lw_fft_length(11) == 12 && lw_fft_length(17) == 18 &&
          lw_fft_length(4097) == 4320);
    for (size_t least = 1; least < 700; least++) { /* by trial */
        size_t n = least + least % 2;
        for (;; n += 2) {
            size_t rest = n;
            for (size_t f = 2; f <= 5; f++)
                while (rest % f == 0)
                    rest /= f;
            if (rest == 1)
                break;
        }
        if (lw_fft_length(least) != n)
            CHECK(lw_fft_length(least) == n);
    }
}

static double seconds(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

int main(void)
{
    lw_engine_begin(&engine);
    lw_error err = LW_ERROR_NONE;
    fill(1024);
    double start = seconds();
    lw_fft *plan = lw_fft_plan(&engine, 1024, LW_FFT_REAL, LW_FFT_FEW, &err);
    lw_fft_forward(plan, x, c);
    lw_fft_back(plan, c, y);
    double first = seconds() - start;
    printf("first pair of 1024 points: %.3f ms\n", 1e3 * first);
    if (!SLOW_BUILD)
        CHECK(first < 2e-3); /* the aim is 0.5 ms; a busy machine gets some grace */
    test_sums(LW_FFT_FEW);
    test_sums(LW_FFT_MANY);
    test_length();
    CHECK(lw_fft_plan(&engine, 0, LW_FFT_REAL, LW_FFT_FEW, &err) == NULL && err.status == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    CHECK(lw_fft_plan(&engine, (size_t)1 << 40, LW_FFT_REAL, LW_FFT_MANY, &err) == NULL);
    /* both roads over a long transform */
    err = LW_ERROR_NONE;
    fill(2 * MOST);
    double worst = 0;
    lw_fft_complex(lw_fft_plan(&engine, MOST, LW_FFT_COMPLEX, LW_FFT_FEW, &err), x, c, true);
    lw_fft_complex(lw_fft_plan(&engine, MOST, LW_FFT_COMPLEX, LW_FFT_MANY, &err), x, y, true);
    for (size_t k = 0; k < 2 * MOST; k++)
        worst = fmax(worst, fabs(c[k] - y[k]));
    CHECK_NEAR(worst, 0, 1e-12);
    for (int use = LW_FFT_FEW; use <= LW_FFT_MANY; use++)
        for (size_t n = 1024; n <= 2048; n *= 2) {
            plan = lw_fft_plan(&engine, n, LW_FFT_REAL, (lw_fft_use)use, &err);
            double best = 1;
            for (int i = 0; i < 200; i++) {
                start = seconds();
                lw_fft_forward(plan, x, c);
                lw_fft_back(plan, c, y);
                best = fmin(best, seconds() - start);
            }
            printf("%s %zu: %.1f us a pair\n", use == LW_FFT_FEW ? "plain" : "FFTW", n, 1e6 * best);
        }
    lw_engine_end(&engine);
    return lw_checks_end();
}
