/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Columns of text: 2theta, counts and perhaps sigma, separated by blanks, commas or semicolons. The form
 * (separator, decimal mark, number of columns) is settled by the first row of numbers and then holds for
 * the whole file, so that a file is never read in two ways.
 *
 * Rows are read by a fast loop (rows.c) that knows only clean rows; whatever it does not understand is left
 * to read_line(), which knows comments and words every refusal. */
#include "scan/number.h"
#include "scan/reader.h"
#include "scan/rows.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define HEADER_MOST ((size_t)64 << 10)
#define ROWS_BETWEEN_POLLS 65536
#define COLUMNS_MOST LW_ROWS_COLUMNS_MOST

typedef struct text {
    lw_content *content;
    const char *end;        /* of the bytes */
    const char *header_row; /* the one row of column names, NULL if none yet */
    const char *first;      /* first row of numbers, NULL if none yet */
    const char *line;       /* the line being read, for messages */
    char separator;         /* ' ' for blanks, ',' or ';' */
    char mark;              /* decimal mark */
    unsigned columns;       /* 0 until the first row */
} text;

typedef enum line_kind { LINE_BARE, LINE_NUMBERS, LINE_REFUSED } line_kind;

static bool is_blank(char c)
{
    return c == ' ' || c == '\t' || c == '\r';
}

static bool is_letter(char c)
{
    return ((c | 32) >= 'a' && (c | 32) <= 'z') || (unsigned char)c >= 0x80;
}

static const char *skip_blanks(const char *p)
{
    while (is_blank(*p))
        p++;
    return p;
}

static const char *end_of_line(const text *t, const char *p)
{
    const char *eol = memchr(p, '\n', (size_t)(t->end - p));
    return eol ? eol : t->end;
}

static bool is_remark(char c)
{
    return c == '#' || c == '!' || c == ';' || c == '"' || c == '\'';
}

static long line_number(const text *t, const char *at)
{
    long line = 1;
    for (const char *p = t->content->bytes; (p = memchr(p, '\n', (size_t)(at - p))) != NULL; p++)
        line++;
    return line;
}

/* Words a refusal about the line being read. */
__attribute__((format(printf, 4, 5))) static line_kind refuse(const text *t, lw_error *err,
                                                              const char *remedy, const char *format, ...)
{
    char message[400];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(message, sizeof message, format, arguments);
    va_end(arguments);
    lw_fail_at(err, LW_BAD_DATA, t->content->name, line_number(t, t->line), remedy, "%s", message);
    return LINE_REFUSED;
}

/* A field as it can be shown in a message. */
static const char *shown(const char *from, const char *to, char word[32])
{
    size_t n = 0;
    for (; from < to && n < 24; from++)
        word[n++] = *from >= 32 && *from < 127 ? *from : '?';
    snprintf(word + n, 32 - n, "%s", from < to ? "..." : "");
    return word;
}

static bool is_number(const char *from, const char *to, char mark)
{
    double value;
    return lw_number(from, mark, &value) == to;
}

/* The words by which programs write what is not a number. */
static bool is_not_finite(const char *from, const char *to)
{
    static const char *const words[] = {"nan", "inf", "infinity", "1.#", "#n", NULL};
    from += from < to && (*from == '-' || *from == '+');
    for (int i = 0; words[i] != NULL; i++) {
        size_t length = strlen(words[i]), k = 0;
        bool whole = words[i][length - 1] != '#' && words[i][0] != '#';
        while (k < length && from + k < to && (from[k] == words[i][k] || (from[k] | 32) == words[i][k]))
            k++;
        if (k == length && (!whole || from + k == to))
            return true;
    }
    return false;
}

/* Takes the next field of a line: [*from, *to), with *p after its separator. False at the line's end. */
static bool next_field(char separator, const char **p, const char *eol, const char **from, const char **to)
{
    *from = *p;
    if (*p >= eol)
        return false;
    const char *q = *p;
    while (q < eol && (separator == ' ' ? !is_blank(*q) : *q != separator))
        q++;
    *to = q;
    while (*to > *from && is_blank((*to)[-1]))
        (*to)--;
    q += q < eol;
    while (q < eol && is_blank(*q))
        q++;
    *p = q;
    return true;
}

/* A row of names: words, no numbers (but the 2 of "2 theta"). */
static bool is_names(const char *p, const char *eol)
{
    bool letters = false;
    for (const char *from = p; p < eol; from = p) {
        while (p < eol && !is_blank(*p) && *p != ',' && *p != ';')
            p++;
        bool two = p == from + 1 && *from == '2' && p < eol && *p == ' ' && is_letter(p[1]);
        if (is_not_finite(from, p) || (is_number(from, p, '.') && !two))
            return false;
        for (const char *q = from; q < p; q++)
            letters = letters || is_letter(*q);
        p += p < eol;
    }
    return letters;
}

