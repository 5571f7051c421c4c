-- SPDX-License-Identifier: GPL-3.0-or-later
-- Silicon, certified reference material SRM 640d.
return {
  name = "si-640d",
  title = "Si SRM 640d",
  aliases = { "SRM 640d", "640d" },
  formula = "Si",
  space_group = "Fd-3m",
  unit = "nm",
  cell = { a = 0.543123 }, -- certificate of 26 May 2010
  expanded_uncertainty = { a = 0.000008 }, -- the same source
  coverage_factor = 2, -- from memory
  temperature_c = 22.5,
  certificate = "Standard Reference Material 640d, National Institute of Standards and Technology, \z
    Gaithersburg (2010)",
  source = "Certificate of SRM 640d of 26 May 2010, quoted at second hand; it is later than, and differs \z
    from, Black et al. (2010) Powder Diffr. 25, 187: 0.543159(20) nm",
  stiffness_gpa = { c11 = 165.7, c12 = 63.9, c44 = 79.6 },
  stiffness_source = "Simmons & Wang (1971) Single Crystal Elastic Constants, from memory",
  hazard = "fine powder can form a combustible dust: follow the safety data sheet and local rules",
}
