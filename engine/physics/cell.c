/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Geometry of the cell. With G the metric of the cell (G_ij = a_i . a_j), s^2 = h G^-1 h. */
#include "physics/crystal.h"

#include <math.h>

static const double DEGREE = 3.14159265358979323846 / 180.0;

/* G, with right angles exactly right: cos(90 deg) would leave 1e-17 of coupling. */
static double cosine(double degrees)
{
    return degrees == 90.0 ? 0.0 : degrees == 120.0 ? -0.5 : cos(degrees * DEGREE);
}

static void metric(const lw_cell *cell, double g[3][3])
{
    const double edge[3] = {cell->a, cell->b, cell->c};
    const double angle[3] = {cell->alpha, cell->beta, cell->gamma};
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++)
            g[i][j] = edge[i] * edge[j] * (i == j ? 1.0 : cosine(angle[3 - i - j]));
}

/* Returns det G. */
static double inverse_metric(const lw_cell *cell, double r[3][3])
{
    double g[3][3];
    metric(cell, g);
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++) {
            int i1 = (i + 1) % 3, i2 = (i + 2) % 3, j1 = (j + 1) % 3, j2 = (j + 2) % 3;
            r[i][j] = g[i1][j1] * g[i2][j2] - g[i1][j2] * g[i2][j1];
        }
    double det = g[0][0] * r[0][0] + g[0][1] * r[0][1] + g[0][2] * r[0][2];
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++)
            r[i][j] /= det;
    return det;
}

/* x = G^-1 h, and returns s^2 = h . x */
static double reciprocal_form(const lw_cell *cell, int h, int k, int l, double x[3])
{
    double r[3][3];
    inverse_metric(cell, r);
    for (int i = 0; i < 3; i++)
        x[i] = r[i][0] * h + r[i][1] * k + r[i][2] * l;
    return h * x[0] + k * x[1] + l * x[2];
}

double lw_cell_s(const lw_cell *cell, int h, int k, int l)
{
    double x[3];
    return sqrt(reciprocal_form(cell, h, k, l, x));
}

/* d(h G^-1 h) = -x dG x, and ds = d(s^2)/(2s). */
void lw_cell_s_slopes(const lw_cell *cell, int h, int k, int l, double d[6])
{
    double x[3];
    double s = sqrt(reciprocal_form(cell, h, k, l, x));
    double a = cell->a, b = cell->b, c = cell->c;
    double ca = cosine(cell->alpha), cb = cosine(cell->beta), cg = cosine(cell->gamma);
    d[0] = 2 * x[0] * (a * x[0] + b * cg * x[1] + c * cb * x[2]);
    d[1] = 2 * x[1] * (b * x[1] + a * cg * x[0] + c * ca * x[2]);
    d[2] = 2 * x[2] * (c * x[2] + a * cb * x[0] + b * ca * x[1]);
    d[3] = -2 * x[1] * x[2] * b * c * sin(cell->alpha * DEGREE) * DEGREE;
    d[4] = -2 * x[0] * x[2] * a * c * sin(cell->beta * DEGREE) * DEGREE;
    d[5] = -2 * x[0] * x[1] * a * b * sin(cell->gamma * DEGREE) * DEGREE;
    for (int i = 0; i < 6; i++)
        d[i] = s > 0 ? -d[i] / (2 * s) : 0.0;
}

double lw_cell_volume(const lw_cell *cell)
{
    double r[3][3];
    double det = inverse_metric(cell, r);
    return det > 0 ? sqrt(det) : 0.0;
}