#define MARK_HELP "write decimals with a point, or separate the columns by semicolons"

/* Settles the form by the first row of numbers. */
static line_kind settle_form(text *t, const char *p, const char *eol, lw_error *err)
{
    bool semicolon = false, comma = false, point = false, blank = false, loose = true;
    for (const char *q = p; q < eol; q++) {
        semicolon = semicolon || *q == ';';
        point = point || *q == '.';
        if (is_blank(*q) && !is_blank(q[-1]) && q[-1] != ',' && q[-1] != ';' && *skip_blanks(q) != ',' &&
            *skip_blanks(q) != ';')
            blank = true;
        if (*q == ',') {
            comma = true;
            /* "20.0, 195" and "20.0 ,195": a comma beside a blank separates */
            loose = loose && (q + 1 == eol || is_blank(q[1]) || (q > p && is_blank(q[-1])));
        }
    }
    t->mark = '.';
    if (semicolon) {
        t->separator = ';';
        if (comma && point)
            return refuse(t, err, MARK_HELP " and leave out thousands separators",
                          "a row with points, commas and semicolons can be read in more than one way");
        t->mark = comma ? ',' : '.';
    } else if (comma && !blank) {
        t->separator = ',';
        if (!loose && memchr(p, ' ', (size_t)(eol - p)) != NULL && !point)
            for (const char *q = p + 1; q < eol; q++)
                if (*q == ',' && !is_blank(q[1]) && !is_blank(q[-1]))
                    return refuse(
                        t, err, MARK_HELP,
                        "commas with and without blanks in one row can be read in more than one way");
    } else {
        t->separator = ' ';
        if (comma && point)
            return refuse(t, err, MARK_HELP " and leave out thousands separators",
                          "a row with points, commas and blanks can be read in more than one way");
        t->mark = comma ? ',' : '.';
    }
    unsigned columns = 0;
    const char *from, *to;
    while (next_field(t->separator, &p, eol, &from, &to)) {
        char word[32];
        if (columns == 0 && !is_number(from, to, t->mark) && !is_not_finite(from, to))
            return refuse(t, err,
                          "a scan has rows of 2theta, counts and perhaps sigma; put # before other lines",
                          "'%s' is not a number", shown(from, to, word));
        columns++;
    }
    if (columns < 2)
        return refuse(
            t, err,
            "write 2theta (degrees) and counts side by side, separated by blanks, commas or semicolons",
            "one column only: an intensity without its angle, or an angle without its intensity");
    if (columns > COLUMNS_MOST)
        return refuse(t, err,
                      t->separator == ','
                          ? "keep 2theta, counts and sigma; if the comma is the decimal mark, separate "
                            "the columns by blanks or semicolons"
                          : "keep 2theta, counts and, if known, sigma",
                      "%u columns, expected 2 or 3", columns);
    t->columns = columns;
    return LINE_NUMBERS;
}

/* A comma among numbers that had no decimals so far decides that it is the decimal mark. */
static bool comma_is_mark(const text *t)
{
    return t->mark == '.' && t->separator != ',' &&
           (t->first == NULL || memchr(t->first, '.', (size_t)(t->line - t->first)) == NULL);
}

#define CUT_HELP "copy the file again, or delete its last line"

static line_kind refuse_field(const text *t, unsigned column, const char *from, const char *to, bool last,
                              lw_error *err)
{
    char word[32];
    shown(from, to, word);
    if (is_not_finite(from, to))
        return refuse(t, err, "delete the row or measure the point again",
                      "column %u is %s, not a finite number", column, word);
    if (last)
        return refuse(t, err, CUT_HELP, "the last line is cut short: column %u is '%s'", column, word);
    if (from == to)
        return refuse(t, err, "fill it or delete the row", "column %u is empty", column);
    if (memchr(from, t->mark == '.' ? ',' : '.', (size_t)(to - from)) != NULL)
        return refuse(t, err, "use one decimal mark throughout and no thousands separators",
                      "column %u is '%s', but other rows have a decimal %s", column, word,
                      t->mark == '.' ? "point" : "comma");
    if ((unsigned char)*from < 32 || (unsigned char)*from == 127)
        return refuse(t, err, "export the scan as text", "binary content (byte 0x%02x)",
                      (unsigned char)*from);
    return refuse(t, err,
                  t->first ? "correct or delete the row; put # before remarks" : "put # before header lines",
                  "column %u is '%s', not a number", column, word);
}

