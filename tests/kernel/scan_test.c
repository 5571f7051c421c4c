/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reading of scans: numbers against strtod(), digests against FIPS 180-4, the measured files against what is
 * written about them in tests/data/measured/SOURCE.md, forms of text and CIF against what they say, the noise
 * estimate against noise of known strength, and memory refused at every place. */
#include "check.h"

#include "base/sha256.h"
#include "scan/number.h"
#include "scan/scan.h"

#include <locale.h>
#include <stdint.h>
#include <stdlib.h>
#include <zlib.h>

#define DATA LW_SOURCE_DIR "/tests/data/measured/"

/* xorshift64* of Vigna 2016, ACM Trans. Math. Softw. 42, 30; seeds are fixed */
static uint64_t random_state = 0x9E3779B97F4A7C15u;

static uint64_t random_bits(void)
{
    random_state ^= random_state >> 12;
    random_state ^= random_state << 25;
    random_state ^= random_state >> 27;
    return random_state * 0x2545F4914F6CDD1Du;
}

static double random_unit(void)
{
    return ((double)(random_bits() >> 11) + 0.5) / 9007199254740992.0;
}

static double random_normal(void)
{
    return sqrt(-2 * log(random_unit())) * cos(6.283185307179586 * random_unit());
}

static bool same_bits(double a, double b)
{
    return memcmp(&a, &b, sizeof a) == 0;
}

/* One number must be read as strtod() reads it, to the bit and to its last character. */
static bool as_strtod(const char *word)
{
    char text[1200] = {0};
    snprintf(text, sizeof text - LW_NUMBER_SPARE, "%s", word);
    char *end;
    double want = strtod(text, &end), got = -1;
    const char *stop = lw_number(text, '.', &got);
    if (stop == end && same_bits(got, want))
        return true;
    fprintf(stderr, "  %s: %.17g, strtod %.17g\n", text, got, want);
    return false;
}

static void test_numbers(void)
{
    /* hard roundings: halfway cases, limits of the subnormals and of overflow, long mantissas (known hard
     * cases of the literature: Paxson 1991; Clinger 1990; the 2.2250738585072011e-308 of 2010) */
    static const char *const hard[] = {"0",
                                       "-0",
                                       "0.0",
                                       "-0.0",
                                       "1",
                                       "+1",
                                       "5.",
                                       ".5",
                                       "-.5",
                                       "+.5e1",
                                       "1e0",
                                       "1E+2",
                                       "1e-2",
                                       "00020.00",
                                       "0.1",
                                       "9007199254740992",
                                       "9007199254740993",
                                       "9007199254740993.0",
                                       "9007199254740994",
                                       "9007199254740995",
                                       "900719925474099.3",
                                       "90071992547409.93",
                                       "0.9007199254740993",
                                       "4503599627370496.5",
                                       "4503599627370497.5",
                                       "12345678901234567",
                                       "123456789012345678",
                                       "1234567890123456789",
                                       "12345678901234567890",
                                       "18446744073709551615",
                                       "18446744073709551616",
                                       "99999999999999999999",
                                       "1e22",
                                       "1e23",
                                       "8.5e22",
                                       "9.5e-22",
                                       "1e-22",
                                       "1e-23",
                                       "2.2250738585072011e-308",
                                       "2.2250738585072014e-308",
                                       "4.9406564584124654e-324",
                                       "2.4703282292062327e-324",
                                       "2.4703282292062328e-324",
                                       "1.7976931348623157e308",
                                       "1.7976931348623158e308",
                                       "1.797693134862315808e308",
                                       "1e308",
                                       "1e-400",
                                       "6.9294956446009195e15",
                                       "3.7455744005952583e15",
                                       "9214843084008499",
                                       "0.500000000000000166533453693773481063544750213623046875",
                                       "0.3",
                                       "20.0131",
                                       "149.99987",
                                       "1.00000000000000011102230246251565404236316680908203125",
                                       "1.00000000000000011102230246251565404236316680908203124",
                                       "0.000000000000000000000000000001",
                                       "1e",
                                       "1e+",
                                       "1.5ex",
                                       "12.5.3",
                                       "1-2",
                                       "20.00 5",
                                       "0x10",
                                       "7e00000000000000000012",
                                       "100000000.00000001",
                                       "12345678.12345678",
                                       "123456781234567.8",
                                       "1234567812345678.5"};
    for (size_t i = 0; i < sizeof hard / sizeof hard[0]; i++)
        if (strcmp(hard[i], "0x10") != 0)
            CHECK(as_strtod(hard[i]));
    double value = -1;
    static const char hexadecimal[LW_NUMBER_SPARE + 8] = "0x10", nothing[LW_NUMBER_SPARE + 8] = "-x";
    CHECK(lw_number(hexadecimal, '.', &value) == hexadecimal + 1 && value == 0);
    CHECK(lw_number(nothing, '.', &value) == NULL);
    int wrong = 0;
    char word[400];
    for (int i = 0; i < 400000; i++) {
        uint64_t bits = random_bits();
        double any;
        memcpy(&any, &bits, sizeof any);
        if (!isfinite(any))
            continue;
        switch (i % 8) {
        case 0: snprintf(word, sizeof word, "%.17g", any); break;
        case 1: snprintf(word, sizeof word, "%.4f", random_unit() * 180); break;
        case 2: snprintf(word, sizeof word, "%.3f", random_unit() * 1e6); break;
        case 3:
            snprintf(word, sizeof word, "%.*f", (int)(bits % 20),
                     random_unit() * pow(10, (double)(bits % 17)));
            break;
        case 4: snprintf(word, sizeof word, "%llu", (unsigned long long)(bits >> (bits % 60))); break;
        case 5: snprintf(word, sizeof word, "%.*e", (int)(bits % 25), any); break;
        case 6:
            snprintf(word, sizeof word, "%llue%d", (unsigned long long)(bits >> 10), (int)(bits % 60) - 30);
            break;
        default: snprintf(word, sizeof word, "%.60f", random_unit() * 100); break;
        }
        wrong += !as_strtod(word);
    }
    CHECK(wrong == 0);
    /* the middle between two neighbouring doubles, written out in full, and a hair beside it */
    for (int i = 0; i < 2000; i++) {
        double low = random_unit() * 1000, high = nextafter(low, 2000);
        char *end = word + snprintf(word, sizeof word, "%.80Lf",
                                    (long double)low + ((long double)high - (long double)low) / 2);
        wrong += !as_strtod(word);
        end[-1] = '1';
        wrong += !as_strtod(word);
    }
    CHECK(wrong == 0);
    /* a host program with decimal commas changes nothing (skipped where the locale is not installed) */
    if (setlocale(LC_ALL, "de_DE.UTF-8") != NULL) {
        static const char long_number[LW_NUMBER_SPARE + 32] = "3.14159265358979323846264";
        CHECK(lw_number(long_number, '.', &value) != NULL && same_bits(value, 3.14159265358979323846264));
        setlocale(LC_ALL, "C");
    }
    static const char comma[LW_NUMBER_SPARE + 32] = "3,14159265358979323846264";
    CHECK(lw_number(comma, ',', &value) == comma + 25 && same_bits(value, 3.14159265358979323846264));
}

