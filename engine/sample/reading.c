/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/reading.h"

#include "physics/size_distribution.h"
#include "physics/strain.h"
#include "sample/voigt_image.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define STEPS 96 /* of Simpson's rule over 4/breadth, where the coefficients have died */
#define REACH 4.0
#define LENGTH_OF_UNLIMITED 10.0 /* nm */

static const double sigmas[] = {0.15, 0.3, 0.45};
static const char *const strains[] = {"constant", "fading slowly", "fading", "falling", "both"};
enum { CONSTANT, SLOWLY, FADING, FALLING, BOTH };
static const double reach_of_size[] = {0, 1.0 / 4, 1.0 / 12}; /* xi of SLOWLY and FADING over the volume-weighted size */

/* Parameters: 1/size_volume, then b (CONSTANT), eps0^2 (SLOWLY, FADING), a (FALLING), or b and a. */
typedef struct model_of {
    const lw_breadths *breadths;
    double sigma;
    int strain;
} model_of;

/* <Delta^2(L)> and its slopes to the parameters. */
static double displacement(const model_of *m, const double *p, double length, double slopes[3])
{
    slopes[0] = slopes[2] = 0;
    if (m->strain == BOTH || m->strain == CONSTANT || (m->strain != FALLING && !(p[0] > 0))) { /* unlimited: no xi */
        slopes[1] = length * length;
        slopes[2] = m->strain == BOTH ? length : 0;
        return p[1] * slopes[1] + (m->strain == BOTH ? p[2] * length : 0);
    }
    if (m->strain == FALLING) {
        slopes[1] = length;
        return p[1] * length;
    }
    double own[2] = {p[1], log(reach_of_size[m->strain] / p[0])}, by[2];
    double value = lw_strain_correlated.displacement(own, length, by);
    slopes[0] = -by[1] / p[0];
    slopes[1] = by[0];
    return value;
}

static lw_spheres spheres_of(const model_of *m, double inverse_size)
{
    /* (3/4) D0 exp(7 sigma^2/2) = size_volume */
    return (lw_spheres){4 / (3 * inverse_size * exp(3.5 * m->sigma * m->sigma)), m->sigma};
}

/* Factors by which a fit by Voigts has the breadths of these crystals wrong. */
static void take_image(const model_of *m, const double *p, double *factor)
{
    const lw_breadths *k = m->breadths;
    double coefficient[STEPS + 1], unused[3];
    bool limited = p[0] > 0;
    lw_spheres spheres = spheres_of(m, limited ? p[0] : 1);
    for (size_t i = 0; i < k->n; i++) {
        const lw_line *line = k->profile[i]->line;
        double s = k->s[i] * (k->scale != NULL ? k->scale[i] : 1), longest = REACH / fmax(k->beta[i], 1e-6);
        for (int j = 0; j <= STEPS; j++) {
            double length = longest * j / STEPS;
            coefficient[j] = (limited && length > 0 ? lw_spheres_coefficient(&spheres, length, NULL) : 1) *
                             exp(-2 * M_PI * M_PI * s * s * displacement(m, p, length, unused));
        }
        double under = k->background != NULL && line->height.value > 0 ? k->background[i] / line->height.value : 0.05;
        factor[i] = lw_voigt_image(STEPS + 1, coefficient, longest / STEPS, under);
    }
}

/* Breadth at s and its slopes. A negative 1/size_volume continues the breadth evenly about 0. */
static double breadth(const model_of *m, const double *p, double s, double longest, double slopes[3])
{
    double size = fabs(p[0]), by = -2 * M_PI * M_PI * s * s, sum = 0, by_parameter[3] = {0};
    double even[3] = {size, p[1], m->strain == BOTH ? p[2] : 0};
    lw_spheres spheres = spheres_of(m, size > 0 ? size : 1);
    for (int i = 0; i <= STEPS; i++) {
        double length = longest * i / STEPS, weight = i == 0 || i == STEPS ? 1 : i % 2 == 1 ? 4 : 2;
        double of_size[2] = {0}, of_strain[3];
        double A = size > 0 && length > 0 ? lw_spheres_coefficient(&spheres, length, of_size) : 1;
        double D = exp(by * displacement(m, even, length, of_strain));
        sum += weight * A * D;
        if (size > 0)
            by_parameter[0] += weight * D * (A * by * of_strain[0] - of_size[0] / size); /* d ln(median) = -d(size)/size */
        by_parameter[1] += weight * A * D * by * of_strain[1];
        by_parameter[2] += weight * A * D * by * of_strain[2];
    }
    double step = longest / STEPS / 3, beta = 1 / (2 * step * sum);
    for (int i = 0; i < 3; i++)
        slopes[i] = -2 * beta * beta * step * by_parameter[i];
    if (p[0] < 0) {
        double zero[3] = {0, even[1], even[2]}, other[3], at_0 = breadth(m, zero, s, longest, other);
        for (int i = 1; i < 3; i++)
            slopes[i] = 2 * other[i] - slopes[i];
        beta = 2 * at_0 - beta;
    }
    return beta;
}

