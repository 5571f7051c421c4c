/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_fit.h"

#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

#define PI 3.14159265358979323846
#define ONE_SIDED 1.6448536269514722 /* 95 % quantile of the normal distribution */
#define ASSUMED_SIGMA 0.3            /* of the diameters, where the size is not resolved */
#define MEAN_H 0.2                   /* of H over all directions of a cubic crystal */

typedef struct fitter {
    lw_pattern pattern;
    const lw_pattern_request *request;
    lw_arena *arena;
    lw_pattern_answer *answer;
    double *p, *lower, *upper, *inverse, *normal_h, *normal_g;
    bool *fixed, *at_bound, *skip;
    double *by_instrument[LW_WIDTH_PARAMETERS]; /* [n] change of the model by one u of each width parameter */
    double start_shape[2];                      /* size and sigma of the start */
    double half_length;                         /* where the strain is quoted without a size, nm */
} fitter;

static bool cubic(const fitter *f)
{
    const lw_material *material = f->pattern.profiles->lines->material;
    return material != NULL && material->system == LW_CUBIC;
}

static bool enough_directions(const fitter *f)
{
    double least = 1, most = 0;
    for (size_t k = 0; k < f->pattern.n_lines; k++)
        if (f->pattern.line[k].line->supported) {
            least = fmin(least, f->pattern.line[k].hkl_sum);
            most = fmax(most, f->pattern.line[k].hkl_sum);
        }
    return cubic(f) && f->pattern.profiles->n >= 4 && most - least > 0.1;
}

/* ------------------------------------------------------------------------------------------------- start */

/* beta^2 = 1/D^2 + 4 e^2 s^2, weighted: near enough to begin with. */
static void start_from_breadths(const lw_profiles *profiles, double *size, double *square_strain, double *narrowest)
{
    double w = 0, x = 0, y = 0, xx = 0, xy = 0;
    *narrowest = INFINITY;
    for (size_t i = 0; i < profiles->n; i++) {
        const lw_profile *profile = &profiles->profile[i];
        double beta = profile->breadth_s.value, s2 = profile->s_per_nm * profile->s_per_nm;
        if (!(beta > 0) || !isfinite(beta))
            continue;
        *narrowest = fmin(*narrowest, beta);
        double u = profile->breadth_s.kind == LW_VALUE ? profile->breadth_s.u : beta;
        double weight = 1 / (4 * beta * beta * (u * u + 4e-4 * beta * beta));
        w += weight;
        x += weight * s2;
        y += weight * beta * beta;
        xx += weight * s2 * s2;
        xy += weight * s2 * beta * beta;
    }
    if (!isfinite(*narrowest))
        *narrowest = 1e-3;
    double determinant = w * xx - x * x, slope = 0, intercept = w > 0 ? y / w : *narrowest * *narrowest;
    if (determinant > 1e-12 * w * xx) {
        slope = (w * xy - x * y) / determinant;
        intercept = (y - slope * x) / w;
    }
    double least = 0.01 * *narrowest * *narrowest;
    *size = 1 / sqrt(fmax(intercept, least));
    /* 2/pi: mean square strain over squared apparent strain, slope = 4 e^2 */
    *square_strain = fmax(slope, 0) / (2 * PI);
}

/* Fall of the scattering power: slope of ln(area over multiplicity, Lorentz factor and polarisation) against s^2, by
 * least squares. Structure factors that differ scatter about it; what remains is how atoms and their vibration fall off.
 * Kept within what atoms do (0 to 0.03 nm^2). */
static double fall_of_areas(const lw_profiles *profiles)
{
    const lw_lines *lines = profiles->lines;
    double w = 0, x = 0, y = 0, xx = 0, xy = 0;
    for (size_t i = 0; i < profiles->n; i++) {
        const lw_line *line = profiles->profile[i].line;
        double theta = line->two_theta.value * PI / 360, c = cos(2 * theta);
        double factor = (lines->constant_polarisation + lines->cos2_polarisation * c * c) /
                        (sin(theta) * sin(theta) * cos(theta));
        if (!lines->with_factor || !(line->area.value > 0) || line->reflection.multiplicity < 1 || !(factor > 0))
            continue;
        double s2 = profiles->profile[i].s_per_nm * profiles->profile[i].s_per_nm;
        double value = log(line->area.value / (factor * line->reflection.multiplicity));
        w += 1;
        x += s2;
        y += value;
        xx += s2 * s2;
        xy += s2 * value;
    }
    double determinant = w * xx - x * x;
    if (w < 3 || !(determinant > 0))
        return 0;
    return fmin(fmax(-(w * xy - x * y) / determinant, 0), 0.03);
}