static void test_digest(void)
{
    /* NIST, examples with intermediate values to FIPS 180-4: SHA-256 of one and two blocks; NIST CAVP
     * SHA256ShortMsg and the long message of FIPS 180-2 appendix B.3 */
    static const char *const message[] = {"abc", "abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq",
                                          ""};
    static const char *const digest[] = {"ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad",
                                         "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1",
                                         "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"};
    char hex[65];
    for (int i = 0; i < 3; i++) {
        lw_sha256_hex(message[i], strlen(message[i]), hex);
        CHECK(strcmp(hex, digest[i]) == 0);
    }
    lw_sha256 hash;
    lw_sha256_begin(&hash);
    for (int i = 0; i < 1000000; i += 8)
        lw_sha256_add(&hash, "aaaaaaaa", 8);
    lw_sha256_end(&hash, hex);
    CHECK(strcmp(hex, "cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0") == 0);
    /* the two rungs, and any way of cutting the message, agree */
    unsigned char bytes[1024];
    for (size_t i = 0; i < sizeof bytes; i++)
        bytes[i] = (unsigned char)random_bits();
    for (size_t size = 0; size < 300; size++) {
        char again[65];
        lw_sha256_begin(&hash);
        hash.fast = false;
        lw_sha256_add(&hash, bytes, size / 3);
        lw_sha256_add(&hash, bytes + size / 3, size - size / 3);
        lw_sha256_end(&hash, again);
        lw_sha256_hex(bytes, size, hex);
        CHECK(strcmp(hex, again) == 0);
    }
}

static lw_scan *read_file(lw_engine *engine, const char *name, int noise)
{
    char path[512], text[900];
    snprintf(path, sizeof path, "%s%s", DATA, name);
    lw_scan_options options = lw_scan_defaults();
    options.noise = noise;
    lw_scan *scan = NULL;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_scan_read(engine, path, &options, &scan, &err) == LW_OK);
    if (scan == NULL)
        fprintf(stderr, "  %s\n", lw_error_text(&err, text, sizeof text));
    return scan;
}