static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    const model_of *m = user;
    const lw_breadths *k = m->breadths;
    size_t n = m->strain == BOTH ? 3 : 2;
    (void)x_slope; /* positions are known far better than breadths */
    for (size_t i = 0; i < k->n; i++) {
        double s = k->s[i] * (k->scale != NULL ? k->scale[i] : 1), all[3];
        value[i] = breadth(m, p, s, REACH / fmax(k->beta[i], 1e-6), all);
        for (size_t j = 0; j < n; j++)
            slopes[n * i + j] = all[j];
    }
}

/* Half of the narrowest line is size, and what the widest has more is strain. */
static void start(const model_of *m, double *p)
{
    const lw_breadths *k = m->breadths;
    double least = INFINITY, most = 0, s = 1;
    for (size_t i = 0; i < k->n; i++) {
        least = fmin(least, k->beta[i]);
        if (k->beta[i] > most) {
            most = k->beta[i];
            s = k->s[i] * (k->scale != NULL ? k->scale[i] : 1);
        }
    }
    p[0] = 0.5 * least;
    double rest = fmax(most - p[0], 0.1 * most), b = rest * rest / (2 * M_PI * s * s), a = rest / (M_PI * M_PI * s * s);
    p[1] = m->strain == FALLING ? a : m->strain == BOTH ? 0.5 * b : b;
    if (m->strain == BOTH)
        p[2] = 0.5 * a;
}

static lw_status read_one(model_of *m, lw_arena *arena, lw_reading *out, lw_generalised_fit *fit, lw_error *err)
{
    double p[3] = {0}, *y = lw_arena_copy(arena, m->breadths->beta, m->breadths->n, sizeof(double), err);
    double *factor = lw_arena_take(arena, m->breadths->n, sizeof *factor, err);
    if (y == NULL || factor == NULL)
        return LW_OUT_OF_MEMORY;
    start(m, p);
    lw_generalised problem = {.n = m->breadths->n,
                              .m = m->strain == BOTH ? 3 : 2,
                              .y = y,
                              .covariance = m->breadths->covariance,
                              .model = model,
                              .user = m};
    lw_status status = lw_generalised_solve(&problem, arena, p, fit, NULL, err);
    for (int round = 0; round < 2 && status == LW_OK && m->breadths->by_voigts; round++) {
        take_image(m, p, factor);
        for (size_t i = 0; i < m->breadths->n; i++)
            y[i] = m->breadths->beta[i] / factor[i];
        status = lw_generalised_solve(&problem, arena, p, fit, NULL, err);
    }
    if (status != LW_OK)
        return status;
    bool unlimited = !(p[0] > 0);
    *out = (lw_reading){.strain = strains[m->strain],
                        .sigma = m->sigma,
                        .chi2 = fit->chi2,
                        .size_volume = unlimited ? INFINITY : 1 / p[0],
                        .size_area = unlimited ? INFINITY : 8 * exp(-m->sigma * m->sigma) / (9 * p[0])};
    double length = unlimited ? LENGTH_OF_UNLIMITED : 0.5 * out->size_volume;
    double unused[3];
    out->strain_rms = sqrt(fmax(0, displacement(m, p, length, unused))) / length;
    return LW_OK;
}

