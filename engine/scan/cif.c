/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scan/cif.h"

#include "scan/number.h"

#include <math.h>
#include <string.h>

typedef enum token_kind {
    TOKEN_END,
    TOKEN_DATA,
    TOKEN_LOOP,
    TOKEN_PASSED,
    TOKEN_NAME,
    TOKEN_VALUE
} token_kind;

typedef struct token {
    token_kind kind;
    const char *start;  /* its first byte, quote included */
    lw_cif_value value; /* the name after data_, the name itself, or the value */
} token;

static bool is_white(char c)
{
    return c == ' ' || c == '\t' || c == '\r' || c == '\n';
}

static char lower(char c)
{
    return c >= 'A' && c <= 'Z' ? (char)(c + 32) : c;
}

static bool begins(const char *p, const char *end, const char *word)
{
    for (; *word != '\0'; word++, p++)
        if (p >= end || lower(*p) != *word)
            return false;
    return true;
}

static void skip_space(lw_cif_cursor *cursor, const char *end)
{
    const char *p = cursor->at;
    for (; p < end; p++) {
        if (*p == '\n')
            cursor->line++;
        else if (*p == '#') {
            while (p < end && *p != '\n')
                p++;
            p--;
        } else if (!is_white(*p))
            break;
    }
    cursor->at = p;
}

static lw_status refuse(const lw_cif_cursor *cursor, long line, const char *remedy, const char *message,
                        lw_error *err)
{
    return lw_fail_at(err, LW_BAD_DATA, cursor->content->name, line, remedy, "%s", message);
}

static void count_lines(lw_cif_cursor *cursor, const char *to)
{
    for (; cursor->at < to; cursor->at++)
        cursor->line += *cursor->at == '\n';
}

/* A text between lines that begin with a semicolon; p is at the first one. */
static lw_status text_field(lw_cif_cursor *cursor, const char *p, const char *end, lw_cif_value *value,
                            lw_error *err)
{
    const char *q = p;
    while ((q = memchr(q, '\n', (size_t)(end - q))) != NULL && (q + 1 >= end || q[1] != ';'))
        q++;
    if (q == NULL)
        return refuse(cursor, cursor->line,
                      "copy the file again, or end the text with a line that begins with ;",
                      "the text that begins here has no end", err);
    value->text = p + 1;
    value->length = (size_t)(q - p - 1);
    value->quoted = true;
    count_lines(cursor, q + 2);
    return LW_OK;
}

static lw_status quoted(lw_cif_cursor *cursor, const char *p, const char *end, lw_cif_value *value,
                        lw_error *err)
{
    char quote = *p;
    value->quoted = true;
    if (cursor->second_version && end - p >= 6 && p[1] == quote && p[2] == quote) {
        for (const char *q = p + 3; q + 3 <= end; q++)
            if (q[0] == quote && q[1] == quote && q[2] == quote) {
                value->text = p + 3;
                value->length = (size_t)(q - p - 3);
                count_lines(cursor, q + 3);
                return LW_OK;
            }
        return refuse(cursor, cursor->line, "copy the file again, or close the quotes",
                      "the quoted text that begins here has no end", err);
    }
    for (const char *q = p + 1; q < end && *q != '\n'; q++)
        if (*q == quote && (q + 1 == end || is_white(q[1]))) {
            value->text = p + 1;
            value->length = (size_t)(q - p - 1);
            cursor->at = q + 1;
            return LW_OK;
        }
    return refuse(cursor, cursor->line, "close the quotes on the same line", "a quoted value has no end",
                  err);
}

/* A list or table of CIF 2.0, passed over as one value. */
static lw_status bracketed(lw_cif_cursor *cursor, const char *p, const char *end, lw_cif_value *value,
                           lw_error *err)
{
    long depth = 0;
    value->quoted = true;
    for (const char *q = p; q < end; q++) {
        if (*q == '\'' || *q == '"') {
            const char *close = memchr(q + 1, *q, (size_t)(end - q - 1));
            if (close != NULL)
                q = close;
        } else if (*q == '[' || *q == '{')
            depth++;
        else if ((*q == ']' || *q == '}') && --depth == 0) {
            value->text = p;
            value->length = (size_t)(q + 1 - p);
            count_lines(cursor, q + 1);
            return LW_OK;
        }
    }
    return refuse(cursor, cursor->line, "copy the file again, or close the bracket",
                  "the list or table that begins here has no end", err);
}

