/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Pure profiles as a result tree. */
#include "profile/profiles.h"

lw_node *lw_profiles_tree(const lw_profiles *profiles, lw_arena *arena, lw_error *err)
{
    lw_node *root = lw_tree_new(arena, err);
    lw_add_text(root, "method", profiles->method, err);
    lw_add_text(root, "source", profiles->source, err);
    lw_node *list = lw_add_list(root, "profiles", err);
    for (size_t k = 0; k < profiles->n; k++) {
        const lw_profile *profile = &profiles->profile[k];
        const lw_reflection *r = &profile->line->reflection;
        char hkl[24];
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "hkl", lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl), err);
        lw_add_number(row, "s", profile->s_per_nm, err);
        lw_add_flag(row, "resolved", profile->resolved, err);
        lw_add_quantity(row, "breadth_s", profile->breadth_s,
                        "integral breadth of the sample's own line on s = 2 sin(theta)/lambda", err);
        lw_add_quantity(row, "breadth", profile->breadth_deg, "the same in degrees 2theta", err);
        lw_add_quantity(row, "gauss_s", profile->gauss_s, "integral breadth of its Gaussian part", err);
        lw_add_quantity(row, "lorentz_s", profile->lorentz_s, "integral breadth of its Lorentzian part", err);
        lw_add_vector(row, "length", profile->length_nm, profile->n_coefficients, "nm", err);
        lw_add_vector(row, "cosine", profile->cosine, profile->n_coefficients, "", err);
        lw_add_vector(row, "u_cosine", profile->u_cosine, profile->n_coefficients, "", err);
        lw_add_vector(row, "sine", profile->sine, profile->n_coefficients, "", err);
        lw_add_vector(row, "u_sine", profile->u_sine, profile->n_coefficients, "", err);
        lw_add_number(row, "truncated_at", (double)profile->truncated_at, err);
        lw_add_text(row, "truncation", profile->truncation, err);
        lw_add_text(row, "assumed", profile->assumed ? profile->assumed : "", err);
        lw_add_number(row, "refold_chi2_per_point", profile->refold_chi2, err);
        lw_add_number(row, "refold_freedom", profile->refold_freedom, err);
        lw_add_number(row, "refold_points", (double)profile->refold_points, err);
        lw_add_number(row, "refold_probability", profile->refold_p, err);
        lw_add_flag(row, "refold_failed", profile->refold_failed, err);
    }
    return err->status == LW_OK ? root : NULL;
}
