-- SPDX-License-Identifier: GPL-3.0-or-later
-- Aluminium oxide, corundum.
return {
  name = "alumina",
  title = "Aluminium oxide, corundum",
  aliases = { "Al2O3", "corundum" },
  formula = "Al2O3",
  space_group = "R-3c",
  unit = "nm",
  -- Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1
  cell = { a = 0.475893, c = 1.29917 },
  stiffness_gpa = { c11 = 497.3, c12 = 162.8, c13 = 116.0, c14 = -21.9, c33 = 500.9, c44 = 146.8 },
  stiffness_source = "Goto, Anderson, Ohno & Yamamoto (1989) J. Geophys. Res. 94, 7588, from memory",
  burgers_nm = 0.47589, -- a, <11-20>/3, basal slip
  density_kg_m3 = 3987, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1",
}
