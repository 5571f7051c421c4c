/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How strain varies within crystals: mean square strain <eps^2(L)> over columns of length L. Each form is one
 * constant that describes itself; the list names them. Told as the mean square displacement
 * <Delta^2(L)> = L^2 <eps^2(L)> (nm^2), which is finite at L = 0; the Fourier coefficient of Gaussian displacements is
 * exp(-2 pi^2 s^2 <Delta^2>) (Warren & Averbach 1950 J. Appl. Phys. 21, 595). */
#ifndef LW_PHYSICS_STRAIN_H
#define LW_PHYSICS_STRAIN_H

#include <stdbool.h>

#define LW_STRAIN_PARAMETERS_MOST 2

typedef struct lw_strain_form {
    const char *name;
    const char *title;      /* as a person calls it */
    const char *source;     /* published source */
    int n;                  /* parameters */
    const char *parameter[LW_STRAIN_PARAMETERS_MOST];
    const char *unit[LW_STRAIN_PARAMETERS_MOST];
    double least[LW_STRAIN_PARAMETERS_MOST], most[LW_STRAIN_PARAMETERS_MOST]; /* bounds of the parameters */
    bool linear; /* <Delta^2> is linear in all parameters; if not, in the first alone */
    /* <Delta^2> at L >= 0 (nm) and its slopes to the parameters (NULL = not wanted) */
    double (*displacement)(const double *p, double length_nm, double *slopes);
    /* limit of <Delta^2>/L at L = 0 (nm), which makes tails that fall as 1/s^2, and its slopes */
    double (*kink)(const double *p, double *slopes);
    /* parameters that give the mean square strain `square` near the length */
    void (*start)(double square, double length_nm, double *p);
} lw_strain_form;

/* constant: eps^2 for every L.            Parameter: eps^2.
 * correlated: strain correlated along the column as exp(-t/xi). Parameters: eps0^2, ln(xi/nm).
 * gaussian_correlated: as exp(-t^2/(2 xi^2)).                 Parameters: eps0^2, ln(xi/nm).
 * voigt: eps^2 = b + a/L, Gaussian and Lorentzian breadths that grow with s. Parameters: b, a (nm).
 * dislocations: eps^2 = K f(L/R).                             Parameters: K, ln(R/nm). */
extern const lw_strain_form lw_strain_constant, lw_strain_correlated, lw_strain_gaussian_correlated, lw_strain_voigt,
    lw_strain_dislocations;
extern const lw_strain_form *const lw_strain_form_list[]; /* NULL-terminated */
const lw_strain_form *lw_strain_form_named(const char *name); /* NULL if unknown */

/* Wilkens' function f(eta), eta = L/R > 0, of restrictedly random dislocations, and its slope (NULL = not wanted).
 * Source: Wilkens (1970) in Fundamental Aspects of Dislocation Theory, NBS Spec. Publ. 317, 1195. */
double lw_wilkens(double eta, double *slope);

#endif
