/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/dead_time.h"

#include "instrument/calibration_optical.h"
#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

static const char *const model_names[] = {"non_paralysable", "paralysable", NULL};
enum { LEVELS = 12 };
static const double counts_together = 100; /* in the weaker scan: enough for a normal distribution */

#define AT(field) offsetof(lw_dead_time_options, field)
const lw_option lw_dead_time_option_table[] = {
    {"counting_time", LW_OPTION_NUMBER, "s", "from the scan's header", 1e-9, 1e7, NULL, AT(counting_time_s),
     "time for which each point was counted"},
    {"weaker_counting_time", LW_OPTION_NUMBER, "s", "from its header, else as the stronger scan", 1e-9, 1e7, NULL,
     AT(weaker_counting_time_s), "the same of the weaker scan"},
    {"model", LW_OPTION_CHOICE, "", "non_paralysable", 0, 0, model_names, AT(model),
     "non_paralysable: m = n/(1 + n tau); paralysable: m = n exp(-n tau)"},
    {"dead_time", LW_OPTION_NUMBER, "s", "", 0, 1, NULL, AT(dead_time_s),
     "as stated for the counter, in place of a weaker scan"},
    LW_OPTIONS_END};

lw_dead_time_options lw_dead_time_defaults(void)
{
    return (lw_dead_time_options){.counting_time_s = NAN, .weaker_counting_time_s = NAN, .dead_time_s = NAN};
}

/* Observed rate of a true one, and the slopes to rate and dead time. */
static double observed(bool paralysable, double n, double tau, double *by_rate, double *by_tau)
{
    if (paralysable) {
        double alive = exp(-n * tau);
        *by_rate = alive * (1 - n * tau);
        *by_tau = -n * n * alive;
        return n * alive;
    }
    double alive = 1 / (1 + n * tau);
    *by_rate = alive * alive;
    *by_tau = -n * n * alive * alive;
    return n * alive;
}

/* True rate of an observed one; beyond what the model can show, the rate where it is at its end. */
static double true_rate(bool paralysable, double m, double tau)
{
    if (!paralysable)
        return m / fmax(1 - m * tau, 0.02);
    double n = m;
    if (tau > 0 && m * tau > 0.99 * exp(-1))
        return 0.86 / tau; /* where n tau exp(-n tau) = 0.99/e */
    for (int i = 0; i < 60; i++) {
        double by_rate, by_tau, step = (observed(true, n, tau, &by_rate, &by_tau) - m) / by_rate;
        n -= step;
        if (fabs(step) < 1e-14 * fabs(n))
            break;
    }
    return n;
}

/* Points counted together: rates and times of both scans. */
typedef struct group {
    double angle, weak, strong;   /* observed rates, 1/s */
    double weak_time, strong_time; /* s, of all its points */
    double best;                   /* true rate in the weaker scan by both scans */
} group;

typedef struct fit {
    size_t n;
    group *at;
    double tau, ratio, u_tau, u_ratio, chi2, p, birge;
} fit;

static lw_status take_time(const lw_scan *scan, double given, double otherwise, double *time, lw_error *err)
{
    *time = given;
    if (isnan(*time))
        *time = lw__in_header(scan->header, "counting time", NAN);
    if (isnan(*time))
        *time = lw__in_header(scan->header, "time per step", otherwise);
    if (*time > 0)
        return LW_OK;
    return lw_fail_at(err, LW_BAD_ARGUMENT, scan->file, 0, "give counting_time, the seconds that each point was counted",
                      "dead_time: the scan does not say how long each point was counted");
}

static lw_status check_counts(const lw_scan *scan, lw_error *err)
{
    bool counts = scan->noise == LW_NOISE_COUNTS;
    for (size_t i = 0; i < scan->n; i++)
        counts = counts && scan->intensity[i] >= 0;
    return counts ? LW_OK
                  : lw_fail_at(err, LW_BAD_ARGUMENT, scan->file, 0, "give the counts as they were registered, uncorrected",
                               "dead_time: the intensities of this scan are not counts");
}

