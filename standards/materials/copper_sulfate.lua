-- SPDX-License-Identifier: GPL-3.0-or-later
-- Copper sulfate pentahydrate.
return {
  name = "copper_sulfate",
  title = "Copper sulfate pentahydrate",
  aliases = { "CuSO4.5H2O", "chalcanthite" },
  formula = "CuSO4.5H2O",
  space_group = "P-1",
  unit = "nm",
  -- Bacon & Curry (1962) Proc. R. Soc. A 266, 95, from memory
  cell = { a = 0.6141, b = 1.0736, c = 0.5986, alpha = 82.27, beta = 107.43, gamma = 102.67 },
  density_kg_m3 = 2286, -- handbook, from memory; agrees with cell and formula
  hazard = "harmful if swallowed, irritates the eyes, very toxic to water life: follow the safety data \z
    sheet and local rules",
  source = "Bacon & Curry (1962) Proc. R. Soc. A 266, 95, from memory",
}
