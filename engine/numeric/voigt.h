/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Voigt function and its derivatives, the kernel on which every fit stands.
 * A line is a sum of nodes (emission component x axial quadrature point), each a Voigt of unit area
 * displaced by `offset` and widened by its own Lorentzian width. One Faddeeva evaluation a node and
 * point gives the value and all derivatives. */
#ifndef LW_NUMERIC_VOIGT_H
#define LW_NUMERIC_VOIGT_H

#include "base/engine.h"

#include <stddef.h>

#define LW_VOIGT_SHAPES 2 /* shared shape parameters that may move the nodes (axial lengths) */

/* One node of a line. x is measured from the line's position, any unit of length (degrees here). */
typedef struct lw_voigt_node {
    double offset;                    /* of the node's centre from the line's position, unit of x */
    double weight;                    /* share of the area; those of a line sum to 1 */
    double lorentz;                   /* Lorentzian FWHM that the node adds to the line's, unit of x */
    double offset_slope;              /* d(offset)/d(position): the doublet opens with angle */
    double lorentz_slope;             /* d(lorentz)/d(position) */
    double d_offset[LW_VOIGT_SHAPES]; /* d(offset)/d(shape parameter) */
    double d_weight[LW_VOIGT_SHAPES]; /* d(weight)/d(shape parameter) */
} lw_voigt_node;

/* Where the sums go, each array[n], overwritten; d_shape entries may be NULL when not wanted. With
 * values_only only `value` is written and the others may be NULL. All per unit area. */
typedef struct lw_voigt_sums {
    double *value;      /* 1/unit of x */
    double *d_position; /* derivative to the line's position */
    double *d_variance; /* derivative to the square of the Gaussian FWHM */
    double *d_lorentz;  /* derivative to the Lorentzian FWHM */
    double *d_shape[LW_VOIGT_SHAPES];
} lw_voigt_sums;

/* Sums the nodes of one line at n points.
 * Given:  x[n]            offsets from the line's position, ascending
 *         node[n_nodes]
 *         gauss_variance  square of the Gaussian FWHM, >= 0 (0 = pure Lorentzian: then every node needs
 *                         a Lorentzian width > 0)
 *         lorentz         Lorentzian FWHM of the line, >= 0, added to each node's own
 *         values_only     leave the derivatives alone
 * Accuracy: value within 1e-12 of the peak height against a 120-digit reference, derivatives within 1e-10 of
 * their own largest magnitude; measured maxima (tests/kernel/voigt_test.c) 6e-14 and 3e-11 on every rung. The
 * rungs agree within these, not bit by bit: the wider ones fuse products and sums. No allocation.
 * Source: Voigt by the Faddeeva function w(z): Armstrong (1967) JQSRT 7, 61; w in the core by Weideman
 * (1994) SIAM J. Numer. Anal. 31, 1497; outside by the Laplace continued fraction (Gautschi 1970). */
typedef void lw_voigt_sum_fn(size_t n, const double *x, const lw_voigt_node *node, size_t n_nodes,
                             double gauss_variance, double lorentz, int values_only,
                             const lw_voigt_sums *out);

/* The kernels of one rung of the instruction-set ladder. */
typedef struct lw_voigt_kernel {
    const char *rung; /* "plain", "avx2", "avx512" */
    lw_voigt_sum_fn *sum;
} lw_voigt_kernel;

/* The kernel for the rung asked for, or the best rung below it that this processor has. */
const lw_voigt_kernel *lw_voigt_kernel_for(lw_cpu cpu);

/* Single values, for places where speed does not matter.
 * w(z) = exp(-z^2) erfc(-iz) for z = x + iy, y >= 0, accurate to 1e-13 relative (|w|). */
void lw_faddeeva(double x, double y, double *re, double *im);
/* Voigt of unit area at x; gauss_fwhm, lorentz_fwhm >= 0 and not both 0, unit of x. */
double lw_voigt(double x, double gauss_fwhm, double lorentz_fwhm);
/* The same with its slopes, the scalar twin of the kernel. Takes the square of the Gaussian FWHM (0 = pure
 * Lorentzian). d[0] value, d[1] d/dx, d[2] d/d(lorentz_fwhm), d[3] d/d(gauss_variance). */
void lw_voigt_derivatives(double x, double gauss_variance, double lorentz_fwhm, double d[4]);
/* FWHM of a Voigt by root finding, to 1e-12 relative. */
double lw_voigt_fwhm(double gauss_fwhm, double lorentz_fwhm);
/* Integral breadth (area/height) of a Voigt: beta_G exp(-k^2)/erfc(k), k = beta_L/(sqrt(pi) beta_G)
 * (Langford 1978 J. Appl. Cryst. 11, 10), also for either width 0. */
double lw_voigt_breadth(double gauss_fwhm, double lorentz_fwhm);
/* d(FWHM)/d(gauss), d/d(lorentz) and the same for the breadth: d[0..1]. */
void lw_voigt_fwhm_slopes(double gauss_fwhm, double lorentz_fwhm, double d[2]);
void lw_voigt_breadth_slopes(double gauss_fwhm, double lorentz_fwhm, double d[2]);

#endif
