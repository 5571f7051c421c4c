/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a fit by Voigts makes of a line that is none. */
#ifndef LW_SAMPLE_VOIGT_IMAGE_H
#define LW_SAMPLE_VOIGT_IMAGE_H

#include <stddef.h>

/* Integral breadth of the Voigt that is fitted to a line, over the line's own integral breadth.
 * Given:  coefficient[n]  A(L) of the line at L = 0, step, 2 step ..., dead at the end (n odd, at least 3)
 *         step            nm
 *         background      under the line, over its height: weights are 1/(line + background), as those of counts
 * Notes:  the fit has an area, two widths and a level of its own, over 4 breadths each side: a sharp top or a tail that no
 *         Voigt has is then made good by the others. Spheres with a spread of diameters come out about half a per cent too
 *         narrow, strain that falls with length makes lines several per cent too broad; a Voigt gives 1.
 * Returned: 1 where the fit does not settle. */
double lw_voigt_image(size_t n, const double *coefficient, double step, double background);

#endif
