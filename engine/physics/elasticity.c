/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "physics/elasticity.h"
#include "physics/space_group.h"

#include <math.h>
#include <string.h>

/* Which constants a symmetry needs, and what follows from them: "56=14 24=-14" reads c56 = c14 and
 * c24 = -c14. Half the difference c66 = (c11 - c12)/2 is written "66=h". */
typedef struct rule {
    const char *needs;
    const char *follows;
} rule;

static const rule TRICLINIC = {"11 12 13 14 15 16 22 23 24 25 26 33 34 35 36 44 45 46 55 56 66", ""};
static const rule MONOCLINIC_A = {"11 12 13 14 22 23 24 33 34 44 55 56 66", ""};
static const rule MONOCLINIC_B = {"11 12 13 15 22 23 25 33 35 44 46 55 66", ""};
static const rule MONOCLINIC_C = {"11 12 13 16 22 23 26 33 36 44 45 55 66", ""};
static const rule ORTHORHOMBIC = {"11 12 13 22 23 33 44 55 66", ""};
static const rule TETRAGONAL = {"11 12 13 33 44 66", "22=11 23=13 55=44"};
static const rule TETRAGONAL_LOW = {"11 12 13 16 33 44 66", "22=11 23=13 55=44 26=-16"};
static const rule TRIGONAL = {"11 12 13 14 33 44", "22=11 23=13 55=44 66=h 24=-14 56=14"};
static const rule TRIGONAL_OTHER = {"11 12 13 15 33 44", "22=11 23=13 55=44 66=h 25=-15 46=-15"};
static const rule TRIGONAL_LOW = {"11 12 13 14 15 33 44",
                                  "22=11 23=13 55=44 66=h 24=-14 56=14 25=-15 46=-15"};
static const rule HEXAGONAL = {"11 12 13 33 44", "22=11 23=13 55=44 66=h"};
static const rule CUBIC = {"11 12 44", "22=11 33=11 13=12 23=12 55=44 66=44"};

static const rule *rule_of(const lw_material *material, char unique_axis)
{
    int number = material->space_group;
    switch (material->system) {
    case LW_TRICLINIC: return &TRICLINIC;
    case LW_MONOCLINIC:
        return unique_axis == 'a' ? &MONOCLINIC_A : unique_axis == 'c' ? &MONOCLINIC_C : &MONOCLINIC_B;
    case LW_ORTHORHOMBIC: return &ORTHORHOMBIC;
    case LW_TETRAGONAL: return number <= 88 ? &TETRAGONAL_LOW : &TETRAGONAL;
    case LW_TRIGONAL:
        if (number <= 148)
            return &TRIGONAL_LOW;
        /* Groups whose twofold axes or mirror normals lie along [210] instead of a. */
        return number == 149 || number == 151 || number == 153 || number == 157 || number == 159 ||
                       number == 162 || number == 163
                   ? &TRIGONAL_OTHER
                   : &TRIGONAL;
    case LW_HEXAGONAL: return &HEXAGONAL;
    case LW_CUBIC: return &CUBIC;
    }
    return &TRICLINIC;
}

lw_status lw_stiffness_set(lw_material *material, const char *name, double gpa, lw_error *err)
{
    bool good = (name[0] == 'c' || name[0] == 'C') && strlen(name) == 3 && name[1] >= '1' && name[1] <= '6' &&
                name[2] >= '1' && name[2] <= '6';
    if (!good)
        return lw_fail(err, LW_BAD_ARGUMENT, "use c11, c12, c44 ... c66", "\"%.20s\" is no elastic constant",
                       name);
    if (!isfinite(gpa) || fabs(gpa) > 1e4)
        return lw_fail(err, LW_BAD_ARGUMENT, "give elastic constants in GPa", "%s of %s is %g GPa", name,
                       material->name, gpa);
    int i = name[1] - '1', j = name[2] - '1';
    material->stiffness_gpa[i][j] = material->stiffness_gpa[j][i] = gpa;
    return LW_OK;
}

/* Cholesky factor of the stiffness, lower triangle; false if it isn't positive definite. */
static bool factor(const double c[6][6], double lower[6][6])
{
    memset(lower, 0, 6 * sizeof lower[0]);
    for (int i = 0; i < 6; i++)
        for (int j = 0; j <= i; j++) {
            double sum = c[i][j];
            for (int k = 0; k < j; k++)
                sum -= lower[i][k] * lower[j][k];
            if (i == j) {
                if (!(sum > 1e-9 * fabs(c[i][i])))
                    return false;
                lower[i][i] = sqrt(sum);
            } else
                lower[i][j] = sum / lower[j][j];
        }
    return true;
}

static lw_status not_stable(const lw_material *material, lw_error *err)
{
    return lw_fail(err, LW_BAD_ARGUMENT, "check the elastic constants and their units (GPa)",
                   "the stiffness of %s is not positive definite: such a crystal could not exist",
                   material->name);
}

