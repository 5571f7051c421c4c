-- SPDX-License-Identifier: GPL-3.0-or-later
-- Rubidium niobium oxide fluoride, pyrochlore.
return {
  name = "rubidium_pyrochlore",
  title = "Rubidium niobium oxide fluoride, pyrochlore",
  aliases = { "RbNb2O5F" },
  formula = "RbNb2O5F",
  space_group = "Fd-3m",
  unit = "nm",
  -- Zakary, Body, Sarou-Kanian, Charpentier & Legein (2025) Inorg. Chem. 64, 5764, doi 10.1021/acs.inorgchem.5c00615
  cell = { a = 1.049561 },
  standard_uncertainty = { a = 0.000006 }, -- the same source
  hazard = "fluoride-bearing oxide powder: avoid dust, follow the safety data sheet and local rules",
  source = "Zakary, Body, Sarou-Kanian, Charpentier & Legein (2025) Inorg. Chem. 64, 5764, doi \z
    10.1021/acs.inorgchem.5c00615",
}
