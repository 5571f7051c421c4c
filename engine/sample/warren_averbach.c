/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Warren-Averbach: size and strain at every column length, from two or more orders of a direction. */
#include "sample/warren_averbach.h"

#include "sample/breadths.h"
#include "sample/method.h"

#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define SETS_MOST 12
#define HALF_SIZE 0.65 /* half the volume-weighted over the area-weighted size, for usual widths of distributions */
#define CONTRAST 0.1   /* difference of ln A between the orders below which tails and background decide */

static const char *const form_names[] = {"log", "linear", NULL};

typedef struct warren_averbach_options {
    int form;
    lw_option_list lines;
    double length_most, slope[2];
} warren_averbach_options;

#define AT(field) offsetof(warren_averbach_options, field)
static const lw_option options[] = {
    {"form", LW_OPTION_CHOICE, "", "log", 0, 0, form_names, AT(form),
     "straight lines through ln A (log) or through A (linear) against s^2"},
    {"lines", LW_OPTION_LIST, "", "by direction", 0, 0, NULL, AT(lines),
     "lines to take as one set, or all: strain and size are then taken as isotropic"},
    {"length_most", LW_OPTION_NUMBER, "nm", "as far as the coefficients reach", 0, 1e5, NULL, AT(length_most),
     "longest column length to use"},
    {"slope", LW_OPTION_RANGE, "size", "0.05 to 0.6", 0, 2, NULL, AT(slope),
     "range of column lengths for the initial slope, in units of the area-weighted size"},
    LW_OPTIONS_END};

static void defaults(void *target)
{
    *(warren_averbach_options *)target = (warren_averbach_options){.slope = {0.05, 0.6}};
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    size_t with = 0;
    for (size_t i = 0; i < profiles->n; i++)
        with += profiles->profile[i].resolved && profiles->profile[i].n_coefficients > 8;
    if (with >= 2)
        return NULL;
    snprintf(why, size, "two resolved lines with Fourier coefficients are needed, %zu found", with);
    return why;
}

/* ------------------------------------------------------------------------------------------------ one set */

static bool strain_at(const lw__averbach *set, double length, double *value, double *u)
{
    double x = length / set->harmonics.step_nm;
    size_t i = (size_t)floor(x + 1e-9), n = set->harmonics.n;
    if (i < set->first_strain || x > (double)set->end_strain - 1 + 1e-9)
        return false;
    double t = fmin(fmax(x - (double)i, 0), 1);
    size_t j = i + 1 < n && t > 1e-9 ? i + 1 : i;
    const double *q = set->harmonics.square, *c = set->harmonics.square_covariance;
    double square = (1 - t) * q[i] + t * q[j];
    double var = (1 - t) * (1 - t) * c[i * n + i] + 2 * t * (1 - t) * c[i * n + j] + t * t * c[j * n + j];
    if (!(square > 0))
        return false;
    *value = sqrt(square);
    *u = sqrt(fmax(var, 0)) / (2 * *value);
    return true;
}

/* Lengths over which the strain stands out: the longest run without a gap. */
static void find_strain(lw__averbach *set, double least)
{
    const lw_harmonics *h = &set->harmonics;
    const double *highest = h->coefficient + (set->orders.n - 1) * h->n;
    size_t start = 0, best = 0;
    for (size_t i = 1; i <= h->n; i++) {
        bool good = i < h->n && h->square[i] > 0 && highest[i] >= least && h->contrast[i] >= CONTRAST &&
                    sqrt(fmax(h->square_covariance[i * h->n + i], 0)) < 0.5 * h->square[i];
        if (good && start == 0)
            start = i;
        if (!good && start > 0) {
            if (i - start > best) {
                best = i - start;
                set->first_strain = start;
                set->end_strain = i;
            }
            start = 0;
        }
    }
}

