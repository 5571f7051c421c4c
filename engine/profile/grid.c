/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "profile/grid.h"

#include "numeric/cholesky.h"
#include "numeric/voigt.h"

#include <math.h>
#include <string.h>

#define VALUES_MOST 240

/* Instrument folded with one grid value (a triangle of the spacing), tabulated in `fine` steps from -reach.
 */
typedef struct table {
    size_t n;
    double low, fine, *value;
} table;

/* Adds what the standard's lines tell otherwise than the calibration: the transform of G (R - 1) and of the
 * triangle, over twice the table's length. */
static lw_status add_measured(const lw__instrument *instrument, double spacing, lw_arena *scratch, table *out,
                              lw_error *err)
{
    double step = 1 / (2 * out->fine * (double)out->n),
           most = 2.5 / (instrument->fwhm_deg * instrument->per_degree);
    size_t n = (size_t)fmin(most / step, 20000) + 2;
    double *g[2], *with[2];
    for (int i = 0; i < 2; i++) {
        g[i] = lw_arena_take(scratch, n, sizeof(double), err);
        with[i] = lw_arena_take(scratch, n, sizeof(double), err);
    }
    if (!g[0] || !g[1] || !with[0] || !with[1])
        return LW_OUT_OF_MEMORY;
    lw__instrument_transform(instrument, step, n, g[0], g[1]);
    for (int i = 0; i < 2; i++)
        memcpy(with[i], g[i], n * sizeof(double));
    lw_status status = lw__carry_measured(instrument->measured, instrument->per_degree, step, n, with[0],
                                          with[1], scratch, err);
    if (status != LW_OK)
        return status;
    for (size_t k = 1; k < n; k++) {
        double u = M_PI * spacing * step * (double)k, sinc = sin(u) / u,
               scale = 2 * step * spacing * sinc * sinc;
        double re = scale * (with[0][k] - g[0][k]), im = scale * (with[1][k] - g[1][k]);
        double phase = 2 * M_PI * step * (double)k, turn_re = cos(phase * out->fine),
               turn_im = sin(phase * out->fine);
        double x = cos(phase * out->low), y = sin(phase * out->low);
        for (size_t i = 0; i < out->n; i++) {
            out->value[i] += re * x + im * y;
            double next = x * turn_re - y * turn_im;
            y = x * turn_im + y * turn_re;
            x = next;
        }
    }
    return LW_OK;
}

static lw_status take_table(const lw__job *job, const lw__instrument *instrument, double spacing,
                            double reach, lw_arena *scratch, table *out, lw_error *err)
{
    double d = instrument->per_degree;
    size_t per = (size_t)fmax(ceil(spacing / (0.2 * instrument->fwhm_deg * d)), 6);
    out->fine = spacing / (double)per;
    size_t half = (size_t)(reach / out->fine) + 4, all = 2 * (half + per) + 1;
    double *x = lw_arena_take(scratch, all, sizeof *x, err), *y = lw_arena_take(scratch, all, sizeof *y, err);
    out->n = 2 * half + 1;
    out->low = -(double)half * out->fine;
    out->value = lw_arena_take(scratch, out->n, sizeof(double), err);
    if (x == NULL || y == NULL || out->value == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < all; i++)
        x[i] = ((double)i - (double)(half + per)) * out->fine / d;
    lw_voigt_sums sums = {.value = y};
    lw_voigt_kernel_for(job->engine->cpu)
        ->sum(all, x, instrument->node, instrument->n, instrument->variance, instrument->lorentz, 1, &sums);
    for (size_t i = 0; i < out->n; i++) {
        double sum = y[i + per];
        for (size_t j = 1; j < per; j++)
            sum += (1 - (double)j / (double)per) * (y[i + per - j] + y[i + per + j]);
        out->value[i] = sum * out->fine / d;
    }
    return instrument->measured != NULL ? add_measured(instrument, spacing, scratch, out, err) : LW_OK;
}