static lw_status begin(fitter *f, lw_engine *engine, const lw_profiles *profiles, lw_error *err)
{
    lw_status status = lw_pattern_begin(&f->pattern, engine, profiles, f->arena, err);
    if (status != LW_OK)
        return status;
    lw_pattern *m = &f->pattern;
    size_t n = m->n_parameters;
    double **vector[] = {&f->p, &f->lower, &f->upper, &f->normal_g};
    for (size_t i = 0; i < sizeof vector / sizeof *vector; i++)
        *vector[i] = lw_arena_take(f->arena, n, sizeof(double), err);
    f->inverse = lw_arena_take(f->arena, n * n, sizeof(double), err);
    f->normal_h = lw_arena_take(f->arena, n * n, sizeof(double), err);
    f->fixed = lw_arena_take(f->arena, n, sizeof(bool), err);
    f->at_bound = lw_arena_take(f->arena, n, sizeof(bool), err);
    f->skip = lw_arena_take(f->arena, n, sizeof(bool), err);
    if (err->status != LW_OK)
        return err->status;
    double size, square, narrowest;
    start_from_breadths(profiles, &size, &square, &narrowest);
    f->half_length = 0.5 / narrowest;
    lw_spheres spheres = {.sigma = 0.35};
    spheres.median_nm = fmin(fmax(size / (0.75 * exp(3.5 * spheres.sigma * spheres.sigma)), 0.6), 1e4);
    lw_pattern_start(m, &spheres, f->p);
    f->p[LW_PATTERN_STRAIN] = square;
    memcpy(f->start_shape, f->p + LW_PATTERN_SIZE, sizeof f->start_shape);
    for (size_t i = 0; i < n; i++) {
        f->lower[i] = -INFINITY;
        f->upper[i] = INFINITY;
    }
    f->lower[LW_PATTERN_INVERSE_SIZE] = 1e-6;
    f->upper[LW_PATTERN_INVERSE_SIZE] = 2;
    f->lower[LW_PATTERN_SIGMA] = 0.02;
    f->upper[LW_PATTERN_SIGMA] = 1.2;
    f->lower[LW_PATTERN_ANISOTROPY] = -20;
    f->upper[LW_PATTERN_ANISOTROPY] = 2.99;
    m->fixed = f->fixed;
    f->fixed[LW_PATTERN_ANISOTROPY] = f->request->anisotropy != 2 || !enough_directions(f);
    f->lower[LW_PATTERN_FALL] = -0.02;
    f->upper[LW_PATTERN_FALL] = 0.1;
    f->fixed[LW_PATTERN_FALL] = f->request->fall != 1;
    if (f->request->fall != 2)
        f->p[LW_PATTERN_FALL] = fall_of_areas(profiles);
    for (size_t k = 0; k < m->n_lines; k++) {
        size_t row = lw_pattern_position_row(m, k);
        f->fixed[row] = !m->line[k].line->supported;
        f->lower[row] = -narrowest;
        f->upper[row] = narrowest;
    }
    return LW_OK;
}

/* --------------------------------------------------------------------------------------------- quantities */

