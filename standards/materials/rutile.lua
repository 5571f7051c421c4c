-- SPDX-License-Identifier: GPL-3.0-or-later
-- Titanium dioxide, rutile.
return {
  name = "rutile",
  title = "Titanium dioxide, rutile",
  aliases = { "TiO2", "TiO2 rutile" },
  formula = "TiO2",
  space_group = "P42/mnm",
  unit = "nm",
  -- Powder data of the National Bureau of Standards (1969) Monograph 25, sec. 7, from memory
  cell = { a = 0.45933, c = 0.29592 },
  stiffness_gpa = { c11 = 268, c12 = 175, c13 = 147, c33 = 484.2, c44 = 123.8, c66 = 190.2 },
  stiffness_source = "Isaak et al. (1998) Phys. Chem. Miner. 26, 31, from memory",
  density_kg_m3 = 4250, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Powder data of the National Bureau of Standards (1969) Monograph 25, sec. 7, from memory",
}
