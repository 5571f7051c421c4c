/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Every malformed file of tests/invalid must be refused with its place and its remedy. A case is a folder
 * with `input`, the file, and `error`: the line that the message must name (0 = the whole file), a part of
 * the message, a part of the remedy and, if the case needs it, the noise asked for. */
#include "check.h"

#include "scan/scan.h"

#include <dirent.h>
#include <stdlib.h>

#define FOLDER LW_SOURCE_DIR "/tests/invalid"

static void run_case(lw_engine *engine, const char *name)
{
    char path[512], want[4][200] = {{0}};
    snprintf(path, sizeof path, "%s/%s/error", FOLDER, name);
    FILE *file = fopen(path, "r");
    CHECK(file != NULL);
    if (file == NULL)
        return;
    for (int i = 0; i < 4 && fgets(want[i], sizeof want[i], file) != NULL; i++)
        want[i][strcspn(want[i], "\n")] = '\0';
    fclose(file);
    snprintf(path, sizeof path, "%s/%s/input", FOLDER, name);
    lw_scan_options options = lw_scan_defaults();
    if (want[3][0] != '\0')
        CHECK(lw_option_text(lw_option_find(lw_scan_option_table, "read_scan", "noise", NULL), "read_scan",
                             &options, want[3], NULL) == LW_OK);
    lw_scan *scan = NULL;
    lw_error err = LW_ERROR_NONE;
    lw_status status = lw_scan_read(engine, path, &options, &scan, &err);
    int failed = lw_checks_failed;
    CHECK(status != LW_OK && status == err.status && scan == NULL);
    CHECK(err.line == strtol(want[0], NULL, 10));
    CHECK(want[1][0] != '\0' && want[2][0] != '\0');
    CHECK_CONTAINS(err.message, want[1]);
    CHECK_CONTAINS(err.remedy, want[2]);
    CHECK_CONTAINS(err.file, name);
    if (lw_checks_failed > failed) {
        char text[900];
        fprintf(stderr, "  in %s: %s\n", name, lw_error_text(&err, text, sizeof text));
    }
    lw_scan_free(scan);
}

int main(void)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    DIR *folder = opendir(FOLDER);
    CHECK(folder != NULL);
    int cases = 0;
    for (struct dirent *entry; folder != NULL && (entry = readdir(folder)) != NULL;)
        if (entry->d_name[0] != '.') {
            run_case(&engine, entry->d_name);
            cases++;
        }
    if (folder != NULL)
        closedir(folder);
    CHECK(cases >= 80);
    printf("%d malformed files\n", cases);
    lw_engine_end(&engine);
    return lw_checks_end();
}
