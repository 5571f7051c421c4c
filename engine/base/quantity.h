/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A quantity: value, standard uncertainty (k = 1) and unit; or a limit where the data carry no
 * value (JCGM 100:2008 terms). Units are plain text: deg, nm, nm^-1, mm, GPa, m^-2; "" = none. */
#ifndef LW_BASE_QUANTITY_H
#define LW_BASE_QUANTITY_H

#include <stddef.h>

typedef enum lw_quantity_kind {
    LW_VALUE = 0,
    LW_LOWER_LIMIT, /* the true value lies above `value` with the stated confidence */
    LW_UPPER_LIMIT  /* below it */
} lw_quantity_kind;

typedef struct lw_quantity {
    double value;
    double u;         /* standard uncertainty, in the unit; 0 = exact by definition; unused for limits */
    const char *unit; /* static text, or owned by whoever owns the quantity */
    lw_quantity_kind kind;
    double confidence; /* of a limit, for example 0.95; unused for values */
} lw_quantity;

lw_quantity lw_quantity_of(double value, double u, const char *unit);
lw_quantity lw_lower_limit(double value, double confidence, const char *unit);
lw_quantity lw_upper_limit(double value, double confidence, const char *unit);

/* Prints as the trade does: "18.42(63) nm", "> 120 nm (95 %)", "3.1(4)e-3". The uncertainty is shown
 * to two digits and the value to the same place; u = 0 prints six digits, a value or u that is not
 * finite prints as "not determined".
 * Given: text[size], size 64 is always enough. Returns text. */
const char *lw_quantity_text(lw_quantity quantity, char *text, size_t size);

#endif