/* Reads one line of any kind into row[]. *next: start of the next line. */
static line_kind read_line(text *t, const char *p, double row[COLUMNS_MOST], const char **next, lw_error *err)
{
    const char *eol = end_of_line(t, p);
    bool last = eol == t->end;
    *next = last ? eol : eol + 1;
    t->line = p;
    p = skip_blanks(p);
    if (p >= eol || is_remark(*p))
        return LINE_BARE;
    for (const char *q = p + 1; q < eol; q++)
        if ((*q == '#' || *q == '!') && is_blank(q[-1])) {
            eol = q;
            break;
        }
    while (eol > p && is_blank(eol[-1]))
        eol--;
    if (t->columns == 0) {
        if (is_names(p, eol)) {
            if (t->header_row != NULL)
                return refuse(t, err, "put # before header lines", "a second row of words above the numbers");
            t->header_row = t->line;
            return LINE_BARE;
        }
        if (settle_form(t, p, eol, err) == LINE_REFUSED)
            return LINE_REFUSED;
    }
    const char *from, *to;
    unsigned columns = 0;
    while (next_field(t->separator, &p, eol, &from, &to)) {
        double value = 0;
        bool good = lw_number(from, t->mark, &value) == to && from < to;
        if (!good && comma_is_mark(t) && memchr(from, ',', (size_t)(to - from)) != NULL &&
            is_number(from, to, ',')) {
            t->mark = ',';
            good = lw_number(from, ',', &value) == to;
        }
        if (!good)
            return refuse_field(t, columns + 1, from, to,
                                last && t->first != NULL && columns + 1 == t->columns, err);
        if (columns < COLUMNS_MOST)
            row[columns] = value;
        columns++;
    }
    if (columns < t->columns && last && t->first != NULL)
        return refuse(t, err, CUT_HELP, "the last line is cut short: %u column%s, the others have %u",
                      columns, columns == 1 ? "" : "s", t->columns);
    if (columns != t->columns)
        return refuse(t, err, "every row must have the same columns; put # before remarks",
                      "%u column%s, the rows before have %u", columns, columns == 1 ? "" : "s", t->columns);
    if (t->first == NULL)
        t->first = t->line;
    return LINE_NUMBERS;
}

/* Decimals that the last number of a line shows. */
static long decimals(const text *t, const char *line)
{
    const char *eol = end_of_line(t, line), *q = eol;
    while (q > line && is_blank(q[-1]))
        q--;
    const char *last = q;
    while (q > line && q[-1] >= '0' && q[-1] <= '9')
        q--;
    return q > line && q[-1] == t->mark ? last - q : 0;
}

/* A last line without a line end, whose last number has fewer decimals than all of the many before it, was
 * cut within that number. Writers that drop trailing zeros do not show equal decimals 30 times in a row. */
static bool is_cut_number(const text *t)
{
    const char *begin = t->first, *line = t->line;
    long here = decimals(t, line), there = -1;
    size_t rows = 0;
    while (rows < 500 && line > begin) {
        const char *before = line - 1;
        while (before > begin && before[-1] != '\n')
            before--;
        line = before;
        const char *p = skip_blanks(line);
        if (*p == '\n' || is_remark(*p))
            continue;
        long shown_here = decimals(t, line);
        if (there >= 0 && shown_here != there)
            return false;
        there = shown_here;
        rows++;
    }
    return rows >= 30 && here < there;
}

static long line_of(const lw_columns *columns, size_t i)
{
    const text *t = columns->origin;
    const char *p = t->first;
    for (;;) {
        const char *q = skip_blanks(p);
        if (*q != '\n' && !is_remark(*q) && i-- == 0)
            return line_number(t, p);
        const char *eol = end_of_line(t, p);
        if (eol == t->end)
            return 0;
        p = eol + 1;
    }
}

/* Lines above the first row of numbers, without their comment mark. */
static const char *gather_header(const text *t, lw_arena *arena, lw_error *err)
{
    size_t size = (size_t)(t->first - t->content->bytes), used = 0;
    if (size > HEADER_MOST)
        size = HEADER_MOST;
    char *header = lw_arena_take(arena, size + 1, 1, err);
    if (header == NULL)
        return NULL;
    const char *end = t->content->bytes + size;
    for (const char *p = t->content->bytes; p < end;) {
        const char *eol = end_of_line(t, p), *next = eol + 1;
        if (eol > end)
            eol = end;
        while (p < eol && (is_blank(*p) || is_remark(*p)))
            p++;
        while (eol > p && is_blank(eol[-1]))
            eol--;
        if (eol > p) {
            if (used > 0)
                header[used++] = '\n';
            memcpy(header + used, p, (size_t)(eol - p));
            used += (size_t)(eol - p);
        }
        p = next;
    }
    header[used] = '\0';
    return header;
}

