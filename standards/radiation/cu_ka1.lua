-- SPDX-License-Identifier: GPL-3.0-or-later
-- Cu Ka1 alone, as behind a crystal monochromator in the incident beam. A monochromator may also cut the
-- foot of the line; then measure with the wavelength only, or give your own file.
-- Heights and widths are used, never the integrated intensities printed beside them: for Fe and Co these
-- contradict the heights and widths of the same table.
return {
  name = "cu_ka1",
  title = "Cu Ka1",
  aliases = { "Cu K-alpha1", "copper K-alpha1" },
  hc_ev_angstrom = 12398.419843320,
  components = { -- Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Table II
    { energy_ev = 8047.8372, width_ev = 2.285, height = 957 },
    { energy_ev = 8045.3672, width_ev = 3.358, height = 90 },
  },
  source = "Hölzer, Fritsch, Deutsch, Härtwig & Förster (1997) Phys. Rev. A 56, 4554, Table II, the two \z
    lines of K-alpha1, heights and widths as carried in a line file of NIST; hc of 2019",
}
