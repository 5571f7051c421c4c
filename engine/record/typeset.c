/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/typeset.h"

#include <string.h>

void lw_unit_typeset(lw_text *out, const char *unit)
{
    static const char *const raised[] = {"⁰", "¹", "²", "³", "⁴", "⁵", "⁶", "⁷", "⁸", "⁹"};
    bool power = false;
    if (unit == NULL)
        return;
    for (const char *c = unit; *c != '\0'; c++) {
        bool word = c == unit || strchr(" */", c[-1]) != NULL;
        if (*c == '^' && (c[1] == '-' || (c[1] >= '0' && c[1] <= '9'))) {
            power = true;
            continue;
        }
        if (power && *c == '-')
            lw_text_add(out, "⁻");
        else if (power && *c >= '0' && *c <= '9')
            lw_text_add(out, raised[*c - '0']);
        else if (word && strncmp(c, "deg", 3) == 0 && (c[3] == '\0' || strchr(" */^", c[3]) != NULL)) {
            lw_text_add(out, "°");
            c += 2;
        } else {
            power = false;
            lw_text_bytes(out, c, 1);
        }
    }
}

void lw_name_typeset(lw_text *out, const char *name, bool capital)
{
    for (const char *c = name ? name : ""; *c != '\0'; c++) {
        char letter = *c == '_' ? ' ' : *c;
        if (capital && c == name && letter >= 'a' && letter <= 'z')
            letter = (char)(letter - 'a' + 'A');
        lw_text_bytes(out, &letter, 1);
    }
}