static double look_up(const table *t, double x)
{
    double place = (x - t->low) / t->fine, whole = floor(place), u = place - whole;
    if (!(whole >= 1 && whole + 2 < (double)t->n))
        return 0;
    const double *y = t->value + (size_t)whole;
    return -u * (u - 1) * (u - 2) / 6 * y[-1] + (u + 1) * (u - 1) * (u - 2) / 2 * y[0] -
           (u + 1) * u * (u - 2) / 2 * y[1] + (u + 1) * u * (u - 1) / 6 * y[2];
}

/* The shape at the grid's places: in closed form, or as the cosine transform of its coefficients. */
static lw_status take_shape(const lw__job *job, lw__grid *g, lw_arena *scratch, lw_error *err)
{
    const lw__shape *shape = &job->line->shape;
    double gauss = 2 * shape->gauss_s * sqrt(M_LN2 / M_PI), lorentz = 2 * shape->lorentz_s / M_PI;
    double reach = fmax(-g->place[0], g->place[g->m - 1]), step = 1 / (6 * reach), *a = NULL;
    size_t n = 0, most = 4000;
    if (shape->strain != NULL) {
        if ((a = lw_arena_take(scratch, most, sizeof *a, err)) == NULL)
            return LW_OUT_OF_MEMORY;
        for (; n < most; n++)
            if ((a[n] = lw__shape_coefficient(shape, step * (double)n, NULL)) < 1e-12)
                break;
    }
    for (size_t j = 0; j < g->m; j++) {
        double s = g->place[j], sum = 0;
        if (shape->strain == NULL) {
            sum = lw_voigt(s, gauss, lorentz);
        } else { /* the sum's copies a period away add what the kink makes of their tails */
            double c = 2 * cos(2 * M_PI * step * s), before = 0.5 * c, now = 1, t = M_PI * s * step;
            for (size_t k = 0; k < n; k++) {
                sum += (k == 0 ? 1 : 2) * step * a[k] * now;
                double next = c * now - before;
                before = now;
                now = next;
            }
            double images = fabs(t) < 1e-2 ? 1 + t * t / 5 : 3 / (sin(t) * sin(t)) - 3 / (t * t);
            sum -= lw__shape_kink(shape) * images * step * step / 6;
        }
        g->shape[j] = job->line->area_s * fmax(sum, 1e-12);
    }
    return LW_OK;
}