lw_status lw_breadths_read(const lw_breadths *breadths, lw_arena *arena, lw_readings *readings, lw_error *err)
{
    double score[LW_READINGS_MOST], best = INFINITY, scatter = INFINITY, sum = 0, n = 0;
    size_t parameters[LW_READINGS_MOST];
    *readings = (lw_readings){0};
    if (breadths->values_only)
        return LW_OK;
    for (size_t i = 0; i < sizeof sigmas / sizeof *sigmas; i++)
        for (int strain = CONSTANT; strain <= BOTH; strain++) {
            model_of m = {.breadths = breadths, .sigma = sigmas[i], .strain = strain};
            size_t at = readings->n;
            lw_generalised_fit fit;
            lw_error each = LW_ERROR_NONE;
            parameters[at] = strain == BOTH ? 3 : 2;
            if (breadths->n < (strain == BOTH ? 5 : 2))
                continue;
            lw_status status = read_one(&m, arena, &readings->reading[at], &fit, &each);
            if (status == LW_OUT_OF_MEMORY || status == LW_CANCELLED) {
                *err = each;
                return status;
            }
            if (status != LW_OK)
                continue;
            scatter = fmin(scatter, fit.scatter);
            n = (double)fit.rank;
            readings->n++;
        }
    for (size_t i = 0; i < readings->n; i++) {
        double k = (double)parameters[i];
        score[i] = readings->reading[i].chi2 / (scatter * scatter) + 2 * k + (n > k + 1 ? 2 * k * (k + 1) / (n - k - 1) : 0);
        best = fmin(best, score[i]);
    }
    for (size_t i = 0; i < readings->n; i++)
        sum += readings->reading[i].weight = exp(-0.5 * (score[i] - best));
    for (size_t i = 0; i < readings->n; i++)
        readings->reading[i].weight /= sum;
    return LW_OK;
}

double lw_readings_difference(const lw_readings *readings, lw_read_field field, double value)
{
    double sum = 0, weight = 0;
    for (size_t i = 0; i < readings->n; i++) {
        const lw_reading *r = &readings->reading[i];
        double is = field == LW_READ_SIZE_VOLUME ? r->size_volume : field == LW_READ_SIZE_AREA ? r->size_area : r->strain_rms;
        if (!isfinite(is))
            continue; /* no size was read: its difference is no number, and the size itself a limit */
        sum += r->weight * (is - value) * (is - value);
        weight += r->weight;
    }
    return weight > 0 ? sqrt(sum / weight) : 0;
}

void lw_readings_widen(const lw_readings *readings, lw_read_field field, double has, lw_quantity *quantity, lw_node *group,
                       lw_error *err)
{
    static const char *const names[] = {"size_volume", "size_area", "strain_rms"};
    if (quantity->kind != LW_VALUE || readings->n == 0)
        return;
    double difference = lw_readings_difference(readings, field, quantity->value);
    quantity->u = sqrt(quantity->u * quantity->u + fmax(0, difference * difference - has * has));
    lw_node *told = NULL;
    for (lw_node *child = group != NULL ? group->first : NULL; child != NULL; child = child->next)
        if (child->name != NULL && strcmp(child->name, "model_difference") == 0)
            told = child;
    if (told == NULL)
        told = lw_add_group(group, "model_difference", err);
    lw_add_quantity(told, names[field], lw_quantity_of(difference, 0, quantity->unit),
                    "Part of the standard uncertainty: root mean square difference to readings of the same breadths as "
                    "lognormal spheres whose strain is constant or falls with length, weighted by evidence.",
                    err);
}

void lw_readings_widen_fit(const lw_readings *readings, const double has[2], lw_breadth_fit *fit, lw_node *group, lw_error *err)
{
    lw_readings_widen(readings, LW_READ_SIZE_VOLUME, has[0], &fit->size_volume, group, err);
    lw_quantity rms = fit->strain_apparent;
    rms.value *= LW_RMS_PER_APPARENT;
    rms.u *= LW_RMS_PER_APPARENT;
    lw_readings_widen(readings, LW_READ_STRAIN, has[1] * LW_RMS_PER_APPARENT, &rms, group, err);
    fit->strain_apparent.u = rms.u / LW_RMS_PER_APPARENT;
}

void lw_readings_remark(const lw_node *group, lw_node *remarks, lw_error *err)
{
    char text[400];
    size_t used = 0;
    const lw_node *told = lw_node_get(group, "model_difference");
    for (const lw_node *part = told != NULL ? told->first : NULL; part != NULL; part = part->next) {
        const lw_node *whole = lw_node_get(group, part->name);
        if (whole != NULL && part->quantity.value > 0.8 * whole->quantity.u)
            used += (size_t)snprintf(text + used, sizeof text - used, "%s%s", used > 0 ? ", " : "", part->name);
    }
    if (used == 0)
        return;
    snprintf(text + used, sizeof text - used,
             ": most of the uncertainty is the distance to readings of the same breadths as spheres with a spread of diameters, "
             "whose strain is constant or falls with length; the method's own rule is one of several that the data allow");
    lw_add_text(remarks, NULL, text, err);
}