static void test_measured(lw_engine *engine)
{
    /* points and angles as in SOURCE.md; first and last intensity as in the files; digests by sha256sum */
    static const struct {
        const char *name;
        size_t n;
        double first, last, y0, y1;
        int noise;
        lw_noise got;
        const char *hash;
    } file[] = {
        {"ptc/ceo2-reference.xy", 16150, 2.095, 82.840, 176.063, 70.5547, 3, LW_NOISE_SCALED, "fed0a059acb1"},
        {"ptc/ptc-tec10v50e.xy", 16550, 2.095, 84.840, 52241.4, 4649.27, 3, LW_NOISE_SCALED, "c6d469b0f49e"},
        {"ptc/capillary-empty.xy", 16550, 2.095, 84.840, 15028.8, 2679.68, 3, LW_NOISE_SCALED,
         "8d52e9ad0c74"},
        {"rb-pyrochlore/rbnb2o5f-lab-cu.xy", 8757, 5.0197, 119.9884, 27849, 11718, 0, LW_NOISE_COUNTS,
         "1dcfccd8557b"},
        {"tacr2o6/tacr2o6-lab.csv", 4251, 5.0, 90.0, 133, 177, 0, LW_NOISE_COUNTS, "8ed3d67939ae"},
        {"ceramic/mixed-ceramic.csv", 2989, 10.00616, 69.8187488, 6780, 2864, 0, LW_NOISE_COUNTS,
         "28b373a315d9"},
        {"pdcif/cod-1516218-profile.cif", 3955, 3.0, 89.988, 21381, 229, 0, LW_NOISE_COUNTS, "2493407efea6"},
        {"pdcif/rbnb2o5f-profile.cif", 8751, 5.1423, 120.0322, 27298, 11718, 0, LW_NOISE_SIGMA,
         "0192975e083e"}};
    for (size_t i = 0; i < sizeof file / sizeof file[0]; i++) {
        lw_scan *scan = read_file(engine, file[i].name, file[i].noise);
        if (scan == NULL)
            continue;
        CHECK(scan->n == file[i].n && scan->noise == file[i].got);
        CHECK_NEAR(scan->two_theta_deg[0], file[i].first, 1e-12);
        CHECK_NEAR(scan->two_theta_deg[scan->n - 1], file[i].last, 1e-12);
        CHECK(scan->intensity[0] == file[i].y0 && scan->intensity[scan->n - 1] == file[i].y1);
        CHECK(strncmp(lw_scan_hash(scan), file[i].hash, 12) == 0 && strlen(lw_scan_hash(scan)) == 64);
        CHECK((scan->sigma != NULL) == (scan->noise == LW_NOISE_SIGMA));
        lw_scan_free(scan);
    }
    /* wavelengths of the two CIFs, as written in them */
    lw_scan *scan = read_file(engine, "pdcif/cod-1516218-profile.cif", 0);
    CHECK(scan->has_radiation && scan->radiation.n == 2 && !scan->radiation.is_plain);
    CHECK_NEAR(scan->radiation.component[0].wavelength_nm, 0.1540598, 1e-15);
    CHECK_NEAR(scan->radiation.component[1].wavelength_nm, 0.1544390, 1e-15);
    CHECK_NEAR(scan->radiation.component[0].weight, 2.0 / 3, 1e-15);
    CHECK(scan->radiation.component[0].width_nm == 0 && scan->radiation.component[1].width_nm == 0);
    CHECK(scan->first_line == 87);
    CHECK_NEAR(scan->two_theta_deg[1], 3.022, 1e-9); /* inc 0.022 */
    lw_scan_free(scan);
    /* the same measurement as text and as CIF: 6 points were cut and 0.0438 deg added (SOURCE.md) */
    lw_scan *text = read_file(engine, "rb-pyrochlore/rbnb2o5f-lab-cu.xy", 0);
    scan = read_file(engine, "pdcif/rbnb2o5f-profile.cif", 0);
    CHECK(scan->radiation.n == 1 && scan->radiation.is_plain);
    CHECK_NEAR(scan->radiation.component[0].wavelength_nm, 0.15406, 1e-15);
    size_t differing = 0;
    double apart = 0;
    for (size_t i = 0; i < scan->n; i++) {
        differing += scan->intensity[i] != text->intensity[i + 6];
        double shift = scan->two_theta_deg[i] - text->two_theta_deg[i + 6] - 0.0438;
        apart = fabs(shift) > apart ? fabs(shift) : apart;
        /* 27298(166): the s.u. is the rounded (in the file sometimes up) square root */
        differing += fabs(scan->sigma[i] - sqrt(scan->intensity[i])) > 1.0;
    }
    CHECK(scan->n + 6 == text->n && differing == 0);
    CHECK(apart < 2.01e-4); /* both angles are rounded to 4 decimals, and so is the shift */
    CHECK(scan->sigma[0] == 166);
    lw_scan_free(scan);
    lw_scan_free(text);
}

