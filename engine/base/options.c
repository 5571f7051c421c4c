/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/options.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define WORD_MOST 63

/* Edit distance in which a swap of neighbours counts as one (Damerau 1964, optimal alignment). */
static size_t edit_distance(const char *a, const char *b)
{
    size_t na = strlen(a), nb = strlen(b);
    if (na > WORD_MOST || nb > WORD_MOST)
        return WORD_MOST;
    size_t row[3][WORD_MOST + 2];
    for (size_t j = 0; j <= nb; j++)
        row[0][j] = j;
    for (size_t i = 1; i <= na; i++) {
        size_t *now = row[i % 3], *before = row[(i - 1) % 3], *earlier = row[(i + 1) % 3];
        now[0] = i;
        for (size_t j = 1; j <= nb; j++) {
            size_t best = before[j - 1] + (a[i - 1] != b[j - 1]);
            if (before[j] + 1 < best)
                best = before[j] + 1;
            if (now[j - 1] + 1 < best)
                best = now[j - 1] + 1;
            if (i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] && earlier[j - 2] + 1 < best)
                best = earlier[j - 2] + 1;
            now[j] = best;
        }
    }
    return row[na % 3][nb];
}

/* Near enough to be a slip of the keys: at most a third of the word, and at most three letters. */
static bool is_near(size_t distance, const char *word)
{
    return distance <= 3 && 3 * distance <= strlen(word) + 2;
}

const char *lw_nearest(const char *const *words, const char *word)
{
    const char *best = NULL;
    size_t least = WORD_MOST;
    for (; *words != NULL; words++) {
        size_t distance = edit_distance(*words, word);
        if (distance < least && is_near(distance, word)) {
            least = distance;
            best = *words;
        }
    }
    return best;
}

const lw_option *lw_option_find(const lw_option *table, const char *verb, const char *key, lw_error *err)
{
    char valid[240] = "";
    size_t used = 0;
    const char *words[LW_OPTION_LIST_MOST + 1] = {NULL};
    size_t n = 0;
    for (const lw_option *option = table; option->key != NULL; option++) {
        if (strcmp(option->key, key) == 0)
            return option;
        if (n < LW_OPTION_LIST_MOST)
            words[n++] = option->key;
        if (used < sizeof valid)
            used += (size_t)snprintf(valid + used, sizeof valid - used, "%s%s", used ? ", " : "", option->key);
    }
    const char *near = lw_nearest(words, key);
    char remedy[sizeof valid + 100];
    if (near != NULL)
        snprintf(remedy, sizeof remedy, "did you mean '%s'? valid options: %s", near, valid);
    else
        snprintf(remedy, sizeof remedy, "valid options: %s", n ? valid : "none");
    lw_fail(err, LW_BAD_ARGUMENT, remedy, "%s: unknown option '%s'", verb, key);
    return NULL;
}

static const char *kind_name(lw_option_kind kind)
{
    switch (kind) {
    case LW_OPTION_NUMBER: return "a number";
    case LW_OPTION_COUNT: return "a whole number";
    case LW_OPTION_FLAG: return "true or false";
    case LW_OPTION_TEXT: return "a text";
    case LW_OPTION_CHOICE: return "one of its words";
    case LW_OPTION_LIST: return "a list of texts";
    case LW_OPTION_RANGE: return "a pair {low, high}";
    case LW_OPTION_NOUN: return "an object";
    }
    return "a value";
}

static lw_status wrong_kind(const lw_option *option, const char *verb, const char *given, lw_error *err)
{
    return lw_fail(err, LW_BAD_ARGUMENT, option->help, "%s: option '%s' wants %s%s%s, not %s", verb, option->key,
                   kind_name(option->kind), option->unit[0] ? ", " : "", option->unit, given);
}

static void *field(const lw_option *option, void *target)
{
    return (char *)target + option->offset;
}

