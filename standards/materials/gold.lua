-- SPDX-License-Identifier: GPL-3.0-or-later
-- Gold.
return {
  name = "gold",
  title = "Gold",
  aliases = { "Au" },
  formula = "Au",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.40786 }, -- Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory
  stiffness_gpa = { c11 = 192.9, c12 = 163.8, c44 = 41.5 },
  stiffness_source = "Simmons & Wang (1971); Every & McCurdy (1992) Landolt-Börnstein III/29a, from memory",
  burgers_nm = 0.2884, -- a/sqrt(2), <110>/2
  density_kg_m3 = 19300, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory",
}
