/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/fft.h"
#include "base/arena.h"
#include "numeric/fft_plain.h"

#include <fftw3.h>
#include <stdint.h>
#include <string.h>

#define LENGTH_MOST ((size_t)1 << 26)
#define ALIGNMENT 64u

struct lw_fft {
    lw_fft *next;
    size_t n, block_size; /* block_size: of this struct with all arrays behind it */
    lw_fft_kind kind;
    lw_fft_use use;
    double *root, *work;     /* plain: roots of unity and work */
    double *in, *out;        /* aligned copies for arrays that are not aligned */
    fftw_plan forward, back; /* FFTW; NULL where the plain transform serves */
};

size_t lw_fft_length(size_t least)
{
    size_t best = SIZE_MAX;
    if (least > SIZE_MAX / 4)
        return 0;
    for (size_t five = 1; five / 5 < least; five *= 5)
        for (size_t three = five; three / 3 < least; three *= 3) {
            size_t n = 2 * three;
            while (n < least)
                n *= 2;
            if (n < best)
                best = n;
        }
    return best == SIZE_MAX ? 2 : best;
}

static void free_plans(lw_engine *engine)
{
    for (lw_fft *plan = engine->plans, *next; plan != NULL; plan = next) {
        next = plan->next;
        if (plan->forward != NULL)
            fftw_destroy_plan(plan->forward);
        if (plan->back != NULL)
            fftw_destroy_plan(plan->back);
        lw_give(engine, plan, plan->block_size);
    }
    engine->plans = NULL;
}

/* Takes the next `count` doubles of the plan's block, aligned. */
static double *part(char **at, size_t count)
{
    char *start = *at + (ALIGNMENT - (uintptr_t)*at % ALIGNMENT) % ALIGNMENT;
    *at = start + count * sizeof(double);
    return (double *)(void *)start;
}

static void make_fftw(lw_fft *plan)
{
    int n = (int)plan->n;
    fftw_complex *in = (fftw_complex *)(void *)plan->in, *out = (fftw_complex *)(void *)plan->out;
    if (plan->kind == LW_FFT_REAL) {
        plan->forward = fftw_plan_dft_r2c_1d(n, plan->in, out, FFTW_ESTIMATE | FFTW_PRESERVE_INPUT);
        plan->back = fftw_plan_dft_c2r_1d(n, out, plan->in, FFTW_ESTIMATE | FFTW_DESTROY_INPUT);
    } else {
        plan->forward = fftw_plan_dft_1d(n, in, out, FFTW_FORWARD, FFTW_ESTIMATE | FFTW_PRESERVE_INPUT);
        plan->back = fftw_plan_dft_1d(n, in, out, FFTW_BACKWARD, FFTW_ESTIMATE | FFTW_PRESERVE_INPUT);
    }
}

lw_fft *lw_fft_plan(lw_engine *engine, size_t n, lw_fft_kind kind, lw_fft_use use, lw_error *err)
{
    if (n == 0 || n > LENGTH_MOST) {
        lw_fail(err, LW_BAD_ARGUMENT, "use between 1 and 67108864 points",
                "a transform of %zu points was asked for", n);
        return NULL;
    }
    for (lw_fft *plan = engine->plans; plan != NULL; plan = plan->next)
        if (plan->n == n && plan->kind == kind && plan->use == use)
            return plan;
    bool plain = use == LW_FFT_FEW && lw_fft_plain_can(n) && (kind == LW_FFT_COMPLEX || n % 2 == 0);
    size_t numbers = 2 * n + 4; /* doubles of an array of n complex numbers */
    size_t size = sizeof(lw_fft) + 3 * (numbers * sizeof(double) + ALIGNMENT);
    lw_fft *plan = lw_take(engine, size, err);
    if (plan == NULL)
        return NULL;
    *plan = (lw_fft){.n = n, .block_size = size, .kind = kind, .use = use};
    char *at = (char *)(plan + 1);
    if (plain) {
        plan->root = part(&at, numbers);
        plan->work = part(&at, numbers);
        plan->in = part(&at, numbers);
        lw_fft_roots(plan->root, n);
    } else {
        plan->in = part(&at, numbers);
        plan->out = part(&at, numbers);
        make_fftw(plan);
        if (plan->forward == NULL || plan->back == NULL) {
            if (plan->forward != NULL)
                fftw_destroy_plan(plan->forward);
            if (plan->back != NULL)
                fftw_destroy_plan(plan->back);
            lw_give(engine, plan, size);
            lw_fail(err, LW_OUT_OF_MEMORY, NULL, "a transform of %zu points could not be planned", n);
            return NULL;
        }
    }
    plan->next = engine->plans;
    engine->plans = plan;
    engine->free_plans = free_plans;
    return plan;
}

static bool aligned(const void *array)
{
    return (uintptr_t)array % ALIGNMENT == 0;
}

void lw_fft_forward(lw_fft *plan, const double *x, double *c)
{
    if (plan->forward == NULL) {
        lw_fft_plain_forward(plan->root, plan->n, x, c, plan->work);
        return;
    }
    size_t count = 2 * (plan->n / 2 + 1);
    double *to = aligned(c) ? c : plan->out, *from = plan->in;
    if (aligned(x))
        from = (double *)(uintptr_t)x; /* FFTW keeps its input (FFTW_PRESERVE_INPUT) but takes no const */
    else
        memcpy(from, x, plan->n * sizeof *x);
    fftw_execute_dft_r2c(plan->forward, from, (fftw_complex *)(void *)to);
    if (to != c)
        memcpy(c, to, count * sizeof *c);
}

void lw_fft_back(lw_fft *plan, double *c, double *x)
{
    if (plan->forward == NULL) {
        lw_fft_plain_back(plan->root, plan->n, c, x, plan->work);
        return;
    }
    double *from = aligned(c) ? c : plan->out, *to = aligned(x) ? x : plan->in;
    if (from != c)
        memcpy(from, c, 2 * (plan->n / 2 + 1) * sizeof *c);
    fftw_execute_dft_c2r(plan->back, (fftw_complex *)(void *)from, to);
    if (to != x)
        memcpy(x, to, plan->n * sizeof *x);
}

void lw_fft_cosine(lw_fft *plan, const double *a, double *x)
{
    /* `in` is free in the plain transform, `out` in FFTW's */
    double *c = plan->forward == NULL ? plan->in : plan->out;
    for (size_t k = 0; k <= plan->n / 2; k++) {
        c[2 * k] = a[k];
        c[2 * k + 1] = 0;
    }
    lw_fft_back(plan, c, x);
}

void lw_fft_complex(lw_fft *plan, const double *in, double *out, bool forward)
{
    if (plan->forward == NULL) {
        lw_fft_plain(plan->root, 1, plan->n, forward ? -1 : 1, in, out, plan->work);
        return;
    }
    double *from = plan->in, *to = aligned(out) ? out : plan->out;
    if (aligned(in))
        from = (double *)(uintptr_t)in;
    else
        memcpy(from, in, 2 * plan->n * sizeof *in);
    fftw_execute_dft(forward ? plan->forward : plan->back, (fftw_complex *)(void *)from,
                     (fftw_complex *)(void *)to);
    if (to != out)
        memcpy(out, to, 2 * plan->n * sizeof *out);
}
