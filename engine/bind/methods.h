/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The methods of sample/ as functions of the module: one for each constant of the list, and separate. */
#ifndef LW_BIND_METHODS_H
#define LW_BIND_METHODS_H

#include "bind/bind.h"

/* Adds them to the module's table at an index. */
void lwb_add_methods(lua_State *L, int module);

#endif
