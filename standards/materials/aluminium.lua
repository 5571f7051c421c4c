-- SPDX-License-Identifier: GPL-3.0-or-later
-- Aluminium.
return {
  name = "aluminium",
  title = "Aluminium",
  aliases = { "Al", "aluminum" },
  formula = "Al",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.40494 }, -- Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory
  stiffness_gpa = { c11 = 107.3, c12 = 60.9, c44 = 28.3 },
  stiffness_source = "Simmons & Wang (1971); Every & McCurdy (1992) Landolt-Börnstein III/29a, from memory",
  burgers_nm = 0.28634, -- a/sqrt(2), <110>/2
  density_kg_m3 = 2700, -- handbook, from memory; agrees with cell and formula
  hazard = "fine metal powder is flammable and may ignite when freshly milled: follow the safety data \z
    sheet and local rules",
  source = "Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory",
}
