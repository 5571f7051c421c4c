-- SPDX-License-Identifier: GPL-3.0-or-later
-- Zinc oxide.
return {
  name = "zinc_oxide",
  title = "Zinc oxide",
  aliases = { "ZnO", "zincite" },
  formula = "ZnO",
  space_group = "P63mc",
  unit = "nm",
  -- Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1
  cell = { a = 0.324981, c = 0.520653 },
  stiffness_gpa = { c11 = 209.7, c12 = 121.1, c13 = 105.1, c33 = 210.9, c44 = 42.5 },
  stiffness_source = "Bateman (1962) J. Appl. Phys. 33, 3309, from memory",
  burgers_nm = 0.32498, -- a, <11-20>/3
  density_kg_m3 = 5606, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1",
}