static lw_status check_number(const lw_option *option, const char *verb, double value, lw_error *err)
{
    bool bounded = option->least != 0 || option->most != 0;
    if (isfinite(value) && (!bounded || (value >= option->least && value <= option->most)))
        return LW_OK;
    const char *space = option->unit[0] ? " " : "";
    if (!bounded)
        return lw_fail(err, LW_BAD_ARGUMENT, option->help, "%s: option '%s' is not a finite number", verb, option->key);
    return lw_fail(err, LW_BAD_ARGUMENT, option->help, "%s: option '%s' is %g%s%s, allowed is %g to %g", verb,
                   option->key, value, space, option->unit, option->least, option->most);
}

lw_status lw_option_number(const lw_option *option, const char *verb, void *target, double value, lw_error *err)
{
    if (option->kind != LW_OPTION_NUMBER && option->kind != LW_OPTION_COUNT)
        return wrong_kind(option, verb, "a number", err);
    if (option->kind == LW_OPTION_COUNT && value != floor(value))
        return wrong_kind(option, verb, "a fraction", err);
    lw_status status = check_number(option, verb, value, err);
    if (status != LW_OK)
        return status;
    if (option->kind == LW_OPTION_COUNT)
        *(long *)field(option, target) = (long)value;
    else
        *(double *)field(option, target) = value;
    return LW_OK;
}

lw_status lw_option_flag(const lw_option *option, const char *verb, void *target, bool value, lw_error *err)
{
    if (option->kind != LW_OPTION_FLAG)
        return wrong_kind(option, verb, "true or false", err);
    *(bool *)field(option, target) = value;
    return LW_OK;
}

lw_status lw_option_text(const lw_option *option, const char *verb, void *target, const char *value, lw_error *err)
{
    if (option->kind == LW_OPTION_TEXT) {
        *(const char **)field(option, target) = value;
        return LW_OK;
    }
    if (option->kind != LW_OPTION_CHOICE)
        return wrong_kind(option, verb, "a text", err);
    char valid[200] = "";
    size_t used = 0;
    for (int i = 0; option->choices[i] != NULL; i++) {
        if (strcmp(option->choices[i], value) == 0) {
            *(int *)field(option, target) = i;
            return LW_OK;
        }
        if (used < sizeof valid)
            used += (size_t)snprintf(valid + used, sizeof valid - used, "%s%s", used ? ", " : "", option->choices[i]);
    }
    const char *near = lw_nearest(option->choices, value);
    char remedy[256];
    snprintf(remedy, sizeof remedy, "%s%s%schoose from: %s", near ? "did you mean '" : "", near ? near : "",
             near ? "'? " : "", valid);
    return lw_fail(err, LW_BAD_ARGUMENT, remedy, "%s: option '%s' does not know '%s'", verb, option->key, value);
}

lw_status lw_option_range(const lw_option *option, const char *verb, void *target, double low, double high,
                          lw_error *err)
{
    if (option->kind != LW_OPTION_RANGE)
        return wrong_kind(option, verb, "a pair of numbers", err);
    lw_status status = check_number(option, verb, low, err);
    if (status == LW_OK)
        status = check_number(option, verb, high, err);
    if (status == LW_OK && !(low < high))
        status = lw_fail(err, LW_BAD_ARGUMENT, option->help, "%s: option '%s' is {%g, %g}, the first must be the lower",
                         verb, option->key, low, high);
    if (status == LW_OK) {
        double *pair = field(option, target);
        pair[0] = low;
        pair[1] = high;
    }
    return status;
}

lw_status lw_option_item(const lw_option *option, const char *verb, void *target, const char *item, lw_error *err)
{
    if (option->kind != LW_OPTION_LIST)
        return wrong_kind(option, verb, "a list", err);
    lw_option_list *list = field(option, target);
    if (list->n == LW_OPTION_LIST_MOST)
        return lw_fail(err, LW_BAD_ARGUMENT, option->help, "%s: option '%s' has more than %d entries", verb,
                       option->key, LW_OPTION_LIST_MOST);
    list->item[list->n++] = item;
    return LW_OK;
}

lw_status lw_option_noun(const lw_option *option, const char *verb, void *target, const void *noun, lw_error *err)
{
    if (option->kind != LW_OPTION_NOUN)
        return wrong_kind(option, verb, "an object", err);
    *(const void **)field(option, target) = noun;
    return LW_OK;
}
