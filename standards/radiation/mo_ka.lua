-- SPDX-License-Identifier: GPL-3.0-or-later
-- Mo Ka: emission profile of the K-alpha doublet.
return {
  name = "mo_ka",
  title = "Mo Ka",
  aliases = { "Mo", "Mo K-alpha", "molybdenum K-alpha" },
  hc_ev_angstrom = 12398.419843320,
  components = { -- Mendenhall et al. (2019) J. Phys. B, doi 10.1088/1361-6455/ab45d6; the source gives shares
    { energy_ev = 17479.389, width_ev = 6.389, share = 0.6641 },
    { energy_ev = 17374.577, width_ev = 6.3876, share = 0.3359 },
  },
  -- International Tables C (2006) Table 4.2.2.4, from memory; Bearden (1967), 0.632288 A*, times 1.0000242 A/A* agrees
  k_beta_nm = 0.0632303,
  source = "Mendenhall et al. (2019) J. Phys. B, doi 10.1088/1361-6455/ab45d6, energies, widths and \z
    shares as carried in a line file of NIST; K-beta: International Tables C (2006) Table 4.2.2.4, from \z
    memory; hc of 2019",
}
