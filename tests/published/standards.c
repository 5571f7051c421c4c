/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Every literal of standards/: readable with no environment, only known fields, a source each, names that
 * can't be mixed up, a cell that fits its group, and a density that fits cell and formula. */
#include "literals.h"

#include <ctype.h>
#include <dirent.h>

static const char *const KINDS[3] = {"radiation", "reference", "materials"};
static const char *const FIELDS[3][24] = {
    {"name", "title", "aliases", "components", "hc_ev_angstrom", "k_beta_energy_ev", "k_beta_nm", "source",
     NULL},
    {"name",
     "title",
     "aliases",
     "formula",
     "space_group",
     "setting",
     "unit",
     "cell",
     "expanded_uncertainty",
     "coverage_factor",
     "temperature_c",
     "unverified",
     "certificate",
     "domain_size_nm",
     "source",
     "stiffness_gpa",
     "stiffness_source",
     "burgers_nm",
     "density_kg_m3",
     "hazard",
     NULL},
    {"name", "title", "aliases", "formula", "space_group", "setting", "unit", "cell", "standard_uncertainty",
     "source", "stiffness_gpa", "stiffness_source", "burgers_nm", "density_kg_m3", "hazard", NULL}};

/* Names as look-up sees them: lower case, without blank, "_" and "-". */
enum { NAMES_MOST = 400, NAME_SIZE = 64 };
static char seen[NAMES_MOST][NAME_SIZE];
static const char *seen_in[NAMES_MOST];
static char stems[3][60][NAME_SIZE];
static int names, files[3];

static void note_name(const char *kind, const char *stem, const char *name)
{
    char plain[NAME_SIZE] = "";
    size_t n = 0;
    for (; *name != '\0' && n + 1 < sizeof plain; name++)
        if (strchr(" _-", *name) == NULL)
            plain[n++] = (char)tolower((unsigned char)*name);
    for (int i = 0; i < names; i++)
        if (strcmp(seen[i], plain) == 0 && strncmp(seen_in[i], kind, strlen(kind)) == 0) {
            bool own = strcmp(seen_in[i] + strlen(kind) + 1, stem) == 0;
            CHECK(own); /* an alias may repeat its own name, as "lab6" does "LaB6" */
            if (!own)
                fprintf(stderr, "%s: \"%s\" belongs to %s too\n", stem, plain, seen_in[i]);
        }
    CHECK(names < NAMES_MOST);
    if (names < NAMES_MOST) {
        static char places[NAMES_MOST][128];
        snprintf(places[names], sizeof places[names], "%s/%s", kind, stem);
        snprintf(seen[names], sizeof seen[names], "%s", plain);
        seen_in[names] = places[names];
        names++;
    }
}

static void list_files(int kind)
{
    char path[512];
    snprintf(path, sizeof path, "%s/standards/%s", LW_SOURCE_DIR, KINDS[kind]);
    DIR *folder = opendir(path);
    CHECK(folder != NULL);
    for (struct dirent *entry; folder != NULL && (entry = readdir(folder)) != NULL;) {
        char *dot = strrchr(entry->d_name, '.');
        if (dot != NULL && strcmp(dot, ".lua") == 0 && files[kind] < 60)
            snprintf(stems[kind][files[kind]++], NAME_SIZE, "%.*s", (int)(dot - entry->d_name),
                     entry->d_name);
    }
    if (folder != NULL)
        closedir(folder);
}

static void check_fields(lua_State *L, int kind, const char *stem)
{
    char text[700];
    literal_text(L, "name", text, sizeof text);
    CHECK(strcmp(text, stem) == 0);
    note_name(KINDS[kind], stem, text);
    literal_text(L, "title", text, sizeof text);
    CHECK(text[0] != '\0');
    note_name(KINDS[kind], stem, text);
    literal_text(L, "source", text, sizeof text);
    CHECK(text[0] != '\0');
    lua_getfield(L, -1, "aliases");
    for (lua_Integer i = 1; lua_istable(L, -1) && i <= (lua_Integer)lua_rawlen(L, -1); i++) {
        lua_geti(L, -1, i);
        note_name(KINDS[kind], stem, lua_tostring(L, -1));
        lua_pop(L, 1);
    }
    lua_pop(L, 1);
    for (lua_pushnil(L); lua_next(L, -2) != 0; lua_pop(L, 1)) {
        bool known = false;
        for (const char *const *field = FIELDS[kind]; *field != NULL; field++)
            known = known || strcmp(*field, lua_tostring(L, -2)) == 0;
        CHECK(known);
        if (!known)
            fprintf(stderr, "%s: unknown field %s\n", stem, lua_tostring(L, -2));
    }
}

