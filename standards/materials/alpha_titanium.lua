-- SPDX-License-Identifier: GPL-3.0-or-later
-- Titanium (alpha).
return {
  name = "alpha_titanium",
  title = "Titanium (alpha)",
  aliases = { "Ti", "titanium" },
  formula = "Ti",
  space_group = "P63/mmc",
  unit = "nm",
  -- Pearson (1967) Handbook of Lattice Spacings and Structures of Metals, from memory
  cell = { a = 0.29508, c = 0.46855 },
  stiffness_gpa = { c11 = 162.4, c12 = 92.0, c13 = 69.0, c33 = 180.7, c44 = 46.7 },
  stiffness_source = "Fisher & Renken (1964) Phys. Rev. 135, A482; CRC Handbook of Chemistry and Physics, \z
    98th ed.; c33 from memory",
  burgers_nm = 0.29508, -- a, <11-20>/3
  density_kg_m3 = 4506, -- handbook, from memory; agrees with cell and formula
  hazard = "fine metal powder is flammable and may ignite when freshly milled: follow the safety data \z
    sheet and local rules",
  source = "Pearson (1967) Handbook of Lattice Spacings and Structures of Metals, from memory",
}
