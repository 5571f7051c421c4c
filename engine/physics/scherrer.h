/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Scherrer constants, and what they rest on: the common volume of a crystallite and its shifted copy. */
#ifndef LW_PHYSICS_SCHERRER_H
#define LW_PHYSICS_SCHERRER_H

#include "base/error.h"

#include <stdbool.h>

/* Shape of the crystallites, the same for all, one size. Faces: cube {100}, tetrahedron and octahedron
 * {111} of a cubic lattice. COLUMN is no body: the size is the volume-weighted mean column length. */
typedef enum lw_shape {
    LW_SHAPE_COLUMN,
    LW_SHAPE_SPHERE,
    LW_SHAPE_CUBE,
    LW_SHAPE_TETRAHEDRON,
    LW_SHAPE_OCTAHEDRON
} lw_shape;

/* The names of the shapes, in the order of the enum, ended by NULL (for option tables). */
extern const char *const lw_shape_names[];

/* The constant K in  size = K lambda/(breadth cos(theta)), breadth in radians 2theta, where size is the
 * cube root of the crystallite's volume (for COLUMN: the volume-weighted mean column length along hkl).
 * Given:  shape            of the crystallites
 *         integral_breadth whether the breadth is area over height, or else the FWHM
 *         h, k, l          direction on cubic axes; any but 000 (unused for sphere and column)
 * Returned: *K, accurate to 1e-10 or better; computed from the common volume, not looked up.
 * Errors: LW_BAD_ARGUMENT for 000; LW_NOT_SUPPORTED for COLUMN with the FWHM, which depends on the line's
 *         shape.
 * Source: Langford & Wilson (1978) J. Appl. Cryst. 11, 102. */
lw_status lw_scherrer_constant(lw_shape shape, bool integral_breadth, int h, int k, int l, double *K,
                               lw_error *err);

/* Mean column lengths along hkl of a crystallite whose volume is 1: volume-weighted (1/K of the integral
 * breadth) and area-weighted. Multiply by the size. COLUMN gives LW_NOT_SUPPORTED. */
lw_status lw_shape_columns(lw_shape shape, int h, int k, int l, double *volume_weighted,
                           double *area_weighted, lw_error *err);

/* Share of the crystallite (volume 1) that lies in a copy of it shifted by `shift` along hkl: the size
 * Fourier coefficient A(L) at L = shift x size. 1 at 0, 0 beyond the longest column. NaN for COLUMN or
 * for 000. */
double lw_shape_common_volume(lw_shape shape, int h, int k, int l, double shift);

#endif