static void quantities(const fitter *f, const lw_strain_form *strain, bool none, const double *shape, double *value)
{
    lw_spheres spheres = lw_pattern_spheres(shape);
    value[LW_ANSWER_SIZE_VOLUME] = lw_spheres_size_volume(&spheres, NULL);
    value[LW_ANSWER_SIZE_AREA] = lw_spheres_size_area(&spheres, NULL);
    value[LW_ANSWER_DIAMETER] = lw_spheres_diameter_mean(&spheres, NULL);
    value[LW_ANSWER_DISPERSION] = lw_spheres_diameter_dispersion(&spheres, NULL);
    double scale = fmax(1 - shape[LW_PATTERN_ANISOTROPY] * MEAN_H, 0);
    double half = f->answer->size_unresolved ? f->half_length : 0.5 * value[LW_ANSWER_SIZE_VOLUME];
    for (size_t i = 0; i <= LW_ANSWER_LENGTHS; i++) {
        double length = i == 0 ? half : f->answer->length[i - 1];
        bool there = !none && (i == 0 || i <= f->answer->n_lengths);
        double square = there ? scale * strain->displacement(shape + LW_PATTERN_STRAIN, length, NULL) : 0;
        value[LW_ANSWER_STRAIN + i] = there ? sqrt(fmax(square, 0)) / length : 0;
    }
}

/* Values and covariance of a form's quantities from its parameters and their covariance. */
static void propagate(const fitter *f, lw_pattern_form *form, const double *covariance)
{
    size_t n = f->pattern.n_parameters, shared = lw_pattern_background_row(&f->pattern);
    double slope[LW_PATTERN_SHARED_MOST][LW_ANSWER_MOST] = {{0}}, up[LW_ANSWER_MOST], down[LW_ANSWER_MOST];
    quantities(f, form->strain, form->none, form->shape, form->value);
    for (size_t i = 0; i < shared; i++) {
        double u = sqrt(fmax(covariance[i * n + i], 0));
        if (!(u > 0))
            continue;
        double shape[LW_PATTERN_SHARED_MOST], step = 1e-3 * u;
        memcpy(shape, form->shape, sizeof shape);
        shape[i] = form->shape[i] + step;
        quantities(f, form->strain, form->none, shape, up);
        shape[i] = form->shape[i] - step;
        if (shape[i] < f->lower[i]) {
            memcpy(down, form->value, sizeof down);
            step *= 0.5;
        } else {
            quantities(f, form->strain, form->none, shape, down);
        }
        for (int j = 0; j < LW_ANSWER_MOST; j++)
            slope[i][j] = (up[j] - down[j]) / (2 * step);
    }
    for (int a = 0; a < LW_ANSWER_MOST; a++)
        for (int b = 0; b < LW_ANSWER_MOST; b++) {
            double sum = 0;
            for (size_t i = 0; i < shared; i++)
                for (size_t j = 0; j < shared; j++)
                    sum += slope[i][a] * covariance[i * n + j] * slope[j][b];
            form->covariance[a][b] = sum;
        }
}

/* ------------------------------------------------------------------------------------------------ one form */

/* Inverse normal matrix at p; parameters that the data can't tell apart are held, one after another. */
static lw_status invert(fitter *f, lw_error *err)
{
    size_t n = f->pattern.n_parameters;
    lw_normal normal = {.n = n, .h = f->normal_h, .g = f->normal_g};
    memset(f->normal_h, 0, n * n * sizeof(double));
    memset(f->normal_g, 0, n * sizeof(double));
    lw_status status = lw_pattern_evaluate(&f->pattern, f->p, true, &normal, err);
    if (status != LW_OK)
        return status;
    for (size_t i = 0; i < n; i++) {
        /* no size or no strain is a bound with an uncertainty: their limits come from it */
        bool told = i == LW_PATTERN_INVERSE_SIZE || (i == LW_PATTERN_STRAIN && f->pattern.shape.n_strain == 1);
        f->skip[i] = f->fixed[i] || (f->at_bound[i] && !told) || !(f->normal_h[i * n + i] > 0);
    }
    for (int held = 0; held < 4; held++) {
        lw_error own = LW_ERROR_NONE;
        size_t weakest = n;
        status = lw_invert_normal(f->pattern.engine, f->normal_h, n, f->skip, f->inverse, &weakest, &own);
        if (status != LW_NOT_SUPPORTED || weakest >= n) {
            if (status != LW_OK)
                *err = own;
            return status;
        }
        f->skip[weakest] = true;
    }
    return lw_fail(err, LW_NOT_SUPPORTED, "measure more lines, or longer",
                   "the whole pattern does not determine its parameters");
}

