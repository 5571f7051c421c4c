/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Settling a material: space group, and a cell that fits it. */
#include "physics/crystal.h"
#include "physics/space_group.h"

#include <math.h>

static const double DEGREE = 3.14159265358979323846 / 180.0;

/* What a cell of each system must be, for messages. */
static const char *const DEMAND[] = {
    "a triclinic cell needs a, b, c, alpha, beta and gamma",
    "a monoclinic cell needs a, b, c and the angle at its unique axis; its other angles are 90",
    "an orthorhombic cell needs a, b and c; its angles are 90",
    "a tetragonal cell needs a = b and c; its angles are 90",
    "a trigonal cell needs a = b, c, gamma = 120; in setting R a = b = c, alpha = beta = gamma",
    "a hexagonal cell needs a = b, c and gamma = 120",
    "a cubic cell needs a = b = c; its angles are 90"};

static void fill(double *value, double with)
{
    if (*value == 0)
        *value = with;
}

/* Fills zeros where the system fixes the value. */
static void fill_cell(lw_cell *cell, lw_crystal_system system, char unique_axis, bool rhombohedral)
{
    bool a_is_b =
        system == LW_TETRAGONAL || system == LW_TRIGONAL || system == LW_HEXAGONAL || system == LW_CUBIC;
    bool a_is_c = system == LW_CUBIC || rhombohedral;
    if (a_is_b) {
        fill(&cell->b, cell->a);
        fill(&cell->u_b, cell->u_a);
    }
    if (a_is_c) {
        fill(&cell->c, cell->a);
        fill(&cell->u_c, cell->u_a);
    }
    if (system == LW_TRICLINIC)
        return;
    if (rhombohedral) {
        fill(&cell->beta, cell->alpha);
        fill(&cell->gamma, cell->alpha);
        return;
    }
    if (unique_axis != 'a')
        fill(&cell->alpha, 90);
    if (unique_axis != 'b')
        fill(&cell->beta, 90);
    if (unique_axis != 'c')
        fill(&cell->gamma, system == LW_TRIGONAL || system == LW_HEXAGONAL ? 120 : 90);
}

static lw_status check_cell(const lw_material *material, const lw_operations *operations, lw_error *err)
{
    const lw_cell *cell = &material->cell;
    const double edge[3] = {cell->a, cell->b, cell->c};
    const double angle[3] = {cell->alpha, cell->beta, cell->gamma};
    const double spread[3] = {cell->u_a, cell->u_b, cell->u_c};
    const char *const edge_name[3] = {"a", "b", "c"}, *const angle_name[3] = {"alpha", "beta", "gamma"};
    const char *demand = DEMAND[material->system];
    for (int i = 0; i < 3; i++) {
        if (edge[i] == 0 || angle[i] == 0)
            return lw_fail(err, LW_BAD_ARGUMENT, demand, "the cell of %s lacks %s", material->name,
                           edge[i] == 0 ? edge_name[i] : angle_name[i]);
        if (!(edge[i] >= 0.05 && edge[i] <= 100))
            return lw_fail(err, LW_BAD_ARGUMENT, "edges are in nm; for others say unit = \"angstrom\"",
                           "the cell of %s has %s = %g nm", material->name, edge_name[i], edge[i]);
        if (!(angle[i] > 5 && angle[i] < 175))
            return lw_fail(err, LW_BAD_ARGUMENT, "angles are in degrees",
                           "the cell of %s has %s = %g degrees", material->name, angle_name[i], angle[i]);
        if (!(spread[i] >= 0) || !isfinite(spread[i]))
            return lw_fail(err, LW_BAD_ARGUMENT, "give 0 or leave it out where none is stated",
                           "the cell of %s has an uncertainty of %s of %g nm", material->name, edge_name[i],
                           spread[i]);
    }
    if (!(lw_cell_volume(cell) > 1e-6 * edge[0] * edge[1] * edge[2]))
        return lw_fail(err, LW_BAD_ARGUMENT, "check the angles", "the cell of %s encloses no volume",
                       material->name);

    double g[3][3];
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++)
            g[i][j] = edge[i] * edge[j] * (i == j ? 1.0 : cos(angle[3 - i - j] * DEGREE));
    for (int op = 0; op < operations->n; op++)
        for (int i = 0; i < 3; i++)
            for (int j = 0; j < 3; j++) {
                double turned = 0;
                for (int p = 0; p < 3; p++)
                    for (int q = 0; q < 3; q++)
                        turned += operations->rotation[op][p][i] * g[p][q] * operations->rotation[op][q][j];
                if (fabs(turned - g[i][j]) > 5e-6 * edge[i] * edge[j])
                    return lw_fail(
                        err, LW_BAD_ARGUMENT, demand,
                        "the cell of %s (%g, %g, %g nm; %g, %g, %g degrees) does not fit space group %s",
                        material->name, edge[0], edge[1], edge[2], angle[0], angle[1], angle[2],
                        material->space_group_symbol);
            }
    return LW_OK;
}

/* The letter of the lattice, from the pure translations. */
static char lattice_letter(const lw_operations *operations)
{
    int n = 0;
    char letter = 'P';
    for (int op = 0; op < operations->n; op++) {
        int off = 0;
        for (int i = 0; i < 3; i++)
            for (int j = 0; j < 3; j++)
                off += operations->rotation[op][i][j] != (i == j);
        if (off != 0)
            continue;
        n++;
        const int *t = operations->shift[op];
        if (t[0] == 0 && t[1] == 12 && t[2] == 12)
            letter = 'A';
        else if (t[0] == 12 && t[1] == 0 && t[2] == 12)
            letter = 'B';
        else if (t[0] == 12 && t[1] == 12 && t[2] == 0)
            letter = 'C';
        else if (t[0] == 12 && t[1] == 12 && t[2] == 12)
            letter = 'I';
        else if (t[0] == 16 || t[0] == 8)
            letter = 'R';
    }
    return n == 4 ? 'F' : letter;
}

lw_status lw_material_settle(lw_material *material, lw_error *err)
{
    lw_status status;
    if (material->hall_number == 0) {
        status = lw_space_group_setting(material->space_group, NULL, &material->hall_number, err);
        if (status != LW_OK)
            return status;
    }
    int number;
    char unique_axis;
    bool rhombohedral;
    status = lw_space_group_describe(material->hall_number, &number, material->space_group_symbol,
                                     sizeof material->space_group_symbol, &unique_axis, &rhombohedral, err);
    if (status != LW_OK)
        return status;
    if (material->space_group != 0 && material->space_group != number)
        return lw_fail(err, LW_BAD_ARGUMENT, "give one of the two",
                       "%s: Hall number %d belongs to space group %d, not %d", material->name,
                       material->hall_number, number, material->space_group);
    lw_operations operations;
    status = lw_space_group_operations(material->hall_number, &operations, err);
    if (status != LW_OK)
        return status;
    material->space_group = number;
    material->system = lw_space_group_system(number);
    material->lattice = lattice_letter(&operations);
    fill_cell(&material->cell, material->system, unique_axis, rhombohedral);
    return check_cell(material, &operations, err);
}