static lw_status next_token(lw_cif_cursor *cursor, token *t, lw_error *err)
{
    const char *begin = cursor->content->bytes, *end = begin + cursor->content->size;
    skip_space(cursor, end);
    const char *p = cursor->at;
    *t = (token){.kind = p < end ? TOKEN_VALUE : TOKEN_END, .start = p, .value = {.line = cursor->line}};
    if (p == end)
        return LW_OK;
    if (*p == ';' && (p == begin || p[-1] == '\n'))
        return text_field(cursor, p, end, &t->value, err);
    if (*p == '\'' || *p == '"')
        return quoted(cursor, p, end, &t->value, err);
    if (cursor->second_version && (*p == '[' || *p == '{'))
        return bracketed(cursor, p, end, &t->value, err);
    const char *q = p;
    while (q < end && !is_white(*q))
        q++;
    cursor->at = q;
    if (begins(p, q, "data_")) {
        t->kind = TOKEN_DATA;
        p += 5;
    } else if (begins(p, q, "loop_") && q == p + 5)
        t->kind = TOKEN_LOOP;
    else if (begins(p, q, "save_") || begins(p, q, "global_") || begins(p, q, "stop_"))
        t->kind = TOKEN_PASSED;
    else if (*p == '_')
        t->kind = TOKEN_NAME;
    t->value.text = p;
    t->value.length = (size_t)(q - p);
    return LW_OK;
}

static lw_cif_cursor cursor_at_start(const lw_content *content)
{
    return (lw_cif_cursor){.content = content,
                           .at = content->bytes,
                           .line = 1,
                           .second_version =
                               content->size >= 10 && memcmp(content->bytes, "#\\#CIF_2.0", 10) == 0};
}

bool lw_cif_claims(const lw_content *content)
{
    lw_cif_cursor cursor = cursor_at_start(content);
    const char *end = content->bytes + content->size;
    skip_space(&cursor, end);
    const char *p = cursor.at;
    bool inside = begins(p, end, "data_") || begins(p, end, "loop_") || begins(p, end, "global_") ||
                  (p < end && *p == '_');
    return inside || begins(content->bytes, end, "#\\#cif_");
}

lw_cif_cursor lw_cif_walk(const lw_content *content, const lw_cif_loop *loop)
{
    lw_cif_cursor cursor = cursor_at_start(content);
    cursor.at = loop->body;
    cursor.line = loop->line;
    return cursor;
}

lw_status lw_cif_next(lw_cif_cursor *cursor, lw_cif_value *value, lw_error *err)
{
    token t;
    lw_status status = next_token(cursor, &t, err);
    *value = t.value;
    return status;
}

const lw_cif_item *lw_cif_find(const lw_cif_block *block, const char *name)
{
    const lw_cif_item *item = block->items;
    while (item != NULL && strcmp(item->name, name) != 0)
        item = item->next;
    return item;
}

static lw_cif_item *new_item(lw_arena *arena, const token *t, lw_error *err)
{
    lw_cif_item *item = lw_arena_take(arena, 1, sizeof *item, err);
    char *name = item ? lw_arena_copy(arena, t->value.text, t->value.length + 1, 1, err) : NULL;
    if (name == NULL)
        return NULL;
    name[t->value.length] = '\0';
    for (char *c = name; *c != '\0'; c++)
        *c = *c == '.' || *c == '/' ? '_' : lower(*c);
    item->name = name;
    item->value.line = t->value.line;
    return item;
}