lw_status lw__take_grid(const lw__job *job, const lw__instrument *instrument, double steps, lw_arena *scratch,
                        lw__grid *g, lw_error *err)
{
    const lw__window *data = &job->data;
    size_t n = g->n = data->n;
    double low = data->s[0], high = data->s[n - 1];
    g->spacing = fmax(job->shape_breadth / steps, (high - low) / VALUES_MOST);
    g->middle = (size_t)fmax(-low / g->spacing, 0);
    size_t m = g->m = g->middle + 1 + (size_t)fmax(high / g->spacing, 0);
    g->place = lw_arena_take(scratch, m, sizeof(double), err);
    g->shape = lw_arena_take(scratch, m, sizeof(double), err);
    g->pull = lw_arena_take(scratch, m, sizeof(double), err);
    g->target = lw_arena_take(scratch, n, sizeof(double), err);
    g->weight = lw_arena_take(scratch, n, sizeof(double), err);
    g->response = lw_arena_take(scratch, n * m, sizeof(double), err);
    g->normal = lw_arena_take(scratch, m * m, sizeof(double), err);
    g->own_normal = lw_arena_take(scratch, m * m, sizeof(double), err);
    double *own = lw_arena_take(scratch, n, sizeof *own, err);
    double *column = lw_arena_take(scratch, m * n, sizeof *column, err);
    double *weighed = lw_arena_take(scratch, n, sizeof *weighed, err);
    if (!g->place || !g->shape || !g->pull || !g->target || !g->weight || !g->response || !g->normal ||
        !g->own_normal || !own || !column || !weighed)
        return LW_OUT_OF_MEMORY;
    for (size_t j = 0; j < m; j++)
        g->place[j] = ((double)j - (double)g->middle) * g->spacing;
    table now = {0}, then = {0};
    double reach = fmax(high, g->place[m - 1]) - fmin(low, g->place[0]);
    lw_status status = take_shape(job, g, scratch, err);
    if (status == LW_OK)
        status = take_table(job, instrument, g->spacing, reach, scratch, &now, err);
    bool changed = instrument != &job->instrument;
    if (status == LW_OK && changed)
        status = take_table(job, &job->instrument, g->spacing, reach, scratch, &then, err);
    if (status != LW_OK)
        return status;
    /* the shape's centre is not the fitted position: the window's s is from the shape, the instrument's from
     * the line */
    g->expected_chi2 = 0;
    for (size_t i = 0; i < n; i++) {
        g->target[i] = data->residual[i];
        g->weight[i] = 1 / data->variance[i];
        g->expected_chi2 += data->own_variance[i] / data->variance[i];
        for (size_t j = 0; j < m; j++) {
            double x = data->s[i] - g->place[j], value = look_up(&now, x);
            g->response[i * m + j] = column[j * n + i] = value;
            if (changed) /* the line's curve was made with the other instrument */
                g->target[i] -= (value - look_up(&then, x)) * g->shape[j];
        }
    }
    for (size_t j = 0; j < m; j++) {
        for (size_t i = 0; i < n; i++) {
            weighed[i] = column[j * n + i] * g->weight[i];
            own[i] = weighed[i] * data->own_variance[i] * g->weight[i];
        }
        g->pull[j] = lw_dot(weighed, g->target, n);
        for (size_t k = 0; k <= j; k++) {
            g->normal[j * m + k] = g->normal[k * m + j] = lw_dot(weighed, column + k * n, n);
            g->own_normal[j * m + k] = g->own_normal[k * m + j] = lw_dot(own, column + k * n, n);
        }
    }
    return LW_OK;
}

double lw__grid_chi2(const lw__grid *g, const double *x)
{
    double chi2 = 0;
    for (size_t i = 0; i < g->n; i++) {
        double r = g->target[i] - lw_dot(g->response + i * g->m, x, g->m);
        chi2 += r * r * g->weight[i];
    }
    return chi2;
}

double lw__grid_breadth(const lw__job *job, const lw__grid *g, const double *x, double *slopes)
{
    double area = job->line->area_s, height = area / job->shape_breadth + x[g->middle];
    for (size_t j = 0; j < g->m; j++)
        area += g->spacing * x[j];
    for (size_t j = 0; j < g->m && slopes != NULL; j++)
        slopes[j] = g->spacing / height - (j == g->middle ? area / (height * height) : 0);
    return area / height;
}

void lw__grid_transform(const lw__job *job, const lw__grid *g, const double *x, double *out)
{
    const lw_profile *profile = job->profile;
    double scale = 1;
    for (size_t k = 0; k < profile->n_coefficients; k++) {
        double length = profile->length_nm[k], u = M_PI * g->spacing * length, sinc = u > 0 ? sin(u) / u : 1;
        double re = job->line->area_s * lw__shape_coefficient(&job->line->shape, length, NULL), im = 0;
        for (size_t j = 0; j < g->m; j++) {
            double phase = 2 * M_PI * length * g->place[j];
            re += g->spacing * sinc * sinc * cos(phase) * x[j];
            im += g->spacing * sinc * sinc * sin(phase) * x[j];
        }
        if (k == 0)
            scale = re;
        out[k] = re / scale;
        out[profile->n_coefficients + k] = im / scale;
    }
}

