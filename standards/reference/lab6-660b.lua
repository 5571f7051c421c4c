-- SPDX-License-Identifier: GPL-3.0-or-later
-- Lanthanum hexaboride, certified reference material SRM 660b.
return {
  name = "lab6-660b",
  title = "LaB6 SRM 660b",
  aliases = { "SRM 660b", "660b" },
  formula = "LaB6",
  space_group = "Pm-3m",
  unit = "nm",
  cell = { a = 0.415691 }, -- Black et al. (2011) Powder Diffr. 26, abstract
  expanded_uncertainty = { a = 0.000008 }, -- the same source
  coverage_factor = 2,
  temperature_c = 22.5,
  certificate = "Standard Reference Material 660b, National Institute of Standards and Technology, \z
    Gaithersburg (2010)",
  source = "Black et al. (2011) Powder Diffr. 26, Certification of SRM 660B, abstract",
  stiffness_gpa = { c11 = 453.3, c12 = 18.2, c44 = 90.1 },
  stiffness_source = "Tanaka et al. (1977) Solid State Commun. 22, 203, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
