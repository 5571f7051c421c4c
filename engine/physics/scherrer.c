/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The common volume A(L) of each shape has a closed form, one polynomial of degree 3 up to the longest
 * column. The line of a crystallite is the cosine transform of A, its integral breadth 1/(2 int A), its
 * FWHM a root. */
#include "physics/scherrer.h"

#include <math.h>
#include <stddef.h>

static const double PI = 3.14159265358979323846;

const char *const lw_shape_names[] = {"column", "sphere", "cube", "tetrahedron", "octahedron", NULL};

/* A body of unit volume with its direction: what A(L) needs. */
typedef struct body {
    lw_shape shape;
    double u[4];   /* |direction cosines| (cube), |cosines to the four {111} normals| (octahedron) */
    double extent; /* edge, diameter or distance between opposite faces at unit volume */
    double end;    /* longest column along the direction */
} body;

/* Volume of {|y_i| <= w_i, |y_1 + y_2 + y_3| <= w_4}: the part of the box below a plane y_1 + y_2 + y_3 = t
 * is a sum of cubes over its corners. */
static double below(const double w[4], double t)
{
    double sum = 0;
    for (int corner = 0; corner < 8; corner++) {
        double height = t;
        int sign = 1;
        for (int i = 0; i < 3; i++) {
            int high = corner >> i & 1;
            height += high ? -w[i] : w[i];
            sign = high ? -sign : sign;
        }
        if (height > 0)
            sum += sign * height * height * height;
    }
    return sum / 6;
}

/* No piece of the polynomial ends before the longest column: the pieces would join where the plane passes a
 * corner, w_i + w_j = w_k + w_4 or w_i + w_j + w_k = w_4, but the four normals add to 0, and so one of the u
 * is the sum of the other three, or two make the same sum as the other two. */
static double slabs(const double w[4])
{
    return below(w, w[3]) - below(w, -w[3]);
}

static double common(const body *b, double shift)
{
    if (!(shift < b->end))
        return 0;
    double x = shift / b->extent;
    switch (b->shape) {
    case LW_SHAPE_SPHERE: return 1 - 1.5 * x + 0.5 * x * x * x;
    case LW_SHAPE_CUBE: return (1 - x * b->u[0]) * (1 - x * b->u[1]) * (1 - x * b->u[2]);
    case LW_SHAPE_TETRAHEDRON: {
        double left = 1 - shift / b->end;
        return left * left * left;
    }
    case LW_SHAPE_OCTAHEDRON: {
        static const double whole[4] = {1, 1, 1, 1};
        double w[4];
        for (int i = 0; i < 4; i++)
            w[i] = 1 - x * b->u[i];
        return slabs(w) / slabs(whole);
    }
    case LW_SHAPE_COLUMN: break;
    }
    return NAN;
}

static lw_status lay(lw_shape shape, int h, int k, int l, body *b, lw_error *err)
{
    *b = (body){.shape = shape};
    if (shape == LW_SHAPE_SPHERE) {
        b->extent = b->end = cbrt(6 / PI);
        return LW_OK;
    }
    double length = sqrt((double)h * h + (double)k * k + (double)l * l);
    if (!(length > 0))
        return lw_fail(err, LW_BAD_ARGUMENT, "give the indices of a reflection", "000 has no direction");
    double x = h / length, y = k / length, z = l / length;
    double normal[4] = {x + y + z, x - y - z, -x + y - z, -x - y + z};
    switch (shape) {
    case LW_SHAPE_CUBE:
        b->u[0] = fabs(x);
        b->u[1] = fabs(y);
        b->u[2] = fabs(z);
        b->extent = 1;
        b->end = 1 / fmax(b->u[0], fmax(b->u[1], b->u[2]));
        return LW_OK;
    case LW_SHAPE_TETRAHEDRON: {
        /* The common part is a smaller tetrahedron; its height falls by the sum of the positive cosines.
         * Volume of a tetrahedron of edge e: e^3/(6 sqrt(2)), its height e sqrt(2/3). */
        double sum = 0;
        for (int i = 0; i < 4; i++)
            sum += 0.5 * fabs(normal[i]) / sqrt(3.0);
        b->extent = cbrt(6 * sqrt(2.0)) * sqrt(2.0 / 3.0);
        b->end = b->extent / sum;
        return LW_OK;
    }
    case LW_SHAPE_OCTAHEDRON:
        for (int i = 0; i < 4; i++)
            b->u[i] = fabs(normal[i]) / sqrt(3.0);
        /* Volume of an octahedron of face distance 2r: 4 sqrt(3) r^3. */
        b->extent = 2 * cbrt(1 / (4 * sqrt(3.0)));
        b->end = b->extent / fmax(fmax(b->u[0], b->u[1]), fmax(b->u[2], b->u[3]));
        return LW_OK;
    default: break;
    }
    return lw_fail(err, LW_NOT_SUPPORTED, "name a shape: sphere, cube, tetrahedron or octahedron",
                   "a column length alone says nothing of the crystallite's shape");
}

