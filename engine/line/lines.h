/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The lines of a scan, fitted all at once, with their covariance. */
#ifndef LW_LINE_LINES_H
#define LW_LINE_LINES_H

#include "base/options.h"
#include "base/tree.h"
#include "line/width_figure.h"
#include "physics/crystal.h"
#include "scan/scan.h"

#define LW_NO_PARAMETER ((size_t)-1)
#define LW_BACKGROUND_MOST 44 /* columns: 40 terms by the option, what a hyperbola and a background scan add */

typedef struct lw_line {
    lw_reflection reflection;
    bool supported;             /* the data carry this line: its area exceeds 3 u */
    const char *remark;         /* why not, or what to mind (overlap); "" if nothing */
    double overlap;             /* share of the line's area under its neighbours' (0 = alone, 1 = buried) */
    lw_quantity two_theta;      /* deg, at the radiation's reference wavelength, aberrations included */
    lw_quantity area;           /* intensity x deg, all emission components */
    lw_quantity height;         /* intensity, of the line at one wavelength */
    lw_quantity fwhm, breadth;  /* deg, at one wavelength: instrument x sample, spectrum not included */
    lw_quantity shape_ratio;    /* phi = FWHM / breadth */
    lw_quantity gauss_fwhm, lorentz_fwhm; /* deg: the line's own parts: of the sample when an instrument is folded
                                             in, else of the whole line */
    double nominal_deg;         /* where the width functions were evaluated for it */
    double own_variance_deg2, own_lorentz_deg; /* own Gaussian FWHM^2 and Lorentzian FWHM (Voigt shapes) */
    double instrument_fwhm_deg, instrument_breadth_deg; /* at this angle; 0 when no instrument was given */
    double u_instrument_breadth_deg;
    double residual_misfit;     /* chi-square per point within 1.5 FWHM of the line */
    bool shared_width;          /* its width comes from the function shared by lines, not from itself alone */
    bool held_position;         /* its place was held where it is expected */
    size_t at_position, at_area, at_gauss, at_lorentz; /* rows of the covariance, or LW_NO_PARAMETER;
                                   at_gauss is the SQUARE of the own Gaussian FWHM (deg^2) */
} lw_line;

/* A line beyond the ends of the scan whose tail was fitted with it: place and width from what the lines inside show, area
 * tied to theirs. Not a result. */
typedef struct lw_line_beyond {
    lw_reflection reflection;
    double two_theta_deg, area;
    double own_variance_deg2, own_lorentz_deg;
    double area_expected, area_weight; /* to what the area was tied, and 1/u^2 of that */
} lw_line_beyond;

typedef struct lw_lines {
    lw_arena arena;
    const lw_scan *scan;             /* borrowed: must outlive the lines */
    lw_scan *cropped;                /* owned, and then what `scan` points to, when a range was asked for */
    const lw_material *material;     /* copy, NULL if the reflections came without one */
    lw_radiation radiation;
    bool has_instrument;
    lw_width_function instrument;    /* folded in, when there is one */
    lw_width_function smooth;        /* own width function shared by all lines (widths = "smooth"); all 0 otherwise */
    const char *shape;               /* "voigt" ... */
    size_t n;
    lw_line *line;                   /* ascending in 2theta */
    size_t n_beyond;                 /* lines beyond the scan; their parameters follow those of the lines */
    lw_line_beyond *beyond;
    size_t n_parameters;
    const char **parameter_name;     /* "111 position", "background 0", "U" ... */
    double *parameter;
    double *covariance;              /* n_parameters^2: counting, instrument's covariance and misfit included */
    double *from_instrument;         /* n_parameters^2: the part that comes from the instrument alone, or NULL */
    double *to_instrument;           /* [n_parameters][LW_WIDTH_PARAMETERS]: what the fit's parameters do when the
                                        instrument's change, or NULL */
    /* statistics of the fit */
    double chi2, rwp, rexp, goodness, durbin_watson; /* goodness = sqrt(chi2/(n - parameters)); rwp, rexp as fractions */
    double misfit_factor;            /* by which all u were multiplied because the shape misses the data (>= 1) */
    double misfit_p;                 /* probability of a chi2 this large if the model were right */
    const char *misfit;              /* what was noticed, in words; "" if nothing */
    const char *left_out;            /* which part of the scan was not used because its lines overlap; "" if none */
    size_t n_points, iterations;
    const char *stopped;             /* why the iteration stopped */
    size_t at_background, n_background; /* rows of the Chebyshev terms, LW_BACKGROUND_MOST at most */
    /* how the model was set up, for lw_line_curve */
    bool on_s_axis, with_factor;
    double constant_polarisation, cos2_polarisation;
    /* curves, at the scan's points */
    double *fitted, *background, *variance;
    double background_scan_scale, u_background_scan_scale; /* 0 without a background scan */
    const struct lw_fit_options *options; /* as they were given, without range and expected_shift; its background
                                             scan is borrowed */
} lw_lines;

