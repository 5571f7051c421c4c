/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where an axis has its ticks and what stands beside them. */
#ifndef LW_RECORD_TICKS_H
#define LW_RECORD_TICKS_H

#include <stdbool.h>

typedef struct lw_axis_scale {
    double low, high; /* range, in the axis' unit */
    double from;      /* no ticks below; the range may go lower to make room for marks */
    bool log;
    int power;        /* drawn numbers are value / 10^power; 0 on log axes */
} lw_axis_scale;

typedef struct lw_tick {
    double at;      /* in drawn numbers */
    char label[32]; /* UTF-8; "" = a small tick */
} lw_tick;

#define LW_TICKS_MOST 160

/* Fills tick[] for an axis on which at most `labels` labels find room. Returns how many there are. */
int lw_ticks_of(const lw_axis_scale *scale, double labels, lw_tick tick[LW_TICKS_MOST]);

#endif