/* Reads a text and compares it with three points. */
static lw_scan *read_text(lw_engine *engine, const char *text, size_t size, const lw_scan_options *options)
{
    lw_scan *scan = NULL;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_scan_read_bytes(engine, "text", text, size, options, &scan, &err) == LW_OK);
    if (scan == NULL) {
        char message[900];
        fprintf(stderr, "  %s\n  of: %.60s\n", lw_error_text(&err, message, sizeof message), text);
    }
    return scan;
}

static void test_forms(lw_engine *engine)
{
    /* every one says (20, 195), (20.02, 190), (20.05, 201) */
    static const char *const counts[] = {
        "20 195\n20.02 190\n20.05 201\n",
        "20.00\t195\n20.02\t190\n20.05\t201",
        "  20.00   195  \n\n  20.02   190  \n  20.05   201\n\n",
        "20.00,195\n20.02,190\n20.05,201\n",
        "20.00, 195\n20.02, 190\n20.05, 201\n",
        "20.00,195,\n20.02,190,\n20.05,201,\n",
        "20.00;195\r\n20.02;190\r\n20.05;201\r\n",
        "20,00;195\n20,02;190\n20,05;201\n",
        "20,00 195\n20,02 190\n20,05 201\n",
        "20,00\t195,0\n20,02\t190,0\n20,05\t201,0\n",
        "20;195\n20,02;190\n20,05;201\n",
        "20 195\n20,02 190\n20,05 201\n",
        "# remark\n! another\n; and one\n\"quoted\"\n20.00 195\n# between\n20.02 190 # behind\n20.05 201\n",
        "theta;count\n20.00;195\n20.02;190\n20.05;201\n",
        "2theta,counts\n20.00,195\n20.02,190\n20.05,201\n",
        "2 theta (deg)  intensity\n20.00 195\n20.02 190\n20.05 201\n",
        "\357\273\27720.00 195\n20.02 190\n20.05 201\n",
        "20.00 195\r20.02 190\r20.05 201\r",
        "20.00 195\n20.02 190\n20.05 201\n\x1a",
        "2.000e+01 1.95E2\n2.002e1 1.9e+2\n.2005e2 201.\n",
        "+20.00 +195\n20.02 190\n20.05 201\n",
        "# \xb0 degrees in another alphabet\n20.00 195\n20.02 190\n20.05 201\n",
        "data_a\n_pd_meas_2theta_range_min 20\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n20 195 "
        "20.02 190\n20.05\n201\n",
        "data_a\r\nloop_\r\n_pd_meas.2theta_scan\r\n_pd_meas.counts_total\r\n20 195\r\n20.02 190\r\n20.05 "
        "201\r\n",
        "DATA_a\n LOOP_\n_PD_MEAS_COUNTS_TOTAL\n_PD_MEAS_ANGLE_2THETA\n\n195 20 # note\n190 20.02\n201 "
        "20.05\n_a?\n_b .\n",
        "#\\#CIF_2.0\ndata_a\n_x [1 'two ]' {'a':3}]\n_y "
        "'''many\nlines'''\nloop_\n_pd_proc.2theta_corrected\n_pd_meas.counts_total\n20 195\n20.02 "
        "190\n20.05 201\n",
        "data_a\n_t\n\n# note\n;text with _names and loop_\n;\n_u "
        "'it's'\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n20 195\n20.01 ?\n20.02 190\n20.03 "
        ".\n20.05 201\n",
        "data_a\n_pd_calib_2theta_offset 0.5\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n19.5 "
        "195\n19.52 190\n19.55 201\n",
        "data_a\n_pd_calib_2theta_offset 0.5\nloop_\n_pd_proc_2theta_corrected\n_pd_meas_counts_total\n20 "
        "195\n20.02 190\n20.05 201\n",
        "data_text\n_title x\ndata_a\nloop_\n_pd_meas_point_id\n_pd_meas_2theta_scan\n1 20\n2 20.02\n3 "
        "20.05\nloop_\n_pd_proc_point_id\n_pd_meas_counts_total\n1 195\n2 190\n3 201\n"};
    for (size_t i = 0; i < sizeof counts / sizeof counts[0]; i++) {
        lw_scan *scan = read_text(engine, counts[i], strlen(counts[i]), NULL);
        if (scan == NULL)
            continue;
        CHECK(scan->n == 3 && scan->noise == LW_NOISE_COUNTS && scan->sigma == NULL);
        CHECK_NEAR(scan->two_theta_deg[0], 20, 1e-13);
        CHECK_NEAR(scan->two_theta_deg[1], 20.02, 1e-13);
        CHECK_NEAR(scan->two_theta_deg[2], 20.05, 1e-13);
        CHECK(scan->intensity[0] == 195 && scan->intensity[1] == 190 && scan->intensity[2] == 201);
        char hex[65];
        lw_sha256_hex(counts[i], strlen(counts[i]), hex);
        CHECK(strcmp(hex, lw_scan_hash(scan)) == 0);
        lw_scan_free(scan);
    }
    /* the same with sigma: (20, 19.5 +- 1.4), (20.02, -1.37 +- 0.04), (20.05, 2.01e3 +- 0.05e3) */
    static const char *const sigmas[] = {
        "20 19.5 1.4\n20.02 -1.37 0.04\n20.05 2010 50\n", "20,0;19,5;1,4\n20,02;-1,37;0,04\n20,05;2010;50\n",
        "data_a\nloop_\n_pd_proc_2theta_corrected\n_pd_proc_intensity_net\n20 19.5(14)\n20.02 "
        "-1.37(4)\n20.05 2.01e3(5)\n",
        "data_a\nloop_\n_pd_proc.2theta_corrected\n_pd_proc.intensity_total\n_pd_proc.intensity_total_su\n20 "
        "19.5 1.4\n20.02 -1.37 0.04\n20.05 2010 50\n",
        "data_a\nloop_\n_pd_proc_2theta_corrected\n_pd_proc_intensity_total\n_pd_proc_intensity_total_"
        "esd\n20 19.5 1.4\n20.02 -1.37 0.04\n20.05 2010. 50\n"};
    for (size_t i = 0; i < sizeof sigmas / sizeof sigmas[0]; i++) {
        lw_scan *scan = read_text(engine, sigmas[i], strlen(sigmas[i]), NULL);
        if (scan == NULL)
            continue;
        CHECK(scan->n == 3 && scan->noise == LW_NOISE_SIGMA && scan->intensity[1] == -1.37);
        CHECK_NEAR(scan->sigma[0], 1.4, 1e-15);
        CHECK_NEAR(scan->sigma[1], 0.04, 1e-15);
        /* 2.01e3(5): the bracket counts the last decimal shown, 0.01e3 */
        CHECK_NEAR(scan->sigma[2], 50, 1e-12);
        lw_scan_free(scan);
    }
    /* header lines without their marks */
    lw_scan *scan = read_text(engine, counts[12], strlen(counts[12]), NULL);
    CHECK(strcmp(scan->header, "remark\nanother\nand one\nquoted\"") == 0);
    CHECK(scan->first_line == 5);
    lw_scan_free(scan);
    /* grid in items; d and Q with a wavelength: Bragg's law, lambda = 2 d sin(theta), Q = 2 pi / d */
    static const char grid[] =
        "data_a\n_pd_meas_2theta_range_min 20\n_pd_meas_2theta_range_max 20.04\n"
        "_pd_meas_2theta_range_inc 0.02\nloop_\n_pd_meas_counts_total\n_pd_proc_ls_weight\n512 0.002 530 0.0 "
        "498 .\n";
    scan = read_text(engine, grid, sizeof grid - 1, NULL);
    CHECK(scan->n == 3 && !scan->has_radiation);
    CHECK_NEAR(scan->two_theta_deg[1], 20.02, 1e-13);
    lw_scan_free(scan);
    static const char spacing[] = "data_a\n_diffrn_radiation_wavelength.value "
                                  "2.0\nloop_\n_pd_proc_d_spacing\n_pd_proc_intensity_total\n"
                                  "2.0 10(1)\n1.41421356237309505 11(1)\n1.15470053837925153 12(1)\n";
    scan = read_text(engine, spacing, sizeof spacing - 1, NULL);
    CHECK_NEAR(scan->two_theta_deg[0], 60, 1e-12);
    CHECK_NEAR(scan->two_theta_deg[1], 90, 1e-12);
    CHECK_NEAR(scan->two_theta_deg[2], 120, 1e-12);
    lw_scan_free(scan);
    static const char wave[] = "data_b\n_diffrn_radiation_wavelength "
                               "2.0\ndata_a\nloop_\n_pd_proc_recip_len_Q\n_pd_proc_intensity_total\n"
                               "3.14159265358979324 10(1)\n4.44288293815836624 11(1)\n5.0 12(1)\n";
    scan = read_text(engine, wave, sizeof wave - 1, NULL);
    CHECK_NEAR(scan->two_theta_deg[0], 60, 1e-12);
    CHECK_NEAR(scan->two_theta_deg[1], 90, 1e-12);
    CHECK(scan->has_radiation && scan->radiation.is_plain);
    lw_scan_free(scan);
    /* a block by name, and the user's radiation before the file's */
    static const char blocks[] =
        "data_one\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n20 1 21 2 22 3\n"
        "data_Two\n_diffrn_radiation_wavelength 1.54\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n30 "
        "4 31 5 32 6 33 7\n";
    lw_scan_options options = lw_scan_defaults();
    lw_radiation radiation;
    CHECK(lw_radiation_plain(0.07, &radiation, NULL) == LW_OK);
    options.block = "two";
    options.radiation = &radiation;
    options.radiation_differs = true;
    options.range[0] = 30.5;
    options.range[1] = 33;
    scan = read_text(engine, blocks, sizeof blocks - 1, &options);
    CHECK(scan->n == 3 && scan->intensity[0] == 5 && scan->radiation.component[0].wavelength_nm == 0.07);
    lw_scan_free(scan);
}

