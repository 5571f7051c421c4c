-- SPDX-License-Identifier: GPL-3.0-or-later
-- Silicon.
return {
  name = "silicon",
  title = "Silicon",
  aliases = { "Si" },
  formula = "Si",
  space_group = "Fd-3m",
  unit = "nm",
  -- NIST constants: 0.543102088(16) nm for an ideal single crystal in vacuum at 22.5 degrees C
  cell = { a = 0.543102 },
  stiffness_gpa = { c11 = 165.7, c12 = 63.9, c44 = 79.6 },
  stiffness_source = "Simmons & Wang (1971) Single Crystal Elastic Constants, from memory",
  burgers_nm = 0.38403, -- a/sqrt(2), <110>/2
  density_kg_m3 = 2329, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder can form a combustible dust: follow the safety data sheet and local rules",
  source = "NIST constants: 0.543102088(16) nm for an ideal single crystal in vacuum at 22.5 degrees C; \z
    powders of the reference series are up to 0.00002 nm larger",
}
