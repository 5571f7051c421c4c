/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Space groups by number, symbol and setting, over spglib's table of 530 Hall symbols. */
#include "physics/space_group.h"

#include <math.h>
#include <spglib.h>
#include <stdio.h>
#include <string.h>

enum { HALL_MOST = 530 };

lw_crystal_system lw_space_group_system(int number)
{
    static const int last[] = {2, 15, 74, 142, 167, 194};
    int system = 0;
    while (system < 6 && number > last[system])
        system++;
    return (lw_crystal_system)system;
}

lw_status lw_space_group_operations(int hall_number, lw_operations *operations, lw_error *err)
{
    double shift[192][3];
    operations->n = hall_number >= 1 && hall_number <= HALL_MOST
                        ? spg_get_symmetry_from_database(operations->rotation, shift, hall_number)
                        : 0;
    if (operations->n < 1 || operations->n > 192)
        return lw_fail(err, LW_BAD_ARGUMENT, "use 1 to 530, or give the space group and let it be found",
                       "there are no symmetry operations for Hall number %d", hall_number);
    for (int i = 0; i < operations->n; i++)
        for (int j = 0; j < 3; j++)
            operations->shift[i][j] = (int)lround(24 * shift[i][j]);
    return LW_OK;
}

/* Copies `from` without blanks and underscores, and up to `end` (or its whole). */
static void squeeze(const char *from, const char *end, char *to, size_t size)
{
    size_t n = 0;
    for (; *from != '\0' && from != end && n + 1 < size; from++)
        if (*from != ' ' && *from != '_')
            to[n++] = *from;
    to[n] = '\0';
}

static bool is_monoclinic(const SpglibSpacegroupType *type)
{
    return lw_space_group_system(type->number) == LW_MONOCLINIC;
}

/* The short symbol in this very setting. spglib repeats the symbol of the standard setting for every
 * monoclinic one, so there it is made from the full symbol: "P 1 21/n 1" gives P21/n. */
static void short_symbol(const SpglibSpacegroupType *type, char *symbol, size_t size)
{
    if (!is_monoclinic(type)) {
        squeeze(type->international_short, NULL, symbol, size);
        return;
    }
    size_t n = 0;
    const char *word = type->international_full;
    while (*word != '\0' && n + 1 < size) {
        size_t length = strcspn(word, " ");
        if (!(length == 1 && word[0] == '1'))
            for (size_t i = 0; i < length && n + 1 < size; i++)
                if (word[i] != '_')
                    symbol[n++] = word[i];
        word += length;
        word += strspn(word, " ");
    }
    symbol[n] = '\0';
}

/* How much a setting is wanted when none is named: the lower the better. Among equals the first wins. */
static int rank(const SpglibSpacegroupType *type)
{
    return strcmp(type->choice, "2") == 0 ? 0 : type->choice[0] == '2' ? 2 : 1;
}

lw_status lw_space_group_setting(int number, const char *setting, int *hall_number, lw_error *err)
{
    if (number < 1 || number > 230)
        return lw_fail(err, LW_BAD_ARGUMENT, "space groups run from 1 to 230", "there is no space group %d",
                       number);
    bool named = setting != NULL && setting[0] != '\0';
    int best = 0, best_rank = 0;
    char known[160] = "";
    for (int hall = 1; hall <= HALL_MOST; hall++) {
        SpglibSpacegroupType type = spg_get_spacegroup_type(hall);
        if (type.number != number)
            continue;
        if (named && strcmp(type.choice, setting) == 0) {
            *hall_number = hall;
            return LW_OK;
        }
        if (type.choice[0] != '\0') {
            size_t used = strlen(known);
            snprintf(known + used, sizeof known - used, "%s%s", used > 0 ? ", " : "", type.choice);
        }
        if (best == 0 || rank(&type) < best_rank) {
            best = hall;
            best_rank = rank(&type);
        }
    }
    if (named) {
        char remedy[200];
        snprintf(remedy, sizeof remedy,
                 known[0] != '\0' ? "it has: %s" : "leave the setting out; it has only one", known);
        return lw_fail(err, LW_BAD_ARGUMENT, remedy, "space group %d has no setting \"%s\"", number, setting);
    }
    *hall_number = best;
    return LW_OK;
}

lw_status lw_space_group_find(const char *symbol, int *number, int *hall_number, lw_error *err)
{
    char wanted[40], setting[16] = "";
    const char *colon = strchr(symbol, ':');
    squeeze(symbol, colon, wanted, sizeof wanted);
    if (colon != NULL)
        squeeze(colon + 1, NULL, setting, sizeof setting);
    int found = 0, found_hall = 0, found_rank = 0;
    for (int hall = 1; hall <= HALL_MOST; hall++) {
        SpglibSpacegroupType type = spg_get_spacegroup_type(hall);
        char text[40];
        short_symbol(&type, text, sizeof text);
        if (strcmp(text, wanted) != 0 || (found != 0 && type.number != found))
            continue;
        if (setting[0] != '\0') {
            *number = type.number;
            return lw_space_group_setting(type.number, setting, hall_number, err);
        }
        if (found == 0 || rank(&type) < found_rank) {
            found = type.number;
            found_hall = hall;
            found_rank = rank(&type);
        }
    }
    if (found == 0)
        return lw_fail(err, LW_BAD_ARGUMENT,
                       "use a short symbol such as \"Fm-3m\" or \"P63/mmc\", or the number",
                       "there is no space group \"%.40s\"", symbol);
    *number = found;
    *hall_number = found_hall;
    return LW_OK;
}

lw_status lw_space_group_describe(int hall_number, int *number, char *symbol, size_t size, char *unique_axis,
                                  bool *rhombohedral, lw_error *err)
{
    if (hall_number < 1 || hall_number > HALL_MOST)
        return lw_fail(err, LW_BAD_ARGUMENT, "Hall numbers run from 1 to 530", "there is no Hall number %d",
                       hall_number);
    SpglibSpacegroupType type = spg_get_spacegroup_type(hall_number);
    const char *choice = type.choice[0] == '-' ? type.choice + 1 : type.choice;
    bool monoclinic = is_monoclinic(&type);
    char text[40];
    short_symbol(&type, text, sizeof text);
    bool tell = monoclinic ? choice[0] != 'b' : strchr("12HR", choice[0]) != NULL && choice[0] != '\0';
    snprintf(symbol, size, "%s%s%s", text, tell ? ":" : "", tell ? type.choice : "");
    *number = type.number;
    *unique_axis = monoclinic ? choice[0] : '\0';
    *rhombohedral = choice[0] == 'R';
    return LW_OK;
}
