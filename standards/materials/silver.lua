-- SPDX-License-Identifier: GPL-3.0-or-later
-- Silver.
return {
  name = "silver",
  title = "Silver",
  aliases = { "Ag" },
  formula = "Ag",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.40862 }, -- Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory
  stiffness_gpa = { c11 = 124.0, c12 = 93.7, c44 = 46.1 },
  stiffness_source = "Simmons & Wang (1971); Every & McCurdy (1992) Landolt-Börnstein III/29a, from memory",
  burgers_nm = 0.28894, -- a/sqrt(2), <110>/2
  density_kg_m3 = 10490, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Swanson & Tatge (1953) NBS Circular 539, vol. 1, from memory",
}