typedef struct lw_fit_options {
    int shape;             /* "voigt", "gaussian", "lorentzian", "pseudo_voigt", "pearson7", "split_pseudo_voigt", "split_pearson7" */
    int widths;            /* "auto" (free; shared where lines overlap or are weak), "free", "smooth" */
    int axial;             /* lw_axial_kind, refined for all lines together (without an instrument only) */
    int axis;              /* "s" (profile symmetric in sin theta), "two_theta" */
    int intensity_factor;  /* "lorentz_polarisation", "none": varies across a line or not */
    double monochromator_deg; /* 2theta of a monochromator for the polarisation; 0 = none */
    double polarised;      /* share of polarisation in the plane of diffraction for a synchrotron; 0.5 = unpolarised */
    long background_terms; /* Chebyshev terms; 0 = chosen by the scan */
    bool background_hyperbola; /* adds a 1/2theta term */
    double range[2];       /* deg; both 0 = all */
    double search_deg;     /* how far from the expected place a line may be, deg */
    double window;         /* half-width of the point-by-point window in FWHM; further out a line is interpolated */
    int weights;           /* "model" (iterated), "observed" */
    bool misfit;           /* widen u when the shape misses the data */
    lw_option_list fixed;  /* names of parameters held: "U", "background", ... */
    const lw_width_function *instrument; /* fold this in; NULL = none. From the option `instrument` = calibration */
    const double *expected_shift;        /* [n reflections] deg added to the expected places, or NULL */
    const lw_scan *background_scan;      /* its intensity times a fitted factor belongs to the background, or NULL */
} lw_fit_options;
extern const lw_option lw_fit_option_table[];
lw_fit_options lw_fit_defaults(void);

/* Fits all lines of a scan in one least-squares problem.
 * Given:  scan (with radiation), reflections[n] ascending (those outside the scan are left out), material or
 *         NULL (copied), options
 * Returned: *lines; free with lw_lines_free()
 * Errors: LW_NO_CONVERGENCE with the reason; LW_NOT_SUPPORTED if no line of the list is in the data ("wrong
 *         standard or radiation?"); LW_OUT_OF_RANGE if a line lies outside the instrument's valid range. */
lw_status lw_fit_lines(lw_engine *engine, const lw_scan *scan, const lw_reflection *reflections, size_t n,
                       const lw_material *material, const lw_fit_options *options, lw_lines **lines, lw_error *err);
/* The same fit of another scan of the same angles: same options, lines, background terms and held parameters, from
 * where the first one ended. For repeated noise and for other draws of the instrument.
 * Given:  from        lines as lw_fit_lines() returned them, of shape "voigt" with an instrument
 *         scan        with the points of from->scan; borrowed by the new lines
 *         instrument  to fold in, NULL = the same; copied
 *         background  scan of the holder where the first fit had one, NULL = the same
 * Returned: *lines; free with lw_lines_free()
 * Errors: LW_BAD_ARGUMENT for other points or another shape; those of lw_fit_lines(). */
lw_status lw_refit_lines(lw_engine *engine, const lw_lines *from, const lw_scan *scan,
                         const lw_width_function *instrument, const lw_scan *background, lw_lines **lines,
                         lw_error *err);
void lw_lines_free(lw_lines *lines);

/* Row of a parameter in lines->parameter and the covariance by its name ("U", "background 0" ...); LW_NO_PARAMETER
 * where the fit's last stage did not have it. */
size_t lw_lines_row(const lw_lines *lines, const char *name);

/* The fit as a result tree: lines (list), statistics, width function. */
lw_node *lw_lines_tree(const lw_lines *lines, lw_arena *arena, lw_error *err);

#endif
