-- SPDX-License-Identifier: GPL-3.0-or-later
-- Silicon, certified reference material SRM 640f.
return {
  name = "si-640f",
  title = "Si SRM 640f",
  aliases = { "SRM 640f", "640f" },
  formula = "Si",
  space_group = "Fd-3m",
  unit = "nm",
  cell = { a = 0.5431144 }, -- Black et al. (2020) Powder Diffr., doi 10.1017/S0885715620000366, abstract
  expanded_uncertainty = { a = 0.000008 }, -- the same source
  coverage_factor = 2,
  temperature_c = 22.5,
  certificate = "Standard Reference Material 640f, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Black et al. (2020) Powder Diffr., doi 10.1017/S0885715620000366, abstract",
  stiffness_gpa = { c11 = 165.7, c12 = 63.9, c44 = 79.6 },
  stiffness_source = "Simmons & Wang (1971) Single Crystal Elastic Constants, from memory",
  hazard = "fine powder can form a combustible dust: follow the safety data sheet and local rules",
}
