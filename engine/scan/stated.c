/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scan/stated.h"

#include "scan/number.h"

#include <math.h>
#include <stdio.h>
#include <string.h>
#include <strings.h>

#define REFUSED 1e-3 /* relative: a line at 90 degrees would be off by 0.11 degrees */
#define NOTED 1e-5
#define REMEDY \
    "give the radiation that the scan was measured with, or say radiation_differs = true if what the file states is wrong"

/* A wavelength as it was found, nm; half is half of its last digit. */
typedef struct stated {
    double nm, half;
} stated;

static bool is_letter(char c)
{
    return (c | 32) >= 'a' && (c | 32) <= 'z';
}

/* The text behind a word of its own that an equals sign, a colon or blanks may follow; NULL if it isn't there. */
static const char *behind(const char *text, const char *word)
{
    size_t n = strlen(word);
    for (const char *p = text; *p != '\0'; p++)
        if ((p == text || !is_letter(p[-1])) && strncasecmp(p, word, n) == 0 && !is_letter(p[n]))
            return p + n;
    return NULL;
}

/* Angstroms in nanometres by the unit at p, 0 if there is none that is known. */
static double unit_at(const char *p)
{
    static const struct {
        const char *name;
        double nm;
    } units[] = {{"nm", 1}, {"angstroms", 0.1}, {"angstrom", 0.1}, {"A", 0.1}, {"\xc3\x85", 0.1}, {"\xe2\x84\xab", 0.1},
                 {"\xc5", 0.1}};
    p += strspn(p, " \t([");
    for (size_t i = 0; i < sizeof units / sizeof units[0]; i++) {
        size_t n = strlen(units[i].name);
        if (strncasecmp(p, units[i].name, n) == 0 && !is_letter(p[n]))
            return units[i].nm;
    }
    return 0;
}

/* The first wavelength in the header, in the unit it names, or in the one of two that comes closer to `near`. */
static bool find_wavelength(const char *header, double near, stated *found)
{
    const char *p = behind(header, "wavelength");
    if (p == NULL)
        return false;
    double unit = unit_at(p);
    p += strcspn(p, "0123456789\n");
    size_t digits = strspn(p, "0123456789."), decimals = 0;
    if (digits == 0 || digits > 18 || p[-1] == '-')
        return false;
    char number[18 + LW_NUMBER_SPARE] = "";
    memcpy(number, p, digits);
    double value;
    if (lw_number(number, '.', &value) != number + digits)
        return false;
    const char *point = memchr(p, '.', digits);
    if (point != NULL)
        decimals = (size_t)(p + digits - point) - 1;
    if (unit == 0)
        unit = unit_at(p + digits);
    if (unit == 0)
        unit = fabs(value - near) < fabs(0.1 * value - near) ? 1 : 0.1;
    if (!(unit * value > 0.001 && unit * value < 1)) /* no radiation of a diffractometer, whatever it is */
        return false;
    *found = (stated){.nm = unit * value, .half = 0.5 * unit * pow(10, -(double)decimals)};
    return true;
}

/* The relative distance of a wavelength from the strongest component of a radiation or from the mean of all, which
 * files often state instead; the smaller one. */
static double distance(const lw_radiation *given, double nm)
{
    double mean = 0;
    for (size_t i = 0; i < given->n; i++)
        mean += given->component[i].weight * given->component[i].wavelength_nm;
    return fmin(fabs(nm / lw_radiation_wavelength(given) - 1), fabs(nm / mean - 1));
}

/* "Cu" of "Cu Ka" into name, empty if it isn't the K radiation of an element. */
static void element_of(const char *text, char name[3])
{
    text += strspn(text, " \t:=");
    size_t n = 0;
    while (n < 2 && is_letter(text[n]))
        n++;
    size_t gap = n + strspn(text + n, " \t-");
    bool found = n > 0 && gap > n && text[0] >= 'A' && text[0] <= 'Z' && text[gap] == 'K';
    snprintf(name, 3, "%.*s", found ? (int)n : 0, text);
}

lw_status lw_stated_check(const lw_columns *columns, const char *file, const lw_radiation *given, bool differs,
                          const char **note, lw_error *err)
{
    *note = NULL;
    const char *header = columns->header ? columns->header : "", *radiation = behind(header, "radiation");
    double reference = lw_radiation_wavelength(given);
    stated found = {0, 0};
    char stated_element[3] = "", given_element[3];
    element_of(given->name, given_element);
    if (columns->has_radiation)
        found.nm = lw_radiation_wavelength(&columns->radiation);
    else if (!find_wavelength(header, reference, &found) && radiation != NULL)
        element_of(radiation, stated_element);
    bool other = found.nm > 0 ? distance(given, found.nm) > REFUSED + found.half / found.nm
                              : stated_element[0] != '\0' && given_element[0] != '\0' &&
                                    strcmp(stated_element, given_element) != 0;
    if (!other && !(fabs(found.nm / reference - 1) > NOTED + found.half / reference && found.nm > 0))
        return LW_OK;
    char states[80];
    if (found.nm > 0)
        snprintf(states, sizeof states, "a wavelength of %.7f nm", found.nm);
    else
        snprintf(states, sizeof states, "%s K radiation", stated_element);
    if (other && !differs)
        return lw_fail_at(err, LW_BAD_ARGUMENT, file, 0, REMEDY,
                          "the file states %s, but the radiation given is %s (%.7f nm)", states, given->name, reference);
    *note = lw_arena_print(columns->arena, err, "read with %s (%.7f nm), while the file states %s", given->name, reference,
                           states);
    return *note ? LW_OK : LW_OUT_OF_MEMORY;
}
