/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/text.h"

#include <math.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void lw_text_begin(lw_text *text, lw_engine *engine)
{
    *text = (lw_text){.engine = engine, .status = LW_OK};
}

void lw_text_end(lw_text *text)
{
    if (text->bytes != NULL)
        text->engine->allocator.resize(text->engine->allocator.user, text->bytes, text->room, 0);
    *text = (lw_text){.engine = text->engine};
}

/* Room for n more bytes and the zero byte. */
static bool grow(lw_text *text, size_t n)
{
    if (text->status != LW_OK)
        return false;
    if (n < text->room - text->n)
        return true;
    size_t need = text->n + n + 1;
    size_t room = text->room > 0 ? text->room : 1024;
    while (room < need && room <= SIZE_MAX / 4)
        room *= 2;
    char *bytes = NULL;
    if (need > text->n && room >= need)
        bytes = text->engine->allocator.resize(text->engine->allocator.user, text->bytes, text->room, room);
    if (bytes == NULL) {
        text->status = LW_OUT_OF_MEMORY;
        return false;
    }
    text->bytes = bytes;
    text->room = room;
    return true;
}

void lw_text_bytes(lw_text *text, const char *bytes, size_t n)
{
    if (!grow(text, n))
        return;
    if (n > 0)
        memcpy(text->bytes + text->n, bytes, n);
    text->n += n;
    text->bytes[text->n] = '\0';
}

void lw_text_add(lw_text *text, const char *string)
{
    if (string != NULL)
        lw_text_bytes(text, string, strlen(string));
}

void lw_text_print(lw_text *text, const char *format, ...)
{
    va_list arguments, again;
    va_start(arguments, format);
    va_copy(again, arguments);
    int length = vsnprintf(NULL, 0, format, arguments);
    va_end(arguments);
    if (length >= 0 && grow(text, (size_t)length)) {
        vsnprintf(text->bytes + text->n, (size_t)length + 1, format, again);
        text->n += (size_t)length;
    }
    va_end(again);
}

/* The locale's decimal mark may be any character, of several bytes; every run of bytes that can't
 * belong to a number is that mark. */
static void add_number(lw_text *text, const char *number)
{
    char plain[64];
    size_t n = 0;
    bool mark = false;
    for (const char *c = number; *c != '\0' && n + 1 < sizeof plain; c++) {
        if (strchr("0123456789+-einfa", *c) != NULL) {
            plain[n++] = *c;
            mark = false;
        } else if (!mark) {
            plain[n++] = '.';
            mark = true;
        }
    }
    lw_text_bytes(text, plain, n);
}

void lw_text_number(lw_text *text, double number)
{
    char digits[48];
    if (isnan(number)) {
        lw_text_add(text, "nan");
        return;
    }
    for (int places = 15; places <= 17; places++) {
        snprintf(digits, sizeof digits, "%.*g", places, number);
        if (places == 17 || strtod(digits, NULL) == number)
            break;
    }
    add_number(text, digits);
}

void lw_text_rounded(lw_text *text, double number, int places)
{
    char digits[48];
    snprintf(digits, sizeof digits, "%.*g", places, number);
    add_number(text, digits);
}

void lw_text_fixed(lw_text *text, double number, int decimals)
{
    size_t before = text->n;
    lw_text_print(text, "%.*f", decimals, number);
    if (text->status != LW_OK)
        return;
    /* long, so that it can't go through add_number; but only digits, a minus and one mark are in it */
    size_t to = before;
    bool mark = false;
    for (size_t from = before; from < text->n; from++) {
        char c = text->bytes[from];
        if ((c >= '0' && c <= '9') || c == '-') {
            text->bytes[to++] = c;
            mark = false;
        } else if (!mark) {
            text->bytes[to++] = '.';
            mark = true;
        }
    }
    text->n = to;
    text->bytes[to] = '\0';
}

size_t lw_utf8_length(const char *s)
{
    const unsigned char *b = (const unsigned char *)s;
    if (b[0] < 0x80)
        return 1;
    if (b[0] < 0xC2 || b[0] > 0xF4)
        return 0;
    size_t n = b[0] < 0xE0 ? 2 : b[0] < 0xF0 ? 3 : 4;
    for (size_t i = 1; i < n; i++)
        if ((b[i] & 0xC0) != 0x80)
            return 0;
    if ((b[0] == 0xE0 && b[1] < 0xA0) || (b[0] == 0xED && b[1] > 0x9F) || (b[0] == 0xF0 && b[1] < 0x90) ||
        (b[0] == 0xF4 && b[1] > 0x8F))
        return 0;
    return n;
}

void lw_text_html(lw_text *text, const char *string)
{
    for (const char *c = string ? string : ""; *c != '\0';) {
        size_t n = lw_utf8_length(c);
        switch (*c) {
        case '&': lw_text_add(text, "&amp;"); break;
        case '<': lw_text_add(text, "&lt;"); break;
        case '>': lw_text_add(text, "&gt;"); break;
        case '"': lw_text_add(text, "&quot;"); break;
        case '\'': lw_text_add(text, "&#39;"); break;
        default:
            if (n == 0)
                lw_text_add(text, "\xEF\xBF\xBD");
            else if (n > 1 || (unsigned char)*c >= 0x20 || *c == '\t' || *c == '\n')
                lw_text_bytes(text, c, n);
        }
        c += n > 0 ? n : 1;
    }
}

lw_status lw_text_check(const lw_text *text, lw_error *err)
{
    if (text->status == LW_OK)
        return LW_OK;
    return lw_fail(err, LW_OUT_OF_MEMORY, "raise the memory limit", "out of memory: a text of %zu bytes can't grow",
                   text->n);
}
