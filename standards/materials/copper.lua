-- SPDX-License-Identifier: GPL-3.0-or-later
-- Copper.
return {
  name = "copper",
  title = "Copper",
  aliases = { "Cu" },
  formula = "Cu",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.36150 }, -- Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory
  stiffness_gpa = { c11 = 168.4, c12 = 121.4, c44 = 75.4 },
  stiffness_source = "Simmons & Wang (1971); Every & McCurdy (1992) Landolt-Börnstein III/29a, from memory",
  burgers_nm = 0.25562, -- a/sqrt(2), <110>/2
  density_kg_m3 = 8960, -- handbook, from memory; agrees with cell and formula
  hazard = "fine metal powder is flammable and may ignite when freshly milled: follow the safety data \z
    sheet and local rules",
  source = "Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory",
}
