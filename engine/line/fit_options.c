/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/lines.h"
#include "line/shape.h"

static const char *const widths_names[] = {"auto", "free", "smooth", NULL};
static const char *const axis_names[] = {"s", "two_theta", NULL};
static const char *const factor_names[] = {"lorentz_polarisation", "none", NULL};
static const char *const weights_names[] = {"model", "observed", NULL};

#define AT(field) offsetof(lw_fit_options, field)

const lw_option lw_fit_option_table[] = {
    {"shape", LW_OPTION_CHOICE, "", "voigt", 0, 0, lw_line_shape_names, AT(shape), "shape of a line at one wavelength"},
    {"widths", LW_OPTION_CHOICE, "", "auto", 0, 0, widths_names, AT(widths),
     "free: each line its own; smooth: functions of angle shared by all; auto: free, shared where lines overlap or are weak"},
    {"axial", LW_OPTION_CHOICE, "", "none", 0, 0, lw_axial_names, AT(axial),
     "axial divergence refined for all lines together: soller (both beams), finger_cox_jephcoat (diffracted beam only)"},
    {"axis", LW_OPTION_CHOICE, "", "s", 0, 0, axis_names, AT(axis),
     "axis on which a line is symmetric: s = 2 sin(theta)/lambda, or 2theta"},
    {"intensity_factor", LW_OPTION_CHOICE, "", "lorentz_polarisation", 0, 0, factor_names, AT(intensity_factor),
     "how the intensity varies across a line"},
    {"monochromator", LW_OPTION_NUMBER, "deg", "0", 0, 179, NULL, AT(monochromator_deg),
     "2theta of a monochromator crystal, 0 = none"},
    {"polarised", LW_OPTION_NUMBER, "", "0.5", 0, 1, NULL, AT(polarised),
     "share of the beam polarised in the plane of diffraction; 0.5 = tube, 0 to 0.1 = storage ring, vertical scan plane"},
    {"background_terms", LW_OPTION_COUNT, "", "0", 0, 40, NULL, AT(background_terms),
     "Chebyshev terms of the background, 0 = chosen from the scan by the Bayesian information criterion"},
    {"background_hyperbola", LW_OPTION_FLAG, "", "false", 0, 0, NULL, AT(background_hyperbola),
     "add a 1/2theta term to the background"},
    {"background", LW_OPTION_NOUN, "scan", "", 0, 0, NULL, AT(background_scan),
     "scan of the empty holder; a fitted multiple of it belongs to the background"},
    {"range", LW_OPTION_RANGE, "deg", "", 0, 180, NULL, AT(range), "keep only these 2theta"},
    {"search", LW_OPTION_NUMBER, "deg", "0.3", 0.001, 5, NULL, AT(search_deg),
     "how far from its expected place a line may be"},
    {"window", LW_OPTION_NUMBER, "FWHM", "20", 4, 1000, NULL, AT(window),
     "half-width within which a line is evaluated point by point; its tails are interpolated"},
    {"weights", LW_OPTION_CHOICE, "", "model", 0, 0, weights_names, AT(weights),
     "variance from the model, iterated; or from the observed counts (biased at low counts)"},
    {"misfit", LW_OPTION_FLAG, "", "true", 0, 0, NULL, AT(misfit),
     "widen all uncertainties when the shape misses the data"},
    {"fixed", LW_OPTION_LIST, "", "", 0, 0, NULL, AT(fixed),
     "parameters held at their start: U, V, W, P, X, Y, Z, axial 1, axial 2, positions"},
    {"instrument", LW_OPTION_NOUN, "calibration", "", 0, 0, NULL, AT(instrument),
     "calibration whose profile is folded into every line"},
    LW_OPTIONS_END};

lw_fit_options lw_fit_defaults(void)
{
    return (lw_fit_options){.polarised = 0.5, .search_deg = 0.3, .window = 20, .misfit = true};
}