static lw_status minimise(fitter *f, lw_pattern_form *form, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    lw_pattern_shape_set_strain(&m->shape, form->strain);
    for (int i = 0; i < LW_PATTERN_STRAIN_MOST; i++) {
        size_t row = (size_t)(LW_PATTERN_STRAIN + i);
        bool used = !form->none && i < form->strain->n;
        f->fixed[row] = !used;
        f->lower[row] = used ? form->strain->least[i] : -INFINITY;
        f->upper[row] = used ? form->strain->most[i] : INFINITY;
        if (!used)
            f->p[row] = 0;
        f->p[row] = fmin(fmax(f->p[row], f->lower[row]), f->upper[row]);
    }
    lw_problem problem = {.n = m->n_parameters, .lower = f->lower, .upper = f->upper, .fixed = f->fixed,
                          .evaluate = lw_pattern_evaluate, .user = m};
    lw_fit_control control = lw_fit_control_defaults();
    control.chi2_tolerance = 1e-8;
    control.step_tolerance = 1e-3;
    control.iterations_most = 60;
    lw_fit_outcome outcome;
    lw_status status = lw_least_squares(m->engine, &problem, &control, f->p, f->at_bound, &outcome, err);
    if (status != LW_OK)
        return status;
    lw_normal normal = {.n = m->n_parameters};
    status = lw_pattern_evaluate(m, f->p, false, &normal, err);
    if (status != LW_OK)
        return status;
    double square = 0, product = 0, last = 0;
    for (size_t i = 0; i < m->n; i++) {
        double r = (m->profiles->lines->scan->intensity[i] - m->curve[i]) * sqrt(m->weight[i]);
        square += r * r;
        product += r * last;
        last = r;
    }
    form->correlation = square > 0 ? product / square : 0;
    form->chi2 = outcome.chi2;

    form->iterations = outcome.iterations;
    form->fitted = isfinite(outcome.chi2);
    form->why = form->fitted ? "" : "the fit found no start";
    form->n_free = 0;
    for (size_t i = 0; i < m->n_parameters; i++)
        form->n_free += !f->fixed[i];
    memcpy(form->shape, f->p, lw_pattern_background_row(&f->pattern) * sizeof *form->shape);
    return LW_OK;
}

/* Variance follows the model where it is a matter of counting. */
static lw_status follow_weights(fitter *f, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    const lw_lines *lines = m->profiles->lines;
    if (lines->scan->noise == LW_NOISE_SIGMA || lines->fitted == NULL)
        return LW_OK;
    lw_normal normal = {.n = m->n_parameters};
    lw_status status = lw_pattern_evaluate(m, f->p, false, &normal, err);
    for (size_t i = 0; i < m->n && status == LW_OK; i++) {
        double ratio = lines->fitted[i] > 0 ? m->curve[i] / lines->fitted[i] : 1;
        if (lines->variance[i] > 0)
            m->weight[i] = 1 / (lines->variance[i] * fmin(fmax(ratio, 0.5), 2));
    }
    return status;
}

/* Strain parameters of another form that give the same strain near half the size. */
static void restart_strain(fitter *f, const lw_strain_form *from, const lw_strain_form *to)
{
    lw_spheres spheres = lw_pattern_spheres(f->p);
    double length = fmin(0.5 * lw_spheres_size_volume(&spheres, NULL), f->half_length);
    double square = from->displacement(f->p + LW_PATTERN_STRAIN, length, NULL) / (length * length);
    double p[LW_STRAIN_PARAMETERS_MOST] = {0};
    to->start(fmax(square, 1e-9), length, p);
    memcpy(f->p + LW_PATTERN_STRAIN, p, sizeof p);
}

/* ---------------------------------------------------------------------------------------------- instrument */

