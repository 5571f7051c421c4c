/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzz target: the command line and the option tables of the verbs. A line of the input is a word of the command
 * line; as key=value it is an option of reading a scan and of fitting lines, too. */
#include "fuzz.h"

#include "app/options.h"
#include "line/lines.h"
#include "scan/scan.h"

#include <string.h>

#define WORDS_MOST 48

static void give(const lw_option *table, const char *verb, void *target, const char *key, const char *value)
{
    lw_error err = LW_ERROR_NONE;
    const lw_option *option = lw_option_find(table, verb, key, &err);
    FUZZ_PROMISE((option == NULL) == (err.status != LW_OK) && (option != NULL || err.message[0] != '\0'));
    if (option == NULL)
        return;
    double number = strtod(value, NULL);
    lw_status status;
    switch (option->kind) {
    case LW_OPTION_NUMBER:
    case LW_OPTION_COUNT: status = lw_option_number(option, verb, target, number, &err); break;
    case LW_OPTION_FLAG: status = lw_option_flag(option, verb, target, value[0] == 't', &err); break;
    case LW_OPTION_RANGE: status = lw_option_range(option, verb, target, number, number + 1, &err); break;
    case LW_OPTION_LIST: status = lw_option_item(option, verb, target, value, &err); break;
    case LW_OPTION_NOUN: status = lw_option_noun(option, verb, target, target, &err); break;
    default: status = lw_option_text(option, verb, target, value, &err); break;
    }
    FUZZ_PROMISE(status == err.status && (status == LW_OK || err.message[0] != '\0'));
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static char program[] = "linewright";
    char *text = malloc(size + 1), *words[WORDS_MOST + 1] = {program}, message[300] = "";
    int n = 1;
    if (text == NULL)
        return 0;
    if (size > 0)
        memcpy(text, data, size);
    text[size] = '\0';
    for (char *at = text; n < WORDS_MOST && at != NULL; n++) {
        words[n] = at;
        at = strchr(at, '\n');
        if (at != NULL)
            *at++ = '\0';
    }
    lwa_options options = {.trusted = false};
    if (lwa_read_options(n, words, &options, message, sizeof message)) {
        FUZZ_PROMISE(options.first_argument >= 1 && options.first_argument <= n + 1);
        FUZZ_PROMISE(options.n_chunks >= 0 && options.n_chunks <= LWA_CHUNKS_MOST);
        FUZZ_PROMISE(options.memory_mb >= 0 && options.time_s >= 0);
    } else
        FUZZ_PROMISE(message[0] != '\0' && strlen(message) < sizeof message);
    lw_scan_options reading = lw_scan_defaults();
    lw_fit_options fitting = lw_fit_defaults();
    for (int i = 1; i < n; i++) {
        char *value = strchr(words[i], '=');
        if (value == NULL)
            continue;
        *value++ = '\0';
        give(lw_scan_option_table, "read_scan", &reading, words[i], value);
        give(lw_fit_option_table, "fit_lines", &fitting, words[i], value);
    }
    free(text);
    return 0;
}
