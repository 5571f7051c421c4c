/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/cell_parameters.h"

#include <math.h>

enum { A = 1, B = 2, C = 4, ALPHA = 8, BETA = 16, GAMMA = 32 };

static void add(lw_cell_free *free, const char *name, int what)
{
    free->name[free->n] = name;
    for (int i = 0; i < 6; i++)
        free->moves[free->n][i] = (what >> i) & 1;
    free->n++;
}

static bool is(double angle, double value)
{
    return fabs(angle - value) < 1e-6;
}

lw_cell_free lw_cell_free_of(const lw_material *material)
{
    const lw_cell *cell = &material->cell;
    lw_cell_free free = {0};
    switch (material->system) {
    case LW_CUBIC: add(&free, "a", A | B | C); break;
    case LW_TRIGONAL:
        if (!is(cell->gamma, 120)) {
            add(&free, "a", A | B | C);
            add(&free, "alpha", ALPHA | BETA | GAMMA);
            break;
        }
        add(&free, "a", A | B);
        add(&free, "c", C);
        break;
    case LW_TETRAGONAL:
    case LW_HEXAGONAL:
        add(&free, "a", A | B);
        add(&free, "c", C);
        break;
    case LW_ORTHORHOMBIC:
    case LW_MONOCLINIC:
    case LW_TRICLINIC:
        add(&free, "a", A);
        add(&free, "b", B);
        add(&free, "c", C);
        if (material->system == LW_TRICLINIC)
            add(&free, "alpha", ALPHA);
        if (material->system == LW_TRICLINIC)
            add(&free, "beta", BETA);
        if (material->system == LW_TRICLINIC)
            add(&free, "gamma", GAMMA);
        if (material->system == LW_MONOCLINIC) {
            if (!is(cell->alpha, 90))
                add(&free, "alpha", ALPHA);
            else if (!is(cell->gamma, 90))
                add(&free, "gamma", GAMMA);
            else
                add(&free, "beta", BETA);
        }
        break;
    }
    return free;
}

static double *field(lw_cell *cell, int at)
{
    double *fields[6] = {&cell->a, &cell->b, &cell->c, &cell->alpha, &cell->beta, &cell->gamma};
    return fields[at];
}

void lw_cell_free_read(const lw_cell_free *free, const lw_cell *cell, double *p)
{
    lw_cell copy = *cell;
    for (size_t i = 0; i < free->n; i++)
        for (int j = 5; j >= 0; j--)
            if (free->moves[i][j])
                p[i] = *field(&copy, j);
}

void lw_cell_free_set(const lw_cell_free *free, const double *p, lw_cell *cell)
{
    for (size_t i = 0; i < free->n; i++)
        for (int j = 0; j < 6; j++)
            if (free->moves[i][j])
                *field(cell, j) = p[i];
}