/* Whole files of random rows: every value as strtod() reads it, by whatever path it was read. */
static void test_rows(lw_engine *engine)
{
    enum { ROWS = 4000 };
    static char text[ROWS * 120];
    static double want[3][ROWS];
    static const char *const separators[] = {" ", "\t", "   ", ",", ", ", ";", " ; "};
    lw_scan_options options = lw_scan_defaults();
    options.noise = 1;
    for (int set = 0; set < 56; set++) {
        int columns = 2 + set % 2, style = set / 14;
        const char *separator = separators[set % 7];
        size_t size = 0, row[ROWS];
        for (int i = 0; i < ROWS; i++) {
            char word[3][48];
            uint64_t bits = random_bits();
            /* style 3 is as instruments write: few layouts, which now and then change within one length */
            snprintf(word[0], sizeof word[0], "%.*f", style == 3 ? 3 + (bits % 16 == 0) : 3 + (int)(bits % 10),
                     20 + 0.01 * i + 0.001 * random_unit());
            for (int k = 1; k < 3; k++) {
                double value = random_unit() * pow(10, (double)(random_bits() % 9));
                if (style == 0)
                    snprintf(word[k], sizeof word[k], "%.3f", value);
                else if (style == 1)
                    snprintf(word[k], sizeof word[k], "%.*f", (int)(random_bits() % 12), value);
                else if (style == 2)
                    snprintf(word[k], sizeof word[k], random_bits() % 3 ? "%.9g" : "%.7e", value);
                else
                    snprintf(word[k], sizeof word[k], "%*.*f", set % 3 == 0 ? 9 : 0,
                             set % 5 == 0 ? 0 : 3 - (bits % 16 == 0), fmin(value, 99999));
            }
            row[i] = size;
            size += (size_t)snprintf(text + size, sizeof text - size, "%s%s%s%s%s%s%s",
                                     bits >> 60 == 0 ? " " : "", word[0], separator, word[1],
                                     columns == 3 ? separator : "", columns == 3 ? word[2] : "",
                                     bits >> 63 ? "\n" : " \r\n");
            for (int k = 0; k < columns; k++)
                want[k][i] = strtod(word[k], NULL);
        }
        options.noise = columns == 3 ? 2 : 1;
        /* a sigma that rounds to nought is not what is tested here */
        bool sound = true;
        for (int i = 0; i < ROWS; i++)
            sound = sound && (columns == 2 || want[2][i] > 0);
        if (!sound)
            options.noise = 1;
        lw_scan *scan = read_text(engine, text, size, &options);
        if (scan == NULL)
            continue;
        char hex[65];
        lw_sha256_hex(text, size, hex);
        CHECK(strcmp(hex, lw_scan_hash(scan)) == 0);
        CHECK(scan->n == ROWS);
        int wrong = 0;
        for (size_t i = 0; i < scan->n; i++)
            if (!same_bits(scan->two_theta_deg[i], want[0][i]) ||
                !same_bits(scan->intensity[i], want[1][i]) ||
                (scan->sigma != NULL && !same_bits(scan->sigma[i], want[2][i]))) {
                if (wrong++ == 0)
                    fprintf(stderr, "  set %d: %.60s\n", set, text + row[i]);
            }
        CHECK(wrong == 0);
        lw_scan_free(scan);
    }
}

