/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/json.h"

#include "record/file.h"

#include <jansson.h>
#include <math.h>
#include <string.h>

#define DEPTH_MOST 200 /* nesting; a record needs about six */

/* ---- writing ---- */

static void write_string(lw_text *out, const char *string)
{
    lw_text_add(out, "\"");
    for (const char *c = string ? string : ""; *c != '\0';) {
        size_t n = lw_utf8_length(c);
        switch (*c) {
        case '"': lw_text_add(out, "\\\""); break;
        case '\\': lw_text_add(out, "\\\\"); break;
        case '\n': lw_text_add(out, "\\n"); break;
        case '\t': lw_text_add(out, "\\t"); break;
        case '\r': lw_text_add(out, "\\r"); break;
        default:
            if (n == 0)
                lw_text_add(out, "\xEF\xBF\xBD");
            else if (n == 1 && (unsigned char)*c < 0x20)
                lw_text_print(out, "\\u%04x", (unsigned)*c);
            else
                lw_text_bytes(out, c, n);
        }
        c += n > 0 ? n : 1;
    }
    lw_text_add(out, "\"");
}

static void write_number(lw_text *out, double number)
{
    if (isfinite(number))
        lw_text_number(out, number);
    else
        lw_text_add(out, "null");
}

static void write_member(lw_text *out, const char *key, const char *value)
{
    if (value == NULL)
        return;
    lw_text_print(out, ", \"%s\": ", key);
    write_string(out, value);
}

static void write_quantity(lw_text *out, const lw_node *node)
{
    const lw_quantity *q = &node->quantity;
    if (q->kind == LW_VALUE) {
        lw_text_add(out, "{\"value\": ");
        write_number(out, q->value);
        lw_text_add(out, ", \"u\": ");
        write_number(out, q->u);
    } else {
        lw_text_add(out, q->kind == LW_LOWER_LIMIT ? "{\"lower_limit\": " : "{\"upper_limit\": ");
        write_number(out, q->value);
        lw_text_add(out, ", \"confidence\": ");
        write_number(out, q->confidence);
    }
    write_member(out, "unit", q->unit ? q->unit : "");
    write_member(out, "definition", node->definition);
    write_member(out, "source", node->source);
    lw_text_add(out, "}");
}

static void write_node(lw_text *out, const lw_node *node, int depth);

static void new_line(lw_text *out, int depth)
{
    lw_text_print(out, "\n%*s", 2 * depth, "");
}

static void write_children(lw_text *out, const lw_node *node, int depth)
{
    bool group = node->kind == LW_NODE_GROUP, any = false;
    lw_text_add(out, group ? "{" : "[");
    for (const lw_node *child = node->first; child != NULL; child = child->next, any = true) {
        if (any)
            lw_text_add(out, ",");
        new_line(out, depth + 1);
        if (group) {
            write_string(out, child->name);
            lw_text_add(out, ": ");
        }
        write_node(out, child, depth + 1);
    }
    const char *const keys[] = {"definition", "source"};
    const char *const values[] = {node->definition, node->source};
    for (int i = 0; i < 2 && group; i++) {
        if (values[i] == NULL || lw_node_get(node, keys[i]) != NULL)
            continue;
        if (any)
            lw_text_add(out, ",");
        new_line(out, depth + 1);
        lw_text_print(out, "\"%s\": ", keys[i]);
        write_string(out, values[i]);
        any = true;
    }
    if (any)
        new_line(out, depth);
    lw_text_add(out, group ? "}" : "]");
}

static void write_node(lw_text *out, const lw_node *node, int depth)
{
    switch (node->kind) {
    case LW_NODE_GROUP:
    case LW_NODE_LIST: write_children(out, node, depth); break;
    case LW_NODE_QUANTITY: write_quantity(out, node); break;
    case LW_NODE_NUMBER: write_number(out, node->number); break;
    case LW_NODE_TEXT: write_string(out, node->text); break;
    case LW_NODE_FLAG: lw_text_add(out, node->flag ? "true" : "false"); break;
    case LW_NODE_VECTOR:
        lw_text_add(out, "[");
        for (size_t i = 0; i < node->n; i++) {
            if (i > 0)
                lw_text_add(out, ", ");
            write_number(out, node->vector[i]);
        }
        lw_text_add(out, "]");
        break;
    }
}

lw_status lw_json_write(const lw_node *node, lw_text *out, lw_error *err)
{
    write_node(out, node, 0);
    lw_text_add(out, "\n");
    return lw_text_check(out, err);
}

/* ---- reading ---- */

/* A number, or null for one that was not finite. */
static bool is_number(const json_t *value)
{
    return json_is_number(value) || json_is_null(value);
}

static double number_of(const json_t *value)
{
    return json_is_number(value) ? json_number_value(value) : NAN;
}

/* Reads a quantity or a limit if the object is one: the three fields of the contract, and nothing
 * beside them but the two describing texts. */
static bool as_quantity(json_t *object, lw_quantity *q)
{
    const json_t *value = json_object_get(object, "value"), *u = json_object_get(object, "u");
    const json_t *lower = json_object_get(object, "lower_limit"), *upper = json_object_get(object, "upper_limit");
    const json_t *confidence = json_object_get(object, "confidence");
    const json_t *unit = json_object_get(object, "unit");
    const json_t *limit = lower ? lower : upper;
    size_t described = json_is_string(json_object_get(object, "definition")) ? 1 : 0;
    described += json_is_string(json_object_get(object, "source")) ? 1 : 0;
    if (!json_is_string(unit) || json_object_size(object) != 3 + described)
        return false;
    *q = (lw_quantity){.unit = json_string_value(unit)};
    if (is_number(value) && is_number(u)) {
        q->value = number_of(value);
        q->u = number_of(u);
        return true;
    }
    if (is_number(limit) && is_number(confidence)) {
        q->kind = lower ? LW_LOWER_LIMIT : LW_UPPER_LIMIT;
        q->value = number_of(limit);
        q->confidence = number_of(confidence);
        return true;
    }
    return false;
}