static lw_status instrument_differences(fitter *f, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    const lw_width_function *instrument = &m->profiles->lines->instrument;
    lw_normal normal = {.n = m->n_parameters};
    lw_status status = lw_pattern_evaluate(m, f->p, false, &normal, err);
    double *base = lw_arena_copy(f->arena, m->curve, m->n, sizeof *base, err);
    if (base == NULL)
        return LW_OUT_OF_MEMORY;
    for (int q = 0; q < LW_WIDTH_PARAMETERS && status == LW_OK; q++) {
        double u = sqrt(fmax(instrument->covariance[q][q], 0));
        if (!(u > 0))
            continue;
        lw_width_function moved = *instrument;
        moved.value[q] += 0.1 * u;
        f->by_instrument[q] = lw_arena_take(f->arena, m->n, sizeof(double), err);
        if (f->by_instrument[q] == NULL)
            return LW_OUT_OF_MEMORY;
        status = lw_pattern_instrument(m, &moved, err);
        if (status == LW_OK)
            status = lw_pattern_evaluate(m, f->p, false, &normal, err);
        for (size_t i = 0; i < m->n; i++)
            f->by_instrument[q][i] = (base[i] - m->curve[i]) / 0.1; /* what the fit would have to make up for */
    }
    if (status == LW_OK)
        status = lw_pattern_instrument(m, instrument, err);
    return status;
}

/* Covariance of the parameters at p: counting times misfit^2, plus the calibration's part. */
static lw_status whole_covariance(fitter *f, lw_pattern_form *form, double misfit, double *covariance, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    size_t n = m->n_parameters, shared = lw_pattern_background_row(m);
    const lw_width_function *instrument = &m->profiles->lines->instrument;
    lw_status status = invert(f, err);
    if (status != LW_OK)
        return status;
    double *shift[LW_WIDTH_PARAMETERS] = {NULL}, *g = lw_arena_take(f->arena, n, sizeof *g, err);
    for (int q = 0; q < LW_WIDTH_PARAMETERS; q++) {
        if (f->by_instrument[q] == NULL)
            continue;
        shift[q] = lw_arena_take(f->arena, n, sizeof(double), err);
        if (g == NULL || shift[q] == NULL)
            return LW_OUT_OF_MEMORY;
        memset(g, 0, n * sizeof *g);
        status = lw_pattern_project(m, f->p, f->by_instrument[q], g, err);
        if (status != LW_OK)
            return status;
        for (size_t i = 0; i < shared; i++)
            for (size_t j = 0; j < n; j++)
                shift[q][i] += f->inverse[i * n + j] * g[j];
    }
    for (size_t i = 0; i < shared; i++)
        for (size_t j = 0; j < shared; j++) {
            double sum = misfit * misfit * f->inverse[i * n + j];
            for (int a = 0; a < LW_WIDTH_PARAMETERS; a++)
                for (int b = 0; b < LW_WIDTH_PARAMETERS; b++)
                    if (shift[a] != NULL && shift[b] != NULL)
                        sum += shift[a][i] * shift[b][j] * instrument->covariance[a][b] /
                               sqrt(instrument->covariance[a][a] * instrument->covariance[b][b]);
            covariance[i * n + j] = sum;
        }
    memcpy(form->shape, f->p, lw_pattern_background_row(&f->pattern) * sizeof *form->shape);
    return LW_OK;
}

/* ---------------------------------------------------------------------------------------------------- all */

static void choose_report_lengths(fitter *f)
{
    static const double nice[] = {0.5, 1, 1.5, 2, 3, 4, 5, 6, 8, 10, 12, 15, 20, 25, 30, 40, 50, 60, 80, 100, 150, 200,
                                  300, 400};
    lw_pattern_answer *a = f->answer;
    lw_spheres spheres = lw_pattern_spheres(f->p);
    double most = fmin(1.3 * lw_spheres_size_volume(&spheres, NULL), 3 * f->half_length);
    a->n_lengths = 0;
    for (size_t i = 0; i < sizeof nice / sizeof *nice && a->n_lengths < LW_ANSWER_LENGTHS; i++)
        if ((nice[i] <= most || a->n_lengths < 4) && nice[i] >= 0.01 * most)
            a->length[a->n_lengths++] = nice[i];
}

static void average(lw_pattern_answer *a)
{
    double best = INFINITY, total = 0;
    for (size_t i = 0; i < a->n_forms; i++) {
        lw_pattern_form *form = &a->form[i];
        if (!form->fitted)
            continue;
        form->weight = form->chi2 / (a->misfit * a->misfit) + (double)form->n_free * log((double)a->n_points);
        if (form->weight < best) {
            best = form->weight;
            a->best = i;
        }
    }
    for (size_t i = 0; i < a->n_forms; i++) {
        lw_pattern_form *form = &a->form[i];
        form->weight = form->fitted ? exp(-0.5 * (form->weight - best)) : 0;
        total += form->weight;
    }
    for (size_t i = 0; i < a->n_forms; i++)
        a->form[i].weight /= total;
}

