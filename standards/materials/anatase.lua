-- SPDX-License-Identifier: GPL-3.0-or-later
-- Titanium dioxide, anatase.
return {
  name = "anatase",
  title = "Titanium dioxide, anatase",
  aliases = { "TiO2 anatase" },
  formula = "TiO2",
  space_group = "I41/amd",
  unit = "nm",
  -- Powder data of the National Bureau of Standards (1969) Monograph 25, sec. 7, from memory
  cell = { a = 0.37852, c = 0.95139 },
  density_kg_m3 = 3890, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Powder data of the National Bureau of Standards (1969) Monograph 25, sec. 7, from memory; no \z
    measured elastic constants are known",
}
