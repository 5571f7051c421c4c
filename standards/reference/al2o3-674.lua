-- SPDX-License-Identifier: GPL-3.0-or-later
-- Alumina (corundum), certified reference material SRM 674.
return {
  name = "al2o3-674",
  title = "Al2O3 SRM 674",
  aliases = { "SRM 674 Al2O3" },
  formula = "Al2O3",
  space_group = "R-3c",
  unit = "nm",
  -- Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1
  cell = { a = 0.475893, c = 1.29917 },
  expanded_uncertainty = { a = 0.00003, c = 0.00021 }, -- the same source
  coverage_factor = 1, -- taken as a standard uncertainty
  temperature_c = 25, -- from memory
  certificate = "Standard Reference Material 674, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1; their printed \z
    uncertainties are taken three times, as the table advises; temperature from memory",
  stiffness_gpa = { c11 = 497.3, c12 = 162.8, c13 = 116.0, c14 = -21.9, c33 = 500.9, c44 = 146.8 },
  stiffness_source = "Goto, Anderson, Ohno & Yamamoto (1989) J. Geophys. Res. 94, 7588, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