/* Reads names and values after loop_, and leaves the token that follows in *t. */
static lw_status read_loop(lw_arena *arena, lw_cif_cursor *cursor, lw_cif_item ***tail, token *t,
                           lw_error *err)
{
    long line = cursor->line;
    lw_cif_loop *loop = lw_arena_take(arena, 1, sizeof *loop, err);
    if (loop == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status;
    while ((status = next_token(cursor, t, err)) == LW_OK && t->kind == TOKEN_NAME) {
        lw_cif_item *item = new_item(arena, t, err);
        if (item == NULL)
            return LW_OUT_OF_MEMORY;
        item->loop = loop;
        item->column = loop->columns++;
        **tail = item;
        *tail = &item->next;
    }
    if (status != LW_OK)
        return status;
    if (loop->columns == 0)
        return refuse(cursor, line, "write its data names under loop_", "a loop without data names", err);
    loop->body = t->start;
    loop->line = t->value.line;
    size_t values = 0;
    long last = line;
    for (; status == LW_OK && t->kind == TOKEN_VALUE; status = next_token(cursor, t, err)) {
        if (values++ % 65536 == 0 && (status = lw_engine_poll(arena->engine, err)) != LW_OK)
            return status;
        last = t->value.line;
    }
    if (status != LW_OK)
        return status;
    loop->rows = values / loop->columns;
    if (values % loop->columns != 0)
        return lw_fail_at(err, LW_BAD_DATA, cursor->content->name, last,
                          "copy the file again, or complete the last row (write ? for an unknown value)",
                          "the loop of line %ld has %zu values, which do not fill rows of %zu", line, values,
                          loop->columns);
    return LW_OK;
}

static lw_cif_block *new_block(lw_arena *arena, const char *name, size_t length, lw_error *err)
{
    lw_cif_block *block = lw_arena_take(arena, 1, sizeof *block, err);
    char *copy = block ? lw_arena_take(arena, length + 1, 1, err) : NULL;
    if (copy == NULL)
        return NULL;
    memcpy(copy, name, length);
    block->name = copy;
    return block;
}

lw_status lw_cif_read(lw_arena *arena, const lw_content *content, lw_cif_block **first, lw_error *err)
{
    lw_cif_cursor cursor = cursor_at_start(content);
    lw_cif_block **tail = first;
    lw_cif_item **items = NULL;
    *first = NULL;
    token t;
    lw_status status = next_token(&cursor, &t, err);
    while (status == LW_OK && t.kind != TOKEN_END) {
        if (t.kind == TOKEN_DATA || items == NULL) {
            /* names before any data_ get a block without a name */
            bool named = t.kind == TOKEN_DATA;
            lw_cif_block *block =
                new_block(arena, named ? t.value.text : "", named ? t.value.length : 0, err);
            if (block == NULL)
                return LW_OUT_OF_MEMORY;
            *tail = block;
            tail = &block->next;
            items = &block->items;
            if (named)
                status = next_token(&cursor, &t, err);
        } else if (t.kind == TOKEN_LOOP)
            status = read_loop(arena, &cursor, &items, &t, err);
        else if (t.kind == TOKEN_NAME) {
            token name = t;
            status = next_token(&cursor, &t, err);
            bool valued = status == LW_OK && t.kind == TOKEN_VALUE;
            char last = name.value.text[name.value.length - 1];
            bool glued = !valued && (last == '?' || last == '.');
            name.value.length -= glued;
            if (status == LW_OK && !valued && !glued)
                return refuse(&cursor, name.value.line, "write its value after it, or ? if it is not known",
                              "a data name without a value", err);
            lw_cif_item *item = status == LW_OK ? new_item(arena, &name, err) : NULL;
            if (item == NULL)
                return status == LW_OK ? LW_OUT_OF_MEMORY : status;
            if (valued) {
                item->value = t.value;
                status = next_token(&cursor, &t, err);
            }
            *items = item;
            items = &item->next;
        } else if (t.kind == TOKEN_VALUE)
            return refuse(&cursor, t.value.line,
                          "put texts with blanks in quotes, and each value after its name",
                          "a value that belongs to no data name", err);
        else
            status = next_token(&cursor, &t, err);
    }
    return status;
}

bool lw_cif_is_missing(const lw_cif_value *value)
{
    const char *p = value->text;
    size_t length = value->length;
    for (; length > 0 && is_white(*p); length--)
        p++;
    while (length > 0 && is_white(p[length - 1]))
        length--;
    /* ' ?' in quotes is strictly a text, but files mean "unknown" by it */
    return length == 0 || (length == 1 && (*p == '?' || (*p == '.' && !value->quoted)));
}

bool lw_cif_number(const lw_cif_value *value, double *number, double *su)
{
    if (value->text == NULL || value->length == 0)
        return false;
    const char *end = value->text + value->length;
    const char *p = lw_number(value->text, '.', number);
    *su = NAN;
    if (p == NULL || p > end)
        return false;
    if (p == end)
        return true;
    if (*p != '(' || end[-1] != ')')
        return false;
    /* the bracket counts units of the last decimal shown */
    const char *bracket = p, *point = memchr(value->text, '.', (size_t)(bracket - value->text));
    const char *power = value->text;
    while (power < bracket && lower(*power) != 'e')
        power++;
    double digits, exponent = 0;
    if (lw_number(bracket + 1, '.', &digits) != end - 1 || bracket[1] == '-' || bracket[1] == '+')
        return false;
    bool absolute = memchr(bracket, '.', (size_t)(end - bracket)) != NULL;
    if (power < bracket && lw_number(power + 1, '.', &exponent) != bracket)
        return false;
    double place = exponent - (point && point < power ? (double)(power - point - 1) : 0);
    if (fabs(place) > 300)
        return false;
    if (absolute)
        *su = digits;
    else if (place < 0 && place >= -22)
        *su = digits / lw_power_of_ten[(int)-place];
    else
        *su = digits * pow(10, place);
    return true;
}