/* Mean by evidence. Its spread over the forms counts forms in reach more than evidence does: every form is an
 * approximation of what the powder is, so that a difference in chi-square is worth less than if one of them were true.
 * The likelihood is raised to a power for it (Miller & Dunson 2019 J. Am. Stat. Assoc. 114, 1113); at a twentieth a form
 * 28 in chi-square behind the best still counts half. */
#define COARSE 0.05

static void join(lw_pattern_answer *a)
{
    double coarse[LW_PATTERN_FORMS_MOST], total = 0;
    for (size_t i = 0; i < a->n_forms; i++)
        total += coarse[i] = a->form[i].none ? a->form[i].weight : pow(a->form[i].weight, COARSE);
    for (int k = 0; k < LW_ANSWER_MOST; k++) {
        a->value[k] = 0;
        for (size_t i = 0; i < a->n_forms; i++)
            if (a->form[i].weight > 0)
                a->value[k] += a->form[i].weight * a->form[i].value[k];
    }
    for (int k = 0; k < LW_ANSWER_MOST; k++)
        for (int l = 0; l < LW_ANSWER_MOST; l++) {
            double sum = 0;
            for (size_t i = 0; i < a->n_forms; i++)
                if (a->form[i].weight > 0)
                    sum += a->form[i].weight * a->form[i].covariance[k][l] +
                           coarse[i] / total * (a->form[i].value[k] - a->value[k]) * (a->form[i].value[l] - a->value[l]);
            a->covariance[k][l] = sum;
        }
}

/* Factor on u as the fit of the lines has it: for a chi-square that chance does not give, and for residuals that go
 * together, whose long-run variance is larger (noise that is itself correlated included). */
static void set_misfit(const fitter *f, lw_pattern_answer *a)
{
    const lw_pattern_form *best = NULL;
    for (size_t i = 0; i < a->n_forms; i++)
        if (a->form[i].fitted && (best == NULL || a->form[i].chi2 < best->chi2))
            best = &a->form[i];
    if (best == NULL)
        return;
    double degrees = fmax((double)a->n_points - (double)best->n_free, 1);
    a->goodness = sqrt(best->chi2 / degrees);
    double noise = f->pattern.profiles->lines->scan->correlation, rho = best->correlation - noise;
    double factor2 = (1 + noise) / (1 - noise);
    if (lw_chi2_tail(best->chi2, degrees) < 1e-3)
        factor2 *= a->goodness * a->goodness;
    if (rho > 3 / sqrt((double)a->n_points))
        factor2 *= (1 + fmin(rho, 0.9)) / (1 - fmin(rho, 0.9));
    a->misfit = sqrt(fmax(factor2, 1));
}

/* Parameters after each form, so that covariances can be taken once the weights are known. */
typedef struct saved {
    double *p;
    bool *fixed, *at_bound;
} saved;

static lw_status save(fitter *f, saved *to, lw_error *err)
{
    size_t n = f->pattern.n_parameters;
    to->p = lw_arena_copy(f->arena, f->p, n, sizeof(double), err);
    to->fixed = lw_arena_copy(f->arena, f->fixed, n, sizeof(bool), err);
    to->at_bound = lw_arena_copy(f->arena, f->at_bound, n, sizeof(bool), err);
    return to->p && to->fixed && to->at_bound ? LW_OK : LW_OUT_OF_MEMORY;
}

static void restore(fitter *f, const saved *from, const lw_pattern_form *form)
{
    size_t n = f->pattern.n_parameters;
    memcpy(f->p, from->p, n * sizeof(double));
    memcpy(f->fixed, from->fixed, n * sizeof(bool));
    memcpy(f->at_bound, from->at_bound, n * sizeof(bool));
    lw_pattern_shape_set_strain(&f->pattern.shape, form->strain);
}

