/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A record says some things twice, for readers that want a table and not a formula. A record in which they contradict each
 * other was changed by hand or damaged: nobody could say which of them is meant. */
#include "instrument/calibration_record.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static lw_status contradicts(const char *file, const char *what, double said, double follows, const char *unit, lw_error *err)
{
    return lw_fail_at(err, LW_BAD_DATA, file, 0, "make it again with calibrate, or use an undamaged copy",
                      "not a usable calibration: %s is %.6g %s, but %.6g %s follows from its parameters", what, said, unit,
                      follows, unit);
}

/* A quantity of a row against what follows; a child that is missing says nothing. */
static lw_status check_value(const lw_node *row, const char *name, double angle, double follows, double tolerance,
                             const char *file, lw_error *err)
{
    const lw_node *node = lw_node_get(row, name);
    if (node == NULL || node->kind != LW_NODE_QUANTITY)
        return LW_OK;
    if (fabs(node->quantity.value - follows) <= tolerance)
        return LW_OK;
    char what[80];
    snprintf(what, sizeof what, "instrument_profile's %s at %g deg", name, angle);
    return contradicts(file, what, node->quantity.value, follows, "deg", err);
}

/* Tolerances: the empirical figures are a closed sum, repeated to 1e-9 on every instruction set; 1e-4 leaves room for
 * records whose numbers were shortened. The optical ones come off a grid that another version may lay otherwise: 1 %. */
static lw_status check_table(lw_engine *engine, const lw_calibration *calibration, const lw_node *record, const char *file,
                             lw_error *err)
{
    const lw_node *table = lw_node_get(record, "instrument_profile");
    lw_optics optics = {0};
    bool exact = calibration->has_optical;
    lw_status status = exact ? lw_optics_begin(engine, &calibration->optical, &optics, err) : LW_OK;
    for (const lw_node *row = table ? table->first : NULL; row != NULL && status == LW_OK; row = row->next) {
        double angle = lw_node_number(row, "two_theta", NAN);
        if (!(angle >= calibration->valid_low_deg - 1e-6 && angle <= calibration->valid_high_deg + 1e-6))
            continue;
        lw_width_figure figure;
        lw_width_figure_at(&calibration->profile, angle, 0, 0, &figure);
        if (exact) {
            lw_optics_figure sharp = {0};
            status = lw_optics_figure_at(&optics, angle, &sharp, err);
            figure.fwhm_deg = sharp.fwhm_deg;
            figure.breadth_deg = sharp.breadth_deg;
            figure.centroid_deg = sharp.centroid_deg;
        }
        double tolerance = (exact ? 1e-2 : 1e-4) * figure.fwhm_deg;
        double shift = lw_aberrations_shift(&calibration->aberrations, angle, NULL) + figure.centroid_deg;
        if (status == LW_OK)
            status = check_value(row, "fwhm", angle, figure.fwhm_deg, tolerance, file, err);
        if (status == LW_OK)
            status = check_value(row, "breadth", angle, figure.breadth_deg, tolerance, file, err);
        if (status == LW_OK)
            status = check_value(row, "shift", angle, shift, tolerance, file, err);
    }
    if (exact)
        lw_optics_end(&optics);
    return status;
}

lw_status lw__calibration_check(lw_engine *engine, const lw_calibration *calibration, const lw_node *record, const char *file,
                                lw_error *err)
{
    const lw_aberrations *set = &calibration->aberrations;
    const lw_node *group = lw_node_get(record, "aberrations");
    for (size_t i = 0; i < set->n; i++) {
        const lw_node *node = lw_node_get(group, set->kind[i]->name);
        double u = sqrt(fmax(set->covariance[i][i], 0));
        if (node != NULL && node->kind == LW_NODE_QUANTITY && !(fabs(node->quantity.u - u) <= 1e-4 * u)) {
            char what[80];
            snprintf(what, sizeof what, "the u of %s", set->kind[i]->name);
            return contradicts(file, what, node->quantity.u, u, set->kind[i]->unit, err);
        }
    }
    return check_table(engine, calibration, record, file, err);
}
