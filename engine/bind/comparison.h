/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Comparison and history of calibrations, for the noun calibration. */
#ifndef LW_BIND_COMPARISON_H
#define LW_BIND_COMPARISON_H

#include "bind/bind.h"

int lwb_calibration_compare(lua_State *L); /* c:compare(previous, { tolerances =, effects = }) */
int lwb_calibration_curve(lua_State *L);     /* c:profile_curve(two_theta) */
int lwb_calibration_asymmetry(lua_State *L); /* c:asymmetry_at(angles) */
int lwb_calibration_for_specimen(lua_State *L); /* c:for_specimen { attenuation =, thickness = } */
int lwb_history(lua_State *L);             /* lw.history({ { calibration =, label =, after_service = }, ... }, { ... }) */

#endif