lw_status lw__grid_coefficients(const lw__job *job, const lw__grid *g, const double *x, const double *c,
                                bool plainly, lw_error *err)
{
    lw_profile *profile = job->profile;
    size_t m = g->m, n = profile->n_coefficients, under = 0;
    lw_arena scratch;
    lw_arena_begin(&scratch, job->engine);
    double *a = lw_arena_take(&scratch, 2 * n, sizeof *a, err),
           *b = lw_arena_take(&scratch, 2 * m, sizeof *b, err);
    double *curve[3];
    for (int i = 0; i < 3; i++)
        curve[i] = lw_arena_take(&job->profiles->arena, m, sizeof(double), err);
    if (!a || !b || !curve[0] || !curve[1] || !curve[2]) {
        lw_arena_end(&scratch);
        return LW_OUT_OF_MEMORY;
    }
    lw__grid_transform(job, g, x, a);
    double area = job->line->area_s;
    for (size_t j = 0; j < m; j++)
        area += g->spacing * x[j];
    profile->truncated_at = n;
    profile->truncation = "not needed: every coefficient stands out of the noise";
    for (size_t k = 0; k < n; k++) {
        double length = profile->length_nm[k], u = M_PI * g->spacing * length, sinc = u > 0 ? sin(u) / u : 1;
        double var_re = 0, var_im = 0;
        profile->cosine[k] = a[k];
        profile->sine[k] = a[n + k];
        for (size_t j = 0; j < m; j++) {
            double phase = 2 * M_PI * length * g->place[j];
            b[j] = g->spacing * (sinc * sinc * cos(phase) - a[k]) / area;
            b[m + j] = g->spacing * (sinc * sinc * sin(phase) - a[n + k]) / area;
        }
        for (size_t j = 0; j < m; j++) {
            var_re += b[j] * lw_dot(c + j * m, b, m);
            var_im += b[m + j] * lw_dot(c + j * m, b + m, m);
        }
        profile->u_cosine[k] = k == 0 ? 0 : sqrt(fmax(var_re, 0));
        profile->u_sine[k] = k == 0 ? 0 : sqrt(fmax(var_im, 0));
    }
    if (plainly && job->measured.n > 0) {
        lw_status status =
            lw__add_measured(&job->measured, job->instrument.per_degree, profile, &scratch, err);
        if (status != LW_OK) {
            lw_arena_end(&scratch);
            return status;
        }
    }
    for (size_t k = 1; k < n && profile->truncated_at == n; k++) {
        under = fabs(a[k]) < 2 * profile->u_cosine[k] ? under + 1 : 0;
        if (under == 3) {
            profile->truncated_at = k - 2;
            profile->truncation = "three coefficients in a row below twice their uncertainty";
        }
    }
    for (size_t j = 0; j < m; j++) {
        curve[0][j] = g->place[j];
        curve[1][j] = (g->shape[j] + x[j]) / area;
        curve[2][j] = sqrt(fmax(c[j * m + j], 0)) / area;
    }
    profile->n_curve = m;
    profile->curve_s = curve[0];
    profile->curve_intensity = curve[1];
    profile->curve_u = curve[2];
    lw_arena_end(&scratch);
    return LW_OK;
}

bool lw__invert(double *a, size_t m, double *z)
{
    if (lw_cholesky(a, m, m, 0) < m)
        return false;
    lw_cholesky_invert_factor(a, m, m);
    for (size_t j = 0; j < m; j++)
        for (size_t k = 0; k <= j; k++) /* row j of the upper factor begins at its diagonal */
            z[j * m + k] = z[k * m + j] = lw_dot(a + j * m + j, a + k * m + j, m - j);
    return true;
}

lw_status lw__add_background(const lw__job *job, const lw__grid *g, const double *z, double *c,
                             lw_arena *scratch, lw_error *err)
{
    size_t m = g->m;
    double *level = lw_arena_take(scratch, 4 * m, sizeof *level, err), *with = level + m, *pulled = with + m;
    if (level == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < g->n; i++)
        for (size_t j = 0; j < m; j++) {
            double r = g->response[i * m + j] * g->weight[i];
            pulled[j] += r;
            pulled[m + j] += r * job->data.with_level[i];
        }
    for (size_t j = 0; j < m; j++) {
        level[j] = lw_dot(z + j * m, pulled, m);
        with[j] = lw_dot(z + j * m, pulled + m, m);
    }
    for (size_t j = 0; j < m; j++)
        for (size_t k = 0; k < m; k++)
            c[j * m + k] +=
                level[j] * level[k] * job->data.background_variance - level[j] * with[k] - with[j] * level[k];
    return LW_OK;
}