static lw_status separate(const lw_profiles *profiles, const warren_averbach_options *o, lw__averbach *set, lw_arena *arena,
                          lw_error *err)
{
    lw_harmonics *h = &set->harmonics;
    lw_status status = lw_harmonics_separate(profiles, &set->orders, (lw_harmonic_form)o->form, o->length_most, arena, h, err);
    if (status != LW_OK)
        return status;
    set->size = (lw_size_coefficients){.n = h->n, .step_nm = h->step_nm, .value = h->size, .covariance = h->size_covariance};
    bool voigt = profiles->method != NULL && strcmp(profiles->method, "convolution") == 0;
    lw_error own = LW_ERROR_NONE;
    status = lw_columns_slope(&set->size, o->slope, arena, &set->slope, &own);
    set->has_slope = status == LW_OK;
    if (set->has_slope && voigt && h->size[1] < 1) {
        /* the Voigts' own slope at L = 0 is the other reading of them: between the two lies what their shape makes */
        double own_slope = h->step_nm / (1 - h->size[1]), off = own_slope - set->slope.size_area;
        set->slope.u = sqrt(set->slope.u * set->slope.u + off * off / 12);
    }
    if (voigt) { /* coefficients of fitted Voigts stand beside the same readings as the breadths of these Voigts */
        lw_breadths breadths;
        status = lw_breadths_gather(profiles, arena, &breadths, err);
        if (status == LW_OK)
            status = lw_breadths_read(&breadths, arena, &set->readings, err);
        if (status != LW_OK)
            return status;
    }
    set->no_slope = set->has_slope ? "" : lw_arena_text(arena, own.message, err);
    /* low coefficients of a fitted Voigt are its own tail, not the powder's */
    find_strain(set, voigt ? 0.1 : 0.02);

    if (set->has_slope) {
        set->has_volume = lw_columns_integral(&set->size, &set->slope, &set->size_volume, &set->u_volume, &set->no_volume,
                                              arena, err);
        for (size_t i = 1; i < h->n && set->has_volume; i++)
            if (h->size[i] < 0.1) {
                if (h->coefficient[i] < 0.75 * h->size[i]) { /* of the lowest order */
                    set->has_volume = false;
                    set->no_volume = "where the size coefficients die, strain has taken more than a quarter off every order: "
                                     "the integral would be an extrapolation";
                }
                break;
            }
        lw_error none = LW_ERROR_NONE;
        set->has_density = !profiles->values_only &&
                           lw_columns_density(&set->size, &set->slope, arena, &set->density, &none) == LW_OK &&
                           set->density.beyond < 0.5;
        if (none.status == LW_OUT_OF_MEMORY)
            *err = none;
        }
    set->strain_length = set->has_slope ? HALF_SIZE * set->slope.size_area
                                        : 0.5 * h->step_nm * (double)(set->first_strain + set->end_strain);
    if (set->end_strain == 0 || !strain_at(set, set->strain_length, &set->strain, &set->u_strain))
        set->strain = 0;
    size_t at = set->end_strain > 0 || set->has_slope ? (size_t)fmin(fmax(set->strain_length / h->step_nm + 0.5, 1), (double)h->n - 1) : h->n / 2;
    set->chi2 = h->chi2[at];
    set->chi2_length = h->step_nm * (double)at;
    set->chi2_p = set->orders.n > 2 ? lw_chi2_tail(set->chi2, (double)set->orders.n - 2) : 1;
    return err->status;
}

/* --------------------------------------------------------------------------------------------------- telling */

static const char SIZE_AREA[] = "Area-weighted mean column length: start over initial slope of the size coefficients.";
static const char SIZE_VOLUME[] = "Volume-weighted mean column length: twice the integral of the size coefficients.";
static const char STRAIN[] = "Root mean square strain over columns of 0.65 size_area, about half the volume-weighted size.";
static const char STRAIN_MIDDLE[] = "Root mean square strain in the middle of the column lengths at which it is determined.";
static const char HOOK[] =
    "Start of the size coefficients' fit minus 1: what lost tails or background took from the coefficient at L = 0.";

static const char *hkl_of(const lw_profile *profile, char text[24])
{
    const lw_reflection *r = &profile->line->reflection;
    return lw_hkl_text(r->h, r->k, r->l, text, 24);
}

