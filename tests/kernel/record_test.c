/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Records: what is written reads back bit-equal, files are replaced whole or not at all, and what a
 * person sees (figures, report) is drawn, escaped and self-contained. */
#include "check.h"

#include "record/cif.h"
#include "record/csv.h"
#include "record/curve.h"
#include "record/file.h"
#include "record/gnuplot.h"
#include "record/json.h"
#include "record/notes.h"
#include "record/process.h"
#include "record/report.h"
#include "record/typeset.h"
#include "scan/scan.h"

#include <dirent.h>
#include <errno.h>
#include <float.h>
#include <locale.h>
#include <signal.h>
#include <stdint.h>
#include <stdlib.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

static lw_engine engine;
static lw_arena arena;
static char folder[64];

static const char *in_folder(const char *name)
{
    static char path[4][256];
    static int turn;
    turn = (turn + 1) % 4;
    snprintf(path[turn], sizeof path[turn], "%s/%s", folder, name);
    return path[turn];
}

static int entries(const char *path)
{
    DIR *dir = opendir(path);
    int n = 0;
    while (dir != NULL && readdir(dir) != NULL)
        n++;
    if (dir != NULL)
        closedir(dir);
    return n - 2; /* . and .. */
}

static const char *content(const char *path)
{
    lw_error err = LW_ERROR_NONE;
    char *bytes = NULL;
    size_t size = 0;
    return lw_read_file(&arena, path, 1 << 26, &bytes, &size, &err) == LW_OK ? bytes : "(unreadable)";
}

static bool same_bits(double a, double b)
{
    return (isnan(a) && isnan(b)) || memcmp(&a, &b, sizeof a) == 0;
}

static bool same_text(const char *a, const char *b)
{
    return strcmp(a ? a : "", b ? b : "") == 0;
}

static bool same_tree(const lw_node *a, const lw_node *b)
{
    if (a->kind != b->kind || !same_text(a->name, b->name) || a->n != b->n)
        return false;
    switch (a->kind) {
    case LW_NODE_QUANTITY:
        return same_bits(a->quantity.value, b->quantity.value) && same_bits(a->quantity.u, b->quantity.u) &&
               a->quantity.kind == b->quantity.kind && same_bits(a->quantity.confidence, b->quantity.confidence) &&
               same_text(a->quantity.unit, b->quantity.unit) && same_text(a->definition, b->definition) &&
               same_text(a->source, b->source);
    case LW_NODE_NUMBER: return same_bits(a->number, b->number);
    case LW_NODE_TEXT: return same_text(a->text, b->text);
    case LW_NODE_FLAG: return a->flag == b->flag;
    case LW_NODE_VECTOR:
        for (size_t i = 0; i < a->n; i++)
            if (!same_bits(a->vector[i], b->vector[i]))
                return false;
        return true;
    case LW_NODE_GROUP:
    case LW_NODE_LIST: break;
    }
    const lw_node *p = a->first, *q = b->first;
    for (; p != NULL && q != NULL; p = p->next, q = q->next)
        if (!same_tree(p, q))
            return false;
    return p == NULL && q == NULL;
}

/* splitmix64 (Steele, Lea and Flood 2014): any bit pattern */
static uint64_t random_bits(uint64_t *state)
{
    uint64_t z = (*state += 0x9E3779B97F4A7C15u);
    z = (z ^ (z >> 30)) * 0xBF58476D1CE4E5B9u;
    z = (z ^ (z >> 27)) * 0x94D049BB133111EBu;
    return z ^ (z >> 31);
}

static lw_node *sample_tree(lw_error *err)
{
    lw_node *root = lw_tree_new(&arena, err);
    lw_node *method = lw_add_group(root, "williamson_hall", err);
    lw_node *size =
        lw_add_quantity(method, "size_volume", lw_quantity_of(18.42, 0.1 + 0.2, "nm"), "a mean of \"columns\"", err);
    size->source = "Langford & Wilson 1978";
    lw_add_quantity(method, "strain", lw_upper_limit(1e-4, 0.95, ""), NULL, err);
    lw_add_quantity(method, "larger", lw_lower_limit(120, 0.95, "nm"), NULL, err);
    lw_add_quantity(method, "unknown", lw_quantity_of(NAN, NAN, "nm"), NULL, err);
    lw_node *all = lw_add_list(root, "columns", err);
    for (int i = 0; i < 3; i++) {
        lw_node *row = lw_add_group(all, NULL, err);
        lw_add_number(row, "length", i / 3.0, err);
        lw_add_number(row, "value", -0.0, err);
        lw_add_number(row, "u", 5e-324, err);
    }
    lw_add_list(root, "nothing", err);
    lw_add_group(root, "no_one", err);
    lw_add_flag(root, "strict", true, err);
    lw_add_text(root, "note",
                "tab\t, newline\n, quote \", backslash \\, bell \a, \xC3\xA9 \xF0\x9F\x94\xAC, </script>", err);
    uint64_t state = 20240229;
    double numbers[2000];
    for (int i = 0; i < 2000;) {
        uint64_t bits = random_bits(&state);
        memcpy(&numbers[i], &bits, sizeof bits);
        i += isfinite(numbers[i]) ? 1 : 0;
    }
    numbers[0] = DBL_MAX;
    numbers[1] = DBL_TRUE_MIN;
    numbers[2] = -0.0;
    numbers[3] = 0.1;
    numbers[4] = 9007199254740993.0;
    lw_add_vector(root, "numbers", numbers, 2000, "", err);
    return root;
}

