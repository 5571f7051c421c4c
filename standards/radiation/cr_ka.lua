-- SPDX-License-Identifier: GPL-3.0-or-later
-- Cr Ka: emission profile of the K-alpha doublet of a sealed tube.
-- Heights and widths are used, never the integrated intensities printed beside them: for Fe and Co these
-- contradict the heights and widths of the same table.
return {
  name = "cr_ka",
  title = "Cr Ka",
  aliases = { "Cr", "Cr K-alpha", "chromium K-alpha" },
  hc_ev_angstrom = 12398.419843320,
  -- Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Tables II and III
  components = {
    { energy_ev = 5414.874, width_ev = 1.457, height = 822 },
    { energy_ev = 5414.099, width_ev = 1.760, height = 237 },
    { energy_ev = 5412.745, width_ev = 3.138, height = 85 },
    { energy_ev = 5410.583, width_ev = 5.149, height = 45 },
    { energy_ev = 5418.304, width_ev = 1.988, height = 15 },
    { energy_ev = 5405.551, width_ev = 2.224, height = 386 },
    { energy_ev = 5403.986, width_ev = 4.740, height = 36 },
  },
  k_beta_energy_ev = 5946.823, -- Deslattes et al. (2003) Rev. Mod. Phys. 75, 35, unresolved KM2,3
  source = "Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Tables II and III, \z
    heights and widths as carried in a line file of NIST; K-beta: Deslattes et al. (2003) Rev. Mod. Phys. \z
    75, 35; hc of 2019",
}
