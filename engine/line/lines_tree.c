/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fitted lines as a result tree. */
#include "line/lines.h"

#include <stdio.h>
#include <string.h>

lw_node *lw_lines_tree(const lw_lines *lines, lw_arena *arena, lw_error *err)
{
    lw_node *root = lw_tree_new(arena, err), *list = lw_add_list(root, "lines", err);
    for (size_t k = 0; k < lines->n; k++) {
        const lw_line *line = &lines->line[k];
        const lw_reflection *r = &line->reflection;
        char hkl[24];
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "hkl", lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl), err);
        lw_add_quantity(row, "two_theta", line->two_theta,
                        "observed 2theta at the reference wavelength, aberrations included", err);
        lw_add_quantity(row, "area", line->area, "integrated intensity of all emission components", err);
        lw_add_quantity(row, "fwhm", line->fwhm,
                        "full width at half maximum at one wavelength, instrument and sample together", err);
        lw_add_quantity(row, "breadth", line->breadth,
                        "integral breadth (area over height) at one wavelength, instrument and sample together", err);
        lw_add_quantity(row, "shape_ratio", line->shape_ratio, "FWHM over integral breadth", err);
        lw_add_quantity(row, "gauss_fwhm", line->gauss_fwhm,
                        lines->has_instrument ? "FWHM of the sample's own Gaussian part" : "FWHM of the Gaussian part", err);
        lw_add_quantity(row, "lorentz_fwhm", line->lorentz_fwhm,
                        lines->has_instrument ? "FWHM of the sample's own Lorentzian part" : "FWHM of the Lorentzian part",
                        err);
        lw_add_number(row, "overlap", line->overlap, err);
        lw_add_number(row, "residual_misfit", line->residual_misfit, err);
        lw_add_flag(row, "supported", line->supported, err);
        lw_add_text(row, "remark", line->remark, err);
    }
    lw_node *fit = lw_add_group(root, "fit", err);
    lw_add_text(fit, "shape", lines->shape, err);
    lw_add_number(fit, "points", (double)lines->n_points, err);
    lw_add_number(fit, "chi2", lines->chi2, err);
    lw_add_number(fit, "rwp", lines->rwp, err);
    lw_add_number(fit, "rexp", lines->rexp, err);
    lw_add_number(fit, "goodness_of_fit", lines->goodness, err);
    lw_add_number(fit, "durbin_watson", lines->durbin_watson, err);
    lw_add_number(fit, "misfit_probability", lines->misfit_p, err);
    lw_add_number(fit, "misfit_factor", lines->misfit_factor, err);
    lw_add_text(fit, "misfit", lines->misfit, err);
    lw_add_text(fit, "left_out", lines->left_out, err);
    if (lines->n_beyond > 0) {
        char text[16 * 30] = "";
        for (size_t b = 0; b < lines->n_beyond && strlen(text) + 30 < sizeof text; b++) {
            const lw_reflection *r = &lines->beyond[b].reflection;
            char hkl[24];
            snprintf(text + strlen(text), 30, "%s%s", b > 0 ? ", " : "", lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl));
        }
        lw_add_text(fit, "beyond", text, err);
    }
    lw_add_number(fit, "iterations", (double)lines->iterations, err);
    lw_add_text(fit, "stopped", lines->stopped, err);
    if (lines->background_scan_scale != 0)
        lw_add_quantity(fit, "background_scan_scale",
                        lw_quantity_of(lines->background_scan_scale, lines->u_background_scan_scale, ""),
                        "factor by which the background scan was taken", err);
    return err->status == LW_OK ? root : NULL;
}