static bool is_vector(json_t *array)
{
    size_t i;
    json_t *value;
    json_array_foreach(array, i, value)
        if (!is_number(value))
            return false;
    return json_array_size(array) > 0;
}

static lw_status read_vector(lw_node *parent, const char *name, json_t *array, lw_error *err)
{
    size_t n = json_array_size(array), i;
    double *values = lw_arena_take(parent->arena, n, sizeof *values, err);
    json_t *value;
    if (values == NULL)
        return LW_OUT_OF_MEMORY;
    json_array_foreach(array, i, value)
        values[i] = number_of(value);
    return lw_add_vector(parent, name, values, n, "", err) ? LW_OK : LW_OUT_OF_MEMORY;
}

static lw_status read_object(lw_node *group, json_t *object, int depth, lw_error *err);

static lw_status read_value(lw_node *parent, const char *name, json_t *value, int depth, lw_error *err)
{
    lw_node *node = NULL;
    lw_status status = LW_OK;
    lw_quantity q;
    if (depth > DEPTH_MOST)
        return LW_BAD_DATA; /* the only way to it here; lw_json_read words it */
    if (lw_engine_poll(parent->arena->engine, err) != LW_OK)
        return LW_CANCELLED;
    switch (json_typeof(value)) {
    case JSON_OBJECT:
        if (as_quantity(value, &q)) {
            const char *source = json_string_value(json_object_get(value, "source"));
            node = lw_add_quantity(parent, name, q, json_string_value(json_object_get(value, "definition")), err);
            if (node != NULL && source != NULL && (node->source = lw_arena_text(node->arena, source, err)) == NULL)
                return LW_OUT_OF_MEMORY;
        } else if ((node = lw_add_group(parent, name, err)) != NULL)
            status = read_object(node, value, depth, err);
        break;
    case JSON_ARRAY:
        if (is_vector(value))
            return read_vector(parent, name, value, err);
        if ((node = lw_add_list(parent, name, err)) != NULL) {
            size_t i;
            json_t *item;
            json_array_foreach(value, i, item)
                if ((status = read_value(node, NULL, item, depth + 1, err)) != LW_OK)
                    return status;
        }
        break;
    case JSON_STRING: node = lw_add_text(parent, name, json_string_value(value), err); break;
    case JSON_TRUE:
    case JSON_FALSE: node = lw_add_flag(parent, name, json_is_true(value), err); break;
    case JSON_INTEGER:
    case JSON_REAL:
    case JSON_NULL: node = lw_add_number(parent, name, number_of(value), err); break;
    }
    return node != NULL ? status : LW_OUT_OF_MEMORY;
}

static lw_status read_object(lw_node *group, json_t *object, int depth, lw_error *err)
{
    const char *key;
    json_t *value;
    json_object_foreach(object, key, value)
    {
        lw_status status = read_value(group, key, value, depth + 1, err);
        if (status != LW_OK)
            return status;
    }
    return LW_OK;
}

lw_status lw_json_read(lw_arena *arena, const char *json, size_t size, const char *name, lw_node **root,
                       lw_error *err)
{
    json_error_t fault;
    if (name == NULL)
        name = "JSON text";
    if (size > LW_JSON_MOST)
        return lw_fail_at(err, LW_BAD_DATA, name, 0, "check that this is the file you mean",
                          "too large: %zu bytes, at most %zu are read", size, LW_JSON_MOST);
    /* integers as doubles too, so that one of 20 digits is a number like any other */
    json_t *value = json_loadb(json, size, JSON_REJECT_DUPLICATES | JSON_DECODE_INT_AS_REAL, &fault);
    if (value == NULL) {
        if (json_error_code(&fault) == json_error_out_of_memory)
            return lw_fail_at(err, LW_OUT_OF_MEMORY, name, 0, NULL, "out of memory while reading JSON");
        return lw_fail_at(err, LW_BAD_DATA, name, fault.line, "repair the file, or make it anew from the scan",
                          "not valid JSON: %s (column %d)", fault.text, fault.column);
    }
    lw_status status = LW_OK;
    if (!json_is_object(value))
        status = lw_fail_at(err, LW_BAD_DATA, name, 1, "check that this is a record",
                            "a record is a JSON object {...}");
    else if ((*root = lw_tree_new(arena, err)) == NULL)
        status = LW_OUT_OF_MEMORY;
    else
        status = read_object(*root, value, 0, err);
    if (status == LW_BAD_DATA)
        lw_fail_at(err, LW_BAD_DATA, name, 0, "check that this is a record", "more than %d levels of nesting",
                   DEPTH_MOST);
    json_decref(value);
    return status;
}

lw_status lw_json_save(lw_engine *engine, const char *path, const lw_node *node, lw_error *err)
{
    lw_text text;
    lw_text_begin(&text, engine);
    lw_status status = lw_json_write(node, &text, err);
    if (status == LW_OK)
        status = lw_write_file(engine, path, text.bytes, text.n, err);
    lw_text_end(&text);
    return status;
}

lw_status lw_json_load(lw_arena *arena, const char *path, lw_node **root, lw_error *err)
{
    char *bytes;
    size_t size;
    lw_status status = lw_read_file(arena, path, LW_JSON_MOST, &bytes, &size, err);
    return status == LW_OK ? lw_json_read(arena, bytes, size, path, root, err) : status;
}