static lw_status gather(const lw_scan *strong, const lw_scan *weak, double strong_time, double weak_time, lw_arena *arena,
                        fit *out, lw_error *err)
{
    if (strong->n != weak->n)
        return lw_fail_at(err, LW_BAD_ARGUMENT, weak->file, 0, "measure both scans over the same angles",
                          "dead_time: the scans have %zu and %zu points", strong->n, weak->n);
    for (size_t i = 0; i < strong->n; i++)
        if (fabs(strong->two_theta_deg[i] - weak->two_theta_deg[i]) > 1e-4)
            return lw_fail_at(err, LW_BAD_ARGUMENT, weak->file, 0, "measure both scans over the same angles",
                              "dead_time: point %zu of one scan is at %.4f deg, of the other at %.4f deg", i + 1,
                              strong->two_theta_deg[i], weak->two_theta_deg[i]);
    out->at = lw_arena_take(arena, strong->n, sizeof *out->at, err);
    if (out->at == NULL)
        return LW_OUT_OF_MEMORY;
    group sum = {0};
    size_t points = 0;
    for (size_t i = 0; i < strong->n; i++) {
        sum.angle += strong->two_theta_deg[i];
        sum.weak += weak->intensity[i];
        sum.strong += strong->intensity[i];
        points++;
        if (sum.weak < counts_together)
            continue;
        double count = (double)points;
        out->at[out->n++] = (group){.angle = sum.angle / count, .weak = sum.weak / (count * weak_time),
                                    .strong = sum.strong / (count * strong_time), .weak_time = count * weak_time,
                                    .strong_time = count * strong_time};
        sum = (group){0};
        points = 0;
    }
    return out->n >= 10 ? LW_OK
                        : lw_fail_at(err, LW_NOT_SUPPORTED, weak->file, 0, "count longer",
                                     "dead_time: the weaker scan has too few counts (%zu groups of %.0f, 10 are needed)", out->n,
                                     counts_together);
}

/* One group at a ratio and dead time: residual of the true rates, its variance and its slopes. The true rate is the mean of
 * what both scans say, by their variances: so it does not correlate with the residual. */
static double residual(group *g, bool paralysable, double ratio, double tau, double *variance, double *d_tau, double *d_ratio)
{
    double weak = true_rate(paralysable, g->weak, tau), strong = true_rate(paralysable, g->strong, tau) / ratio, best = weak;
    double vw = 1, vs = 1, of_weak[2] = {1, 0}, of_strong[2] = {1, 0};
    for (int i = 0; i < 3; i++) { /* variances follow from the rate, the rate from the variances */
        double mw = observed(paralysable, best, tau, &of_weak[0], &of_weak[1]);
        double ms = observed(paralysable, ratio * best, tau, &of_strong[0], &of_strong[1]);
        vw = mw / g->weak_time / (of_weak[0] * of_weak[0]);
        vs = ms / g->strong_time / (of_strong[0] * of_strong[0]) / (ratio * ratio);
        best = (weak / vw + strong / vs) / (1 / vw + 1 / vs);
    }
    *variance = ratio * ratio * (vs + vw);
    *d_tau = -of_strong[1] / of_strong[0] + ratio * of_weak[1] / of_weak[0];
    *d_ratio = -best;
    g->best = best;
    return ratio * (strong - weak);
}

static lw_status solve(lw_engine *engine, fit *f, bool paralysable, lw_error *err)
{
    double most = 0, sum[2] = {0};
    for (size_t i = 0; i < f->n; i++) {
        most = fmax(most, fmax(f->at[i].strong, f->at[i].weak));
        sum[0] += f->at[i].strong * f->at[i].weak_time;
        sum[1] += f->at[i].weak * f->at[i].weak_time;
    }
    f->ratio = sum[0] / sum[1];
    double end = (paralysable ? 0.36 : 0.9) / most; /* the model shows no higher rates */
    for (int round = 0; round < 100; round++) {
        double h[3] = {0}, g[2] = {0}, chi2 = 0;
        for (size_t i = 0; i < f->n; i++) {
            double v, d_tau, d_ratio, e = residual(&f->at[i], paralysable, f->ratio, f->tau, &v, &d_tau, &d_ratio);
            h[0] += d_tau * d_tau / v;
            h[1] += d_tau * d_ratio / v;
            h[2] += d_ratio * d_ratio / v;
            g[0] -= d_tau * e / v;
            g[1] -= d_ratio * e / v;
            chi2 += e * e / v;
        }
        lw_status status = lw_engine_poll(engine, err);
        if (status != LW_OK)
            return status;
        double determinant = h[0] * h[2] - h[1] * h[1];
        if (!(determinant > 1e-12 * h[0] * h[2]))
            return lw_fail(err, LW_NOT_SUPPORTED, "scan strong and weak lines, at two currents far apart",
                           "dead_time: the rates do not vary enough to tell a loss from the ratio of the scans");
        f->u_tau = sqrt(h[2] / determinant);
        f->u_ratio = sqrt(h[0] / determinant);
        f->chi2 = chi2;
        double step = (h[2] * g[0] - h[1] * g[1]) / determinant, by_ratio = (h[0] * g[1] - h[1] * g[0]) / determinant;
        double next = f->tau + step;
        if (next > end)
            next = 0.5 * (f->tau + end);
        if (next < -end)
            next = 0.5 * (f->tau - end);
        bool done = fabs(next - f->tau) < 1e-6 * f->u_tau && fabs(by_ratio) < 1e-6 * f->u_ratio;
        f->tau = next;
        f->ratio = fmax(f->ratio + by_ratio, 0.5 * f->ratio);
        if (done) {
            f->p = lw_chi2_tail(f->chi2, (double)f->n - 2);
            f->birge = f->p < 1e-3 ? sqrt(f->chi2 / ((double)f->n - 2)) : 1;
            f->u_tau *= f->birge;
            f->u_ratio *= f->birge;
            return LW_OK;
        }
    }
    return lw_fail(err, LW_NO_CONVERGENCE, "are both scans of the same specimen, counts uncorrected?",
                   "dead_time: no dead time makes the two scans agree");
}