/* The forms to try, the constant first: it tells whether there is strain at all. */
static void list_forms(const lw_pattern_request *request, lw_pattern_answer *a)
{
    a->n_forms = 0;
    if (request->strain == LW_PATTERN_AUTO) {
        for (int i = 0; lw_strain_form_list[i] != NULL; i++)
            a->form[a->n_forms++] = (lw_pattern_form){.strain = lw_strain_form_list[i], .why = ""};
        a->form[a->n_forms++] = (lw_pattern_form){.strain = &lw_strain_constant, .none = true, .why = ""};
    } else if (request->strain == LW_PATTERN_NO_STRAIN) {
        a->form[a->n_forms++] = (lw_pattern_form){.strain = &lw_strain_constant, .none = true, .why = ""};
    } else {
        a->form[a->n_forms++] = (lw_pattern_form){.strain = lw_strain_form_list[request->strain], .why = ""};
    }
}

/* Does the size stand out of its uncertainty? Looked at with the width of the distribution free and, where that says
 * no, held. */
static bool size_stands_out(fitter *f)
{
    size_t n = f->pattern.n_parameters;
    const double *c = f->inverse;
    size_t at = LW_PATTERN_INVERSE_SIZE;
    return !f->at_bound[at] && f->p[at] > 2 * sqrt(fmax(c[at * (n + 1)], 0));
}

