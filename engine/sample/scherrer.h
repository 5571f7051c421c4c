/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One size a line. */
#ifndef LW_SAMPLE_SCHERRER_H
#define LW_SAMPLE_SCHERRER_H

#include "profile/profiles.h"

/* Size K/beta of one line from its integral breadth on the s axis, nm (beta_s = beta cos(theta)/lambda); a
 * lower limit where the breadth is not resolved. Source: Scherrer (1918) Nachr. Ges. Wiss. Goettingen 98;
 * Langford & Wilson (1978) J. Appl. Cryst. 11, 102. */
lw_quantity lw_scherrer_size(const lw_profile *profile, double K);

#endif