static void tell_numbers(const lw__averbach *set, lw_node *to, lw_error *err)
{
    lw_add_text(to, "direction", set->orders.direction, err);
    if (set->has_slope) {
        lw_quantity area = lw_quantity_of(set->slope.size_area, set->slope.u, "nm");
        lw_quantity volume = lw_quantity_of(set->size_volume, set->u_volume, "nm");
        lw_readings_widen(&set->readings, LW_READ_SIZE_AREA, 0, &area, to, err);
        lw_add_quantity(to, "size_area", area, SIZE_AREA, err);
        if (set->has_volume) {
            lw_readings_widen(&set->readings, LW_READ_SIZE_VOLUME, 0, &volume, to, err);
            lw_add_quantity(to, "size_volume", volume, SIZE_VOLUME, err);
        } else
            lw_add_text(to, "size_volume_not_determined", set->no_volume, err);
    } else {
        lw_add_text(to, "size_not_determined", set->no_slope, err);
    }
    if (set->strain > 0) {
        lw_quantity strain = lw_quantity_of(set->strain, set->u_strain, "");
        lw_readings_widen(&set->readings, LW_READ_STRAIN, 0, &strain, to, err);
        lw_add_quantity(to, "strain_rms", strain, set->has_slope ? STRAIN : STRAIN_MIDDLE, err);
        lw_add_quantity(to, "strain_apparent",
                        lw_quantity_of(strain.value / LW_RMS_PER_APPARENT, strain.u / LW_RMS_PER_APPARENT, ""),
                        "sqrt(pi/2) times the rms strain: as a breadth shows it (Stokes & Wilson 1944).", err);
    }
    lw_node *list = lw_add_list(to, "strain_rms_at", err);
    static const double nice[] = {0.5, 1, 1.5, 2, 3, 4, 5, 6, 7, 8, 10, 12, 15, 20, 25, 30, 40, 50, 60, 80, 100, 150, 200};
    for (size_t i = 0; i < sizeof nice / sizeof *nice; i++) {
        double value, u;
        if (!strain_at(set, nice[i], &value, &u))
            continue;
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "length", nice[i], err);
        lw_add_number(row, "value", value, err);
        lw_add_number(row, "u", u, err);
    }
    char text[200];
    double step = set->harmonics.step_nm;
    if (set->end_strain == 0)
        snprintf(text, sizeof text, "at no length: the orders' coefficients don't differ enough");
    else
        snprintf(text, sizeof text,
                 "outside %.3g to %.3g nm: shorter columns hardly tell the orders apart, and tails and background decide; "
                 "longer ones are lost in the noise",
                 step * (double)set->first_strain, step * (double)(set->end_strain - 1));
    lw_add_text(to, "strain_not_determined", text, err);
    if (set->has_slope)
        lw_add_quantity(to, "hook", lw_quantity_of(set->slope.hook, set->slope.u_hook, ""), HOOK, err);
}

static void tell_curves(const lw_profiles *profiles, const lw__averbach *set, lw_arena *arena, lw_node *to, lw_error *err)
{
    (void)profiles;
    const lw_harmonics *h = &set->harmonics;
    size_t n = h->n;
    double *length = lw_arena_take(arena, n, sizeof *length, err), *u = lw_arena_take(arena, n, sizeof *u, err);
    double *strain = lw_arena_take(arena, n, sizeof *strain, err), *u_strain = lw_arena_take(arena, n, sizeof *u_strain, err);
    if (!length || !u || !strain || !u_strain)
        return;
    for (size_t i = 0; i < n; i++) {
        length[i] = h->step_nm * (double)i;
        u[i] = sqrt(fmax(h->size_covariance[i * n + i], 0));
        strain[i] = i > 0 ? h->square[i] : 0;
        u_strain[i] = sqrt(fmax(h->square_covariance[i * n + i], 0));
    }
    lw_node *group = lw_add_group(to, "curve", err);
    lw_add_vector(group, "length", length, n, "nm", err);
    lw_add_vector(group, "size_coefficient", h->size, n, "", err);
    lw_add_vector(group, "u_size_coefficient", u, n, "", err);
    lw_add_vector(group, "mean_square_strain", strain, n, "", err);
    lw_add_vector(group, "u_mean_square_strain", u_strain, n, "", err);
    lw_node *lines = lw_add_list(group, "lines", err);
    for (size_t k = 0; k < set->orders.n; k++) {
        char hkl[24];
        lw_node *line = lw_add_group(lines, NULL, err);
        lw_add_text(line, "hkl", hkl_of(set->orders.profile[k], hkl), err);
        lw_add_number(line, "s", set->orders.profile[k]->s_per_nm, err);
        lw_add_vector(line, "coefficient", h->coefficient + k * n, n, "", err);
        lw_add_vector(line, "u", h->u + k * n, n, "", err);
    }
}

static void tell_columns(const lw__averbach *set, lw_node *to, lw_error *err)
{
    if (set->has_slope && !set->has_density) {
        lw_add_text(to, "columns_not_determined",
                    "most columns are longer than the coefficients reach, or no distribution fits them", err);
        return;
    }
    lw_node *list = lw_add_list(to, "columns", err);

    for (size_t i = 0; set->has_density && i < set->density.n; i++) {
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "length", set->density.length_nm[i], err);
        lw_add_number(row, "value", set->density.density[i], err);
        lw_add_number(row, "u", set->density.u[i], err);
    }
}

static void remark(const lw_profiles *profiles, const lw__averbach *set, lw_node *remarks, lw_error *err)
{
    char text[320];
    if (set->has_slope && fabs(set->slope.hook) > fmax(0.02, 3 * set->slope.u_hook)) {
        snprintf(text, sizeof text,
                 "the size coefficients start at %.3f instead of 1 (hook): the sizes were corrected for it; look at the "
                 "background and at how far the tails were measured",
                 1 + set->slope.hook);
        lw_add_text(remarks, NULL, text, err);
    }
    if (set->orders.n > 2 && set->chi2_p < 0.0027) {
        snprintf(text, sizeof text,
                 "the orders of %s don't lie on one line (chi-square %.3g for %zu degrees of freedom at %.3g nm): strain is "
                 "not normally distributed, not the same for these lines, or their tails were cut",
                 set->orders.direction, set->chi2, set->orders.n - 2, set->chi2_length);
        lw_add_text(remarks, NULL, text, err);
    }
    if (profiles->method != NULL && strcmp(profiles->method, "convolution") == 0)
        lw_add_text(remarks, NULL,
                    "the coefficients are those of fitted Voigts: what they leave of the measured shape is not in them "
                    "(take the instrument out by another method for that)",
                    err);
}

