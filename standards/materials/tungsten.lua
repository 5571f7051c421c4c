-- SPDX-License-Identifier: GPL-3.0-or-later
-- Tungsten.
return {
  name = "tungsten",
  title = "Tungsten",
  aliases = { "W" },
  formula = "W",
  space_group = "Im-3m",
  unit = "nm",
  cell = { a = 0.31648 }, -- Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory
  stiffness_gpa = { c11 = 522.4, c12 = 204.4, c44 = 160.8 },
  stiffness_source = "Simmons & Wang (1971); Every & McCurdy (1992) Landolt-Börnstein III/29a, from memory",
  burgers_nm = 0.27408, -- a sqrt(3)/2, <111>/2
  density_kg_m3 = 19250, -- handbook, from memory; agrees with cell and formula
  hazard = "fine metal powder is flammable and may ignite when freshly milled: follow the safety data \z
    sheet and local rules",
  source = "Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory",
}
