/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Emission profiles: what the sums of the published Lorentzians must show. */
#include "literals.h"

/* Height per eV instead of per nm: dlambda/dE = -lambda^2/(hc). */
static double height_at(const lw_radiation *r, double energy)
{
    double wavelength_nm = LW_HC_EV_NM / energy;
    return lw_radiation_height(r, wavelength_nm) * wavelength_nm * wavelength_nm / LW_HC_EV_NM;
}

/* Energy of the maximum between two energies, by golden section. */
static double top_between(const lw_radiation *r, double low, double high)
{
    const double ratio = 0.61803398874989485;
    for (int i = 0; i < 80; i++) {
        double left = high - ratio * (high - low), right = low + ratio * (high - low);
        if (height_at(r, left) > height_at(r, right))
            high = right;
        else
            low = left;
    }
    return 0.5 * (low + high);
}

/* Energy between inside and outside at which the height is `level`. */
static double crossing(const lw_radiation *r, double inside, double outside, double level)
{
    for (int i = 0; i < 80; i++) {
        double middle = 0.5 * (inside + outside);
        if (height_at(r, middle) > level)
            inside = middle;
        else
            outside = middle;
    }
    return 0.5 * (inside + outside);
}

/* Tops and widths of the sums: root finding on the sums of Lorentzians in energy given by Hölzer et al.
 * (1997) Phys. Rev. A 56, 4554. Ours are Lorentzians in wavelength of equal width, which moves a top by
 * some (width/energy) x width: less than 1e-3 eV. */
static void check_sums(lua_State *L)
{
    const struct {
        const char *name;
        double top, fwhm;
        double half_unit; /* half of the last printed digit of the top */
    } row[] = {{"cu_ka", 8047.8262, 2.4079, 5e-5},
               {"co_ka", 6930.3849, 2.3846, 5e-5},
               {"fe_ka", 6404.008, 2.622, 5e-4},
               {"cr_ka", 5414.8142, 1.9318, 5e-5}};
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        lw_radiation r = literal_radiation(L, row[i].name);
        double top = top_between(&r, row[i].top - 1, row[i].top + 1);
        double half = 0.5 * height_at(&r, top);
        double low = crossing(&r, top, top - 5, half), high = crossing(&r, top, top + 5, half);
        CHECK_NEAR(top, row[i].top, row[i].half_unit + 5e-4);
        CHECK_NEAR(high - low, row[i].fwhm, 1e-3);
    }
}

static void check_copper(lua_State *L)
{
    lw_radiation r = literal_radiation(L, "cu_ka");
    /* Same source as above. */
    double top = top_between(&r, 8047, 8049), second = top_between(&r, 8027, 8029);
    double half = 0.5 * height_at(&r, top);
    double low = top - crossing(&r, top, top - 5, half), high = crossing(&r, top, top + 5, half) - top;
    CHECK_NEAR(low / high, 1.076, 2e-3);
    CHECK_NEAR(second, 8027.8936, 1e-3);
    CHECK_NEAR(height_at(&r, second) / height_at(&r, top), 0.4102, 2e-4);
    /* Shares: heights times widths of Table II, normalised. */
    static const double share[4] = {0.5791, 0.2359, 0.1050, 0.0800};
    static const double wavelength_nm[4] = {0.15405903, 0.15443983, 0.15446849, 0.15410633};
    static const double width_nm[4] = {0.43742e-4, 0.51307e-4, 0.68723e-4, 0.64321e-4};
    double sum = 0, centroid = 0;
    CHECK(r.n == 4);
    for (size_t i = 0; i < 4; i++) {
        CHECK_NEAR(r.component[i].weight, share[i], 5e-5);
        CHECK_NEAR(r.component[i].wavelength_nm, wavelength_nm[i], 6e-9);
        CHECK_NEAR(r.component[i].width_nm, width_nm[i], 6e-10);
        sum += r.component[i].weight;
        centroid += r.component[i].weight * r.component[i].wavelength_nm;
    }
    CHECK_NEAR(sum, 1, 1e-15);
    CHECK_NEAR(centroid, 0.15419563, 6e-9);
    CHECK(lw_radiation_wavelength(&r) == r.component[0].wavelength_nm);
    /* K-alpha2 to K-alpha1, from the shares: 0.3409/0.6591. */
    CHECK_NEAR((r.component[1].weight + r.component[2].weight) /
                   (r.component[0].weight + r.component[3].weight),
               0.5172, 2e-4);
    /* K-beta of Cu: Deslattes et al. (2003), 0.1392234 nm on the older hc, 1.0e-7 shorter. */
    CHECK_NEAR(r.k_beta_nm, 0.1392234, 6e-8);
}

