-- SPDX-License-Identifier: GPL-3.0-or-later
-- Cerium dioxide.
return {
  name = "ceria",
  title = "Cerium dioxide",
  aliases = { "CeO2", "ceo2", "cerium_dioxide" },
  formula = "CeO2",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.54113 }, -- Powder data of the National Bureau of Standards (1983), from memory
  stiffness_gpa = { c11 = 403, c12 = 105, c44 = 60 },
  stiffness_source = "Nakajima, Yoshihara & Ishigame (1994) Phys. Rev. B 50, 13297, from memory",
  burgers_nm = 0.38264, -- a/sqrt(2), <110>/2
  density_kg_m3 = 7215, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Powder data of the National Bureau of Standards (1983), from memory",
}