/* Standard atomic weights, IUPAC 2021, abridged. */
static double atomic_weight(const char *symbol)
{
    static const struct {
        const char *symbol;
        double weight;
    } row[] = {{"H", 1.008},    {"B", 10.81},    {"O", 15.999},   {"F", 18.998},   {"Mg", 24.305},
               {"Al", 26.982},  {"Si", 28.085},  {"S", 32.06},    {"Ti", 47.867},  {"Fe", 55.845},
               {"Ni", 58.693},  {"Cu", 63.546},  {"Zn", 65.38},   {"Rb", 85.468},  {"Zr", 91.224},
               {"Nb", 92.906},  {"Ag", 107.868}, {"La", 138.905}, {"Ce", 140.116}, {"W", 183.84},
               {"Pt", 195.084}, {"Au", 196.967}};
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++)
        if (strcmp(row[i].symbol, symbol) == 0)
            return row[i].weight;
    return NAN;
}

/* g/mol of "Al2O3" or "CuSO4.5H2O". */
static double molar_mass(const char *formula)
{
    double sum = 0;
    long parts = 1;
    while (*formula != '\0') {
        char symbol[3] = "", *end;
        if (*formula == '.') {
            parts = strtol(formula + 1, &end, 10);
            formula = end;
            continue;
        }
        symbol[0] = *formula++;
        if (islower((unsigned char)*formula))
            symbol[1] = *formula++;
        long count = strtol(formula, &end, 10);
        sum += (double)(parts * (end == formula ? 1 : count)) * atomic_weight(symbol);
        formula = end;
    }
    return sum;
}

static void check_material(lua_State *L, const char *stem, bool reference)
{
    lw_material m = literal_material(L);
    char text[700];
    literal_text(L, "unit", text, sizeof text);
    CHECK(strcmp(text, "nm") == 0);
    CHECK(isfinite(molar_mass(m.formula)));
    if (m.has_stiffness) {
        char source[700];
        literal_text(L, "stiffness_source", source, sizeof source);
        CHECK(source[0] != '\0');
        /* Both go into one field of the material. */
        CHECK(strlen(source) + strlen(m.source) + sizeof "; stiffness: " < sizeof m.source);
        double gpa;
        lw_error err = LW_ERROR_NONE;
        CHECK(lw_young_modulus(&m, 1, 1, 1, &gpa, &err) == LW_OK && gpa > 20 && gpa < 600);
    }
    if (m.density_kg_m3 > 0) {
        /* Formula units in the cell must come out whole: density x volume x N_A/M. */
        double units = m.density_kg_m3 * lw_cell_volume(&m.cell) * 6.02214076e-1 / molar_mass(m.formula);
        bool whole = fabs(units / round(units) - 1) < 0.015 && units > 0.9;
        CHECK(whole);
        if (!whole)
            fprintf(stderr, "%s: %.4f formula units in the cell\n", stem, units);
    }
    if (m.burgers_nm > 0 && m.lattice == 'F')
        CHECK_NEAR(m.burgers_nm, m.cell.a / sqrt(2), 1e-5);
    if (m.burgers_nm > 0 && m.lattice == 'I')
        CHECK_NEAR(m.burgers_nm, m.cell.a * sqrt(3) / 2, 1e-5);
    if (m.burgers_nm > 0 && m.lattice == 'P')
        CHECK_NEAR(m.burgers_nm, m.cell.a, 1e-5);
    if (!reference)
        return;
    literal_text(L, "certificate", text, sizeof((lw_standard *)NULL)->certificate);
    CHECK(text[0] != '\0');
    CHECK(literal_number(L, "temperature_c") > 15 && literal_number(L, "temperature_c") < 30);
    double expanded = literal_inside(L, "expanded_uncertainty", "a"),
           k = literal_number(L, "coverage_factor");
    CHECK((expanded > 0) == (k >= 1));
    CHECK(expanded < 1e-3 * m.cell.a);
    /* A cell without its uncertainty, or known only from memory, must say so. */
    lua_getfield(L, -1, "unverified");
    bool unverified = lua_toboolean(L, -1);
    lua_pop(L, 1);
    CHECK(unverified || expanded > 0);
    if (unverified)
        CHECK_CONTAINS(m.source, "check against the certificate of your own jar");
}

int main(void)
{
    lua_State *L = luaL_newstate();
    for (int kind = 0; kind < 3; kind++) {
        list_files(kind);
        for (int i = 0; i < files[kind]; i++) {
            const char *stem = stems[kind][i];
            literal_open(L, KINDS[kind], stem);
            check_fields(L, kind, stem);
            if (kind > 0)
                check_material(L, stem, kind == 1);
            lua_pop(L, 1);
            if (kind == 0) {
                lw_radiation r = literal_radiation(L, stem);
                CHECK(strlen(r.source) > 40 && lw_radiation_wavelength(&r) > 0.05);
                CHECK(r.k_beta_nm == 0 || r.k_beta_nm < lw_radiation_wavelength(&r));
            }
            CHECK(lua_gettop(L) == 0);
        }
    }
    CHECK(files[0] >= 7 && files[1] >= 15 && files[2] >= 20);
    lua_close(L);
    return lw_checks_end();
}