static void test_gzip(lw_engine *engine)
{
    static char plain[40000], packed[40000];
    size_t size = 0;
    for (int i = 0; i < 2000; i++)
        size += (size_t)snprintf(plain + size, sizeof plain - size, "%.3f %d\n", 20 + 0.01 * i,
                                 (int)(random_bits() % 9000));
    lw_scan *want = read_text(engine, plain, size, NULL);
    /* in one member, and cut within a line into two (RFC 1952 section 2.2), with padding behind */
    for (int parts = 1; parts <= 2; parts++) {
        size_t used = 0;
        for (int part = 0; part < parts; part++) {
            size_t from = part == 0 ? 0 : size / 2 + 3, to = parts == 1 || part == 1 ? size : size / 2 + 3;
            z_stream stream = {0};
            CHECK(deflateInit2(&stream, 6, Z_DEFLATED, 15 + 16, 8, Z_DEFAULT_STRATEGY) == Z_OK);
            stream.next_in = (unsigned char *)plain + from;
            stream.avail_in = (unsigned)(to - from);
            stream.next_out = (unsigned char *)packed + used;
            stream.avail_out = (unsigned)(sizeof packed - used);
            CHECK(deflate(&stream, Z_FINISH) == Z_STREAM_END);
            used += stream.total_out;
            deflateEnd(&stream);
        }
        for (int pad = 0; parts == 2 && pad < 9 && used < sizeof packed; pad++)
            packed[used++] = 0;
        lw_scan *scan = read_text(engine, packed, used, NULL);
        CHECK(scan->n == want->n && memcmp(scan->intensity, want->intensity, want->n * sizeof(double)) == 0);
        CHECK(memcmp(scan->two_theta_deg, want->two_theta_deg, want->n * sizeof(double)) == 0);
        char hex[65];
        lw_sha256_hex(packed, used, hex);
        CHECK(strcmp(hex, lw_scan_hash(scan)) == 0); /* of the file's own bytes */
        lw_scan_free(scan);
    }
    lw_scan_free(want);
}

