-- SPDX-License-Identifier: GPL-3.0-or-later
-- Fe Ka: emission profile of the K-alpha doublet of a sealed tube.
-- Heights and widths are used, never the integrated intensities printed beside them: for Fe and Co these
-- contradict the heights and widths of the same table.
return {
  name = "fe_ka",
  title = "Fe Ka",
  aliases = { "Fe", "Fe K-alpha", "iron K-alpha" },
  hc_ev_angstrom = 12398.419843320,
  -- Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Tables II and III
  components = {
    { energy_ev = 6404.148, width_ev = 1.613, height = 697 },
    { energy_ev = 6403.295, width_ev = 1.965, height = 376 },
    { energy_ev = 6400.653, width_ev = 4.833, height = 88 },
    { energy_ev = 6402.077, width_ev = 2.803, height = 136 },
    { energy_ev = 6391.190, width_ev = 2.487, height = 339 },
    { energy_ev = 6389.106, width_ev = 4.339, height = 60 }, -- width: see source
    { energy_ev = 6390.275, width_ev = 2.570, height = 102 }, -- width: see source
  },
  k_beta_energy_ev = 7058.175, -- Deslattes et al. (2003) Rev. Mod. Phys. 75, 35, unresolved KM2,3
  source = "Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Tables II and III, \z
    heights and widths as carried in a line file of NIST; K-beta: Deslattes et al. (2003) Rev. Mod. Phys. \z
    75, 35; hc of 2019. The widths of the last two components are not the printed ones, which contradict \z
    the figure, but an estimate by the carrier of the file",
}