/* Shares from heights and widths, which decide against the misprints of the source: Co 4 is 0.0086. */
static void check_shares(lua_State *L)
{
    static const double co[7] = {0.3786, 0.1970, 0.1440, 0.1271, 0.0947, 0.0500, 0.0086};
    static const double fe[7] = {0.2786, 0.2089, 0.1831, 0.1054, 0.0945, 0.0650, 0.0645};
    static const double cr[7] = {0.3776, 0.2706, 0.1315, 0.0841, 0.0730, 0.0538, 0.0094};
    const struct {
        const char *name;
        const double *share;
    } row[] = {{"co_ka", co}, {"fe_ka", fe}, {"cr_ka", cr}};
    for (size_t i = 0; i < 3; i++) {
        lw_radiation r = literal_radiation(L, row[i].name);
        CHECK(r.n == 7);
        for (size_t j = 0; j < 7; j++)
            CHECK_NEAR(r.component[j].weight, row[i].share[j], 6e-5);
    }
    /* Mo and Ag: Mendenhall et al. (2019); Deslattes et al. (2003). Å by hc of 1998, so 1e-7 apart. */
    lw_radiation mo = literal_radiation(L, "mo_ka"), ag = literal_radiation(L, "ag_ka");
    CHECK_NEAR(lw_radiation_wavelength(&mo), 0.07093165, 2e-8);
    CHECK_NEAR(mo.component[0].weight, 0.6641, 1e-6);
    CHECK_NEAR(mo.component[0].width_nm / mo.component[0].wavelength_nm, 6.389 / 17479.389, 1e-12);
    CHECK_NEAR(lw_radiation_wavelength(&ag), 0.05594218, 2e-8);
    CHECK_NEAR(ag.component[1].wavelength_nm, 0.05638131, 2e-8);
    CHECK_NEAR(ag.component[1].weight, 1.0 / 3, 1e-12);
}

/* hc/e of the SI of 2019: h = 6.62607015e-34 J s, c = 299792458 m/s, e = 1.602176634e-19 C. */
static void check_constant(void)
{
    CHECK_RELATIVE(LW_HC_EV_NM, 6.62607015e-34 * 299792458.0 / 1.602176634e-19 * 1e9, 1e-12);
}

static void check_refusals(lua_State *L)
{
    lw_radiation r, cu = literal_radiation(L, "cu_ka");
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_radiation_plain(1.5406, &r, &err) == LW_BAD_ARGUMENT); /* angstrom by mistake */
    CHECK_CONTAINS(err.remedy, "nm");
    err = LW_ERROR_NONE;
    CHECK(lw_radiation_plain(0.15405929, &r, &err) == LW_OK);
    CHECK(r.is_plain && r.n == 1 && lw_radiation_wavelength(&r) == 0.15405929);
    CHECK(!lw_radiation_same(&r, &cu) && lw_radiation_same(&cu, &cu));
    lw_radiation other = cu;
    other.component[3].wavelength_nm *= 1 + 0.9e-6;
    CHECK(lw_radiation_same(&cu, &other));
    other.component[3].wavelength_nm *= 1 + 0.2e-6;
    CHECK(!lw_radiation_same(&cu, &other));
    other = cu;
    other.component[2].weight = 0;
    CHECK(lw_radiation_settle(&other, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    other = cu;
    other.component[2].width_nm = NAN;
    CHECK(lw_radiation_settle(&other, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    CHECK(lw_radiation_add_energy(&other, 8047, 0, 957, 0, &err) ==
          LW_BAD_ARGUMENT); /* height without width */
    err = LW_ERROR_NONE;
    CHECK(lw_radiation_add_energy(&other, 8047, 2, 957, 0.5, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    CHECK(lw_radiation_add_energy(&other, -8047, 2, 957, 0, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    other = cu;
    other.k_beta_nm = 1.39;
    CHECK(lw_radiation_settle(&other, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    other = cu;
    other.component[1].wavelength_nm = 1.54;
    CHECK(lw_radiation_settle(&other, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    CHECK(lw_radiation_height(&r, 0.15405929) == 0); /* an ideal line has no height to speak of */
    memset(&other, 0, sizeof other);
    CHECK(lw_radiation_settle(&other, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    for (int i = 0; i < LW_EMISSION_MOST; i++)
        CHECK(lw_radiation_add_wavelength(&other, 0.15, 0, 1, &err) == LW_OK);
    CHECK(lw_radiation_add_wavelength(&other, 0.15, 0, 1, &err) == LW_BAD_ARGUMENT);
}

int main(void)
{
    lua_State *L = luaL_newstate();
    check_constant();
    check_sums(L);
    check_copper(L);
    check_shares(L);
    check_refusals(L);
    lua_close(L);
    return lw_checks_end();
}
