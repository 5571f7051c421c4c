/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Profiles made by hand, for checks of what methods do with breadths and positions that are known exactly. */
#ifndef LW_TESTS_BY_HAND_H
#define LW_TESTS_BY_HAND_H

#include "sample/method.h"

#include <math.h>
#include <string.h>

#define HAND_MOST 32
#define HAND_DEGREE (3.14159265358979323846 / 180)

typedef struct by_hand {
    lw_material material;
    lw_calibration calibration;
    lw_lines lines;
    lw_profiles profiles;
    lw_line line[HAND_MOST];
    lw_profile profile[HAND_MOST];
    double covariance[9 * HAND_MOST * HAND_MOST];
    size_t n;
    double wavelength;
} by_hand;

static inline void hand_begin(by_hand *h, lw_crystal_system system, lw_cell cell, double wavelength_nm)
{
    memset(h, 0, sizeof *h);
    h->wavelength = wavelength_nm;
    h->material.system = system;
    h->material.cell = cell;
    lw_radiation radiation = {
        .n = 1, .component = {{.wavelength_nm = wavelength_nm, .weight = 1}}, .is_plain = true};
    h->calibration.radiation = h->lines.radiation = radiation;
    h->calibration.aberrations.radius_mm = 200;
    strcpy(h->calibration.geometry, "capillary");
    strcpy(h->calibration.verdict, "pass");
    h->lines.material = &h->material;
    h->lines.line = h->line;
    h->lines.misfit = "";
    h->lines.misfit_factor = 1;
    h->profiles.lines = &h->lines;
    h->profiles.calibration = &h->calibration;
    h->profiles.method = "convolution";
    h->profiles.source = "";
    h->profiles.profile = h->profile;
}

/* A line of breadth beta (nm^-1) with parts; every u is the same. The position has no uncertainty. */
static inline lw_profile *hand_line(by_hand *h, int a, int b, int c, double s, double beta, double gauss,
                                    double lorentz, double u)
{
    size_t i = h->n++;
    double theta = asin(0.5 * h->wavelength * s) / HAND_DEGREE;
    double per = h->wavelength / cos(theta * HAND_DEGREE) / HAND_DEGREE; /* deg 2theta a nm^-1 */
    h->line[i] = (lw_line){.reflection = {.h = a, .k = b, .l = c, .d_nm = 1 / s, .two_theta_deg = 2 * theta},
                           .supported = true,
                           .remark = "",
                           .two_theta = lw_quantity_of(2 * theta, 0, "deg"),
                           .fwhm = lw_quantity_of(beta * per, u * per, "deg"),
                           .breadth = lw_quantity_of(beta * per, u * per, "deg"),
                           .at_position = LW_NO_PARAMETER,
                           .at_area = LW_NO_PARAMETER,
                           .at_gauss = LW_NO_PARAMETER,
                           .at_lorentz = LW_NO_PARAMETER};
    h->profile[i] = (lw_profile){.line = &h->line[i],
                                 .s_per_nm = s,
                                 .theta_deg = theta,
                                 .resolved = beta > 2 * u,
                                 .breadth_s = lw_quantity_of(beta, u, "nm^-1"),
                                 .breadth_deg = lw_quantity_of(beta * per, u * per, "deg"),
                                 .gauss_s = lw_quantity_of(gauss, u, "nm^-1"),
                                 .lorentz_s = lw_quantity_of(lorentz, u, "nm^-1"),
                                 .at_gauss = 3 * i,
                                 .at_lorentz = 3 * i + 1,
                                 .at_breadth = 3 * i + 2};
    return &h->profile[i];
}

/* Ends the list: covariance diagonal from the u given, plus `common`^2 between all breadths. */
static inline const lw_profiles *hand_end(by_hand *h, double common)
{
    size_t m = 3 * h->n;
    h->lines.n = h->profiles.n = h->n;
    h->profiles.n_covariance = m;
    h->profiles.covariance = h->covariance;
    memset(h->covariance, 0, sizeof h->covariance);
    for (size_t i = 0; i < h->n; i++) {
        const lw_profile *p = &h->profile[i];
        h->covariance[p->at_gauss * (m + 1)] = p->gauss_s.u * p->gauss_s.u;
        h->covariance[p->at_lorentz * (m + 1)] = p->lorentz_s.u * p->lorentz_s.u;
        for (size_t j = 0; j < h->n; j++)
            h->covariance[p->at_breadth * m + h->profile[j].at_breadth] =
                common * common + (i == j ? p->breadth_s.u * p->breadth_s.u : 0);
    }
    return &h->profiles;
}

/* The quantity of a path of names in a tree, NaN if it is not there. */
static inline lw_quantity hand_quantity(const lw_node *node, const char *a, const char *b, const char *c)
{
    const char *path[3] = {a, b, c};
    for (int i = 0; i < 3 && path[i] != NULL && node != NULL; i++)
        node = lw_node_get(node, path[i]);
    if (node == NULL || node->kind != LW_NODE_QUANTITY)
        return lw_quantity_of(NAN, NAN, "");
    return node->quantity;
}

static inline bool hand_list_has(const lw_node *list, const char *part)
{
    for (const lw_node *text = list != NULL ? list->first : NULL; text != NULL; text = text->next)
        if (text->text != NULL && strstr(text->text, part) != NULL)
            return true;
    return false;
}

#endif
