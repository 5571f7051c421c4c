-- SPDX-License-Identifier: GPL-3.0-or-later
-- Co Ka: emission profile of the K-alpha doublet of a sealed tube.
-- Heights and widths are used, never the integrated intensities printed beside them: for Fe and Co these
-- contradict the heights and widths of the same table.
return {
  name = "co_ka",
  title = "Co Ka",
  aliases = { "Co", "Co K-alpha", "cobalt K-alpha" },
  hc_ev_angstrom = 12398.419843320,
  -- Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Tables II and III
  components = {
    { energy_ev = 6930.425, width_ev = 1.795, height = 809 },
    { energy_ev = 6929.388, width_ev = 2.695, height = 205 },
    { energy_ev = 6927.676, width_ev = 4.555, height = 107 },
    { energy_ev = 6930.941, width_ev = 0.808, height = 41 },
    { energy_ev = 6915.713, width_ev = 2.406, height = 314 },
    { energy_ev = 6914.659, width_ev = 2.773, height = 131 },
    { energy_ev = 6913.078, width_ev = 4.463, height = 43 },
  },
  k_beta_energy_ev = 7649.445, -- Deslattes et al. (2003) Rev. Mod. Phys. 75, 35, unresolved KM2,3
  source = "Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Tables II and III, \z
    heights and widths as carried in a line file of NIST; K-beta: Deslattes et al. (2003) Rev. Mod. Phys. \z
    75, 35; hc of 2019",
}
