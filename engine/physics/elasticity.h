/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Elastic constants of a crystal along a direction. */
#ifndef LW_PHYSICS_ELASTICITY_H
#define LW_PHYSICS_ELASTICITY_H

#include "physics/crystal.h"

/* Stiffness is given in GPa, Voigt notation, on the usual axes: z along c, y along b* and x normal to both
 * (so x is a for all but monoclinic and triclinic crystals); crystals on rhombohedral axes: as on hexagonal
 * ones.
 * Sets one constant: name "c11" to "c66". Then lw_stiffness_complete() fills what the crystal system fixes
 * (Nye 1957, Table 9), refuses a set that lacks a constant, contradicts the symmetry or isn't positive
 * definite, and sets has_stiffness. The material must be settled before. */
lw_status lw_stiffness_set(lw_material *material, const char *name, double gpa, lw_error *err);
lw_status lw_stiffness_complete(lw_material *material, lw_error *err);

/* Young's modulus along the normal of hkl, GPa, of any crystal system.
 * Source: Nye (1957) Physical Properties of Crystals, ch. VIII: 1/E = s_ijkl n_i n_j n_k n_l.
 * LW_NOT_SUPPORTED if the material has no stiffness, LW_BAD_ARGUMENT if it is not positive definite. */
lw_status lw_young_modulus(const lw_material *material, int h, int k, int l, double *gpa, lw_error *err);

/* Zener ratio 2 C44/(C11 - C12) of a cubic crystal. */
double lw_zener_ratio(const lw_material *material);

#endif
