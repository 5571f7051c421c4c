-- SPDX-License-Identifier: GPL-3.0-or-later
-- Zirconium dioxide, monoclinic.
return {
  name = "baddeleyite",
  title = "Zirconium dioxide, monoclinic",
  aliases = { "ZrO2 monoclinic", "monoclinic_zirconia" },
  formula = "ZrO2",
  space_group = "P21/c",
  unit = "nm",
  -- Howard, Hill & Reichert (1988) Acta Cryst. B44, 116, from memory
  cell = { a = 0.51505, b = 0.52116, c = 0.53173, beta = 99.230 },
  density_kg_m3 = 5820, -- handbook, from memory; agrees with cell and formula
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
  source = "Howard, Hill & Reichert (1988) Acta Cryst. B44, 116, from memory",
}
