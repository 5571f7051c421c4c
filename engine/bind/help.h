/* SPDX-License-Identifier: GPL-3.0-or-later */
#ifndef LW_BIND_HELP_H
#define LW_BIND_HELP_H

#include "base/options.h"

#include <stddef.h>

/* The option table of a function of the module; NULL if it has none. */
const lw_option *lwb_options_of(const char *function);

/* The bytes of engine/bind/api.lua, made into C at build time. */
extern const char lwb_api_source[];
extern const size_t lwb_api_size;

#endif
