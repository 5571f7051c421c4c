/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzz target: JSON records. What reads as one is written and read again to the same text, and taken as a
 * calibration. */
#include "fuzz.h"

#include "instrument/calibration.h"
#include "record/json.h"

#include <math.h>
#include <string.h>

static void take_as_calibration(lw_engine *engine, const lw_node *root)
{
    lw_error err = LW_ERROR_NONE;
    lw_calibration *calibration = NULL;
    lw_status status = lw_calibration_from_tree(engine, root, "input", &calibration, &err);
    FUZZ_PROMISE(status == err.status && (status == LW_OK) == (calibration != NULL));
    if (status != LW_OK) {
        FUZZ_PROMISE(err.message[0] != '\0');
        return;
    }
    FUZZ_PROMISE(calibration->valid_low_deg < calibration->valid_high_deg);
    FUZZ_PROMISE(calibration->radiation.n >= 1);
    err = LW_ERROR_NONE;
    lw_calibration_covers(calibration, &calibration->radiation, 20, 100, &err);
    lw_calibration_free(calibration);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    lw_engine engine;
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_engine_begin(&engine);
    lw_arena_begin(&arena, &engine);
    char *copy = malloc(size + 1); /* to the byte, so that a look beyond is seen */
    lw_node *root = NULL, *again = NULL;
    if (copy != NULL) {
        if (size > 0)
            memcpy(copy, data, size);
        if (lw_json_read(&arena, copy, size, "input", &root, &err) == LW_OK) {
            lw_text first, second;
            lw_text_begin(&first, &engine);
            lw_text_begin(&second, &engine);
            FUZZ_PROMISE(lw_json_write(root, &first, &err) == LW_OK);
            FUZZ_PROMISE(lw_json_read(&arena, first.bytes, first.n, "again", &again, &err) == LW_OK);
            FUZZ_PROMISE(lw_json_write(again, &second, &err) == LW_OK);
            FUZZ_PROMISE(first.n == second.n && memcmp(first.bytes, second.bytes, first.n) == 0);
            lw_text_end(&first);
            lw_text_end(&second);
            take_as_calibration(&engine, root);
        } else
            FUZZ_PROMISE(err.status != LW_OK && err.message[0] != '\0');
    }
    free(copy);
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return 0;
}
