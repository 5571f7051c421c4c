-- SPDX-License-Identifier: GPL-3.0-or-later
-- Magnesium oxide.
return {
  name = "magnesia",
  title = "Magnesium oxide",
  aliases = { "MgO", "periclase" },
  formula = "MgO",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.42112 }, -- Powder data of the National Bureau of Standards, from memory
  stiffness_gpa = { c11 = 297.0, c12 = 95.2, c44 = 155.7 },
  stiffness_source = "Simmons & Wang (1971); Every & McCurdy (1992) Landolt-Börnstein III/29a, from memory",
  burgers_nm = 0.29778, -- a/sqrt(2), <110>/2
  density_kg_m3 = 3585, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Powder data of the National Bureau of Standards, from memory",
}