lw_status lw_stiffness_complete(lw_material *material, lw_error *err)
{
    int number;
    char symbol[24], unique_axis;
    bool rhombohedral;
    material->has_stiffness = false;
    lw_status status = lw_space_group_describe(material->hall_number, &number, symbol, sizeof symbol,
                                               &unique_axis, &rhombohedral, err);
    if (status != LW_OK)
        return status;
    const rule *rule = rule_of(material, unique_axis);
    double(*c)[6] = material->stiffness_gpa;
    bool known[6][6] = {{false}};
    for (const char *p = rule->needs; *p != '\0'; p += p[2] == ' ' ? 3 : 2) {
        int i = p[0] - '1', j = p[1] - '1';
        known[i][j] = true;
        /* Couplings of normal to shear may well be 0 in a low symmetry, the others may not. */
        bool may_vanish = j >= 3 && i != j;
        if (c[i][j] == 0 && !may_vanish)
            return lw_fail(err, LW_BAD_ARGUMENT, "give the full set for the crystal system, in GPa",
                           "the stiffness of %s (space group %s) lacks c%d%d", material->name, symbol, i + 1,
                           j + 1);
    }
    for (const char *p = rule->follows; *p != '\0';) {
        int i = p[0] - '1', j = p[1] - '1';
        p += 3;
        double value;
        if (*p == 'h') {
            value = 0.5 * (c[0][0] - c[0][1]);
            p++;
        } else {
            double sign = *p == '-' ? -1 : 1;
            p += *p == '-';
            value = sign * c[p[0] - '1'][p[1] - '1'];
            p += 2;
        }
        p += *p == ' ';
        known[i][j] = true;
        if (c[i][j] != 0 && fabs(c[i][j] - value) > 0.01 * fabs(value) + 0.05)
            return lw_fail(err, LW_BAD_ARGUMENT, "leave out what the symmetry fixes",
                           "%s: c%d%d = %g GPa, but its symmetry (%s) makes it %g GPa", material->name, i + 1,
                           j + 1, c[i][j], symbol, value);
        c[i][j] = c[j][i] = value;
    }
    for (int i = 0; i < 6; i++)
        for (int j = i; j < 6; j++)
            if (!known[i][j] && c[i][j] != 0)
                return lw_fail(err, LW_BAD_ARGUMENT, "leave it out", "%s: c%d%d must be 0 in space group %s",
                               material->name, i + 1, j + 1, symbol);
    double lower[6][6];
    if (!factor(c, lower))
        return not_stable(material, err);
    material->has_stiffness = true;
    return LW_OK;
}

static void cross(const double a[3], const double b[3], double out[3])
{
    for (int i = 0; i < 3; i++)
        out[i] = a[(i + 1) % 3] * b[(i + 2) % 3] - a[(i + 2) % 3] * b[(i + 1) % 3];
}

static double dot(const double a[3], const double b[3])
{
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
}

static void normalise(double a[3])
{
    double length = sqrt(dot(a, a));
    for (int i = 0; i < 3; i++)
        a[i] /= length;
}

/* Direction cosines of the normal of hkl on the axes to which the stiffness refers. */
static lw_status plane_normal(const lw_material *material, int h, int k, int l, double n[3], lw_error *err)
{
    static const double degree = 3.14159265358979323846 / 180.0;
    const lw_cell *cell = &material->cell;
    double ca = cos(cell->alpha * degree), cb = cos(cell->beta * degree), cg = cos(cell->gamma * degree);
    double sg = sin(cell->gamma * degree);
    /* Cell edges on working axes: a along 1, b in the plane 12. */
    double up = (ca - cb * cg) / sg;
    const double a[3] = {cell->a, 0, 0}, b[3] = {cell->b * cg, cell->b * sg, 0};
    const double c[3] = {cell->c * cb, cell->c * up, cell->c * sqrt(fmax(1 - cb * cb - up * up, 0))};
    double bc[3], ca_[3], ab[3], normal[3];
    cross(b, c, bc);
    cross(c, a, ca_);
    cross(a, b, ab);
    for (int i = 0; i < 3; i++)
        normal[i] = h * bc[i] + k * ca_[i] + l * ab[i];
    normalise(normal);

    double x[3], y[3], z[3];
    int number;
    char symbol[24], unique_axis;
    bool rhombohedral;
    lw_status status = lw_space_group_describe(material->hall_number, &number, symbol, sizeof symbol,
                                               &unique_axis, &rhombohedral, err);
    if (status != LW_OK)
        return status;
    for (int i = 0; i < 3; i++) {
        z[i] = rhombohedral ? a[i] + b[i] + c[i] : c[i];
        x[i] = a[i] - b[i]; /* the hexagonal a of rhombohedral axes */
        y[i] = ca_[i];
    }
    normalise(z);
    if (rhombohedral) {
        normalise(x);
        cross(z, x, y);
    } else {
        normalise(y);
        cross(y, z, x);
    }
    n[0] = dot(normal, x);
    n[1] = dot(normal, y);
    n[2] = dot(normal, z);
    return LW_OK;
}

lw_status lw_young_modulus(const lw_material *material, int h, int k, int l, double *gpa, lw_error *err)
{
    if (!material->has_stiffness)
        return lw_fail(err, LW_NOT_SUPPORTED, "add stiffness_gpa, with its source, to the material's file",
                       "no elastic constants are known for %s", material->name);
    if (h == 0 && k == 0 && l == 0)
        return lw_fail(err, LW_BAD_ARGUMENT, "give the indices of a plane", "000 has no direction");
    double lower[6][6];
    if (!factor(material->stiffness_gpa, lower))
        return not_stable(material, err);
    double n[3];
    lw_status status = plane_normal(material, h, k, l, n, err);
    if (status != LW_OK)
        return status;
    /* 1/E = q S q with the stress n n in Voigt notation; S = (L L')^-1, so 1/E = |L^-1 q|^2. */
    double q[6] = {n[0] * n[0], n[1] * n[1], n[2] * n[2], n[1] * n[2], n[0] * n[2], n[0] * n[1]};
    double sum = 0;
    for (int i = 0; i < 6; i++) {
        for (int j = 0; j < i; j++)
            q[i] -= lower[i][j] * q[j];
        q[i] /= lower[i][i];
        sum += q[i] * q[i];
    }
    *gpa = 1 / sum;
    return LW_OK;
}

double lw_zener_ratio(const lw_material *material)
{
    return 2 * material->stiffness_gpa[3][3] /
           (material->stiffness_gpa[0][0] - material->stiffness_gpa[0][1]);
}
