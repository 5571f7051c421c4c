-- SPDX-License-Identifier: GPL-3.0-or-later
-- Cu Ka: emission profile of the K-alpha doublet of a sealed tube.
-- Form of a radiation: a literal of constants, loaded in an empty environment.
--   name, title, aliases   how scripts and reports call it (case, blanks, "_" and "-" don't matter)
--   components             one Lorentzian a line: energy_ev, width_ev (FWHM) and its height; the share of the
--                          integrated intensity is height x width over the sum. Or energy_ev with share, for
--                          ideal lines of width 0; or wavelength_nm, width_nm, share.
--   k_beta_energy_ev       the K-beta line, for finding what a filter has left (or k_beta_nm)
--   hc_ev_angstrom         energy times wavelength, exact SI constants of 2019
--   source                 where the numbers are from
-- Heights and widths are used, never the integrated intensities printed beside them: for Fe and Co these
-- contradict the heights and widths of the same table.
return {
  name = "cu_ka",
  title = "Cu Ka",
  aliases = { "Cu", "Cu K-alpha", "copper K-alpha" },
  hc_ev_angstrom = 12398.419843320,
  components = { -- Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Table II
    { energy_ev = 8047.8372, width_ev = 2.285, height = 957 }, -- K-alpha1, main
    { energy_ev = 8045.3672, width_ev = 3.358, height = 90 }, -- K-alpha1, foot
    { energy_ev = 8027.9935, width_ev = 2.667, height = 334 }, -- K-alpha2, main
    { energy_ev = 8026.5041, width_ev = 3.571, height = 111 }, -- K-alpha2, foot
  },
  k_beta_energy_ev = 8905.413, -- Deslattes et al. (2003) Rev. Mod. Phys. 75, 35, unresolved KM2,3
  source = "Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Table II, heights \z
    and widths as carried in a line file of NIST; K-beta: Deslattes et al. (2003) Rev. Mod. Phys. 75, 35; \z
    hc of 2019",
}