lw_status lw_pattern_fit(lw_engine *engine, const lw_profiles *profiles, const lw_pattern_request *request,
                         lw_arena *arena, lw_pattern_answer *answer, lw_error *err)
{
    static const char small[] = "the strain is too small to tell forms apart";
    fitter f = {.request = request, .arena = arena, .answer = answer};
    memset(answer, 0, sizeof *answer);
    lw_status status = begin(&f, engine, profiles, err);
    if (status != LW_OK)
        return status;
    lw_pattern_answer *a = answer;
    a->n_points = f.pattern.n;
    a->misfit = 1;
    list_forms(request, a);

    /* a first look with one form: weights, and what is there to be seen */
    lw_pattern_form look = a->form[0];
    if (a->n_forms == 1 && look.strain->n > 1)
        restart_strain(&f, &lw_strain_constant, look.strain);
    status = minimise(&f, &look, err);
    if (status == LW_OK)
        status = follow_weights(&f, err);
    if (status == LW_OK)
        status = invert(&f, err);
    if (status != LW_OK)
        return status;
    size_t n = f.pattern.n_parameters, strain_at = LW_PATTERN_STRAIN * (n + 1);
    double u_strain = sqrt(fmax(f.inverse[strain_at], 0)), strain = f.p[LW_PATTERN_STRAIN];
    bool strained = strain > 3 * u_strain && !f.at_bound[LW_PATTERN_STRAIN];
    a->size_unresolved = !size_stands_out(&f);
    if (a->size_unresolved) {
        f.p[LW_PATTERN_SIGMA] = ASSUMED_SIGMA;
        f.fixed[LW_PATTERN_SIGMA] = true;
    }
    saved first, after[LW_PATTERN_FORMS_MOST] = {{0}}, *decaying = NULL;
    const lw_strain_form *decaying_form = NULL;
    status = save(&f, &first, err);
    for (size_t i = 0; i < a->n_forms && status == LW_OK; i++) {
        lw_pattern_form *form = &a->form[i];
        lw_engine_progress(engine, "whole pattern", (double)i / (double)a->n_forms);
        if (a->n_forms > 1 && form->strain->n > 1 && !strained) {
            form->why = small;
            continue;
        }
        if (form->none && a->n_forms > 1 && strain > 6 * u_strain && u_strain > 0) {
            form->why = "strain stands out beyond doubt";
            continue;
        }
        if (a->n_forms > 1) {
            memcpy(f.p, first.p, n * sizeof(double));
            if (form->strain->n > 1) {
                /* a constant strain that decays in truth drives sigma up: not from there */
                if (decaying != NULL)
                    memcpy(f.p, decaying->p, n * sizeof(double));
                else if (!a->size_unresolved)
                    memcpy(f.p + LW_PATTERN_SIZE, f.start_shape, sizeof f.start_shape);
                restart_strain(&f, decaying != NULL ? decaying_form : &lw_strain_constant, form->strain);
            }
        }
        status = minimise(&f, form, err);
        if (status == LW_OK)
            status = save(&f, &after[i], err);
        if (form->strain->n > 1 && decaying == NULL && form->fitted) {
            decaying = &after[i];
            decaying_form = form->strain;
        }
    }
    if (status != LW_OK)
        return status;
    set_misfit(&f, a);
    average(a);
    if (!a->form[a->best].fitted)
        return lw_fail(err, LW_NO_CONVERGENCE, NULL, "no form of strain could be fitted to the whole pattern");

    /* direction: let the strain of the best forms vary with it, and see whether that is worth a parameter */
    if (request->anisotropy == 0 && enough_directions(&f) && !a->form[a->best].none && strained) {
        lw_pattern_form trial = a->form[a->best];
        restore(&f, &after[a->best], &trial);
        f.fixed[LW_PATTERN_ANISOTROPY] = false;
        double before = trial.chi2;
        status = minimise(&f, &trial, err);
        if (status != LW_OK)
            return status;
        if (before - trial.chi2 > a->misfit * a->misfit * (log((double)a->n_points) + 10)) {
            a->anisotropic = true;
            double q = f.p[LW_PATTERN_ANISOTROPY];
            for (size_t i = 0; i < a->n_forms && status == LW_OK; i++) {
                if (!a->form[i].fitted || a->form[i].none)
                    continue;
                restore(&f, &after[i], &a->form[i]);
                f.fixed[LW_PATTERN_ANISOTROPY] = false;
                f.p[LW_PATTERN_ANISOTROPY] = q;
                status = minimise(&f, &a->form[i], err);
                if (status == LW_OK)
                    status = save(&f, &after[i], err);
            }
            if (status != LW_OK)
                return status;
            set_misfit(&f, a);
            average(a);
        }
    } else if (request->anisotropy == 2 && enough_directions(&f)) {
        a->anisotropic = true;
    }

    restore(&f, &after[a->best], &a->form[a->best]);
    choose_report_lengths(&f);
    status = instrument_differences(&f, err);
    double inverse_size = 0, u_inverse_size = 0;
    double *covariance = lw_arena_take(arena, n * n, sizeof *covariance, err);
    if (covariance == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < a->n_forms && status == LW_OK; i++) {
        lw_pattern_form *form = &a->form[i];
        if (!form->fitted)
            continue;
        memset(covariance, 0, n * n * sizeof *covariance);
        restore(&f, &after[i], form);
        if (form->weight > 1e-4)
            status = whole_covariance(&f, form, a->misfit, covariance, err);
        if (status != LW_OK)
            break;
        propagate(&f, form, covariance);
        if (i == a->best) {
            inverse_size = form->shape[LW_PATTERN_INVERSE_SIZE];
            u_inverse_size = sqrt(fmax(covariance[LW_PATTERN_INVERSE_SIZE * (n + 1)], 0));
            a->sigma_at_bound = f.at_bound[LW_PATTERN_SIGMA];
            a->anisotropy = form->shape[LW_PATTERN_ANISOTROPY];
            a->u_anisotropy = sqrt(fmax(covariance[LW_PATTERN_ANISOTROPY * (n + 1)], 0));
        }
    }
    if (status != LW_OK)
        return status;
    join(a);
    if (a->size_unresolved) {
        /* the width of the distribution is assumed, so that both sizes go with the one parameter */
        lw_spheres spheres = {1, ASSUMED_SIGMA};
        double ratio = lw_spheres_size_volume(&spheres, NULL) / lw_spheres_size_area(&spheres, NULL);
        double limit = fmax(inverse_size, 0) + ONE_SIDED * u_inverse_size;
        a->size_area_limit = 1 / limit;
        a->size_volume_limit = ratio / limit;
    }
    if (a->form[a->best].none || (strcmp(a->form[a->best].strain->name, "constant") == 0 && !strained))
        a->strain_limit = sqrt(fmax(strain, 0) + ONE_SIDED * fmax(u_strain, 0));
    lw_engine_progress(engine, "whole pattern", 1);
    return LW_OK;
}
