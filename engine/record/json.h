/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A result tree as JSON text (RFC 8259) and back. What stands for what:
 *   quantity  {"value": x, "u": s, "unit": "nm"}, u the standard uncertainty (k = 1)
 *   limit     {"lower_limit": x, "confidence": 0.95, "unit": "nm"}, or "upper_limit"
 *   vector    [1, 2, 3]: its unit isn't written
 *   group     object, list = array, number, text = string, flag = true or false
 * "definition" and "source" follow in a quantity, and end a group, when the tree has them. NaN and
 * infinities are null, and null reads as NaN. Numbers read back bit-equal. An array of plain numbers
 * (or nulls) reads as a vector, an empty one as a list. */
#ifndef LW_RECORD_JSON_H
#define LW_RECORD_JSON_H

#include "base/tree.h"
#include "record/text.h"

/* Largest JSON text that is read. */
#define LW_JSON_MOST ((size_t)32 << 20)

/* Appends the tree, indented by two spaces, and a newline. Bytes that aren't UTF-8 become U+FFFD.
 * Status: LW_OUT_OF_MEMORY. */
lw_status lw_json_write(const lw_node *node, lw_text *out, lw_error *err);

/* Reads an object into a new tree.
 * Given:    json[size]  UTF-8 text
 *           name        file name for errors, may be NULL
 * Returned: *root       a group in the arena
 * Status:   LW_BAD_DATA with the line: not JSON, a key twice, a number too large for a double, too
 *           deep, too large, the outermost value is no object; LW_OUT_OF_MEMORY. */
lw_status lw_json_read(lw_arena *arena, const char *json, size_t size, const char *name, lw_node **root,
                       lw_error *err);

/* The same from and to a file (record/file.h). */
lw_status lw_json_save(lw_engine *engine, const char *path, const lw_node *node, lw_error *err);
lw_status lw_json_load(lw_arena *arena, const char *path, lw_node **root, lw_error *err);

#endif
