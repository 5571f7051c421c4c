-- SPDX-License-Identifier: GPL-3.0-or-later
-- Ag Ka: the two lines of the doublet, without natural widths: none with a source was at hand. Widths of some
-- 9 eV are to be expected; they then appear in what is called the instrument.
return {
  name = "ag_ka",
  title = "Ag Ka",
  aliases = { "Ag", "Ag K-alpha", "silver K-alpha" },
  hc_ev_angstrom = 12398.419843320,
  components = { -- energies: Deslattes et al. (2003) Rev. Mod. Phys. 75, 35; shares 1 to 0.5 by rule
    { energy_ev = 22162.917, width_ev = 0, share = 1.0 },
    { energy_ev = 21990.30, width_ev = 0, share = 0.5 },
  },
  k_beta_energy_ev = 24942.42, -- the same source, KM3
  source = "Energies: Deslattes et al. (2003) Rev. Mod. Phys. 75, 35; intensities 1 to 0.5 by rule; \z
    widths are set to 0 for want of a source, so that the natural width counts as instrument; hc of 2019",
}