/* Ratio of the scans at levels of the rate, evenly spaced in its logarithm. Groups are sorted by the rate that both scans
 * give: sorted by one scan's, its own noise would choose the level and bend the ratio. */
static void write_levels(const fit *f, bool paralysable, lw_node *result, lw_error *err)
{
    double low = INFINITY, high = 0;
    for (size_t i = 0; i < f->n; i++) {
        low = fmin(low, f->at[i].best);
        high = fmax(high, f->at[i].best);
    }
    lw_node *list = lw_add_list(result, "levels", err);
    for (int level = 0; level < LEVELS; level++) {
        double from = low * pow(high / low, (double)level / LEVELS), to = low * pow(high / low, (level + 1.0) / LEVELS);
        double strong = 0, weak = 0, strong_time = 0, weak_time = 0, expected[2] = {0}, unused[2];
        for (size_t i = 0; i < f->n; i++) {
            const group *g = &f->at[i];
            if (g->best < from || (g->best >= to && level < LEVELS - 1))
                continue;
            strong += g->strong * g->strong_time;
            weak += g->weak * g->weak_time;
            strong_time += g->strong_time;
            weak_time += g->weak_time;
            expected[0] += g->strong_time * observed(paralysable, f->ratio * g->best, f->tau, &unused[0], &unused[1]);
            expected[1] += g->weak_time * observed(paralysable, g->best, f->tau, &unused[0], &unused[1]);
        }
        if (!(weak >= counts_together && strong > 0))
            continue;
        double ratio = strong / strong_time * weak_time / weak;
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "rate_weaker_per_s", weak / weak_time, err);
        lw_add_number(row, "rate_stronger_per_s", strong / strong_time, err);
        lw_add_quantity(row, "ratio", lw_quantity_of(ratio, ratio * sqrt(1 / weak + 1 / strong), ""), NULL, err);
        lw_add_number(row, "ratio_expected", expected[0] / strong_time * weak_time / expected[1], err);
    }
}

/* Share of the counts that is lost at an observed rate. */
static double loss_at(bool paralysable, double m, double tau)
{
    return 1 - m / true_rate(paralysable, m, tau);
}

static void write_loss(bool paralysable, const lw_scan *scan, double time, double tau, double u, bool resolved, lw_node *result,
                       lw_error *err)
{
    size_t top = 0;
    for (size_t i = 1; i < scan->n; i++)
        if (scan->intensity[i] > scan->intensity[top])
            top = i;
    double rate = scan->intensity[top] / time, step = fmax(1e-3 * fabs(tau), 1e-12);
    double loss = loss_at(paralysable, rate, tau);
    double slope = (loss_at(paralysable, rate, tau + step) - loss_at(paralysable, rate, tau - step)) / (2 * step);
    double limit = loss_at(paralysable, rate, fmax(tau, 0) + 1.6449 * u);
    lw_add_number(result, "strongest_two_theta", scan->two_theta_deg[top], err);
    lw_add_number(result, "strongest_rate_per_s", rate, err);
    lw_add_quantity(result, "loss_at_strongest",
                    resolved ? lw_quantity_of(loss, fabs(slope) * u, "") : lw_upper_limit(limit, 0.95, ""),
                    "share of the counts lost at the strongest point", err);
    lw_node *warnings = lw_add_list(result, "warnings", err);
    bool lossy = resolved && loss > 0.01;
    if (lossy)
        lw_add_text(warnings, NULL,
                    lw_arena_print(result->arena, err,
                                   "%.1f %% of the counts are lost at the strongest point (%.4g deg, %.3g/s): strong lines come "
                                   "out weak and broad; lower the current or attenuate (attention above 1 %%, common practice)",
                                   100 * loss, scan->two_theta_deg[top], rate), err);
    else if (!resolved && limit > 0.01)
        lw_add_text(warnings, NULL,
                    lw_arena_print(result->arena, err,
                                   "no loss is seen, but up to %.1f %% at the strongest point can't be excluded: count longer, "
                                   "or take currents farther apart", 100 * limit), err);
    if (tau < -3 * u)
        lw_add_text(warnings, NULL,
                    "the stronger scan gains at high rates where it should lose: is it of the same specimen in the same place, and "
                    "were its counts corrected already?", err);
    lw_add_text(result, "verdict", lossy || tau < -3 * u ? "attention" : "pass", err);
}