static void test_points(lw_engine *engine)
{
    double x[] = {20, 20.1, 20.3, 20.4, 20.5}, y[] = {10, 12, 8, 4, 5}, sigma[] = {1, 2, 3, 4, 5};
    lw_scan *scan = NULL, *cropped = NULL;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_scan_make(engine, "made", 5, x, y, sigma, NULL, &scan, &err) == LW_OK);
    CHECK(scan->noise == LW_NOISE_SIGMA && lw_scan_hash(scan)[0] == '\0' && strcmp(scan->file, "made") == 0);
    bool inside = false;
    CHECK_NEAR(lw_scan_at(scan, 20.2, &inside), 10, 1e-12);
    CHECK(inside);
    CHECK(lw_scan_at(scan, 20, NULL) == 10 && lw_scan_at(scan, 20.5, NULL) == 5 &&
          lw_scan_at(scan, 20.3, NULL) == 8);
    CHECK(lw_scan_at(scan, 19.99, &inside) == 0 && !inside);
    CHECK(lw_scan_at(scan, NAN, &inside) == 0 && !inside);
    CHECK(lw_scan_crop(scan, 20.1, 20.4, &cropped, &err) == LW_OK);
    CHECK(cropped->n == 3 && cropped->two_theta_deg[0] == 20.1 && cropped->sigma[2] == 4);
    lw_scan_free(cropped);
    CHECK(lw_scan_crop(scan, 20.1, 20.35, &cropped, &err) == LW_BAD_ARGUMENT && cropped == NULL);
    CHECK_CONTAINS(err.message, "only 2 points lie between 20.1 and 20.35");
    err = LW_ERROR_NONE;
    CHECK(lw_scan_crop(scan, 21, 20, &cropped, &err) == LW_BAD_ARGUMENT);
    lw_scan_free(scan);
    err = LW_ERROR_NONE;
    x[2] = 20.1;
    CHECK(lw_scan_make(engine, "made", 5, x, y, NULL, NULL, &scan, &err) == LW_BAD_DATA);
    CHECK_CONTAINS(err.message, "point 3: 2theta 20.1 degrees is there twice");
    err = LW_ERROR_NONE;
    CHECK(lw_scan_read(engine, DATA "not-there.xy", NULL, &scan, &err) == LW_IO);
    CHECK_CONTAINS(err.file, "not-there.xy");
    err = LW_ERROR_NONE;
    CHECK(lw_scan_read(engine, DATA, NULL, &scan, &err) == LW_IO);
    CHECK_CONTAINS(err.message, "folder");
    lw_scan_free(NULL);
}

