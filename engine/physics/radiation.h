/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Radiation: the emission spectrum of the beam as a sum of Lorentzians in wavelength. */
#ifndef LW_PHYSICS_RADIATION_H
#define LW_PHYSICS_RADIATION_H

#include "base/error.h"

#include <stdbool.h>
#include <stddef.h>

#define LW_EMISSION_MOST 12

/* Energy times wavelength of a photon, eV nm: h c / e with the exact SI constants of 2019. Tables of
 * 2003 and before used 1239.841857; wavelengths from them are 1.0e-7 shorter. */
#define LW_HC_EV_NM 1239.8419843320

typedef struct lw_emission {
    double wavelength_nm;
    double width_nm; /* Lorentzian FWHM in wavelength; 0 for an ideal line */
    double weight;   /* share of the integrated intensity; the shares sum to 1 */
} lw_emission;

typedef struct lw_radiation {
    char name[64];
    size_t n;                              /* components, 1 to LW_EMISSION_MOST */
    lw_emission component[LW_EMISSION_MOST]; /* the strongest first: positions refer to its wavelength */
    double k_beta_nm;                      /* wavelength of the K-beta line; 0 if not known */
    bool is_plain;                         /* a plain wavelength (monochromatic beam), no emission profile */
    char source[400];                      /* where the numbers are from */
} lw_radiation;

/* A monochromatic beam: one ideal line. wavelength_nm: 0.001 to 1 nm. */
lw_status lw_radiation_plain(double wavelength_nm, lw_radiation *radiation, lw_error *err);

/* Each appends one component; the radiation must have been zeroed before its first one, and be settled
 * after its last one.
 * From an energy: energy_ev and the Lorentzian FWHM width_ev as tables of emission profiles print them,
 * with EITHER the height of the component OR its share of the integrated intensity, the other 0. A
 * Lorentzian's area is (pi/2) height x FWHM, so a component given by its height must have a width, and all
 * components of one radiation must be given the same way.
 * From a wavelength: wavelength_nm, width_nm (0 = ideal line) and share. */
lw_status lw_radiation_add_energy(lw_radiation *radiation, double energy_ev, double width_ev, double height,
                                  double share, lw_error *err);
lw_status lw_radiation_add_wavelength(lw_radiation *radiation, double wavelength_nm, double width_nm,
                                      double share, lw_error *err);

/* Puts the strongest component first, scales the weights to sum 1, and refuses what can't be a spectrum. */
lw_status lw_radiation_settle(lw_radiation *radiation, lw_error *err);

/* The wavelength that positions refer to: the strongest component's, nm. */
double lw_radiation_wavelength(const lw_radiation *radiation);

/* Height of the summed profile at a wavelength, 1/nm, components of finite width only. */
double lw_radiation_height(const lw_radiation *radiation, double wavelength_nm);

/* Whether two radiations are the same for a calibration: every component within 1e-6 relative. */
bool lw_radiation_same(const lw_radiation *a, const lw_radiation *b);

#endif
