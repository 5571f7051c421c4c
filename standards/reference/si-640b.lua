-- SPDX-License-Identifier: GPL-3.0-or-later
-- Silicon, certified reference material SRM 640b.
return {
  name = "si-640b",
  title = "Si SRM 640b",
  aliases = { "SRM 640b", "640b" },
  formula = "Si",
  space_group = "Fd-3m",
  unit = "nm",
  cell = { a = 0.5430940 }, -- quoted by Chantler, Rae & Tran (2007) J. Appl. Cryst. 40
  expanded_uncertainty = { a = 0.0000011 }, -- the same source
  coverage_factor = 1, -- quoted as a standard uncertainty
  temperature_c = 25, -- from memory
  certificate = "Standard Reference Material 640b, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Quoted in Chantler, Rae & Tran (2007) J. Appl. Cryst. 40, abstract, with the standard \z
    uncertainty given there; temperature from memory",
  stiffness_gpa = { c11 = 165.7, c12 = 63.9, c44 = 79.6 },
  stiffness_source = "Simmons & Wang (1971) Single Crystal Elastic Constants, from memory",
  hazard = "fine powder can form a combustible dust: follow the safety data sheet and local rules",
}