double lw__grid_followed(const lw__grid *g, const double *z, const double *zn)
{
    /* chi2 of (1 - H) r with H = R Z R' W and noise V' of r: tr V'W - 2 tr Z N' + tr Z N Z N', N' = R' W V' W
     * R */
    size_t m = g->m;
    double sum = 0;
    for (size_t j = 0; j < m; j++)
        for (size_t k = 0; k < m; k++) {
            double own = 0;
            sum += 2 * z[j * m + k] * g->own_normal[j * m + k];
            own = lw_dot(zn + j * m, z + k * m, m);
            sum -= own * g->own_normal[j * m + k];
        }
    return sum;
}

lw_status lw__grid_refold(const lw__job *job, const lw__grid *g, const double *x, double followed,
                          lw_error *err)
{
    lw_status status = lw__take_refold(job->profiles, job->profile, job->data.first, g->n, err);
    if (status != LW_OK)
        return status;
    double chi2 = 0, lost = 0, net = 0, freedom = fmax(g->expected_chi2 - followed, 1);
    for (size_t i = 0; i < g->n; i++) {
        double r = g->target[i] - lw_dot(g->response + i * g->m, x, g->m), v = 1 / g->weight[i];
        chi2 += r * r / v;
        lost += r * r - v * freedom / (double)g->n;
        net += job->data.curve[i] * job->data.curve[i];
        double seen = job->data.curve[i] + job->data.residual[i];
        lw__set_refold_point(job->profile, i, seen, job->data.own_variance[i], seen - r);
    }
    lw__set_refold(job->profile, chi2, freedom, g->n, lost, net);
    return LW_OK;
}

lw_status lw__grid_variance(const lw__job *job, const lw__grid *g, const double *x, const double *z,
                            const double *c, double *variance, double *shape_share, double *bias,
                            lw_arena *scratch, lw_error *err)
{
    size_t m = g->m;
    double *q = lw_arena_take(scratch, m, sizeof *q, err), *zq = lw_arena_take(scratch, m, sizeof *zq, err);
    double *wider = lw_arena_take(scratch, m, sizeof *wider, err);
    if (q == NULL || zq == NULL || wider == NULL)
        return LW_OUT_OF_MEMORY;
    double breadth = lw__grid_breadth(job, g, x, q), by_points = 0, kept = 0, whole = 0, share;
    *bias = 0;
    for (size_t j = 0; j < m; j++) {
        zq[j] = lw_dot(z + j * m, q, m);
        by_points += q[j] * lw_dot(c + j * m, q, m);
    }
    /* d: a shape that is wider by a part in one; q'(1 - Z N) d is what survives of it */
    for (size_t j = 0; j < m; j++) {
        double next = g->shape[j + 1 < m ? j + 1 : j], last = g->shape[j > 0 ? j - 1 : j];
        wider[j] = -g->shape[j] - g->place[j] * (next - last) / (2 * g->spacing);
    }
    for (size_t j = 0; j < m; j++) {
        double nd = lw_dot(g->normal + j * m, wider, m), nx = lw_dot(g->normal + j * m, x, m);
        whole += q[j] * wider[j];
        kept += q[j] * wider[j] - zq[j] * nd;
        *bias += zq[j] * nx - q[j] * x[j];
    }
    *shape_share = whole != 0 ? fmin(fabs(kept / whole), 1) : 1;
    *variance = by_points + breadth * breadth * lw__tail_variance(job, &share) +
                *shape_share * *shape_share * job->shape_variance + *bias * *bias;
    return LW_OK;
}
