-- SPDX-License-Identifier: GPL-3.0-or-later
-- Iron (alpha).
return {
  name = "iron",
  title = "Iron (alpha)",
  aliases = { "Fe", "alpha_iron", "ferrite" },
  formula = "Fe",
  space_group = "Im-3m",
  unit = "nm",
  cell = { a = 0.28664 }, -- Swanson et al. (1955) NBS Circular 539, vol. 4, from memory
  stiffness_gpa = { c11 = 231.4, c12 = 134.7, c44 = 116.4 },
  stiffness_source = "Simmons & Wang (1971); Every & McCurdy (1992) Landolt-Börnstein III/29a, from \z
    memory; other handbooks differ by up to 5 %",
  burgers_nm = 0.24824, -- a sqrt(3)/2, <111>/2
  density_kg_m3 = 7874, -- handbook, from memory; agrees with cell and formula
  hazard = "fine metal powder is flammable and may ignite when freshly milled: follow the safety data \z
    sheet and local rules",
  source = "Swanson et al. (1955) NBS Circular 539, vol. 4, from memory",
}