/* Rows that the content may hold by the length of the first ones; a guess, with something to spare. */
static size_t guess_rows(const text *t)
{
    size_t rows = 0;
    const char *p = t->first;
    for (; rows < 64 && p < t->end; rows++) {
        const char *eol = end_of_line(t, p);
        p = eol < t->end ? eol + 1 : eol;
    }
    size_t mean = (size_t)(p - t->first) / rows, left = (size_t)(t->end - t->first);
    return left / (mean > 0 ? mean : 1) * 17 / 16 + 64;
}

/* Makes room for more rows, keeping those that are there. */
static lw_status make_room(lw_rows *rows, lw_arena *arena, size_t room, lw_error *err)
{
    double *all = lw_arena_take_raw(arena, room * rows->columns, sizeof(double), err);
    if (all == NULL)
        return LW_OUT_OF_MEMORY;
    for (unsigned k = 0; k < rows->columns; k++) {
        if (rows->n > 0)
            memcpy(all + k * room, rows->column[k], rows->n * sizeof(double));
        rows->column[k] = all + k * room;
    }
    rows->room = room;
    return LW_OK;
}

static bool claims(const lw_content *content)
{
    (void)content;
    return true;
}

/* Reads all rows; the header goes into the columns. */
static lw_status read_rows(lw_engine *engine, text *t, lw_rows *rows, lw_columns *columns, lw_error *err)
{
    const lw_content *content = t->content;
    for (const char *p = content->bytes; p < t->end;) {
        double row[COLUMNS_MOST];
        const char *next;
        line_kind kind = read_line(t, p, row, &next, err);
        if (kind == LINE_REFUSED)
            return LW_BAD_DATA;
        p = next;
        if (kind == LINE_BARE)
            continue;
        rows->separator = t->separator;
        rows->mark = t->mark;
        rows->columns = t->columns;
        if (rows->n == 0)
            columns->header = gather_header(t, columns->arena, err);
        if (rows->n == rows->room) {
            size_t room = rows->n == 0 ? guess_rows(t) : rows->room + rows->room / 2;
            if (columns->header == NULL || make_room(rows, columns->arena, room, err) != LW_OK)
                return LW_OUT_OF_MEMORY;
        }
        for (unsigned k = 0; k < t->columns; k++)
            rows->column[k][rows->n] = row[k];
        rows->n++;
        size_t free_rows = rows->room - rows->n;
        p = lw_rows_read(rows, p, free_rows < ROWS_BETWEEN_POLLS ? free_rows : ROWS_BETWEEN_POLLS);
        lw_status status = lw_engine_poll(engine, err);
        if (status != LW_OK)
            return status;
    }
    if (rows->n == 0)
        return lw_fail_at(err, LW_BAD_DATA, content->name, 0,
                          "a scan has rows of 2theta (degrees) and counts", "the file has no numbers");
    if (t->end[-1] != '\n' && t->line > t->first && is_cut_number(t)) {
        refuse(t, err, CUT_HELP,
               "the last line is cut short: its last number has fewer decimals than all before");
        return LW_BAD_DATA;
    }
    return LW_OK;
}

static lw_status read_text(lw_engine *engine, lw_content *content, const lw_scan_options *options,
                           lw_columns *columns, lw_error *err)
{
    if (options->block != NULL)
        return lw_fail_at(err, LW_BAD_ARGUMENT, content->name, 0, "leave the option out",
                          "option 'block' is for CIF, and this file is columns of text");
    lw_status status = lw_content_check_text(content, err);
    if (status != LW_OK)
        return status;
    text *t = lw_arena_take(columns->arena, 1, sizeof *t, err);
    if (t == NULL)
        return LW_OUT_OF_MEMORY;
    *t = (text){.content = content, .end = content->bytes + content->size, .separator = ' ', .mark = '.'};
    lw_rows rows;
    lw_rows_begin(&rows, t->end);
    status = read_rows(engine, t, &rows, columns, err);
    if (status != LW_OK)
        return status;
    columns->n = rows.n;
    columns->two_theta_deg = rows.column[0];
    columns->intensity = rows.column[1];
    columns->sigma = rows.column[2];
    columns->line_of = line_of;
    columns->origin = t;
    if (t->separator == ',' && memchr(t->first, '.', (size_t)(t->end - t->first)) == NULL)
        columns->doubt = "if the comma is the decimal mark, separate the columns by blanks or semicolons";
    return LW_OK;
}

const lw_reader lw_text_reader = {
    .name = "columns of text (2theta, counts, sigma)",
    .claims = claims,
    .read = read_text,
};
