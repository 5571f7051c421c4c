/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Halder-Wagner, the size-strain plot: (beta/s)^2 against beta/s^2 is a straight line. */
#include "sample/breadths.h"
#include "sample/method.h"
#include "sample/reading.h"

#include <math.h>
#include <stdio.h>

static void defaults(void *target)
{
    (void)target;
}

static const lw_option options[] = {LW_OPTIONS_END};

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    if (profiles->n >= 2)
        return NULL;
    snprintf(why, size, "two lines at different angles are needed, %zu found", profiles->n);
    return why;
}

/* The plot that carries the method's name. */
static void draw(lw_arena *arena, const lw_breadths *breadths, const lw_breadth_fit *fit, lw_node *result,
                 lw_error *err)
{
    size_t n = breadths->n;
    double *x = lw_arena_take(arena, n, sizeof *x, err), *y = lw_arena_take(arena, n, sizeof *y, err);
    double *u_x = lw_arena_take(arena, n, sizeof *u_x, err), *u_y = lw_arena_take(arena, n, sizeof *u_y, err);
    if (!x || !y || !u_x || !u_y)
        return;
    double most = 0;
    for (size_t i = 0; i < n; i++) {
        double s = breadths->s[i], beta = breadths->beta[i];
        x[i] = beta / (s * s);
        y[i] = beta * beta / (s * s);
        u_x[i] = fit->fit.u[i] / (s * s);
        u_y[i] = 2 * beta * fit->fit.u[i] / (s * s);
        most = fmax(most, x[i]);
    }
    lw_node *plot = lw_add_group(result, "plot", err);
    lw_add_vector(plot, "x", x, n, "nm", err);
    lw_add_vector(plot, "y", y, n, "", err);
    lw_add_vector(plot, "u_x", u_x, n, "nm", err);
    lw_add_vector(plot, "u_y", u_y, n, "", err);
    double line_x[2] = {0, 1.08 * most}, line_y[2] = {4 * fit->p[1], 4 * fit->p[1] + 1.08 * most * fit->p[0]};
    lw_add_vector(plot, "line_x", line_x, 2, "nm", err);
    lw_add_vector(plot, "line_y", line_y, 2, "", err);
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result, lw_error *err)
{
    (void)given;
    lw_breadths breadths;
    lw_breadth_fit fit;
    lw_readings readings;
    lw_status status = lw_breadths_gather(profiles, arena, &breadths, err);
    if (status == LW_OK)
        status = lw_breadths_fit(&breadths, LW_FORM_PARABOLIC, arena, &fit, err);
    if (status == LW_OK)
        status = lw_breadths_read(&breadths, arena, &readings, err);
    if (status == LW_OK)
        status = lw_breadths_share(profiles, &breadths, &fit, arena, result, err);
    if (status == LW_OK) {
        lw_readings_widen_fit(&readings, (double[2]){0, 0}, &fit, result, err);
        lw_breadths_tell(&fit, result, err);
        draw(arena, &breadths, &fit, result, err);
        lw_breadths_draw(&breadths, &fit, result, err);
        lw_node *remarks = lw_add_list(result, "remarks", err);
        lw_breadths_remark(&breadths, &fit, remarks, err);
        lw_readings_remark(result, remarks, err);
        status = err->status;
    }
    return status;
}

const lw_method lw_method_halder_wagner = {
    .name = "halder_wagner",
    .title = "Halder-Wagner (size-strain plot)",
    .purpose = "size from the slope, strain from the intercept of (beta/s)^2 against beta/s^2",
    .assumes = "Size broadening is Lorentzian and strain broadening Gaussian, joined by the parabolic rule, "
               "which is "
               "near a Voigt's breadth; both are the same in every direction.",
    .source = "Halder & Wagner (1966) Adv. X-ray Anal. 9, 91; Halder & Wagner (1966) Acta Cryst. 20, 312. "
              "Fitted to "
              "the breadths, because both coordinates of the plot hold the same breadth",
    .options = options,
    .options_size = 0,
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
