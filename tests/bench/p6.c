/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Benchmark P6: reading a scan of text columns, checks included; SHA-256 of the file's bytes if asked for.
 * usage: bench_p6 FILE REPEATS [hash]
 * prints one JSON line: median seconds of a read, points, and whether every number is bit-identical to strtod().
 * (FILE has rows of two numbers and nothing else.) */
#include "bench.h"
#include "base/pages.h"
#include "scan/scan.h"

/* Whether the points are what strtod() makes of the file. */
static bool is_as_strtod(const char *path, const lw_scan *scan)
{
    FILE *file = fopen(path, "r");
    char line[256];
    size_t i = 0;
    bool same = file != NULL;
    for (; same && fgets(line, sizeof line, file) != NULL; i++) {
        char *after;
        double x = strtod(line, &after), y = strtod(after, NULL);
        same = i < scan->n && memcmp(&x, &scan->two_theta_deg[i], sizeof x) == 0 &&
               memcmp(&y, &scan->intensity[i], sizeof y) == 0;
    }
    if (file != NULL)
        fclose(file);
    return same && i == scan->n;
}

int main(int argc, char **argv)
{
    long repeats = argc == 3 || argc == 4 ? strtol(argv[2], NULL, 10) : 0;
    double *seconds = repeats > 0 ? malloc((size_t)repeats * sizeof *seconds) : NULL;
    if (seconds == NULL) {
        fprintf(stderr, "usage: bench_p6 FILE REPEATS [hash]\n");
        return 2;
    }
    lw_keep_freed_memory(); /* as the interpreter does */
    lw_engine engine;
    lw_engine_begin(&engine);
    lw_scan_options options = lw_scan_defaults();
    options.noise = 1; /* counts, so that reading is all that is timed */
    bool same = false;
    size_t n = 0;
    for (long i = 0; i < repeats; i++) {
        lw_error err = LW_ERROR_NONE;
        lw_scan *scan = NULL;
        double began = bench_now();
        lw_status status = lw_scan_read(&engine, argv[1], &options, &scan, &err);
        if (status == LW_OK && argc == 4)
            (void)lw_scan_hash(scan);
        seconds[i] = bench_now() - began;
        if (status != LW_OK) {
            char text[2000];
            fprintf(stderr, "%s\n", lw_error_text(&err, text, sizeof text));
            return 1;
        }
        if (i == 0)
            same = is_as_strtod(argv[1], scan);
        n = scan->n;
        lw_scan_free(scan);
    }
    lw_engine_end(&engine);
    double median = bench_median(seconds, (size_t)repeats);
    printf("{\"seconds\": %.9f, \"best\": %.9f, \"points\": %zu, \"as_strtod\": %s}\n", median, seconds[0], n,
           same ? "true" : "false");
    free(seconds);
    return same ? 0 : 1;
}
