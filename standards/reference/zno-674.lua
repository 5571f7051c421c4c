-- SPDX-License-Identifier: GPL-3.0-or-later
-- Zinc oxide, certified reference material SRM 674.
return {
  name = "zno-674",
  title = "ZnO SRM 674",
  aliases = { "SRM 674 ZnO" },
  formula = "ZnO",
  space_group = "P63mc",
  unit = "nm",
  -- Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1
  cell = { a = 0.324981, c = 0.520653 },
  expanded_uncertainty = { a = 0.000036, c = 0.000039 }, -- the same source
  coverage_factor = 1, -- taken as a standard uncertainty
  temperature_c = 25, -- from memory
  certificate = "Standard Reference Material 674, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Parrish, Wilson & Langford, International Tables C (2006) Table 5.2.11.1; their printed \z
    uncertainties are taken three times, as the table advises; temperature from memory",
  stiffness_gpa = { c11 = 209.7, c12 = 121.1, c13 = 105.1, c33 = 210.9, c44 = 42.5 },
  stiffness_source = "Bateman (1962) J. Appl. Phys. 33, 3309, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