lw_status lw_dead_time(lw_engine *engine, const lw_scan *stronger, const lw_scan *weaker, const lw_dead_time_options *o,
                       lw_node *result, lw_error *err)
{
    lw_error local = LW_ERROR_NONE;
    if (err == NULL)
        err = &local;
    bool paralysable = o->model == 1;
    double time, weaker_time;
    lw_status status = check_counts(stronger, err);
    if (status == LW_OK)
        status = take_time(stronger, o->counting_time_s, NAN, &time, err);
    if (status != LW_OK)
        return status;
    lw_add_text(result, "schema", "linewright/dead_time/1", err);
    lw_add_text(result, "model", model_names[o->model], err);
    lw_add_text(result, "source", "Knoll, Radiation Detection and Measurement (from memory)", err);
    if (weaker == NULL) {
        if (isnan(o->dead_time_s))
            return lw_fail(err, LW_BAD_ARGUMENT, "give a weaker scan of the same specimen, or dead_time in s",
                           "dead_time: one scan alone does not tell it");
        double most = 0;
        for (size_t i = 0; i < stronger->n; i++)
            most = fmax(most, stronger->intensity[i] / time);
        if (most * o->dead_time_s > (paralysable ? exp(-1) : 0.98))
            return lw_fail_at(err, LW_BAD_ARGUMENT, stronger->file, 0, "check the dead time and the counting time",
                              "dead_time: a counter that is dead for %g s can't show %.3g counts a second", o->dead_time_s, most);
        lw_add_quantity(result, "dead_time", lw_quantity_of(o->dead_time_s, 0, "s"), "as stated", err);
        write_loss(paralysable, stronger, time, o->dead_time_s, 0, true, result, err);
        return err->status;
    }
    if (!isnan(o->dead_time_s))
        return lw_fail(err, LW_BAD_ARGUMENT, "leave one of them out", "dead_time: both a weaker scan and a dead time were given");
    status = check_counts(weaker, err);
    if (status == LW_OK)
        status = take_time(weaker, o->weaker_counting_time_s, time, &weaker_time, err);
    if (status != LW_OK)
        return status;
    lw_arena scratch;
    lw_arena_begin(&scratch, engine);
    fit f = {0};
    status = gather(stronger, weaker, time, weaker_time, &scratch, &f, err);
    if (status == LW_OK)
        status = solve(engine, &f, paralysable, err);
    if (status == LW_OK && !(f.ratio > 1.2))
        status = lw_fail_at(err, LW_BAD_ARGUMENT, weaker->file, 0, "take scans at two currents, the stronger one first",
                            "dead_time: the stronger scan is only %.3f times as strong as the weaker one", f.ratio);
    if (status == LW_OK) {
        bool resolved = f.tau > 2 * f.u_tau;
        lw_add_quantity(result, "dead_time",
                        resolved ? lw_quantity_of(f.tau, f.u_tau, "s") : lw_upper_limit(fmax(f.tau, 0) + 1.6449 * f.u_tau, 0.95, "s"),
                        "time after a count in which the counter does not see another", err);
        lw_add_quantity(result, "intensity_ratio", lw_quantity_of(f.ratio, f.u_ratio, ""),
                        "true rate of the stronger scan over that of the weaker", err);
        lw_add_number(result, "chi2", f.chi2, err);
        lw_add_number(result, "degrees_of_freedom", (double)f.n - 2, err);
        lw_add_number(result, "p", f.p, err);
        lw_add_number(result, "birge_ratio", f.birge, err);
        write_loss(paralysable, stronger, time, f.tau, f.u_tau, resolved, result, err);
        write_levels(&f, paralysable, result, err);
        status = err->status;
    }
    lw_arena_end(&scratch);
    return status;
}