static void test_noise(lw_engine *engine)
{
    /* Scaled noise of known factor and neighbour correlation rho, made as (e[i] + b e[i-1]) / sqrt(1 + b^2)
     * with rho = b / (1 + b^2), on a falling background with 12 lines of 3 to 6 steps width. The mean over 20
     * scans must meet the truth within the bias of 2 % that clipping and the median level may leave, plus 4
     * standard deviations of the mean, which the scatter of the 20 gives. */
    enum { N = 16000, SCANS = 20 };
    static double x[N], y[N];
    static const double given[][2] = {{3.7, 0}, {0.8, 0.28}, {12, 0.45}};
    lw_scan_options options = lw_scan_defaults();
    options.noise = 3;
    for (size_t set = 0; set < 3; set++) {
        double rho = given[set][1], b = rho > 0 ? (1 - sqrt(1 - 4 * rho * rho)) / (2 * rho) : 0;
        double sum[2] = {0}, squares[2] = {0};
        for (int run = 0; run < SCANS; run++) {
            double before = random_normal();
            for (int i = 0; i < N; i++) {
                x[i] = 2 + 0.005 * i;
                double level = 200 + 5000 * exp(-x[i] / 10);
                for (int line = 0; line < 12; line++) {
                    double d = (x[i] - (9 + 5.5 * line)) / (0.0075 + 0.0007 * line);
                    level += 30000 / (1 + d * d);
                }
                double e = random_normal();
                y[i] = level + sqrt(given[set][0] * level / (1 + b * b)) * (e + b * before);
                before = e;
            }
            lw_scan *scan = NULL;
            CHECK(lw_scan_make(engine, "noise", N, x, y, NULL, &options, &scan, NULL) == LW_OK);
            double got[2] = {scan->variance_factor, scan->correlation};
            for (int k = 0; k < 2; k++) {
                sum[k] += got[k];
                squares[k] += got[k] * got[k];
            }
            lw_scan_free(scan);
        }
        double mean[2], of_mean[2];
        for (int k = 0; k < 2; k++) {
            mean[k] = sum[k] / SCANS;
            of_mean[k] = sqrt((squares[k] / SCANS - mean[k] * mean[k]) / (SCANS - 1));
        }
        printf("noise: factor %.3f +- %.3f of %.3f, correlation %.4f +- %.4f of %.3f\n", mean[0], of_mean[0],
               given[set][0], mean[1], of_mean[1], rho);
        CHECK_NEAR(mean[0], given[set][0], 0.02 * given[set][0] + 4 * of_mean[0]);
        CHECK_NEAR(mean[1], rho, 0.01 + 4 * of_mean[1]);
        CHECK(of_mean[0] < 0.02 * given[set][0]); /* or the bounds above would say nothing */
    }
    /* without noise nothing is made up */
    for (int i = 0; i < N; i++)
        y[i] = 1000;
    lw_scan *scan = NULL;
    CHECK(lw_scan_make(engine, "flat", N, x, y, NULL, &options, &scan, NULL) == LW_OK);
    CHECK(scan->variance_factor > 0 && scan->variance_factor < 1e-9 && scan->correlation == 0);
    lw_scan_free(scan);
}

/* Memory that refuses the call number `refuse_at`, and counts what is out. */
typedef struct counting {
    long calls, refuse_at, out;
} counting;

static void *counting_resize(void *user, void *block, size_t old_size, size_t new_size)
{
    counting *c = user;
    if (new_size == 0) {
        c->out -= block != NULL ? (long)old_size : 0;
        free(block);
        return NULL;
    }
    if (c->calls++ == c->refuse_at)
        return NULL;
    void *grown = realloc(block, new_size);
    if (grown != NULL)
        c->out += (long)new_size - (block != NULL ? (long)old_size : 0);
    return grown;
}

static void test_refused_memory(void)
{
    static const char cif[] = "data_a\n_diffrn_radiation_wavelength "
                              "1.54\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n20 1 21 2 22 3\n";
    static const char text[] = "# header\n20 1 1\n21 2 1\n22 3 1\n";
    unsigned char packed[200];
    z_stream stream = {0};
    CHECK(deflateInit2(&stream, 6, Z_DEFLATED, 15 + 16, 8, Z_DEFAULT_STRATEGY) == Z_OK);
    stream.next_in = (unsigned char *)(uintptr_t)text;
    stream.avail_in = sizeof text - 1;
    stream.next_out = packed;
    stream.avail_out = sizeof packed;
    CHECK(deflate(&stream, Z_FINISH) == Z_STREAM_END);
    size_t packed_size = stream.total_out;
    deflateEnd(&stream);
    const char *bytes[] = {cif, text, (const char *)packed};
    const size_t size[] = {sizeof cif - 1, sizeof text - 1, packed_size};
    for (int i = 0; i < 3; i++) {
        lw_status status = LW_OUT_OF_MEMORY;
        long n = 0;
        for (; n < 200 && status != LW_OK; n++) {
            counting c = {.refuse_at = n};
            lw_engine engine;
            lw_engine_begin(&engine);
            engine.allocator = (lw_allocator){counting_resize, &c};
            lw_scan_options options = lw_scan_defaults();
            options.range[0] = 19;
            options.range[1] = 23;
            lw_scan *scan = NULL;
            lw_error err = LW_ERROR_NONE;
            status = lw_scan_read_bytes(&engine, "m", bytes[i], size[i], &options, &scan, &err);
            CHECK(status == LW_OK || (status == LW_OUT_OF_MEMORY && err.status == status && scan == NULL));
            lw_scan_free(scan);
            CHECK(c.out == 0);
            lw_engine_end(&engine);
        }
        CHECK(status == LW_OK && n > 2);
    }
}

int main(void)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    test_numbers();
    test_digest();
    test_measured(&engine);
    test_forms(&engine);
    test_rows(&engine);
    test_gzip(&engine);
    test_points(&engine);
    test_noise(&engine);
    test_refused_memory();
    lw_engine_end(&engine);
    return lw_checks_end();
}
