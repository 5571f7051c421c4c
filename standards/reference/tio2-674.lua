-- SPDX-License-Identifier: GPL-3.0-or-later
-- Titanium dioxide (rutile), certified reference material SRM 674.
return {
  name = "tio2-674",
  title = "TiO2 SRM 674",
  aliases = { "SRM 674 TiO2" },
  formula = "TiO2",
  space_group = "P42/mnm",
  unit = "nm",
  -- Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1
  cell = { a = 0.459365, c = 0.295874 },
  expanded_uncertainty = { a = 0.00003, c = 0.000024 }, -- the same source
  coverage_factor = 1, -- taken as a standard uncertainty
  temperature_c = 25, -- from memory
  certificate = "Standard Reference Material 674, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1; their printed \z
    uncertainties are taken three times, as the table advises; temperature from memory",
  stiffness_gpa = { c11 = 268, c12 = 175, c13 = 147, c33 = 484.2, c44 = 123.8, c66 = 190.2 },
  stiffness_source = "Isaak et al. (1998) Phys. Chem. Miner. 26, 31, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
