/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "app/options.h"

#include "base/options.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

const char lwa_usage[] =
    "usage: linewright [options] [recipe.lua | -] [name=value ...]\n"
    "  recipe.lua --help    list the recipe's inputs\n"
    "  -                    read the recipe from standard input\n"
    "  (nothing)            the prompt, on a terminal\n"
    "options:\n"
    "  -e CHUNK             run CHUNK; may be given again\n"
    "  -i                   go to the prompt after what was run\n"
    "  --cpu=RUNG           plain, avx2 or avx512; the best one by default\n"
    "  --memory-limit=MB    stop when Lua and the engine need more\n"
    "  --time-limit=S       stop after S seconds\n"
    "  --standards=DIR      folder of radiations, materials and reference materials\n"
    "  --trusted            open the full Lua libraries and let scripts write anywhere\n"
    "  --help, -h           this text\n"
    "  --version            the version\n"
    "  --                   what follows is the recipe, whatever it looks like\n"
    "exit code: 0 done, 1 recipe or data error, 2 usage, 3 a verdict failed under strict=true, 130 interrupted\n";

static bool read_positive(const char *text, double *value)
{
    char *end = NULL;
    *value = strtod(text, &end);
    return end != text && *end == '\0' && isfinite(*value) && *value > 0 && *value < 1e9;
}

static bool read_long(const char *word, lwa_options *options, char *message, size_t size)
{
    static const char *const words[] = {"--help",       "--version",    "--trusted", "--cpu",
                                        "--memory-limit", "--time-limit", "--standards", NULL};
    char name[64];
    const char *equals = strchr(word, '=');
    size_t length = equals ? (size_t)(equals - word) : strlen(word);
    snprintf(name, sizeof name, "%.*s", (int)(length < 63 ? length : 63), word);
    const char *value = equals ? equals + 1 : NULL;
    bool takes = strcmp(name, "--cpu") == 0 || strcmp(name, "--memory-limit") == 0 || strcmp(name, "--time-limit") == 0 ||
                 strcmp(name, "--standards") == 0;
    if (takes && (value == NULL || *value == '\0')) {
        snprintf(message, size, "%s needs a value: %s=...", name, name);
        return false;
    }
    if (strcmp(word, "--help") == 0)
        options->help = true;
    else if (strcmp(word, "--version") == 0)
        options->version = true;
    else if (strcmp(word, "--trusted") == 0)
        options->trusted = true;
    else if (strcmp(name, "--standards") == 0)
        options->standards = value;
    else if (strcmp(name, "--cpu") == 0) {
        static const char *const rungs[] = {"plain", "avx2", "avx512", NULL};
        int rung = 0;
        while (rungs[rung] != NULL && strcmp(rungs[rung], value) != 0)
            rung++;
        if (rungs[rung] == NULL) {
            snprintf(message, size, "--cpu=%.40s: choose from plain, avx2, avx512", value);
            return false;
        }
        options->cpu = (lw_cpu)(LW_CPU_PLAIN + rung);
    } else if (strcmp(name, "--memory-limit") == 0 || strcmp(name, "--time-limit") == 0) {
        double *target = strcmp(name, "--time-limit") == 0 ? &options->time_s : &options->memory_mb;
        if (!read_positive(value, target)) {
            snprintf(message, size, "%s=%.40s: give a number above 0", name, value);
            return false;
        }
    } else {
        const char *near = lw_nearest(words, name);
        snprintf(message, size, "unknown option %s%s%s%s", word, near ? "; did you mean " : "", near ? near : "",
                 near ? "?" : "");
        return false;
    }
    return true;
}

bool lwa_read_options(int argc, char **argv, lwa_options *options, char *message, size_t size)
{
    int i = 1;
    for (; i < argc; i++) {
        const char *word = argv[i];
        if (word[0] != '-')
            break;
        if (strcmp(word, "-") == 0) {
            options->from_stdin = true;
            options->first_argument = i + 1;
            return true;
        }
        if (strcmp(word, "--") == 0) {
            i++;
            break;
        }
        if (strcmp(word, "-h") == 0)
            options->help = true;
        else if (strcmp(word, "-i") == 0)
            options->prompt = true;
        else if (strncmp(word, "-e", 2) == 0) {
            const char *chunk = word[2] != '\0' ? word + 2 : i + 1 < argc ? argv[++i] : NULL;
            if (chunk == NULL || options->n_chunks == LWA_CHUNKS_MOST) {
                snprintf(message, size, chunk ? "-e is given too often" : "-e needs a chunk");
                return false;
            }
            options->chunk[options->n_chunks++] = chunk;
        } else if (strncmp(word, "--", 2) == 0) {
            if (!read_long(word, options, message, size))
                return false;
        } else {
            snprintf(message, size, "unknown option %s", word);
            return false;
        }
    }
    if (i < argc) {
        if (strchr(argv[i], '=') != NULL && options->n_chunks > 0)
            i--; /* inputs for a recipe declared in -e */
        else
            options->recipe = argv[i];
    }
    options->first_argument = i + 1;
    return true;
}
