/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Crystals: cell, space group and what follows from them: spacings, multiplicities, absences. */
#ifndef LW_PHYSICS_CRYSTAL_H
#define LW_PHYSICS_CRYSTAL_H

#include "base/arena.h"
#include "physics/radiation.h"

#include <stdbool.h>
#include <stddef.h>

typedef enum lw_crystal_system {
    LW_TRICLINIC, LW_MONOCLINIC, LW_ORTHORHOMBIC, LW_TETRAGONAL, LW_TRIGONAL, LW_HEXAGONAL, LW_CUBIC
} lw_crystal_system;

/* Cell edges in nm, angles in degrees, with standard uncertainties (0 = not stated). */
typedef struct lw_cell {
    double a, b, c, alpha, beta, gamma;
    double u_a, u_b, u_c;
} lw_cell;

/* What a material may lack besides its cell: stiffness, Burgers vector, density. */
typedef struct lw_material {
    char name[64];
    char title[96];             /* as a person calls it, for reports */
    char formula[48];
    lw_cell cell;
    int space_group;            /* number, 1 to 230 */
    char space_group_symbol[24];/* international short symbol, setting after a colon (R-3m:H) */
    int hall_number;            /* 1 to 530, the setting that is meant */
    lw_crystal_system system;
    char lattice;               /* P, A, B, C, I, F or R (obverse, hexagonal axes) */
    bool has_stiffness;
    double stiffness_gpa[6][6]; /* Voigt notation */
    double burgers_nm;          /* length of the usual Burgers vector; 0 if not stated */
    double density_kg_m3;       /* 0 if not stated */
    char hazard[200];           /* caution for handling its powder; empty if none */
    char source[600];           /* where cell and constants are from */
} lw_material;

/* A certified reference material: the material with its certificate. */
/* A certified relative intensity. */
typedef struct lw_intensity {
    int h, k, l;
    double value, u;            /* u: expanded uncertainty / k */
} lw_intensity;
#define LW_INTENSITIES_MOST 64

typedef struct lw_standard {
    lw_material material;       /* its cell is the certified one, u_* = expanded uncertainty / k */
    char name[64];
    char certificate[200];
    double coverage_factor;     /* k of the certificate */
    double temperature_c;       /* at which the cell is certified */
    double domain_size_nm;      /* certified or stated mean column length; 0 = none stated */
    bool unverified;            /* certified values to be checked against the user's own certificate */
    size_t n_intensities;       /* 0 where the literal carries none */
    lw_intensity intensity[LW_INTENSITIES_MOST];
    bool intensities_are_heights; /* else areas */
} lw_standard;

/* One reflection, families of equal spacing joined (333 and 511). */
typedef struct lw_reflection {
    int h, k, l;                /* of the family with the largest multiplicity, then the largest |h| */
    double d_nm;
    double two_theta_deg;       /* at the radiation's reference wavelength, no aberrations */
    int multiplicity;           /* summed over the joined families */
    int families;               /* how many were joined */
} lw_reflection;

/* The Hall number of a space group in a setting.
 * Given:  number   1 to 230
 *         setting  "1" or "2" (origin choice), "H" or "R" (axes), "b1", "c1", "cab" ...; NULL or "" = the
 *                  standard one (hexagonal axes, origin choice 2, unique axis b with cell choice 1)
 * LW_BAD_ARGUMENT lists the settings that the group has. */
lw_status lw_space_group_setting(int number, const char *setting, int *hall_number, lw_error *err);

/* The space group of a short symbol: "Fm-3m", "P6_3/mmc" or "P63/mmc", "P 21/n", "R-3c:R". Blanks and
 * underscores don't matter. Without a setting after a colon the standard one is taken if the symbol fits
 * it, or else (Pbnm, P21/n) the setting that has the symbol. */
lw_status lw_space_group_find(const char *symbol, int *number, int *hall_number, lw_error *err);

/* Fills system, lattice, symbol and hall number from the space group number (standard setting) or, when
 * hall_number is already set, from that; refuses a cell that the system does not allow. Edges and angles
 * left 0 are filled where the symmetry fixes them (b and c of a cubic cell, right angles, 120 degrees of a
 * hexagonal one), and refused where it doesn't; u_b and u_c follow u_a likewise. A cell is allowed if every
 * rotation of the group leaves its metric unchanged within 5e-6. */
lw_status lw_material_settle(lw_material *material, lw_error *err);

/* 1/d of hkl in nm^-1 (s = 2 sin(theta)/lambda), for any cell. */
double lw_cell_s(const lw_cell *cell, int h, int k, int l);
/* d(s)/d(a, b, c, alpha, beta, gamma): d[6], per nm and per degree. */
void lw_cell_s_slopes(const lw_cell *cell, int h, int k, int l, double d[6]);
double lw_cell_volume(const lw_cell *cell); /* nm^3 */

/* All reflections of the material between two angles, ascending, absences left out.
 * Given:  wavelength_nm; two_theta range in degrees, 0 < low < high < 180.
 * Returned: *reflections (in the arena) and *n. Refuses more than 5000.
 * Source of absences and operations: space-group operations by Hall number (spglib); a reflection hkl is
 * absent if a symmetry operation maps hkl on itself with a phase h.t that is not whole (International
 * Tables A, general conditions). */
lw_status lw_reflections(const lw_material *material, double wavelength_nm, double low_deg, double high_deg,
                         lw_arena *arena, lw_reflection **reflections, size_t *n, lw_error *err);

/* "111", "10-2", "12 0 3" where an index has two digits. text[24]. Returns text. */
const char *lw_hkl_text(int h, int k, int l, char *text, size_t size);

#endif