static void test_json(void)
{
    lw_error err = LW_ERROR_NONE;
    lw_node *root = sample_tree(&err), *back = NULL, *again = NULL;
    lw_text text, second;
    lw_text_begin(&text, &engine);
    lw_text_begin(&second, &engine);
    CHECK(lw_json_write(root, &text, &err) == LW_OK);
    CHECK(lw_json_read(&arena, text.bytes, text.n, NULL, &back, &err) == LW_OK);
    CHECK(back != NULL && same_tree(root, back));
    CHECK(lw_json_write(back, &second, &err) == LW_OK && strcmp(text.bytes, second.bytes) == 0);
    CHECK_CONTAINS(text.bytes, "{\"value\": 18.42, \"u\": 0.30000000000000004, \"unit\": \"nm\", \"definition\": "
                               "\"a mean of \\\"columns\\\"\", \"source\": \"Langford & Wilson 1978\"}");
    CHECK_CONTAINS(text.bytes, "{\"lower_limit\": 120, \"confidence\": 0.95, \"unit\": \"nm\"}");
    CHECK_CONTAINS(text.bytes, "{\"upper_limit\": 0.0001, \"confidence\": 0.95, \"unit\": \"\"}");
    CHECK_CONTAINS(text.bytes, "{\"value\": null, \"u\": null, \"unit\": \"nm\"}");
    CHECK_CONTAINS(text.bytes, "bell \\u0007");
    CHECK(strstr(text.bytes, "nan") == NULL && strstr(text.bytes, "inf") == NULL);

    /* through a file, and what a foreign hand may write */
    CHECK(lw_json_save(&engine, in_folder("tree.json"), root, &err) == LW_OK);
    CHECK(lw_json_load(&arena, in_folder("tree.json"), &again, &err) == LW_OK && same_tree(root, again));
    const char *foreign = "{\"a\": 12345678901234567890, \"b\": [], \"c\": [1, null, 2.5], \"d\": [1, \"x\"],"
                          "\"e\": {\"value\": 1, \"u\": 2, \"length\": 3}, \"f\": null, \"g\": \"caf\xC3\xA9\"}";
    CHECK(lw_json_read(&arena, foreign, strlen(foreign), "f.json", &back, &err) == LW_OK);
    CHECK(lw_node_number(back, "a", 0) == 12345678901234567890.0);
    CHECK(lw_node_get(back, "b")->kind == LW_NODE_LIST && lw_node_get(back, "b")->n == 0);
    CHECK(lw_node_get(back, "c")->kind == LW_NODE_VECTOR && isnan(lw_node_get(back, "c")->vector[1]));
    CHECK(lw_node_get(back, "d")->kind == LW_NODE_LIST && lw_node_get(back, "d")->n == 2);
    CHECK(lw_node_get(back, "e")->kind == LW_NODE_GROUP); /* {length, value, u} is no quantity */
    CHECK(isnan(lw_node_number(back, "f", 0)));

    lw_node *odd = lw_tree_new(&arena, &err);
    lw_add_text(odd, "latin1", "caf\xE9 \xED\xA0\x80 \xC0\x80", &err);
    second.n = 0;
    CHECK(lw_json_write(odd, &second, &err) == LW_OK);
    CHECK_CONTAINS(second.bytes, "caf\xEF\xBF\xBD ");
    CHECK(lw_json_read(&arena, second.bytes, second.n, NULL, &back, &err) == LW_OK);
    lw_text_end(&text);
    lw_text_end(&second);
}

static void check_refused(const char *json, size_t size, lw_status want, long line, const char *words)
{
    lw_error err = LW_ERROR_NONE;
    lw_node *root = NULL;
    CHECK(lw_json_read(&arena, json, size, "broken.json", &root, &err) == want);
    CHECK(err.status == want && strcmp(err.file, "broken.json") == 0);
    CHECK_NEAR((double)err.line, (double)line, 0);
    CHECK_CONTAINS(err.message, words);
    CHECK(err.remedy[0] != '\0');
}

static void test_json_refusals(void)
{
    check_refused("", 0, LW_BAD_DATA, 1, "not valid JSON");
    check_refused("{\n\"a\": 1,\n\"b\": tru }", 21, LW_BAD_DATA, 3, "not valid JSON");
    check_refused("{\"a\": 1, \"a\": 2}", 16, LW_BAD_DATA, 1, "duplicate");
    check_refused("{\"a\": 1e999}", 12, LW_BAD_DATA, 1, "overflow");
    check_refused("{\"a\": NaN}", 10, LW_BAD_DATA, 1, "not valid JSON");
    check_refused("{\"a\": \"\xE9\"}", 10, LW_BAD_DATA, 1, "decode byte");
    check_refused("[1, 2]", 6, LW_BAD_DATA, 1, "object");
    check_refused("{} x", 4, LW_BAD_DATA, 1, "not valid JSON");
    check_refused("{}", LW_JSON_MOST + 1, LW_BAD_DATA, 0, "too large");
    /* deep: ours at 200 levels, and the parser's own limit beyond */
    size_t depths[] = {150, 300, 100000};
    for (int d = 0; d < 3; d++) {
        size_t n = depths[d];
        char *deep = malloc(2 * n + 16);
        size_t at = (size_t)sprintf(deep, "{\"a\": ");
        memset(deep + at, '[', n);
        memset(deep + at + n, ']', n);
        strcpy(deep + at + 2 * n, "}");
        if (d > 0)
            check_refused(deep, strlen(deep), LW_BAD_DATA, d == 1 ? 0 : 1, d == 1 ? "nesting" : "depth");
        else {
            lw_error err = LW_ERROR_NONE;
            lw_node *root = NULL;
            CHECK(lw_json_read(&arena, deep, strlen(deep), NULL, &root, &err) == LW_OK);
        }
        free(deep);
    }
}