/* int over all L of A(L) cos(2 pi s L) = height of the line at s. Gauss-Legendre with 16 nodes: exact
 * for the polynomial, and to rounding for the few radians that the cosine turns. */
static double transform(const body *b, double s)
{
    static const double node[8] = {0.0950125098376374402, 0.2816035507792589132, 0.4580167776572273863,
                                   0.6178762444026437484, 0.7554044083550030339, 0.8656312023878317439,
                                   0.9445750230732325761, 0.9894009349916499326};
    static const double weight[8] = {0.1894506104550684963, 0.1826034150449235889, 0.1691565193950025382,
                                     0.1495959888165767321, 0.1246289712555338721, 0.0951585116824927848,
                                     0.0622535239386478929, 0.0271524594117540949};
    double sum = 0, half = 0.5 * b->end;
    for (int i = 0; i < 8; i++) {
        double left = half * (1 - node[i]), right = half * (1 + node[i]);
        sum += half * weight[i] *
               (common(b, left) * cos(2 * PI * s * left) + common(b, right) * cos(2 * PI * s * right));
    }
    return 2 * sum;
}

lw_status lw_scherrer_constant(lw_shape shape, bool integral_breadth, int h, int k, int l, double *K,
                               lw_error *err)
{
    if (shape == LW_SHAPE_COLUMN) {
        if (!integral_breadth)
            return lw_fail(err, LW_NOT_SUPPORTED, "use the integral breadth, or name a shape",
                           "the FWHM does not give a column length without the line's shape");
        *K = 1;
        return LW_OK;
    }
    body b;
    lw_status status = lay(shape, h, k, l, &b, err);
    if (status != LW_OK)
        return status;
    double top = transform(&b, 0);
    if (integral_breadth) {
        *K = 1 / top;
        return LW_OK;
    }
    /* FWHM/integral breadth of any of these lines lies between 0.6 and 1. */
    double low = 0.2 / top, high = 0.7 / top;
    if (!(transform(&b, low) > 0.5 * top && transform(&b, high) < 0.5 * top))
        return lw_fail(err, LW_NO_CONVERGENCE, NULL, "no half-height found for the line %d %d %d of a %s", h,
                       k, l, lw_shape_names[shape]);
    for (int i = 0; i < 60; i++) {
        double middle = 0.5 * (low + high);
        *(transform(&b, middle) > 0.5 * top ? &low : &high) = middle;
    }
    *K = low + high;
    return LW_OK;
}

lw_status lw_shape_columns(lw_shape shape, int h, int k, int l, double *volume_weighted,
                           double *area_weighted, lw_error *err)
{
    body b;
    lw_status status = lay(shape, h, k, l, &b, err);
    if (status != LW_OK)
        return status;
    *volume_weighted = transform(&b, 0);
    /* -A'(0) in closed form. */
    double fall = 0;
    switch (shape) {
    case LW_SHAPE_SPHERE: fall = 1.5 / b.extent; break;
    case LW_SHAPE_CUBE: fall = b.u[0] + b.u[1] + b.u[2]; break;
    case LW_SHAPE_TETRAHEDRON: fall = 3 / b.end; break;
    default:
        /* Projected area: each pair of the four pairs of faces (a share of 3/8 of the volume each way). */
        fall = 0.75 * (b.u[0] + b.u[1] + b.u[2] + b.u[3]) / b.extent;
        break;
    }
    *area_weighted = 1 / fall;
    return LW_OK;
}

double lw_shape_common_volume(lw_shape shape, int h, int k, int l, double shift)
{
    body b;
    lw_error ignored = LW_ERROR_NONE;
    return lay(shape, h, k, l, &b, &ignored) == LW_OK ? common(&b, fabs(shift)) : NAN;
}
