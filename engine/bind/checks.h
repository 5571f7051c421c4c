/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Checks of an instrument besides its calibration, for the noun calibration. */
#ifndef LW_BIND_CHECKS_H
#define LW_BIND_CHECKS_H

#include "bind/bind.h"

int lwb_response(lua_State *L);  /* lw.response(lines, standard, { ... }) */
int lwb_dead_time(lua_State *L); /* lw.dead_time(stronger, weaker, { ... }) or lw.dead_time(scan, { dead_time = ... }) */

#endif