static void test_numbers(void)
{
    lw_text text;
    lw_text_begin(&text, &engine);
    lw_text_number(&text, 0.1);
    lw_text_add(&text, " ");
    lw_text_number(&text, 1.0 / 3);
    lw_text_add(&text, " ");
    lw_text_number(&text, 1e23);
    lw_text_add(&text, " ");
    lw_text_number(&text, -2.5e-300);
    CHECK(strcmp(text.bytes, "0.1 0.3333333333333333 1e+23 -2.5e-300") == 0);
    /* a host in a locale with a decimal comma still writes points */
    const char *commas[] = {"de_DE.UTF-8", "de_DE.utf8", "fr_FR.UTF-8", "nl_NL.UTF-8"};
    bool found = false;
    for (int i = 0; i < 4 && !found; i++)
        found = setlocale(LC_NUMERIC, commas[i]) != NULL;
    if (found) {
        text.n = 0;
        lw_text_number(&text, 1234.5625);
        CHECK(strcmp(text.bytes, "1234.5625") == 0);
    } else
        printf("skipped: no locale with a decimal comma is installed\n");
    setlocale(LC_NUMERIC, "C");
    lw_text_end(&text);
    lw_text_begin(&text, &engine);
    lw_unit_typeset(&text, "nm^-1");
    lw_text_add(&text, "|");
    lw_unit_typeset(&text, "deg");
    lw_text_add(&text, "|");
    lw_unit_typeset(&text, "degree");
    lw_text_add(&text, "|");
    lw_unit_typeset(&text, "m^-2 s^12");
    CHECK(strcmp(text.bytes, "nm⁻¹|°|degree|m⁻² s¹²") == 0);
    lw_text_end(&text);
}

static void test_csv(void)
{
    lw_error err = LW_ERROR_NONE;
    lw_node *root = lw_tree_new(&arena, &err), *rows = lw_add_list(root, "rows", &err);
    double hkl[] = {1, 1, 0};
    lw_node *row = lw_add_group(rows, NULL, &err);
    lw_add_text(row, "name", "plain", &err);
    lw_add_vector(row, "hkl", hkl, 3, "", &err);
    lw_add_quantity(row, "size", lw_quantity_of(18.5, 0.25, "nm"), NULL, &err);
    lw_add_number(lw_add_group(row, "fit", &err), "chi", 1.5, &err);
    row = lw_add_group(rows, NULL, &err);
    lw_add_text(row, "name", "a \"b\", c\nd", &err);
    lw_add_quantity(row, "size", lw_lower_limit(120, 0.95, "nm"), NULL, &err);
    lw_add_flag(row, "ok", false, &err);
    row = lw_add_group(rows, NULL, &err);
    lw_add_quantity(row, "size", lw_quantity_of(NAN, NAN, "nm"), NULL, &err);
    lw_text text;
    lw_text_begin(&text, &engine);
    CHECK(lw_csv_write(rows, &text, &err) == LW_OK);
    /* quotes doubled, fields with comma, quote or newline quoted: RFC 4180, section 2, rules 6 and 7 */
    CHECK(strcmp(text.bytes, "name,hkl,size_nm,u_size_nm,fit.chi,ok\n"
                             "plain,1 1 0,18.5,0.25,1.5,\n"
                             "\"a \"\"b\"\", c\nd\",,>120,,,false\n"
                             ",,,,,\n") == 0);
    lw_text_end(&text);
    lw_text_begin(&text, &engine);
    lw_error refused = LW_ERROR_NONE;
    CHECK(lw_csv_write(root, &text, &refused) == LW_BAD_ARGUMENT);
    lw_text_end(&text);
}

static bool stop_now(void *user)
{
    (void)user;
    return true;
}

static void check_cif_number(double value, double u, const char *want)
{
    lw_text text;
    lw_text_begin(&text, &engine);
    lw_cif_write_number(&text, value, u);
    CHECK(strcmp(text.bytes, want) == 0);
    lw_text_end(&text);
}

