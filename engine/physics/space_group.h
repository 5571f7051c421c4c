/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Symmetry operations of a space group, for the files of this floor. */
#ifndef LW_PHYSICS_SPACE_GROUP_H
#define LW_PHYSICS_SPACE_GROUP_H

#include "physics/crystal.h"

/* x' = rotation x + shift/24: every translation of a space group is a whole number of 24ths of the
 * cell, so that phases are whole numbers too and absences need no tolerance. */
typedef struct lw_operations {
    int n; /* 1 to 192 */
    int rotation[192][3][3];
    int shift[192][3];
} lw_operations;

/* The operations in the setting of a Hall number, 1 to 530. Source: spglib's table. */
lw_status lw_space_group_operations(int hall_number, lw_operations *operations, lw_error *err);

/* The crystal system of a space group number. */
lw_crystal_system lw_space_group_system(int number);

/* Number, short symbol with its setting, and letter ('a', 'b', 'c') of the unique axis of a monoclinic
 * group ('\0' for others); *rhombohedral: whether the axes are rhombohedral. symbol[24]. */
lw_status lw_space_group_describe(int hall_number, int *number, char *symbol, size_t size, char *unique_axis,
                                  bool *rhombohedral, lw_error *err);

#endif