/* Relative uncertainty of size and strain together: the direction with the least speaks for the powder. */
static double vagueness(const lw__averbach *set)
{
    if (!set->has_slope)
        return INFINITY;
    return hypot(set->slope.u / set->slope.size_area, set->strain > 0 ? set->u_strain / set->strain : 1);
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result, lw_error *err)
{
    const warren_averbach_options *o = given;
    lw__averbach *set = lw_arena_take(arena, SETS_MOST, sizeof *set, err);
    lw_orders *found = lw_arena_take(arena, SETS_MOST, sizeof *found, err);
    lw_status status = set == NULL || found == NULL ? LW_OUT_OF_MEMORY : LW_OK;
    size_t n = 0, best = 0;
    if (status == LW_OK && o->lines.n > 0) {
        status = lw_orders_named(profiles, &o->lines, found, err);
        n = status == LW_OK;
    } else if (status == LW_OK) {
        n = lw_orders_find(profiles, found, SETS_MOST);
        if (n == 0)
            status = lw_fail(err, LW_NOT_SUPPORTED, "say lines = \"all\" to take all lines as orders of one direction",
                             "Warren-Averbach needs two resolved orders of a direction (111 and 222, 200 and 400 ...), and "
                             "there are none");
    }
    size_t good = 0;
    lw_error first = LW_ERROR_NONE;
    for (size_t i = 0; i < n && status == LW_OK; i++) {
        lw_error each = LW_ERROR_NONE;
        set[good].orders = found[i];
        lw_status one = separate(profiles, o, &set[good], arena, &each);
        if (one == LW_OK)
            good++;
        else if (one == LW_NOT_SUPPORTED)
            lw_fail(&first, one, each.remedy, "%s", each.message);
        else {
            *err = each;
            status = one;
        }
    }
    if (status == LW_OK && good == 0)
        status = lw_fail(err, LW_NOT_SUPPORTED, first.remedy, "%s", first.message);
    for (size_t i = 1; i < good; i++)
        if (vagueness(&set[i]) < vagueness(&set[best]))
            best = i;
    if (status == LW_OK) {
        tell_numbers(&set[best], result, err);
        lw_add_text(result, "form", form_names[o->form], err);
        lw_add_text(result, "coefficients", profiles->method, err);
        if (set[best].orders.n > 2) {
            lw_node *test = lw_add_group(result, "test_of_orders", err);
            lw_add_number(test, "length", set[best].chi2_length, err);
            lw_add_number(test, "chi2", set[best].chi2, err);
            lw_add_number(test, "degrees_of_freedom", (double)set[best].orders.n - 2, err);
            lw_add_number(test, "probability", set[best].chi2_p, err);
        }
        tell_columns(&set[best], result, err);
        lw_node *list = lw_add_list(result, "directions", err);
        for (size_t i = 0; i < good; i++) {
            lw_node *each = lw_add_group(list, NULL, err);
            char orders[120] = "", hkl[24];
            size_t used = 0;
            for (size_t k = 0; k < set[i].orders.n && used + 28 < sizeof orders; k++)
                used += (size_t)snprintf(orders + used, sizeof orders - used, "%s%s", k > 0 ? ", " : "",
                                         hkl_of(set[i].orders.profile[k], hkl));
            lw_add_text(each, "lines", orders, err);
            tell_numbers(&set[i], each, err);
        }
        tell_curves(profiles, &set[best], arena, result, err);
        lw__averbach_draw(&set[best], arena, result, err);
        remark(profiles, &set[best], lw_add_list(result, "remarks", err), err);
        status = err->status;
    }
    return status;
}

const lw_method lw_method_warren_averbach = {
    .name = "warren_averbach",
    .title = "Warren-Averbach",
    .purpose = "size and strain at every column length, from Fourier coefficients of two or more orders",
    .assumes = "The orders see the same columns, and strains over a column are normally distributed or small. Lines taken "
               "together under `lines` are taken as isotropic.",
    .source = "Warren & Averbach (1950) J. Appl. Phys. 21, 595; Warren (1969) X-ray Diffraction, ch. 13; hook: Young, Gerdes "
              "& Wilson (1967) Acta Cryst. 22, 155",
    .options = options,
    .options_size = sizeof(warren_averbach_options),
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