static void test_cif(void)
{
    check_cif_number(18.42, 0.63, "18.42(63)");
    check_cif_number(0.415691, 0.0000080, "0.4156910(80)");
    check_cif_number(-12346, 230, "-1.235e4(23)");
    check_cif_number(3.1e-7, 4.2e-8, "3.10e-7(42)");
    check_cif_number(0.1, 0, "0.1");
    check_cif_number(5, 0.9996, "5.0(10)");
    check_cif_number(NAN, 1, ".");

    lw_error err = LW_ERROR_NONE;
    lw_node *root = lw_tree_new(&arena, &err);
    lw_add_text(root, "pd_instr_location", "hall 3, 'east' wing", &err);
    lw_add_text(root, "a name", "data_x", &err);
    lw_add_text(root, "quoted", "it's", &err);
    lw_add_text(root, "both", "a' b\" c", &err);
    lw_add_text(root, "empty", "", &err);
    lw_add_text(root, "lines", "one\n;two \xCE\xB8", &err);
    lw_add_quantity(root, "cell_length_a", lw_quantity_of(4.15691, 0.00008, "angstrom"), NULL, &err);
    lw_add_quantity(root, "limit", lw_lower_limit(120, 0.95, "nm"), NULL, &err);
    lw_node *rows = lw_add_list(root, "rows", &err), *row = lw_add_group(rows, NULL, &err);
    lw_add_number(row, "refln_index_h", 1, &err);
    row = lw_add_group(rows, NULL, &err);
    lw_add_number(row, "refln_index_h", 2, &err);
    lw_add_text(row, "note", "weak", &err);
    double x[] = {20, 20.02, 20.04}, y[] = {101, 99, 120};
    lw_node *loop = lw_add_group(root, "scan", &err);
    lw_add_vector(loop, "pd_meas_2theta_scan", x, 3, "deg", &err);
    lw_add_vector(loop, "pd_meas_counts_total", y, 3, "", &err);
    lw_text text;
    lw_text_begin(&text, &engine);
    CHECK(lw_cif_write(root, "my scan", &text, &err) == LW_OK);
    CHECK(strcmp(text.bytes, "#\\#CIF_1.1\ndata_my_scan\n"
                             "_pd_instr_location \"hall 3, 'east' wing\"\n"
                             "_a_name 'data_x'\n_quoted it's\n_both \n;a' b\" c\n;\n_empty ''\n"
                             "_lines \n;one\n ;two ?\n;\n"
                             "_cell_length_a 4.156910(80)\n_limit '> 120 (95 %)'\n"
                             "\nloop_\n _refln_index_h\n _note\n1 ?\n2 weak\n"
                             "\nloop_\n _pd_meas_2theta_scan\n _pd_meas_counts_total\n"
                             "20 101\n20.02 99\n20.04 120\n") == 0);
    /* the scan reader of this project takes it, point by point */
    lw_scan_options options = lw_scan_defaults();
    lw_scan *scan = NULL;
    CHECK(lw_scan_read_bytes(&engine, "my.cif", text.bytes, text.n, &options, &scan, &err) == LW_OK);
    CHECK(scan != NULL && scan->n == 3 && memcmp(scan->two_theta_deg, x, sizeof x) == 0 &&
          memcmp(scan->intensity, y, sizeof y) == 0);
    lw_scan_free(scan);
    lw_text_end(&text);
    lw_add_vector(loop, "short", x, 2, "", &err);
    lw_error refused = LW_ERROR_NONE;
    lw_text_begin(&text, &engine);
    CHECK(lw_cif_write(root, "x", &text, &refused) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(refused.message, "short");
    lw_text_end(&text);
    CHECK(err.status == LW_OK);
}

static void test_files(void)
{
    lw_error err = LW_ERROR_NONE;
    const char *path = in_folder("file.txt"), *link_path = in_folder("link");
    CHECK(lw_write_file(&engine, path, "old", 3, &err) == LW_OK && strcmp(content(path), "old") == 0);
    CHECK(lw_write_file(&engine, path, "newer", 5, &err) == LW_OK && strcmp(content(path), "newer") == 0);
    CHECK(lw_write_file(&engine, path, "", 0, &err) == LW_OK && strcmp(content(path), "") == 0);
    CHECK(lw_write_file(&engine, path, "old", 3, &err) == LW_OK);

    /* a link is replaced; what it points at is left alone */
    CHECK(symlink(path, link_path) == 0);
    CHECK(lw_write_file(&engine, link_path, "mine", 4, &err) == LW_OK);
    struct stat here;
    CHECK(lstat(link_path, &here) == 0 && S_ISREG(here.st_mode) && strcmp(content(path), "old") == 0);
    CHECK(err.status == LW_OK);

    lw_error refused = LW_ERROR_NONE;
    CHECK(lw_write_file(&engine, in_folder("none/file"), "x", 1, &refused) == LW_IO);
    CHECK_CONTAINS(refused.message, "none/file");
    CHECK_CONTAINS(refused.remedy, "doesn't exist");
    refused = LW_ERROR_NONE;
    CHECK(lw_write_file(&engine, folder, "x", 1, &refused) == LW_IO);
    CHECK_CONTAINS(refused.message, "folder");
    refused = LW_ERROR_NONE;
    CHECK(lw_write_file(&engine, "/dev/null", "x", 1, &refused) == LW_IO); /* root could rename over it */
    CHECK_CONTAINS(refused.message, "device");
    CHECK(stat("/dev/null", &here) == 0 && S_ISCHR(here.st_mode));

    /* a file that can't be finished: the limit on file size stands in for a full disk, everywhere */
    struct rlimit before, small;
    CHECK(getrlimit(RLIMIT_FSIZE, &before) == 0);
    small = before;
    small.rlim_cur = 4096;
    char *large = calloc(1, 1 << 20);
    int files = entries(folder);
    refused = LW_ERROR_NONE;
    CHECK(setrlimit(RLIMIT_FSIZE, &small) == 0);
    lw_status status = lw_write_file(&engine, path, large, 1 << 20, &refused); /* SIGXFSZ must not end us */
    CHECK(setrlimit(RLIMIT_FSIZE, &before) == 0);
    CHECK(status == LW_IO && strcmp(content(path), "old") == 0 && entries(folder) == files);
    CHECK_CONTAINS(refused.message, path);
    CHECK_CONTAINS(refused.remedy, "ulimit -f");

    engine.cancelled = stop_now;
    CHECK(lw_write_file(&engine, path, large, 1 << 20, &err) == LW_CANCELLED && err.status == LW_CANCELLED);
    engine.cancelled = NULL;
    CHECK(strcmp(content(path), "old") == 0 && entries(folder) == files);
    err = LW_ERROR_NONE;
    free(large);

    /* nobody's folder: root may write everywhere, so only others can test it */
    if (geteuid() != 0) {
        CHECK(lw_make_folder(in_folder("locked"), &err) == LW_OK && chmod(in_folder("locked"), 0500) == 0);
        refused = LW_ERROR_NONE;
        CHECK(lw_write_file(&engine, in_folder("locked/file"), "x", 1, &refused) == LW_IO);
        CHECK_CONTAINS(refused.remedy, "permission");
    } else
        printf("skipped: permission test, as root may write everywhere\n");

    CHECK(lw_make_folder(in_folder("a/b/c/"), &err) == LW_OK && lw_make_folder(in_folder("a//b/c"), &err) == LW_OK);
    CHECK(entries(in_folder("a/b")) == 1);
    refused = LW_ERROR_NONE;
    CHECK(lw_make_folder(in_folder("file.txt/x"), &refused) == LW_IO);
    CHECK_CONTAINS(refused.message, "file.txt");

    const char *journal = in_folder("journal");
    CHECK(lw_append_line(&engine, journal, "one", &err) == LW_OK && lw_append_line(&engine, journal, "two", &err) == LW_OK);
    CHECK(strcmp(content(journal), "one\ntwo\n") == 0);
    CHECK(lw_write_file(&engine, journal, "one\ntw", 6, &err) == LW_OK); /* cut off by a crash */
    CHECK(lw_append_line(&engine, journal, "three", &err) == LW_OK && strcmp(content(journal), "one\ntw\nthree\n") == 0);
    refused = LW_ERROR_NONE;
    CHECK(symlink(path, in_folder("out")) == 0 && lw_append_line(&engine, in_folder("out"), "x", &refused) == LW_IO);

    char *bytes = NULL;
    size_t size = 0;
    refused = LW_ERROR_NONE;
    CHECK(lw_read_file(&arena, journal, 5, &bytes, &size, &refused) == LW_BAD_DATA);
    CHECK(err.status == LW_OK);
}

static double seconds(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

static lw_status run(const char *const *arguments, const char *input, double timeout, lw_text *out, int *code,
                     lw_error *err)
{
    lw_text complaint;
    lw_text_begin(&complaint, &engine);
    lw_process p = {.arguments = arguments, .package = "coreutils", .input = input, .n_input = strlen(input),
                    .timeout = timeout};
    lw_status status = lw_process_run(&p, out, &complaint, code, err);
    lw_text_end(&complaint);
    return status;
}

static void test_process(void)
{
    lw_error err = LW_ERROR_NONE;
    lw_text out;
    int code = -1;
    lw_text_begin(&out, &engine);
    const char *cat[] = {"cat", NULL}, *false_[] = {"false", NULL}, *sleep_[] = {"sleep", "30", NULL};
    const char *none[] = {"no-such-program", NULL}, *shell[] = {"printf", "%s", "$(id); `id` 'x'", NULL};
    size_t n = 3 << 20; /* more than a pipe holds, both ways */
    char *large = malloc(n + 1);
    memset(large, 'x', n);
    large[n] = '\0';
    CHECK(run(cat, large, 20, &out, &code, &err) == LW_OK && code == 0 && out.n == n);
    out.n = 0;
    CHECK(run(false_, large, 20, &out, &code, &err) == LW_OK && code == 1); /* reads nothing: SIGPIPE */
    CHECK(run(shell, "", 20, &out, &code, &err) == LW_OK && strcmp(out.bytes, "$(id); `id` 'x'") == 0);
    free(large);
    double start = seconds();
    lw_error refused = LW_ERROR_NONE;
    CHECK(run(sleep_, "", 0.3, &out, &code, &refused) == LW_IO && seconds() - start < 5);
    CHECK_CONTAINS(refused.message, "no answer within");
    refused = LW_ERROR_NONE;
    engine.cancelled = stop_now;
    CHECK(run(sleep_, "", 20, &out, &code, &refused) == LW_CANCELLED && seconds() - start < 5);
    engine.cancelled = NULL;
    refused = LW_ERROR_NONE;
    CHECK(run(none, "", 20, &out, &code, &refused) == LW_IO);
    CHECK_CONTAINS(refused.message, "no-such-program isn't installed");
    CHECK_CONTAINS(refused.remedy, "coreutils");
    CHECK(err.status == LW_OK);
    lw_text_end(&out);
}

#define EVIL "<b>&amp; 'q' \"d\" \\n `id` $(id) {x}_y^z @w %s </svg><script>alert(1)</script>"

static lw_figure *sample_figure(lw_error *err)
{
    static double x[20000], y[20000], u[8], low[50], high[50], residual[20000];
    lw_figure *f = lw_figure_new(&arena, "../a b", "Title " EVIL, err);
    lw_figure_label(f, LW_AXIS_X, "2θ", "deg", err);
    lw_figure_label(f, LW_AXIS_Y, "counts " EVIL, "nm^-1", err);
    lw_figure_label(f, LW_AXIS_LOWER_Y, "residual", "", err);
    f->caption = "Caption " EVIL;
    for (int i = 0; i < 20000; i++) {
        x[i] = 20 + 0.005 * i;
        y[i] = 10 + 1000 * exp(-pow((x[i] - 60) / 0.01, 2)); /* two points wide */
        residual[i] = sin(i);
    }
    lw_figure_series(f, LW_SERIES_LINE, 0, "line " EVIL, x, y, 20000, err);
    for (int i = 0; i < 8; i++)
        u[i] = i == 3 ? NAN : 40;
    lw_series *s = lw_figure_series(f, LW_SERIES_POINTS, 0, "points", x + 2000, y + 2000, 8, err);
    lw_series_errors(f, s, u, u, err);
    for (int i = 0; i < 50; i++) {
        low[i] = 100;
        high[i] = 200;
    }
    s = lw_figure_series(f, LW_SERIES_BAND, 0, "band", x, low, 50, err);
    lw_series_high(f, s, high, err);
    lw_figure_series(f, LW_SERIES_STEP, 0, "step", x, low, 50, err);
    lw_figure_series(f, LW_SERIES_TICKS, 0, "ticks", x + 5000, NULL, 3, err);
    lw_figure_series(f, LW_SERIES_LINE, 1, "", x, residual, 20000, err);
    lw_figure_note(f, 0, 60, 500, "note " EVIL, err);
    return f;
}

static bool have_gnuplot(void)
{
    lw_error err = LW_ERROR_NONE;
    lw_text out;
    int code = 1;
    const char *version[] = {"gnuplot", "--version", NULL};
    lw_text_begin(&out, &engine);
    bool have = run(version, "", 20, &out, &code, &err) == LW_OK && code == 0;
    lw_text_end(&out);
    return have;
}

static void test_curve(void)
{
    lw_error err = LW_ERROR_NONE;
    lw_figure *f = sample_figure(&err);
    lw_layout l = lw_layout_of(f, 900, 560, true);
    lw_pick pick = lw_pick_begin(f->first, &l);
    size_t i, n = 0, last = 0;
    double highest = 0;
    bool ordered = true;
    while (lw_pick_next(&pick, &i)) {
        ordered = ordered && (n == 0 || i > last);
        last = i;
        highest = fmax(highest, f->first->y[i]);
        n++;
    }
    CHECK(ordered && last == 19999 && n < 8000 && n > 1500);
    CHECK_NEAR(highest, 1010, 1e-9); /* the narrow peak survives */
    CHECK(strcmp(f->name, "___a_b") == 0);

    /* markers: one a pixel, so a flat series keeps about one a column, a steep flank all it has */
    static double x[20000], y[20000];
    for (int k = 0; k < 20000; k++) {
        x[k] = k;
        y[k] = k < 10000 ? 1 : k % 2 * 1000 + k / 100;
    }
    f = lw_figure_new(&arena, "m", "", &err);
    lw_figure_series(f, LW_SERIES_POINTS, 0, "", x, y, 20000, &err);
    l = lw_layout_of(f, 900, 560, true);
    pick = lw_pick_begin(f->first, &l);
    size_t flat = 0, high = 0;
    while (lw_pick_next(&pick, &i))
        if (i < 10000)
            flat++;
        else
            high += y[i] >= 1000;
    CHECK(flat > 380 && flat < 430 && high > 380 && high < 900);
    CHECK(err.status == LW_OK);
}

static void test_notes(void)
{
    lw_error err = LW_ERROR_NONE;
    double x[] = {0, 1, 2}, y[] = {0, 1, 2};
    lw_figure *f = lw_figure_new(&arena, "n", "", &err);
    lw_figure_series(f, LW_SERIES_POINTS, 0, "", x, y, 3, &err);
    for (int i = 0; i < 4; i++)
        lw_figure_note(f, 0, 1, 1, "a note", &err); /* all at one point */
    lw_figure_note(f, 0, 2, 2, "at the right edge of the frame", &err);
    lw_figure_note(f, 0, NAN, 2, "nowhere", &err);
    lw_layout l = lw_layout_of(f, 900, 560, true);
    lw_note_place place[LW_NOTES_MOST];
    lw_notes_place(f, &l, 0, 14, place);
    CHECK(place[0].x < 0); /* the newest note stands first in the list, and runs into the frame */
    for (int i = 1; i < 5; i++)
        for (int j = 1; j < i; j++)
            CHECK(place[i].x != place[j].x || place[i].y != place[j].y);
    CHECK(err.status == LW_OK);
}

static void test_figures(bool gnuplot)
{
    lw_error err = LW_ERROR_NONE;
    lw_figure *f = sample_figure(&err);
    CHECK(f != NULL && err.status == LW_OK);
    CHECK(strcmp(f->name, "___a_b") == 0); /* fit to name a file */
    if (gnuplot) {
        CHECK(lw_figure_save_as(&engine, f, in_folder("x.svg"), &err) == LW_OK);
        CHECK(lw_figure_save_as(&engine, f, in_folder("x.png"), &err) == LW_OK);
        CHECK(lw_figure_save_as(&engine, f, in_folder("x.pdf"), &err) == LW_OK);
        const char *svg = content(in_folder("x.svg"));
        CHECK(strlen(svg) > 20000 && strlen(svg) < 2000000);
        CHECK(strstr(svg, "<script") == NULL && strstr(svg, "uid=") == NULL);
        CHECK_CONTAINS(svg, "{x}_y^z @w %s"); /* literal, no markup */
        CHECK_CONTAINS(svg, "`id` $(id)");
        CHECK_CONTAINS(svg, "nm⁻¹");
        CHECK_CONTAINS(svg, "</svg>");
        CHECK(memcmp(content(in_folder("x.png")), "\x89PNG", 4) == 0);
        CHECK(memcmp(content(in_folder("x.pdf")), "%PDF", 4) == 0);
        /* nothing to draw, nothing finite, one point, a log axis without positive values */
        double bad[] = {NAN, INFINITY, -1, 1e308};
        for (int n = 0; n <= 4; n++)
            for (int log = 0; log < 2; log++) {
                lw_figure *odd = lw_figure_new(&arena, "odd", "", &err);
                lw_figure_series(odd, LW_SERIES_LINE, 0, "", bad, bad, (size_t)n, &err);
                lw_figure_series(odd, LW_SERIES_POINTS, 0, "p", bad, bad, (size_t)n, &err);
                odd->axis[LW_AXIS_X].log = odd->axis[LW_AXIS_Y].log = log;
                CHECK(lw_figure_save_as(&engine, odd, in_folder("odd.svg"), &err) == LW_OK);
            }
    }
    CHECK(err.status == LW_OK);
    lw_error refused = LW_ERROR_NONE;
    CHECK(lw_figure_save_as(&engine, f, in_folder("x.gif"), &refused) == LW_BAD_ARGUMENT);

    /* no gnuplot in PATH */
    char *path = strdup(getenv("PATH") ? getenv("PATH") : "");
    int files = entries(folder);
    setenv("PATH", "/nonexistent", 1);
    refused = LW_ERROR_NONE;
    CHECK(lw_figure_save_as(&engine, f, in_folder("y.png"), &refused) == LW_IO);
    CHECK_CONTAINS(refused.message, "gnuplot isn't installed");
    CHECK_CONTAINS(refused.remedy, "gnuplot-nox");
    CHECK(entries(folder) == files);
    setenv("PATH", path, 1);
    free(path);
}

static void test_figure_of_tree(void)
{
    lw_error err = LW_ERROR_NONE;
    double x[] = {1, 2, 3}, y[] = {4, 5, 6};
    lw_node *g = lw_tree_new(&arena, &err);
    lw_add_text(g, "title", "T", &err);
    lw_node *axis = lw_add_group(g, "x", &err);
    lw_add_text(axis, "label", "d*", &err);
    lw_add_text(axis, "unit", "nm^-1", &err);
    lw_add_flag(axis, "log", true, &err);
    lw_node *list = lw_add_list(g, "series", &err), *s = lw_add_group(list, NULL, &err);
    lw_add_text(s, "kind", "points", &err);
    lw_add_vector(s, "x", x, 3, "", &err);
    lw_add_vector(s, "y", y, 3, "", &err);
    lw_add_vector(s, "u_y", y, 3, "", &err);
    lw_figure *f = lw_figure_of_tree(&arena, g, &err);
    CHECK(f != NULL && f->axis[LW_AXIS_X].log && strcmp(f->axis[LW_AXIS_X].unit, "nm^-1") == 0);
    CHECK(f != NULL && f->first->n == 3 && f->first->u_y[2] == 6 && f->first->kind == LW_SERIES_POINTS);
    lw_node *wrong = lw_add_group(list, NULL, &err);
    lw_add_text(wrong, "kind", "pionts", &err);
    lw_error refused = LW_ERROR_NONE;
    CHECK(lw_figure_of_tree(&arena, g, &refused) == NULL && refused.status == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(refused.message, "nearest is points");
    CHECK(err.status == LW_OK);
}

static lw_report *sample_report(lw_error *err)
{
    lw_report *r = lw_report_new(&engine, "Report " EVIL, "sub " EVIL, err);
    lw_report_verdict(r, LW_VERDICT_FAIL, "verdict " EVIL, err);
    lw_report_heading(r, "heading " EVIL, err);
    lw_report_heading(r, "two", err);
    lw_report_text(r, "text " EVIL "\n\nparagraph two", err);
    lw_report_caution(r, "caution " EVIL, "be careful " EVIL, err);
    lw_node *root = lw_tree_new(&arena, err), *m = lw_add_group(root, "method " EVIL, err);
    m->definition = "definition " EVIL;
    m->source = "source " EVIL;
    lw_add_quantity(m, "size " EVIL, lw_quantity_of(18.42, 0.63, "nm" EVIL), "of " EVIL, err);
    lw_add_quantity(m, "larger", lw_lower_limit(120, 0.95, "nm^-1"), NULL, err);
    lw_add_text(m, "text " EVIL, EVIL, err);
    lw_node *list = lw_add_list(m, "rows " EVIL, err);
    for (int i = 0; i < 2; i++) {
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "a " EVIL, EVIL, err);
        lw_add_quantity(row, "size", lw_quantity_of(18.42, 0.63, "nm"), NULL, err);
        lw_add_quantity(row, "mixed", lw_quantity_of(18.42, 0.63, i ? "nm" : "mm"), NULL, err);
    }
    lw_node *texts = lw_add_list(m, "reasons", err);
    lw_add_text(texts, NULL, "because " EVIL, err);
    lw_node *remarks = lw_add_list(m, "remarks", err);
    lw_add_text(remarks, NULL, "remark " EVIL, err);
    lw_add_number(m, "chi2", 12345.678, err);
    lw_add_number(m, "chance", 1e-30, err);
    lw_add_number(m, "length_nm", 1.23456789, err);
    lw_report_result(r, m, err);
    lw_report_fold(r, "fold " EVIL, err);
    static const char *const columns[] = {"mixed", "size", "nothing", NULL};
    lw_report_table(r, "chosen", list, columns, err);
    lw_report_subheading(r, "below " EVIL, err);
    lw_report_fold_end(r, err);
    lw_report_table(r, "caption " EVIL, list, NULL, err);
    lw_report_figure(r, sample_figure(err), err);
    lw_report_figure(r, sample_figure(err), err);
    lw_report_provenance(r, m, err);
    return r;
}

static void test_report(bool gnuplot)
{
    lw_error err = LW_ERROR_NONE;
    lw_report *r = sample_report(&err);
    CHECK(err.status == LW_OK);
    CHECK(lw_report_save(&engine, r, in_folder("report.html"), &err) == LW_OK);
    const char *html = content(in_folder("report.html"));
    CHECK_CONTAINS(html, "<html lang=\"en\">");
    CHECK_CONTAINS(html, "Report &lt;b&gt;&amp;amp; &#39;q&#39; &quot;d&quot; \\n");
    CHECK_CONTAINS(html, "18.42(63)");
    CHECK_CONTAINS(html, "&gt; 120\xC2\xA0nm⁻¹ (95 %)");
    CHECK_CONTAINS(html, "<th scope=\"col\" class=\"n\">size <span class=\"unit\">nm</span></th>");
    CHECK_CONTAINS(html, "FAIL");
    CHECK_CONTAINS(html, "<p>To mind</p>\n<ul>\n<li>remark &lt;b&gt;");
    CHECK_CONTAINS(html, "<span>chi2\xC2\xA0" "12346</span> · <span>chance\xC2\xA0&lt; 0.0001</span> · <span>length\xC2\xA0" "1.23457\xC2\xA0nm</span>");
    CHECK_CONTAINS(html, "<details>\n<summary>fold &lt;b&gt;");
    CHECK_CONTAINS(html, "</h3>\n</details>\n");
    CHECK_CONTAINS(html, "<caption>chosen</caption>\n<thead><tr><th scope=\"col\" class=\"n\">mixed</th>"
                         "<th scope=\"col\" class=\"n\">size <span class=\"unit\">nm</span></th></tr>");
    int scripts = 0;
    for (const char *at = html; (at = strstr(at, "<script")) != NULL; at++)
        scripts++;
    CHECK(scripts == 1 && strstr(html, "<b>&amp;") == NULL); /* ours; none that came in as text */
    /* nothing from outside: every address is the name of a language, or a place on the page */
    for (const char *at = html; (at = strstr(at, "http")) != NULL; at++)
        CHECK(strncmp(at - 7, "xmlns=\"", 7) == 0 || strncmp(at - 13, "xmlns:xlink=\"", 13) == 0 ||
              strncmp(at, "http-equiv", 10) == 0);
    CHECK(strstr(html, "src=") == NULL && strstr(html, "@import") == NULL && strstr(html, "<link") == NULL);
    for (const char *at = html; (at = strstr(at, "href=")) != NULL; at++)
        CHECK(at[6] == '#');
    if (gnuplot) {
        CHECK(lw_report_warning(r) == NULL);
        CHECK_CONTAINS(html, "data-frames='[{\"box\":[");
        CHECK_CONTAINS(html, "id='f1-gpDot'");
        CHECK_CONTAINS(html, "id='f2-gpDot'");
        CHECK(strstr(html, "<?xml") == NULL);
    }
    lw_report_free(&r);
    CHECK(r == NULL);

    char *path = strdup(getenv("PATH") ? getenv("PATH") : "");
    setenv("PATH", "/nonexistent", 1);
    r = sample_report(&err);
    setenv("PATH", path, 1);
    free(path);
    CHECK(err.status == LW_OK && lw_report_save(&engine, r, in_folder("bare.html"), &err) == LW_OK);
    CHECK(lw_report_warning(r) != NULL);
    CHECK_CONTAINS(content(in_folder("bare.html")),
                   "This figure couldn&#39;t be drawn: the program gnuplot isn&#39;t installed");
    lw_report_free(&r);
    lw_report_free(&r);
}

/* Every allocation in turn is refused: an error, no crash, no leak (the sanitizer build counts). */
static long left;
static void *refuse_resize(void *user, void *block, size_t old_size, size_t new_size)
{
    lw_allocator system = lw_system_allocator();
    (void)user;
    if (new_size > old_size && left-- <= 0)
        return NULL;
    return system.resize(system.user, block, old_size, new_size);
}

static void test_memory(bool gnuplot)
{
    lw_error err = LW_ERROR_NONE;
    lw_node *root = sample_tree(&err);
    lw_text json;
    lw_text_begin(&json, &engine);
    lw_json_write(root, &json, &err);
    lw_engine poor;
    lw_engine_begin(&poor);
    poor.allocator.resize = refuse_resize;
    bool finished = false;
    int refusals = 0;
    for (long n = 0; n < 500 && !finished; n++) {
        left = n;
        lw_arena own;
        lw_arena_begin(&own, &poor);
        lw_text out;
        lw_text_begin(&out, &poor);
        lw_node *back = NULL;
        lw_error fault = LW_ERROR_NONE;
        lw_status status = lw_json_read(&own, json.bytes, json.n, NULL, &back, &fault);
        if (status == LW_OK)
            status = lw_json_write(back, &out, &fault);
        if (status == LW_OK)
            status = lw_csv_write(lw_node_get(back, "columns"), &out, &fault);
        if (status == LW_OK)
            status = lw_cif_write(lw_node_get(back, "williamson_hall"), "x", &out, &fault);
        lw_report *r = status == LW_OK ? lw_report_new(&poor, "t", "s", &fault) : NULL;
        if (r != NULL) {
            status = lw_report_result(r, back, &fault);
            if (status == LW_OK)
                status = lw_report_table(r, "c", lw_node_get(back, "columns"), NULL, &fault);
            if (status == LW_OK)
                status = lw_report_provenance(r, back, &fault);
            if (status == LW_OK)
                status = lw_report_html(r, &out, &fault);
        }
        finished = fault.status == LW_OK;
        if (!finished) {
            refusals++;
            if (fault.status != LW_OUT_OF_MEMORY)
                CHECK(fault.status == LW_OUT_OF_MEMORY);
        } else
            CHECK(status == LW_OK && r != NULL);
        lw_report_free(&r);
        lw_text_end(&out);
        lw_arena_end(&own);
    }
    CHECK(finished && refusals > 15);
    lw_text_end(&json);

    /* drawing too, down to the last refusal */
    lw_figure *figure = sample_figure(&err);
    finished = !gnuplot;
    for (long n = 0; n < 200 && !finished; n++) {
        left = n;
        lw_error fault = LW_ERROR_NONE;
        lw_report *r = lw_report_new(&poor, "t", "s", &fault);
        if (r != NULL)
            lw_report_figure(r, figure, &fault);
        finished = fault.status == LW_OK;
        if (!finished && fault.status != LW_OUT_OF_MEMORY)
            CHECK(fault.status == LW_OUT_OF_MEMORY);
        lw_report_free(&r);
    }
    CHECK(finished);
}

static void remove_all(const char *path)
{
    DIR *dir = opendir(path);
    for (struct dirent *e; dir != NULL && (e = readdir(dir)) != NULL;) {
        char child[512];
        if (strcmp(e->d_name, ".") == 0 || strcmp(e->d_name, "..") == 0)
            continue;
        snprintf(child, sizeof child, "%s/%s", path, e->d_name);
        struct stat here;
        if (lstat(child, &here) == 0 && S_ISDIR(here.st_mode)) {
            chmod(child, 0700);
            remove_all(child);
        } else
            unlink(child);
    }
    if (dir != NULL)
        closedir(dir);
    rmdir(path);
}

int main(void)
{
    lw_engine_begin(&engine);
    lw_arena_begin(&arena, &engine);
    strcpy(folder, "/tmp/lw-record-XXXXXX");
    CHECK(mkdtemp(folder) != NULL);
    bool gnuplot = have_gnuplot();
    if (!gnuplot)
        printf("skipped: drawing, as gnuplot (package gnuplot-nox) isn't installed\n");
    test_numbers();
    test_json();
    test_json_refusals();
    test_csv();
    test_cif();
    test_files();
    test_process();
    test_curve();
    test_notes();
    test_figures(gnuplot);
    test_figure_of_tree();
    test_report(gnuplot);
    test_memory(gnuplot);
    remove_all(folder);
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return lw_checks_end();
}
